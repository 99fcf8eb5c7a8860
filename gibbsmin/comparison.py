"""One point, two answers: how far apart they are, and which one its own evidence supports.

Judged by the conditions of equilibrium alone, so that neither program is its own referee: does an answer
conserve the elements, do the potentials of its major species agree about those of all others, and which has
the lower Gibbs energy.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gibbsmin.cantera_gas import CanteraGas, NoAnswerError
from gibbsmin.compared_points import ComparedPoints
from gibbsmin.constants import STANDARD_PRESSURE
from gibbsmin.outcome.response import abundant_components, in_components

if TYPE_CHECKING:
    from gibbsmin.species import ThermoTable

FloatArray = NDArray[np.float64]
CheckStatus = Literal["confirmed", "differs", "no independent answer"]
Verdict = Literal["", "ours", "theirs", "undecided"]

THRESHOLD = 1e-6  # mole fraction; below it Cantera's stopping rule does not settle a species
LEAST_TEMPERATURE_WITH_IONS = 2000.0  # K; below it Cantera's electron fractions were found wrong by decades
SAME_ENERGY = 1e-4  # relative; what errors of the balances that still pass as small can do to a Gibbs energy
SAME_DATA = 1e-10  # largest accepted difference of the standard potentials, in units of RT and relative


@dataclass(frozen=True)
class CheckedPoint:
    """One point as both programs see it.

    Attributes:
        index: position along each dimension of the data set.
        place: coordinate name -> value there (SI units).
        status: whether the two agree.
        relative, absolute: largest differences of a mole fraction over the species that exceed `THRESHOLD` in
            either answer [1]; NaN without an independent answer.
        species: the species of the largest relative difference.
        solver: which of Cantera's solvers gave the answer.
        residual, other_residual: how far each answer is from its own optimality conditions and element
            balances [1], ours and Cantera's; see `stationarity`.
        gap: our certificate, the bound on (G - Gmin)/RT per mol of gas [1].
        verdict: where they differ, which answer its residuals support.
        reason: why there is no answer, or what the verdict rests on.
    """

    index: tuple[int, ...]
    place: tuple[tuple[str, float], ...]
    status: CheckStatus
    relative: float = float("nan")
    absolute: float = float("nan")
    species: str = ""
    solver: str = ""
    residual: float = float("nan")
    other_residual: float = float("nan")
    gap: float = float("nan")
    verdict: Verdict = ""
    reason: str = ""


def stationarity(
    formula_matrix: FloatArray, potentials: FloatArray, fraction: FloatArray, threshold: float = THRESHOLD
) -> float:
    """How far a composition is from chemical equilibrium, judged by itself alone [1].

    The potentials of its most abundant independent species fix those of all others: each should have the mole
    fraction x*_j = exp(sum_i C_ij mu_i - c_j). Returned is the largest |x_j - x*_j| / max(x_j, x*_j) over
    species of which either exceeds `threshold`; so a species that is absent but ought to be there counts.
    Blind to species that those present cannot make up: with so few of them, energies must be compared
    besides.

    Args:
        formula_matrix: (E, S). potentials: c_j = mu_j0/RT + ln(p/p0), (S,). fraction: (S,).
    """
    components = abundant_components(formula_matrix, fraction)
    C = in_components(formula_matrix, components)
    reachable = np.abs(formula_matrix[:, components] @ C - formula_matrix).max(axis=0) < 1e-9
    with np.errstate(over="ignore", invalid="ignore"):
        due = np.exp((potentials[components] + np.log(fraction[components])) @ C - potentials)
        larger = np.maximum(fraction, due)
        difference = np.where(np.isinf(due), 1.0, np.abs(fraction - due) / np.where(larger > 0, larger, 1.0))
    counted = reachable & (larger > threshold)
    return float(difference[counted].max(initial=0.0))


def imbalance(
    formula_matrix: FloatArray, fed: FloatArray, fraction: FloatArray, threshold: float = THRESHOLD
) -> float:
    """How badly a composition keeps the balances of what was fed [1].

    An error of 1e-10 in an element total looks small and yet moves a species of 1e-6 by 1e-4, where that
    species is the small difference of large totals (oxygen at exact stoichiometry). So beside the elements
    the balances of components
    count: each total is written in the most abundant independent species, and the error taken relative to
    that row. Rows smaller than `threshold` do not count.

    Args:
        formula_matrix: (E, S). fed: atoms fed in any unit, (E,). fraction: (S,).
    """
    fed = fed * (_atoms_counted(formula_matrix, fed, fraction) / np.abs(fed).sum())
    components = abundant_components(formula_matrix, fraction)
    rows = abundant_components(formula_matrix[:, components].T, np.ones(len(formula_matrix)))
    square = formula_matrix[np.ix_(rows, components)]
    C = in_components(formula_matrix, components)
    worst = 0.0
    for matrix, total in ((formula_matrix, fed), (C, np.linalg.solve(square, fed[rows]))):
        size = np.abs(matrix) @ fraction
        counted = np.maximum(size, np.abs(total)) > threshold
        error = np.abs(matrix @ fraction - total)[counted] / np.maximum(size, np.abs(total))[counted]
        worst = max(worst, float(error.max(initial=0.0)))
    return worst


def _atoms_counted(formula_matrix: FloatArray, fed: FloatArray, fraction: FloatArray) -> float:
    """Moles of atoms of the elements fed, per mol of gas; charge, of which nothing is fed, stays out."""
    return float((np.abs(formula_matrix) @ fraction)[fed != 0].sum())


def _differences(ours: FloatArray, other: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Absolute and relative differences of the species that exceed THRESHOLD in either answer, else zero; (S,) each."""
    counted = np.maximum(ours, other) > THRESHOLD
    absolute = np.where(counted, np.abs(ours - other), 0.0)
    return absolute, absolute / np.maximum(np.maximum(ours, other), THRESHOLD)


