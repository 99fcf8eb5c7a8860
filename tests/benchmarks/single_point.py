"""How long one point takes, called by itself after warming up."""

from __future__ import annotations

from collections.abc import Callable
from functools import partial
from typing import Any

import gibbsmin
from tests.benchmarks.cantera_loop import CanteraLoop
from tests.benchmarks.gases import (
    combustion_feed,
    combustion_gases,
    combustion_map,
    names_of,
    scattered_combustion,
)
from tests.benchmarks.measuring import Measured, Table, latencies, spread
from tests.benchmarks.ours import potentials_of

TITLE = "One point at a time"
COUNTS = (5, 30, 50, 100, 150)


def measure(quick: bool) -> Measured:
    calls = 5 if quick else 200
    T, p = scattered_combustion(calls)
    limits = combustion_map(2, 2).temperature
    by_species = {}
    for count in COUNTS:
        table = combustion_gases(count)
        feed = combustion_feed(table, 0.8)
        potentials = potentials_of(table, T, p)
        mixture = dict(zip(feed.names, feed.amounts[0].tolist(), strict=True))
        names = names_of(table.species)
        loop = CanteraLoop(table, (float(limits[0]), float(limits[-1])))

        def one(number: int, phase: Any = loop.phase, X: Any = feed.fractions[0]) -> None:
            phase.TPX = T[number], p[number], X
            phase.equilibrate("TP")

        contenders: dict[str, list[Callable[[], object]]] = {
            "minimise": [
                partial(gibbsmin.minimise, table.formula_matrix, feed.element_amounts[0], row)
                for row in potentials
            ],
            "equilibrium": [
                partial(gibbsmin.equilibrium, mixture, float(T[k]), float(p[k]), species=names)
                for k in range(calls)
            ],
            "Cantera": [partial(one, number) for number in range(calls)],
        }
        solved = gibbsmin.minimise(table.formula_matrix, feed.element_amounts[0], potentials).solved
        by_species[str(count)] = {
            "solved": int(solved.sum()),
            **{name: spread(latencies(each)) for name, each in contenders.items()},
        }
    return {"calls": calls, "by species": by_species}


def tables(measured: Measured) -> list[Table]:
    rows: list[list[Any]] = []
    for count, figures in measured["by species"].items():
        row: list[Any] = [count]
        for name in ("minimise", "equilibrium", "Cantera"):
            row += [figures[name][key] * 1e3 for key in ("median", "95 %")]
        rows.append([*row, f"{figures['solved']} of {measured['calls']}"])
    return [
        Table(
            f"{TITLE}: methane in air, lean, {measured['calls']} random temperatures and pressures [ms]",
            [
                "gases",
                "`minimise`, median",
                "95 %",
                "`equilibrium`, median",
                "95 %",
                "Cantera, median",
                "95 %",
                "solved",
            ],
            rows,
        )
    ]
