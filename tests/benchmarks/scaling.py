"""Cost of a point against number of species and number of points; peak memory of a map streamed to disk."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Any

from tests.benchmarks import species_count
from tests.benchmarks.gases import reforming_feed, reforming_map, scattered_reforming
from tests.benchmarks.measuring import Cell, Measured, Table, microseconds, rounds
from tests.benchmarks.ours import solve_map, solve_scattered

if TYPE_CHECKING:
    from matplotlib.figure import Figure

TITLE = "Cost of a point against numbers of species and of points"
COUNTS = (5, 30, 60, 150, 300)
MAPS = ((10, 10), (40, 25), (125, 80), (400, 250), (1000, 1000))
SCATTERED = (100, 1000, 10_000, 100_000)
STREAMED_FEEDS, STREAMED_MAP = 100, (901, 111)
WHOLE_TREE = Path(__file__).resolve().parents[2]


def measure(quick: bool) -> Measured:
    counts, maps, scattered = (COUNTS[:3], MAPS[:3], SCATTERED[:2]) if quick else (COUNTS, MAPS, SCATTERED)
    return {
        "species": [species_count.compare(count, "lean", quick) for count in counts],
        "map points": [_map(*size, repeats=2 if quick else 5) for size in maps],
        "scattered points": [_scattered(count, repeats=2 if quick else 5) for count in scattered],
        "streamed": streamed(2, (40, 25)) if quick else streamed(STREAMED_FEEDS, STREAMED_MAP),
    }


def _map(temperatures: int, pressures: int, repeats: int) -> dict[str, Any]:
    feed = reforming_feed()
    grid = reforming_map(temperatures, pressures)
    solved = []

    def solve(threads: int | None) -> None:
        solution = solve_map(feed, grid, threads)
        solved.append(int((solution.status == 0).sum()))

    seconds = rounds({"one thread": lambda: solve(1), "all threads": lambda: solve(None)}, repeats)
    return {"points": grid.points, "seconds": seconds, "solved": min(solved)}


def _scattered(count: int, repeats: int) -> dict[str, Any]:
    feeds, T, p = scattered_reforming(count)
    solved = []

    def solve(threads: int | None) -> None:
        solution = solve_scattered(feeds, T, p, threads)
        solved.append(int((solution.status == 0).sum()))

    seconds = rounds({"one thread": lambda: solve(1), "all threads": lambda: solve(None)}, repeats)
    return {"points": count, "seconds": seconds, "solved": min(solved)}


def streamed(feeds: int, size: tuple[int, int]) -> dict[str, Any]:
    """A map written to disk feed by feed, in a process of its own, whose peak memory is counted."""
    command = [sys.executable, "-m", "tests.benchmarks.streaming", str(feeds), *map(str, size)]
    done = subprocess.run(command, capture_output=True, text=True, check=True, cwd=WHOLE_TREE)
    figures: dict[str, Any] = json.loads(done.stdout)
    return figures


def tables(measured: Measured) -> list[Table]:
    species: list[list[Cell]] = [
        [str(case["species"]), *(species_count.cost(case, way) for way in species_count.WAYS)]
        for case in measured["species"]
    ]
    points: list[list[Cell]] = []
    for kind in ("map points", "scattered points"):
        for case in measured[kind]:
            costs = (
                microseconds(case["seconds"][way], case["points"]) for way in ("one thread", "all threads")
            )
            unsolved = case["points"] - case["solved"]
            points.append([kind.split()[0], f"{case['points']:,}", *costs, str(unsolved)])
    stream = measured["streamed"]
    points.append(
        [
            "map, streamed to disk",
            f"{stream['points']:,}",
            None,
            stream["seconds"] / stream["points"] * 1e6,
            str(stream["points"] - stream["solved"]),
        ]
    )
    return [
        Table(
            "Cost of a point against the number of species: methane in air, lean, one thread [us]",
            ["gases", *species_count.WAYS],
            species,
        ),
        Table(
            f"Cost of a point against the number of points: steam reforming, {stream['species']} gases [us]",
            ["", "points", "one thread", "all threads", "not solved"],
            points,
            f"Streamed: `gibbsmin.equilibrium` and NetCDF for {stream['feeds']} feeds in turn, "
            f"{stream['file MiB']:,.0f} MiB on disk, of {stream['seconds']:.1f} s {stream['writing']:.1f} s "
            f"writing; peak memory of the whole process {stream['peak MiB']:,.0f} MiB, of which "
            f"{stream['start MiB']:,.0f} MiB before the first feed.",
        ),
    ]


def plot(measured: Measured) -> Figure:
    """Two panels, cost of a point against species and against points; call within the house look."""
    from matplotlib.figure import Figure

    from gibbsmin.figures.look import LINE_COLOURS

    figure = Figure(figsize=(6.9, 3.0), layout="constrained")
    left, right = figure.subplots(1, 2)
    counts = [case["species"] for case in measured["species"]]
    for colour, way in zip(LINE_COLOURS, species_count.WAYS, strict=False):
        costs = [species_count.cost(case, way) for case in measured["species"]]
        left.loglog(counts, costs, "o-", color=colour, markersize=3.5, label=way)
    left.set_xticks(counts, [str(count) for count in counts])
    left.minorticks_off()
    left.set_xlabel("gases")
    left.set_ylabel("µs a point, one thread")
    left.set_title("methane in air, 600 to 3000 K", loc="left")

    styles = {"map points": ("o-", "map"), "scattered points": ("s-", "scattered")}
    for colour, (kind, (style, label)) in zip(LINE_COLOURS, styles.items(), strict=False):
        cases = measured[kind]
        for threads, line in (("one thread", style), ("all threads", style[0] + "--")):
            costs = [microseconds(case["seconds"][threads], case["points"]) for case in cases]
            right.loglog(
                [case["points"] for case in cases],
                costs,
                line,
                color=colour,
                markersize=3.5,
                label=f"{label}, {threads}",
            )
    stream = measured["streamed"]
    right.loglog(
        [stream["points"]],
        [stream["seconds"] / stream["points"] * 1e6],
        "D",
        color=LINE_COLOURS[4],
        markersize=4.5,
        label="map, streamed to disk",
    )
    right.set_xlabel("points")
    right.set_title(f"steam reforming, {stream['species']} gases", loc="left")
    for panel in (left, right):
        panel.grid(True, which="major", color="#dddddd", linewidth=0.5)
        panel.spines[["top", "right"]].set_visible(False)
        panel.legend(frameon=False, fontsize=7)
    return figure
