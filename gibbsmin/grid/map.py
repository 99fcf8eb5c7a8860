"""Temperature-pressure maps of one feed, from coarse nodes to every point."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise

import numpy as np

from gibbsmin.grid.nodes import SPACING_LN_P, SPACING_LN_T, Axis, Floats, choose_nodes
from gibbsmin.grid.polish import SETTLED, STEPS, Feed, Rectangle, polish, prove
from gibbsmin.grid.solution import GridSolution
from gibbsmin.minimiser import Status, minimise
from gibbsmin.minimiser.components import Amounts, Components
from gibbsmin.minimiser.minimise import solve_gas_beside
from gibbsmin.minimiser.nearby import abundant_components, minimise_near, pose_like
from gibbsmin.minimiser.posing import Posed

CHUNK = 9600
"""Points polished together. Arrays that outgrow the second-level cache cost less than threads that wait for each
other between short calls: with 1,600 points two threads were slower than one, with 9,600 they are 1.2 times faster.
"""

NUMBERS = 1_000_000
"""Species times points of a chunk at the most: hundreds of species go by fewer points."""

PRESSURES = 128
"""Pressures of a chunk at the most, so that its points resemble each other."""

WORTHWHILE = 3.0
"""Nodes are worth their own cost if there are this many points to each."""

FIRST_LEVEL = 16
"""Nodes of the coarsest level in each direction, at the most."""

NODE_REACH = 3e-2
"""Steps up to this leave errors of 1e-5 in a node, which are as good as those of interpolation."""


@dataclass(frozen=True)
class Nodes:
    """Solved nodes of one feed: ln mole fractions (kT, kP, s) of the kept species, ln total amount (kT, kP)."""

    posed: Posed
    b: Amounts
    temperatures: Axis
    pressures: Axis
    log_x: Floats
    log_total: Floats

    def feed(self, components: Components) -> Feed:
        """The feed in these components, prepared once."""
        found = self._feeds.get(components.key)
        if found is None:
            m = components.amounts(self.b[None, self.posed.system.rows]).T
            b = self.b.astype(np.float64)[:, None]
            found = self._feeds[components.key] = Feed(self.posed, components, b, m)
        return found

    @cached_property
    def _feeds(self) -> dict[tuple[int, ...], Feed]:
        return {}


@dataclass(frozen=True)
class Tile:
    """Points of one task: ranges of temperature and pressure indices, and the components for them."""

    temperatures: slice
    pressures: slice
    components: Components


def is_dense(temperature: Floats, log_pressure: Floats) -> bool:
    """Whether a map has so many points that nodes pay; temperature (nT,) K and log_pressure (nP,) ascending."""
    T_axis, p_axis = _axes(temperature, log_pressure)
    return T_axis.size * p_axis.size * WORTHWHILE <= len(temperature) * len(log_pressure)


def _axes(temperature: Floats, log_pressure: Floats) -> tuple[Axis, Axis]:
    return choose_nodes(np.log(temperature), SPACING_LN_T), choose_nodes(log_pressure, SPACING_LN_P)


def solve_nodes(
    A: Floats,
    b: Amounts,
    gibbs_RT: Floats,
    temperature: Floats,
    log_pressure: Floats,
    *,
    beside: bool = False,
) -> Nodes | None:
    """Solve the nodes of a map, level by level; None where one of them cannot be solved.

    Parameters: b (E,) mol; gibbs_RT (nT, S); temperature (nT,) K and log_pressure (nP,), both ascending; `beside`
    marks a gas beside condensed phases.
    """
    T_axis, p_axis = _axes(temperature, log_pressure)
    levels = [(T_axis, p_axis)]
    while levels[-1][0].size > FIRST_LEVEL or levels[-1][1].size > FIRST_LEVEL:
        levels.append((levels[-1][0].coarser(), levels[-1][1].coarser()))
    nodes: Nodes | None = None
    for T_level, p_level in reversed(levels):
        g = gibbs_RT[np.searchsorted(np.log(temperature), T_level.node_positions)]
        if nodes is None:
            nodes = _first_nodes(A, b, g, T_level, p_level, beside)
        else:
            nodes = _refined(nodes, g, T_level, p_level, beside)
        if nodes is None:
            return None
    return nodes


def _first_nodes(A: Floats, b: Amounts, g: Floats, T_axis: Axis, p_axis: Axis, beside: bool) -> Nodes | None:
    """Nodes of the coarsest level, solved from nothing."""
    potentials = g[:, None, :] + p_axis.node_positions[:, None]
    c = potentials.reshape(-1, A.shape[1])
    found = solve_gas_beside(A, np.repeat(b[None, :], len(c), axis=0), c) if beside else minimise(A, b, c)
    present = np.isfinite(found.log_mole_fractions)
    if not (found.solved.all() and (present == present[0]).all()):
        return None
    shape = (T_axis.size, p_axis.size)
    posed = pose_like(A, b, found.log_mole_fractions[0])
    log_x = found.log_mole_fractions[:, posed.kept].reshape(*shape, -1)
    return Nodes(posed, b, T_axis, p_axis, log_x, np.log(found.amounts.sum(axis=1)).reshape(shape))


def _refined(coarse: Nodes, gibbs_RT: Floats, T_axis: Axis, p_axis: Axis, beside: bool) -> Nodes | None:
    """Nodes of the next level, polished from estimates of the coarser one."""
    shape = (T_axis.size, p_axis.size)
    g = gibbs_RT[:, coarse.posed.kept]
    log_x = np.empty((*shape, g.shape[1]))
    log_total = np.empty(shape)
    for tile in tiles(coarse, *shape):
        log_y, total = estimate(coarse, tile)
        rows, lnp = g[tile.temperatures], p_axis.node_positions[tile.pressures]
        points = Rectangle(rows, lnp)
        feed = coarse.feed(tile.components)
        done = polish(feed, points, log_y, total, NODE_REACH)
        size = (len(rows), len(lnp))
        at = (tile.temperatures, tile.pressures)
        log_x[at] = done.log_x.T.reshape(*size, -1)
        log_total[at] = done.log_total.reshape(size)
        left = np.flatnonzero(~done.usable)
        if left.size:
            row, column = np.divmod(left, len(lnp))
            found = minimise_near(
                coarse.posed,
                coarse.b,
                rows[row] + lnp[column, None],
                tile.components,
                log_y.T[left],
                total[left],
                beside=beside,
            )
            if not found.solved.all():
                return None
            place = (row + tile.temperatures.start, column + tile.pressures.start)
            log_x[place] = found.log_mole_fractions[:, coarse.posed.kept]
            log_total[place] = np.log(found.amounts.sum(axis=1))
    return Nodes(coarse.posed, coarse.b, T_axis, p_axis, log_x, log_total)


def tiles(nodes: Nodes, n_T: int, n_p: int) -> Iterator[Tile]:
    """Cut a map into tiles of similar points; each gets components that suit the node nearest to its middle."""
    components: Components | None = None
    chunk = max(1, min(CHUNK, NUMBERS // len(nodes.posed.kept)))
    for T_part, p_part in rectangles(n_T, n_p, chunk):
        components = components_at(nodes, T_part, p_part, components)
        yield Tile(T_part, p_part, components)


def rectangles(n_T: int, n_p: int, chunk: int) -> Iterator[tuple[slice, slice]]:
    """The parts of a map that are solved as one, by ranges of temperature and pressure: about `chunk` points each."""
    parts = -(-n_p // PRESSURES)
    edges = [n_p * part // parts for part in range(parts + 1)]
    height = max(1, chunk * parts // n_p)
    for p_first, p_last in pairwise(edges):
        for T_first in range(0, n_T, height):
            yield slice(T_first, min(T_first + height, n_T)), slice(p_first, p_last)


def components_at(nodes: Nodes, T_part: slice, p_part: slice, known: Components | None) -> Components:
    """Components that suit the node nearest to the middle of a rectangle."""
    near_T = nodes.temperatures.nearest_node((T_part.start + T_part.stop - 1) // 2)
    near_p = nodes.pressures.nearest_node((p_part.start + p_part.stop - 1) // 2)
    return abundant_components(nodes.posed, nodes.log_x[near_T, near_p], known)


def estimate(nodes: Nodes, tile: Tile) -> tuple[Floats, Floats]:
    """Interpolated ln y of the tile's components (r, n) and ln total amount (n,)."""
    to_T = nodes.temperatures.weights[tile.temperatures]
    to_p = nodes.pressures.weights[tile.pressures]
    used_T, used_p = np.flatnonzero(to_T.any(axis=0)), np.flatnonzero(to_p.any(axis=0))
    near = np.ix_(used_T, used_p)
    values = [nodes.log_x[(*near, column)] for column in tile.components.columns]
    values.append(nodes.log_total[near])
    out = to_T[:, used_T] @ np.stack(values) @ to_p[:, used_p].T
    flat = out.reshape(len(values), -1)
    return flat[:-1], flat[-1]


