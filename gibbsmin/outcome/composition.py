"""Results that follow from amounts alone: dry basis, conversion, yield, selectivity, ratios, density.

Mole fractions and density are those of the gas; conversions, yields, selectivities and ratios count condensed
phases too.

Every function takes the data set of `gibbsmin.equilibrium` and returns an `xarray.DataArray` over its points
with `units` and `long_name`. A result whose denominator is zero is NaN, and so are unsolved points.
n is the amount at equilibrium and n0 the amount in the feed; a species that is not in the feed has n0 = 0.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import xarray as xr

from gibbsmin.constants import GAS_CONSTANT
from gibbsmin.errors import UnknownSpeciesError
from gibbsmin.outcome.phases import phase_series

WATER = "H2O"


def dry_mole_fractions(dataset: xr.Dataset, water: str = WATER) -> xr.DataArray:
    """Mole fractions of the gas without its water [1]: x_j / (1 - x_water); water itself is 0.

    The denominator is summed over the other species, so it keeps its digits in nearly pure steam.
    """
    fraction = dataset["mole_fraction"].copy()
    if water in fraction["species"].values:
        axis = fraction.get_axis_num("species")
        fraction.loc[{"species": water}] *= 0.0  # not = 0: an unsolved point stays NaN
        others = fraction.values.sum(axis=axis, keepdims=True)
        with np.errstate(divide="ignore", invalid="ignore"):
            fraction.values /= others
    return _labelled(fraction, "dry_mole_fraction", "1", "mole fraction in the dry gas")


def conversion(dataset: xr.Dataset, species: str) -> xr.DataArray:
    """Conversion of a feed species [1]: 1 - n / n0. Negative where more leaves than enters."""
    fed = _fed(dataset, species)
    result = _quotient(fed - amount_out(dataset, species), fed)
    return _labelled(result, f"conversion_{species}", "1", f"conversion of {species}")


def product_yield(dataset: xr.Dataset, product: str, reactant: str) -> xr.DataArray:
    """Yield [mol/mol]: (n - n0) of the product / n0 of the reactant."""
    result = _quotient(_formed(dataset, product), _fed(dataset, reactant))
    return _labelled(result, f"yield_{product}", "1", f"{product} formed per {reactant} fed, mol/mol")


def element_yield(
    dataset: xr.Dataset, product: str, element: str, reactant: str | None = None
) -> xr.DataArray:
    """Yield on an element [1]: a_product (n - n0) of the product / atoms of the element fed.

    a is the number of atoms of the element per molecule. Atoms fed are those in `reactant`, or with None in
    the whole feed.
    """
    formed = _atoms(dataset, product, element) * _formed(dataset, product)
    if reactant is None:
        fed = (dataset["feed_amount"] * dataset["feed_atoms"].sel(element=element, drop=True)).sum(
            "feed_species"
        )
        base = "the feed"
    else:
        fed = _atoms(dataset, reactant, element) * _fed(dataset, reactant)
        base = reactant
    result = _quotient(formed, fed)
    return _labelled(result, f"yield_{product}", "1", f"{element} of {base} that becomes {product}")


def selectivity(dataset: xr.Dataset, product: str, reactant: str, element: str) -> xr.DataArray:
    """Selectivity on an element [1]: a (n - n0) of the product / a (n0 - n) of the reactant.

    a is the number of atoms of the element per molecule, of the one and of the other.
    """
    formed = _atoms(dataset, product, element) * _formed(dataset, product)
    gone = -_atoms(dataset, reactant, element) * _formed(dataset, reactant)
    result = _quotient(formed, gone)
    return _labelled(
        result, f"selectivity_{product}", "1", f"{element} of converted {reactant} that becomes {product}"
    )


def amount_ratio(dataset: xr.Dataset, numerator: Sequence[str], denominator: Sequence[str]) -> xr.DataArray:
    """Ratio of amounts at equilibrium [mol/mol]: sum n over `numerator` / sum n over `denominator`."""
    top = sum((amount_out(dataset, name) for name in numerator[1:]), amount_out(dataset, numerator[0]))
    bottom = sum((amount_out(dataset, name) for name in denominator[1:]), amount_out(dataset, denominator[0]))
    title = f"{' + '.join(numerator)} over {' + '.join(denominator)}, mol/mol"
    return _labelled(_quotient(top, bottom), "ratio", "1", title)


def mean_molar_mass(dataset: xr.Dataset) -> xr.DataArray:
    """Mean molar mass of the gas [kg/mol]: sum x_j M_j."""
    result = xr.dot(dataset["mole_fraction"], dataset["molar_mass"], dim="species")
    return _labelled(result, "mean_molar_mass", "kg mol-1", "mean molar mass of the gas")


def density(dataset: xr.Dataset) -> xr.DataArray:
    """Ideal-gas density [kg/m3]: p M / (R T), M the mean molar mass, R the molar gas constant."""
    result = mean_molar_mass(dataset) * (dataset["pressure"] / (GAS_CONSTANT * dataset["temperature"]))
    return _labelled(result, "density", "kg m-3", "density of the ideal gas")


def amount_at_equilibrium(dataset: xr.Dataset) -> xr.DataArray:
    """Gas and condensed phases together, in the unit of the amounts."""
    total = dataset["gas_amount"].copy(deep=False)
    if "phase_amount" in dataset:
        total = total + dataset["phase_amount"].sum("phase", skipna=False)
    return _labelled(
        total, "amount", dataset["gas_amount"].attrs["units"], "amount of gas and condensed phases"
    )


def feed_total(dataset: xr.Dataset) -> xr.DataArray:
    """Total amount of the feed, in the unit of the amounts."""
    total = dataset["feed_amount"].sum("feed_species")
    return _labelled(total, "feed_total", dataset["feed_amount"].attrs["units"], "total amount of the feed")


def amount_out(dataset: xr.Dataset, species: str) -> xr.DataArray:
    """Amount of one gas or condensed phase at equilibrium; zero for a species of the feed that is neither.

    Raises:
        UnknownSpeciesError: neither listed nor a species of the feed.
    """
    if species in dataset["species"].values:
        return dataset["amount"].sel(species=species, drop=True)
    if "phase" in dataset.coords and species in dataset["phase"].values:
        return phase_series(dataset, "phase_amount", species)
    if species in dataset["feed_species"].values:
        return xr.zeros_like(dataset["gas_amount"]).where(dataset["gas_amount"].notnull())
    raise UnknownSpeciesError(species, [str(name) for name in dataset["species"].values[:5]])


def _fed(dataset: xr.Dataset, species: str) -> xr.DataArray:
    if species in dataset["feed_species"].values:
        return dataset["feed_amount"].sel(feed_species=species, drop=True)
    return xr.zeros_like(dataset["feed_amount"].isel(feed_species=0, drop=True))


def _formed(dataset: xr.Dataset, species: str) -> xr.DataArray:
    return amount_out(dataset, species) - _fed(dataset, species)


def _atoms(dataset: xr.Dataset, species: str, element: str) -> float:
    for atoms, names in (("atoms", "species"), ("phase_atoms", "phase"), ("feed_atoms", "feed_species")):
        if (
            names in dataset.coords
            and species in dataset[names].values
            and element in dataset["element"].values
        ):
            return float(dataset[atoms].sel({names: species, "element": element}))
    return 0.0


def _quotient(top: xr.DataArray, bottom: xr.DataArray) -> xr.DataArray:
    with np.errstate(divide="ignore", invalid="ignore"):
        return top / bottom.where(bottom != 0)


def _labelled(array: Any, name: str, units: str, long_name: str) -> xr.DataArray:
    result: xr.DataArray = array.rename(name)
    result.attrs = {"units": units, "long_name": long_name}
    return result
