"""Where chunks are computed: in this process, on the cores of this machine, or on a Dask cluster.

An engine takes chunks and gives back (index, receipt) as they are finished, in whatever order. If the process
that holds a chunk dies, the chunk is begun anew; the trail in the folder tells which case is to blame.
"""

from __future__ import annotations

import hashlib
import itertools
import multiprocessing
import os
import pickle
import signal
import sys
import threading
from collections.abc import Iterator, Sequence
from concurrent.futures import FIRST_COMPLETED, Future, ProcessPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from contextlib import suppress
from dataclasses import dataclass
from multiprocessing.connection import wait as wait_for
from multiprocessing.forkserver import ensure_running
from pathlib import Path
from typing import Any, Protocol

from gibbsmin.errors import MissingPackageError, StudyRefusedError
from gibbsmin.study.chunks import Chunk, Group, Receipt
from gibbsmin.study.model import Case
from gibbsmin.study.solving import CaseSolver, solve_case, solve_chunk
from gibbsmin.study.trail import MOST_DEATHS

AHEAD = 3
"""Chunks handed out for each worker: none waits for work, and memory does not grow with the study."""


@dataclass(frozen=True)
class Work:
    """What every engine is told: the study's folder, the run's name, and how a case is solved."""

    folder: Path
    run_name: str
    solver: CaseSolver = solve_case


class Engine(Protocol):
    """Computes chunks."""

    @property
    def workers(self) -> int:
        """Processes beside this one; 0 for none."""
        ...

    def compute(self, chunks: Sequence[tuple[int, Chunk]], work: Work) -> Iterator[tuple[int, Receipt]]:
        """Yield (index, receipt) of each numbered chunk once its files are written.

        Raises OSError when a file cannot be written.
        """
        ...


class ThisProcess:
    """One chunk after the other, each map on all cores."""

    workers = 0

    def __init__(self, threads: int | None = None) -> None:
        self._threads = threads

    def compute(self, chunks: Sequence[tuple[int, Chunk]], work: Work) -> Iterator[tuple[int, Receipt]]:
        for i, chunk in chunks:
            yield i, solve_chunk(chunk, str(work.folder), work.run_name, self._threads, work.solver)


class Processes:
    """Processes of this machine, one thread each."""

    def __init__(self, workers: int) -> None:
        self.workers = workers

    def compute(self, chunks: Sequence[tuple[int, Chunk]], work: Work) -> Iterator[tuple[int, Receipt]]:
        left = dict(chunks)
        packer = _Packer()
        limit = _attempt_limit(left.values())
        deaths = 0
        while left:
            try:
                for i, receipt in self._with_one_pool(left, work, packer):
                    del left[i]
                    yield i, receipt
            except BrokenProcessPool:
                # Which chunk was to blame is in its trail; the next pool leaves that case out.
                deaths += 1
                if deaths > limit:
                    raise

    def _with_one_pool(
        self, left: dict[int, Chunk], work: Work, packer: _Packer
    ) -> Iterator[tuple[int, Receipt]]:
        pool = ProcessPoolExecutor(
            min(self.workers, len(left)), _process_context(), initializer=_begin_worker
        )
        clean = False
        try:
            waiting = iter(list(left.items()))
            running: dict[Future[Receipt], int] = {}
            while True:
                for i, chunk in itertools.islice(waiting, AHEAD * self.workers - len(running)):
                    running[pool.submit(_solve_packed, *packer.pack(chunk), work)] = i
                if not running:
                    break
                done, _ = wait(running, return_when=FIRST_COMPLETED)
                for future in done:
                    i = running.pop(future)
                    yield i, future.result()
            clean = True
        finally:
            if not clean:
                _end_processes(pool)
            pool.shutdown(wait=True, cancel_futures=True)


