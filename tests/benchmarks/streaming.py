"""A large map written to disk feed by feed: `python -m tests.benchmarks.streaming FEEDS TEMPERATURES PRESSURES`.

Prints points solved, seconds and peak memory as JSON. It runs in a process of its own because peak memory is
counted per process.
"""

from __future__ import annotations

import json
import resource
import sys
import tempfile
import time
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np

import gibbsmin
from tests.benchmarks.gases import names_of, reforming_gases, reforming_map


def stream(feeds: int, temperatures: int, pressures: int, path: Path) -> dict[str, Any]:
    """Solve a map of `feeds` steam ratios and write mole fractions, status and gap to `path` (NetCDF)."""
    grid = reforming_map(temperatures, pressures)
    names = names_of(reforming_gases().species)
    start = _peak_memory()
    solved, writing, begin = 0, 0.0, time.perf_counter()
    with netCDF4.Dataset(path, "w") as file:
        sizes = {
            "steam": feeds,
            "temperature": temperatures,
            "pressure": pressures,
            "species": len(names),
        }
        for name, size in sizes.items():
            file.createDimension(name, size)
        dims = ("steam", "temperature", "pressure")
        slice_of_one_feed = (1, temperatures, pressures)
        fraction = file.createVariable(
            "mole_fraction", "f8", (*dims, "species"), chunksizes=(*slice_of_one_feed, len(names))
        )
        status = file.createVariable("status", "i1", dims, chunksizes=slice_of_one_feed)
        gap = file.createVariable("gap", "f8", dims, chunksizes=slice_of_one_feed)
        for number, steam in enumerate(np.linspace(2.0, 5.0, feeds)):
            answer = gibbsmin.equilibrium(
                {"CH4": 1.0, "H2O": round(float(steam), 6), "N2": 0.05},
                grid.temperature,
                grid.pressure,
                species=names,
            )
            solved += int((answer.status.values == 0).sum())
            before = time.perf_counter()
            fraction[number] = answer.mole_fraction.values
            status[number] = answer.status.values
            gap[number] = answer.gap.values
            writing += time.perf_counter() - before
    return {
        "feeds": feeds,
        "points": feeds * grid.points,
        "species": len(names),
        "solved": solved,
        "seconds": time.perf_counter() - begin,
        "writing": writing,
        "start MiB": start,
        "peak MiB": _peak_memory(),
        "file MiB": path.stat().st_size / 2**20,
    }


def _peak_memory() -> float:
    """Largest resident memory of this process so far [MiB]."""
    unit = 2**20 if sys.platform == "darwin" else 2**10
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / unit


if __name__ == "__main__":
    with tempfile.TemporaryDirectory() as folder:
        FEEDS, TEMPERATURES, PRESSURES = map(int, sys.argv[1:4])
        print(json.dumps(stream(FEEDS, TEMPERATURES, PRESSURES, Path(folder) / "map.nc")))
