"""A dense map: steam reforming, 48 gases of C, H, O and N, 901 temperatures by 111 pressures."""

from __future__ import annotations

from functools import partial
from typing import Any

import numpy as np

import gibbsmin
from tests.benchmarks.cantera_loop import CanteraLoop
from tests.benchmarks.gases import names_of, reforming_feed, reforming_gases, reforming_map
from tests.benchmarks.measuring import Measured, Table, largest_differences, microseconds, ratio, rounds
from tests.benchmarks.ours import potentials_of, solve_map

TITLE = "Dense map of steam reforming"
AFRESH, NEIGHBOUR = "Cantera, every point from the feed", "Cantera, from the neighbour's answer"


def measure(quick: bool) -> Measured:
    feed = reforming_feed()
    table = reforming_gases()
    grid = reforming_map(121, 16) if quick else reforming_map()
    T, p = grid.flat()
    answers: dict[str, Any] = {}

    def by_grid(threads: int | None) -> None:
        answers["grid"] = solve_map(feed, grid, threads)

    mixture = dict(zip(feed.names, feed.amounts[0].tolist(), strict=True))
    names = names_of(table.species)

    def by_equilibrium(threads: int | None) -> None:
        answers["equilibrium"] = gibbsmin.equilibrium(
            mixture, grid.temperature, grid.pressure, species=names, threads=threads
        )

    loop = CanteraLoop(table, (float(T[0]), float(T[-1])))

    def by_cantera(from_neighbour: bool) -> None:
        answers[NEIGHBOUR if from_neighbour else AFRESH] = loop.solve(
            T, p, feed.fractions[0], from_neighbour=from_neighbour
        )

    seconds = rounds(
        {
            "solve_grid, one thread": partial(by_grid, 1),
            "solve_grid, all threads": partial(by_grid, None),
            "equilibrium, one thread": partial(by_equilibrium, 1),
            "equilibrium, all threads": partial(by_equilibrium, None),
            AFRESH: partial(by_cantera, False),
            NEIGHBOUR: partial(by_cantera, True),
        },
        1 if quick else 5,
    )
    solution, dataset = answers["grid"], answers["equilibrium"]
    amounts = solution.amounts.reshape(grid.points, -1)
    fractions = amounts / amounts.sum(axis=1, keepdims=True)
    status = {
        "solve_grid": int((solution.status == 0).sum()),
        "equilibrium": int((dataset.status.values == 0).sum()),
    }
    against_cantera = {}
    for name in (AFRESH, NEIGHBOUR):
        theirs, failures = answers[name]
        status[name] = grid.points - failures
        found = np.isfinite(theirs[:, 0])
        against_cantera[name] = largest_differences(theirs[found], fractions[found])
    return {
        "species": len(names),
        "temperatures": len(grid.temperature),
        "pressures": len(grid.pressure),
        "points": grid.points,
        "cantera points": grid.points,
        "seconds": seconds,
        "solved": status,
        "largest gap": float(solution.gap.max() / feed.element_amounts.sum()),
        "largest balance residual": float(solution.balance_residual.max()),
        "difference from Cantera": against_cantera,
        "difference from minimise": _from_minimise(amounts, feed, table, T, p, 100 if quick else 5000),
    }


def _from_minimise(amounts: Any, feed: Any, table: Any, T: Any, p: Any, sample: int) -> dict[str, Any]:
    """Largest relative difference of any amount above 1e-250 mol from the point's own minimisation."""
    at = np.random.default_rng(1).choice(len(T), sample, replace=False)
    potentials = potentials_of(table, T[at], p[at])
    alone = gibbsmin.minimise(table.formula_matrix, feed.element_amounts, potentials)
    counted = alone.amounts > 1e-250
    relative = np.abs(amounts[at] / np.where(counted, alone.amounts, 1.0) - 1.0)[counted]
    return {"points": sample, "largest relative": float(relative.max())}


def tables(measured: Measured) -> list[Table]:
    seconds, points = measured["seconds"], measured["points"]
    rows = []
    for name, spent in seconds.items():
        own = not name.startswith("Cantera")
        rows.append(
            [
                name,
                float(np.median(spent)),
                microseconds(spent, points),
                ratio(seconds[AFRESH], points, spent, points) if own else None,
                ratio(seconds[NEIGHBOUR], points, spent, points) if own else None,
                f"{measured['solved'].get(name, measured['solved'].get(name.split(',')[0])):,}",
            ]
        )
    (afresh, neighbour) = (measured["difference from Cantera"][name] for name in (AFRESH, NEIGHBOUR))
    alone = measured["difference from minimise"]
    return [
        Table(
            f"{TITLE}: {measured['species']} gases, {measured['temperatures']} temperatures by "
            f"{measured['pressures']} pressures = {points:,} points",
            [
                "",
                "s a map",
                "us a point",
                "times Cantera from the feed",
                "times Cantera from the neighbour",
                "solved",
            ],
            rows,
            f"All points on both sides. Largest gap {measured['largest gap']:.1e} of the atoms fed, largest "
            f"balance residual {measured['largest balance residual']:.1e}. Largest difference of a mole "
            f"fraction from Cantera's {afresh[0]:.1e} ({neighbour[0]:.1e} from the neighbour's answer), "
            f"relative above 1e-6 {afresh[1]:.1e} ({neighbour[1]:.1e}); from `minimise` on "
            f"{alone['points']:,} of the points, relative, traces down to 1e-250 mol included, "
            f"{alone['largest relative']:.1e}.",
        )
    ]
