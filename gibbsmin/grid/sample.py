"""A few points whose equilibrium is known, as neighbours from which others start."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from math import log

import numpy as np

from gibbsmin.grid.approach import deciding_species
from gibbsmin.grid.nodes import Floats, Indices
from gibbsmin.minimiser.components import Components
from gibbsmin.minimiser.nearby import abundant_components
from gibbsmin.minimiser.posing import Posed

NEIGHBOURS = 16
"""Sampled points that a slope rests on."""

RIDGE = 1e-3
"""Part of the mean square that keeps slopes along directions without neighbours small."""

SMALLEST_SQUARE = 1e-6
"""Squared distances below this count alike."""

SHORT = 100.0
"""Squared distance added to a neighbour whose components could not hold the elements of a point."""

FAIR_GAIN = 1e3
"""Components serve a point on its way if no species calls for an exchange by more than this factor."""

SUITING_GAIN = 5e2
"""The same at its end, where they decide the rounding: six roundings times this factor were the most that was seen."""


@dataclass(frozen=True)
class Sample:
    """Solved points of a cloud.

    coordinates (k, d); values (k, s + 1) of ln x and, last, ln N less that of the sum of element amounts; their slopes
    (k, d, s + 1); `which` (k,) of the components serves each; `deciding` (q,) positions of the species that matter in any.
    """

    posed: Posed
    elements: Indices
    coordinates: Floats
    values: Floats
    slopes: Floats
    components: list[Components]
    which: Indices
    deciding: Indices

    @classmethod
    def of(cls, posed: Posed, elements: Indices, coordinates: Floats, values: Floats) -> Sample:
        log_x = values[:, :-1]
        shared = shared_components(posed, np.arange(log_x.shape[1]), log_x.T, FAIR_GAIN)
        which = np.repeat(np.arange(len(shared)), [len(members) for _, members in shared])
        deciding = np.unique(np.concatenate([deciding_species(each, log_x[at]) for each, at in shared]))
        order = np.concatenate([members for _, members in shared])
        coordinates, values = coordinates[order], values[order]
        slopes = _slopes(coordinates, values)
        every = [components for components, _ in shared]
        return cls(posed, elements, coordinates, values, slopes, every, which, deciding)

    def nearest(self, coordinates: Floats, b: Floats) -> Indices:
        """(n,) the sampled point nearest to each point of coordinates (n, d) and independent elements b (r, n)."""
        distance = (-2.0 * self.coordinates) @ coordinates.T
        distance += (self.coordinates**2).sum(axis=1)[:, None]
        if len(self.components) > 1:
            for number, components in enumerate(self.components):
                lacking = (components.rough_amounts(b) < 0.0).any(axis=0)
                distance[self._members(number)] += SHORT * lacking
        return np.asarray(distance.argmin(axis=0))

    def _members(self, number: int) -> slice:
        """The sampled points that components of this number serve."""
        first, last = np.searchsorted(self.which, [number, number + 1]).tolist()
        return slice(first, last)

    def groups(self, near: Indices) -> Iterator[tuple[Components, slice, list[tuple[int, slice]]]]:
        """Points by the components that serve their neighbour; `near` (n,), ascending.

        Yields the components, their points, and of these the points of every single neighbour.
        """
        edges = np.searchsorted(near, np.arange(len(self.which) + 1)).tolist()
        for number, components in enumerate(self.components):
            members = self._members(number)
            first, last = edges[members.start], edges[members.stop]
            if last > first:
                each = [
                    (k, slice(edges[k] - first, edges[k + 1] - first))
                    for k in range(members.start, members.stop)
                    if edges[k + 1] > edges[k]
                ]
                yield components, slice(first, last), each

    def estimate(
        self, components: Components, coordinates: Floats, by_neighbour: list[tuple[int, slice]]
    ) -> tuple[Floats, Floats]:
        """ln y of the components (r, n) and ln N less that of the elements (n,), by the tangent plane of each neighbour."""
        columns = np.append(components.columns, self.values.shape[1] - 1)
        values = np.empty((len(columns), len(coordinates)))
        for k, points in by_neighbour:
            plane = self.slopes[k][:, columns].T
            origin = self.values[k, columns] - plane @ self.coordinates[k]
            values[:, points] = plane @ coordinates[points].T + origin[:, None]
        return np.minimum(values[:-1], 0.0), values[-1]


def _slopes(coordinates: Floats, values: Floats) -> Floats:
    """(k, d, v) gradients of values (k, v) at scattered coordinates (k, d), from the nearest ones by least squares."""
    squares = ((coordinates[:, None] - coordinates) ** 2).sum(axis=2)
    near = np.argsort(squares, axis=1)[:, 1 : NEIGHBOURS + 1]
    away = coordinates[near] - coordinates[:, None]
    weighted = away / np.maximum(np.take_along_axis(squares, near, axis=1), SMALLEST_SQUARE)[:, :, None]
    normal = np.matmul(weighted.transpose(0, 2, 1), away)
    size = np.trace(normal, axis1=1, axis2=2)[:, None, None] / normal.shape[1]
    normal += (RIDGE * size + np.finfo(np.float64).tiny) * np.eye(normal.shape[1])
    right = np.matmul(weighted.transpose(0, 2, 1), values[near] - values[:, None])
    return np.asarray(np.linalg.solve(normal, right))


def shared_components(
    posed: Posed, species: Indices, log_x: Floats, most_gain: float, known: Sequence[Components] = ()
) -> list[tuple[Components, Indices]]:
    """Few choices of components that serve compositions ln x (q, n) of some species, and which of them each serves.

    No species calls for an exchange by more than `most_gain`. The `known` ones are tried first.
    """
    served: list[tuple[Components, Indices]] = []
    waiting = list(known)
    left = np.arange(log_x.shape[1])
    while left.size:
        if waiting:
            components, sure = waiting.pop(0), False
        else:
            whole = np.full(len(posed.kept), -np.inf)
            whole[species] = log_x[:, left[0]]
            components, sure = abundant_components(posed, whole, served[-1][0] if served else None), True
        here = log_x[:, left]
        own = here[np.searchsorted(species, components.columns)]
        gain = np.array([(here + row[:, None]).max(axis=0) for row in components.log_squares[:, species]])
        good = (gain - own).max(axis=0) <= log(most_gain)
        good[0] |= sure
        if good.any():
            served.append((components, left[good]))
        left = left[~good]
    return served
