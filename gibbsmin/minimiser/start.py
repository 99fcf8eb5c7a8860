"""Starting estimates: a hierarchy of linear programs, one for each level of smallness.

The vertex of the linear program (vertex.py) gives the amounts of the major species. Where it is degenerate (m_i = 0:
an exactly stoichiometric feed, a charge balance) the amount of component i is decided by traces alone. Those rows
D form a problem of the same kind: among the species that touch them, which ones carry the traces? To leading order
the one combination z >= 0, C_D z = 0, sum z = 1 of least cost; that is again a linear program, which may again be
degenerate, and so on. If at some level no such z exists, the balance forces every species of that level to zero:
the hierarchy finds these species on the way.

Logarithmic amounts of the vertices' species then fix the component potentials from the last level back to the first.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gibbsmin.minimiser.components import Amounts, Components, Floats, FormulaSystem, Indices
from gibbsmin.minimiser.grouping import alike
from gibbsmin.minimiser.vertex import PIVOT_SIZE, VertexGroup, optimal_vertices


@dataclass(frozen=True)
class StartGroup:
    """Points with equal components: ln mole fraction of each component (n, r), total amount (n,) [mol].

    excluded (n, S) marks species that the balance forces to zero; where any is set the logarithms of components
    that are excluded themselves are meaningless and the problem is to be posed again without them.
    """

    components: Components
    points: Indices
    log_y: Floats
    total: Floats
    excluded: NDArray[np.bool_]

    def take(self, index: Indices) -> StartGroup:
        return StartGroup(
            self.components, self.points[index], self.log_y[index], self.total[index], self.excluded[index]
        )


def estimates(system: FormulaSystem, b: Amounts, c: Floats) -> tuple[list[StartGroup], Indices]:
    """Starting estimates of all points.

    Parameters: system (r rows, S species); b (n, r) mol; c (n, S) [RT].
    Returns: groups of points, and the indices of points that no amounts can balance.
    """
    vertices, impossible = optimal_vertices(system, b, c)
    groups: list[StartGroup] = []
    for vertex in vertices:
        total = vertex.amounts.sum(axis=1)
        with np.errstate(divide="ignore"):
            log_y = np.log(vertex.amounts / total[:, None])
        excluded = np.zeros(vertex.reduced_costs.shape, dtype=bool)
        _fill_degenerate(vertex, log_y, excluded)
        groups.append(StartGroup(vertex.components, vertex.points, log_y, total, excluded))
    return groups, impossible


def _fill_degenerate(vertex: VertexGroup, log_y: Floats, excluded: NDArray[np.bool_]) -> None:
    """Replace the -inf of components with zero amount by the estimate of the next level, in place."""
    empty = np.isneginf(log_y)
    if not empty.any():
        return
    any_empty = np.flatnonzero(empty.any(axis=1))
    for pattern, members in alike(empty[any_empty], any_empty):
        rows = np.flatnonzero(pattern)
        C = vertex.components.C
        touched = np.flatnonzero((np.abs(C[rows]) > PIVOT_SIZE).any(axis=0))
        full = np.flatnonzero(pattern == 0)
        cost = (
            vertex.reduced_costs[members[:, None], touched]
            - log_y[members[:, None], full] @ C[full[:, None], touched]
        )
        level = _trace_system(vertex.components, tuple(rows.tolist()), tuple(touched.tolist()))
        groups: list[VertexGroup] = []
        impossible = np.arange(len(members))
        if level.rank > len(rows):  # otherwise the sum is a combination of the balances, hence zero
            ones = np.zeros((len(members), level.rank))
            ones[:, -1] = 1.0
            groups, impossible = optimal_vertices(level, ones, cost)
        if impossible.size:
            excluded[members[impossible][:, None], touched] = True
            log_y[members[impossible][:, None], rows] = 0.0
        for group in groups:
            with np.errstate(divide="ignore"):
                log_z = np.log(group.amounts)
            left_out = np.zeros(group.reduced_costs.shape, dtype=bool)
            _fill_degenerate(group, log_z, left_out)
            chosen = touched[group.components.columns]
            points = members[group.points]
            if left_out.any():
                excluded[points[:, None], touched] |= left_out
            # C_D^T log_y_D - cost = log kappa + log_z for the species of this vertex; log kappa is the last unknown
            square = np.vstack([C[rows[:, None], chosen], -np.ones(len(chosen))])
            known = cost[group.points][:, group.components.columns] + log_z
            log_y[points[:, None], rows] = np.linalg.solve(square.T, known.T).T[:, :-1]


def _trace_system(components: Components, rows: tuple[int, ...], touched: tuple[int, ...]) -> FormulaSystem:
    """The system of one level: the degenerate balances of the species they touch, and their sum as the last row."""
    key = (rows, touched)
    found = components.trace_systems.get(key)
    if found is None:
        integers = components.integer_C[np.ix_(rows, touched)]
        scale = components.system.scale[list(touched)]
        found = FormulaSystem(np.vstack([integers, scale.astype(integers.dtype)]), scale)
        components.trace_systems[key] = found
    return found
