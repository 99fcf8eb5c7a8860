"""Maps with condensed phases: one smooth map for each set of phases, and at each point the one that holds.

With the phases W present, the gas beside them is a gas problem of its own (minimiser/phases.py) whose solution is smooth
over the map, also where W is not what nature would choose: there a phase has a negative amount or an absent one is
supersaturated. So the nodes show which sets occur, each set gets its map (map.py), and a point takes the first answer
that satisfies all conditions. The problem is convex: an answer that does is the minimum, whichever set was tried.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from gibbsmin.grid.map import Nodes, Tile, components_at, estimate, is_dense, rectangles, solve_nodes
from gibbsmin.grid.nodes import Axis, Floats, Indices
from gibbsmin.grid.polish import LAST_ERROR, ROUNDING, SETTLED, STEPS, TINY, Polished, Rectangle, polish
from gibbsmin.grid.solution import GridSolution
from gibbsmin.minimiser import Status, minimise
from gibbsmin.minimiser.certificate import shift_weight
from gibbsmin.minimiser.components import Amounts
from gibbsmin.minimiser.phases import NEGATIVE_AMOUNT, SUPERSATURATION, GasProblem
from gibbsmin.minimiser.posing import BALANCE_TOLERANCE, GAP_TOLERANCE, Posed

CHUNK = 3200
"""Points solved as one: fewer than without phases, so that most parts lie on one side of every boundary."""

LOOKS = 10
"""Points in each direction at which the map is looked at for the phases that occur."""


@dataclass(frozen=True)
class PhaseMap:
    """One set of phases over a map.

    problem : the gas beside these phases; nodes of that gas; b (E,) mol of the whole; condensed (s,) of the posed species.
    """

    problem: GasProblem
    nodes: Nodes
    b: Floats
    m: Floats  # (r,) of the problem's components
    condensed: NDArray[np.bool_]

    @cached_property
    def gas(self) -> Indices:
        """Posed gas species that the nodes hold."""
        return self.problem.gas[self.nodes.posed.kept]

    @cached_property
    def phases(self) -> Indices:
        """Posed species that are the present phases."""
        return self.problem.components.columns[self.problem.phase_rows]

    @cached_property
    def absent(self) -> Indices:
        """Posed species that are phases, but not present ones."""
        return np.setdiff1d(np.flatnonzero(self.condensed), self.phases)

    @cached_property
    def to_sums(self) -> Floats:
        """(1 + k + E, gas): rows 1, C of the present phases, and the elements."""
        C = self.problem.components.C
        posed = self.problem.posed
        return np.vstack(
            [
                np.ones(len(self.gas)),
                C[np.ix_(self.problem.phase_rows, self.gas)],
                posed.A[:, posed.kept[self.gas]],
            ]
        )

    @cached_property
    def to_component_potentials(self) -> Floats:
        """(q, q'): takes a_i.pi of the components of the nodes' tiles to those of the gas components."""
        own = np.searchsorted(self.problem.gas, self.problem.components.columns[self.problem.gas_rows])
        return np.asarray(self.problem.matrix[:, own].T)

    @cached_property
    def shift_reach(self) -> float:
        posed = self.problem.posed
        return float(shift_weight(posed.A[:, posed.kept]) @ self.b)


def phase_maps(
    A: Floats, condensed: NDArray[np.bool_], b: Amounts, gibbs_RT: Floats, T: Floats, log_pressure: Floats
) -> tuple[list[PhaseMap], Axis, Axis, NDArray[np.intp]] | None:
    """The sets of phases that occur, each with its nodes; where they were seen, as numbers (kT, kP) of the sets.

    None where the map does not lend itself: few points, data that end inside it, or points that cannot be solved.
    """
    if not (np.isfinite(gibbs_RT).all() and is_dense(T, log_pressure)):
        return None
    looks_T, looks_p = _looks(np.log(T)), _looks(log_pressure)
    g = gibbs_RT[looks_T.nodes][:, None, :] + log_pressure[looks_p.nodes][:, None] * ~condensed
    found = minimise(A, b, g.reshape(-1, A.shape[1]), condensed=condensed)
    possible = ~np.isneginf(found.log_mole_fractions)
    if not (found.solved.all() and (possible == possible[0]).all()):
        return None
    kept = np.flatnonzero(possible[0])
    ((posed, _),) = Posed.of(A, kept, b[None, :])
    is_phase = condensed[kept]
    present = (found.amounts[:, kept] > 0.0) & is_phase
    sets, which = np.unique(present, axis=0, return_inverse=True)
    maps: list[PhaseMap] = []
    numbers = np.full(len(sets), -1)
    for number, chosen in enumerate(sets):
        made = _phase_map(
            posed, is_phase, tuple(np.flatnonzero(chosen).tolist()), b, gibbs_RT[:, kept], T, log_pressure
        )
        if made is not None:
            numbers[number] = len(maps)
            maps.append(made)
    seen = numbers[which.ravel()].reshape(looks_T.size, looks_p.size)
    return maps, looks_T, looks_p, seen


def _looks(positions: Floats) -> Axis:
    count = min(LOOKS, len(positions))
    return Axis(positions, np.unique(np.rint(np.linspace(0, len(positions) - 1, count)).astype(np.intp)))


def _phase_map(
    posed: Posed,
    condensed: NDArray[np.bool_],
    present: tuple[int, ...],
    b: Amounts,
    gibbs_RT: Floats,
    T: Floats,
    log_pressure: Floats,
) -> PhaseMap | None:
    problem = GasProblem.of(posed, condensed, present)
    if problem is None or problem.empty_rows.size or not (problem.gas.size and problem.gas_rows.size):
        return None
    independent = b[None, posed.system.rows]
    amounts = problem.amounts(independent)[0]
    if not any(amounts):
        return None
    nodes = solve_nodes(problem.matrix, amounts, problem.potentials(gibbs_RT), T, log_pressure, beside=True)
    if nodes is None or len(nodes.posed.system.rows) != len(problem.matrix):
        return None
    m = problem.components.amounts(independent)[0]
    return PhaseMap(problem, nodes, b.astype(np.float64), m, condensed)


def phase_tasks(
    A: Floats,
    condensed: NDArray[np.bool_],
    b: Amounts,
    gibbs_RT: Floats,
    T: Floats,
    log_pressure: Floats,
    out: GridSolution,
) -> Iterator[Callable[[], int]] | None:
    """Work on the tiles of a map with condensed phases; None where it has to be solved point by point."""
    prepared = phase_maps(A, condensed, b, gibbs_RT, T, log_pressure)
    if prepared is None or not prepared[0]:
        return None
    maps, looks_T, looks_p, seen = prepared

    def work() -> Iterator[Callable[[], int]]:
        for tile in rectangles(len(T), len(log_pressure), CHUNK):
            near = seen[_around(looks_T, tile[0])][:, _around(looks_p, tile[1])]
            numbers, counts = np.unique(near[near >= 0], return_counts=True)
            candidates = [maps[number] for number in numbers[np.argsort(-counts, kind="stable")]]

            def task(tile: tuple[slice, slice] = tile, candidates: list[PhaseMap] = candidates) -> int:
                return _solve_tile(A, condensed, b, candidates, tile, gibbs_RT, log_pressure, out)

            yield task

    return work()


def _around(axis: Axis, part: slice) -> slice:
    """The nodes from the one before a range of points to the one after it."""
    first = np.searchsorted(axis.nodes, part.start, side="right") - 1
    last = np.searchsorted(axis.nodes, part.stop - 1)
    return slice(max(int(first), 0), int(last) + 1)


def _solve_tile(
    A: Floats,
    condensed: NDArray[np.bool_],
    b: Amounts,
    candidates: list[PhaseMap],
    tile: tuple[slice, slice],
    gibbs_RT: Floats,
    log_pressure: Floats,
    out: GridSolution,
) -> int:
    g = gibbs_RT[tile[0]]
    lnp = log_pressure[tile[1]]
    shape = (len(g), len(lnp))
    left = np.ones(shape, dtype=bool)
    for each in candidates:
        here = _bounds(left)
        some = left[here].ravel()
        part = tuple(
            slice(whole.start + inner.start, whole.start + inner.stop)
            for whole, inner in zip(tile, here, strict=True)
        )
        _take_valid(each, (part[0], part[1]), g[here[0]], lnp[here[1]], some, out)
        left[here] = some.reshape(left[here].shape)
        if not left.any():
            return left.size
    row, column = np.nonzero(left)
    found = minimise(A, b, g[row] + lnp[column, None] * ~condensed, condensed=condensed)
    out.fill((row + tile[0].start, column + tile[1].start), found)
    return left.size


def _bounds(left: NDArray[np.bool_]) -> tuple[slice, slice]:
    """The smallest rectangle that holds all points left."""
    rows, columns = np.flatnonzero(left.any(axis=1)), np.flatnonzero(left.any(axis=0))
    return slice(int(rows[0]), int(rows[-1]) + 1), slice(int(columns[0]), int(columns[-1]) + 1)


def _take_valid(
    each: PhaseMap,
    tile: tuple[slice, slice],
    gibbs_RT: Floats,
    lnp: Floats,
    left: NDArray[np.bool_],
    out: GridSolution,
) -> None:
    """Polish a tile with one set of phases; points of `left` (n,) where it holds go to `out` and leave."""
    problem, nodes = each.problem, each.nodes
    posed = problem.posed
    g = gibbs_RT[:, posed.kept]
    own_tile = Tile(*tile, components_at(nodes, *tile, None))
    points = Rectangle(problem.potentials(g)[:, nodes.posed.kept], lnp)
    log_y, log_total = estimate(nodes, own_tile)
    feed = nodes.feed(own_tile.components)
    polished = polish(feed, points, log_y, log_total, SETTLED)
    potentials = np.empty((len(problem.components.columns), len(log_total)))
    potentials[problem.phase_rows] = np.repeat(g[:, each.phases].T, len(lnp), axis=1)
    with np.errstate(all="ignore"):  # points that are not usable may hold anything
        reduced = feed.to_potentials @ (polished.log_y + points.potentials(feed.components))
        potentials[problem.gas_rows] = each.to_component_potentials @ reduced
        good, total_amount, held, gap, residual = _judged(each, polished, points, potentials, g, lnp)
    good &= left
    if not good.any():
        return
    left &= ~good
    shape = (len(g), len(lnp))
    at = (tile[0], tile[1])
    mask = good.reshape(shape)
    square = posed.A[np.ix_(posed.system.rows, posed.kept[problem.components.columns])]
    pi = np.full((len(posed.A), len(good)), np.nan)
    pi[posed.A[:, posed.kept].any(axis=1)] = 0.0
    pi[posed.system.rows] = np.linalg.inv(square.T) @ potentials
    by_species = np.moveaxis(out.amounts, -1, 0)[(slice(None), *at)]
    everywhere: bool | NDArray[np.bool_] = True if good.all() else mask
    nothing = np.ones(len(by_species), dtype=bool)
    nothing[posed.kept[each.gas]] = nothing[posed.kept[each.phases]] = False
    for species in np.flatnonzero(nothing):
        np.copyto(by_species[species], 0.0, where=everywhere)
    total = total_amount.reshape(shape)
    for y, species in zip(polished.y, posed.kept[each.gas], strict=True):
        np.multiply(y.reshape(shape), total, out=by_species[species], where=everywhere)
    for amount, species in zip(held, posed.kept[each.phases], strict=True):
        np.maximum(amount.reshape(shape), 0.0, out=by_species[species], where=everywhere)
    by_element = np.moveaxis(out.element_potentials, -1, 0)[(slice(None), *at)]
    np.copyto(by_element, pi.reshape(-1, *shape), where=mask)
    np.copyto(out.gap[at], gap.reshape(shape), where=mask)
    np.copyto(out.balance_residual[at], residual.reshape(shape), where=mask)
    np.copyto(out.iterations[at], STEPS, where=mask)
    np.copyto(out.status[at], np.int8(Status.SOLVED), where=mask)


def _judged(
    each: PhaseMap, polished: Polished, points: Rectangle, potentials: Floats, g: Floats, lnp: Floats
) -> tuple[NDArray[np.bool_], Floats, Floats, Floats, Floats]:
    """Certificate of the whole and validity of the phases: good (n,), N (n,), phase amounts (k, n), gap, residual (n,)."""
    problem = each.problem
    posed, C = problem.posed, problem.components.C
    size = np.abs(each.b).sum()
    k = len(each.phases)
    total_amount = np.exp(polished.log_total)
    table = total_amount * (each.to_sums @ polished.y)
    held = each.m[problem.phase_rows][:, None] - table[1 : 1 + k]
    amount_matrix = np.abs(posed.A[:, posed.kept[each.phases]])
    missed = table[1 + k :] + posed.A[:, posed.kept[each.phases]] @ held - each.b[:, None]
    turnover = np.maximum(np.abs(each.b)[:, None], TINY) + 0.0 * missed
    signed = (posed.A < 0.0).any(axis=1)
    turnover[signed] += np.abs(table[1 + k :][signed]) + (amount_matrix @ np.abs(held))[signed]
    residual = (np.abs(missed) / turnover).max(axis=0)
    largest = np.repeat(np.abs(g).max(axis=1), len(lnp)) + np.abs(points.log_pressures)
    terms = (1.0 + np.abs(C).sum(axis=0).max()) * largest
    terms += polished.feed.components.largest @ np.abs(polished.log_y)
    uncertainty = polished.second_reach**2 + ROUNDING * terms
    excess = np.zeros(len(total_amount))
    if each.absent.size:
        standard = np.repeat(g[:, each.absent].T, len(lnp), axis=1)
        excess = np.maximum(excess, (C[:, each.absent].T @ potentials - standard).max(axis=0))
    good = polished.usable & (polished.first_reach * polished.second_reach < LAST_ERROR)
    good &= (excess <= SUPERSATURATION) & (held >= -NEGATIVE_AMOUNT * size).all(axis=0)
    log_sum = np.log(table[0] / total_amount)
    above_dual = table[0] * (uncertainty - log_sum) + np.maximum(held, 0.0).sum(axis=0) * uncertainty
    excess = np.maximum(excess, log_sum) + uncertainty
    imbalance = (np.abs(missed) * np.abs(potentials).max(axis=0)).sum(axis=0)
    gap = np.maximum(above_dual + imbalance + np.maximum(excess, 0.0) * each.shift_reach, 0.0)
    good &= (residual <= BALANCE_TOLERANCE) & (gap <= GAP_TOLERANCE * size)
    return good, total_amount, held, gap, residual
