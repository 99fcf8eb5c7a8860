"""Scattered points: a sample is solved from nothing, the others start from their nearest neighbour in it."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gibbsmin.grid.nodes import Floats, Indices
from gibbsmin.grid.polish import SETTLED, Feed, Scattered, polish, prove
from gibbsmin.grid.solution import GridSolution
from gibbsmin.minimiser import Status, minimise
from gibbsmin.minimiser.components import Amounts, Components
from gibbsmin.minimiser.nearby import abundant_components, pose_like
from gibbsmin.minimiser.posing import Posed

WORTHWHILE = 1000
"""A sample pays if there are at least this many points."""

SAMPLE_PART, LARGEST_SAMPLE = 40, 200
"""One point in so many is solved from nothing, up to this number."""

CHUNK = 3000
"""Points polished together."""

LONGEST = 1.0
"""Largest change of ln y of a component in one step."""

MOST_STEPS = 7

STRAGGLERS = 0.01
"""Part of a chunk that is left over rather than make the others wait."""

LEFT_OVER = np.int8(-1)
"""Mark of points that are still to be solved, from nothing: together, that costs less than each from its neighbour."""

NEIGHBOURS = 16
"""Sampled points that a slope rests on."""

RIDGE = 1e-3
"""Part of the mean square that keeps slopes along directions without neighbours small."""

SMALLEST_SQUARE = 1e-6
"""Squared distances below this count alike."""

SHARED_GAIN = np.log(1e3)
"""Components serve a neighbour too if no species calls for an exchange by more than this factor."""

LN_T_SCALE, LN_P_SCALE, LN_FEED_SCALE = 30.0, 1.5, 5.0
"""Change of a typical ln y with ln T (enthalpy of reaction over RT), ln p, and the logarithm of an element's share."""


@dataclass(frozen=True)
class Cloud:
    """Points by index: element amounts b (F, E) mol, gibbs_RT (nT, S), log_pressure (nP,), and their indices (N,)."""

    A: Floats
    b: Amounts
    gibbs_RT: Floats  # noqa: N815 - the field's own symbol
    temperature: Floats
    log_pressure: Floats
    feed: Indices
    at_T: Indices  # noqa: N815
    at_p: Indices
    condensed: NDArray[np.bool_]

    def potentials(self, index: Indices | slice) -> Floats:
        """(n, S) g / RT of some points, plus ln p of the gases."""
        return self.gibbs_RT[self.at_T[index]] + self.log_pressure[self.at_p[index], None] * ~self.condensed

    def log_size(self, index: Indices, elements: Indices) -> Floats:
        """(n,) logarithm of the sum of element amounts."""
        return np.asarray(np.log(self.b[self.feed[index]][:, elements].astype(np.float64).sum(axis=1)))

    def features(self, index: Indices | slice, elements: Indices) -> Floats:
        """(n, d) coordinates in which near points have similar compositions."""
        shares = self.b[self.feed[index]][:, elements].astype(np.float64)
        return np.column_stack(
            [
                LN_T_SCALE * np.log(self.temperature[self.at_T[index]]),
                LN_P_SCALE * self.log_pressure[self.at_p[index]],
                LN_FEED_SCALE * np.log(shares / shares.sum(axis=1, keepdims=True)),
            ]
        )


@dataclass(frozen=True)
class Sample:
    """Solved points of a cloud.

    coordinates (k, d); values (k, s + 1) of ln x and, last, ln N less log_size; their slopes (k, d, s + 1);
    `which` (k,) of the components serves each.
    """

    posed: Posed
    elements: Indices
    coordinates: Floats
    values: Floats
    slopes: Floats
    components: list[Components]
    which: Indices

    def nearest(self, coordinates: Floats) -> Indices:
        """(n,) the sampled point nearest to each point."""
        squares = (self.coordinates**2).sum(axis=1)
        return np.asarray((squares - 2.0 * coordinates @ self.coordinates.T).argmin(axis=1))

    def estimate(self, components: Components, coordinates: Floats, near: Indices) -> Floats:
        """(r + 1, n) ln y of the components and ln N less log_size, by the tangent plane of the nearest point."""
        columns = np.append(components.columns, self.values.shape[1] - 1)
        away = coordinates - self.coordinates[near]
        planes = self.slopes[:, :, columns][near]
        return np.asarray((self.values[:, columns][near] + np.matmul(away[:, None, :], planes)[:, 0]).T)


