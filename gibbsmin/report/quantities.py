"""What the charts can show: every result that has a value at each point of the grid, by kind.

The kinds fix the order in the chooser and the colour scale. A result with one further dimension of labels
(activities of phases, ln K of reactions) becomes one quantity for each label, whatever its name, so results
that are added to the data set later need nothing here.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np
import xarray as xr

from gibbsmin.outcome.summary import SHOWN_UNITS
from gibbsmin.report.boundaries import is_boundary
from gibbsmin.report.markup import pretty_name, pretty_words

Kind = Literal["composition", "result", "energy", "property", "evidence"]

GROUPS: dict[Kind, str] = {
    "composition": "Composition",
    "result": "Wanted results",
    "energy": "Energy",
    "property": "Properties",
    "evidence": "Evidence",
}
_ENERGY = ("heat_duty", "heat_duty_per_feed", "enthalpy")
_EVIDENCE = ("balance_residual", "iterations", "crosscheck_difference")
_UNSHOWN = frozenset({"status", "gap", "crosscheck_status", "extrapolated", "feed_amount", "amount"})
_OWN_CHARTS = frozenset({"mole_fraction", "dry_mole_fraction", "element_potential"})
_SHORT = {  # the data set's own long names say more than a table has room for
    "heat_duty": "heat duty",
    "heat_duty_per_feed": "heat duty per mol of feed",
    "enthalpy": "enthalpy per mol of gas",
    "gas_amount": "amount of gas",
    "mean_molar_mass": "mean molar mass",
    "density": "density",
    "heat_capacity_frozen": "heat capacity, frozen",
    "heat_capacity_equilibrium": "heat capacity, reacting",
    "balance_residual": "largest error of an element balance",
    "crosscheck_difference": "difference in the cross-check",
}
_PLAIN_UNITS = {
    "kg mol-1": ("g/mol", 1e3),
    "kg m-3": ("kg/m³", 1.0),
    "J mol-1 K-1": ("J/(mol K)", 1.0),
    "mol h-1": ("kmol/h", 1e-3),
}


@dataclass(frozen=True)
class Quantity:
    """One entry of the chooser.

    Attributes:
        name: unique, for tests and links.
        label: for people.
        unit: of the values as shown, "" for a pure number.
        values: over the grid, in that unit; NaN where a point is not solved.
    """

    name: str
    label: str
    kind: Kind
    group: str
    unit: str
    values: xr.DataArray


def quantities(dataset: xr.Dataset) -> Iterator[Quantity]:
    """Every result over the grid beside the mole fractions, which the page has anyway."""
    grid = set(dataset["status"].dims)
    found = []
    for key, array in dataset.data_vars.items():
        name = str(key)
        if name in _UNSHOWN or name in _OWN_CHARTS or array.dtype.kind not in "fi" or is_boundary(array):
            continue
        further = [str(dim) for dim in array.dims if dim not in grid]
        if not further and set(array.dims) == grid:
            found.append(_quantity(name, _title(name, array), array, _kind(name, array)))
        elif len(further) == 1 and set(array.dims) == {*grid, *further}:
            found += list(_by_label(name, array, further[0]))
    found.append(_gap(dataset))
    order = list(GROUPS)
    yield from sorted(found, key=lambda each: order.index(each.kind))


def _by_label(name: str, array: xr.DataArray, dim: str) -> Iterator[Quantity]:
    title = _title(name, array)
    for label in array[dim].values if dim in array.coords else range(array.sizes[dim]):
        part = array.sel({dim: label}) if dim in array.coords else array.isel({dim: int(label)})
        made = _quantity(f"{name}|{label}", f"{title}, {pretty_name(str(label))}", part, "property")
        yield Quantity(
            made.name, made.label, made.kind, title[:1].upper() + title[1:], made.unit, made.values
        )


def _quantity(name: str, label: str, array: xr.DataArray, kind: Kind) -> Quantity:
    unit, factor = unit_shown(array)
    return Quantity(name, label, kind, GROUPS[kind], unit, array * factor)


def unit_shown(array: xr.DataArray) -> tuple[str, float]:
    """The unit in which people read a variable, and the factor to it."""
    stored = str(array.attrs.get("units", "1"))
    if stored == "W" and float(np.nanmax(np.abs(array.values), initial=0.0)) >= 1e7:
        return "MW", 1e-6
    return SHOWN_UNITS.get(stored) or _PLAIN_UNITS.get(stored) or (stored, 1.0)


def _title(name: str, array: xr.DataArray) -> str:
    """The shortest words that still say what it is."""
    words = _SHORT.get(name) or str(array.attrs.get("long_name", name.replace("_", " ")))
    return pretty_words(words)


def _kind(name: str, array: xr.DataArray) -> Kind:
    if "description" in array.attrs:
        return "result"
    if name in _ENERGY:
        return "energy"
    return "evidence" if name in _EVIDENCE else "property"


def _gap(dataset: xr.Dataset) -> Quantity:
    """The gap per mol of gas: a number that compares between feeds."""
    values = (dataset["gap"] / dataset["gas_amount"]).transpose(*dataset["status"].dims)
    label = "optimality gap per mol of gas"
    return Quantity("gap", label, "evidence", GROUPS["evidence"], "", values)
