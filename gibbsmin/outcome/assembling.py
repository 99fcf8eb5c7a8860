"""Solver arrays made into a data set: dimensions, coordinates, units and long names (CF conventions)."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gibbsmin.labelled import Labelled
from gibbsmin.outcome.phases import phase_coordinates, phase_variables

if TYPE_CHECKING:
    from gibbsmin.solving import Conditions

FloatArray = NDArray[np.float64]

RESULT_NAMES = frozenset(
    """
    species element feed_species molar_mass feed_molar_mass atoms feed_atoms
    mole_fraction amount gas_amount element_potential status gap balance_residual iterations feed_amount
    root phase phase_takes_part phase_molar_mass phase_atoms phase_amount phase_amount_per_feed phase_mass
    phase_element_fraction phase_activity phase_form enthalpy_per_feed heat_capacity_frozen_per_feed
    heat_capacity_equilibrium_per_feed extrapolated dry_mole_fraction mean_molar_mass density enthalpy heat_capacity_frozen
    heat_capacity_equilibrium heat_duty heat_duty_per_feed crosscheck_status crosscheck_difference
    """.split()  # noqa: SIM905  easier to read than thirty quoted words
)
"""Names that the results use, which a caller's dimension cannot have as well."""
RATE_UNIT = {"mol": "mol", "mol/h": "mol h-1"}  # as UDUNITS and hence CF write it


def assemble(conditions: Conditions, solution: Any, extrapolated: NDArray[np.bool_] | None) -> xr.Dataset:
    """The data set that `gibbsmin.equilibrium` describes.

    Args:
        conditions: what was solved.
        solution: arrays named as in `gibbsmin.minimiser.Minimum`, their leading shape the points in the order
            of `conditions.sizes` (flattened or not). Amounts are those of the scaled feed.
        extrapolated: (*temperature dimensions, S), or None to leave it out.
    """
    sizes = conditions.sizes
    dims, shape = tuple(sizes), tuple(sizes.values())
    unit = RATE_UNIT[conditions.amount_unit]
    own = Labelled(
        tuple(conditions.feed_sizes), conditions.factor.reshape(tuple(conditions.feed_sizes.values()))
    )
    factor = own.spread_over(sizes)
    amount = solution.amounts.reshape(*shape, -1)
    if (conditions.factor != 1).any():
        amount = amount / factor[..., None]
    gases = len(conditions.gases)
    amount, phase_amount = amount[..., :gases], amount[..., gases:]
    status = solution.status.reshape(shape).astype(np.int8, copy=False)
    gas = amount.sum(axis=-1)
    with np.errstate(invalid="ignore", divide="ignore"):
        fraction = amount / gas[..., None]
    by_species, by_element = (*dims, "species"), (*dims, "element")
    data = {
        "mole_fraction": _variable(by_species, fraction, "1", "mole fraction at equilibrium"),
        "amount": _variable(by_species, amount, unit, "amount at equilibrium"),
        "gas_amount": _variable(dims, gas, unit, "total amount of gas at equilibrium"),
        "element_potential": _variable(
            by_element,
            solution.element_potentials.reshape(*shape, -1),
            "1",
            "chemical potential of the element divided by RT",
            comment="NaN where the feed does not determine it",
        ),
        "status": status_variable(dims, status),
        "gap": _variable(
            dims,
            solution.gap.reshape(shape) / factor,
            unit,
            "upper bound on the distance of G/RT from its minimum",
        ),
        "balance_residual": _variable(
            dims,
            solution.balance_residual.reshape(shape),
            "1",
            "largest relative error of an element balance",
        ),
        "iterations": _variable(
            dims,
            solution.iterations.reshape(shape).astype(np.int32, copy=False),
            "1",
            "iterations of the solver",
        ),
        "feed_amount": _variable(conditions.feed.dims, conditions.feed.values, unit, "amount in the feed"),
    }
    if extrapolated is not None:
        data["extrapolated"] = _variable(
            (*conditions.temperature.dims, "species"),
            extrapolated.astype(np.int8),
            "1",
            "whether the temperature lies outside the range of the species' data",
            flag_values=np.array([0, 1], dtype=np.int8),
            flag_meanings="inside_range extrapolated",
        )
    coordinates = dict(_coordinates(conditions))
    if conditions.phases or conditions.held_back:
        potentials = solution.element_potentials.reshape(*shape, -1)
        extrapolate = conditions.table.extrapolate
        data |= phase_variables(conditions, phase_amount, amount, potentials, unit, extrapolate=extrapolate)
        coordinates |= phase_coordinates(conditions)
    attributes = {
        "Conventions": "CF-1.11",
        "title": "Equilibrium composition of an ideal-gas mixture"
        + (" beside condensed phases" if conditions.phases else ""),
        "source": f"gibbsmin {_version()}",
        "comment": "Equilibrium is a limit, not a rate. Points whose status is not 0 hold NaN.",
    }
    return xr.Dataset(data, coords=coordinates, attrs=attributes)


def status_variable(dims: tuple[str, ...], status: NDArray[np.int8]) -> xr.Variable:
    """Solver status with its legend as CF flags; the legend is the solver's own list."""
    from gibbsmin.minimiser import Status

    return _variable(
        dims,
        status,
        "1",
        "outcome of the solver",
        flag_values=np.array([member.value for member in Status], dtype=np.int8),
        flag_meanings=" ".join(member.name.lower() for member in Status),
    )


def _coordinates(conditions: Conditions) -> Mapping[str, xr.Variable]:
    table = conditions.table
    temperature, pressure = conditions.temperature, conditions.pressure
    feed_species = conditions.feed_species
    return {
        **conditions.coordinates,
        "temperature": _variable(temperature.dims, temperature.values, "K", "temperature"),
        "pressure": _variable(pressure.dims, pressure.values, "Pa", "absolute pressure"),
        "species": _names("species", [each.name for each in conditions.gases], "species"),
        "element": _names("element", table.elements, "element"),
        "feed_species": _names("feed_species", [each.name for each in feed_species], "species of the feed"),
        "molar_mass": _variable(
            ("species",), np.array([each.molar_mass for each in conditions.gases]), "kg mol-1", "molar mass"
        ),
        "feed_molar_mass": _variable(
            ("feed_species",), np.array([each.molar_mass for each in feed_species]), "kg mol-1", "molar mass"
        ),
        "atoms": _variable(
            ("species", "element"),
            np.array(table.formula_matrix[:, : len(conditions.gases)]).T,
            "1",
            "atoms of the element per molecule",
        ),
        "feed_atoms": _variable(
            ("feed_species", "element"), conditions.feed_composition, "1", "atoms of the element per molecule"
        ),
    }


def _variable(dims: tuple[str, ...], values: Any, units: str, long_name: str, **more: Any) -> xr.Variable:
    return xr.Variable(dims, values, {"units": units, "long_name": long_name, **more})


def _names(dim: str, names: Any, long_name: str) -> xr.Variable:
    return xr.Variable((dim,), np.array(list(names), dtype=np.str_), {"long_name": long_name})


def _version() -> str:
    import gibbsmin

    return gibbsmin.__version__
