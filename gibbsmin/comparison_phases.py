"""One point with condensed phases, two answers; as `comparison.py`, which knows gases alone.

Cantera's answer to a problem of several phases counts only if it meets the conditions of equilibrium itself, absent
phases included: it is known to return carbon-free gas with oxygen beside carbon monoxide as converged. An answer that
fails them is no independent answer.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gibbsmin.cantera_gas import CanteraGas, NoAnswerError
from gibbsmin.cantera_phases import SOLVERS, CanteraMixtures
from gibbsmin.compared_points import ComparedPoints
from gibbsmin.comparison import SAME_DATA, THRESHOLD, CheckedPoint, Verdict, imbalance
from gibbsmin.constants import STANDARD_PRESSURE
from gibbsmin.outcome.composition import amount_at_equilibrium
from gibbsmin.outcome.response import abundant_components, in_components

if TYPE_CHECKING:
    from gibbsmin.species import ThermoTable

FloatArray = NDArray[np.float64]
Mask = NDArray[np.bool_]

ACCEPTED = 1e-6  # largest residual of an answer that counts; what Cantera's own stopping rule can reach
_NO_SUCH_GAS = 1e-12  # part of the element totals that a start from gases may leave over


def phase_residual(
    formula_matrix: FloatArray,
    condensed: Mask,
    potentials: FloatArray,
    fed: FloatArray,
    amounts: FloatArray,
    threshold: float = THRESHOLD,
) -> float:
    """How far amounts of gases and pure phases are from equilibrium, judged by themselves alone [1].

    The most abundant independent species fix the potentials of all others. Counted are the balances; every gas whose
    mole fraction, there or due, exceeds `threshold`, relative; the supersaturation of absent phases; the deviation of
    present ones from saturation; and where there is no gas, by how much the partial pressures due exceed the total.

    Args:
        formula_matrix: (E, S). condensed: (S,). potentials: mu_0/RT, for gases plus ln(p/p0), (S,); +inf for what may
            not form. fed: atoms fed, (E,) mol. amounts: (S,) mol.
    """
    taken = np.isfinite(potentials)
    A, condensed, c, n = formula_matrix[:, taken], condensed[taken], potentials[taken], amounts[taken]
    worst = imbalance(A, fed, n / n.sum(), threshold)
    gas = ~condensed
    total = float(n[gas].sum())
    components = abundant_components(A, n)
    C = in_components(A, components)
    reachable = np.abs(A[:, components] @ C - A).max(axis=0) < 1e-9
    with np.errstate(divide="ignore"):
        own = c + np.where(gas, np.log(n / total) if total > 0 else -np.inf, 0.0)
    excess = np.minimum(own[components] @ C - c, 700.0)  # ln of what is due: mole fraction or activity
    due = np.exp(excess)
    if total > 0:
        x = np.where(gas, n / total, 0.0)
        larger = np.maximum(x, due)
        counted = gas & reachable & (larger > threshold)
        worst = max(
            worst, float((np.abs(x - due) / np.where(larger > 0, larger, 1.0))[counted].max(initial=0.0))
        )
    else:
        worst = max(worst, float(due[gas & reachable].sum()) - 1.0)
    present = condensed & (n > threshold * n.sum())
    absent = condensed & ~present & reachable
    worst = max(worst, float((due[absent] - 1.0).max(initial=0.0)))
    return max(worst, float(np.abs(due[present] - 1.0).max(initial=0.0)))


class PhaseComparison:
    """Both answers to the points of one data set with condensed phases."""

    def __init__(
        self, dataset: xr.Dataset, table: ThermoTable, dims: tuple[str, ...], tolerance: float
    ) -> None:
        """`table` is that of the gases, then of the phases that take part."""
        self._table = table
        self._A = np.asarray(table.formula_matrix, dtype=np.float64)
        self._condensed = np.array([each.state != "g" for each in table.species])
        self._names = [each.name for each in table.species]
        self._points = ComparedPoints(dataset, dims)
        self._tolerance = tolerance
        phases = dataset["phase_amount"].isel(phase=dataset["phase_takes_part"].values == 1)
        self._amounts = np.concatenate([dataset["amount"].values, phases.values], axis=-1)
        self._gap = (dataset["gap"] / amount_at_equilibrium(dataset)).transpose(*dims).values
        self.data_difference = 0.0
        self.library = CanteraGas.library()
        self._failure = ""
        self._mixtures: CanteraMixtures | None = None
        try:
            self._mixtures = CanteraMixtures(table, self._points.temperatures)
        except NoAnswerError as error:
            self._failure = str(error)

    def at(self, index: tuple[int, ...]) -> CheckedPoint:
        place = self._points.place(index)
        try:
            return self._compared(index, place)
        except NoAnswerError as error:
            return CheckedPoint(index, place, "no independent answer", reason=str(error))

    def _compared(self, index: tuple[int, ...], place: tuple[tuple[str, float], ...]) -> CheckedPoint:
        if self._mixtures is None:
            raise NoAnswerError(self._failure)
        T, p = self._points.conditions(index)
        feed = self._points.feed(index)
        fed = feed @ self._points.feed_atoms
        standard = self._table.gibbs_RT(np.array([T]))[0]
        absent = np.abs(self._A[fed == 0]).sum(axis=0) > 0
        taken = np.isfinite(standard) & ~absent
        if not (taken & ~self._condensed).any():
            raise NoAnswerError("Cantera needs a gas of the elements fed")
        theirs = self._mixtures.standard_gibbs_RT(T, taken)
        ours_g = standard[taken]
        data = float((np.abs(theirs - ours_g) / np.maximum(1.0, np.abs(ours_g))).max())
        self.data_difference = max(self.data_difference, data)
        if not data <= SAME_DATA:
            raise NoAnswerError(f"its standard potentials differ from ours by {data:.1e} RT")
        potentials = np.where(taken, standard + np.log(p / STANDARD_PRESSURE) * ~self._condensed, np.inf)
        other, solver, other_residual = self._accepted(
            T, p, self._start(feed, fed, taken), taken, potentials, fed
        )
        ours = self._amounts[index]
        residual = phase_residual(self._A, self._condensed, potentials, fed, ours)
        relative, absolute, worst = self._differences(ours, other)
        differs = not relative <= self._tolerance
        verdict, reason = (
            self._judge(potentials, ours, other, residual, other_residual) if differs else ("", "")
        )
        return CheckedPoint(
            index,
            place,
            "differs" if differs else "confirmed",
            relative,
            absolute,
            self._names[worst],
            solver,
            residual,
            other_residual,
            float(self._gap[index]),
            verdict,
            reason,
        )

    def _accepted(
        self, T: float, p: float, start: FloatArray, taken: Mask, potentials: FloatArray, fed: FloatArray
    ) -> tuple[FloatArray, str, float]:
        """The first answer of Cantera's solvers that meets the conditions of equilibrium, with its residual."""
        assert self._mixtures is not None
        told = []
        for solver in SOLVERS:
            try:
                found = self._mixtures.equilibrate(T, p, start, taken, solver)
            except NoAnswerError as error:
                told.append(str(error))
                continue
            residual = phase_residual(self._A, self._condensed, potentials, fed, np.maximum(found, 0.0))
            if residual <= ACCEPTED:
                return found, solver, residual
            told.append(
                f"the answer of Cantera's solver {solver} misses the conditions of equilibrium by {residual:.1e}"
            )
        raise NoAnswerError("; ".join(told))

    def _differences(self, ours: FloatArray, other: FloatArray) -> tuple[float, float, int]:
        """Largest relative and absolute difference, and the species of the former.

        Gases by mole fraction above the threshold, relative. Phases by their part of all amounts, absolute: at the
        edge of its field the amount of a phase is a small difference, for which no program vouches relatively.
        """
        gas = ~self._condensed
        fractions = []
        for n in (ours, other):
            total = float(n[gas].sum())
            x = n / total if total > THRESHOLD * n.sum() else np.zeros(len(n))
            fractions.append(np.where(gas, x, n / n.sum()))
        first, second = fractions
        larger = np.maximum(first, second)
        difference = np.where(~gas | (larger > THRESHOLD), np.abs(first - second), 0.0)
        relative = np.where(gas, difference / np.maximum(larger, THRESHOLD), difference)
        worst = int(relative.argmax())
        return float(relative[worst]), float(difference.max()), worst

    def _judge(
        self,
        potentials: FloatArray,
        ours: FloatArray,
        other: FloatArray,
        residual: float,
        other_residual: float,
    ) -> tuple[Verdict, str]:
        energy, other_energy = (self._energy(potentials, answer) for answer in (ours, other))
        reason = (
            f"residuals: ours {residual:.1e}, Cantera's {other_residual:.1e}; "
            f"G/RT per mol: ours less Cantera's {energy - other_energy:.1e}"
        )
        if residual <= self._tolerance < other_residual:
            return "ours", reason
        if other_residual <= self._tolerance < residual:
            return "theirs", reason
        return "undecided", reason

    def _energy(self, potentials: FloatArray, amounts: FloatArray) -> float:
        gas = ~self._condensed & (amounts > 0)
        present = amounts > 0
        value = float(amounts[present] @ potentials[present])
        if gas.any():
            value += float(amounts[gas] @ np.log(amounts[gas] / amounts[gas].sum()))
        return value / float(amounts.sum())

    def _start(self, feed: FloatArray, fed: FloatArray, taken: Mask) -> FloatArray:
        """Amounts of listed species with the element totals fed: of gases if they can hold them, else of the feed."""
        from scipy.optimize import nnls

        size = np.abs(fed).sum()
        for allowed in (taken & ~self._condensed, taken):
            start, rest = nnls(self._A[:, allowed], fed / size)
            if rest <= _NO_SUCH_GAS:
                result = np.zeros(len(taken))
                result[allowed] = start * size
                return result
        raise NoAnswerError("the listed species cannot make up the feed's element totals to start from")
