"""What the package sets about NumPy and its linear algebra: only while it works, and undone afterwards."""

from __future__ import annotations

import numpy as np
import pytest
from threadpoolctl import threadpool_info, threadpool_limits

from gibbsmin.array_settings import SMALL_BUFFER, one_thread_for_linear_algebra, unbuffered
from gibbsmin.grid import solve_grid
from gibbsmin.minimiser import minimise

H2O = np.array([[2.0, 0.0, 2.0], [0.0, 2.0, 1.0]])  # H2, O2, H2O
POTENTIALS = np.array([-20.0, -25.0, -60.0])


def blas_threads() -> set[int]:
    return {library["num_threads"] for library in threadpool_info() if library["user_api"] == "blas"}


def test_linear_algebra_keeps_to_one_thread_and_is_set_free_again() -> None:
    with threadpool_limits(2, user_api="blas"):
        with one_thread_for_linear_algebra():
            assert blas_threads() == {1}
        assert blas_threads() == {2}


def test_buffers_are_small_only_inside() -> None:
    before = np.getbufsize()
    with unbuffered():
        assert np.getbufsize() == SMALL_BUFFER
    assert np.getbufsize() == before


@pytest.mark.parametrize("solver", ["minimise", "solve_grid"])
def test_solving_does_not_spread_linear_algebra_over_threads(
    solver: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Threads of our own already use the cores (common practice, no source)."""
    seen: list[set[int]] = []
    inner = np.linalg.solve

    def watched(*arguments: object, **more: object) -> object:
        seen.append(blas_threads())
        return inner(*arguments, **more)  # type: ignore[call-overload]

    monkeypatch.setattr(np.linalg, "solve", watched)
    with threadpool_limits(2, user_api="blas"):
        if solver == "minimise":
            minimise(H2O, [2.0, 1.5], POTENTIALS)
        else:
            solve_grid(H2O, np.array([[2.0, 1.5]]), POTENTIALS[None, :], np.array([900.0]), np.array([0.0]))
        assert blas_threads() == {2}
    assert seen
    assert set.union(*seen) == {1}
