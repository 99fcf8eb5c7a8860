"""Coarse nodes of a map, and interpolation between them.

ln y of the components are smooth in ln T and ln p, so a few nodes fix them well enough for one or two Newton steps
at every other point. Interpolation is by local polynomials (Lagrange) of ORDER nodes in each direction.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Indices = NDArray[np.intp]

ORDER = 6
"""Nodes that one interpolated value rests on, in each direction; 4 needs twice as many nodes for the same error."""

SPACING_LN_T = 0.016
SPACING_LN_P = 0.24
"""Node distances that leave errors of 1e-8 (median) to 2e-5 (largest) in ln y on a map of steam reforming."""

COARSER = 2
"""From one level of nodes to the next coarser, their number falls by this factor in each direction."""


@dataclass(frozen=True)
class Axis:
    """One direction of a map: positions (n,) of its points, indices (k,) of those that are nodes."""

    positions: Floats
    nodes: Indices

    @property
    def size(self) -> int:
        """Number of nodes."""
        return len(self.nodes)

    @property
    def node_positions(self) -> Floats:
        """(k,)"""
        return self.positions[self.nodes]

    @cached_property
    def weights(self) -> Floats:
        """(n, k) interpolation weights of the nodes at all points of the axis."""
        return lagrange_weights(self.node_positions, self.positions)

    def nearest_node(self, index: int) -> int:
        """Number of the node nearest to a point of the axis."""
        return int(np.argmin(np.abs(self.node_positions - self.positions[index])))

    def coarser(self) -> Axis:
        """The nodes as an axis of their own, with fewer nodes."""
        kept = max(min(ORDER, self.size), -(-self.size // COARSER))
        return Axis(
            self.node_positions, np.unique(np.rint(np.linspace(0, self.size - 1, kept)).astype(np.intp))
        )


def choose_nodes(positions: Floats, spacing: float) -> Axis:
    """Nodes about `spacing` apart among ascending positions (n,), both ends included."""
    steps = np.abs(positions[-1] - positions[0]) / spacing
    wanted = int(max(ORDER, np.ceil(steps) + 1))
    if len(positions) <= wanted:
        return Axis(positions, np.arange(len(positions)))
    ideal = np.linspace(positions[0], positions[-1], wanted)
    above = np.clip(np.searchsorted(positions, ideal), 1, len(positions) - 1)
    nearest = above - (ideal - positions[above - 1] < positions[above] - ideal)
    return Axis(positions, np.unique(nearest))


def lagrange_weights(nodes: Floats, targets: Floats) -> Floats:
    """(targets, nodes) weights of local Lagrange interpolation; nodes ascending."""
    order = min(ORDER, len(nodes))
    first = np.clip(np.searchsorted(nodes, targets) - order // 2, 0, len(nodes) - order)
    columns = first[:, None] + np.arange(order)
    local = nodes[columns]
    weights = np.zeros((len(targets), len(nodes)))
    rows = np.arange(len(targets))
    for k in range(order):
        others = np.delete(local, k, axis=1)
        weights[rows, columns[:, k]] = ((targets[:, None] - others) / (local[:, k, None] - others)).prod(
            axis=1
        )
    return weights
