"""Temperature-pressure maps of one feed, from coarse nodes to every point."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from gibbsmin.grid.nodes import SPACING_LN_P, SPACING_LN_T, Axis, Floats, Indices, choose_nodes
from gibbsmin.grid.polish import Feed, polish
from gibbsmin.grid.solution import GridSolution
from gibbsmin.minimiser import Minimum, minimise
from gibbsmin.minimiser.components import Amounts, Components
from gibbsmin.minimiser.nearby import abundant_components, minimise_near, pose_like
from gibbsmin.minimiser.posing import Posed

CHUNK = 800
"""Points polished together: three arrays of chunk by species stay in a core's second-level cache."""

PRESSURES = 64
"""Pressures of a chunk at the most, so that its points resemble each other."""


@dataclass(frozen=True)
class NodeMap:
    """Solved nodes of one feed: ln mole fractions (kT, kP, s) of the kept species, ln total amount (kT, kP)."""

    posed: Posed
    b: Amounts
    temperatures: Axis
    pressures: Axis
    log_x: Floats
    log_total: Floats


@dataclass(frozen=True)
class Tile:
    """Points of one task: ranges of temperature and pressure indices, and the components for them."""

    temperatures: slice
    pressures: slice
    components: Components


def node_map(A: Floats, b: Amounts, gibbs_RT: Floats, temperature: Floats, log_pressure: Floats) -> NodeMap | None:
    """Solve the nodes of a map in two levels; None where a map of this size or kind does not gain by it.

    Parameters: b (E,) mol; gibbs_RT (nT, S); temperature (nT,) K and log_pressure (nP,), both ascending.
    """
    temperatures = choose_nodes(np.log(temperature), SPACING_LN_T)
    pressures = choose_nodes(log_pressure, SPACING_LN_P)
    points = len(temperature) * len(log_pressure)
    if len(temperatures.nodes) * len(pressures.nodes) > points / WORTHWHILE:
        return None
    g = gibbs_RT[temperatures.nodes]
    lnp = log_pressure[pressures.nodes]
    coarse_T, coarse_p = temperatures.coarser(), pressures.coarser()
    potentials = g[coarse_T.nodes][:, None, :] + lnp[coarse_p.nodes][:, None]
    first = minimise(A, b, potentials.reshape(-1, A.shape[1]))
    if not first.solved.all():
        return None
    shape = (len(coarse_T.nodes), len(coarse_p.nodes))
    posed = pose_like(A, b, first.log_mole_fractions[0])
    log_x = first.log_mole_fractions[:, posed.kept].reshape(*shape, -1)
    log_total = np.log(first.amounts.sum(axis=1)).reshape(shape)
    coarse = NodeMap(posed, b, coarse_T, coarse_p, log_x, log_total)
    if not (coarse_T.is_thinned or coarse_p.is_thinned):
        return NodeMap(posed, b, temperatures, pressures, log_x, log_total)
    return _refined(coarse, g[:, posed.kept], lnp, temperatures, pressures)


WORTHWHILE = 3.0
"""Nodes are worth their own cost if there are this many points to each."""


def _refined(coarse: NodeMap, g: Floats, lnp: Floats, temperatures: Axis, pressures: Axis) -> NodeMap | None:
    shape = (len(g), len(lnp))
    log_x = np.empty((*shape, len(coarse.posed.kept)))
    log_total = np.empty(shape)
    for tile in tiles(coarse, *shape):
        log_y, total = estimate(coarse, tile)
        c = g[tile.temperatures][:, None, :] + lnp[tile.pressures][:, None]
        found = minimise_near(
            coarse.posed, coarse.b, c.reshape(len(total), -1), tile.components, log_y, total
        )
        if not found.solved.all():
            return None
        at = (tile.temperatures, tile.pressures)
        log_x[at] = found.log_mole_fractions[:, coarse.posed.kept].reshape(log_x[at].shape)
        log_total[at] = np.log(found.amounts.sum(axis=1)).reshape(log_total[at].shape)
    return NodeMap(coarse.posed, coarse.b, temperatures, pressures, log_x, log_total)


