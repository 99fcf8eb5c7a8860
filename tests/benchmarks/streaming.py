"""A large map written to disk: `python -m tests.benchmarks.streaming WAY FEEDS TEMPERATURES PRESSURES`.

WAY is "slices", `gibbsmin.equilibrium` feed by feed into one NetCDF file, or "study", a study of as many cases,
all species kept. Prints points, seconds and peak memory as JSON. It runs in a process of its own because peak
memory is counted per process.
"""

from __future__ import annotations

import contextlib
import json
import sys
import tempfile
import threading
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np

import gibbsmin
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
    plan = plan_study(study)
    workers = workers_for(plan, None, plan.chunks)
    done = run_study(study, folder / "results")
    summary = done.results.summary
    return {
        "solved": int((summary["points"] - summary["unsolved points"]).sum()),
        "processes": 1 + workers,
    }


WAYS: dict[str, Callable[[int, int, int, Path], Figures]] = {"slices": by_slices, "study": by_study}


def stream(way: str, feeds: int, temperatures: int, pressures: int) -> Figures:
    """Write the map into a temporary folder and say what that took."""
    memory = PeakMemory()
    start = memory.mebibytes()
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
        "peak MiB": memory.mebibytes(),
        "file MiB": size / 2**20,
        **found,
    }


class PeakMemory:
    """Largest resident memory of this process and of those it starts, watched from a thread.

    A process' own peak comes from the kernel, so a coarse watch misses nothing but processes that live shorter
    than its interval. What processes share is counted for each of them.
    """

    INTERVAL = 0.1  # s

    def __init__(self) -> None:
        self._peaks: dict[str, float] = {}
        threading.Thread(target=self._watch, daemon=True).start()

    def mebibytes(self) -> float:
        """Sum of the peaks so far."""
        self._look()
        return sum(self._peaks.values())

    def _watch(self) -> None:
        while True:
            self._look()
            time.sleep(self.INTERVAL)

    def _look(self) -> None:
        own = Path("/proc/self")
        if not own.exists():  # no Linux: this process alone, as getrusage has it (in bytes on macOS)
            import resource

            unit = 2**20 if sys.platform == "darwin" else 2**10
            self._peaks["self"] = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / unit
            return
        children = [
            number for listing in own.glob("task/*/children") for number in listing.read_text().split()
        ]
        for process in ["self", *children]:
            with contextlib.suppress(OSError, StopIteration):  # it has ended meanwhile
                lines = Path(f"/proc/{process}/status").read_text().splitlines()
                peak = next(line for line in lines if line.startswith("VmHWM:"))
                self._peaks[process] = int(peak.split()[1]) / 2**10


if __name__ == "__main__":
    print(json.dumps(stream(sys.argv[1], *map(int, sys.argv[2:5]))))
