"""Element amounts of a feed, exact when the feed is written in decimals or as fractions.

0.1 mol C3H8 + 0.5 mol O2 is meant to be exactly stoichiometric, but the doubles nearest to 0.1 and 0.5
are not in the ratio 1 : 5. Where an exact balance decides the traces (H2 and O2 over steam at 300 K,
some 1e-27), that rounding would decide them instead. So each amount is read as the decimal number it
prints as, all amounts of one feed are multiplied by one factor that makes them whole numbers, and the
element amounts are formed in whole numbers, which doubles hold exactly below 2^53. The factor is undone
after solving.
"""

from __future__ import annotations

import math
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

LARGEST_WHOLE_NUMBER = 2.0**53  # beyond it doubles skip whole numbers
MOST_DECIMALS = 22  # 10^22 is the largest power of ten that is exactly a double, so m / 10^22 rounds once

FloatArray = NDArray[np.float64]


def element_amounts(feed: FloatArray, composition: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Element amounts of feeds, times a factor that makes them whole numbers where possible.

    Args:
        feed: amounts [mol], (F, J), finite and not negative.
        composition: atoms of each element per molecule [1], (J, E).

    Returns:
        scaled element amounts [mol], (F, E), and the factor of each feed [1], (F,): the true element
        amounts are the first divided by the second. The factor is 1, and the amounts are rounded
        products, for a feed that has no such whole numbers below 2^53 (more than about 15 digits).
    """
    decimals = _decimals_of_feeds(feed)
    readable = decimals <= MOST_DECIMALS
    # One factor for all feeds keeps a sweep over the feed smooth for the solver; it is given up only
    # when the feed with most decimals would push another one beyond the whole numbers.
    shared = decimals[readable].max(initial=0)
    for power in (np.full_like(decimals, shared), decimals):
        factor = 10.0 ** np.where(readable, power, 0)
        whole = np.where(readable[:, None], np.rint(feed * factor[:, None]), feed)
        exact = readable & (_size(whole, composition) < LARGEST_WHOLE_NUMBER)
        if exact[readable].all():
            break
    factor = np.where(exact, factor, 1.0)
    return np.where(exact[:, None], whole, feed) @ composition, factor


def element_amounts_of_fractions(
    feed: NDArray[Any], composition: FloatArray
) -> tuple[NDArray[Any], FloatArray]:
    """As `element_amounts`, for feeds given as `fractions.Fraction` (F, J), and exact for all of them.

    Where a feed has no whole numbers below 2^53 (masses divided by molar masses), the element amounts come as
    an object array of Fractions, which the minimiser takes as they are.
    """
    atoms = [[Fraction(float(value)) for value in row] for row in composition]
    amounts = np.empty((len(feed), composition.shape[1]), dtype=object)
    factors = np.ones(len(feed))
    whole = True
    for i, row in enumerate(feed):
        exact = [
            sum(
                (amount * per_molecule[e] for amount, per_molecule in zip(row, atoms, strict=True)),
                Fraction(0),
            )
            for e in range(composition.shape[1])
        ]
        denominator = math.lcm(*(value.denominator for value in exact))
        # as small as they get: 3600 : 7200 becomes 1 : 2
        common = math.gcd(*(int(value * denominator) for value in exact)) or 1
        factor = Fraction(denominator, common)
        scaled = [value * factor for value in exact]
        if max(map(abs, scaled), default=Fraction(0)) < LARGEST_WHOLE_NUMBER:
            amounts[i], factors[i] = scaled, float(factor)
        else:
            amounts[i], whole = exact, False
    return (amounts.astype(np.float64) if whole else amounts), factors


def _size(feed: FloatArray, composition: FloatArray) -> FloatArray:
    """Largest partial sum that forming the element amounts can meet, (F,)."""
    largest: FloatArray = (feed @ np.abs(composition)).max(axis=1, initial=0.0)
    return largest


def _decimals_of_feeds(feed: FloatArray) -> NDArray[np.int64]:
    """Decimals that the amounts of each feed (F, J) need, (F,); MOST_DECIMALS + 1 where one of them is not read."""
    decimals = np.zeros(len(feed), dtype=np.int64)
    readable = np.arange(len(feed))
    for amounts in feed.T:  # a feed that is not readable by one amount need not be looked at by the next
        decimals[readable] = np.maximum(decimals[readable], _decimals(amounts[readable]))
        readable = readable[decimals[readable] <= MOST_DECIMALS]
    return decimals


def _decimals(values: FloatArray) -> NDArray[np.int64]:
    """Smallest k with value == m / 10^k for a whole m below 2^53, or MOST_DECIMALS + 1 if there is none; (n,).

    m / 10^k is rounded once, so equality means that the double is the one nearest to the decimal number.
    """
    decimals = np.full(len(values), MOST_DECIMALS + 1)
    open_ = np.arange(len(values))
    for k in range(MOST_DECIMALS + 1):
        power = 10.0**k
        whole = np.rint(values[open_] * power)
        possible = whole < LARGEST_WHOLE_NUMBER
        found = possible & (whole / power == values[open_])
        decimals[open_[found]] = k
        open_ = open_[possible & ~found]
        if not open_.size:
            break
    return decimals
