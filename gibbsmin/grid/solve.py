"""Solve whole maps or lists of points, in tasks spread over threads.

NumPy and the linear algebra beneath it release the interpreter lock, so threads share the arrays and still run side
by side; the linear algebra itself is kept to one thread each.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gibbsmin.array_settings import one_thread_for_linear_algebra, unbuffered
from gibbsmin.grid.cloud import Cloud
from gibbsmin.grid.map import is_dense, solve_nodes, solve_tile, tiles
from gibbsmin.grid.phase_map import phase_tasks
from gibbsmin.grid.scattered import ROUNDS, left_over, take_sample, tasks
from gibbsmin.grid.solution import Floats, GridSolution
from gibbsmin.minimiser import minimise

SMALLEST_TASK, LARGEST_TASK, TASKS = 1024, 16384, 8
"""Scattered points a task: many, so that enough of them share their components, but enough tasks for some threads.

The number of threads has no say: it must not show in the rounding of the results.
"""

Progress = Callable[[int], None]
Indices = NDArray[np.intp]
Amounts = NDArray[Any]


def solve_grid(
    formula_matrix: Floats,
    element_amounts: Amounts,
    gibbs_RT: Floats,
    temperature: Floats,
    log_pressure: Floats,
    *,
    condensed: NDArray[np.bool_] | None = None,
    threads: int | None = None,
    progress: Progress | None = None,
) -> GridSolution:
    """Every combination of feeds, temperatures and pressures.

    Parameters
    ----------
    formula_matrix : (E, S).
    element_amounts : (F, E) mol, one row a feed; doubles or exact Fractions.
    gibbs_RT : (nT, S) standard g / RT of each species at each temperature.
    temperature : (nT,) K.
    log_pressure : (nP,) ln(p / p0).
    condensed : (S,) mask of pure condensed phases, whose gibbs_RT is +inf where they are not to be considered.
    threads : number of threads; all available cores by default.
    progress : called with the number of points done since the last call.

    Returns
    -------
    GridSolution with leading shape (F, nT, nP).
    """
    shape = (len(element_amounts), len(temperature), len(log_pressure))
    T, T_order = np.unique(temperature, return_index=True)
    p, p_order = np.unique(log_pressure, return_index=True)
    distinct = (len(T), len(p)) == shape[1:]
    is_map = distinct and np.isfinite(gibbs_RT).all() and is_dense(T, p)
    if not is_map:
        feed, T_index, p_index = (index.ravel() for index in np.indices(shape))
        return solve_points(
            formula_matrix,
            element_amounts,
            gibbs_RT,
            temperature,
            log_pressure,
            feed,
            T_index,
            p_index,
            condensed=condensed,
            threads=threads,
            progress=progress,
        ).reshaped(shape)
    g = gibbs_RT[T_order]
    out = GridSolution.blank(shape, *formula_matrix.shape)
    with _workers(threads, out.status.size) as pool:
        for feed, b in enumerate(element_amounts):
            if condensed is None:
                work = _map_tasks(formula_matrix, b, g, T, p, out.part(feed))
            else:
                work = _phase_map_tasks(formula_matrix, condensed, b, g, T, p, out.part(feed))
            _run(pool, work, progress)
    if (np.diff(T_order) > 0).all() and (np.diff(p_order) > 0).all():
        return out
    return out.part((slice(None), *np.ix_(np.argsort(T_order), np.argsort(p_order))))


def _map_tasks(
    A: Floats, b: Amounts, g: Floats, T: Floats, p: Floats, out: GridSolution
) -> Iterator[Callable[[], int]]:
    """Work on the tiles of one feed's map; where its nodes cannot be solved, on rows of temperature from nothing."""
    nodes = solve_nodes(A, b, g, T, p)
    if nodes is not None:
        for tile in tiles(nodes, len(T), len(p)):
            yield lambda tile=tile: solve_tile(nodes, tile, g, p, out)  # type: ignore[misc]
        return
    yield from _rows(A, np.zeros(A.shape[1], dtype=bool), b, g, p, out)


