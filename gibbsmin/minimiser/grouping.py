"""Points grouped by what they have in common; most often that is everything, which costs least to see first."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gibbsmin.minimiser.components import Indices


def alike(patterns: NDArray[np.generic], points: Indices) -> list[tuple[Indices, Indices]]:
    """Points (n,) grouped by equal rows of `patterns` (n, k): (row, points) pairs."""
    if not len(points):
        return []
    if len(points) == 1 or (patterns == patterns[0]).all():
        return [(patterns[0], points)]
    unique, which = np.unique(patterns, axis=0, return_inverse=True)
    return [(pattern, points[which.ravel() == k]) for k, pattern in enumerate(unique)]


def by_value(values: Indices, points: Indices) -> list[tuple[int, Indices]]:
    """Points (n,) grouped by equal values (n,): (value, points) pairs."""
    if not len(points):
        return []
    if len(points) == 1 or (values == values[0]).all():
        return [(int(values[0]), points)]
    return [(int(value), points[values == value]) for value in np.unique(values)]
