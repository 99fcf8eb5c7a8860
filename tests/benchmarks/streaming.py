"""A large map written to disk: `python -m tests.benchmarks.streaming WAY FEEDS TEMPERATURES PRESSURES`.

WAY is "slices", `gibbsmin.equilibrium` feed by feed into one NetCDF file, or "study", a study of as many cases,
all species kept. Prints points, seconds and peak memory as JSON. It runs in a process of its own because peak
memory is counted per process.
"""

from __future__ import annotations

import json
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np

import gibbsmin
from gibbsmin.grid.solve import available_cores
from gibbsmin.study import load_study, run_study
from gibbsmin.study.planning import plan_study
from gibbsmin.study.running import workers_for
from tests.benchmarks.gases import names_of, reforming_gases, reforming_map

Figures = dict[str, Any]

SCENARIO = """\
title: Reforming with much or little steam
feed:
  gas:
    amounts: {{CH4: 1 kmol/h, N2: 0.05 kmol/h}}
  steam:
    amounts: {{H2O: 3 kmol/h}}
grid:
  temperature: {{from: 600 K, to: 1500 K, points: {temperatures}}}
  pressure: {{from: 1 bar, to: 100 bar, points: {pressures}, spacing: logarithmic}}
species: {{gases: all, largest carbon number: 2, radicals: false}}
cross-check: {{points: none}}
"""

STUDY = """\
title: A map for every amount of steam
base: base.yaml
quantities:
  steam: {{place: feed / steam / amounts / H2O, unit: kmol/h}}
variations:
  - every combination of:
      steam: {{from: 2, to: 5, points: {feeds}}}
cross-check: {{points per case: 0}}
keep: {{composition: all}}
"""


def by_slices(feeds: int, temperatures: int, pressures: int, folder: Path) -> Figures:
    """Mole fractions, status and gap of `feeds` amounts of steam, one after the other."""
    grid = reforming_map(temperatures, pressures)
    names = names_of(reforming_gases().species)
    solved, writing = 0, 0.0
    with netCDF4.Dataset(folder / "map.nc", "w") as file:
        sizes = {"steam": feeds, "temperature": temperatures, "pressure": pressures, "species": len(names)}
        for name, size in sizes.items():
            file.createDimension(name, size)
        dims = ("steam", "temperature", "pressure")
        one_feed = (1, temperatures, pressures)
        fraction = file.createVariable(
            "mole_fraction", "f8", (*dims, "species"), chunksizes=(*one_feed, len(names))
        )
        status = file.createVariable("status", "i1", dims, chunksizes=one_feed)
        gap = file.createVariable("gap", "f8", dims, chunksizes=one_feed)
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
    return {"solved": solved, "writing": writing, "processes": 1}


def by_study(feeds: int, temperatures: int, pressures: int, folder: Path) -> Figures:
    """The same as a study, whose cases are the amounts of steam; digests and summary included."""
    (folder / "base.yaml").write_text(SCENARIO.format(temperatures=temperatures, pressures=pressures))
    file = folder / "study.yaml"
    file.write_text(STUDY.format(feeds=feeds))
    study = load_study(file)
    workers = workers_for(plan_study(study), None)
    done = run_study(study, folder / "results")
    summary = done.results.summary
    return {
        "solved": int((summary["points"] - summary["unsolved points"]).sum()),
        "processes": 1 + workers,
    }


WAYS: dict[str, Callable[[int, int, int, Path], Figures]] = {"slices": by_slices, "study": by_study}


def stream(way: str, feeds: int, temperatures: int, pressures: int) -> Figures:
    """Write the map into a temporary folder and say what that took."""
    start = _peak_memory()
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        begin = time.perf_counter()
        found = WAYS[way](feeds, temperatures, pressures, folder)
        seconds = time.perf_counter() - begin
        size = sum(path.stat().st_size for path in folder.rglob("*") if path.is_file())
    return {
        "way": way,
        "feeds": feeds,
        "points": feeds * temperatures * pressures,
        "species": len(reforming_gases().species),
        "seconds": seconds,
        "start MiB": start,
        "peak MiB": _peak_memory(),
        "file MiB": size / 2**20,
        **found,
    }


def _peak_memory() -> float:
    """Largest resident memory so far [MiB], of this process and of as many of its largest child as there were.

    Children of a study are as many as cores; what they share with each other is counted more than once.
    """
    import resource

    unit = 2**20 if sys.platform == "darwin" else 2**10
    own = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    largest_child = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss
    return (own + available_cores() * largest_child) / unit


if __name__ == "__main__":
    print(json.dumps(stream(sys.argv[1], *map(int, sys.argv[2:5]))))