def _phase_map_tasks(
    A: Floats,
    condensed: NDArray[np.bool_],
    b: Amounts,
    g: Floats,
    T: Floats,
    p: Floats,
    out: GridSolution,
) -> Iterator[Callable[[], int]]:
    """The same with condensed phases."""
    work = phase_tasks(A, condensed, b, g, T, p, out)
    yield from _rows(A, condensed, b, g, p, out) if work is None else work


def _rows(
    A: Floats, condensed: NDArray[np.bool_], b: Amounts, g: Floats, p: Floats, out: GridSolution
) -> Iterator[Callable[[], int]]:
    """Rows of temperature from nothing, some together."""
    height = max(1, SMALLEST_TASK // len(p))
    for first in range(0, len(g), height):

        def task(rows: slice = slice(first, min(first + height, len(g)))) -> int:  # noqa: B008
            c = g[rows][:, None, :] + p[:, None] * ~condensed
            found = minimise(A, b, c.reshape(-1, c.shape[-1]), condensed=condensed)
            row, column = np.divmod(np.arange(len(found.status)), len(p))
            out.fill((row + rows.start, column), found)
            return len(found.status)

        yield task


def solve_points(
    formula_matrix: Floats,
    element_amounts: Amounts,
    gibbs_RT: Floats,
    temperature: Floats,
    log_pressure: Floats,
    feed_index: Indices,
    temperature_index: Indices,
    pressure_index: Indices,
    *,
    condensed: NDArray[np.bool_] | None = None,
    threads: int | None = None,
    progress: Progress | None = None,
) -> GridSolution:
    """Scattered points, each with its feed, temperature and pressure by index (N,).

    Other parameters as in :func:`solve_grid`. Returns a GridSolution with leading shape (N,).
    """
    cloud = Cloud(
        formula_matrix,
        element_amounts,
        gibbs_RT,
        temperature,
        log_pressure,
        feed_index,
        temperature_index,
        pressure_index,
        np.zeros(formula_matrix.shape[1], dtype=bool) if condensed is None else condensed,
    )
    out = GridSolution.blank((len(feed_index),), *formula_matrix.shape)
    with _workers(threads, len(feed_index)) as pool:
        rest = np.arange(len(feed_index))
        for _ in range(ROUNDS):
            sample = take_sample(cloud, rest)
            if sample is None:
                break
            _run(pool, tasks(cloud, sample, rest, out), progress)
            rest = left_over(out)
        _run(pool, _from_nothing(cloud, rest, out), progress)
    return out


def _from_nothing(cloud: Cloud, points: Indices, out: GridSolution) -> Iterator[Callable[[], int]]:
    size = int(np.clip(len(points) // TASKS, SMALLEST_TASK, LARGEST_TASK))
    for first in range(0, len(points), size):

        def task(index: Indices = points[first : first + size]) -> int:
            b, c = cloud.b[cloud.feed[index]], cloud.potentials(index)
            out.fill(index, minimise(cloud.A, b, c, condensed=cloud.condensed))
            return len(index)

        yield task


@contextmanager
def _workers(threads: int | None, points: int) -> Iterator[ThreadPoolExecutor | None]:
    """A pool of threads, or None where one is enough, while the linear algebra keeps to one thread."""
    count = threads or available_cores()
    with one_thread_for_linear_algebra():
        if count == 1 or points < SMALLEST_TASK:
            yield None
        else:
            with ThreadPoolExecutor(count) as pool:
                yield pool


def _run(
    pool: ThreadPoolExecutor | None, work: Iterable[Callable[[], int]], progress: Progress | None
) -> None:
    for count in map(_done, work) if pool is None else pool.map(_done, work):
        if progress is not None:
            progress(count)


def _done(task: Callable[[], int]) -> int:
    with unbuffered():
        return task()


def available_cores() -> int:
    """Cores that this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1
