"""What the charts can show: every result that has a value at each point of the grid, by kind.

The kinds fix the order in the chooser and the colour scale. A result with one further dimension of labels
(activities of phases, ln K of reactions) becomes one quantity for each label, whatever its name, so results
that are added to the data set later need nothing here.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
import xarray as xr

from gibbsmin.outcome.composition import amount_at_equilibrium
from gibbsmin.outcome.summary import SHOWN_UNITS
from gibbsmin.report.boundaries import is_boundary
from gibbsmin.report.markup import pretty_name, pretty_words

Kind = Literal["composition", "phase", "result", "trust", "energy", "property", "evidence"]

GROUPS: dict[Kind, str] = {
    "composition": "Composition",
    "phase": "Condensed phases",
    "result": "Wanted results",
    "trust": "Trust in reactions alone",
    "energy": "Energy",
    "property": "Properties",
    "evidence": "Evidence",
}
_ENERGY = ("heat_duty", "heat_duty_per_feed", "enthalpy")
_EVIDENCE = ("balance_residual", "iterations", "crosscheck_difference", "status", "crosscheck_status")
_TRUST = ("alone_reason", "alone_error", "condensed_activity")
_UNSHOWN = frozenset({"gap", "extrapolated", "feed_amount", "amount"})
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
    "crosscheck_status": "outcome of the cross-check",
    "phase_amount": "amount of",
    "phase_amount_per_feed": "amount per mol of feed of",
    "phase_mass": "mass of",
    "phase_activity": "activity of",
    "alone_reason": "verdict",
    "alone_error": "error of the mole fraction of",
    "condensed_activity": "largest activity of a condensed phase",
}
_BY_SPECIES = frozenset({"alone_mole_fraction"})  # its error says the same more plainly
_FLAG_WORDS = {"within": "within tolerance", "k_error": "error of K"}
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
        flags: words for the values 0, 1 ... of a result that is no measure but one of several verdicts.
    """

    name: str
    label: str
    kind: Kind
    group: str
    unit: str
    values: xr.DataArray
    flags: tuple[str, ...] = ()


def quantities(dataset: xr.Dataset, key_species: Sequence[str] = ()) -> Iterator[Quantity]:
    """Every result over the grid beside the mole fractions, which the page has anyway.

    Args:
        dataset: of a run.
        key_species: for which results by species (errors of their mole fractions) are shown.
    """
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
        elif name == "phase_element_fraction":
            found += list(_shares(array))
        elif len(further) == 2 and "species" in further and name not in _BY_SPECIES:
            (other,) = (dim for dim in further if dim != "species")
            for each in key_species:
                found += list(_by_label(name, array.sel(species=each), other, each))
    found.append(_gap(dataset))
    order = list(GROUPS)
    yield from sorted(found, key=lambda each: order.index(each.kind))


def _by_label(name: str, array: xr.DataArray, dim: str, species: str = "") -> Iterator[Quantity]:
    title = _title(name, array)
    kind = _kind(name, array)
    group = GROUPS[kind] if kind != "property" else title[:1].upper() + title[1:]
    for position, label in enumerate(array[dim].values if dim in array.coords else range(array.sizes[dim])):
        part = array.isel({dim: position})
        shown = pretty_name(str(label))
        words = (
            f"{title} {shown}"
            if kind == "phase"
            else f"{title} {pretty_name(species)}".rstrip() + f", {shown}"
        )
        made = _quantity("|".join(filter(None, (name, species, str(label)))), words, part, kind)
        yield replace(made, group=group)


def _shares(array: xr.DataArray) -> Iterator[Quantity]:
    """Of each element the share that is in a phase, for the phases that hold it anywhere."""
    for phase in map(str, array["phase"].values):
        for element in map(str, array["element"].values):
            part = array.sel(phase=phase, element=element)
            if float(np.nanmax(part.values, initial=0.0)) > 0:
                name, label = (
                    f"phase_element_fraction|{phase}|{element}",
                    f"share of {element} in {pretty_name(phase)}",
                )
                yield _quantity(name, label, part, "phase")


def _quantity(name: str, label: str, array: xr.DataArray, kind: Kind) -> Quantity:
    if "flag_meanings" in array.attrs:
        return Quantity(name, label, kind, GROUPS[kind], "", *_verdicts(array))
    unit, factor = unit_shown(array)
    return Quantity(name, label, kind, GROUPS[kind], unit, array * factor)


def _verdicts(array: xr.DataArray) -> tuple[xr.DataArray, tuple[str, ...]]:
    """CF flags as positions 0, 1 ... in the list of their words."""
    codes = np.asarray(array.attrs["flag_values"])
    order = np.argsort(codes)
    meanings = str(array.attrs["flag_meanings"]).split()
    words = [_FLAG_WORDS.get(each) or each.replace("_", " ") for each in meanings]
    positions = np.searchsorted(codes[order], array.values).astype(np.float64)
    return array.copy(data=positions), tuple(words[int(i)] for i in order)


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
    if name.startswith("phase_"):
        return "phase"
    if name in _TRUST:
        return "trust"
    return "evidence" if name in _EVIDENCE else "property"


def gap_per_mol(dataset: xr.Dataset) -> xr.DataArray:
    """The optimality gap per mol of gas and condensed phases [1], over the grid."""
    return (dataset["gap"] / amount_at_equilibrium(dataset)).transpose(*dataset["status"].dims)


def _gap(dataset: xr.Dataset) -> Quantity:
    """The gap per mol of gas: a number that compares between feeds."""
    values = gap_per_mol(dataset)
    label = "optimality gap per mol"
    return Quantity("gap", label, "evidence", GROUPS["evidence"], "", values)
