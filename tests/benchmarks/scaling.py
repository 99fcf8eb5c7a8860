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
    counts, maps, scattered = (COUNTS[:2], MAPS[:3], SCATTERED[:2]) if quick else (COUNTS, MAPS, SCATTERED)
    return {
        "species": [species_count.compare(count, "lean", quick) for count in counts],
        "map points": [_map(*size, repeats=1 if quick else 5) for size in maps],
        "scattered points": [_scattered(count, repeats=1 if quick else 5) for count in scattered],
        "streamed": [
            streamed(way, 2, (40, 25)) if quick else streamed(way, STREAMED_FEEDS, STREAMED_MAP)
            for way in ("slices", "study")
        ],
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
    feeds, T, p = scattered_reforming(count, "reformer")
    solved = []

    def solve(threads: int | None) -> None:
        solution = solve_scattered(feeds, T, p, threads)
        solved.append(int((solution.status == 0).sum()))

    seconds = rounds({"one thread": lambda: solve(1), "all threads": lambda: solve(None)}, repeats)
    return {"points": count, "seconds": seconds, "solved": min(solved)}


def streamed(way: str, feeds: int, size: tuple[int, int]) -> dict[str, Any]:
    """A map written to disk, in a process of its own, whose peak memory is counted."""
    command = [sys.executable, "-m", "tests.benchmarks.streaming", way, str(feeds), *map(str, size)]
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
    streams = measured["streamed"]
    for stream in streams:
        cost = stream["seconds"] / stream["points"] * 1e6
        unsolved = stream["points"] - stream["solved"]
        points.append([f"map to disk, {stream['way']}", f"{stream['points']:,}", None, cost, str(unsolved)])
    disk: list[list[Cell]] = [
        [
            stream["way"],
            stream["points"],
            stream["seconds"],
            stream["file MiB"],
            stream["start MiB"],
            stream["peak MiB"],
            stream["processes"],
        ]
        for stream in streams
    ]
    return [
        Table(
            "Cost of a point against the number of species: methane in air, lean, one thread [us]",
            ["gases", *species_count.WAYS],
            species,
        ),
        Table(
            f"Cost of a point against the number of points: steam reforming, {streams[0]['species']} gases [us]",
            ["", "points", "one thread", "all threads", "not solved"],
            points,
        ),
        Table(
            "Maps streamed to disk: time, and memory of all processes together",
            ["", "points", "s", "MiB on disk", "MiB before the first point", "MiB at the peak", "processes"],
            disk,
            "Slices: `gibbsmin.equilibrium` feed by feed into one NetCDF file. Study: `gibbsmin.study` with one "
            "case a feed, all species kept. Memory shared between the processes of a study is counted more "
            "than once.",
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
    streams = measured["streamed"]
    for colour, stream in zip(LINE_COLOURS[3:], streams, strict=False):
        right.loglog(
            [stream["points"]],
            [stream["seconds"] / stream["points"] * 1e6],
            "D",
            color=colour,
            markersize=4.5,
            label=f"map to disk, {stream['way']}",
        )
    right.set_xlabel("points")
    right.set_title(f"steam reforming, {streams[0]['species']} gases", loc="left")
    for panel in (left, right):
        panel.grid(True, which="major", color="#dddddd", linewidth=0.5)
        panel.spines[["top", "right"]].set_visible(False)
        panel.legend(frameon=False, fontsize=7, handlelength=3.2)
    return figure