def tiles(nodes: NodeMap, n_T: int, n_p: int) -> Iterator[Tile]:
    """Cut a map into tiles of similar points; each gets components that suit the node nearest to its middle."""
    parts = -(-n_p // PRESSURES)
    p_edges = np.linspace(0, n_p, parts + 1).astype(int)
    height = max(1, CHUNK * parts // n_p)
    for p_first, p_last in zip(p_edges[:-1], p_edges[1:], strict=True):
        near_p = _nearest(nodes.pressures, (p_first + p_last - 1) // 2)
        components: Components | None = None
        for T_first in range(0, n_T, height):
            T_last = min(T_first + height, n_T)
            near_T = _nearest(nodes.temperatures, (T_first + T_last - 1) // 2)
            components = abundant_components(nodes.posed, nodes.log_x[near_T, near_p], components)
            yield Tile(slice(T_first, T_last), slice(int(p_first), int(p_last)), components)


def _nearest(axis: Axis, index: int) -> int:
    return int(np.argmin(np.abs(axis.positions[axis.nodes] - axis.positions[index])))


def estimate(nodes: NodeMap, tile: Tile) -> tuple[Floats, Floats]:
    """Interpolated ln y of the tile's components (n, r) and ln total amount (n,)."""
    to_T = nodes.temperatures.weights(nodes.temperatures.positions[tile.temperatures])
    to_p = nodes.pressures.weights(nodes.pressures.positions[tile.pressures])
    values = np.concatenate([nodes.log_x[:, :, tile.components.columns], nodes.log_total[:, :, None]], axis=2)
    used_T, used_p = to_T.any(axis=0), to_p.any(axis=0)
    values = values[used_T][:, used_p]
    rows = np.tensordot(to_T[:, used_T], values, axes=(1, 0))
    out = np.matmul(to_p[:, used_p], rows).reshape(-1, values.shape[2])
    return out[:, :-1], out[:, -1]


def solve_tile(
    nodes: NodeMap, tile: Tile, b: Floats, gibbs_RT: Floats, log_pressure: Floats, out: GridSolution
) -> int:
    """Solve the points of a tile into `out`, whose leading shape is (nT, nP); returns their number.

    gibbs_RT (nT, S) and log_pressure (nP,) of the whole map; b (E,) mol.
    """
    posed, components = nodes.posed, tile.components
    g = gibbs_RT[tile.temperatures][:, posed.kept]
    lnp = log_pressure[tile.pressures]
    log_y, log_total = estimate(nodes, tile)
    independent = nodes.b[None, posed.system.rows]
    feed = Feed(posed, components, b, components.amounts(independent)[0])
    polished = polish(feed, g, lnp, log_y, log_total)
    at = (tile.temperatures, tile.pressures)
    shape = (len(g), len(lnp))
    every_species = len(posed.kept) == out.amounts.shape[-1]
    if every_species:
        out.amounts[at] = polished.amounts.reshape(*shape, -1)
    else:
        out.amounts[at] = 0.0
        out.amounts[(*at, posed.kept)] = polished.amounts.reshape(*shape, -1)
    out.element_potentials[at] = polished.element_potentials.reshape(*shape, -1)
    out.gap[at] = polished.gap.reshape(shape)
    out.balance_residual[at] = polished.balance_residual.reshape(shape)
    out.iterations[at] = 2
    out.status[at] = 0
    left = np.flatnonzero(~polished.good)
    if left.size:
        _solve_left(nodes, tile, g, lnp, log_y, log_total, left, out)
    return len(log_y)


def _solve_left(
    nodes: NodeMap,
    tile: Tile,
    g: Floats,
    lnp: Floats,
    log_y: Floats,
    log_total: Floats,
    left: Indices,
    out: GridSolution,
) -> None:
    """Points that polishing did not settle go through the full iteration, from their estimates."""
    row, column = np.divmod(left, len(lnp))
    c = g[row] + lnp[column, None]
    found: Minimum = minimise_near(nodes.posed, nodes.b, c, tile.components, log_y[left], log_total[left])
    out.fill((row + tile.temperatures.start, column + tile.pressures.start), found)
