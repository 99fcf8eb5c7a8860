"""Results that need thermodynamic functions: enthalpy, heat duty, heat capacity.

Enthalpies count from the elements in their reference states at 298.15 K, so heats of reaction are included.
The gas is ideal: its enthalpy does not depend on pressure. Each function takes the data set of
`gibbsmin.equilibrium` and the table of thermodynamic functions of the same gases in the same order;
unsolved points are NaN. What is per mol of gas is that of the gas alone. What is per mol of feed, or in total,
counts the condensed phases as well and needs their table too.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gibbsmin.array_settings import one_thread_for_linear_algebra
from gibbsmin.outcome.phases import atoms_of
from gibbsmin.outcome.response import composition_response, response_beside_phases

if TYPE_CHECKING:
    from gibbsmin.species import ThermoTable

FloatArray = NDArray[np.float64]

SECONDS_PER_HOUR = 3600.0
_POINTS_AT_ONCE = 1024  # their arrays stay in cache, and memory stays bounded however large the map


@dataclass(frozen=True)
class FeedPart:
    """One stream of the feed as its enthalpy needs it.

    Attributes:
        table: thermodynamic functions of the stream's K species (condensed ones allowed).
        amounts: in the unit of the data set's amounts, dimensions (..., "part_species"), size K.
        temperature: K.
    """

    table: ThermoTable
    amounts: xr.DataArray
    temperature: float


def molar_enthalpies(table: ThermoTable, temperature: FloatArray) -> FloatArray:
    """Molar enthalpies h_j(T) [J/mol], (*T.shape, S): h/RT times T times the R of each record's source."""
    T = np.asarray(temperature, dtype=np.float64)
    gas_constants = np.array([each.gas_constant for each in table.species])
    h: FloatArray = table.enthalpy_RT(T.ravel()) * gas_constants * T.reshape(-1, 1)
    return h.reshape(*T.shape, -1)


def molar_heat_capacities(table: ThermoTable, temperature: FloatArray) -> FloatArray:
    """Molar heat capacities cp_j(T) [J/(mol K)], (*T.shape, S)."""
    T = np.asarray(temperature, dtype=np.float64)
    gas_constants = np.array([each.gas_constant for each in table.species])
    cp: FloatArray = table.heat_capacity_R(T.ravel()) * gas_constants
    return cp.reshape(*T.shape, -1)


def mixture_enthalpy(dataset: xr.Dataset, table: ThermoTable) -> xr.DataArray:
    """Enthalpy of the equilibrium gas [J per mol of gas]: sum x_j h_j(T)."""
    result = xr.dot(dataset["mole_fraction"], _by_species(dataset, molar_enthalpies, table), dim="species")
    return _labelled(result, "enthalpy", "J mol-1", "enthalpy per mol of equilibrium gas")


def feed_enthalpy(parts: Sequence[FeedPart]) -> xr.DataArray:
    """Enthalpy of the whole feed, each stream at its own temperature: sum over streams of sum n0_j h_j(T).

    In J for amounts in mol, in J/h for mol/h; over the dimensions of the amounts.
    """
    total = xr.DataArray(0.0)
    for part in parts:
        h = xr.DataArray(molar_enthalpies(part.table, np.array(part.temperature)), dims="part_species")
        total = total + xr.dot(part.amounts, h, dim="part_species")
    return total


def total_enthalpy(
    dataset: xr.Dataset, table: ThermoTable, phases: ThermoTable | None = None
) -> xr.DataArray:
    """Enthalpy of gas and condensed phases: sum n_j h_j(T), in J for amounts in mol, in J/h for mol/h."""
    total: xr.DataArray = xr.dot(
        dataset["amount"], _by_species(dataset, molar_enthalpies, table), dim="species"
    )
    if phases is not None:
        total = total + _of_phases(dataset, molar_enthalpies, phases)
    return total


def enthalpy_per_feed(dataset: xr.Dataset, table: ThermoTable, phases: ThermoTable) -> xr.DataArray:
    """Enthalpy of gas and condensed phases [J per mol of feed]."""
    result = total_enthalpy(dataset, table, phases) / dataset["feed_amount"].sum("feed_species")
    title = "enthalpy of gas and condensed phases per mol of feed"
    return _labelled(result, "enthalpy_per_feed", "J mol-1", title)


