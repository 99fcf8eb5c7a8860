"""The population of random problems (tests/population.py): ours alone, and beside Cantera's solvers.

The whole population goes through `gibbsmin.minimise`. Its first problems go through Cantera's solvers too,
one process for both, each call timed alone. Where an answer differs from ours, the extended-precision
reference (tests/reference.py) decides which is wrong; of the rest a sample goes to the reference as well.
"""

from __future__ import annotations

from collections import Counter
from typing import Any

import numpy as np

from tests import reference
from tests.benchmarks.cantera_worker import OURS, SOLVERS, Answer, IsolatedWorker
from tests.benchmarks.measuring import Cell, Measured, Table, spread
from tests.population import KINDS, Problem, problem, run_population

TITLE = "Population of random problems"
SEED = 2027
JUDGED, RIGHT = 1e-6, 1e-4  # mole fractions above the first have to be right to the second, relative
BALANCE = 1e-8  # largest error of an element's total, relative to all atoms
TRACE = 1e-200  # our mole fractions above this are compared with the reference
LEAST_TRACE, TRACE_RIGHT = 1e-15, 1e-2
"""Of right answers it is counted how many have a mole fraction above the first off by more than the second."""
EVERY = 50  # one problem in so many goes to the reference whether answers differ or not
WORDS = {
    "right": "right",
    "no answer": "raised or not solved",
    "not finite": "not finite",
    "wrong": "silently wrong",
    "balance": "element balance broken",
    "crash": "process crashed",
    "hang": "no return in a minute",
    "not judged": "not judged",
}
"""What becomes of an answer; the last one where the reference could not prove its own."""


def measure(quick: bool, compared: int | None = None) -> Measured:
    """`compared` problems go through Cantera's solvers as well."""
    count, some = (60, 20) if quick else (100_000, 20_000)
    compared = some if compared is None else compared
    return {
        "population": population(count),
        "comparison": comparison(compared, most_species=60 if quick else 300),
    }


def population(count: int) -> dict[str, Any]:
    report = run_population(count, SEED)
    report["failures"] = report["failures"][:20]
    return report


def comparison(count: int, most_species: int) -> dict[str, Any]:
    """Fates and times of the first `count` problems; keys are the solvers', OURS among them."""
    fates: dict[str, Counter[str]] = {name: Counter() for name in (OURS, *SOLVERS)}
    by_kind = {name: {kind: [0, 0] for kind in KINDS} for name in fates}
    seconds: dict[str, list[float]] = {name: [] for name in fates}
    traces_off = dict.fromkeys(fates, 0)
    notable: dict[str, list[tuple[int, str]]] = {name: [] for name in fates}
    not_posed, references, worst_trace = 0, 0, 0.0
    with IsolatedWorker() as worker:
        for index in range(count):
            case = problem(SEED, index, most_species=most_species)
            answers = worker.solve(SEED, index, most_species)
            if not any(name in answers for name in SOLVERS):
                not_posed += 1
                continue
            truth = _Truth(case)
            for name, answer in answers.items():
                fate = _fate(case, answer, answers[OURS], truth)
                fates[name][fate] += 1
                by_kind[name][case.kind][0] += 1
                by_kind[name][case.kind][1] += fate not in ("right", "not judged")
                seconds[name].append(answer.seconds)
                traces_off[name] += fate == "right" and _trace_off(answer, answers[OURS])
                if fate not in ("right", "no answer") and len(notable[name]) < 50:
                    notable[name].append((index, fate))
            ours = answers[OURS].log_mole_fractions
            if ours is not None and (truth.asked or index % EVERY == 0) and truth.log_x is not None:
                references += 1
                counted = truth.log_x > np.log(TRACE)
                off = np.abs(ours[counted] - truth.log_x[counted])
                worst_trace = max(worst_trace, float(off.max(initial=0.0)))
    return {
        "problems": count,
        "seed": SEED,
        "most species": most_species,
        "not posed": not_posed,
        "fates": {name: dict(fate) for name, fate in fates.items()},
        "by kind": by_kind,
        "seconds": {name: spread(spent) for name, spent in seconds.items()},
        "traces off": traces_off,
        "notable": notable,
        "references": references,
        "worst trace": worst_trace,
    }


class _Truth:
    """The reference's answer to a problem, worked out when it is first asked for."""

    def __init__(self, case: Problem) -> None:
        self._case = case
        self.asked = False
        self._log_x: Any = None

    @property
    def log_x(self) -> np.ndarray | None:
        """ln mole fractions (S,), None where the reference cannot prove its answer."""
        if not self.asked:
            self.asked = True
            case = self._case
            try:
                solved = reference.solve(case.formula_matrix, case.element_amounts.tolist(), case.potentials)
                self._log_x = solved.log_mole_fractions
            except (reference.UnprovedError, reference.InfeasibleError):  # the second by rounding
                self._log_x = None
        found: np.ndarray | None = self._log_x
        return found


