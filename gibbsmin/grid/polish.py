"""Points of a map from interpolated estimates: one Newton step with an exact Hessian, one that reuses it, and the proof.

In logarithms of partial pressures, mu_i = ln(y_i p / p0), the exponents

    ln(p_j / p0) = sum_i C_ij mu_i - Delta_j(T)

depend on pressure only through mu, and Delta is shared by all points of a temperature. An estimate with error e in
ln y is left with an error of order e^2 by the first step and e^3 by the second, which only costs the sums of the
balances. What that does not settle goes back to the minimiser.

All arrays of a chunk fit in the cache of a core; each line below is one pass over them.
"""

from __future__ import annotations

import threading
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from gibbsmin.minimiser.certificate import shift_weight
from gibbsmin.minimiser.cholesky import Factors, Reals, diagonal, product
from gibbsmin.minimiser.components import Components
from gibbsmin.minimiser.newton import TOTAL_CHANGE
from gibbsmin.minimiser.posing import BALANCE_TOLERANCE, GAP_TOLERANCE, Posed

Floats = NDArray[np.float64]

SETTLED = 1e-2
"""Largest change of any ln y by a step with its own Hessian that lets the next, without, come near LAST_ERROR."""

LAST_ERROR = 1e-13
"""Largest product of the changes of both steps: the order of the error that is left in ln y."""

ILL_CONDITIONED = 1e5
"""A diagonal of the Hessian above this multiple of the component itself: other components are called for."""

TINY = 1e-290
"""Turnover below this is beyond what a double resolves."""

ROUNDING = 4.0 * np.finfo(np.float64).eps
"""Allowance for the rounding of an exponent, relative to the size of its terms."""


@dataclass(frozen=True)
class Feed:
    """What points share: the posed problem and components; and their element amounts.

    b (E, 1) and m (r, 1) of elements and components [mol], or (E, n) and (r, n) where each point has its own.
    """

    posed: Posed
    components: Components
    b: Floats
    m: Floats

    @cached_property
    def signed_rows(self) -> NDArray[np.bool_]:
        return np.asarray((self.posed.A[:, self.posed.kept] < 0.0).any(axis=1))

    @cached_property
    def to_exponents(self) -> Floats:
        """(s, r + 1): takes (ln y_i + ln p, ln p) of the components to ln y_j + Delta_j of all species."""
        return np.ascontiguousarray(np.vstack([self.components.C, -np.ones(self.components.C.shape[1])]).T)

    @cached_property
    def to_change(self) -> Floats:
        """(s, r) C^T."""
        return np.ascontiguousarray(self.components.C.T)

    @cached_property
    def to_all_sums(self) -> Floats:
        """(1 + r + r (r + 1) / 2, s): rows 1, C_i, C_i C_k (i >= k)."""
        return np.ascontiguousarray(self.components.sums.T)

    @cached_property
    def to_balances(self) -> Floats:
        """(1 + r + k, s): rows 1, C_i, and |a_ej| of the k element rows that hold charges."""
        signed = np.abs(self.posed.A[np.ix_(self.signed_rows, self.posed.kept)])
        return np.vstack([self.to_all_sums[: 1 + len(self.m)], signed])

    @cached_property
    def shift_reach(self) -> Floats:
        """(1,) or (n,) w.b of the vector that makes potentials dual feasible [mol]."""
        return np.asarray(shift_weight(self.posed.A[:, self.posed.kept]) @ self.b)

    @cached_property
    def component_formulas(self) -> Floats:
        """(E, r) formula matrix of the components."""
        return self.posed.A[:, self.posed.kept[self.components.columns]]

    @cached_property
    def to_potentials(self) -> Floats:
        """(r, r): takes a_i.pi of the components to pi of the independent element rows."""
        return np.asarray(np.linalg.inv(self.component_formulas[self.posed.system.rows].T))


class Points(Protocol):
    """Points (n,) whose species have potentials c = g / RT + ln p."""

    @property
    def log_pressures(self) -> Floats:
        """(n,) ln(p / p0)."""

    def exponents(self, feed: Feed, log_y: Floats, out: Floats) -> None:
        """Set `out` (s, n) to ln y_j = sum_i C_ij (ln y_i + ln p) - Delta_j - ln p."""

    def potentials(self, components: Components) -> Floats:
        """(r, n) potentials of the components."""

    def largest_potential(self) -> Floats:
        """(n,) largest |c_j|, or a bound of it."""


