"""Newton steps on the few species that decide the balances, from far estimates to near ones.

Most species of a mixture are traces: they follow from the potentials of the others and have no say in them. While an
estimate is far off, steps that leave them out are as good as full ones and cost a quarter. What they leave, the share
of the species left out, is for polish.py to settle with all species.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gibbsmin.minimiser.components import Components
from gibbsmin.grid.polish import Feed, Floats, Indices, NewtonStep

DEBUG=False
MINOR = 1e-6
"""A species that makes up less of every sum of the Hessian's diagonal is left out."""

LONGEST = 1.5
"""Largest change of ln y of a component in one step."""

NEAR = 3e-3
"""A step this short leaves an error of about MINOR."""

MOST_STEPS = 25

STILL_OPEN = 0.7
"""Points that have arrived are put aside once they are more than the rest of this part."""


def deciding_species(components: Components, log_x: Floats) -> Indices:
    """Positions of the species that matter in any of the compositions ln x (k, s), components among them."""
    C = components.C
    highest = log_x.max(axis=1, keepdims=True)
    squares = np.abs(C) * np.exp(log_x - highest)[:, None, :]
    squares *= np.abs(C)
    share = squares / squares.sum(axis=2, keepdims=True)
    decide = (share >= MINOR).any(axis=(0, 1))
    decide[components.columns] = True
    return np.flatnonzero(decide)


def approach(
    feed: Feed, species: Indices, standard: Floats, log_pressure: Floats, log_y: Floats, log_total: Floats
) -> tuple[Floats, Floats, NDArray[np.bool_]]:
    """Take Newton steps with some of the species until they are short.

    Parameters
    ----------
    species : positions (q,) of those that count.
    standard : (q, n) Delta of these species.
    log_pressure : (n,) ln(p / p0).
    log_y, log_total : (r, n), (n,) estimates of ln y of the components and of ln(N / mol); overwritten.

    Returns
    -------
    log_y, log_total, and whether each point arrived (n,).
    """
    to_exponents = np.ascontiguousarray(feed.to_exponents[species])
    to_sums = np.ascontiguousarray(feed.to_all_sums[:, species])
    m = feed.m
    place = np.arange(len(log_total))
    arrived = np.zeros(len(log_total), dtype=bool)
    level = np.concatenate([log_y + log_pressure, log_pressure[None]])
    here_y, here_total = log_y, log_total
    room = np.empty_like(standard)
    with np.errstate(all="ignore"):  # points that go wrong do not arrive
        for k in range(MOST_STEPS):
            if DEBUG: print(len(place), end=' ')
            np.matmul(to_exponents, level, out=room)
            room -= standard
            np.exp(room, out=room)
            step = NewtonStep.of(to_sums @ room, m * np.exp(-here_total), here_y)
            reach = np.abs(step.log_y).max(axis=0)
            length = np.minimum(1.0, LONGEST / reach)
            step.log_y *= length
            here_y += step.log_y
            level[:-1] += step.log_y
            here_total += length * np.log(step.total_ratio)
            is_open = ~(reach < NEAR) & (step.total_ratio > 0.0)
            count = np.count_nonzero(is_open)
            if count > STILL_OPEN * len(place):
                continue
            log_y[:, place], log_total[place] = here_y, here_total
            arrived[place] = (reach < NEAR) & (step.total_ratio > 0.0)
            if not count:
                break
            left = np.flatnonzero(is_open)
            place = place[left]
            level, here_y, here_total = level[:, left], here_y[:, left], here_total[left]
            standard, m = standard[:, left], m[:, left]
            room = np.empty_like(standard)
    return log_y, log_total, arrived
