"""Scattered points: random temperature, pressure and feed each, the gases of the dense map."""

from __future__ import annotations

from functools import partial
from typing import Any

import numpy as np
import xarray as xr

import gibbsmin
from tests.benchmarks.cantera_loop import CanteraLoop
from tests.benchmarks.gases import SCATTERED_FEEDS, names_of, reforming_gases, scattered_reforming
from tests.benchmarks.measuring import Measured, Table, largest_differences, microseconds, ratio, rounds
from tests.benchmarks.ours import potentials_of, solve_scattered

TITLE = "Scattered points"
CANTERA = "Cantera, every point from its feed"


def measure(quick: bool) -> Measured:
    return {kind: _measure(kind, quick) for kind in SCATTERED_FEEDS}


def _measure(kind: str, quick: bool) -> Measured:
    table = reforming_gases()
    count = 500 if quick else 10_000
    feeds, T, p = scattered_reforming(count, kind)
    answers: dict[str, Any] = {}

    def by_points(threads: int | None) -> None:
        answers["solve_points"] = solve_scattered(feeds, T, p, threads)

    def by_minimise() -> None:
        potentials = potentials_of(table, T, p)
        answers["minimise"] = gibbsmin.minimise(table.formula_matrix, feeds.element_amounts, potentials)

    names = names_of(table.species)
    mixture = {
        name: xr.DataArray(feeds.amounts[:, column], dims="point") for column, name in enumerate(feeds.names)
    }

    def by_equilibrium(threads: int | None) -> None:
        answers["equilibrium"] = gibbsmin.equilibrium(
            mixture,
            xr.DataArray(T, dims="point"),
            xr.DataArray(p, dims="point"),
            species=names,
            threads=threads,
        )

    loop = CanteraLoop(table, (600.0, 1500.0))

    def by_cantera() -> None:
        answers[CANTERA] = loop.solve(T, p, feeds.fractions)

    seconds = rounds(
        {
            "solve_points, one thread": partial(by_points, 1),
            "solve_points, all threads": partial(by_points, None),
            "minimise, one call": by_minimise,
            "equilibrium, one thread": partial(by_equilibrium, 1),
            "equilibrium, all threads": partial(by_equilibrium, None),
            CANTERA: by_cantera,
        },
        1 if quick else 5,
    )
    amounts = answers["solve_points"].amounts
    fractions = amounts / amounts.sum(axis=1, keepdims=True)
    theirs, failures = answers[CANTERA]
    found = np.isfinite(theirs[:, 0])
    return {
        "species": len(names),
        "points": count,
        "seconds": seconds,
        "solved": {
            "solve_points": int((answers["solve_points"].status == 0).sum()),
            "minimise": int((answers["minimise"].status == 0).sum()),
            "equilibrium": int((answers["equilibrium"].status.values == 0).sum()),
            "Cantera": count - failures,
        },
        "difference from Cantera": largest_differences(theirs[found], fractions[found]),
        "difference from minimise": float(
            np.abs(
                answers["minimise"].log_mole_fractions
                - np.log(
                    np.maximum(fractions, 1e-300), where=fractions > 0, out=np.full(fractions.shape, -np.inf)
                )
            )[fractions > 1e-250].max()
        ),
    }


def tables(measured: Measured) -> list[Table]:
    return [_table(kind, measured[kind]) for kind in SCATTERED_FEEDS]


def _table(kind: str, measured: Measured) -> Table:
    seconds, points = measured["seconds"], measured["points"]
    rows = [
        [
            name,
            float(np.median(spent)),
            microseconds(spent, points),
            None if name == CANTERA else ratio(seconds[CANTERA], points, spent, points),
            f"{measured['solved'][name.split(',')[0]]:,}",
        ]
        for name, spent in seconds.items()
    ]
    absolute, relative = measured["difference from Cantera"]
    ranges = ", ".join(f"{name} {low:g} to {high:g}" for name, (low, high) in SCATTERED_FEEDS[kind].items())
    return Table(
        f'{TITLE}: {points:,} random temperatures, pressures and feeds of kind "{kind}", '
        f"{measured['species']} gases",
        ["", "s", "us a point", "times Cantera", "solved"],
        rows,
        f"Feeds [mol]: {ranges}. Largest difference of a mole fraction from Cantera's {absolute:.1e}, relative "
        f"above 1e-6 {relative:.1e}; between `solve_points` and `minimise`, relative, traces included, "
        f"{measured['difference from minimise']:.1e}.",
    )
