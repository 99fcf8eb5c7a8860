"""Interior method for gas beside condensed phases: slower than guessing the phases, but it cannot cycle.

Dual problem (certificate.py): maximise b.pi with sum_j exp(a_j.pi - c_j) <= 1 over the gas and a_k.pi <= g_k for each phase.
Its logarithmic barrier

    b.pi + mu ln(1 - S) + mu sum_k ln s_k,    S = sum_j y_j,   s_k = g_k - a_k.pi,

is smooth and concave inside; physically, mu mol of an inert substance keep every phase present. Its maximum has the
amounts N = mu / (1 - S), n_j = N y_j and n_k = mu / s_k, which balance exactly, and lies no more than mu (1 + K) above the
minimum. Newton's method with backtracking follows it from a wide mu to a narrow one (Boyd & Vandenberghe, Convex
Optimization (2004), ch. 11). As in newton.py the components are kept those of the largest weights, so that the
systems stay well scaled.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gibbsmin.minimiser.certificate import shift_weight
from gibbsmin.minimiser.components import Amounts, Components, Floats
from gibbsmin.minimiser.posing import Posed

FIRST_MU, LAST_MU, SHRINK = 1e-2, 1e-12, 0.2
"""Barrier weights relative to the size of the feed, and the factor between one and the next."""

STEPS_PER_MU = 40
DECREMENT = 1e-3
"""Newton decrement, relative to mu, at which the next mu may follow."""

TO_THE_WALL = 0.9
"""Part of the way to the nearest constraint that one step may take."""

SLOPE_PART = 0.1
"""Part of the increase foretold by the slope that a step has to deliver."""


@dataclass
class Inside:
    """A point inside the constraints, near the minimum.

    log_activities (S,): ln y of gas species, -s of phases; amounts (S,) [mol].
    staying (S,): phases whose amount no longer falls with mu; gas_stays: the same of the gas.
    """

    components: Components
    log_y: Floats  # (r,) of the components
    log_activities: Floats
    amounts: Floats  # (S,)
    staying: NDArray[np.bool_]
    gas_stays: bool
    steps: int


def follow_path(
    posed: Posed, condensed: NDArray[np.bool_], components: Components, b: Amounts, c: Floats
) -> Inside:
    """Follow the barrier to its end for one point.

    Parameters: components to begin with; b (r,) independent element amounts [mol]; c (S,) potentials.
    """
    walk = _Walk(posed, condensed, components, b, c)
    mu = FIRST_MU
    with np.errstate(all="ignore"):  # trial steps may leave the constraints; they are not taken
        while mu > LAST_MU:
            walk.climb(mu)
            before = walk.amounts(mu)
            mu *= SHRINK
        walk.climb(mu)
        return walk.inside(mu, before)


class _Walk:
    def __init__(
        self, posed: Posed, condensed: NDArray[np.bool_], components: Components, b: Amounts, c: Floats
    ) -> None:
        self.condensed = condensed
        self.b = b[None, :]
        self.size = float(np.abs(b.astype(np.float64)).sum())
        self.c = c
        self.steps = 0
        inside = posed.A[:, posed.kept]
        reach = shift_weight(inside) @ inside  # (S,) at least 1
        self.log_y: Floats
        self._take(components, np.zeros(len(components.key)))
        log_all = self.log_all(self.log_y)
        gas = log_all[~condensed]
        excess = max(
            log_all.max(), gas.max() + np.log(np.exp(gas - gas.max()).sum()) if gas.size else -np.inf
        )
        self.log_y = self.log_y - (max(excess, 0.0) + 1.0) * reach[self.components.columns]

    def _take(self, components: Components, log_y: Floats) -> None:
        self.components = components
        self.log_y = log_y
        self.m = components.amounts(self.b)[0] / self.size
        self.offsets = components.offsets(self.c[None, :])[0]

    def log_all(self, log_y: Floats) -> Floats:
        out: Floats = log_y @ self.components.C - self.offsets
        return out

    def slacks(self, log_all: Floats) -> tuple[float, Floats]:
        """1 - S of the gas, and s of the phases."""
        gas = log_all[~self.condensed]
        if not gas.size:
            return 1.0, -log_all[self.condensed]
        highest = gas.max()
        log_sum = highest + np.log(np.exp(gas - highest).sum())
        return float(-np.expm1(log_sum)), -log_all[self.condensed]

    def climb(self, mu: float) -> None:
        """Newton's method at one mu."""
        for _ in range(STEPS_PER_MU):
            self._adapt(mu)
            log_all = self.log_all(self.log_y)
            gas_slack, slack = self.slacks(log_all)
            C = self.components.C
            gas_C, phase_C = C[:, ~self.condensed], C[:, self.condensed]
            n = mu / gas_slack * np.exp(log_all[~self.condensed])
            held = gas_C @ n
            gradient = self.m - held - phase_C @ (mu / slack)
            hessian = (
                (gas_C * n) @ gas_C.T + np.outer(held, held) / mu + (phase_C * (mu / slack**2)) @ phase_C.T
            )
            scale = 1.0 / np.sqrt(np.diag(hessian))
            scaled = hessian * scale[:, None] * scale
            if not np.isfinite(scaled).all():  # on the wall, by rounding: the path ends here
                return
            direction = scale * np.linalg.lstsq(scaled, scale * gradient)[0]
            slope = float(gradient @ direction)
            self.steps += 1
            self._advance(direction, slope, log_all, mu)
            if slope < DECREMENT * mu:
                return

    def _advance(self, direction: Floats, slope: float, log_all: Floats, mu: float) -> None:
        change = direction @ self.components.C
        towards = change[self.condensed] / np.maximum(-log_all[self.condensed], np.finfo(np.float64).tiny)
        length = min(1.0, TO_THE_WALL / max(towards.max(initial=0.0), np.finfo(np.float64).tiny))
        before = self._barrier(self.log_y, log_all, mu)
        least = (1.0 - TO_THE_WALL) * self.slacks(log_all)[0]
        while length > np.finfo(np.float64).eps:
            log_y = self.log_y + length * direction
            new = log_all + length * change
            after = self._barrier(log_y, new, mu) if self.slacks(new)[0] >= least else -np.inf
            if after >= before + SLOPE_PART * length * slope - NOISE * abs(before):
                self.log_y = log_y
                return
            length *= 0.5

    def _barrier(self, log_y: Floats, log_all: Floats, mu: float) -> float:
        gas_slack, slack = self.slacks(log_all)
        if gas_slack <= 0.0 or (slack <= 0.0).any():
            return -np.inf
        return float(self.m @ log_y + mu * np.log(gas_slack) + mu * np.log(slack).sum())

    def _adapt(self, mu: float) -> None:
        """Components of the largest weights in the Hessian."""
        log_all = self.log_all(self.log_y)
        gas_slack, slack = self.slacks(log_all)
        weights = log_all + np.log(mu / gas_slack)
        weights[self.condensed] = np.log(mu) - 2.0 * np.log(slack)
        adapted = self.components.adapted(weights)
        if adapted is self.components:
            return
        known = (self.components, self.log_y)
        self._take(adapted, log_all[adapted.columns])
        gas_slack, slack = self.slacks(self.log_all(self.log_y))
        if gas_slack <= 0.0 or (slack <= 0.0).any():  # rounding, close to a wall
            self._take(*known)

    def amounts(self, mu: float) -> Floats:
        """(S,) amounts [mol] that the barrier assigns at its maximum."""
        log_all = self.log_all(self.log_y)
        gas_slack, slack = self.slacks(log_all)
        amounts: Floats = self.size * mu / gas_slack * np.exp(log_all)
        amounts[self.condensed] = self.size * mu / slack
        return amounts

    def inside(self, mu: float, before: Floats) -> Inside:
        """The end of the path; `before` (S,) are the amounts at the mu before the last."""
        log_all = self.log_all(self.log_y)
        amounts = self.amounts(mu)
        falling = np.sqrt(SHRINK)
        staying = self.condensed & (amounts > falling * before)
        gas_stays = bool(amounts[~self.condensed].sum() > falling * before[~self.condensed].sum())
        return Inside(self.components, self.log_y, log_all, amounts, staying, gas_stays, self.steps)


NOISE = 1e-15
"""Differences of the barrier below this part of it are rounding."""
