"""Dew point of the equilibrium gas: where it becomes saturated when cooled at its pressure without reacting further.

    ln (x p / p0) = ln (p_sat(T) / p0) = g_liquid(T)/RT - g_vapour(T)/RT,

with the vapour an ideal gas and the liquid pure and incompressible at 1 bar (no Poynting factor, no dissolved gas).
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gibbsmin.constants import STANDARD_PRESSURE
from gibbsmin.species import ThermoTable

if TYPE_CHECKING:
    from gibbsmin.species import Species, SpeciesLibrary

FloatArray = NDArray[np.float64]


def liquid_of(vapour: Species, library: SpeciesLibrary) -> Species:
    """The liquid of a gas. Raises UnknownSpeciesError, AmbiguousSpeciesError, FormulaError if there is none."""
    return library.find_condensed(f"{vapour.formula}(l)")


def vapour_pressure(vapour: Species, liquid: Species, temperature: FloatArray) -> FloatArray:
    """Vapour pressure [Pa] at T [K] from the two records alone; infinite where the liquid has no data."""
    g = ThermoTable((vapour, liquid), extrapolate=False).gibbs_RT(temperature)
    pressure: FloatArray = STANDARD_PRESSURE * np.exp(g[:, 1] - g[:, 0])
    return pressure


def dew_point(dataset: xr.Dataset, vapour: Species, liquid: Species) -> xr.DataArray:
    """Dew point [K] over the points; NaN where it lies outside the data of the liquid, or no vapour is there."""
    partial = dataset["mole_fraction"].sel(species=vapour.name, drop=True) * dataset["pressure"]
    dims = dataset["status"].dims
    partial = partial.transpose(*dims)
    low, high = max(liquid.lower, vapour.lower), min(liquid.upper, vapour.upper)
    table = ThermoTable((vapour, liquid))
    flat = partial.values.ravel()
    with np.errstate(divide="ignore", invalid="ignore"):
        target = np.log(flat / STANDARD_PRESSURE)
    ends = _log_saturation(table, np.array([low, high]))
    inside = np.flatnonzero((target >= ends[0]) & (target <= ends[1]))
    found = np.full(flat.shape, np.nan)
    if inside.size:
        from scipy.optimize import elementwise

        def excess(T: FloatArray, wanted: FloatArray) -> FloatArray:
            return _log_saturation(table, T) - wanted

        bracket = np.full(inside.size, low), np.full(inside.size, high)
        found[inside] = elementwise.find_root(excess, bracket, args=(target[inside],)).x
    result = xr.DataArray(found.reshape(partial.shape), dims=dims, name=f"dew point of {vapour.name}")
    result.attrs = {
        "units": "K",
        "long_name": f"temperature at which {liquid.name} begins to condense from the unchanged gas",
        "comment": f"ideal vapour; NaN outside {low:g} to {high:g} K, the data of {liquid.name}",
    }
    return result


def _log_saturation(table: ThermoTable, T: FloatArray) -> FloatArray:
    g = table.gibbs_RT(np.ravel(T))
    value: FloatArray = (g[:, 1] - g[:, 0]).reshape(np.shape(T))
    return value
