"""Solve the points of a map in chunks, spread over threads."""

from __future__ import annotations

import os
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

import numpy as np
from numpy.typing import NDArray
from threadpoolctl import threadpool_limits

from gibbsmin.grid.solution import Floats, GridSolution
from gibbsmin.minimiser import minimise

CHUNK = 1024
"""Points a task: their arrays stay in cache, and a thread has enough to do."""

Progress = Callable[[int], None]


def solve_grid(
    formula_matrix: Floats,
    element_amounts: NDArray,  # type: ignore[type-arg]
    gibbs_RT: Floats,
    temperature: Floats,
    log_pressure: Floats,
    *,
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
    threads : number of threads; all available cores by default.
    progress : called with the number of points done since the last call.

    Returns
    -------
    GridSolution with leading shape (F, nT, nP).
    """
    shape = (len(element_amounts), len(temperature), len(log_pressure))
    feed, T, p = (index.ravel() for index in np.indices(shape))
    flat = solve_points(
        formula_matrix, element_amounts, gibbs_RT, log_pressure, feed, T, p, threads=threads, progress=progress
    )
    return flat.reshaped(shape)


def solve_points(
    formula_matrix: Floats,
    element_amounts: NDArray,  # type: ignore[type-arg]
    gibbs_RT: Floats,
    log_pressure: Floats,
    feed_index: NDArray[np.intp],
    temperature_index: NDArray[np.intp],
    pressure_index: NDArray[np.intp],
    *,
    threads: int | None = None,
    progress: Progress | None = None,
) -> GridSolution:
    """Scattered points, each with its feed, temperature and pressure by index (N,).

    Other parameters as in :func:`solve_grid`. Returns a GridSolution with leading shape (N,).
    """
    points = len(feed_index)
    solution = GridSolution.blank((points,), *formula_matrix.shape)

    def solve(first: int) -> int:
        at = slice(first, min(first + CHUNK, points))
        potentials = gibbs_RT[temperature_index[at]] + log_pressure[pressure_index[at], None]
        solution.fill(at, minimise(formula_matrix, element_amounts[feed_index[at]], potentials))
        return at.stop - at.start

    starts = range(0, points, CHUNK)
    workers = min(threads or available_cores(), max(len(starts), 1))
    with threadpool_limits(1, user_api="blas"):
        if workers == 1:
            for first in starts:
                _report(progress, solve(first))
        else:
            with ThreadPoolExecutor(workers) as pool:
                for done in pool.map(solve, starts):
                    _report(progress, done)
    return solution


def available_cores() -> int:
    """Cores that this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def _report(progress: Progress | None, done: int) -> None:
    if progress is not None:
        progress(done)