def solve_tile(nodes: Nodes, tile: Tile, gibbs_RT: Floats, log_pressure: Floats, out: GridSolution) -> int:
    """Solve the points of a tile into `out`, whose leading shape is (nT, nP); returns their number.

    gibbs_RT (nT, S) and log_pressure (nP,) of the whole map.
    """
    posed = nodes.posed
    g = gibbs_RT[tile.temperatures][:, posed.kept]
    lnp = log_pressure[tile.pressures]
    log_y, log_total = estimate(nodes, tile)
    points = Rectangle(g, lnp)
    polished = polish(nodes.feed(tile.components), points, log_y, log_total, SETTLED)
    proved = prove(polished, points)
    shape = (len(g), len(lnp))
    at = (tile.temperatures, tile.pressures)
    by_species = np.moveaxis(out.amounts, -1, 0)
    by_species[(posed.excluded, *at)] = 0.0
    total_amount = proved.total_amount.reshape(shape)
    for y, species in zip(polished.y, posed.kept, strict=True):
        np.multiply(y.reshape(shape), total_amount, out=by_species[(species, *at)])
    np.moveaxis(out.element_potentials, -1, 0)[(slice(None), *at)] = proved.element_potentials.reshape(
        -1, *shape
    )
    out.gap[at] = proved.gap.reshape(shape)
    out.balance_residual[at] = proved.balance_residual.reshape(shape)
    out.iterations[at] = STEPS
    out.status[at] = Status.SOLVED
    left = np.flatnonzero(~proved.good)
    if left.size:
        row, column = np.divmod(left, len(lnp))
        found = minimise_near(
            posed, nodes.b, g[row] + lnp[column, None], tile.components, log_y.T[left], log_total[left]
        )
        out.fill((row + tile.temperatures.start, column + tile.pressures.start), found)
    return len(log_total)