@dataclass(frozen=True)
class Rectangle:
    """nT temperatures by nP pressures, pressure running fastest.

    gibbs_RT (nT, s) standard g / RT of the kept species; log_pressure (nP,) ln(p / p0).
    """

    gibbs_RT: Floats  # noqa: N815 - the field's own symbol
    log_pressure: Floats

    @cached_property
    def log_pressures(self) -> Floats:
        return np.tile(self.log_pressure, len(self.gibbs_RT))

    def exponents(self, feed: Feed, log_y: Floats, out: Floats) -> None:
        lnp = self.log_pressures
        np.matmul(feed.to_exponents, np.concatenate([log_y + lnp, lnp[None]]), out=out)
        standard = np.ascontiguousarray(feed.components.offsets(self.gibbs_RT).T)
        out.reshape(len(out), len(self.gibbs_RT), -1)[...] -= standard[:, :, None]

    def potentials(self, components: Components) -> Floats:
        standard = self.gibbs_RT[:, components.columns].T
        return np.repeat(standard, len(self.log_pressure), axis=1) + self.log_pressures

    def largest_potential(self) -> Floats:
        return np.repeat(np.abs(self.gibbs_RT).max(axis=1), len(self.log_pressure)) + np.abs(
            self.log_pressures
        )


@dataclass(frozen=True)
class Scattered:
    """Points without order: gibbs_RT (s, n) and log_pressures (n,) of each."""

    gibbs_RT: Floats  # noqa: N815 - the field's own symbol
    log_pressures: Floats

    def exponents(self, feed: Feed, log_y: Floats, out: Floats) -> None:
        lnp = self.log_pressures
        own = feed.components.columns
        np.matmul(feed.to_exponents, np.concatenate([log_y + lnp + self.gibbs_RT[own], lnp[None]]), out=out)
        out -= self.gibbs_RT
        out[own] = log_y

    def potentials(self, components: Components) -> Floats:
        return self.gibbs_RT[components.columns] + self.log_pressures

    def largest_potential(self) -> Floats:
        largest = np.maximum(self.gibbs_RT.max(axis=0), -self.gibbs_RT.min(axis=0))
        return np.asarray(largest + np.abs(self.log_pressures))


@dataclass
class Polished:
    """Points (n,) after the steps; arrays hold the points last.

    y and log_x live in the thread's work space: they last until its next call of polish.
    """

    feed: Feed
    y: Floats  # (s, n) mole fractions
    log_x: Floats  # (s, n)
    log_y: Floats  # (r, n) of the components
    log_total: Floats  # (n,)
    first_reach: Floats  # (n,) largest change of any ln y by the last step with a Hessian of its own
    second_reach: Floats  # (n,) the same of the step that reuses it
    stepped: NDArray[np.bool_]  # (n,) whether the steps could be taken
    usable: NDArray[np.bool_]  # (n,) whether they were as short as they had to be


_work_space = threading.local()


def _scratch(species: int, points: int) -> Iterator[Floats]:
    """Three arrays (species, points) that a thread keeps: fresh memory would cost more than the arithmetic."""
    size = species * points
    kept: Floats | None = getattr(_work_space, "numbers", None)
    if kept is None or kept.shape[1] < size:
        kept = _work_space.numbers = np.empty((3, size))
    return (row[:size].reshape(species, points) for row in kept)


@dataclass
class NewtonStep:
    """A step on both conditions at once, for n points: balances N C y = m of all components, and sum y = 1."""

    log_y: Reals  # (r, n) change of ln y of the components
    total_ratio: Reals  # (n,) factor of N
    condition: Reals  # (n,) largest diagonal of H = C diag(y) C^T beside the component itself
    factors: Factors  # of H = L L^T
    balance: list[Reals]  # (r, n) L^-1 C y
    by_balance: Reals  # (n,) y C^T H^-1 C y

    @classmethod
    def of(cls, sums: Reals, target: Reals, log_y: Reals) -> NewtonStep:
        """From the sums of y, C y and H (packed) at ln y (r, n) of the components; target m / N (r, n)."""
        r = len(log_y)
        total, packed = sums[0], sums[1 + r :]
        condition = (diagonal(packed) * np.exp(-log_y)).max(axis=0)
        factors = Factors.of_packed(packed)
        wanted = factors.forward(target)
        balance = factors.forward(sums[1 : 1 + r])
        by_balance = product(balance, balance)
        ratio = (product(balance, wanted) - 1.0 + total) / by_balance
        ratio = np.clip(ratio, 1.0 / TOTAL_CHANGE, TOTAL_CHANGE)
        change = factors.backward([want / ratio - have for want, have in zip(wanted, balance, strict=True)])
        return cls(change, ratio, condition, factors, balance, by_balance)

    def repeated(self, sums: Floats, target: Floats) -> tuple[Floats, Floats]:
        """Changes of ln y (r, n) and ln N (n,) by a further step that takes the Hessian as it was."""
        missing = self.factors.forward(target - sums[1:])
        change = (product(self.balance, missing) - 1.0 + sums[0]) / self.by_balance
        parts = [want - have * change for want, have in zip(missing, self.balance, strict=True)]
        return self.factors.backward(parts), change


