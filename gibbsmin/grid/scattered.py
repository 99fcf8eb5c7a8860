"""Scattered points: one is solved from nothing, some come near their equilibrium from there, all others from these.

The way of a block of points: an estimate from the tangent plane of the nearest neighbour, steps with the deciding species
alone (approach.py), components that suit what these found, and the last steps and the proof with all species (polish.py).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from itertools import groupby
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gibbsmin.grid.approach import approach
from gibbsmin.grid.cloud import Cloud
from gibbsmin.grid.nodes import Floats, Indices
from gibbsmin.grid.polish import SETTLED, STEPS, Feed, Scattered, polish, prove
from gibbsmin.grid.sample import SUITING_GAIN, Sample, shared_components
from gibbsmin.grid.solution import GridSolution
from gibbsmin.minimiser import Status, minimise
from gibbsmin.minimiser.components import Components
from gibbsmin.minimiser.nearby import pose_like
from gibbsmin.minimiser.posing import Posed

WORTHWHILE = 64
"""Fewer points than this are as quickly solved from nothing."""

ROUNDS = 3
"""Samples taken: each from the points that those before did not serve."""

SEEDS = 3
"""Points tried until one serves as the first neighbour."""

NEAR_SEED = 12
"""Points that it brings near their equilibrium, as neighbours for the others: more cost more than they gain."""

BLOCK = 10_000
"""Points that go side by side: the few that are still on their way then cost little."""

NUMBERS = 500_000
"""Species times points that are polished together, at the most."""

FEW_STEPS, MANY_STEPS = 14, 30
"""Steps with the deciding species in single precision, and for the points that need them with all in double."""

MOST_LOST = 20_000
"""Species times points that are tried again with all species."""

LEFT_OVER = np.int8(-1)
"""Mark of points that are still to be solved."""


def take_sample(cloud: Cloud, points: Indices) -> Sample | None:
    """Neighbours for the points; None where these are few or of different kinds."""
    present = np.asarray((cloud.b > 0).all(axis=0))
    absent = (cloud.b == 0).all(axis=0) & (cloud.A >= 0).all(axis=1)
    if (
        len(points) < WORTHWHILE
        or not (present | absent).all()
        or not np.isfinite(cloud.gibbs_RT).all()
        or cloud.condensed.any()
    ):
        return None
    chosen = np.random.default_rng(0).permutation(points)[: SEEDS + NEAR_SEED]
    for seed in chosen[:SEEDS]:
        sample = _seed(cloud, seed, present)
        if sample is not None:
            return _widened(sample, cloud, chosen[SEEDS:])
    return None


def _seed(cloud: Cloud, point: np.intp, elements: NDArray[np.bool_]) -> Sample | None:
    """One solved point; None if the balances of its species depend on each other.

    Each feed would then need its own choice of balances. It is also the sign of a balance that excludes species beyond
    those of absent elements, which other points may hold: what it leaves lies on a face of the cone of all mixtures.
    """
    at = np.array([point])
    b = cloud.b[cloud.feed[point]]
    found = minimise(cloud.A, b, cloud.potentials(at))
    log_x = found.log_mole_fractions[0]
    if not found.solved[0]:
        return None
    posed = pose_like(cloud.A, b, log_x)
    if len(posed.system.rows) != elements.sum():
        return None
    rows = np.flatnonzero(elements)
    values = np.append(log_x[posed.kept], np.log(found.amounts.sum()) - cloud.log_size(at, rows))
    return Sample.of(posed, rows, cloud.features(at, rows), values[None])


def _widened(sample: Sample, cloud: Cloud, points: Indices) -> Sample:
    """The sample with those of the points that come near their equilibrium from it: neighbours need not be exact."""
    coordinates, values = [sample.coordinates], [sample.values]
    for each in _near_equilibrium(cloud, sample, points, deciding_known=False):
        index = points[each.at]
        components = each.components
        g = cloud.standard(sample.posed.kept, index)
        lnp = cloud.log_pressure[cloud.at_p[index]]
        log_x = components.C.T @ (each.log_y + lnp + g[components.columns]) - g - lnp
        log_total = each.log_total - cloud.log_size(index, sample.elements)
        coordinates.append(cloud.features(index, sample.elements))
        values.append(np.column_stack([log_x.T, log_total]))
    return Sample.of(sample.posed, sample.elements, np.concatenate(coordinates), np.concatenate(values))


def tasks(cloud: Cloud, sample: Sample, points: Indices, out: GridSolution) -> Iterator[Callable[[], int]]:
    """Work on blocks of points; each call solves what it can into `out` and returns how many these are."""
    for index in np.array_split(points, -(-len(points) // BLOCK)):
        yield lambda index=index: _solve_block(cloud, sample, index, out)  # type: ignore[misc]


def left_over(out: GridSolution) -> Indices:
    """Points that are still to be solved."""
    return np.flatnonzero(out.status == LEFT_OVER)


@dataclass(frozen=True)
class _Estimates:
    """Points near their equilibrium, by position (n,): ln y (r, n) of the components, ln(N / mol) (n,), steps (n,)."""

    components: Components
    at: Indices
    log_y: Floats
    log_total: Floats
    steps: NDArray[np.int32]

    def take(self, chosen: Indices | NDArray[np.bool_]) -> _Estimates:
        return _Estimates(
            self.components,
            self.at[chosen],
            self.log_y[:, chosen],
            self.log_total[chosen],
            self.steps[chosen],
        )

    def parts(self, points: int) -> Iterator[_Estimates]:
        """Some `points` at a time."""
        for first in range(0, len(self.at), points):
            yield self.take(np.arange(first, min(first + points, len(self.at))))

    @classmethod
    def joined(cls, every: list[_Estimates]) -> Iterator[_Estimates]:
        """Estimates in the same components as one."""

        def key(each: _Estimates) -> tuple[int, ...]:
            return each.components.key

        for _, alike in groupby(sorted((each for each in every if each.at.size), key=key), key):
            group = list(alike)
            parts = (
                [getattr(each, name) for each in group] for name in ("at", "log_y", "log_total", "steps")
            )
            yield cls(group[0].components, *(np.concatenate(part, axis=-1) for part in parts))


def _solve_block(cloud: Cloud, sample: Sample, index: Indices, out: GridSolution) -> int:
    out.status[index] = LEFT_OVER
    waiting = _near_equilibrium(cloud, sample, index, deciding_known=True)
    for _ in range(2):  # the few that are not proved at once are then near enough
        waiting = [
            _polish_into(out, cloud, sample.posed, index, part)
            for estimates in _Estimates.joined(waiting)
            for part in estimates.parts(NUMBERS // len(sample.posed.kept))
        ]
    return int(np.count_nonzero(out.status[index] == Status.SOLVED))


def _near_equilibrium(
    cloud: Cloud, sample: Sample, index: Indices, *, deciding_known: bool
) -> list[_Estimates]:
    """Those of some points that come near their equilibrium, in components that suit them."""
    posed = sample.posed
    coordinates = cloud.features(index, sample.elements)
    b = cloud.b[cloud.feed[index]][:, posed.system.rows]
    near = sample.nearest(coordinates, b.T.astype(np.float64))
    order = np.argsort(near, kind="stable")
    index, near, coordinates, b = index[order], near[order], coordinates[order], b[order]
    log_size = cloud.log_size(index, sample.elements)
    every = np.arange(len(posed.kept))
    found: list[_Estimates] = []
    for components, points, by_neighbour in sample.groups(near):
        log_y, log_total = sample.estimate(components, coordinates[points], by_neighbour)
        log_total += log_size[points]
        left = _Estimates(
            components,
            np.arange(points.start, points.stop),
            log_y,
            log_total,
            np.zeros(len(log_total), dtype=np.int32),
        )
        if deciding_known:
            m = components.amounts(b[left.at]).T
            arrived, left = _approached(cloud, sample, index, left, m, sample.deciding, np.float32, FEW_STEPS)
            found += arrived
        # where many are lost they are of another kind, and the next sample is taken from among them
        if 0 < left.at.size * every.size <= MOST_LOST:
            m = components.amounts(b[left.at]).T
            arrived, _ = _approached(cloud, sample, index, left, m, every, np.float64, MANY_STEPS)
            found += arrived
    return [replace(each, at=order[each.at]) for each in found]


def _approached(
    cloud: Cloud,
    sample: Sample,
    index: Indices,
    start: _Estimates,
    m: Floats,
    species: Indices,
    kind: type[np.floating[Any]],
    most_steps: int,
) -> tuple[list[_Estimates], _Estimates]:
    """Approach with some of the species: points that arrived, in components that suit them, and the start of the others.

    m (r, n) mol of the components.
    """
    components, at = start.components, start.at
    C = components.C[:, species]
    lnp = cloud.log_pressure[cloud.at_p[index[at]]]
    offsets = cloud.standard(sample.posed.kept[species], index[at])
    own = np.searchsorted(species, components.columns)
    offsets -= C.T @ offsets[own]
    offsets[own] = 0.0
    done = approach(components, species, offsets, lnp, m, start.log_y, start.log_total, kind, most_steps)
    suited = done.arrived & (done.condition <= SUITING_GAIN)
    found = [_Estimates(components, at, done.log_y, done.log_total, done.steps).take(suited)]
    others = np.flatnonzero(done.arrived & ~suited)
    if others.size:
        log_x = C.T @ (done.log_y[:, others] + lnp[others]) - offsets[:, others] - lnp[others]
        for suiting, members in shared_components(
            sample.posed, species, log_x, SUITING_GAIN, sample.components
        ):
            own = np.searchsorted(species, suiting.columns)
            chosen = others[members]
            found.append(
                _Estimates(
                    suiting,
                    at[chosen],
                    log_x[own[:, None], members],
                    done.log_total[chosen],
                    done.steps[chosen],
                )
            )
    return found, start.take(~done.arrived)


def _polish_into(
    out: GridSolution, cloud: Cloud, posed: Posed, block: Indices, estimates: _Estimates
) -> _Estimates:
    """Solve points of a block into `out`; returns better estimates of those that are not proved yet."""
    components, index = estimates.components, block[estimates.at]
    b = cloud.b[cloud.feed[index]]
    m = components.amounts(b[:, posed.system.rows])
    feed = Feed(posed, components, np.ascontiguousarray(b.T, dtype=np.float64), np.ascontiguousarray(m.T))
    points = Scattered(cloud.standard(posed.kept, index), cloud.log_pressure[cloud.at_p[index]])
    polished = polish(feed, points, estimates.log_y, estimates.log_total, SETTLED)
    proved = prove(polished, points)
    by_species = np.moveaxis(out.amounts, -1, 0)
    for species in posed.excluded:
        by_species[species, index] = 0.0
    polished.y *= proved.total_amount
    for amounts, species in zip(polished.y, posed.kept, strict=True):
        by_species[species, index] = amounts
    np.moveaxis(out.element_potentials, -1, 0)[:, index] = proved.element_potentials
    out.gap[index] = proved.gap
    out.balance_residual[index] = proved.balance_residual
    out.iterations[index] = estimates.steps + STEPS
    out.status[index[proved.good]] = Status.SOLVED
    left = np.flatnonzero(~proved.good & polished.stepped)
    return _Estimates(
        components,
        estimates.at[left],
        polished.log_y[:, left],
        polished.log_total[left],
        estimates.steps[left] + np.int32(STEPS),
    )
