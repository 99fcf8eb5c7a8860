"""The calls of the package that benchmarks time, each with all that a caller has to compute for it."""

from __future__ import annotations

from typing import Any

import numpy as np

from gibbsmin.constants import STANDARD_PRESSURE
from gibbsmin.grid import solve_grid, solve_points
from gibbsmin.species import ThermoTable
from tests.benchmarks.gases import Feeds, Floats, Map


def solve_map(feeds: Feeds, grid: Map, threads: int | None) -> Any:
    """All feeds over the map; thermodynamic functions included."""
    table = feeds.table
    return solve_grid(
        table.formula_matrix,
        feeds.element_amounts,
        table.gibbs_RT(grid.temperature),
        grid.temperature,
        grid.log_pressure,
        threads=threads,
    )


def solve_scattered(feeds: Feeds, temperature: Floats, pressure: Floats, threads: int | None) -> Any:
    """Each temperature [K] with its pressure [Pa], (N,), and its feed, or the only one there is."""
    at = np.arange(len(temperature))
    return solve_points(
        feeds.table.formula_matrix,
        feeds.element_amounts,
        feeds.table.gibbs_RT(temperature),
        temperature,
        np.log(pressure / STANDARD_PRESSURE),
        at if len(feeds.amounts) > 1 else np.zeros_like(at),
        at,
        at,
        threads=threads,
    )


def potentials_of(table: ThermoTable, temperature: Floats, pressure: Floats) -> Floats:
    """mu0/RT + ln(p/p0), (N, S), which `gibbsmin.minimise` takes; K and Pa, (N,) each."""
    potentials: Floats = table.gibbs_RT(temperature)
    potentials += np.log(pressure / STANDARD_PRESSURE)[:, None]
    return potentials
