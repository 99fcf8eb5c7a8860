"""Scattered points: a sample is solved from nothing, the others start from their nearest neighbour in it."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gibbsmin.grid.approach import approach, deciding_species
from gibbsmin.grid.nodes import Floats, Indices
from gibbsmin.grid.polish import SETTLED, Feed, Scattered, polish, prove
from gibbsmin.grid.solution import GridSolution
from gibbsmin.minimiser import Status, minimise
from gibbsmin.minimiser.components import Amounts, Components
from gibbsmin.minimiser.nearby import abundant_components, pose_like
from gibbsmin.minimiser.posing import Posed

DEBUG = False
SEEDS = 24
WORTHWHILE = 1000
"""A sample pays if there are at least this many points."""

SAMPLE_PART, LARGEST_SAMPLE = 40, 200
"""One point in so many is solved from nothing, up to this number."""

BLOCK = 10000
CHUNK = 2000
"""Points polished together."""

LONGEST = 1.0
"""Largest change of ln y of a component in one step."""

MOST_STEPS = 2

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
    `which` (k,) of the components serves each; `deciding` (q,) positions of the species that matter in any.
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
        components = _shared_components(posed, log_x.T)
        which = np.empty(len(values), dtype=np.intp)
        for number, (_, members) in enumerate(components):
            which[members] = number
        every = [each for each, _ in components]
        deciding = np.unique(np.concatenate([deciding_species(each, log_x[at]) for each, at in components]))
        slopes = _slopes(coordinates, values)
        return cls(posed, elements, coordinates, values, slopes, every, which, deciding)

    def nearest(self, coordinates: Floats) -> Indices:
        """(n,) the sampled point nearest to each point."""
        squares = (self.coordinates**2).sum(axis=1)
        return np.asarray((squares[:, None] - 2.0 * self.coordinates @ coordinates.T).argmin(axis=0))

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
    chosen = np.random.default_rng(0).choice(points, SEEDS, replace=False)
    found = minimise(cloud.A, cloud.b[cloud.feed[chosen]], cloud.potentials(chosen))
    present = np.isfinite(found.log_mole_fractions)
    if not (found.solved.all() and (present == present[0]).all()):
        return None
    posed = pose_like(cloud.A, cloud.b[cloud.feed[chosen[0]]], found.log_mole_fractions[0])
    if len(posed.system.rows) != positive.sum():
        return None  # dependent rows: each feed would need its own choice
    elements = np.flatnonzero(positive)
    log_total = np.log(found.amounts.sum(axis=1)) - cloud.log_size(chosen, elements)
    values = np.column_stack([found.log_mole_fractions[:, posed.kept], log_total])
    return Sample.of(posed, elements, cloud.features(chosen, elements), values)


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


def _shared_components(
    posed: Posed, log_x: Floats, species: Indices | None = None, known: Sequence[Components] = ()
) -> list[tuple[Components, Indices]]:
    """Few choices of components that serve all compositions ln x (q, n) of some species; the points of each."""
    species = np.arange(len(posed.kept)) if species is None else species
    left = np.arange(log_x.shape[1])
    served = []
    waiting = list(known)
    while left.size:
        if waiting:
            components = waiting.pop(0)
        else:
            whole = np.full(len(posed.kept), -np.inf)
            whole[species] = log_x[:, left[0]]
            components = abundant_components(posed, whole, served[-1][0] if served else None)
        here = log_x[:, left]
        gain = np.full(len(left), -np.inf)
        for row, column in zip(components.log_squares[:, species], components.columns, strict=True):
            own = here[np.searchsorted(species, column)]
            np.maximum(gain, (here + row[:, None]).max(axis=0) - own, out=gain)
        good = gain <= SHARED_GAIN
        if not waiting:
            good[0] = True
        if good.any():
            served.append((components, left[good]))
        left = left[~good]
    return served


def tasks(cloud: Cloud, sample: Sample, out: GridSolution) -> Iterator[Callable[[], int]]:
    """Work on chunks of similar points; each call solves its points into `out` and returns their number."""
    for first in range(0, len(cloud.feed), BLOCK):
        index = np.arange(first, min(first + BLOCK, len(cloud.feed)))
        yield lambda index=index: _solve_chunk(cloud, sample, index, out)  # type: ignore[misc]


def _solve_chunk(cloud: Cloud, sample: Sample, index: Indices, out: GridSolution) -> int:
    posed, deciding = sample.posed, sample.deciding
    coordinates = cloud.features(index, sample.elements)
    near = sample.nearest(coordinates)
    which = sample.which[near]
    log_x = np.empty((len(deciding), len(index)))
    log_total = np.empty(len(index))
    arrived = np.zeros(len(index), dtype=bool)
    for number, components in enumerate(sample.components):
        at = np.flatnonzero(which == number)
        if at.size:
            log_x[:, at], log_total[at], arrived[at] = _approach_from(
                cloud, sample, components, index[at], coordinates[at], near[at]
            )
    out.status[index] = LEFT_OVER
    at = np.flatnonzero(arrived)
    if DEBUG: print(len(index), 'arrived', arrived.sum())
    good = 0
    for components, members in _shared_components(posed, log_x[:, at], deciding, sample.components):
        for first in range(0, len(members), CHUNK):
            here = at[members[first : first + CHUNK]]
            log_y = log_x[np.searchsorted(deciding, components.columns)[:, None], here]
            good += _polish_into(out, cloud, posed, components, index[here], log_y, log_total[here])
    return good


def _feed_and_points(
    cloud: Cloud, posed: Posed, components: Components, index: Indices, species: Indices | slice
) -> tuple[Feed, Scattered]:
    b = cloud.b[cloud.feed[index]]
    m = components.amounts(b[:, posed.system.rows])
    feed = Feed(posed, components, np.ascontiguousarray(b.T, dtype=np.float64), np.ascontiguousarray(m.T))
    gibbs = cloud.gibbs_RT.T[np.ix_(posed.kept[species], cloud.at_T[index])]
    return feed, Scattered(gibbs, cloud.log_pressure[cloud.at_p[index]])


def _approach_from(
    cloud: Cloud, sample: Sample, components: Components, index: Indices, coordinates: Floats, near: Indices
) -> tuple[Floats, Floats, NDArray[np.bool_]]:
    deciding = sample.deciding
    feed, points = _feed_and_points(cloud, sample.posed, components, index, deciding)
    own = np.searchsorted(deciding, components.columns)
    standard = points.gibbs_RT - components.C[:, deciding].T @ points.gibbs_RT[own]
    standard[own] = 0.0
    start = sample.estimate(components, coordinates, near)
    start[-1] += cloud.log_size(index, sample.elements)
    log_y, log_total, arrived = approach(feed, deciding, standard, points.log_pressures, start[:-1], start[-1])
    level = np.concatenate([log_y + points.log_pressures, points.log_pressures[None]])
    return feed.to_exponents[deciding] @ level - standard, log_total, arrived


def _polish_into(
    out: GridSolution,
    cloud: Cloud,
    posed: Posed,
    components: Components,
    index: Indices,
    log_y: Floats,
    log_total: Floats,
) -> int:
    feed, points = _feed_and_points(cloud, posed, components, index, slice(None))
    polished = polish(
        feed,
        points,
        log_y,
        log_total,
        longest=LONGEST,
        settled=SETTLED,
        most_steps=MOST_STEPS,
        stragglers=STRAGGLERS,
    )
    proved = prove(polished, points)
    if DEBUG: print(len(index), polished.steps, proved.good.sum(), polished.usable.sum(), np.percentile(polished.first_reach,[50,90,99]), np.percentile(polished.second_reach,[50,90,99]),components.key)
    by_species = np.moveaxis(out.amounts, -1, 0)
    by_species[np.ix_(posed.excluded, index)] = 0.0
    polished.y *= proved.total_amount
    for amounts, species in zip(polished.y, posed.kept, strict=True):
        by_species[species, index] = amounts
    out.element_potentials[index] = proved.element_potentials.T
    out.gap[index] = proved.gap
    out.balance_residual[index] = proved.balance_residual
    out.iterations[index] = polished.steps
    out.status[index[proved.good]] = Status.SOLVED
    return int(proved.good.sum())


def left_over(out: GridSolution) -> Indices:
    """Points that polishing did not settle."""
    return np.flatnonzero(out.status == LEFT_OVER)