class Cluster:
    """Workers of a Dask cluster, which need this package and see the folder under the same path."""

    def __init__(self, client: Any) -> None:
        self._client = client

    @property
    def workers(self) -> int:
        return len(self._client.ncores())

    def compute(self, chunks: Sequence[tuple[int, Chunk]], work: Work) -> Iterator[tuple[int, Receipt]]:
        import distributed

        packer = _Packer()
        groups: dict[str, Any] = {}
        pending = dict(chunks)
        limit = _attempt_limit(pending.values())
        deaths = 0
        sources: dict[Any, int] = {}

        def submit(i: int) -> Any:
            group, digest, *rest = packer.pack(pending[i])
            if digest not in groups:
                # As a task and not as scattered data, which nobody could make again if all workers were lost.
                groups[digest] = self._client.submit(bytes, group, key=f"gibbsmin-{work.run_name}-{digest}")
            future = self._client.submit(
                _solve_packed,
                groups[digest],
                digest,
                *rest,
                work,
                key=f"gibbsmin-{work.run_name}-{i}-{deaths}",
                pure=False,
            )
            sources[future] = i
            return future

        order = iter(list(pending))
        ahead = max(AHEAD * 8, AHEAD * self.workers)
        futures: Any = distributed.as_completed(  # type: ignore[no-untyped-call]
            [submit(i) for i in itertools.islice(order, ahead)]
        )
        try:
            for future in futures:
                i = sources.pop(future)
                try:
                    receipt = future.result()
                except distributed.KilledWorker:
                    deaths += 1
                    if deaths > limit:
                        raise
                    futures.add(submit(i))
                    continue
                del pending[i]
                future.release()
                yield i, receipt
                for following in itertools.islice(order, 1):
                    futures.add(submit(following))
        finally:
            self._client.cancel(list(sources))


def expect_processes() -> None:
    """Let the server from which processes fork import the package while a study is still being read."""
    if sys.platform == "linux":
        _process_context()
        ensure_running()


def _process_context() -> Any:
    """How processes begin: they never share the memory of this one, whose threads may be in the middle of anything.

    On Linux they fork from a server that has imported the package once for all of them.
    """
    if sys.platform != "linux":
        return multiprocessing.get_context("spawn")
    context = multiprocessing.get_context("forkserver")
    context.set_forkserver_preload(["gibbsmin.study.preloading"])
    return context


def connect(address: str) -> Any:
    """A Dask client of the scheduler at an address.

    Raises MissingPackageError, or StudyRefusedError where no scheduler answers.
    """
    try:
        import distributed
    except ImportError as error:
        raise MissingPackageError("distributed", "running a study on a cluster") from error
    try:
        client: Any = distributed.Client(address, timeout="10s", set_as_default=False)  # type: ignore[no-untyped-call]
    except (OSError, ValueError) as error:
        raise StudyRefusedError(address, f"no Dask scheduler answers there ({error})") from error
    return client


def _attempt_limit(chunks: Any) -> int:
    """Deaths to bear: each case may cost its own, and some room for workers that die of other causes."""
    return 10 + MOST_DEATHS * sum(len(chunk.cases) for chunk in chunks)


class _Packer:
    """Chunks as they travel: what they share is pickled once, and unpacked once by each worker."""

    def __init__(self) -> None:
        self._packed: dict[int, tuple[bytes, str]] = {}

    def pack(self, chunk: Chunk) -> tuple[bytes, str, int, tuple[Case, ...], str]:
        key = id(chunk.group)  # groups live as long as the plan
        if key not in self._packed:
            content = pickle.dumps(chunk.group, protocol=pickle.HIGHEST_PROTOCOL)
            self._packed[key] = (content, hashlib.sha256(content).hexdigest())
        return (*self._packed[key], chunk.number, chunk.cases, chunk.inputs)


_groups: dict[str, Group] = {}
_GROUPS_KEPT = 16


def _solve_packed(
    group: bytes, digest: str, number: int, cases: tuple[Case, ...], inputs: str, work: Work
) -> Receipt:
    if digest not in _groups:
        if len(_groups) >= _GROUPS_KEPT:
            _groups.clear()
        _groups[digest] = pickle.loads(group)
    chunk = Chunk(_groups[digest], number, cases, inputs)
    return solve_chunk(chunk, str(work.folder), work.run_name, 1, work.solver)


def _begin_worker() -> None:
    """Leave Ctrl-C to the parent, and do not outlive it."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    parent = multiprocessing.parent_process()
    if parent is not None:
        threading.Thread(target=_end_with, args=(parent.sentinel,), daemon=True).start()


def _end_with(sentinel: int) -> None:
    wait_for([sentinel])
    os._exit(1)


def _end_processes(pool: ProcessPoolExecutor) -> None:
    """End the workers at once: what they have not finished is not wanted any more."""
    processes = getattr(pool, "_processes", None) or {}
    for process in list(processes.values()):
        with suppress(Exception):
            process.kill()
