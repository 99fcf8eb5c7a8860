"""Equilibrium composition of ideal-gas mixtures at given temperature and pressure: arrays in, arrays out.

The way of a point: drop what the balance excludes (absent elements and their species, dependent element rows),
estimate from a hierarchy of linear programs (start.py), iterate (newton.py), prove (certificate.py). Points travel
together as long as they share their components.
"""

from __future__ import annotations

from contextlib import suppress
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gibbsmin.array_settings import one_thread_for_linear_algebra
from gibbsmin.errors import ProblemError
from gibbsmin.minimiser.components import Amounts, Floats, Indices, exact
from gibbsmin.minimiser.grouping import alike
from gibbsmin.minimiser.newton import Batch, minimise_batches
from gibbsmin.minimiser.phases import settle
from gibbsmin.minimiser.posing import BALANCE_TOLERANCE, Answers, Posed
from gibbsmin.minimiser.result import Minimum, Status
from gibbsmin.minimiser.start import StartGroup, estimates
from gibbsmin.minimiser.vertex import UnboundedError, nearest_balanced

LEAST_AMOUNT, MOST_AMOUNT = 1e-150, 1e150
"""mol. Beyond these the sums of a problem may leave the range of doubles: it is then solved in a power of two of a mole."""

CHUNK = 16384
"""Points sorted and started together: enough for many of them to share their components."""


