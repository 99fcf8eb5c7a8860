"""The derived results of a run: those that always come along, and those its scenario asks for by name."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import xarray as xr

from gibbsmin.outcome import composition, energy

if TYPE_CHECKING:
    from gibbsmin.scenario.model import WantedResults
    from gibbsmin.species import ThermoTable


def add_derived(
    dataset: xr.Dataset,
    table: ThermoTable,
    wanted: WantedResults,
    fed: xr.DataArray | None,
    phases: ThermoTable | None = None,
) -> xr.Dataset:
    """The data set with all derived results.

    Args:
        dataset: as `gibbsmin.equilibrium` returns it.
        table: thermodynamic functions of its gases.
        wanted: results by name; each becomes a variable called as `variable_name` says.
        fed: enthalpy of the feed (see `energy.feed_enthalpy`), or None when a stream has no temperature: then
            there is no heat duty.
        phases: thermodynamic functions of the condensed phases that take part, or None.
    """
    results: dict[str, xr.DataArray] = {}
    if wanted.dry_basis and composition.WATER in dataset["species"].values:
        results["dry_mole_fraction"] = composition.dry_mole_fractions(dataset)
    results["mean_molar_mass"] = composition.mean_molar_mass(dataset)
    results["density"] = composition.density(dataset)
    results["enthalpy"] = energy.mixture_enthalpy(dataset, table)
    if phases is None:
        parts = [energy.heat_capacities(dataset, table)]
    else:
        parts = [energy.heat_capacities_with_phases(dataset, table, phases)]
        results["enthalpy_per_feed"] = energy.enthalpy_per_feed(dataset, table, phases)
    if fed is not None:
        parts.append(energy.heat_duty(dataset, table, fed, phases))
    for part in parts:
        results.update({str(name): array for name, array in part.data_vars.items()})
    complete = dataset.assign({name: array.variable for name, array in results.items()})
    order = dataset["status"].dims
    for name, array in named_results(dataset, wanted):
        own = variable_name(name, complete)
        # A result of amounts and of the feed has all dimensions, but not always in the order of the grid.
        variable = array.transpose(*order).variable
        variable.attrs = {**array.attrs, "long_name": name, "description": array.attrs["long_name"]}
        complete = complete.assign({own: variable})
    return complete


def variable_name(name: str, dataset: xr.Dataset) -> str:
    """The variable that holds the wanted result `name`: the name itself, as far as NetCDF allows.

    A slash becomes "to" ("H2/CO": "H2 to CO"), and a name that a variable or dimension already has gets the
    ending "(wanted)".
    """
    own = " ".join(name.replace("/", " to ").split()) or "result"
    taken = {*map(str, dataset.variables), *map(str, dataset.dims)}
    while own in taken:
        own += " (wanted)"
    return own


def named_results(dataset: xr.Dataset, wanted: WantedResults) -> Iterator[tuple[str, xr.DataArray]]:
    """The results that a scenario asks for by name, in the order of its sections."""
    for conversion in wanted.conversions:
        yield conversion.name, composition.conversion(dataset, conversion.species)
    for each in wanted.yields:
        if each.element is not None:
            yield each.name, composition.element_yield(dataset, each.product, each.element, each.reactant)
        elif each.reactant is not None:
            yield each.name, composition.product_yield(dataset, each.product, each.reactant)
    for choice in wanted.selectivities:
        yield choice.name, composition.selectivity(dataset, choice.product, choice.reactant, choice.element)
    for ratio in wanted.ratios:
        yield ratio.name, composition.amount_ratio(dataset, ratio.numerator, ratio.denominator)
