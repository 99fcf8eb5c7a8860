"""Against Cantera's default solver by number of species, for lean, rich and exactly stoichiometric feeds."""

from __future__ import annotations

from functools import partial
from typing import Any

import numpy as np

from gibbsmin import minimise
from tests.benchmarks.cantera_loop import CanteraLoop
from tests.benchmarks.gases import (
    HIGHEST,
    LOWEST,
    METHANE_IN_AIR,
    combustion_feed,
    combustion_gases,
    combustion_map,
    scattered_combustion,
)
from tests.benchmarks.measuring import (
    Cell,
    Measured,
    Table,
    largest_differences,
    latencies,
    microseconds,
    ratio,
    rounds,
    spread,
)
from tests.benchmarks.ours import potentials_of, solve_map, solve_scattered

TITLE = "Against Cantera's default by number of species"
COUNTS = (5, 34, 53, 146, 300)
WAYS = ("map", "scattered", "Cantera")


def measure(quick: bool) -> Measured:
    cases = [
        compare(count, name, quick) for count in (COUNTS[:2] if quick else COUNTS) for name in METHANE_IN_AIR
    ]
    return {"cases": cases}


def compare(count: int, feed_name: str, quick: bool) -> dict[str, Any]:
    """One number of species and one feed, three ways: a map, scattered points, a sample of those by Cantera."""
    table = combustion_gases(count)
    feed = combustion_feed(table, METHANE_IN_AIR[feed_name])
    grid = combustion_map(41, 11) if quick else combustion_map(241, 41)
    points, sample = (300, 20) if quick else (10_000, 400)
    T, p = scattered_combustion(points)
    loop = CanteraLoop(table, (LOWEST, HIGHEST))
    answers: dict[str, Any] = {}

    def by_map() -> None:
        answers["map"] = solve_map(feed, grid, 1)

    def by_points() -> None:
        answers["scattered"] = solve_scattered(feed, T, p, 1)

    def by_cantera() -> None:
        answers["Cantera"] = loop.solve(T[:sample], p[:sample], feed.fractions[0])

    seconds = rounds({"map": by_map, "scattered": by_points, "Cantera": by_cantera}, 1 if quick else 3)
    potentials = potentials_of(table, T[:sample], p[:sample])
    singles = latencies(
        [partial(minimise, table.formula_matrix, feed.element_amounts, row) for row in potentials[:100]]
    )
    ours = answers["scattered"].amounts[:sample]
    theirs, failures = answers["Cantera"]
    found = np.isfinite(theirs[:, 0])
    return {
        "species": count,
        "feed": feed_name,
        "points": {"map": grid.points, "scattered": points, "Cantera": sample},
        "seconds": seconds,
        "single": spread(singles),
        "solved": {
            "map": int((answers["map"].status == 0).sum()),
            "scattered": int((answers["scattered"].status == 0).sum()),
            "Cantera": sample - failures,
        },
        "difference": largest_differences(theirs[found], (ours / ours.sum(axis=1, keepdims=True))[found]),
    }


def cost(case: dict[str, Any], way: str) -> float:
    """us a point."""
    return microseconds(case["seconds"][way], case["points"][way])


def tables(measured: Measured) -> list[Table]:
    cases = measured["cases"]
    main: list[list[Cell]] = []
    for case in cases:
        seconds, points = case["seconds"], case["points"]
        times = [
            ratio(seconds["Cantera"], points["Cantera"], seconds[way], points[way])
            for way in ("map", "scattered")
        ]
        unsolved = [points[way] - case["solved"][way] for way in WAYS]
        main.append(
            [
                str(case["species"]),
                case["feed"],
                *(cost(case, way) for way in WAYS),
                case["single"]["median"] * 1e6,
                *times,
                "/".join(str(count) for count in unsolved),
                case["difference"][1],
            ]
        )
    penalties: list[list[Cell]] = []
    for count in dict.fromkeys(case["species"] for case in cases):
        mine = {case["feed"]: case for case in cases if case["species"] == count}
        lean, exact = mine["lean"], mine["exactly stoichiometric"]
        penalties.append([str(count), *(cost(exact, way) / cost(lean, way) for way in WAYS)])
    size = cases[0]["points"]
    return [
        Table(
            f"{TITLE}: methane in air, {LOWEST:g} to {HIGHEST:g} K, 0.1 to 100 bar, one thread "
            "[us a point, mean over the points]",
            [
                "gases",
                "feed",
                "map",
                "scattered",
                "Cantera",
                "single `minimise`",
                "map: times Cantera",
                "scattered: times Cantera",
                "not solved",
                "largest relative difference",
            ],
            main,
            f"Map of {size['map']:,} points, {size['scattered']:,} scattered points, of which Cantera got the "
            f"first {size['Cantera']:,}. Not solved: map/scattered/Cantera. Difference of mole fractions "
            "above 1e-6. 300 gases are of ten elements, the others of C, H, O and N.",
        ),
        Table(
            "What an exactly stoichiometric feed costs, times a lean one",
            ["gases", *WAYS],
            penalties,
        ),
    ]
