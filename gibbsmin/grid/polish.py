"""Points of a map from interpolated estimates: one Newton step with an exact Hessian, one that reuses it, and the proof.

In logarithms of partial pressures, mu_i = ln(y_i p / p0), the exponents

    ln(p_j / p0) = sum_i C_ij mu_i - Delta_j(T)

depend on pressure only through mu, and Delta is shared by all points of a temperature. An estimate with error e in
ln y is left with an error of order e^2 by the first step and e^3 by the second, which only costs the sums of the
balances. What that does not settle goes back to the minimiser.

All arrays of a chunk fit in the cache of a core; each line below is one pass over them.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from gibbsmin.minimiser.certificate import shift_weight
from gibbsmin.minimiser.cholesky import Factors
from gibbsmin.minimiser.components import Components
from gibbsmin.minimiser.posing import BALANCE_TOLERANCE, GAP_TOLERANCE, Posed

Floats = NDArray[np.float64]

FIRST_REACH = 1e-2
"""Largest change of any ln y in the first step; what the second leaves then is below 1e-6 times SECOND_REACH."""

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
    """What the points of one feed share: the posed problem, components, b (E,) and m (r,) [mol]."""

    posed: Posed
    components: Components
    b: Floats
    m: Floats

    @cached_property
    def sums(self) -> Floats:
        """(s, 1 + r + k): columns 1, C_i, and |a_ej| of the k element rows that hold charges."""
        signed = np.abs(self.posed.A[np.ix_(self.signed_rows, self.posed.kept)])
        r = len(self.m)
        return np.ascontiguousarray(np.hstack([self.components.sums[:, : 1 + r], signed.T]))

    @cached_property
    def signed_rows(self) -> NDArray[np.bool_]:
        return np.asarray((self.posed.A[:, self.posed.kept] < 0.0).any(axis=1))

    @cached_property
    def shift_reach(self) -> float:
        """w.b of the vector that makes potentials dual feasible [mol]."""
        return float(self.b @ shift_weight(self.posed.A[:, self.posed.kept]))

    @cached_property
    def component_formulas(self) -> Floats:
        """(E, r) formula matrix of the components."""
        return self.posed.A[:, self.posed.kept[self.components.columns]]


@dataclass
class Polished:
    """Points (n,) of a chunk after polishing; `good` marks those that are solved and proved."""

    amounts: Floats  # (n, s) mol
    element_potentials: Floats  # (n, E)
    gap: Floats
    balance_residual: Floats
    good: NDArray[np.bool_]


def polish(
    feed: Feed, gibbs_RT: Floats, log_pressure: Floats, log_y: Floats, log_total: Floats
) -> Polished:
    """Polish a chunk of nT temperatures by nP pressures, n = nT nP points, pressure running fastest.

    Parameters
    ----------
    gibbs_RT : (nT, s) standard g / RT of the kept species.
    log_pressure : (nP,) ln(p / p0).
    log_y, log_total : (n, r), (n,) estimates of ln y of the components and of ln(N / mol).
    """
    components, m = feed.components, feed.m
    C, r = components.C, len(m)
    n_T, n_p = len(gibbs_RT), len(log_pressure)
    lnp = np.tile(log_pressure, n_T)
    offsets = components.offsets(gibbs_RT)
    # ln y_j = sum_i C_ij (ln y_i + ln p) - Delta_j - ln p
    exponents = (log_y + lnp[:, None]) @ C
    by_temperature = exponents.reshape(n_T, n_p, -1)
    by_temperature -= offsets[:, None, :]
    by_temperature -= log_pressure[:, None]
    with np.errstate(all="ignore"):  # what goes wrong in a point shows in `good`
        y = np.exp(exponents)
        table = y @ components.sums
        total, balance = table[:, 0], table[:, 1 : 1 + r]
        factors = Factors.of_packed(table[:, 1 + r :], r)
        condition = (factors.diagonal / np.exp(log_y)).max(axis=1)
        to_target = factors.solve(m * np.exp(-log_total)[:, None])
        to_balance = factors.solve(balance)
        by_balance = (balance * to_balance).sum(axis=1)
        ratio = ((balance * to_target).sum(axis=1) - 1.0 + total) / by_balance
        first = to_target / ratio[:, None] - to_balance
        first_reach = np.abs(first) @ components.largest
        good = (first_reach < FIRST_REACH) & (condition < ILL_CONDITIONED) & (np.abs(ratio - 1.0) < FIRST_REACH)
        first[~good], ratio[~good] = 0.0, 1.0
        log_total = log_total + np.log(ratio)
        log_y = log_y + first
        exponents += first @ C
        np.exp(exponents, out=y)
        table = y @ feed.sums
        missing = m * np.exp(-log_total)[:, None] - table[:, 1 : 1 + r]
        to_missing = factors.solve(missing)
        change = ((balance * to_missing).sum(axis=1) - 1.0 + table[:, 0]) / by_balance
        second = to_missing - to_balance * change[:, None]
        second_reach = np.abs(second) @ components.largest
        good &= first_reach * (second_reach + np.abs(change)) < LAST_ERROR
        second[~good], change[~good], second_reach[~good] = 0.0, 0.0, 0.0
        log_total += np.log1p(change)
        log_y += second
        growth = second @ C
        growth += 1.0
        y *= growth
        table = y @ feed.sums
        total_amount = np.exp(log_total)
        y *= total_amount[:, None]
        terms = np.abs(log_y + lnp[:, None]) @ components.largest + np.abs(lnp)
        terms += np.repeat(np.abs(offsets).max(axis=1), n_p)
        uncertainty = second_reach**2 + ROUNDING * terms
        potentials = log_y + np.repeat(gibbs_RT[:, components.columns], n_p, axis=0) + lnp[:, None]
        return _proved(feed, y, table, total_amount, potentials, uncertainty, good)


def _proved(
    feed: Feed,
    amounts: Floats,
    table: Floats,
    total_amount: Floats,
    potentials: Floats,
    uncertainty: Floats,
    good: NDArray[np.bool_],
) -> Polished:
    """Certificate of a chunk (see minimiser/certificate.py), from sums that are at hand.

    ln(n_j / N) and the level a_j.pi - c_j that pi assigns differ by no more than `uncertainty` (n,). `table` holds
    the sums of y over species, `potentials` (n, r) a_i.pi of the components.
    """
    r = potentials.shape[1]
    rows = feed.posed.system.rows
    total = table[:, 0]
    held = total_amount[:, None] * (table[:, 1 : 1 + r] @ feed.component_formulas.T)
    missed = held - feed.b
    turnover = np.tile(np.maximum(np.abs(feed.b), TINY), (len(total), 1))
    turnover[:, feed.signed_rows] = np.maximum(total_amount[:, None] * table[:, 1 + r :], TINY)
    residual = (np.abs(missed) / turnover).max(axis=1)
    pi = np.full((len(total), len(feed.b)), np.nan)
    pi[:, feed.posed.A[:, feed.posed.kept].any(axis=1)] = 0.0
    pi[:, rows] = potentials @ np.linalg.inv(feed.component_formulas[rows])
    log_sum = np.log(total)
    above_dual = total_amount * total * (uncertainty - log_sum)
    excess = np.maximum(log_sum + uncertainty, 0.0)
    gap = above_dual + np.abs(missed[:, rows] * pi[:, rows]).sum(axis=1) + excess * feed.shift_reach
    good &= (residual <= BALANCE_TOLERANCE) & (gap <= GAP_TOLERANCE * np.abs(feed.b).sum())
    return Polished(amounts, pi, np.maximum(gap, 0.0), residual, good)
