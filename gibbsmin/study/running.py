"""A study from file to finished folder: plan, resume, compute, sum up."""

from __future__ import annotations

import errno
import json
import os
import secrets
import shutil
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING, Any

from gibbsmin.errors import StudyRefusedError, StudyStoppedError
from gibbsmin.grid.solve import available_cores
from gibbsmin.study.chunks import Chunk, Receipt
from gibbsmin.study.engines import Cluster, Engine, Processes, ThisProcess, Work, connect, expect_processes
from gibbsmin.study.locking import LOCK_FILE, folder_lock
from gibbsmin.study.model import Study
from gibbsmin.study.planning import Plan, plan_study
from gibbsmin.study.reading import load_study
from gibbsmin.study.shards import write_whole
from gibbsmin.study.solving import CaseSolver, solve_case
from gibbsmin.study.store import (
    MANIFEST,
    PROGRAM,
    STUDY_FILE,
    Found,
    examine,
    forget_unfinished,
    metadata,
    write_manifest,
    write_metadata,
    write_summary,
)

if TYPE_CHECKING:
    from gibbsmin.study.results import StudyResults

Progress = Callable[[int, int], None]
Tell = Callable[[str], None]

SMALL_STUDY = 30_000
"""Points below which starting further processes takes longer than the work."""

_FULL = (errno.ENOSPC, errno.EDQUOT)


@dataclass(frozen=True)
class StudyRun:
    """What a run did: the results, what it found of earlier ones, and how many chunks it computed itself."""

    results: StudyResults
    found: Found
    computed_chunks: int

    @property
    def all_solved(self) -> bool:
        return self.results.all_solved

    @property
    def all_confirmed(self) -> bool:
        return self.results.all_confirmed


def run_study(
    study: Study | str | PathLike[str],
    folder: str | PathLike[str],
    *,
    workers: int | None = None,
    cluster: Any = None,
    overwrite: bool = False,
    progress: Progress | None = None,
    tell: Tell | None = None,
    solver: CaseSolver = solve_case,
) -> StudyRun:
    """Compute a study, or what is missing of it, and keep everything in a folder.

    Interrupted at any moment, the same call goes on where it stopped: chunks that are finished, undamaged and made
    from the same inputs are kept, all others computed. A script that calls it needs the usual
    `if __name__ == "__main__":`, because further processes import it again.

    Args:
        study: a study file, or a study as `load_study` returns it.
        folder: new, empty, or that of an earlier run of this study.
        workers: processes on this machine; default its cores, or none beside this one for a small study.
        cluster: address of a Dask scheduler, or a Dask client, to compute there instead.
        overwrite: let this study take the place of another one in the folder.
        progress: called with the numbers of cases and points newly done.
        tell: called with a line of what was found and is being done.
        solver: of one case; for tests.

    Raises:
        StudyError: faults of the study file, its tables or its cases.
        StudyRefusedError: the folder is in use or holds something else, or the study would not fit on its disk.
        StudyStoppedError: the disk is full, or the workers were lost. What is finished is kept.
        MissingPackageError: a cluster is named and distributed is not installed.
    """
    if not isinstance(study, Study):
        if cluster is None and (available_cores() if workers is None else workers) > 1:
            expect_processes()
        study = load_study(study)
    home = Path(folder).resolve()
    check_study_folder(home, study.title, overwrite)
    plan = plan_study(study)
    tell = tell or (lambda line: None)
    with _client(cluster) as client, _folder(home), folder_lock(home):
        check_study_folder(home, study.title, overwrite)
        found = examine(plan, home)
        if words := found.in_words():
            tell(words)
        described = metadata(plan)
        forget_unfinished(plan, home, found, described)
        left = [(i, chunk) for i, chunk in enumerate(plan.chunks) if i not in found.receipts]
        _check_disk(home, [chunk for _, chunk in left])
        workers = workers if client is not None else workers_for(plan, workers, [chunk for _, chunk in left])
        _report_finished(plan, found, progress)
        digests = write_metadata(described, home)
        write_whole(home / STUDY_FILE, [study.text.encode()])
        receipts = dict(found.receipts)
        engine = Cluster(client) if client is not None else Processes(workers) if workers else ThisProcess()
        work = Work(home, secrets.token_hex(8), solver)
        _compute(engine, left, work, receipts, len(plan.chunks), progress)
        write_summary(plan, receipts, home)
        write_manifest(plan, receipts, digests, home)
        forget_unfinished(plan, home, Found.complete(receipts, len(plan.chunks)), described)
    from gibbsmin.study.results import open_study

    return StudyRun(open_study(home), found, len(left))


