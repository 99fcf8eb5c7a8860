"""Small studies for tests, ways to compare their folders, and case solvers that misbehave on purpose.

The solvers are functions of a module because workers import them by name.
"""

from __future__ import annotations

import os
import time
from dataclasses import replace
from pathlib import Path
from typing import Any

from gibbsmin.grid import GridSolution
from gibbsmin.study.solving import solve_case

SCENARIO = """\
title: Shift of a test gas
feed:
  raw gas:
    temperature: 350 degC
    amounts: {CO: 30 mol, CO2: 5 mol, H2: 40 mol, N2: 20 mol, CH4: 1 mol}
  steam:
    temperature: 350 degC
    amounts: {H2O: 60 mol}
grid:
  temperature: {from: 300 degC, to: 500 degC, points: 5}
  pressure: [10 bar, 20 bar, 30 bar]
species:
  gases: [CO, CO2, H2, N2, CH4, H2O]
results:
  key species: [H2, CO]
  conversions: [CO]
  ratios:
    H2 to CO: {of: H2, to: CO}
"""

STUDY = """\
title: Shift in many ways
base: base.yaml
quantities:
  steam: {place: feed / steam / amounts / H2O, unit: mol}
  carbon dioxide: {place: feed / raw gas / amounts / CO2, unit: mol}
variations:
  - every combination of:
      steam: [40, 60, 80, 100]
      carbon dioxide: {from: 1, to: 3, step: 1}
cases per chunk: 2
"""


def write_study(folder: Path, study: str = STUDY, scenario: str = SCENARIO) -> Path:
    """The study file beside its base scenario."""
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "base.yaml").write_text(scenario, encoding="utf-8")
    path = folder / "study.yaml"
    path.write_text(study, encoding="utf-8")
    return path


def store_bytes(folder: Path) -> dict[str, bytes]:
    """Every file of the store, hidden ones too, and the manifest; the summary and receipts hold times."""
    files = [path for path in sorted((folder / "results.zarr").rglob("*")) if path.is_file()]
    return {
        path.relative_to(folder).as_posix(): path.read_bytes() for path in [*files, folder / "manifest.json"]
    }


def summary_without_times(results: Any) -> Any:
    return results.summary.drop(columns="seconds")


def slow(layout: Any, table: Any, case: Any, threads: int | None) -> GridSolution:
    time.sleep(0.05)
    return solve_case(layout, table, case, threads)


def fails_at_the_fifth(layout: Any, table: Any, case: Any, threads: int | None) -> GridSolution:
    if case.number == 4:
        raise ArithmeticError("no luck with this one")
    return solve_case(layout, table, case, threads)


def breaks_off_at_the_fifth(layout: Any, table: Any, case: Any, threads: int | None) -> GridSolution:
    """A solution whose first arrays fit and whose status does not."""
    solution = solve_case(layout, table, case, threads)
    return replace(solution, status=solution.status[..., :-1]) if case.number == 4 else solution


def dies_at_the_fifth(layout: Any, table: Any, case: Any, threads: int | None) -> GridSolution:
    if case.number == 4:
        os._exit(9)
    return solve_case(layout, table, case, threads)


def dies_at_two(layout: Any, table: Any, case: Any, threads: int | None) -> GridSolution:
    if case.number in (4, 5):  # both in one chunk
        os._exit(9)
    return solve_case(layout, table, case, threads)
