"""Equilibrium composition of ideal-gas mixtures at given temperature and pressure: arrays in, arrays out.

The way of a point: drop what the balance excludes (absent elements and their species, dependent element rows),
estimate from a hierarchy of linear programs (start.py), iterate (newton.py), prove (certificate.py). Points travel
together as long as they share their components.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gibbsmin.errors import ProblemError
from gibbsmin.minimiser.certificate import optimality_gap
from gibbsmin.minimiser.components import Amounts, Floats, FormulaSystem, Indices, exact, formula_system
from gibbsmin.minimiser.newton import STEP_LIMIT, Batch, minimise_batches
from gibbsmin.minimiser.result import Minimum, Status
from gibbsmin.minimiser.start import estimates
from gibbsmin.minimiser.vertex import UnboundedError, nearest_balanced

CHUNK = 1024
"""Points solved together: enough to amortise the calls, few enough for their arrays to stay in cache."""

BALANCE_TOLERANCE = 1e-12
"""Element amounts may miss what the species can hold, or what a dependent row asks, by this part: rounding of the feed."""

GAP_TOLERANCE = 1e-10
"""A point is solved if its gap is at most this part of the sum of |element amounts|."""


def minimise(formula_matrix: ArrayLike, element_amounts: ArrayLike, potentials: ArrayLike) -> Minimum:
    """Find the composition of least Gibbs energy of ideal-gas mixtures, and prove it.

    Parameters
    ----------
    formula_matrix : (E, S) atoms of element e in species j; a row may hold charges. Any finite decimals.
    element_amounts : (E,) or (N, E) mol. Doubles are taken as exact numbers; an object array of
        :class:`fractions.Fraction` gives amounts that no double can hold (0.1 mol, exactly stoichiometric).
    potentials : (S,) or (N, S) mu0 / RT + ln(p / p0) of each species at the temperature and pressure of the point.

    Returns
    -------
    Minimum with arrays over N points. Points never disturb each other: one that cannot be solved has its own status
    and NaN in its values.

    Raises
    ------
    ProblemError : shapes do not fit, the formula matrix is not finite, a species has no elements, or some
        combination of species could be made from nothing.

    Examples
    --------
    2 A = A2 with ln K = 0 at 1 bar, from 2 mol of A:

    >>> minimum = minimise([[1, 2]], [2.0], [0.0, 0.0])
    >>> minimum.amounts.round(6)
    array([[0.894427, 0.552786]])

    Source: the problem is that of White, Johnson & Dantzig, J. Chem. Phys. 28 (1958) 751.
    """
    A, b, c = _checked(formula_matrix, element_amounts, potentials)
    points = len(c)
    result = _Fields.blank(points, *A.shape)
    try:
        for first in range(0, points, CHUNK):
            chunk = np.arange(first, min(first + CHUNK, points))
            _solve_chunk(A, b, c, chunk, result)
    except UnboundedError:
        raise ProblemError(
            "some combination of species can be made from nothing: check the signs of the formula matrix"
        ) from None
    return result.minimum()


@dataclass
class _Fields:
    """Result arrays while they are being filled."""

    amounts: Floats
    log_x: Floats
    pi: Floats
    steps: Indices
    status: NDArray[np.int8]
    gap: Floats
    residual: Floats

    @classmethod
    def blank(cls, points: int, elements: int, species: int) -> _Fields:
        return cls(
            np.full((points, species), np.nan),
            np.full((points, species), np.nan),
            np.full((points, elements), np.nan),
            np.zeros(points, dtype=np.intp),
            np.full(points, Status.INFEASIBLE, dtype=np.int8),
            np.full(points, np.nan),
            np.full(points, np.nan),
        )

    def minimum(self) -> Minimum:
        return Minimum(
            self.amounts,
            self.log_x,
            self.pi,
            self.steps.astype(np.int64),
            self.status,
            self.gap,
            self.residual,
        )


def _checked(
    formula_matrix: ArrayLike, element_amounts: ArrayLike, potentials: ArrayLike
) -> tuple[Floats, Amounts, Floats]:
    A = np.asarray(formula_matrix, dtype=np.float64)
    b = np.asarray(element_amounts)
    if b.dtype != object:
        b = b.astype(np.float64)
    c = np.asarray(potentials, dtype=np.float64)
    if A.ndim != 2 or 0 in A.shape:
        raise ProblemError(f"formula_matrix must be (elements, species), not of shape {A.shape}")
    if not np.isfinite(A).all():
        raise ProblemError("formula_matrix has entries that are not finite")
    empty = np.flatnonzero(~A.any(axis=0))
    if empty.size:
        raise ProblemError(f"species {int(empty[0])} holds no elements")
    if b.ndim not in (1, 2) or b.shape[-1] != A.shape[0]:
        raise ProblemError(
            f"element_amounts must be (N, {A.shape[0]}) or ({A.shape[0]},), not of shape {b.shape}"
        )
    if c.ndim not in (1, 2) or c.shape[-1] != A.shape[1]:
        raise ProblemError(f"potentials must be (N, {A.shape[1]}) or ({A.shape[1]},), not of shape {c.shape}")
    b, c = np.atleast_2d(b), np.atleast_2d(c)
    if len(b) != len(c) and 1 not in (len(b), len(c)):
        raise ProblemError(f"element_amounts has {len(b)} points, potentials {len(c)}")
    points = max(len(b), len(c))
    return A, np.broadcast_to(b, (points, b.shape[1])), np.broadcast_to(c, (points, c.shape[1]))


def _solve_chunk(A: Floats, b: Amounts, c: Floats, chunk: Indices, result: _Fields) -> None:
    """Sort the points of a chunk by what makes them special; each sort is then solved as a whole."""
    floats = b[chunk].astype(np.float64)
    finite = np.isfinite(floats).all(axis=1) & np.isfinite(c[chunk]).all(axis=1)
    result.status[chunk[~finite]] = Status.NOT_FINITE
    empty = finite & ~floats.any(axis=1)
    result.status[chunk[empty]] = Status.EMPTY
    chunk, floats = chunk[finite & ~empty], floats[finite & ~empty]
    absent = (floats == 0.0) & (A >= 0.0).all(axis=1)
    system = formula_system(A)
    for pattern, points in _alike(absent, chunk):
        kept = np.flatnonzero(~(A[pattern] > 0.0).any(axis=0))
        if kept.size:
            _solve_alike(A, system, kept, b, c, points, result)


def _alike(patterns: NDArray[Any], points: Indices) -> list[tuple[NDArray[Any], Indices]]:
    if not len(points):
        return []
    if (patterns == patterns[0]).all():
        return [(patterns[0], points)]
    unique, which = np.unique(patterns, axis=0, return_inverse=True)
    return [(pattern, points[which.ravel() == k]) for k, pattern in enumerate(unique)]


def _solve_alike(
    A: Floats, whole: FormulaSystem, kept: Indices, b: Amounts, c: Floats, points: Indices, result: _Fields
) -> None:
    """Solve points with the same species that may be present.

    Where element rows depend on each other, those of the scarcest elements are used: the balance of a plentiful
    element says nothing about a scarce one below the rounding of its amount.
    """
    columns = tuple(kept.tolist())
    system = whole if len(kept) == whole.n_species else whole.restricted(columns)
    if not system.dependent_rows:
        _solve_system(A, whole, system, kept, b, c, points, result)
        return
    order = np.argsort(np.abs(b[points].astype(np.float64)), axis=1, kind="stable")
    for row_order, members in _alike(order, points):
        system = whole.restricted(columns, tuple(row_order.tolist()))
        _solve_system(A, whole, system, kept, b, c, members[_consistent(system, b[members])], result)


def _solve_system(
    A: Floats,
    whole: FormulaSystem,
    system: FormulaSystem,
    kept: Indices,
    b: Amounts,
    c: Floats,
    points: Indices,
    result: _Fields,
) -> None:
    """Estimate, iterate, fill in; points whose balance excludes more species are posed anew without these."""
    if not len(points):
        return
    independent = b[np.ix_(points, system.rows)]
    costs = c[np.ix_(points, kept)]
    starts, impossible = estimates(system, independent, costs)
    if impossible.size:
        _retry_nearest(A, whole, system, kept, b, c, points[impossible], result)
    batches = []
    for start in starts:
        excluding = start.excluded.any(axis=1)
        for pattern, members in _alike(start.excluded[excluding], np.flatnonzero(excluding)):
            _solve_alike(A, whole, kept[~pattern], b, c, points[start.points[members]], result)
        full = np.flatnonzero(~excluding)
        if full.size:
            at = start.points[full]
            m = start.components.amounts(independent[at])
            batches.append(
                Batch.begin(start.components, at, m, start.log_y[full], start.total[full], costs[at])
            )
    for batch in minimise_batches(batches, independent, costs):
        _fill(
            A, system, kept, batch, b[points[batch.points]], costs[batch.points], points[batch.points], result
        )


def _consistent(system: FormulaSystem, b: Amounts) -> NDArray[np.bool_]:
    """(n,) whether the dependent element rows agree with the independent ones."""
    agreed = np.ones(len(b), dtype=bool)
    if not system.dependent_rows:
        return agreed
    floats = b.astype(np.float64)
    for row, weights in system.dependent_rows:
        terms = floats[:, system.rows] * np.array([float(weight) for weight in weights])
        size = np.abs(terms).sum(axis=1) + np.abs(floats[:, row])
        agreed &= np.abs(terms.sum(axis=1) - floats[:, row]) <= BALANCE_TOLERANCE * size
    return agreed


def _retry_nearest(
    A: Floats,
    whole: FormulaSystem,
    system: FormulaSystem,
    kept: Indices,
    b: Amounts,
    c: Floats,
    points: Indices,
    result: _Fields,
) -> None:
    """Points just outside what the species can hold, by rounding of their element amounts."""
    for point in points:
        balanced = nearest_balanced(system, b[point, system.rows], BALANCE_TOLERANCE)
        if balanced is None:
            continue
        corrected = np.array([[exact(value) for value in b[point]]], dtype=object)
        corrected[0, system.rows] = balanced
        alone = _Fields.blank(1, *A.shape)
        _solve_alike(A, whole, kept, corrected, c[point : point + 1], np.array([0]), alone)
        for name in vars(result):
            getattr(result, name)[point] = getattr(alone, name)[0]


def _fill(
    A: Floats,
    system: FormulaSystem,
    kept: Indices,
    batch: Batch,
    b: Amounts,
    costs: Floats,
    points: Indices,
    result: _Fields,
) -> None:
    """Amounts, potentials and the proof of finished points."""
    log_x = batch.log_mole_fractions()
    amounts = np.exp(log_x + batch.log_total[:, None])
    floats = b.astype(np.float64)
    inside = A[:, kept]
    pi = np.full((len(points), len(A)), np.nan)
    pi[:, inside.any(axis=1)] = 0.0
    components = batch.components
    known = batch.log_y + costs[:, components.columns]
    pi[:, system.rows] = np.linalg.solve(inside[np.ix_(system.rows, components.columns)].T, known.T).T
    gap = optimality_gap(inside, floats, costs, amounts, np.nan_to_num(pi), log_mole_fractions=log_x)
    turnover = np.maximum(amounts @ np.abs(inside).T, np.abs(floats))
    missed = np.abs(amounts @ inside.T - floats)
    residual = np.divide(missed, turnover, where=turnover > 0.0, out=np.zeros_like(missed)).max(axis=1)
    proved = (gap <= GAP_TOLERANCE * np.abs(floats).sum(axis=1)) & (residual <= BALANCE_TOLERANCE)
    stopped = batch.steps >= STEP_LIMIT
    result.status[points] = np.where(
        stopped, Status.STEP_LIMIT, np.where(proved, Status.SOLVED, Status.NOT_PROVED)
    )
    result.steps[points] = batch.steps
    result.gap[points] = gap
    result.residual[points] = residual
    solved = points[proved & ~stopped]
    for target, fill in ((result.amounts, 0.0), (result.log_x, -np.inf)):
        target[solved] = fill
    inside_solved = np.ix_(solved, kept)
    keep = proved & ~stopped
    result.amounts[inside_solved] = amounts[keep]
    result.log_x[inside_solved] = log_x[keep]
    result.pi[solved] = pi[keep]