class Comparison:
    """Both answers to the points of one data set."""

    def __init__(
        self, dataset: xr.Dataset, table: ThermoTable, dims: tuple[str, ...], tolerance: float
    ) -> None:
        self._table = table
        self._A = np.asarray(table.formula_matrix, dtype=np.float64)
        self._names = [each.name for each in table.species]
        self._points = ComparedPoints(dataset, dims)
        self._tolerance = tolerance
        self._fraction = dataset["mole_fraction"].values
        self._gap = dataset["gap"].values / dataset["gas_amount"].values
        self._ions = any(each.charge for each in table.species)
        self._starts: dict[tuple[int, ...], FloatArray] = {}
        self.data_difference = 0.0
        self._failure = ""
        self._gas: CanteraGas | None = None
        self.library = CanteraGas.library()
        try:
            self._gas = CanteraGas(table, self._points.temperatures)
        except NoAnswerError as error:
            self._failure = str(error)

    def at(self, index: tuple[int, ...]) -> CheckedPoint:
        T, p = self._points.conditions(index)
        place = self._points.place(index)
        try:
            other, solver, standard = self._other_answer(index)
        except NoAnswerError as error:
            return CheckedPoint(index, place, "no independent answer", reason=str(error))
        ours = self._fraction[index]
        absolute, relative = _differences(ours, other)
        worst = int(relative.argmax())
        potentials = standard + np.log(p / STANDARD_PRESSURE)
        residual = self._residual(index, potentials, ours)
        other_residual = self._residual(index, potentials, other)
        differs = not relative[worst] <= self._tolerance
        verdict, reason = (
            self._judge(index, T, p, potentials, ours, other, residual, other_residual)
            if differs
            else ("", "")
        )
        return CheckedPoint(
            index,
            place,
            "differs" if differs else "confirmed",
            float(relative[worst]),
            float(absolute.max()),
            self._names[worst],
            solver,
            residual,
            other_residual,
            float(self._gap[index]),
            verdict,
            reason,
        )

    def agreement(self, index: tuple[int, ...]) -> tuple[CheckStatus, float]:
        """Status and largest relative difference of a point, without the evidence for either answer."""
        try:
            other, _, _ = self._other_answer(index)
        except NoAnswerError:
            return "no independent answer", float("nan")
        _, relative = _differences(self._fraction[index], other)
        worst = float(relative.max())
        return ("confirmed" if worst <= self._tolerance else "differs"), worst

    def _other_answer(self, index: tuple[int, ...]) -> tuple[FloatArray, str, FloatArray]:
        """Cantera's mole fractions (S,), the solver that found them, and our standard potentials (S,).

        Raises NoAnswerError.
        """
        T, p = self._points.conditions(index)
        if self._gas is None:
            raise NoAnswerError(self._failure)
        if self._ions and T < LEAST_TEMPERATURE_WITH_IONS:
            raise NoAnswerError(
                f"skipped: with ions below {LEAST_TEMPERATURE_WITH_IONS:g} K Cantera's solver is not reliable"
            )
        standard = self._table.gibbs_RT(np.array([T]))[0]
        # The polynomials give g/RT itself, so the gas constants of the two programs play no part.
        theirs = self._gas.standard_gibbs_RT(T)
        data = float((np.abs(theirs - standard) / np.maximum(1.0, np.abs(standard))).max())
        self.data_difference = max(self.data_difference, data)
        if not data <= SAME_DATA:
            raise NoAnswerError(f"its standard potentials differ from ours by {data:.1e} RT")
        other, solver = self._gas.equilibrate(T, p, self._start(index), "auto")
        return other, solver, standard

    def _judge(
        self,
        index: tuple[int, ...],
        T: float,
        p: float,
        potentials: FloatArray,
        ours: FloatArray,
        other: FloatArray,
        residual: float,
        other_residual: float,
    ) -> tuple[Verdict, str]:
        """Which answer to believe where they differ."""
        found = (
            f"residuals: ours {residual:.1e}, Cantera's {other_residual:.1e}; our gap {self._gap[index]:.1e}"
        )
        third = self._third_opinion(index, T, p, ours, other)
        if residual <= self._tolerance < other_residual:
            return "ours", f"{found}; ours meets the equilibrium conditions, Cantera's does not{third}"
        if other_residual <= self._tolerance < residual:
            return "theirs", f"{found}; Cantera's meets the equilibrium conditions, ours does not{third}"
        energy, other_energy = (self._energy(index, potentials, answer) for answer in (ours, other))
        found += f"; G/RT per mol of atoms: ours less Cantera's {energy - other_energy:.1e}"
        # Both conserve the elements and are stationary by their own species: the lower energy is right.
        if max(residual, other_residual) <= self._tolerance and not math.isclose(
            energy, other_energy, rel_tol=SAME_ENERGY, abs_tol=SAME_ENERGY
        ):
            return ("ours" if energy < other_energy else "theirs"), f"{found}{third}"
        return "undecided", f"{found}{third}"

    def _third_opinion(
        self, index: tuple[int, ...], T: float, p: float, ours: FloatArray, other: FloatArray
    ) -> str:
        assert self._gas is not None
        try:
            third, _ = self._gas.equilibrate(T, p, self._start(index), "vcs")
        except NoAnswerError:
            return "; Cantera's solver vcs has no answer"
        for name, answer in (("ours", ours), ("that answer", other)):
            larger = np.maximum(third, answer)
            counted = larger > THRESHOLD
            if (np.abs(third - answer)[counted] <= self._tolerance * larger[counted]).all():
                return f"; Cantera's solver vcs agrees with {name}"
        return "; Cantera's solver vcs agrees with neither"

    def _residual(self, index: tuple[int, ...], potentials: FloatArray, fraction: FloatArray) -> float:
        """Stationarity and balance of one answer; the larger counts."""
        fed = self._fed_atoms(index)
        return max(stationarity(self._A, potentials, fraction), imbalance(self._A, fed, fraction))

    def _energy(self, index: tuple[int, ...], potentials: FloatArray, fraction: FloatArray) -> float:
        """G/RT per mol of atoms fed, which compares answers of different gas amounts."""
        present = fraction > 0
        energy = fraction[present] @ (potentials[present] + np.log(fraction[present]))
        return float(energy / _atoms_counted(self._A, self._fed_atoms(index), fraction))

    def _fed_atoms(self, index: tuple[int, ...]) -> FloatArray:
        atoms: FloatArray = self._points.feed(index) @ self._points.feed_atoms
        return atoms

    def _start(self, index: tuple[int, ...]) -> FloatArray:
        """A composition with the feed's element totals, made of the listed gases: the feed itself if it can
        be.

        Never our own answer: then Cantera would only have to agree.
        """
        key = self._points.feed_index(index)
        if key not in self._starts:
            self._starts[key] = self._new_start(self._points.feed(index))
        return self._starts[key]

    def _new_start(self, feed: FloatArray) -> FloatArray:
        if all(
            name in self._names
            for name, amount in zip(self._points.feed_names, feed, strict=True)
            if amount > 0
        ):
            start = np.zeros(len(self._names))
            for name, amount in zip(self._points.feed_names, feed, strict=True):
                if amount > 0:
                    start[self._names.index(name)] += amount
            return np.asarray(start / start.sum())
        from scipy.optimize import nnls

        atoms = feed @ self._points.feed_atoms
        start, rest = nnls(self._A, atoms / np.abs(atoms).sum())
        if rest > 1e-12:
            raise NoAnswerError("the listed gases cannot make up the feed's element totals to start from")
        return np.asarray(start / start.sum())