def _fate(case: Problem, answer: Answer, ours: Answer, truth: _Truth) -> str:
    if answer.failure:
        return answer.failure
    assert answer.log_mole_fractions is not None
    x = np.exp(answer.log_mole_fractions)
    if not np.isfinite(x).all():
        return "not finite"
    if _imbalance(case, x) > BALANCE:
        return "balance"
    if (
        answer is not ours
        and ours.log_mole_fractions is not None
        and _agree(x, np.exp(ours.log_mole_fractions))
    ):
        # if ours is wrong as well, then the sample that goes to the reference anyway says so
        return "right"
    if answer is ours and case.index % EVERY and not truth.asked:
        return "right"
    if truth.log_x is None:
        return "not judged"
    return "right" if _agree(x, np.exp(truth.log_x)) else "wrong"


def _agree(x: np.ndarray, y: np.ndarray) -> bool:
    larger = np.maximum(x, y)
    return bool((np.abs(x - y)[larger > JUDGED] <= RIGHT * larger[larger > JUDGED]).all())


def _trace_off(answer: Answer, ours: Answer) -> bool:
    """Whether a mole fraction above LEAST_TRACE differs from ours, which the reference confirms in a sample."""
    if answer.log_mole_fractions is None or ours.log_mole_fractions is None:
        return False
    counted = np.maximum(answer.log_mole_fractions, ours.log_mole_fractions) > np.log(LEAST_TRACE)
    with np.errstate(invalid="ignore"):
        off = np.abs(answer.log_mole_fractions[counted] - ours.log_mole_fractions[counted])
    return bool((off > TRACE_RIGHT).any())


def _imbalance(case: Problem, x: np.ndarray) -> float:
    """Largest error of an element's total, relative to all atoms, when these are scaled to those fed."""
    atoms = [row for row, name in enumerate(case.elements) if name not in ("charge", "all atoms")]
    A, b = case.formula_matrix[atoms], case.element_amounts[atoms]
    found = A @ x
    if found.sum() == 0.0:
        return float("inf")
    return float(np.abs(found / found.sum() - b / b.sum()).max())


def tables(measured: Measured) -> list[Table]:
    report, beside = measured["population"], measured["comparison"]
    solved = report["by_status"].get("SOLVED", 0)
    whole = Table(
        f"{TITLE}: all {report['count']:,} through `gibbsmin.minimise`, one call each",
        ["", "problems", "failures", "ms a problem"],
        [
            [kind, int(count), int(failed), spent / count * 1e3 if count else None]
            for kind, (count, failed, spent) in report["by_kind"].items()
        ],
        f"{solved:,} solved, {report['exceptions']} exceptions, {report['not_finite']} not finite; "
        f"{report['failure_count']} failures in all, the limits on gap and balance included. Largest "
        f"gap {report['worst_gap']:.1e} of the atoms fed, largest balance residual "
        f"{report['worst_residual']:.1e}, most iterations {report['most_iterations']:g}, longest call "
        f"{report['slowest'] * 1e3:.0f} ms.",
    )
    names = list(beside["fates"])
    kept = [fate for fate in WORDS if fate == "right" or any(beside["fates"][n].get(fate) for n in names)]
    rows: list[list[Any]] = []
    for name in names:
        fate, spent = beside["fates"][name], beside["seconds"][name]
        total = sum(fate.values())
        bad = total - fate.get("right", 0) - fate.get("not judged", 0)
        times = (spent[key] * 1e3 for key in ("median", "mean", "99 %", "longest"))
        rows.append(
            [
                name,
                *(fate.get(each, 0) for each in kept),
                100.0 * bad / max(total, 1),
                beside["traces off"][name],
                *times,
            ]
        )
    posed = beside["problems"] - beside["not posed"]
    table = Table(
        f"The first {beside['problems']:,} of them beside Cantera's solvers",
        [
            "",
            *(WORDS[each] for each in kept),
            "bad, %",
            "right but for traces",
            "ms, median",
            "mean",
            "99 %",
            "longest",
        ],
        rows,
        f"{posed:,} could be posed to Cantera. Right but for traces: a mole fraction above {LEAST_TRACE:g} off by "
        f"more than {TRACE_RIGHT:g}, relative to ours. Wrong: a mole fraction above {JUDGED:g} off by more than "
        f"{RIGHT:g}, relative; balance broken: the total of an "
        f"element off by more than {BALANCE:g} of all atoms. Where an "
        f"answer differs from ours the extended-precision reference decided, and it was asked for "
        f"one in {EVERY} of the others: {beside['references']:,} in all, from which our mole fractions above "
        f"{TRACE:g} differ by at most {beside['worst trace']:.1e}, relative.",
    )
    kinds = Table(
        "Bad answers by kind of feed [%]",
        ["", "problems", *names],
        [_kind_row(kind, [beside["by kind"][name][kind] for name in names]) for kind in KINDS],
    )
    return [whole, table, kinds]


def _kind_row(kind: str, counts: list[list[int]]) -> list[Cell]:
    """counts: problems and bad answers of each contender."""
    return [kind, counts[0][0], *(100.0 * bad / total if total else None for total, bad in counts)]
