"""Vertices of the linear program min c.n subject to A n = b, n >= 0, for a batch of (b, c).

With the mixing terms left out the Gibbs energy is linear and its minimum lies at a vertex: the components carry
everything. Neighbouring problems share their vertex, so points are kept in groups of equal components; one group
costs a few array operations, and only points that leave a group make new ones.

The simplex method works on exact components (components.py), so a degenerate vertex is seen as exactly degenerate,
and the lexicographic choice of the leaving component (Dantzig, Orden & Wolfe, Pacific J. Math. 5 (1955) 183)
excludes cycling.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np

from gibbsmin.minimiser.components import Amounts, Components, Floats, FormulaSystem, Indices, exact
from gibbsmin.minimiser.grouping import by_value

COST_TOLERANCE = 1e-9
"""Reduced costs above minus this (in RT) count as non-negative: the vertex only has to be a good start."""

NEAR_TIE = 1e-9
"""Ratios closer than this (relative) are compared exactly: rounding must not choose the leaving component."""

PIVOT_SIZE = 1e-9
"""Entries of C are ratios of small integers; anything below this is an exact zero seen through rounding."""


@dataclass(frozen=True)
class VertexGroup:
    """Points (indices) that share optimal components; amounts (n, r) mol and reduced costs (n, S)."""

    components: Components
    points: Indices
    amounts: Floats
    reduced_costs: Floats


def optimal_vertices(system: FormulaSystem, b: Amounts, c: Floats) -> tuple[list[VertexGroup], Indices]:
    """Solve the linear programs of all points.

    Parameters
    ----------
    system : formula system with r independent rows, S species.
    b : (n, r) amounts of the independent elements [mol].
    c : (n, S) costs, the reduced potentials [RT].

    Returns
    -------
    groups of points with equal optimal components, and the indices of points that no amounts can balance.

    Raises
    ------
    UnboundedError : some combination of species can be made from nothing.
    """
    queue, impossible = _feasible_groups(system, b, c)
    return _descend(queue, b, c), impossible


class UnboundedError(ArithmeticError):
    """Some species can be made from nothing: the formula matrix does not bound the amounts."""


@dataclass(frozen=True)
class _Visit:
    """Points on their way through one vertex; first is the vertex they came from (for breaking ties)."""

    components: Components
    first: Components
    points: Indices


def _descend(queue: list[_Visit], b: Amounts, c: Floats) -> list[VertexGroup]:
    groups: list[VertexGroup] = []
    while queue:
        visit = queue.pop()
        components, points = visit.components, visit.points
        amounts = components.amounts(b[points])
        costs = c[points]
        reduced = costs - costs[:, components.columns] @ components.C
        reduced[:, components.columns] = 0.0
        entering = np.argmin(reduced * components.steepness, axis=1)
        done = reduced.min(axis=1) >= -COST_TOLERANCE
        if done.any():
            groups.append(VertexGroup(components, points[done], amounts[done], reduced[done]))
        moving = np.flatnonzero(~done)
        if moving.size:
            queue.extend(_pivots(visit, moving, amounts[moving], b[points[moving]], entering[moving]))
            queue = _merged(queue)
    return groups


def _pivots(
    visit: _Visit, moving: Indices, amounts: Floats, b: Amounts, entering: Indices
) -> Iterator[_Visit]:
    """Exchange one component for the entering species, point by point, grouped by outcome."""
    for species, members in by_value(entering, np.arange(len(moving))):
        leaving = _leaving(visit, amounts[members], b[members], species)
        for position, leavers in by_value(leaving, visit.points[moving[members]]):
            yield _Visit(visit.components.exchange(position, species), visit.first, leavers)


def _leaving(visit: _Visit, amounts: Floats, b: Amounts, entering: int) -> Indices:
    """Position of the component that vanishes first; ties are broken lexicographically."""
    components = visit.components
    column = components.C[:, entering]
    candidates = np.flatnonzero(column > PIVOT_SIZE)
    if not candidates.size:
        raise UnboundedError
    ratios = amounts[:, candidates] / column[candidates]
    least = ratios.min(axis=1, keepdims=True)
    tied = ratios <= least * (1.0 + NEAR_TIE)
    crowded = tied.sum(axis=1) > 1
    if not crowded.any():
        return np.asarray(candidates[np.argmax(tied, axis=1)])
    decided: dict[tuple[Any, ...], list[bool]] = {}
    for point in np.flatnonzero(crowded & (least[:, 0] > 0.0)):
        near = np.flatnonzero(tied[point])
        case = (*b[point].tolist(), *near.tolist())
        if case not in decided:
            exact_ratios = components.exact_ratios(b[point], candidates[near], entering)
            decided[case] = [ratio == min(exact_ratios) for ratio in exact_ratios]
        tied[point, near] = decided[case]
    keys = components.C[candidates[:, None], visit.first.columns] / column[candidates][:, None]
    rank = np.empty(len(candidates), dtype=np.intp)
    rank[np.lexsort(np.round(keys, 9).T[::-1])] = np.arange(len(candidates))
    return np.asarray(candidates[np.argmin(np.where(tied, rank, len(candidates)), axis=1)])


def _merged(queue: list[_Visit]) -> list[_Visit]:
    if len(queue) < 2:
        return queue
    alike: dict[tuple[tuple[int, ...], tuple[int, ...]], list[_Visit]] = {}
    for visit in queue:
        alike.setdefault((visit.components.key, visit.first.key), []).append(visit)
    return [
        visits[0]
        if len(visits) == 1
        else _Visit(visits[0].components, visits[0].first, np.concatenate([visit.points for visit in visits]))
        for visits in alike.values()
    ]


def _feasible_groups(system: FormulaSystem, b: Amounts, c: Floats) -> tuple[list[_Visit], Indices]:
    """Starting components with non-negative amounts, for every point that has any.

    One point goes all the way to its optimum first: from there it is not far for the others.
    """
    left = np.arange(len(b))
    visits: list[_Visit] = []
    impossible: list[Indices] = []
    while left.size:
        # remembered by the amounts alone: what was solved before must not leave its mark on the rounding
        amounts = tuple(b[left[0]].tolist())
        found = system.feasible.get(amounts)
        if found is None:
            found = system.feasible[amounts] = _feasible_components(system, b[left[:1]])
        if found is None:
            fits = (b[left] == b[left[0]]).all(axis=1)
            impossible.append(left[fits])
        else:
            if left.size > 1:
                (first,) = _descend([_Visit(found, found, left[:1])], b, c)
                found = first.components
            fits = (found.amounts(b[left]) >= 0.0).all(axis=1)
            visits.append(_Visit(found, found, left[fits]))
        left = left[~fits]
    return visits, np.concatenate(impossible) if impossible else np.zeros(0, dtype=np.intp)


def _feasible_components(system: FormulaSystem, b: Amounts, *, nearest: bool = False) -> Components | None:
    """First phase of the simplex method: drive artificial species, one for each balance, to zero.

    b is (1, r). Returns None if the balances have no non-negative solution, unless the nearest components are wanted.
    """
    r = system.rank
    signs = np.where(b[0] < 0.0, -1, 1)
    artificial = np.diag(signs).astype(system.integers.dtype)
    extended = FormulaSystem(np.hstack([system.integers, artificial]), np.append(system.scale, np.ones(r)))
    n = system.n_species
    start = extended.components(range(n, n + r))
    cost = np.append(np.zeros(n), np.ones(r))[None, :]
    (group,) = _descend([_Visit(start, start, np.zeros(1, dtype=np.intp))], b, cost)
    components = group.components
    if (components.amounts(b)[0, components.columns >= n] > 0.0).any() and not nearest:
        return None
    while components.columns[-1] >= n:
        position = len(components.columns) - 1
        row = components.C[position, :n]
        components = components.exchange(position, int(np.argmax(np.abs(row) > PIVOT_SIZE)))
    return system.components(components.columns)


def nearest_balanced(system: FormulaSystem, b: Amounts, tolerance: float) -> list[Fraction] | None:
    """Element amounts (r,) that can be balanced and differ from b (r,) by rounding alone, exactly; None if none do.

    A feed on the edge of what the species can make may fall outside it by the rounding of its amounts. The negative
    remainders are then set to zero.
    """
    components = _feasible_components(system, b[None, :], nearest=True)
    assert components is not None
    amounts = components.exact_amounts(b)
    size = max(abs(amount) for amount in amounts)
    kept = [amount if amount > size * Fraction(tolerance) else Fraction(0) for amount in amounts]
    if all(amount >= 0 for amount in amounts):
        kept = amounts
    balanced = components.element_amounts(kept)
    close = all(
        abs(new - exact(old)) <= tolerance * abs(exact(old)) for new, old in zip(balanced, b, strict=True)
    )
    return balanced if close else None
