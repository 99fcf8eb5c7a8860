"""Throughput of a study against that of its plain maps: `python -m tests.benchmarks_study [cases] [points a side]`
or `... scaling`.

Prints, and asserts nothing: the time of the same maps solved by the grid solver alone, on as many processes that are
already running, then that of the study with everything (reading, starting processes, checking, storing, digests,
summary), for what is kept by default and for all species, and the peak memory of all its processes together. Processor
time is given as well, since other programs of the machine do not count in it.
"""

from __future__ import annotations

import shutil
import sys
import tempfile
import threading
import time
from concurrent.futures import ProcessPoolExecutor
from multiprocessing import get_context
from pathlib import Path
from typing import Any

from gibbsmin.study import load_study, run_study
from gibbsmin.study.conditions import solver_table
from gibbsmin.study.solving import solve_case

SCENARIO = """\
title: Reforming of a survey gas
feed:
  gas:
    temperature: 500 degC
    mole per cent: {{CH4: rest, C2H6: 4, CO2: 1, N2: 1}}
    total: 100 kmol/h
  steam:
    temperature: 500 degC
    amounts: {{H2O: 300 kmol/h}}
grid:
  temperature: {{from: 600 degC, to: 1000 degC, points: {side}}}
  pressure: {{from: 1 bar, to: 40 bar, points: {side}}}
species:
  gases: [CH4, C2H6, CO2, N2, H2O, H2, CO, O2, NH3, HCN, HNCO, CH3OH, HCHO, HCOOH, C2H4, C2H2 (acetylene), CH2CO,
          CH3CHO, C2H5OH, H2O2, NO, NO2, N2O, N2H4, HNO, CH3, OH, H, O, N, NH2, NH, HCO, C2H5, CN, HO2]
results:
  key species: [H2, CO, CO2, CH4, H2O]
  conversions: [CH4]
  yields:
    hydrogen yield: {{of: H2, from: CH4}}
"""

STUDY = """\
title: Throughput
base: base.yaml
quantities:
  ethane: {{place: feed / gas / mole per cent / C2H6}}
  steam: {{place: feed / steam / amounts / H2O, unit: kmol/h}}
variations:
  - sample:
      method: latin hypercube
      size: {cases}
      quantities:
        ethane: {{from: 0, to: 8}}
        steam: {{from: 200, to: 400}}
cross-check: {{points per case: {checks}}}
keep: {{composition: {composition}}}
"""

WORKERS = 2


def write_study(folder: Path, cases: int, side: int, composition: str, checks: int) -> Path:
    """The study file and its base scenario."""
    (folder / "base.yaml").write_text(SCENARIO.format(side=side))
    path = folder / "study.yaml"
    path.write_text(STUDY.format(cases=cases, composition=composition, checks=checks))
    return path


def plain_maps(job: tuple[Any, list[Any]]) -> int:
    """Solve maps and forget them."""
    layout, cases = job
    table = solver_table(layout)
    return sum(solve_case(layout, table, case, 1).status.size for case in cases)


class Watch:
    """Memory and processor time of this process and all below it, looked at every fifth of a second."""

    def __init__(self) -> None:
        import psutil

        self._own = psutil.Process()
        self._seconds: dict[tuple[int, float], float] = {}
        self._peak = 0
        threading.Thread(target=self._keep_looking, daemon=True).start()

    def _keep_looking(self) -> None:
        while True:
            self.look()
            time.sleep(0.2)

    def look(self) -> None:
        import psutil

        total = 0
        for process in [self._own, *self._own.children(recursive=True)]:
            try:
                total += process.memory_full_info().pss
                used = process.cpu_times()
                self._seconds[process.pid, process.create_time()] = used.user + used.system
            except psutil.Error:
                continue
        self._peak = max(self._peak, total)

    def processor_seconds(self) -> float:
        """Processor time so far, but for what processes used after they were last looked at."""
        self.look()
        return sum(self._seconds.values())

    def peak_memory(self) -> float:
        """Peak so far of the memory of all together [GiB]."""
        return self._peak / 2**30


def scaling(cases: int = 400, side: int = 100, attempts: int = 2) -> None:
    """The same study on a Dask cluster of one process and of two, over TCP; the best of some attempts in turn.

    If two workers take no more processor time together than one does, they take half the time where two cores are
    free; on a machine that others use, that is the figure to look at.
    """
    import distributed

    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        study = load_study(write_study(folder, cases, side, "key species", 0))
        best = {1: float("inf"), 2: float("inf")}
        processor = dict(best)
        for attempt in range(2 * attempts):
            workers = 1 + attempt % 2
            with (
                distributed.LocalCluster(
                    n_workers=workers, threads_per_worker=1, protocol="tcp://", dashboard_address=None
                ) as cluster,
                distributed.Client(cluster) as client,
            ):
                run_study(study, folder / "warm", cluster=client)
                before = sum(client.run(time.process_time).values()) + time.process_time()
                begun = time.perf_counter()
                run_study(study, folder / "timed", cluster=client)
                best[workers] = min(best[workers], time.perf_counter() - begun)
                used = sum(client.run(time.process_time).values()) + time.process_time() - before
                processor[workers] = min(processor[workers], used)
            shutil.rmtree(folder / "warm")
            shutil.rmtree(folder / "timed")
        for workers, took in best.items():
            print(
                f"{workers} workers: {took:.2f} s, {study.points / took:,.0f} points/s, "
                f"{processor[workers]:.2f} s of processor in all processes"
            )
        print(f"gain: {best[1] / best[2]:.2f}")


def main() -> None:
    if sys.argv[1:] == ["scaling"]:
        scaling()
        return
    cases = int(sys.argv[1]) if len(sys.argv) > 1 else 1000
    side = int(sys.argv[2]) if len(sys.argv) > 2 else 100
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        study = load_study(write_study(folder, cases, side, "key species", 0))
        layout = study.layouts[0]
        print(f"{cases} cases x {side * side} points x {len(layout.species)} species, {WORKERS} processes")
        parts = [(layout, list(study.cases[i::50])) for i in range(50)]
        watch = Watch()
        with ProcessPoolExecutor(WORKERS, get_context("spawn")) as pool:
            # what processes do once, imports and all, is no part of the speed of maps
            list(pool.map(plain_maps, [(layout, list(study.cases[:5]))] * 2 * WORKERS))
            before, begun = watch.processor_seconds(), time.perf_counter()
            points = sum(pool.map(plain_maps, parts))
            plain, plain_cpu = time.perf_counter() - begun, watch.processor_seconds() - before
        print(
            f"plain maps: {plain:.2f} s, {plain_cpu:.2f} s of processor, {plain / points * 1e6:.3f} us a point"
        )
        for composition, checks in (("key species", 0), ("key species", 1), ("all", 0)):
            file = write_study(folder, cases, side, composition, checks)
            before, begun = watch.processor_seconds(), time.perf_counter()
            run = run_study(file, folder / "out", workers=WORKERS)
            took, cpu = time.perf_counter() - begun, watch.processor_seconds() - before
            size = sum(path.stat().st_size for path in (folder / "out").rglob("*") if path.is_file())
            print(
                f"study, {composition}, {checks} checked a case: {took:.2f} s, {plain / took:.0%} of the plain speed "
                f"({cpu:.2f} s of processor, {plain_cpu / cpu:.0%}), {size / 1e9:.2f} GB, "
                f"solved {run.all_solved}, peak so far {watch.peak_memory():.2f} GiB"
            )
            shutil.rmtree(folder / "out")


if __name__ == "__main__":
    main()