def heat_duty(
    dataset: xr.Dataset, table: ThermoTable, fed: xr.DataArray, phases: ThermoTable | None = None
) -> xr.Dataset:
    """Heat to be supplied to turn the feed into the equilibrium gas and phases at their temperature (negative:
    removed).

    Q = sum n_j h_j(T) - H_feed, at constant pressure without shaft work.

    Args:
        fed: enthalpy of the feed as `feed_enthalpy` gives it.
        phases: table of the condensed phases that take part, or None.

    Returns:
        `heat_duty_per_feed` [J per mol of feed] and `heat_duty` in total: [J], or [W] when the amounts are
        rates.
    """
    total = total_enthalpy(dataset, table, phases) - fed
    per_feed = total / dataset["feed_amount"].sum("feed_species")
    rate = dataset["amount"].attrs["units"].endswith("h-1")
    in_all = total / SECONDS_PER_HOUR if rate else total
    return xr.Dataset(
        {
            "heat_duty": _labelled(in_all, "heat_duty", "W" if rate else "J", "heat to be supplied"),
            "heat_duty_per_feed": _labelled(
                per_feed, "heat_duty_per_feed", "J mol-1", "heat to be supplied per mol of feed"
            ),
        }
    )


def heat_capacities(dataset: xr.Dataset, table: ThermoTable) -> xr.Dataset:
    """Heat capacity of the gas at constant pressure [J/(K mol of gas present)], frozen and at equilibrium.

    Frozen, the composition stays: sum x_j cp_j. At equilibrium it follows the temperature, and the heat of
    the shift adds to it:

        (dH/dT)_p / N = sum x_j cp_j + R sum x_j xi_j^2,   xi_j = d ln x_j/d ln T,

    with the amounts of elements constant. The sum of squares (instead of sum h_j dn_j/dT, to which it is
    equal by the element balances) has no cancellation and can not come out negative.

    Returns:
        `heat_capacity_frozen` and `heat_capacity_equilibrium`.
    """
    amount = dataset["amount"].transpose(..., "species")
    points = amount.shape[:-1]
    n = amount.values.reshape(-1, amount.shape[-1])
    T = dataset["temperature"]
    frozen = xr.dot(
        dataset["mole_fraction"], _by_species(dataset, molar_heat_capacities, table), dim="species"
    )

    flat_T = _flat_index(T, amount.dims[:-1], points)
    h_RT = table.enthalpy_RT(T.values.ravel())
    gas_constants = np.array([each.gas_constant for each in table.species])
    shift = np.empty(len(n))
    with one_thread_for_linear_algebra(), np.errstate(invalid="ignore"):
        for start in range(0, len(n), _POINTS_AT_ONCE):
            part = slice(start, start + _POINTS_AT_ONCE)
            response, total = composition_response(table.formula_matrix, n[part], -h_RT[flat_T[part]])
            xi = np.where(n[part] > 0, response - total[:, None], 0.0)
            shift[part] = (n[part] * xi**2) @ gas_constants / n[part].sum(axis=1)
    reacting = frozen + xr.DataArray(shift.reshape(points), dims=amount.dims[:-1])
    basis = "per mol of equilibrium gas at constant pressure"
    return xr.Dataset(
        {
            "heat_capacity_frozen": _labelled(
                frozen, "heat_capacity_frozen", "J mol-1 K-1", f"heat capacity of the frozen gas {basis}"
            ),
            "heat_capacity_equilibrium": _labelled(
                reacting,
                "heat_capacity_equilibrium",
                "J mol-1 K-1",
                f"heat capacity of the reacting gas {basis}",
            ),
        }
    )


