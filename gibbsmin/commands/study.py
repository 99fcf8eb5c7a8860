"""`gibbsmin study`: compute a study, or what is missing of it."""

from __future__ import annotations

import argparse
import shutil
from pathlib import Path
from typing import TYPE_CHECKING

from gibbsmin.terminal import progress_bar, say

if TYPE_CHECKING:
    from gibbsmin.study.planning import Plan


def add_study(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "study",
        metavar="FILE",
        help="a study file, or the name of a shipped example where no file is called so",
    )
    parser.add_argument(
        "--out",
        metavar="FOLDER",
        help="where to keep it; what an earlier run of the same study has finished there is kept. "
        "Default: the study's name with -results, here",
    )
    parser.add_argument(
        "--dry-run", action="store_true", help="say what would be computed, and compute nothing"
    )
    place = parser.add_mutually_exclusive_group()
    place.add_argument(
        "--workers", type=_count, metavar="N", help="processes on this machine; default: its cores"
    )
    place.add_argument(
        "--cluster", metavar="ADDRESS", help="of a Dask scheduler (tcp://host:port) to compute there instead"
    )
    parser.add_argument("--overwrite", action="store_true", help="replace another study in FOLDER")
    parser.add_argument("--no-report", action="store_true", help="leave out report.html")
    parser.set_defaults(command=_study)


def _count(text: str) -> int:
    number = int(text)
    if number < 1:
        raise argparse.ArgumentTypeError("must be at least 1")
    return number


def _study(options: argparse.Namespace) -> int:
    from gibbsmin.errors import StudyStoppedError
    from gibbsmin.study.reading import load_study, study_file

    file = study_file(options.study)
    folder = Path(options.out or f"{file.stem}-results")
    with progress_bar(0, "checking", "cases", at_once=False) as checked:
        study = load_study(file, progress=checked)
    from gibbsmin.study.running import check_study_folder, run_study

    check_study_folder(folder.resolve(), study.title, options.overwrite)
    if options.dry_run:
        from gibbsmin.study.planning import plan_study

        print("\n".join(_described(plan_study(study), folder.resolve(), options.workers)))
        return 0
    with (
        progress_bar(study.points, "points", "points") as points_done,
        progress_bar(len(study.cases), "cases", "cases") as cases_done,
    ):

        def progress(cases: int, points: int) -> None:
            cases_done(cases)
            points_done(points)

        try:
            run = run_study(
                study,
                folder,
                workers=options.workers,
                cluster=options.cluster,
                overwrite=options.overwrite,
                progress=progress,
                tell=say,
            )
        except StudyStoppedError as stop:
            say(f"gibbsmin: {stop}")
            return 1  # something was computed, so it is not a wrong request
    kept = ["results.zarr", "summary.parquet", "manifest.json"]
    if not options.no_report:
        from gibbsmin.report import REPORT_FILE, study_results_html
        from gibbsmin.study.shards import write_whole

        write_whole(folder / REPORT_FILE, [study_results_html(run.results).encode("utf-8")])
        kept.append(REPORT_FILE)
    print(run.results.in_words())
    print(f"\nkept in {folder}: {', '.join(kept)}")
    return 0 if run.all_solved and run.all_confirmed else 1


def _described(plan: Plan, folder: Path, workers: int | None) -> list[str]:
    """What a run would do, with the numbers."""
    from gibbsmin.study.running import workers_for
    from gibbsmin.study.store import examine

    study = plan.study
    processes = workers_for(plan, workers, plan.chunks)
    existing = next(place for place in (folder, *folder.parents) if place.exists())
    free = shutil.disk_usage(existing).free
    found = examine(plan, folder)
    lines = [
        study.title,
        "",
        f"{len(study.cases):,} cases, {study.points:,} points, in {len(plan.chunks):,} chunks",
    ]
    for group in plan.groups:
        layout = group.layout
        sizes = " x ".join(
            f"{size} {axis.title}" for axis, size in zip(layout.axes, layout.shape, strict=True)
        )
        cases = len(plan.cases_of(group))
        lines.append(
            f"  {group.path or 'all cases'}: {cases:,} cases of {sizes}, {len(layout.species)} gases"
        )
        lines.append(f"    kept: {', '.join(array.name for array in group.arrays)}")
    lines += [
        f"varied: {', '.join(study.quantities) or 'nothing; the scenarios are taken as they are'}",
        f"disk: {plan.disk_bytes / 1e9:.3g} GB, of {free / 1e9:.3g} GB free",
        f"memory: at most {plan.memory_bytes(processes) / 1e9:.2g} GB in all, "
        f"on {processes or 'no'} further processes of this machine",
        found.in_words() or "nothing is computed yet",
    ]
    return lines
