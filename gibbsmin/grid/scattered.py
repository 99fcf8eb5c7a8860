"""Scattered points: a few are solved from nothing, the others start from their nearest neighbour among them.

The way of a block of points: an estimate from the tangent plane of the neighbour, steps with the deciding species alone
(approach.py), components that suit what these found, and the last steps and the proof with all species (polish.py).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from itertools import groupby
from math import log

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

WORTHWHILE = 64
"""Fewer points than this are as quickly solved from nothing."""

ROUNDS = 3
"""Samples taken: each from the points that those before did not serve."""

SEEDS = 1
LARGE = 1000
PART = 300
BLOCK = 10_000
"""Points that approach their equilibrium side by side: the few still on their way then cost little."""

CHUNK = 2500
"""Points polished together."""

FEW_STEPS, MANY_STEPS = 14, 30
"""Steps with the deciding species in single precision, and for the points that need them with all in double."""

NEIGHBOURS = 16
"""Sampled points that a slope rests on."""

RIDGE = 1e-3
"""Part of the mean square that keeps slopes along directions without neighbours small."""

SMALLEST_SQUARE = 1e-6
"""Squared distances below this count alike."""

SHORT = 100.0
"""Squared distance added to a neighbour whose components could not hold the elements of a point."""

SHARED_GAIN = 1e3
"""Components serve a point too if no species calls for an exchange by more than this factor."""

LN_T_SCALE, LN_P_SCALE, LN_FEED_SCALE = 30.0, 1.5, 5.0
"""Change of a typical ln y with ln T (enthalpy of reaction over RT), ln p, and the logarithm of an element's share."""

LEFT_OVER = np.int8(-1)
"""Mark of points that are still to be solved."""


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

    def standard(self, species: Indices, index: Indices) -> Floats:
        """(q, n) g / RT of some species and points."""
        out = np.empty((len(species), len(index)))
        at = self.at_T[index]
        for row, one in zip(out, species, strict=True):
            self.gibbs_RT[:, one].take(at, out=row, mode="clip")
        return out

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
        shared = _shared_components(posed, np.arange(log_x.shape[1]), log_x.T)
        which = np.repeat(np.arange(len(shared)), [len(members) for _, members in shared])
        deciding = np.unique(np.concatenate([deciding_species(each, log_x[at]) for each, at in shared]))
        order = np.concatenate([members for _, members in shared])
        coordinates, values = coordinates[order], values[order]
        slopes = _slopes(coordinates, values)
        every = [components for components, _ in shared]
        return cls(posed, elements, coordinates, values, slopes, every, which, deciding)

    def widened(self, cloud: Cloud, points: Indices) -> Sample:
        """With further points, which need not be exact: those that come near their equilibrium from the solved ones."""
        coordinates, values = [self.coordinates], [self.values]
        for each in _near_equilibrium(cloud, self, points):
            index = points[each.at]
            components = each.components
            g = cloud.standard(self.posed.kept, index)
            lnp = cloud.log_pressure[cloud.at_p[index]]
            log_x = components.C.T @ (each.log_y + lnp + g[components.columns]) - g - lnp
            log_total = each.log_total - cloud.log_size(index, self.elements)
            coordinates.append(cloud.features(index, self.elements))
            values.append(np.column_stack([log_x.T, log_total]))
        return Sample.of(self.posed, self.elements, np.concatenate(coordinates), np.concatenate(values))

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
        return values[:-1], values[-1]


def take_sample(cloud: Cloud, points: Indices) -> Sample | None:
    """Solve some of the points from nothing; None where they are few or of different kinds."""
    positive = (cloud.b > 0).all(axis=0)
    absent = (cloud.b == 0).all(axis=0)
    plain = positive | (absent & (cloud.A >= 0).all(axis=1))
    if (
        len(points) < WORTHWHILE
        or not plain.all()
        or not np.isfinite(cloud.gibbs_RT).all()
        or cloud.condensed.any()
    ):
        return None
    chosen = np.random.default_rng(0).permutation(points)
    seeds = _solved(cloud, np.flatnonzero(positive), chosen[:SEEDS])
    if seeds is None or len(points) < LARGE:
        return seeds
    members = chosen[SEEDS : SEEDS + int(np.clip(len(points) / PART, 32, 256))]
    return seeds.widened(cloud, members)


def _solved(cloud: Cloud, elements: Indices, chosen: Indices) -> Sample | None:
    found = minimise(cloud.A, cloud.b[cloud.feed[chosen]], cloud.potentials(chosen))
    present = np.isfinite(found.log_mole_fractions)
    if not (found.solved.all() and (present == present[0]).all()):
        return None
    posed = pose_like(cloud.A, cloud.b[cloud.feed[chosen[0]]], found.log_mole_fractions[0])
    if len(posed.system.rows) != len(elements):
        return None  # dependent rows: each feed would need its own choice
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
    posed: Posed, species: Indices, log_x: Floats, known: Sequence[Components] = ()
) -> list[tuple[Components, Indices]]:
    """Few choices of components that serve compositions ln x (q, n) of some species, and which of them each serves.

    The `known` ones are tried first.
    """
    served = []
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
        good = (gain - own).max(axis=0) <= log(SHARED_GAIN)
        good[0] |= sure
        if good.any():
            served.append((components, left[good]))
        left = left[~good]
    return served


@dataclass(frozen=True)
class _Estimates:
    """Points near their equilibrium, by position (n,): ln y (r, n) of the components and ln(N / mol) (n,)."""

    components: Components
    at: Indices
    log_y: Floats
    log_total: Floats

    def take(self, chosen: Indices | slice) -> _Estimates:
        return _Estimates(
            self.components, self.at[chosen], self.log_y[:, chosen], self.log_total[chosen]
        )


