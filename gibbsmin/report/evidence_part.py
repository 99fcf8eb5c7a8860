"""How it was computed and how far the numbers can be trusted."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from gibbsmin.comparison import THRESHOLD
from gibbsmin.figures.labels import number
from gibbsmin.minimiser.posing import BALANCE_TOLERANCE, GAP_TOLERANCE
from gibbsmin.report.histogram import decade_histogram
from gibbsmin.report.markup import Markup, bullets, joined, pretty_name, table, tag
from gibbsmin.report.quantities import gap_per_mol
from gibbsmin.report.quantity_text import place

if TYPE_CHECKING:
    from gibbsmin.comparison import CheckedPoint
    from gibbsmin.outcome import Outcome

_MOST_LISTED = 12  # points in a list of the page; the files hold all

REFERENCES = (
    "W. B. White, S. M. Johnson and G. B. Dantzig, Chemical equilibrium in complex mixtures, J. Chem. Phys. 28 "
    "(1958) 751: equilibrium as the minimum of the Gibbs energy.",
    "W. R. Smith and R. W. Missen, Chemical Reaction Equilibrium Analysis, Wiley (1982): balances in component "
    "species, Newton iteration in logarithmic amounts, sensitivities.",
    "G. B. Dantzig, A. Orden and P. Wolfe, Pacific J. Math. 5 (1955) 183: the lexicographic rule of the linear "
    "programs.",
    "T. Sun and Q. Tran-Dinh, Math. Program. 178 (2019) 145: the bound behind the guarded Newton step.",
    "S. Boyd and L. Vandenberghe, Convex Optimization, Cambridge (2004), chapter 5: weak duality, the ground of "
    "the certificate.",
    "B. J. McBride, M. J. Zehe and S. Gordon, NASA Glenn Coefficients for Calculating Thermodynamic Properties of "
    "Individual Species, NASA/TP-2002-211556 (2002).",
)


def method_part(outcome: Outcome) -> list[Markup | None]:
    library = outcome.crosscheck.library
    check = (
        f" A part of the points is solved again by {library}, with the same species data, so that only the solving "
        f"is compared; a mole fraction above {number(THRESHOLD)} must agree to "
        f"{number(outcome.crosscheck.tolerance)} relative."
        if library
        else ""
    )
    text = (
        "At each point the Gibbs energy of the mixture is minimised over all listed species at the given "
        "temperature, pressure and amounts of the elements, so that no reactions need be chosen [1]. "
        "A hierarchy of linear programs [3] gives the start; a Newton iteration on the potentials of component "
        "species [2], with a step bound under which the convex dual cannot rise [4], gives the "
        "composition. The dual problem then bounds the smallest possible Gibbs energy from below [5], and the "
        "distance between the energy reached and that bound, the gap, is kept with the results: a point counts as "
        f"solved only if the gap is at most {number(GAP_TOLERANCE)} of the sum of the element amounts (in units of "
        f"RT) and no element balance is off by more than {number(BALANCE_TOLERANCE)} relative. Standard potentials "
        "are those of the species data [6], relative to the elements in their reference states at 298.15 K and "
        "1 bar. Gases are ideal."
    )
    return [
        tag("p", text, check),
        tag("h3", "References"),
        tag("ol", [tag("li", reference) for reference in REFERENCES], class_="references"),
    ]


def evidence_part(outcome: Outcome) -> list[Markup | None]:
    dataset = outcome.dataset
    gap = gap_per_mol(dataset).values.ravel()
    balance = dataset["balance_residual"].values.ravel()
    pictures = [
        decade_histogram(gap, "Optimality gap: bound on (G − Gmin)/RT per mol"),
        decade_histogram(balance, "Largest relative error of an element balance", BALANCE_TOLERANCE),
    ]
    return [
        tag("div", pictures, class_="side-by-side"),
        tag("h3", "Points not solved"),
        _unsolved(outcome),
        tag("h3", "Data outside their range"),
        _extrapolated(outcome),
        tag("h3", "Cross-check"),
        *_crosscheck(outcome),
    ]


def _unsolved(outcome: Outcome) -> Markup:
    from gibbsmin.minimiser import Status

    status = outcome.dataset["status"].values
    if outcome.all_solved:
        return tag("p", f"None: all {outcome.points:,} points are solved and proved.")
    codes, counts = np.unique(status[status != 0], return_counts=True)
    reasons = [
        f"{count:,} points: {Status(int(code)).explanation}; {Status(int(code)).remedy}."
        for code, count in zip(codes, counts, strict=True)
    ]
    where = np.argwhere(status != 0)
    listed = [place([int(i) for i in index], outcome.scenario) for index in where[:_MOST_LISTED]]
    more = (
        f" and {len(where) - _MOST_LISTED:,} more; see status in results.nc"
        if len(where) > _MOST_LISTED
        else ""
    )
    return joined((bullets(reasons), tag("p", "At: ", _separated(listed), more, ".")))


def _separated(pieces: Sequence[Markup]) -> Markup:
    return joined([("; " if position else None, piece) for position, piece in enumerate(pieces)])


def _extrapolated(outcome: Outcome) -> Markup:
    dataset = outcome.dataset
    if "extrapolated" not in dataset:
        return tag("p", "Nowhere: the data of every species cover all temperatures of the grid.")
    flags = dataset["extrapolated"].transpose("temperature", "species").values != 0
    names = [str(name) for name in dataset["species"].values[flags.any(axis=0)]]
    if not names:
        return tag("p", "Nowhere: extrapolation was allowed but not needed.")
    at = np.asarray(dataset["temperature"].values)[flags.any(axis=1)]
    return tag(
        "p",
        f"The data of {len(names)} species were extrapolated, at {len(at)} temperatures between {at.min():g} and "
        f"{at.max():g} K: {', '.join(map(pretty_name, names))}. Read what depends on them with care.",
    )


def _crosscheck(outcome: Outcome) -> list[Markup | None]:
    check = outcome.crosscheck
    if check.extent == "none" or not check.points:
        return [tag("p", "No point was cross-checked" + (", as asked." if check.extent == "none" else "."))]
    counts = table(
        f"Points solved again by {check.library}",
        ["outcome", "points"],
        [
            ["confirmed", f"{check.confirmed:,}"],
            ["differ", f"{check.differing:,}"],
            ["no independent answer", f"{check.unanswered:,}"],
            ["checked in all", f"{len(check.points):,}"],
        ],
        class_="narrow",
    )
    worst = check.worst
    told = None
    if worst is not None:
        told = tag(
            "p",
            f"Largest relative difference: {number(worst.relative, 2)} in the mole fraction of "
            f"{pretty_name(worst.species) if worst.species else 'a species'} at ",
            place(worst.index, outcome.scenario),
            f"; accepted are {number(check.tolerance)}. The standard potentials on both sides differ by at most "
            f"{number(check.data_difference, 2)} RT.",
        )
    odd = [*check.having("differs"), *check.having("no independent answer")]
    ranked = sorted(check.having("confirmed"), key=lambda point: -point.relative)
    rows = [_point_row(point, outcome) for point in [*odd, *ranked]]
    headings = [
        "point",
        "outcome",
        "largest relative difference",
        "species",
        "solver",
        "gap per mol",
        "remark",
    ]
    listing = table(
        "Checked points: those that differ first, then by their difference",
        headings,
        rows,
        words=(1, 3, 4, 6),
        class_="long",
    )
    every = tag("details", tag("summary", f"All {len(rows)} checked points"), listing)
    listed = bullets(_odd(point, outcome) for point in odd[:_MOST_LISTED]) if odd else None
    return [counts, told, listed, every]


def _odd(point: CheckedPoint, outcome: Outcome) -> Markup:
    verdict = {
        "ours": "the residuals support the answer of this report",
        "theirs": "the residuals support the other answer",
        "undecided": "the residuals do not decide",
        "": "",
    }[point.verdict]
    words = "; ".join(filter(None, (point.status, verdict, point.reason)))
    return joined((place(point.index, outcome.scenario), f": {words}"))


def _point_row(point: CheckedPoint, outcome: Outcome) -> list[object]:
    known = np.isfinite(point.relative)
    return [
        place(point.index, outcome.scenario) or "the point",
        point.status,
        number(point.relative, 2) if known else "–",
        pretty_name(point.species),
        point.solver,
        number(point.gap, 2) if np.isfinite(point.gap) else "–",
        point.reason,
    ]
