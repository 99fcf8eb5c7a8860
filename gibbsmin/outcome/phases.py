"""Results about pure condensed phases: how much of each there is, and how near an absent one is to forming.

The activity of a phase k over the gas is a_k = exp(a_k.pi - g_k/RT), with pi the element potentials and g_k the
Gibbs energy of the pure phase. It is 1 for a phase that is present and below 1 for one that has no driving force
to form. A phase that is held back, though it would form, shows more than 1: that much the gas is supersaturated.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gibbsmin.errors import UnknownSpeciesError

if TYPE_CHECKING:
    from gibbsmin.solving import Conditions
    from gibbsmin.species import Species, ThermoTable

FloatArray = NDArray[np.float64]

_NOT_IN_SPAN = 1e-9  # relative; far above rounding, far below any number of atoms
_POINTS_AT_ONCE = 65536


def phase_variables(
    conditions: Conditions,
    amount: FloatArray,
    gas_amount: FloatArray,
    element_potentials: FloatArray,
    unit: str,
    *,
    extrapolate: bool,
) -> dict[str, xr.Variable]:
    """Variables over the dimension `phase`: the phases that take part, then those that are held back.

    Args:
        conditions: what was solved.
        amount: (..., K) of the phases that take part. gas_amount: (..., S). Both in `unit`.
        element_potentials: (..., E).
    """
    phases = (*conditions.phases, *conditions.held_back)
    sizes = conditions.sizes
    dims, lead = tuple(sizes), tuple(sizes.values())
    over = (*dims, "phase")
    held = np.zeros((*lead, len(conditions.held_back)))
    held[np.isnan(element_potentials).all(axis=-1)] = np.nan  # a point that is not solved
    amount = np.concatenate([amount, held], axis=-1)
    table = conditions.table_of(phases, extrapolate)
    T = conditions.temperature
    gibbs = _spread(table.gibbs_RT(T.values.ravel()), T.values.shape, T.dims, sizes)
    atoms = atoms_of(phases, conditions.table.elements)
    log_activity = log_activities(element_potentials, atoms, gibbs, phases, conditions.table.elements)
    present = amount > 0
    log_activity[present] = 0.0
    there = np.concatenate([gas_amount, amount[..., : len(conditions.phases)]], axis=-1) > 0
    undetermined = undetermined_phases(conditions.table.formula_matrix, there, atoms) & ~present
    log_activity[undetermined & np.isfinite(log_activity)] = np.nan
    with np.errstate(over="ignore"):
        activity = np.exp(log_activity)
    activity[np.isinf(gibbs)] = np.nan
    activity[np.isnan(amount)] = np.nan
    molar_mass = np.array([each.molar_mass for each in phases])
    fed = conditions.feed.values.sum(axis=-1)
    fed_atoms = conditions.feed.values @ conditions.feed_composition
    feed_dims = tuple(conditions.feed_sizes)
    with np.errstate(divide="ignore", invalid="ignore"):
        per_feed = amount / _spread(np.ravel(fed), fed.shape, feed_dims, sizes)[..., None]
        totals = _spread(fed_atoms.reshape(-1, fed_atoms.shape[-1]), fed.shape, feed_dims, sizes)
        share = amount[..., None] * atoms / np.where(totals > 0, totals, np.nan)[..., None, :]
    mass_unit = unit.replace("mol", "kg")
    return {
        "phase_amount": _variable(over, amount, unit, "amount of the condensed phase at equilibrium"),
        "phase_amount_per_feed": _variable(over, per_feed, "1", "amount of the phase per mol of feed"),
        "phase_mass": _variable(over, amount * molar_mass, mass_unit, "mass of the condensed phase"),
        "phase_element_fraction": _variable(
            (*over, "element"), share, "1", "fraction of the element fed that is in the phase"
        ),
        "phase_activity": _variable(
            over,
            activity,
            "1",
            "activity of the phase at equilibrium",
            comment="1 where the phase is present, below 1 where nothing drives it to form; above 1 for a phase that "
            "is held back and would form; 0 where an element of it is not fed; NaN where it has no data at "
            "this temperature or the composition does not determine it",
        ),
        "phase_form": xr.Variable(
            (*T.dims, "phase"),
            _forms(table, T.values),
            {"long_name": "form of the phase by its data", "comment": "empty where it has no data"},
        ),
    }


def phase_coordinates(conditions: Conditions) -> dict[str, xr.Variable]:
    phases = (*conditions.phases, *conditions.held_back)
    takes_part = np.arange(len(phases)) < len(conditions.phases)
    return {
        "phase": xr.Variable(
            ("phase",),
            np.array([each.name for each in phases], dtype=np.str_),
            {"long_name": "condensed phase"},
        ),
        "phase_takes_part": _variable(
            ("phase",),
            takes_part.astype(np.int8),
            "1",
            "whether the phase may form",
            flag_values=np.array([0, 1], dtype=np.int8),
            flag_meanings="held_back takes_part",
        ),
        "phase_molar_mass": _variable(
            ("phase",), np.array([each.molar_mass for each in phases]), "kg mol-1", "molar mass"
        ),
        "phase_atoms": _variable(
            ("phase", "element"),
            atoms_of(phases, conditions.table.elements),
            "1",
            "atoms of the element per formula unit",
        ),
    }


def log_activities(
    element_potentials: FloatArray,
    atoms: FloatArray,
    gibbs: FloatArray,
    phases: Sequence[Species],
    elements: Sequence[str],
) -> FloatArray:
    """ln a_k = a_k.pi - g_k/RT, (..., K); -inf where an element of the phase is absent or it has no data.

    Args:
        element_potentials: (..., E), NaN for an absent element, all NaN where the point is not solved.
        atoms: (K, E). gibbs: (..., K), +inf where a phase has no data.
    """
    unknown = np.isnan(element_potentials)
    unsolved = unknown.all(axis=-1)
    value: FloatArray = np.nan_to_num(element_potentials) @ atoms.T - gibbs
    value[(unknown.astype(np.float64) @ np.abs(atoms).T) > 0] = -np.inf
    foreign = [not set(each.composition).issubset(elements) for each in phases]
    value[..., foreign] = -np.inf
    value[unsolved] = np.nan
    return value


def atoms_of(species: Sequence[Species], elements: Sequence[str]) -> FloatArray:
    """Atoms of each of `elements` per formula unit, (K, E)."""
    rows = [[float(each.composition.get(element, 0.0)) for element in elements] for each in species]
    return np.array(rows).reshape(len(species), len(elements))


def phase_series(dataset: xr.Dataset, variable: str, phase: str) -> xr.DataArray:
    """One phase of a variable such as `phase_activity`.

    Raises:
        UnknownSpeciesError: the phase is not listed.
    """
    names = [str(name) for name in dataset["phase"].values] if "phase" in dataset.coords else []
    if phase not in names:
        raise UnknownSpeciesError(phase, names[:5])
    return dataset[variable].isel(phase=names.index(phase), drop=True)


def undetermined_phases(
    formula_matrix: FloatArray, there: NDArray[np.bool_], atoms: FloatArray
) -> NDArray[np.bool_]:
    """(..., K) where a phase cannot be written in the species that are there, so that they say nothing of it.

    Args:
        formula_matrix: (E, S). there: which species there are, (..., S). atoms: of the phases, (K, E).
    """
    flat = there.reshape(-1, there.shape[-1])
    out = np.zeros((len(flat), len(atoms)), dtype=bool)
    known: dict[bytes, NDArray[np.bool_]] = {}
    for start in range(0, len(flat), _POINTS_AT_ONCE):
        part = np.packbits(flat[start : start + _POINTS_AT_ONCE], axis=1)
        patterns, which = np.unique(part, axis=0, return_inverse=True)
        outside = np.empty((len(patterns), len(atoms)), dtype=bool)
        for i, pattern in enumerate(patterns):
            key = pattern.tobytes()
            if key not in known:
                chosen = np.unpackbits(pattern)[: flat.shape[1]].astype(bool)
                known[key] = _outside_span(formula_matrix[:, chosen], atoms.T)
            outside[i] = known[key]
        out[start : start + _POINTS_AT_ONCE] = outside[which.ravel()]
    return out.reshape(*there.shape[:-1], len(atoms))


def _outside_span(columns: FloatArray, wanted: FloatArray) -> NDArray[np.bool_]:
    if columns.size == 0:
        return np.ones(wanted.shape[1], dtype=bool)
    U, size, _ = np.linalg.svd(columns, full_matrices=False)
    basis = U[:, size > _NOT_IN_SPAN * size[0]]
    rest = np.linalg.norm(wanted - basis @ (basis.T @ wanted), axis=0)
    outside: NDArray[np.bool_] = rest > _NOT_IN_SPAN * np.linalg.norm(wanted, axis=0)
    return outside


def _spread(
    values: FloatArray, own_shape: tuple[int, ...], own_dims: Sequence[str], sizes: Mapping[str, int]
) -> FloatArray:
    """Values (own points, ...) made to broadcast over all points: (1 or size of each dimension, ...)."""
    rest = values.shape[1:]
    order = [own_dims.index(dim) for dim in sizes if dim in own_dims]
    moved = np.reshape(values, (*own_shape, *rest)).transpose(
        *order, *range(len(own_shape), len(own_shape) + len(rest))
    )
    lengths = [sizes[dim] if dim in own_dims else 1 for dim in sizes]
    result: FloatArray = np.broadcast_to(np.reshape(moved, (*lengths, *rest)), (*sizes.values(), *rest))
    return result


def _forms(table: ThermoTable, T: FloatArray) -> NDArray[np.str_]:
    index = table.form_index(T.ravel())
    words = [
        [each.forms[i].description if i >= 0 else "" for i, each in zip(row, table.species, strict=True)]
        for row in index.tolist()
    ]
    return np.array(words, dtype=np.str_).reshape(*T.shape, len(table.species))


def _variable(dims: tuple[str, ...], values: Any, units: str, long_name: str, **more: Any) -> xr.Variable:
    return xr.Variable(dims, values, {"units": units, "long_name": long_name, **more})