def _compute(
    engine: Engine,
    left: Sequence[tuple[int, Chunk]],
    work: Work,
    receipts: dict[int, Receipt],
    chunks: int,
    progress: Progress | None,
) -> None:
    by_number = dict(left)
    try:
        for i, receipt in engine.compute(left, work):
            receipts[i] = receipt
            if progress is not None:
                progress(len(by_number[i].cases), by_number[i].points)
    except OSError as error:
        reason = f"cannot go on: {error.strerror or error}"
        if error.errno in _FULL:
            reason = f"the disk of {work.folder} is full"
        raise StudyStoppedError(reason, len(receipts), chunks) from error
    except Exception as error:
        if isinstance(engine, ThisProcess):
            raise
        reason = f"the workers were lost ({type(error).__name__}: {error})"
        raise StudyStoppedError(reason, len(receipts), chunks) from error


def workers_for(plan: Plan, wanted: int | None, chunks: Sequence[Chunk]) -> int:
    """Processes of this machine beside its own that compute these chunks; 0 for none.

    As many as are wanted, or as it has cores and memory for.

    Raises StudyRefusedError, with the numbers, when not even one chunk fits into the memory.
    """
    memory = physical_memory()
    if memory is not None and plan.memory_bytes(0) > memory:
        raise StudyRefusedError(
            plan.study.title,
            f"the largest chunk takes {plan.memory_bytes(0) / 1e9:.3g} GB of memory, and this machine has "
            f"{memory / 1e9:.3g} GB; make its maps smaller, or its further axes into cases",
        )
    if wanted is None:
        wanted = 1 if sum(chunk.points for chunk in chunks) < SMALL_STUDY else available_cores()
        while memory is not None and wanted > 1 and plan.memory_bytes(wanted) > memory:
            wanted -= 1
    count = min(wanted, len(chunks))
    return count if count > 1 else 0


def physical_memory() -> int | None:
    """Bytes of memory of this machine, or None where the system does not say."""
    try:
        return os.sysconf("SC_PHYS_PAGES") * os.sysconf("SC_PAGE_SIZE")
    except (AttributeError, ValueError, OSError):
        return None


@contextmanager
def _client(cluster: Any) -> Iterator[Any]:
    """The Dask client meant by an address (closed at the end) or by itself; None for this machine."""
    if not isinstance(cluster, str):
        yield cluster
        return
    client = connect(cluster)
    try:
        yield client
    finally:
        client.close()


class _folder:  # noqa: N801  used like a function
    """The folder made for a run, and taken away again if nothing was done in it."""

    def __init__(self, home: Path) -> None:
        self._home = home
        self._made = not home.exists()

    def __enter__(self) -> None:
        self._home.mkdir(parents=True, exist_ok=True)

    def __exit__(self, kind: type[BaseException] | None, *_: object) -> None:
        if kind is not None and issubclass(kind, StudyRefusedError) and self._made:
            (self._home / LOCK_FILE).unlink(missing_ok=True)
            if not any(self._home.iterdir()):
                self._home.rmdir()


def check_study_folder(folder: Path, title: str, overwrite: bool) -> None:
    """Whether a study may be kept in a folder: it is new, empty, or holds a study, of that title unless
    overwriting is asked for.

    Raises StudyRefusedError otherwise.
    """
    if not folder.exists():
        return
    if not folder.is_dir():
        raise StudyRefusedError(str(folder), "it is no folder; choose another name")
    if not any(folder.iterdir()):
        return
    if not (folder / LOCK_FILE).is_file():
        raise StudyRefusedError(str(folder), "it holds other files and no study; choose another folder")
    earlier = _title_in(folder)
    if earlier is not None and earlier != title and not overwrite:
        raise StudyRefusedError(
            str(folder),
            f"it holds the study {earlier!r}; choose another folder or ask for it to be overwritten",
        )


def _title_in(folder: Path) -> str | None:
    for name, key in ((MANIFEST, "title"), ("results.zarr/zarr.json", "attributes")):
        try:
            content = json.loads((folder / name).read_text(encoding="utf-8"))
            if key == "title" and content.get("program") == PROGRAM:
                return str(content["title"])
            if key == "attributes":
                return str(content["attributes"]["title"])
        except (OSError, ValueError, KeyError, TypeError):
            continue
    return None


def _check_disk(folder: Path, chunks: Sequence[Chunk]) -> None:
    needed = sum(chunk.bytes for chunk in chunks)
    free = shutil.disk_usage(folder).free
    if needed > free:
        raise StudyRefusedError(
            str(folder),
            f"the chunks to be computed take {needed / 1e9:.3g} GB, and {free / 1e9:.3g} GB are free on this disk; "
            "keep fewer species ('keep: composition: key species'), or choose another disk",
        )


def _report_finished(plan: Plan, found: Found, progress: Progress | None) -> None:
    if progress is not None:
        for i in found.receipts:
            progress(len(plan.chunks[i].cases), plan.chunks[i].points)