def take_sample(cloud: Cloud) -> Sample | None:
    """Solve some points from nothing; None where points are few or of different kinds."""
    points = len(cloud.feed)
    positive = (cloud.b > 0).all(axis=0)
    absent = (cloud.b == 0).all(axis=0)
    plain = positive | (absent & (cloud.A >= 0).all(axis=1))
    if (
        points < WORTHWHILE
        or not plain.all()
        or not np.isfinite(cloud.gibbs_RT).all()
        or cloud.condensed.any()
    ):
        return None
    size = min(points // SAMPLE_PART, LARGEST_SAMPLE)
    chosen = np.sort(np.random.default_rng(0).choice(points, size, replace=False))
    found = minimise(cloud.A, cloud.b[cloud.feed[chosen]], cloud.potentials(chosen))
    present = np.isfinite(found.log_mole_fractions)
    if not (found.solved.all() and (present == present[0]).all()):
        return None
    posed = pose_like(cloud.A, cloud.b[cloud.feed[chosen[0]]], found.log_mole_fractions[0])
    if len(posed.system.rows) != positive.sum():
        return None  # dependent rows: each feed would need its own choice
    log_x = found.log_mole_fractions[:, posed.kept]
    elements = np.flatnonzero(positive)
    components, which = _shared_components(posed, log_x)
    log_total = np.log(found.amounts.sum(axis=1)) - cloud.log_size(chosen, elements)
    coordinates = cloud.features(chosen, elements)
    values = np.column_stack([log_x, log_total])
    return Sample(posed, elements, coordinates, values, _slopes(coordinates, values), components, which)


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


def _shared_components(posed: Posed, log_x: Floats) -> tuple[list[Components], Indices]:
    """Few choices of components that serve all sampled points; which one serves each."""
    which = np.full(len(log_x), -1)
    chosen: list[Components] = []
    while (left := np.flatnonzero(which < 0)).size:
        components = abundant_components(posed, log_x[left[0]], chosen[-1] if chosen else None)
        gain = np.full(len(left), -np.inf)
        for row, column in zip(components.log_squares, components.columns, strict=True):
            gain = np.maximum(gain, (log_x[left] + row).max(axis=1) - log_x[left, column])
        which[left[gain <= SHARED_GAIN]] = len(chosen)
        which[left[0]] = len(chosen)
        chosen.append(components)
    return chosen, which


def tasks(cloud: Cloud, sample: Sample, out: GridSolution) -> Iterator[Callable[[], int]]:
    """Work on chunks of similar points; each call solves its points into `out` and returns their number."""
    points = len(cloud.feed)
    nearest = np.concatenate(
        [
            sample.nearest(cloud.features(slice(first, first + CHUNK), sample.elements))
            for first in range(0, points, CHUNK)
        ]
    )
    which = sample.which[nearest]
    order = np.argsort(which, kind="stable")
    edges = np.searchsorted(which[order], np.arange(len(sample.components) + 1))
    for number, components in enumerate(sample.components):
        group = order[edges[number] : edges[number + 1]]
        for first in range(0, len(group), CHUNK):
            index = group[first : first + CHUNK]

            def task(index: Indices = index, components: Components = components) -> int:
                return _solve_chunk(cloud, sample, components, index, nearest[index], out)

            yield task


def _solve_chunk(
    cloud: Cloud, sample: Sample, components: Components, index: Indices, near: Indices, out: GridSolution
) -> int:
    posed = sample.posed
    b = cloud.b[cloud.feed[index]]
    m = components.amounts(b[:, posed.system.rows])
    feed = Feed(posed, components, b.astype(np.float64).T, m.T)
    points = Scattered(
        cloud.gibbs_RT[np.ix_(cloud.at_T[index], posed.kept)], cloud.log_pressure[cloud.at_p[index]]
    )
    start = sample.estimate(components, cloud.features(index, sample.elements), near)
    start[-1] += cloud.log_size(index, sample.elements)
    polished = polish(
        feed,
        points,
        start[:-1],
        start[-1],
        longest=LONGEST,
        settled=SETTLED,
        most_steps=MOST_STEPS,
        stragglers=STRAGGLERS,
    )
    proved = prove(polished, points)
    by_species = np.moveaxis(out.amounts, -1, 0)
    by_species[np.ix_(posed.excluded, index)] = 0.0
    polished.y *= proved.total_amount
    for amounts, species in zip(polished.y, posed.kept, strict=True):
        by_species[species, index] = amounts
    out.element_potentials[index] = proved.element_potentials.T
    out.gap[index] = proved.gap
    out.balance_residual[index] = proved.balance_residual
    out.iterations[index] = polished.steps
    out.status[index] = np.where(proved.good, Status.SOLVED, LEFT_OVER)
    return int(proved.good.sum())


def left_over(out: GridSolution) -> Indices:
    """Points that polishing did not settle."""
    return np.flatnonzero(out.status == LEFT_OVER)
