"""The boundaries that a scenario asks for, as functions whose zeros are sought.

    a phase begins to form:   ln activity of the phase over the mixture without it = 0
    mole fraction of a gas:   ln x - ln value = 0
    conversion of a gas:      conversion - value = 0

Each is scanned on the grid, which is solved anyway (for a phase that takes part, once more without it), and then
closed in on with fresh minimisations at the positions that the search asks for.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gibbsmin.array_settings import one_thread_for_linear_algebra
from gibbsmin.boundaries.crossings import find_crossings
from gibbsmin.boundaries.results import Boundary
from gibbsmin.constants import STANDARD_PRESSURE
from gibbsmin.minimiser import minimise
from gibbsmin.outcome.phases import atoms_of, log_activities, undetermined_phases
from gibbsmin.scenario.ratios import FeedEquations, RatioImpossibleError
from gibbsmin.solving import solve_arrays, thermo_table

if TYPE_CHECKING:
    from gibbsmin.scenario import Scenario
    from gibbsmin.scenario.model import WantedBoundary
    from gibbsmin.solving import Conditions
    from gibbsmin.species import Species

FloatArray = NDArray[np.float64]
Indices = NDArray[np.intp]

SMALLEST = -700.0  # stands for the logarithm of zero, so that a search can start from there


def trace_boundaries(
    scenario: Scenario, conditions: Conditions, dataset: xr.Dataset, *, threads: int | None = None
) -> tuple[Boundary, ...]:
    """Every boundary of `scenario.results.boundaries`, along its axis at all values of the other axes.

    Args:
        conditions: of the scenario. dataset: its solution, as `gibbsmin.solving.solve` returns it.
    """
    scans: dict[frozenset[str], _Solved] = {}
    found = []
    for wanted in scenario.results.boundaries:
        function = _Function.of(scenario, conditions, wanted)
        key = frozenset(each.name for each in function.left_out)
        if key not in scans:
            scans[key] = _solve_without(conditions, dataset, function.left_out, threads)
        found.append(_trace(function, scans[key]))
    return tuple(found)


@dataclass(frozen=True)
class _Solved:
    """Amounts (n, S + K), element potentials (n, E) and ln x of gases (n, S) of points, NaN where not solved.

    Amounts are those of the feed as it is, not as it is scaled for the solver, but for a grid solved without some
    phases, where it only matters which of them are zero.
    """

    amounts: FloatArray
    element_potentials: FloatArray
    log_mole_fractions: FloatArray


def _solve_without(
    conditions: Conditions, dataset: xr.Dataset, left_out: Sequence[Species], threads: int | None
) -> _Solved:
    """The whole grid without some phases; with none to leave out, the solution that is there."""
    gases = len(conditions.gases)
    if not left_out:
        amounts = np.concatenate(
            [
                dataset["amount"].values,
                dataset["phase_amount"].values[..., : len(conditions.phases)]
                if conditions.phases
                else np.zeros((*dataset["status"].shape, 0)),
            ],
            axis=-1,
        )
        potentials = dataset["element_potential"].values
    else:
        T = conditions.temperature.values.ravel()
        gibbs = conditions.table.gibbs_RT(T)
        names = {each.name for each in left_out}
        gibbs[:, [each.name in names for each in conditions.table.species]] = np.inf
        log_pressure = np.log(conditions.pressure.values.ravel() / STANDARD_PRESSURE)
        solution = solve_arrays(conditions, gibbs, log_pressure, threads=threads)
        amounts, potentials = solution.amounts, solution.element_potentials
    amounts = amounts.reshape(-1, amounts.shape[-1])
    with np.errstate(divide="ignore", invalid="ignore"):
        log_x = np.log(amounts[:, :gases]) - np.log(amounts[:, :gases].sum(axis=1, keepdims=True))
    return _Solved(amounts, potentials.reshape(-1, potentials.shape[-1]), log_x)


def _trace(function: _Function, solved: _Solved) -> Boundary:
    scenario, wanted = function.scenario, function.wanted
    names = [axis.name for axis in scenario.axes]
    along = names.index(wanted.along)
    everywhere = np.indices(scenario.shape).reshape(len(names), -1)
    points = function.points_on_grid(everywhere)
    values = function.values(solved, points).reshape(scenario.shape)
    values = np.moveaxis(values, along, -1)
    lead = values.shape[:-1]
    positions = function.scale(scenario.axes[along].array)
    with one_thread_for_linear_algebra():
        found = find_crossings(positions, values.reshape(-1, len(positions)), function)
    others = tuple(axis for axis in scenario.axes if axis.name != wanted.along)
    return Boundary(
        wanted=wanted,
        along=scenario.axes[along],
        others=others,
        positions=function.unscale(found.positions).reshape(*lead, -1),
        direction=found.direction.reshape(*lead, -1),
        residual=found.residual.reshape(*lead, -1),
        first_sign=found.first_sign.reshape(lead),
        unsettled=found.unsettled,
    )


@dataclass(frozen=True)
class _Points:
    """Temperature [K], pressure [Pa], element amounts (n, E) and amount of one species in the feed (n,)."""

    temperature: FloatArray
    pressure: FloatArray
    element_amounts: NDArray[Any]
    factor: FloatArray
    fed: FloatArray


@dataclass(frozen=True)
class _Function:
    """The function of one boundary, at positions of its axis on the lines of the other axes (in C order)."""

    scenario: Scenario
    conditions: Conditions
    wanted: WantedBoundary
    phase: Species | None
    left_out: tuple[Species, ...]
    feeds: FeedEquations

    @classmethod
    def of(cls, scenario: Scenario, conditions: Conditions, wanted: WantedBoundary) -> _Function:
        phase: Species | None = None
        left_out: tuple[Species, ...] = ()
        if wanted.kind == "phase":
            phase = scenario.library.find(wanted.species)
            left_out = tuple(each for each in conditions.phases if each.formula == phase.formula)
        feeds = FeedEquations(scenario.streams, scenario.further_axes, scenario.feed_species)
        return cls(scenario, conditions, wanted, phase, left_out, feeds)

    @property
    def _logarithmic(self) -> bool:
        return self.wanted.along == "pressure"

    def scale(self, positions: FloatArray) -> FloatArray:
        """Positions as the search sees them: activities are smooth in the logarithm of pressure."""
        return np.log(positions) if self._logarithmic else positions

    def unscale(self, positions: FloatArray) -> FloatArray:
        return np.exp(positions) if self._logarithmic else positions

    def __call__(self, position: FloatArray, line: Indices) -> FloatArray:
        shape = [len(axis) for axis in self.scenario.axes if axis.name != self.wanted.along]
        line = np.asarray(line, dtype=np.intp).ravel()
        index = iter(np.unravel_index(line, shape) if shape else [])
        along = self.unscale(np.asarray(position, dtype=np.float64).ravel())
        at: list[Any] = [
            None if axis.name == self.wanted.along else next(index) for axis in self.scenario.axes
        ]
        points = self._points(at, along)
        solved = self._solve(points)
        return self.values(solved, points).reshape(np.shape(position))

    def points_on_grid(self, index: NDArray[np.intp]) -> _Points:
        """Points by their index along every axis, (axes, n)."""
        return self._points(list(index), np.zeros(0))

    def _points(self, index: list[Any], along: FloatArray) -> _Points:
        """Points whose axes are given by index (n,), but for the one that is None, which lies at `along`."""
        *further, t, p = index
        axes = self.scenario.axes
        T = along if t is None else axes[-2].array[t]
        pressure = along if p is None else axes[-1].array[p]
        if None in [each if each is None else 0 for each in further]:
            amounts, fed = self._feeds_at(further, along)
            factor = np.ones(len(amounts))
        else:
            shape = self.scenario.feed_shape
            n = len(T)
            feed = np.ravel_multi_index(tuple(further), shape) if shape else np.zeros(n, dtype=np.intp)
            amounts, factor = self.conditions.element_amounts[feed], self.conditions.factor[feed]
            flat = self.conditions.feed.values.reshape(-1, len(self.conditions.feed_species))
            fed = flat[feed] @ self._is_fed_species
        return _Points(T, pressure, amounts, factor, fed)

    @property
    def _is_fed_species(self) -> FloatArray:
        return np.array(
            [each.name == self.wanted.species for each in self.conditions.feed_species], dtype=float
        )

    def _feeds_at(self, further: list[Any], along: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Element amounts (n, E) and amounts of the species in the feed (n,), where a further axis leaves its grid."""
        axes = self.scenario.further_axes
        species = [each.name for each in self.conditions.feed_species]
        feed = np.full((len(along), len(species)), np.nan)
        for i, position in enumerate(along):
            values = [
                Fraction(float(position)) if at is None else axis.exact_values[at[i]]
                for axis, at in zip(axes, further, strict=True)
            ]
            try:
                factors = self.feeds.factors(values)
            except RatioImpossibleError:
                continue
            feed[i] = 0.0
            for name, stream in self.scenario.streams.items():
                for each, amount in stream.amounts.items():
                    feed[i, species.index(each)] += float(amount * factors.get(name, 1))
        return feed @ self.conditions.feed_composition, feed @ self._is_fed_species

    def _solve(self, points: _Points) -> _Solved:
        table = self.conditions.table
        condensed = np.array([each.state != "g" for each in table.species])
        gibbs = table.gibbs_RT(points.temperature)
        names = {each.name for each in self.left_out}
        gibbs[:, [each.name in names for each in table.species]] = np.inf
        potentials = gibbs + np.log(points.pressure / STANDARD_PRESSURE)[:, None] * ~condensed
        found = minimise(
            table.formula_matrix,
            points.element_amounts,
            potentials,
            condensed=condensed if condensed.any() else None,
        )
        log_x = found.log_mole_fractions[:, ~condensed].copy()
        log_x[found.amounts[:, ~condensed].sum(axis=1) == 0] = np.nan  # no gas is left
        return _Solved(found.amounts / points.factor[:, None], found.element_potentials, log_x)

    def values(self, solved: _Solved, points: _Points) -> FloatArray:
        """The function at solved points; NaN where it has no value."""
        if self.phase is not None:
            return self._log_activity(self.phase, solved, points.temperature)
        names = [each.name for each in self.conditions.table.species]
        column = names.index(self.wanted.species) if self.wanted.species in names else None
        if self.wanted.kind == "mole fraction":
            assert column is not None
            log_x = np.maximum(solved.log_mole_fractions[:, column], SMALLEST)  # NaN stays
            return np.asarray(log_x - np.log(self.wanted.value))
        left = solved.amounts[:, column] if column is not None else np.zeros(len(points.fed))
        with np.errstate(divide="ignore", invalid="ignore"):
            conversion = np.where(points.fed > 0, 1.0 - left / points.fed, np.nan)
        return np.asarray(conversion - self.wanted.value)

    def _log_activity(self, phase: Species, solved: _Solved, T: FloatArray) -> FloatArray:
        elements = self.conditions.table.elements
        gibbs = thermo_table((phase,), self.conditions.table.extrapolate).gibbs_RT(T)
        atoms = atoms_of((phase,), elements)
        value = log_activities(solved.element_potentials, atoms, gibbs, (phase,), elements)
        unknown = np.isinf(gibbs) | undetermined_phases(
            self.conditions.table.formula_matrix, solved.amounts > 0, atoms
        )
        absent = np.isneginf(value) & np.isfinite(gibbs)
        value = np.where(absent, SMALLEST, np.where(unknown, np.nan, np.clip(value, SMALLEST, None)))
        result: FloatArray = value[:, 0]
        return result
