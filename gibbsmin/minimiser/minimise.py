"""Equilibrium composition of ideal-gas mixtures at given temperature and pressure: arrays in, arrays out.

The way of a point: drop what the balance excludes (absent elements and their species, dependent element rows),
estimate from a hierarchy of linear programs (start.py), iterate (newton.py), prove (certificate.py). Points travel
together as long as they share their components.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from gibbsmin.errors import ProblemError
from gibbsmin.minimiser.components import Amounts, Floats, Indices, exact
from gibbsmin.minimiser.newton import Batch, minimise_batches
from gibbsmin.minimiser.posing import BALANCE_TOLERANCE, Answers, Posed, alike
from gibbsmin.minimiser.result import Minimum, Status
from gibbsmin.minimiser.start import estimates
from gibbsmin.minimiser.vertex import UnboundedError, nearest_balanced

CHUNK = 16384
"""Points sorted and started together: enough for many of them to share their components."""


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
    answers = Answers.blank(points, *A.shape)
    try:
        for first in range(0, points, CHUNK):
            chunk = np.arange(first, min(first + CHUNK, points))
            _solve_chunk(A, b, c, chunk, answers)
    except UnboundedError:
        raise ProblemError(
            "some combination of species can be made from nothing: check the signs of the formula matrix"
        ) from None
    return answers.minimum()


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


def _solve_chunk(A: Floats, b: Amounts, c: Floats, chunk: Indices, answers: Answers) -> None:
    """Sort the points of a chunk by the elements they lack; each sort is then solved as a whole."""
    floats = b[chunk].astype(np.float64)
    finite = np.isfinite(floats).all(axis=1) & np.isfinite(c[chunk]).all(axis=1)
    answers.status[chunk[~finite]] = Status.NOT_FINITE
    empty = finite & ~floats.any(axis=1)
    answers.status[chunk[empty]] = Status.EMPTY
    chunk, floats = chunk[finite & ~empty], floats[finite & ~empty]
    absent = (floats == 0.0) & (A >= 0.0).all(axis=1)
    for pattern, points in alike(absent, chunk):
        kept = np.flatnonzero(~(A[pattern] > 0.0).any(axis=0))
        if kept.size:
            _solve_alike(A, kept, b, c, points, answers)


def _solve_alike(A: Floats, kept: Indices, b: Amounts, c: Floats, points: Indices, answers: Answers) -> None:
    """Solve points with the same species that may be present; those whose balance excludes more are posed anew."""
    for posed, members in Posed.of(A, kept, b[points]):
        if members.size:
            _solve_posed(posed, b, c, points[members], answers)


def _solve_posed(posed: Posed, b: Amounts, c: Floats, points: Indices, answers: Answers) -> None:
    independent = b[np.ix_(points, posed.system.rows)]
    costs = c[np.ix_(points, posed.kept)]
    starts, impossible = estimates(posed.system, independent, costs)
    for members in _same_amounts(b, points[impossible]):
        _retry_nearest(posed, b, c, members, answers)
    batches = []
    for start in starts:
        excluding = start.excluded.any(axis=1)
        for pattern, members in alike(start.excluded[excluding], np.flatnonzero(excluding)):
            _solve_alike(
                posed.A, posed.kept[~pattern.astype(bool)], b, c, points[start.points[members]], answers
            )
        full = np.flatnonzero(~excluding)
        if full.size:
            at = start.points[full]
            m = start.components.amounts(independent[at])
            batches.append(
                Batch.begin(start.components, at, m, start.log_y[full], start.total[full], costs[at])
            )
    for batch in minimise_batches(batches, independent, costs):
        posed.finish(batch, b[points], costs, points, answers)


def _same_amounts(b: Amounts, points: Indices) -> list[Indices]:
    """Points grouped by equal element amounts."""
    groups: dict[tuple[Any, ...], list[np.intp]] = {}
    for point in points:
        groups.setdefault(tuple(b[point].tolist()), []).append(point)
    return [np.array(members) for members in groups.values()]


def _retry_nearest(posed: Posed, b: Amounts, c: Floats, points: Indices, answers: Answers) -> None:
    """Points whose common element amounts lie just outside what the species can hold, by rounding."""
    given = b[points[0]]
    balanced = nearest_balanced(posed.system, given[posed.system.rows], BALANCE_TOLERANCE)
    if balanced is None:
        return
    corrected = np.array([[exact(value) for value in given]], dtype=object)
    corrected[0, posed.system.rows] = balanced
    apart = Answers.blank(len(points), *posed.A.shape)
    every = np.arange(len(points))
    _solve_alike(posed.A, posed.kept, corrected.repeat(len(points), axis=0), c[points], every, apart)
    for name, values in vars(answers).items():
        values[points] = getattr(apart, name)