def minimise(
    formula_matrix: ArrayLike,
    element_amounts: ArrayLike,
    potentials: ArrayLike,
    *,
    condensed: ArrayLike | None = None,
) -> Minimum:
    """Find the composition of least Gibbs energy of an ideal gas beside pure condensed phases, and prove it.

    Parameters
    ----------
    formula_matrix : (E, S) atoms of element e in species j; a row may hold charges. Any finite decimals.
    element_amounts : (E,) or (N, E) mol. Doubles are taken as exact numbers; an object array of
        :class:`fractions.Fraction` gives amounts that no double can hold (0.1 mol, exactly stoichiometric).
    potentials : (S,) or (N, S) mu0 / RT + ln(p / p0) of each species at the temperature and pressure of the point;
        mu0 / RT of a pure condensed phase, or +inf where it is not to be considered.
    condensed : (S,) mask, or indices, of the species that are pure condensed phases; none by default.

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
    is_condensed = _mask(condensed, A.shape[1])
    points = len(c)
    b, exponent = _within_reach(b)
    answers = Answers.blank(points, *A.shape)
    problem = _Problem(A, is_condensed, b, c, answers)
    try:
        with one_thread_for_linear_algebra():
            for first in range(0, points, CHUNK):
                problem.solve(np.arange(first, min(first + CHUNK, points)))
    except UnboundedError:
        raise ProblemError(
            "some combination of species can be made from nothing: check the signs of the formula matrix"
        ) from None
    if exponent.any():
        answers.amounts = np.ldexp(answers.amounts, exponent[:, None])
        answers.gap = np.ldexp(answers.gap, exponent)
    return answers.minimum()


def _within_reach(b: Amounts) -> tuple[Amounts, NDArray[np.int32]]:
    """Element amounts (N, E) whose sums and squares no double can hold, or only with loss, times a power of two.

    Returns them with the exponents (N,) that undo it.
    """
    with np.errstate(invalid="ignore"):
        largest = np.abs(b.astype(np.float64)).max(axis=1)
    extreme = np.isfinite(largest) & (largest > 0.0) & ((largest < LEAST_AMOUNT) | (largest > MOST_AMOUNT))
    exponent = np.zeros(len(b), dtype=np.int32)
    if extreme.any():
        exponent[extreme] = np.frexp(largest[extreme])[1]
        b = b.copy()
        for point in np.flatnonzero(extreme):
            power = int(exponent[point])
            if b.dtype == object:
                b[point] = [exact(value) / Fraction(2) ** power for value in b[point]]
            else:
                b[point] = np.ldexp(b[point], -power)
    return b, exponent


def _checked(
    formula_matrix: ArrayLike, element_amounts: ArrayLike, potentials: ArrayLike
) -> tuple[Floats, Amounts, Floats]:
    A = np.asarray(formula_matrix, dtype=np.float64)
    b = np.asarray(element_amounts)
    if any(np.iscomplexobj(values) for values in (formula_matrix, b, potentials)):
        raise ProblemError("element amounts, potentials and the formula matrix must be real numbers")
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


def _mask(condensed: ArrayLike | None, species: int) -> NDArray[np.bool_]:
    if condensed is None:
        return np.zeros(species, dtype=bool)
    given = np.asarray(condensed)
    if given.dtype == bool:
        if given.shape != (species,):
            raise ProblemError(f"condensed must be a mask of {species} species, not of shape {given.shape}")
        return given
    mask = np.zeros(species, dtype=bool)
    try:
        mask[given.astype(np.intp)] = True
    except IndexError:
        raise ProblemError(f"condensed names a species beyond the {species} of the formula matrix") from None
    return mask


@dataclass(frozen=True)
class _Problem:
    """All points: A (E, S), condensed (S,), b (N, E), c (N, S); and where their answers go.

    `beside` marks a gas beside condensed phases (phases.py), whose proof is that of the whole.
    """

    A: Floats
    condensed: NDArray[np.bool_]
    b: Amounts
    c: Floats
    answers: Answers
    beside: bool = False

    def solve(self, points: Indices) -> None:
        """Sort points by the elements and phases they lack; each sort is then solved as a whole."""
        floats, c = self.b[points].astype(np.float64), self.c[points]
        out_of_question = np.isposinf(c) & self.condensed
        finite = np.isfinite(floats).all(axis=1) & (np.isfinite(c) | out_of_question).all(axis=1)
        self.answers.status[points[~finite]] = Status.NOT_FINITE
        empty = finite & ~floats.any(axis=1)
        self.answers.status[points[empty]] = Status.EMPTY
        here = finite & ~empty
        absent = (floats[here] == 0.0) & (self.A >= 0.0).all(axis=1)
        for pattern, members in alike(np.hstack([absent, out_of_question[here]]), points[here]):
            no_element, no_phase = pattern[: len(self.A)], pattern[len(self.A) :]
            kept = np.flatnonzero(~(self.A[no_element] > 0.0).any(axis=0) & ~no_phase)
            if kept.size:
                self.solve_alike(kept, members)

    def solve_alike(self, kept: Indices, points: Indices) -> None:
        """Solve points with the same species that may be present."""
        for posed, members in Posed.of(self.A, kept, self.b[points]):
            if members.size:
                self.solve_posed(posed, points[members])

    def solve_posed(self, posed: Posed, points: Indices) -> None:
        """Estimate all points; those whose balance excludes more species are posed anew without these."""
        independent = self.b[points[:, None], posed.system.rows]
        costs = self.c[points[:, None], posed.kept]
        starts, impossible = estimates(posed.system, independent, costs)
        for members in _same_amounts(self.b, points[impossible]):
            self.retry_nearest(posed, members)
        possible = []
        for start in starts:
            excluding = start.excluded.any(axis=1)
            for pattern, members in alike(start.excluded[excluding], np.flatnonzero(excluding)):
                self.solve_alike(posed.kept[~pattern.astype(bool)], points[start.points[members]])
            if not excluding.all():
                possible.append(start.take(np.flatnonzero(~excluding)))
        if self.condensed[posed.kept].any():
            self.solve_phases(posed, possible, independent, costs, points)
        else:
            self.solve_gas(posed, possible, independent, costs, points)

    def solve_gas(
        self, posed: Posed, starts: list[StartGroup], independent: Amounts, costs: Floats, points: Indices
    ) -> None:
        batches = []
        for start in starts:
            m = start.components.amounts(independent[start.points])
            batches.append(
                Batch.begin(start.components, start.points, m, start.log_y, start.total, costs[start.points])
            )
        for batch in minimise_batches(batches, independent, costs):
            posed.finish(batch, self.b[points], costs, points, self.answers, beside=self.beside)

    def solve_phases(
        self, posed: Posed, starts: list[StartGroup], independent: Amounts, costs: Floats, points: Indices
    ) -> None:
        condensed = self.condensed[posed.kept]
        for start in starts:
            columns = start.components.columns
            m = start.components.amounts(independent[start.points])
            first = {
                tuple(columns[pattern.astype(bool)].tolist()): start.points[members]
                for pattern, members in alike((m > 0.0) & condensed[columns], np.arange(len(m)))
            }
            for at, found in settle(
                posed, condensed, first, start.components, independent, costs, solve_gas_beside
            ):
                posed.finish_phases(condensed, found, self.b[points[at]], costs[at], points[at], self.answers)

    def retry_nearest(self, posed: Posed, points: Indices) -> None:
        """Points whose common element amounts lie just outside what the species can hold, by rounding."""
        given = self.b[points[0]]
        balanced = nearest_balanced(posed.system, given[posed.system.rows], BALANCE_TOLERANCE)
        if balanced is None:
            return
        corrected = np.array([[exact(value) for value in given]], dtype=object)
        corrected[0, posed.system.rows] = balanced
        apart = Answers.blank(len(points), *posed.A.shape)
        again = replace(self, b=corrected.repeat(len(points), axis=0), c=self.c[points], answers=apart)
        again.solve_alike(posed.kept, np.arange(len(points)))
        for name, values in vars(self.answers).items():
            values[points] = getattr(apart, name)


def solve_gas_beside(A: Floats, b: Amounts, c: Floats) -> Minimum:
    """A gas beside condensed phases as phases.py poses it: species may hold nothing but phases, amounts may be boundless.

    Parameters as those of minimise. The status says whether the iteration converged; gap is NaN.
    """
    answers = Answers.blank(len(c), *A.shape)
    problem = _Problem(A, np.zeros(A.shape[1], dtype=bool), b, c, answers, beside=True)
    try:
        problem.solve(np.arange(len(c)))
    except UnboundedError:  # of one point at least: each on its own then
        for point in range(len(c)):
            with suppress(UnboundedError):
                problem.solve(np.array([point]))
    return answers.minimum()


def _same_amounts(b: Amounts, points: Indices) -> list[Indices]:
    """Points grouped by equal element amounts."""
    groups: dict[tuple[Any, ...], list[np.intp]] = {}
    for point in points:
        groups.setdefault(tuple(b[point].tolist()), []).append(point)
    return [np.array(members) for members in groups.values()]
