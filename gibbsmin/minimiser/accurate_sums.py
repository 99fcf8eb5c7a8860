"""Sums of products with twice the precision of doubles.

Error-free transformations: a product and a sum of two doubles are each split into the rounded result and its exact
error (Dekker, Numer. Math. 18 (1971) 224; Knuth, The Art of Computer Programming vol. 2, 4.2.2).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

SPLITTER = 2.0**27 + 1.0
"""Splits a double into two halves of 26 bits."""


def dot(a: Floats, b: Floats) -> Floats:
    """(n,) sums over the last axis of a (n, k) * b (n, k), as accurate as if formed with about 32 digits."""
    total = np.zeros(a.shape[:-1])
    rest = np.zeros_like(total)
    for k in range(a.shape[-1]):
        product, error = _two_product(a[..., k], b[..., k])
        total, lost = _two_sum(total, product)
        rest, lower = _two_sum(rest, lost + error)
        total, rest = _two_sum(total, rest)
        rest += lower
    return total + rest


def _two_sum(a: Floats, b: Floats) -> tuple[Floats, Floats]:
    total = a + b
    shifted = total - a
    return total, (a - (total - shifted)) + (b - shifted)


def _two_product(a: Floats, b: Floats) -> tuple[Floats, Floats]:
    product = a * b
    a_high, a_low = _halves(a)
    b_high, b_low = _halves(b)
    return product, ((a_high * b_high - product) + a_high * b_low + a_low * b_high) + a_low * b_low


def _halves(a: Floats) -> tuple[Floats, Floats]:
    scaled = SPLITTER * a
    high = scaled - (scaled - a)
    return high, a - high
