"""Distance to the floor: the dense map in passes.

A pass evaluates the thermodynamic functions once per temperature and one exponential per species and point,
in blocks that stay in the cache, and stores nothing; no method that looks at every species can be
faster. A second kind of pass evaluates the thermodynamic functions at every point, as scattered points need.
"""

from __future__ import annotations

import numpy as np

from tests.benchmarks.gases import reforming_feed, reforming_gases, reforming_map
from tests.benchmarks.measuring import Measured, Table, median, microseconds, ratio, rounds
from tests.benchmarks.ours import solve_map

TITLE = "Distance to the floor"
BLOCK = 1000  # points
MAP, PASS, EACH = "map", "pass", "pass with the functions at every point"


def measure(quick: bool) -> Measured:
    table, feed = reforming_gases(), reforming_feed()
    grid = reforming_map(181, 23) if quick else reforming_map()
    T_of_points = grid.flat()[0]
    species = len(table.species)
    exponents = np.random.default_rng(2).uniform(-80.0, 0.0, (species, BLOCK))
    y = np.empty_like(exponents)
    solved = []

    def one_pass(temperatures: np.ndarray) -> None:
        for first in range(0, len(temperatures), BLOCK):
            table.gibbs_RT(temperatures[first : first + BLOCK])
        for first in range(0, grid.points, BLOCK):
            here = min(BLOCK, grid.points - first)
            np.exp(exponents[:, :here], out=y[:, :here])

    def the_map() -> None:
        solution = solve_map(feed, grid, 1)
        solved.append(int((solution.status == 0).sum()))

    seconds = rounds(
        {
            MAP: the_map,
            PASS: lambda: one_pass(grid.temperature),
            EACH: lambda: one_pass(T_of_points),
        },
        2 if quick else 7,
    )
    return {"species": species, "points": grid.points, "solved": min(solved), "seconds": seconds}


def tables(measured: Measured) -> list[Table]:
    seconds, points = measured["seconds"], measured["points"]
    rows = [
        [
            {MAP: "the map, solved and proved", PASS: "one pass", EACH: f"one {EACH}"}[name],
            median(spent),
            microseconds(spent, points),
            None if name == MAP else ratio(seconds[MAP], points, spent, points),
        ]
        for name, spent in seconds.items()
    ]
    return [
        Table(
            f"{TITLE}: {points:,} points of steam reforming, {measured['species']} gases, one thread",
            ["", "s", "us a point", "passes that the map costs"],
            rows,
            f"Solved: {measured['solved']:,} of {points:,}.",
        )
    ]
