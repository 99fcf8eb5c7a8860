"""Solver results of a chunk's cases, reduced to what is stored or derived from."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gibbsmin.grid import GridSolution
from gibbsmin.outcome import composition, energy
from gibbsmin.outcome.assembling import RATE_UNIT
from gibbsmin.outcome.phases import phase_coordinates, phase_variables
from gibbsmin.outcome.wanted import named_results
from gibbsmin.solving import thermo_table
from gibbsmin.study.chunks import (
    NOT_COMPUTED,
    PHASE_VARIABLES,
    Chunk,
    FloatArray,
    Group,
)
from gibbsmin.study.conditions import conditions_of, feed_atoms, gas_table

if TYPE_CHECKING:
    from gibbsmin.species import ThermoTable
    from gibbsmin.study.model import Case, Layout

FURTHER: Mapping[str, Callable[[xr.Dataset, ThermoTable], xr.DataArray]] = {
    "density": lambda dataset, table: composition.density(dataset),
    "mean molar mass": lambda dataset, table: composition.mean_molar_mass(dataset),
    "enthalpy": energy.mixture_enthalpy,
}
"""Results that the study file may ask for beside those of the scenarios; heat duty is apart (two variables)."""


class Block:
    """Solver results of the cases of a chunk, (B, points, ...), reduced to what is stored or derived from."""

    def __init__(self, chunk: Chunk, table: ThermoTable) -> None:
        group, layout = chunk.group, chunk.group.layout
        cases, points = len(chunk.cases), layout.points
        self.layout = layout
        self.species = species_needed(group)
        self._kept = list(layout.kept_species)
        self.amounts = np.full((cases, points, len(self.species)), np.nan)
        # By species first, as the files have them.
        self.fractions = np.full((cases, len(self._kept), points), np.nan)
        self.gas = np.full((cases, points), np.nan)
        self.gap = np.full((cases, points), np.nan)
        self.status = np.full((cases, points), NOT_COMPUTED, dtype=np.int8)
        self.largest_gap = np.full(cases, np.nan)
        self.largest_balance = np.full(cases, np.nan)
        self.seconds = np.zeros(cases)
        self.failures: dict[int, str] = {}
        self.checked: list[tuple[int, int, FloatArray]] = []
        self._checked_points = group.checked_points
        self.extra: dict[str, NDArray[Any]] = {}
        for name in ("element_potential", "balance_residual", "iterations", *PHASE_VARIABLES):
            if (array := group.array(name)) is not None:
                shape = (cases, points, array.extras) if array.extra else (cases, points)
                self.extra[name] = np.full(shape, array.fill, dtype=array.dtype)

    def fill(self, i: int, case: Case, solution: GridSolution) -> None:
        """Take what is needed of a case while it is still in the cache."""
        feeds, points = len(case.factor), self.layout.points
        factor = case.factor.reshape(feeds, 1)
        everything = solution.amounts.reshape(points, -1)
        amounts = everything[:, : len(self.layout.species)]
        gas = amounts.sum(axis=-1).reshape(feeds, -1)
        np.divide(gas, factor, out=self.gas[i].reshape(gas.shape))
        by_species = amounts.T
        with np.errstate(invalid="ignore", divide="ignore"):
            for k, species in enumerate(self._kept):
                np.divide(by_species[species], gas.ravel(), out=self.fractions[i, k])
        for k, species in enumerate(self.species):
            np.divide(
                by_species[species].reshape(gas.shape), factor, out=self.amounts[i, :, k].reshape(gas.shape)
            )
        gap = solution.gap.reshape(feeds, -1)
        np.divide(gap, factor, out=self.gap[i].reshape(gap.shape))
        self.status[i] = solution.status.ravel()
        balance = solution.balance_residual.ravel()
        with np.errstate(invalid="ignore", divide="ignore"):
            self.largest_gap[i] = largest(gap / gas)
        self.largest_balance[i] = largest(balance)
        further: dict[str, NDArray[Any]] = {
            "element_potential": solution.element_potentials,
            "balance_residual": balance,
            "iterations": solution.iterations,
        }
        if self.layout.phases:
            further |= self._phases(case, everything, solution)
        for name, values in self.extra.items():
            values[i] = further[name].reshape(values.shape[1:])
        for point in checked_points(case, points, self._checked_points):
            if self.status[i, point] == 0:
                self.checked.append((i, int(point), amounts[point] / gas.ravel()[point]))

    def _phases(self, case: Case, amounts: FloatArray, solution: GridSolution) -> dict[str, NDArray[Any]]:
        """Amounts and activities of the condensed phases."""
        layout = self.layout
        scaled = amounts.reshape(len(case.factor), -1, amounts.shape[-1]) / case.factor[:, None, None]
        scaled = scaled.reshape(*layout.shape, -1)
        variables = phase_variables(
            conditions_of(layout, case),
            scaled[..., len(layout.species) :],
            scaled[..., : len(layout.species)],
            solution.element_potentials.reshape(*layout.shape, -1),
            RATE_UNIT[layout.amount_unit],
            extrapolate=layout.extrapolate,
        )
        return {name: variables[name].values for name in PHASE_VARIABLES}

    def fail(self, i: int, reason: str) -> None:
        """Give a case up; what was taken of it before that is taken back."""
        self.failures[i] = reason
        for values in (
            self.amounts,
            self.fractions,
            self.gas,
            self.gap,
            self.largest_gap,
            self.largest_balance,
        ):
            values[i] = np.nan
        self.status[i] = NOT_COMPUTED
        for values in self.extra.values():
            values[i] = np.nan if values.dtype.kind == "f" else NOT_COMPUTED
        self.checked = [each for each in self.checked if each[0] != i]


def largest(values: NDArray[Any]) -> float:
    """Largest finite value, NaN if there is none."""
    top = values.max()
    if np.isfinite(top):
        return float(top)
    finite = values[np.isfinite(values)]
    return float(finite.max()) if finite.size else float("nan")


def checked_points(case: Case, points: int, count: int) -> NDArray[np.intp]:
    """Points to check: random, but those of a case do not depend on anything else."""
    generator = np.random.default_rng(int(case.digest[:16], 16))
    return np.sort(generator.choice(points, size=min(count, points), replace=False))


def species_needed(group: Group) -> tuple[int, ...]:
    """Indices of the species whose amounts the derived results of a chunk need."""
    layout = group.layout
    if group.further:
        return tuple(range(len(layout.species)))
    wanted = layout.results
    names = {each.species for each in wanted.conversions}
    for made in wanted.yields:
        names.update(name for name in (made.product, made.reactant) if name is not None)
    for choice in wanted.selectivities:
        names.update((choice.product, choice.reactant))
    for ratio in wanted.ratios:
        names.update((*ratio.numerator, *ratio.denominator))
    return tuple(k for k, each in enumerate(layout.species) if each.name in names)


def values_of(chunk: Chunk, block: Block, table: ThermoTable) -> Iterator[tuple[str, NDArray[Any]]]:
    """Every stored variable, (B, points) or (B, points, extras)."""
    group, layout = chunk.group, chunk.group.layout
    yield "gas_amount", block.gas
    yield "status", block.status
    yield "gap", block.gap
    yield from block.extra.items()
    with np.errstate(invalid="ignore", divide="ignore"):
        if layout.kept_species:
            yield "mole_fraction", np.moveaxis(block.fractions, 1, 2)
        if group.derived:
            dataset = _block_dataset(chunk, block, table)
            found = derived_results(dataset, layout, group.further, _fed_enthalpy(chunk))
            dims, shape = ("case", *_axis_dims(layout)), (len(chunk.cases), *layout.shape)
            for name, (_, array) in zip(group.derived, found, strict=True):
                values = array.transpose(*(dim for dim in dims if dim in array.dims)).values
                sizes = [n if dim in array.dims else 1 for dim, n in zip(dims, shape, strict=True)]
                yield name, np.broadcast_to(values.reshape(sizes), shape).reshape(len(chunk.cases), -1)


def derived_results(
    dataset: xr.Dataset,
    layout: Layout,
    further: Sequence[str],
    fed: xr.DataArray | None,
) -> Iterator[tuple[str, xr.DataArray]]:
    """Results beside the composition, always in the same order: those of the scenarios by name, then `further`."""
    yield from named_results(dataset, layout.results)
    table = gas_table(layout)
    phases = thermo_table(layout.condensed, layout.extrapolate) if layout.condensed else None
    for name in further:
        if name in FURTHER:
            yield name, FURTHER[name](dataset, table)
    if "heat duty" in further and fed is not None:
        for duty, array in energy.heat_duty(dataset, table, fed, phases).data_vars.items():
            yield str(duty), array


def _axis_dims(layout: Layout) -> tuple[str, ...]:
    """Dimension names that no coordinate has, since an axis may differ from case to case."""
    return tuple(f"{axis.name} point" for axis in layout.axes)


def _block_dataset(chunk: Chunk, block: Block, table: ThermoTable) -> xr.Dataset:
    """As much of the data set of `gibbsmin.equilibrium` as derived results need, with a dimension "case" more."""
    layout, cases = chunk.group.layout, chunk.cases
    axes = _axis_dims(layout)
    points = ("case", *axes)
    shape = (len(cases), *layout.shape)
    units = {"units": layout.amount_unit.replace("/h", " h-1")}
    species = [layout.species[k] for k in block.species]
    variables: dict[str, Any] = {
        "amount": ((*points, "species"), block.amounts.reshape(*shape, -1), units),
        "gas_amount": (points, block.gas.reshape(shape)),
        "feed_amount": (
            ("case", *axes[:-2], "feed_species"),
            np.stack([case.feed for case in cases]),
            units,
        ),
    }
    if layout.phases:
        variables["phase_amount"] = (
            (*points, "phase"),
            block.extra["phase_amount"].reshape(*shape, -1),
            units,
        )
    if any(name in chunk.group.further for name in FURTHER):
        fractions = block.amounts / block.gas[..., None]
        variables["mole_fraction"] = ((*points, "species"), fractions.reshape(*shape, -1))
    coordinates: dict[str, Any] = {
        "temperature": (("case", axes[-2]), np.stack([case.temperature for case in cases])),
        "pressure": (("case", axes[-1]), np.stack([case.pressure for case in cases])),
        "species": [each.name for each in species],
        "feed_species": [each.name for each in layout.feed_species],
        "element": list(table.elements),
        "atoms": (("species", "element"), np.array(table.formula_matrix).T[list(block.species)]),
        "feed_atoms": (("feed_species", "element"), feed_atoms(layout.feed_species, table)),
        "molar_mass": (("species",), np.array([each.molar_mass for each in species])),
    }
    if layout.phases:
        coordinates |= phase_coordinates(conditions_of(layout, cases[0]))
    return xr.Dataset(variables, coordinates)


def _fed_enthalpy(chunk: Chunk) -> xr.DataArray | None:
    parts = [case.fed_enthalpy for case in chunk.cases if case.fed_enthalpy is not None]
    if len(parts) < len(chunk.cases):
        return None
    return xr.DataArray(np.stack(parts), dims=("case", *_axis_dims(chunk.group.layout)[:-2]))
