"""Run benchmarks by name: `python -m tests.benchmarks [NAME ...] [--quick] [--into FOLDER] [--redraw]`.

Every benchmark leaves NAME.json in the folder, with the raw figures; tables.md and the plots are made from all
JSON files there, so that one of them can be measured anew by itself.
"""

from __future__ import annotations

import argparse
import json
import math
import sys
import time
from collections.abc import Sequence
from pathlib import Path
from types import ModuleType
from typing import Any

from threadpoolctl import threadpool_limits

from tests.benchmarks import (
    dense_map,
    floor,
    robustness,
    scaling,
    scattered,
    scipy_by_hand,
    single_point,
    species_count,
)
from tests.benchmarks.measuring import machine

BENCHMARKS: dict[str, ModuleType] = {
    "dense_map": dense_map,
    "scattered": scattered,
    "single_point": single_point,
    "species_count": species_count,
    "scaling": scaling,
    "floor": floor,
    "scipy": scipy_by_hand,
    "robustness": robustness,
}
FOLDER = Path("build") / "benchmarks"


def main(arguments: Sequence[str] | None = None) -> int:
    parser = argparse.ArgumentParser(prog="python -m tests.benchmarks", description=__doc__)
    parser.add_argument("names", nargs="*", help=f"which of {', '.join(BENCHMARKS)}; default all")
    parser.add_argument("--quick", action="store_true", help="small sizes, under a minute for all")
    parser.add_argument("--into", type=Path, default=FOLDER, help=f"folder for the results [{FOLDER}]")
    parser.add_argument(
        "--redraw", action="store_true", help="only make tables and plots from the JSON files"
    )
    parser.add_argument(
        "--compared", type=int, help="problems that go through Cantera's solvers in robustness [20000]"
    )
    options = parser.parse_args(arguments)
    if unknown := set(options.names).difference(BENCHMARKS):
        parser.error(f"no benchmark is called {min(unknown)}; there are {', '.join(BENCHMARKS)}")
    options.into.mkdir(parents=True, exist_ok=True)
    if not options.redraw:
        for name in options.names or BENCHMARKS:
            more = {"compared": options.compared} if name == "robustness" else {}
            run(name, options.quick, options.into, **more)
    write_tables(options.into)
    write_plots(options.into)
    return 0


def run(name: str, quick: bool, folder: Path, **more: Any) -> None:
    """Measure one benchmark, print its tables and write its JSON file."""
    module = BENCHMARKS[name]
    conditions = machine()
    begin = time.perf_counter()
    # What threads there are is then our choice, and the same for every contender.
    with threadpool_limits(1, user_api="blas"):
        measured = module.measure(quick, **more)
    record = {
        "benchmark": name,
        "title": module.TITLE,
        "quick": quick,
        "machine": conditions,
        "took": round(time.perf_counter() - begin, 1),
        "measured": measured,
    }
    text = json.dumps(_plain(record), indent=1, allow_nan=False) + "\n"
    (folder / f"{name}.json").write_text(text, encoding="utf-8")
    print(_section(json.loads(text), module), flush=True)


def write_tables(folder: Path) -> None:
    """tables.md, from all JSON files in the folder."""
    records = _records(folder)
    if not records:
        return
    sections = [_section(record, BENCHMARKS[record["benchmark"]]) for record in records]
    (folder / "tables.md").write_text("\n".join(sections), encoding="utf-8")


def write_plots(folder: Path) -> None:
    """NAME.png and NAME.svg of every benchmark in the folder that has a plot."""
    from gibbsmin.figures.look import house_look
    from gibbsmin.figures.saving import save_figure

    for record in _records(folder):
        module = BENCHMARKS[record["benchmark"]]
        if hasattr(module, "plot"):
            with house_look():
                save_figure(module.plot(record["measured"]), folder, record["benchmark"])


def _records(folder: Path) -> list[dict[str, Any]]:
    paths = (folder / f"{name}.json" for name in BENCHMARKS)
    return [json.loads(path.read_text(encoding="utf-8")) for path in paths if path.exists()]


def _section(record: dict[str, Any], module: ModuleType) -> str:
    packages = ", ".join(
        f"{name} {number}" for name, number in record["machine"]["packages"].items() if number
    )
    lines = [f"### {record['title']}", ""]
    if record["quick"]:
        lines += ["(Quick mode: small sizes, few rounds; for checking the benchmark, not for quoting.)", ""]
    for table in module.tables(record["measured"]):
        lines += [table.markdown(), ""]
    where = record["machine"]
    lines.append(
        f"Measured on {where['cores']} cores ({where['architecture']}, {where['system']}), Python "
        f"{where['python']}, {packages}; load before the start {where['load before']}."
    )
    return "\n".join(lines) + "\n"


def _plain(value: Any) -> Any:
    """Only what JSON knows: strings for keys, null for numbers that are not finite."""
    if isinstance(value, dict):
        return {str(key): _plain(each) for key, each in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(each) for each in value]
    if hasattr(value, "item"):
        value = value.item()
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value


if __name__ == "__main__":
    sys.exit(main())
