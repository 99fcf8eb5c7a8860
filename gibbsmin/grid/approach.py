"""Newton steps on the few species that decide the balances, from far estimates to near ones.

Most species of a mixture are traces: they follow from the potentials of the others and have no say in them. While an
estimate is far off, steps that leave them out and carry seven digits are as good as full ones at a fraction of the cost.
What they leave, the share of the species left out and the rounding, is for polish.py to settle.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gibbsmin.grid.nodes import Floats, Indices
from gibbsmin.grid.polish import NewtonStep
from gibbsmin.minimiser.cholesky import Reals, are_few, diagonal, solve_few
from gibbsmin.minimiser.components import Components
from gibbsmin.minimiser.newton import FALLING, TOTAL_CHANGE

MINOR = 1e-6
"""A species that makes up less of every sum of the Hessian's diagonal is left out."""

BOLD = 2.0
"""Growth of ln y that a step may bring unabridged: more than is certain to descend, as polishing proves the outcome."""

MOST_EXTENDED = 4.0
"""Factor by which a step is lengthened, at the most, where a species is far too abundant."""

DEEPEST = -10.0
"""Fall of ln y that a step may bring: beyond it species come up that the step did not know of."""

SMALLEST_RISE = 1e-3

NEAR = 3e-3
"""A step this short leaves an error of about MINOR."""

STILL_OPEN = 0.7
"""Points that have arrived are put aside once they are more than the rest of this part."""


@dataclass(frozen=True)
class Approached:
    """Points (n,) near their equilibrium: where not `arrived`, the rest means nothing."""

    log_y: Floats  # (r, n) of the components
    log_total: Floats  # (n,)
    condition: Floats  # (n,) largest diagonal of the Hessian beside the component itself
    steps: NDArray[np.int32]  # (n,)
    arrived: NDArray[np.bool_]


def deciding_species(components: Components, log_x: Floats) -> Indices:
    """Positions of the species that matter in any of the compositions ln x (k, s), components among them."""
    highest = log_x.max(axis=1, keepdims=True)
    squares = components.C**2 * np.exp(log_x - highest)[:, None, :]
    share = squares / squares.sum(axis=2, keepdims=True)
    decide = (share >= MINOR).any(axis=(0, 1))
    decide[components.columns] = True
    return np.flatnonzero(decide)


def approach(
    components: Components,
    species: Indices,
    offsets: Floats,
    log_pressure: Floats,
    m: Floats,
    log_y: Floats,
    log_total: Floats,
    kind: type[np.floating[Any]],
    most_steps: int,
) -> Approached:
    """Take Newton steps with some of the species until they are short.

    Parameters
    ----------
    species : positions (q,) of those that count.
    offsets : (q, n) Delta of these species.
    log_pressure : (n,) ln(p / p0).
    m : (r, n) mol of the components.
    log_y, log_total : (r, n), (n,) estimates of ln y of the components and of ln(N / mol).
    kind : of the numbers to calculate with.
    most_steps : after which the points that have not arrived are given up.
    """
    n = len(log_total)
    out = Approached(
        np.empty(log_y.shape), np.empty(n), np.empty(n), np.empty(n, np.int32), np.zeros(n, dtype=bool)
    )
    to_change = components.C[:, species].T.astype(kind)
    to_exponents = np.column_stack([to_change, -np.ones(len(species), kind)])
    to_sums = components.sums[species].T.astype(kind)
    # a total of 1 mol keeps the numbers within reach of single precision
    target = (m * np.exp(-log_total)).astype(kind)
    offsets, lnp = offsets.astype(kind), log_pressure.astype(kind)
    here_y, here_total = log_y.astype(kind), np.zeros(n, kind)
    level = np.concatenate([here_y + lnp, lnp[None]])
    place = np.arange(n)
    with np.errstate(all="ignore"):  # points that go wrong do not arrive
        for taken in range(1, most_steps + 1):
            y = to_exponents @ level
            y -= offsets
            np.exp(y, out=y)
            change, ratio, condition = _newton_step(to_sums @ y, target * np.exp(-here_total), here_y)
            log_ratio = np.log(ratio)
            reach = np.maximum(np.abs(change).max(axis=0), np.abs(log_ratio))
            change *= _length(to_change @ change)
            here_y += change
            level[:-1] += change
            here_total += log_ratio
            is_open = reach >= NEAR  # nor is a point that went wrong: NaN
            count = np.count_nonzero(is_open)
            if count > STILL_OPEN * len(place):
                continue
            out.log_y[:, place], out.log_total[place] = here_y, here_total
            out.condition[place], out.steps[place] = condition, taken
            out.arrived[place] = reach < NEAR
            if not count:
                break
            left = np.flatnonzero(is_open)
            place, target, offsets = place[left], target[:, left], offsets[:, left]
            level, here_y, here_total = level[:, left], here_y[:, left], here_total[left]
    out.log_total[:] += log_total
    return out


def _newton_step(sums: Reals, target: Reals, log_y: Reals) -> tuple[Reals, Reals, Reals]:
    """Change of ln y (r, n), factor of N and condition (n,), as of NewtonStep."""
    r, n = log_y.shape
    if not are_few(n, r):
        step = NewtonStep.of(sums, target, log_y)
        return step.log_y, step.total_ratio, step.condition
    total, balance, packed = sums[0], sums[1 : 1 + r], sums[1 + r :]
    condition = (diagonal(packed) * np.exp(-log_y)).max(axis=0)
    try:
        to_target, to_balance = (x.T for x in solve_few(packed.T, target.T, balance.T))
    except np.linalg.LinAlgError:  # of a point that goes wrong
        lost = np.full(n, np.nan, log_y.dtype)
        return np.zeros_like(log_y), lost, lost
    ratio = ((balance * to_target).sum(axis=0) - 1.0 + total) / (balance * to_balance).sum(axis=0)
    ratio = np.clip(ratio, 1.0 / TOTAL_CHANGE, TOTAL_CHANGE)
    return to_target / ratio - to_balance, ratio, condition


def _length(change: Reals) -> Reals:
    """(n,) part of a step to take, whose whole would change ln y by (q, n)."""
    rise = np.maximum(change.max(axis=0), SMALLEST_RISE)
    fall = change.min(axis=0)
    extended = np.where(fall < FALLING, np.clip(1.0 / rise, 1.0, MOST_EXTENDED), 1.0)
    length = np.where(rise > BOLD, np.log1p(rise / BOLD) * (BOLD / rise), extended)
    return np.asarray(np.minimum(length, DEEPEST / np.minimum(fall, FALLING)).astype(change.dtype))