def heat_capacities_with_phases(dataset: xr.Dataset, table: ThermoTable, phases: ThermoTable) -> xr.Dataset:
    """Heat capacity of gas and condensed phases together [J/(K mol of feed)], frozen and at equilibrium.

    A present phase keeps its potential, a_k.dpi = dc_k, and takes up or gives off what the balances ask for; with
    that, the formula of `heat_capacities` stands as it is, its sum running over the gas. The amounts of absent
    phases stay zero: at a boundary, where one begins to form, the value is that of one side.

    NaN in the value at equilibrium where phases and pressure fix the temperature (a melting point, or gas that
    the phases alone determine): heat then changes the amounts and not the temperature.
    """
    amount = dataset["amount"].transpose(..., "species")
    points = amount.shape[:-1]
    n = amount.values.reshape(-1, amount.shape[-1])
    present = (_taking_part(dataset).transpose(..., "phase").values > 0).reshape(len(n), -1)
    T = dataset["temperature"]
    frozen = xr.dot(dataset["amount"], _by_species(dataset, molar_heat_capacities, table), dim="species")
    frozen = frozen + _of_phases(dataset, molar_heat_capacities, phases)
    flat_T = _flat_index(T, amount.dims[:-1], points)
    gas_h, phase_h = table.enthalpy_RT(T.values.ravel()), phases.enthalpy_RT(T.values.ravel())
    gas_constants = np.array([each.gas_constant for each in table.species])
    names = [str(name) for name in dataset["element"].values]
    A, B = atoms_of(table.species, names).T, atoms_of(phases.species, names).T
    shift = np.full(len(n), np.nan)
    with one_thread_for_linear_algebra(), np.errstate(invalid="ignore"):
        for pattern in np.unique(present, axis=0):
            members = np.flatnonzero((present == pattern).all(axis=1) & np.isfinite(n).all(axis=1))
            independent = np.linalg.matrix_rank(B[:, pattern]) == pattern.sum()
            for start in range(0, len(members), _POINTS_AT_ONCE):
                at = members[start : start + _POINTS_AT_ONCE]
                no_gas = n[at].sum(axis=1) == 0
                if independent and no_gas.any():
                    shift[at[no_gas]] = 0.0  # the balances alone fix the amounts of the phases
                at = at[~no_gas]
                beside = response_beside_phases(
                    A, B[:, pattern], n[at], -gas_h[flat_T[at]], -phase_h[flat_T[at]][:, pattern]
                )
                if beside is not None:
                    response, total = beside
                    xi = np.where(n[at] > 0, response - total[:, None], 0.0)
                    shift[at] = (n[at] * xi**2) @ gas_constants
    fed = dataset["feed_amount"].sum("feed_species")
    reacting = frozen + xr.DataArray(shift.reshape(points), dims=amount.dims[:-1])
    basis = "per mol of feed at constant pressure, gas and condensed phases"
    return xr.Dataset(
        {
            f"heat_capacity_{kind}_per_feed": _labelled(
                value / fed,
                f"heat_capacity_{kind}_per_feed",
                "J mol-1 K-1",
                f"heat capacity, {words}, {basis}",
            )
            for kind, words, value in (
                ("frozen", "amounts frozen", frozen),
                ("equilibrium", "amounts following", reacting),
            )
        }
    )


def _taking_part(dataset: xr.Dataset) -> xr.DataArray:
    return dataset["phase_amount"].isel(phase=dataset["phase_takes_part"].values == 1)


def _of_phases(dataset: xr.Dataset, function: object, phases: ThermoTable) -> xr.DataArray:
    """Sum over the phases of amount times a molar function; absent phases, which may lack data, do not count."""
    T = dataset["temperature"]
    values = function(phases, T.values)  # type: ignore[operator]
    molar = xr.DataArray(np.nan_to_num(values), dims=(*T.dims, "phase"))
    total: xr.DataArray = xr.dot(_taking_part(dataset).drop_vars("phase"), molar, dim="phase")
    return total


def _by_species(dataset: xr.Dataset, function: object, table: ThermoTable) -> xr.DataArray:
    T = dataset["temperature"]
    values = function(table, T.values)  # type: ignore[operator]
    return xr.DataArray(values, dims=(*T.dims, "species"))


def _flat_index(T: xr.DataArray, dims: Sequence[object], shape: Sequence[int]) -> NDArray[np.intp]:
    """For every point in C order, the position of its temperature in T flattened."""
    own = np.arange(T.size).reshape(T.shape)
    sizes = dict(zip(dims, shape, strict=True))
    order = [T.dims.index(dim) for dim in dims if dim in T.dims]
    spread = own.transpose(order).reshape([sizes[dim] if dim in T.dims else 1 for dim in dims])
    return np.broadcast_to(spread, tuple(shape)).ravel()


def _labelled(array: xr.DataArray, name: str, units: str, long_name: str) -> xr.DataArray:
    result = array.rename(name)
    result.attrs = {"units": units, "long_name": long_name}
    return result.drop_vars(
        [c for c in result.coords if c not in result.dims and c not in ("temperature", "pressure")]
    )