def tasks(cloud: Cloud, sample: Sample, points: Indices, out: GridSolution) -> Iterator[Callable[[], int]]:
    """Work on blocks of points; each call solves what it can into `out` and returns how many these are."""
    blocks = -(-len(points) // BLOCK)
    for index in np.array_split(points, blocks):
        yield lambda index=index: _solve_block(cloud, sample, index, out)  # type: ignore[misc]


def _solve_block(cloud: Cloud, sample: Sample, index: Indices, out: GridSolution) -> int:
    out.status[index] = LEFT_OVER
    near = _near_equilibrium(cloud, sample, index)
    solved = 0
    for _ in range(2):  # the few that the first polish leaves are then near enough for another
        waiting: list[_Estimates] = []
        for estimates in _joined(near):
            for first in range(0, len(estimates.at), CHUNK):
                part = estimates.take(slice(first, first + CHUNK))
                left = _polish_into(out, cloud, sample.posed, index, part)
                solved += len(part.at) - len(left.at)
                waiting.append(left)
        near = waiting
    return solved


def _near_equilibrium(cloud: Cloud, sample: Sample, index: Indices) -> list[_Estimates]:
    """The points of a block that come near their equilibrium, with components that suit them."""
    posed = sample.posed
    every = np.arange(len(posed.kept))
    coordinates = cloud.features(index, sample.elements)
    independent = cloud.b[cloud.feed[index]][:, posed.system.rows].T.astype(np.float64)
    near = sample.nearest(coordinates, independent)
    order = np.argsort(near, kind="stable")
    index, near, coordinates, independent = index[order], near[order], coordinates[order], independent[:, order]
    log_size, lnp = cloud.log_size(index, sample.elements), cloud.log_pressure[cloud.at_p[index]]
    found: list[_Estimates] = []
    for components, points, by_neighbour in sample.groups(near):
        log_y, log_total = sample.estimate(components, coordinates[points], by_neighbour)
        log_total += log_size[points]
        m = components.rough_amounts(independent[:, points])
        at = np.arange(points.start, points.stop)
        for species, kind, most_steps in (
            (sample.deciding, np.float32, FEW_STEPS),
            (every, np.float64, MANY_STEPS),
        ):
            offsets = cloud.standard(posed.kept[species], index[at])
            own = np.searchsorted(species, components.columns)
            offsets -= components.C[:, species].T @ offsets[own]
            offsets[own] = 0.0
            done = approach(components, species, offsets, lnp[at], m, log_y, log_total, kind, most_steps)
            suited = done.arrived & (done.condition <= SHARED_GAIN)
            estimates = _Estimates(components, order[at], done.log_y, done.log_total)
            found.append(estimates.take(suited))
            other = np.flatnonzero(done.arrived & ~suited)
            if other.size:
                level = done.log_y[:, other] + lnp[at[other]]
                log_x = components.C[:, species].T @ level - offsets[:, other] - lnp[at[other]]
                for suiting, members in _shared_components(posed, species, log_x, sample.components):
                    own = np.searchsorted(species, suiting.columns)
                    chosen = other[members]
                    found.append(
                        _Estimates(suiting, order[at[chosen]], log_x[own[:, None], members], done.log_total[chosen])
                    )
            lost = np.flatnonzero(~done.arrived)
            if not lost.size:
                break
            at, m, log_y, log_total = at[lost], m[:, lost], log_y[:, lost], log_total[lost]
    return found


def _joined(every: list[_Estimates]) -> Iterator[_Estimates]:
    """Estimates in the same components as one."""

    def key(each: _Estimates) -> tuple[int, ...]:
        return each.components.key

    for _, alike in groupby(sorted(every, key=key), key):
        group = list(alike)
        if sum(len(each.at) for each in group):
            yield _Estimates(
                group[0].components,
                np.concatenate([each.at for each in group]),
                np.concatenate([each.log_y for each in group], axis=1),
                np.concatenate([each.log_total for each in group]),
            )


def _polish_into(
    out: GridSolution, cloud: Cloud, posed: Posed, block: Indices, estimates: _Estimates
) -> _Estimates:
    """Solve points of a block into `out`; returns better estimates of those that are not proved yet."""
    components, index = estimates.components, block[estimates.at]
    b = cloud.b[cloud.feed[index]]
    m = components.amounts(b[:, posed.system.rows])
    feed = Feed(posed, components, np.ascontiguousarray(b.T, dtype=np.float64), np.ascontiguousarray(m.T))
    points = Scattered(cloud.standard(posed.kept, index), cloud.log_pressure[cloud.at_p[index]])
    polished = polish(
        feed, points, estimates.log_y, estimates.log_total, longest=SETTLED, settled=SETTLED
    )
    proved = prove(polished, points)
    by_species = np.moveaxis(out.amounts, -1, 0)
    if posed.excluded.size:
        by_species[np.ix_(posed.excluded, index)] = 0.0
    polished.y *= proved.total_amount
    for amounts, species in zip(polished.y, posed.kept, strict=True):
        by_species[species, index] = amounts
    np.moveaxis(out.element_potentials, -1, 0)[:, index] = proved.element_potentials
    out.gap[index] = proved.gap
    out.balance_residual[index] = proved.balance_residual
    out.iterations[index] = polished.steps
    out.status[index[proved.good]] = Status.SOLVED
    left = np.flatnonzero(~proved.good & polished.stepped)
    return _Estimates(components, estimates.at[left], polished.log_y[:, left], polished.log_total[left])


def left_over(out: GridSolution) -> Indices:
    """Points that polishing did not settle."""
    return np.flatnonzero(out.status == LEFT_OVER)
