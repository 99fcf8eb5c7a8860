"""Where on its line each contour gets its number: inside the panel, and out of the way of the others."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

_MARGIN = 0.25  # inches from the frame, about half of a number's length
_APART = 0.33  # inches between two numbers, at least
_FAR_ENOUGH = 0.6  # inches beyond which more distance is worth nothing
_PULL = 0.3  # how much of that distance a place may lose by lying an inch off the centre


def place_labels(lines: Sequence[NDArray[np.float64]], size: ArrayLike) -> list[NDArray[np.float64] | None]:
    """A place for a number on each of several lines, or None where there is no room.

    Parameters: `lines` holds the vertices of each line [inches from the lower left corner of the panel],
    (n, 2), NaN or out of the panel as it may be; `size` is the panel's [inches], (2,).

    Greedy: line by line, the vertex furthest from the numbers already placed, with a pull to the centre.
    """
    size = np.asarray(size, dtype=float)
    placed: list[NDArray[np.float64]] = []
    chosen: list[NDArray[np.float64] | None] = []
    for line in lines:
        inside = line[((line > _MARGIN) & (line < size - _MARGIN)).all(axis=1)]
        if not len(inside):
            chosen.append(None)
            continue
        gap = np.full(len(inside), np.inf)
        for other in placed:
            gap = np.minimum(gap, np.hypot(*(inside - other).T))
        worth = np.minimum(gap, _FAR_ENOUGH) - _PULL * np.hypot(*(inside - size / 2).T)
        best = int(np.argmax(np.where(gap >= _APART, worth, -np.inf)))
        if gap[best] < _APART:
            chosen.append(None)
            continue
        placed.append(inside[best])
        chosen.append(inside[best])
    return chosen
