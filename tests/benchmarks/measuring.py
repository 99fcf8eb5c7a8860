"""Timing by rounds, statistics, and the description of the machine that belongs to every figure."""

from __future__ import annotations

import gc
import os
import platform
import statistics
import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from importlib.metadata import version
from typing import Any

import numpy as np

from gibbsmin.grid.solve import available_cores

Cell = str | float | int | None
Measured = dict[str, Any]


@dataclass(frozen=True)
class Table:
    """One table of a benchmark's results; cells may be None where nothing was measured."""

    title: str
    columns: Sequence[str]
    rows: Sequence[Sequence[Cell]]
    note: str = ""

    def markdown(self) -> str:
        """The table with its title, in Markdown."""
        lines = [f"**{self.title}**", ""]
        lines.append("| " + " | ".join(self.columns) + " |")
        lines.append("|" + "|".join(" --- " if i == 0 else " ---: " for i in range(len(self.columns))) + "|")
        lines += ["| " + " | ".join(shown(cell) for cell in row) + " |" for row in self.rows]
        if self.note:
            lines += ["", self.note]
        return "\n".join(lines)


def shown(cell: Cell) -> str:
    """A cell as text: three significant digits, thousands separated."""
    if cell is None:
        return "-"
    if isinstance(cell, str):
        return cell
    if isinstance(cell, int):
        return f"{cell:,}"
    if cell == 0:
        return "0"
    if not 1e-3 <= abs(cell) < 1e7:
        return f"{cell:.1e}"
    decimals = max(0, 2 - int(np.floor(np.log10(abs(cell)))))
    return f"{cell:,.{decimals}f}"


def rounds(contenders: Mapping[str, Callable[[], object]], count: int) -> dict[str, list[float]]:
    """Seconds of every contender in each of `count` rounds.

    The contenders take turns, so that what else the machine does meets all of them alike; one round before
    the counted ones warms up. The garbage collector rests while a contender runs.
    """
    seconds: dict[str, list[float]] = {name: [] for name in contenders}
    for number in range(-1, count):
        for name, contender in contenders.items():
            gc.collect()
            gc.disable()
            try:
                begin = time.perf_counter()
                contender()
                spent = time.perf_counter() - begin
            finally:
                gc.enable()
            if number >= 0:
                seconds[name].append(spent)
    return seconds


def latencies(calls: Sequence[Callable[[], object]]) -> list[float]:
    """Seconds of each call, the first one made once more beforehand to warm up."""
    calls[0]()
    seconds = []
    for call in calls:
        begin = time.perf_counter()
        call()
        seconds.append(time.perf_counter() - begin)
    return seconds


def spread(seconds: Sequence[float]) -> dict[str, float]:
    """What a record keeps of many calls [s]."""
    values = np.array(seconds) if len(seconds) else np.array([np.nan])
    return {
        "median": float(np.median(values)),
        "mean": float(values.mean()),
        "95 %": float(np.percentile(values, 95)),
        "99 %": float(np.percentile(values, 99)),
        "longest": float(values.max()),
    }


def median(values: Sequence[float]) -> float:
    return float(statistics.median(values))


def microseconds(seconds: Sequence[float], points: int) -> float:
    """Median cost of a point [us]."""
    return median(seconds) / points * 1e6


def ratio(slow: Sequence[float], slow_points: int, fast: Sequence[float], fast_points: int) -> float:
    """How many times more points a second the second one solves: median over the rounds."""
    return median([(a / slow_points) / (b / fast_points) for a, b in zip(slow, fast, strict=True)])


def largest_differences(found: Any, expected: Any, *, least: float = 1e-6) -> tuple[float, float]:
    """Largest absolute difference of mole fractions (N, S), and the largest relative one above `least`."""
    difference = np.abs(found - expected)
    larger = np.maximum(found, expected)
    counted = larger > least
    relative = difference[counted] / larger[counted]
    return float(difference.max(initial=0.0)), float(relative.max(initial=0.0))


def machine() -> dict[str, Any]:
    """What the figures depend on, in general words."""
    packages = ("gibbsmin", "numpy", "scipy", "cantera")
    return {
        "cores": available_cores(),
        "architecture": platform.machine(),
        "system": platform.system(),
        "python": platform.python_version(),
        "packages": {name: _version(name) for name in packages},
        "load before": round(os.getloadavg()[0], 2) if hasattr(os, "getloadavg") else None,
    }


def _version(package: str) -> str | None:
    try:
        return version(package)
    except ModuleNotFoundError:  # gibbsmin in a checkout that is not installed
        return None
