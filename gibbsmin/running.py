"""A whole scenario: solved, its wanted results worked out, and cross-checked."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from importlib.util import find_spec
from typing import TYPE_CHECKING, Any

import numpy as np
import xarray as xr

from gibbsmin.crosscheck import SEED, THRESHOLD, cross_check
from gibbsmin.decimal_amounts import element_amounts_of_fractions
from gibbsmin.errors import ConditionsError, MissingPackageError
from gibbsmin.labelled import Labelled
from gibbsmin.outcome import Outcome
from gibbsmin.outcome.assembling import RESULT_NAMES
from gibbsmin.outcome.energy import FeedPart, feed_enthalpy
from gibbsmin.outcome.wanted import add_derived
from gibbsmin.solving import Conditions, composition_matrix, solve, thermo_table

if TYPE_CHECKING:
    from gibbsmin.boundaries import Boundary
    from gibbsmin.scenario import Scenario
    from gibbsmin.scenario.model import Axis, Stream

_UDUNITS = {"mol/h": "mol h-1"}  # units of axes as CF writes them, where that differs from ours


def run(
    scenario: Scenario,
    *,
    threads: int | None = None,
    progress: Callable[[int], None] | None = None,
    check_progress: Callable[[int], None] | None = None,
) -> Outcome:
    """Solve every point of a scenario, derive the wanted results, and cross-check.

    Args:
        scenario: as `gibbsmin.load_scenario` returns it.
        threads: number of threads; default the cores this process may use.
        progress: called with the number of points newly solved, as they are solved.
        check_progress: the same for the points of the cross-check.

    Returns:
        The outcome: labelled results, cross-check, and what is needed to save them. Points that could not be
        solved hold NaN and a status; they raise nothing.

    Raises:
        TemperatureRangeError: the grid leaves a species' data and the scenario does not allow that.
        ConditionsError: an axis is called like one of the results.
        MissingPackageError: the scenario asks for a Parquet table and pyarrow is not installed.
        MeasurementError, ReactionError: measured values or reactions that cannot be worked out.
    """
    if "parquet" in scenario.output.tables and find_spec("pyarrow") is None:
        raise MissingPackageError("pyarrow", "writing a Parquet table")
    conditions = scenario_conditions(scenario)
    dataset = solve(conditions, extrapolate=scenario.extrapolate, threads=threads, progress=progress)
    phase_table = thermo_table(conditions.phases, scenario.extrapolate) if conditions.phases else None
    dataset = add_derived(
        dataset, conditions.gas_table, scenario.results, fed_enthalpy(scenario), phase_table
    )
    dataset = _with_dew_points(scenario, dataset)
    boundaries: tuple[Boundary, ...] = ()
    if scenario.results.boundaries:
        from gibbsmin.boundaries import add_boundaries, trace_boundaries

        boundaries = trace_boundaries(scenario, conditions, dataset, threads=threads)
        dataset = add_boundaries(dataset, boundaries)
    wanted = scenario.cross_check
    check = cross_check(
        dataset,
        conditions.table,
        extent=wanted.extent,
        sample_size=wanted.sample_size,
        tolerance=wanted.tolerance,
        progress=check_progress,
    )
    dataset = check.add_to(dataset)
    reactions = None
    if scenario.reactions is not None:
        from gibbsmin.outcome.reactions import add_reactions, reaction_results

        reactions = reaction_results(scenario, conditions, dataset, threads=threads)
        dataset = add_reactions(dataset, reactions)
    dataset.attrs["title"] = scenario.title
    if scenario.notes:
        dataset.attrs["notes"] = scenario.notes
    return Outcome(scenario, dataset, check, _settings(scenario), reactions, boundaries)


def _with_dew_points(scenario: Scenario, dataset: xr.Dataset) -> xr.Dataset:
    """The data set with the dew points that the scenario asks for."""
    if not scenario.results.dew_points:
        return dataset
    from gibbsmin.outcome.dew_point import dew_point, liquid_of

    gases = {each.name: each for each in scenario.species}
    for name in scenario.results.dew_points:
        found = dew_point(dataset, gases[name], liquid_of(gases[name], scenario.library))
        variable = found.variable
        variable.attrs = {**variable.attrs, "long_name": found.name, "description": found.attrs["long_name"]}
        dataset = dataset.assign({str(found.name): variable})
    return dataset


def scenario_conditions(scenario: Scenario) -> Conditions:
    """The conditions of a scenario's grid, with its exact feed amounts carried to exact element amounts."""
    table = thermo_table([*scenario.species, *scenario.choice.condensed], scenario.extrapolate)
    feed_species = tuple(scenario.feed_species.values())
    exact = scenario.exact_feed_amounts()
    shape = scenario.feed_shape
    amounts = np.empty((*shape, len(feed_species)), dtype=object)
    for position, name in enumerate(scenario.feed_species):
        amounts[..., position] = exact[name]
    composition = composition_matrix(feed_species, table.elements)
    scaled, factor = element_amounts_of_fractions(amounts.reshape(-1, len(feed_species)), composition)
    dims = tuple(axis.name for axis in scenario.further_axes)
    if taken := RESULT_NAMES.intersection(dims):
        raise ConditionsError(f"axis {min(taken)!r}", "this name belongs to the results; choose another")
    return Conditions(
        table=table,
        feed_species=feed_species,
        feed=Labelled((*dims, "feed_species"), amounts.astype(np.float64)),
        feed_composition=composition,
        element_amounts=scaled,
        factor=factor,
        temperature=Labelled(("temperature",), scenario.temperature.array),
        pressure=Labelled(("pressure",), scenario.pressure.array),
        coordinates={axis.name: _coordinate(axis) for axis in scenario.further_axes},
        amount_unit=scenario.amount_unit,
        held_back=scenario.choice.held_back,
    )


def _coordinate(axis: Axis) -> xr.Variable:
    units = _UDUNITS.get(axis.unit, axis.unit)
    return xr.Variable((axis.name,), axis.array, {"units": units, "long_name": axis.title})


def fed_enthalpy(scenario: Scenario) -> xr.DataArray | None:
    """Enthalpy of the feed, or None when a stream has no temperature (the scenario then says so)."""
    dims = tuple(axis.name for axis in scenario.further_axes)
    amounts = scenario.stream_amounts()
    parts = []
    for name, stream in scenario.streams.items():
        if stream.temperature is None:
            return None
        parts.append(_feed_part(scenario, stream, stream.temperature, amounts[name], dims))
    return feed_enthalpy(parts)


def _feed_part(
    scenario: Scenario,
    stream: Stream,
    temperature: float,
    amounts: Mapping[str, Any],
    dims: tuple[str, ...],
) -> FeedPart:
    species = [scenario.feed_species[name] for name in stream.amounts]
    values = np.stack([amounts[name] for name in stream.amounts], axis=-1)
    return FeedPart(
        thermo_table(species, False), xr.DataArray(values, dims=(*dims, "part_species")), temperature
    )


def _settings(scenario: Scenario) -> dict[str, Any]:
    """What decides the numbers beside the scenario's text and the data."""
    return {
        "extrapolate": scenario.extrapolate,
        "cross-check extent": scenario.cross_check.extent,
        "cross-check sample size": scenario.cross_check.sample_size,
        "cross-check tolerance": scenario.cross_check.tolerance,
        "cross-check least mole fraction": THRESHOLD,
        "cross-check seed": SEED,
    }