STEPS = 2
"""Steps that polishing takes."""


def polish(feed: Feed, points: Points, log_y: Floats, log_total: Floats, settled: float) -> Polished:
    """Take a Newton step, and one more that reuses its Hessian.

    Parameters
    ----------
    log_y, log_total : (r, n), (n,) estimates of ln y of the components and of ln(N / mol).
    settled : change of any ln y by a step beyond which a point is not usable; the first step is shortened to it.
    """
    m = feed.m
    r = len(m)
    exponents, y, growth = _scratch(len(feed.to_change), len(log_total))
    points.exponents(feed, log_y, exponents)
    with np.errstate(all="ignore"):  # what goes wrong in a point shows in `stepped` and `usable`
        np.exp(exponents, out=y)
        step = NewtonStep.of(feed.to_all_sums @ y, m * np.exp(-log_total), log_y)
        first, ratio = step.log_y, step.total_ratio
        reach = np.maximum(feed.components.largest @ np.abs(first), np.abs(ratio - 1.0))
        stepped = (step.condition < ILL_CONDITIONED) & np.isfinite(reach)
        if not stepped.all():
            first[:, ~stepped], ratio[~stepped] = 0.0, 1.0
        length = np.minimum(1.0, settled / np.abs(first).max(axis=0))
        first *= length
        log_total = log_total + length * np.log(ratio)
        log_y = log_y + first
        exponents += np.matmul(feed.to_change, first, out=growth)
        np.exp(exponents, out=y)
        second, change = step.repeated(feed.to_balances[: 1 + r] @ y, m * np.exp(-log_total))
        second_reach = feed.components.largest @ np.abs(second) + np.abs(change)
        usable = stepped & (reach < settled) & (second_reach < settled)
        if not usable.all():
            second[:, ~usable], change[~usable] = 0.0, 0.0
        np.matmul(feed.to_change, second, out=growth)
        exponents += growth
        growth += 1.0
        y *= growth
        log_total += np.log1p(change)
    return Polished(feed, y, exponents, log_y + second, log_total, reach, second_reach, stepped, usable)


@dataclass
class Proved:
    """Evidence of points (n,); `good` marks those that are solved and proved."""

    total_amount: Floats  # (n,) mol
    element_potentials: Floats  # (E, n)
    gap: Floats
    balance_residual: Floats
    good: NDArray[np.bool_]


def prove(polished: Polished, points: Points) -> Proved:
    """Certificate of polished points (see minimiser/certificate.py), from few sums.

    ln y_j and the level a_j.pi - c_j that the potentials assign differ by no more than the error of the last step,
    which took exp(d) as 1 + d, and the rounding of the exponents.
    """
    feed = polished.feed
    components, posed = feed.components, feed.posed
    r = len(feed.m)
    with np.errstate(all="ignore"):  # points that are not usable may hold anything
        total_amount = np.exp(polished.log_total)
        table = feed.to_balances @ polished.y
        total = table[0]
        potentials = polished.log_y + points.potentials(components)
        terms = (1.0 + np.abs(components.C).sum(axis=0).max()) * points.largest_potential()
        terms += components.largest @ np.abs(polished.log_y)
        uncertainty = polished.second_reach**2 + ROUNDING * terms
        missed = total_amount * (feed.component_formulas @ table[1 : 1 + r]) - feed.b
        turnover = np.broadcast_to(np.maximum(np.abs(feed.b), TINY), missed.shape).copy()
        turnover[feed.signed_rows] = np.maximum(total_amount * table[1 + r :], TINY)
        residual = (np.abs(missed) / turnover).max(axis=0)
        pi = np.full(missed.shape, np.nan)
        pi[posed.A[:, posed.kept].any(axis=1)] = 0.0
        pi[posed.system.rows] = feed.to_potentials @ potentials
        log_sum = np.log(total)
        above_dual = total_amount * total * (uncertainty - log_sum)
        excess = np.maximum(log_sum + uncertainty, 0.0)
        imbalance = np.abs(missed[posed.system.rows] * pi[posed.system.rows]).sum(axis=0)
        gap = np.maximum(above_dual + imbalance + excess * feed.shift_reach, 0.0)
        good = polished.usable & (polished.first_reach * polished.second_reach < LAST_ERROR)
        good &= (residual <= BALANCE_TOLERANCE) & (gap <= GAP_TOLERANCE * np.abs(feed.b).sum(axis=0))
    return Proved(total_amount, pi, gap, residual, good)
