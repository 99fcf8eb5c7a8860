"""Which points of a large map the page shows; the results file keeps all of them."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from gibbsmin.figures.axes import spread

MOST_POINTS = 10_000
MOST_VALUES = 1_000_000  # mole fractions: four million characters


@dataclass(frozen=True)
class Thinned:
    """Positions kept along each axis of the grid."""

    shape: tuple[int, ...]
    kept: tuple[tuple[int, ...], ...]

    @property
    def is_whole(self) -> bool:
        return all(len(kept) == size for kept, size in zip(self.kept, self.shape, strict=True))


def thin(shape: Sequence[int], species: int, most_points: int = MOST_POINTS) -> Thinned:
    """Evenly spread positions, ends included, so that neither points nor mole fractions exceed their limits.

    The longest axis gives way first, so that short ones (four feed ratios) stay whole as long as possible.
    """
    limit = max(1, min(most_points, MOST_VALUES // max(1, species)))
    counts = list(shape)
    while math.prod(counts) > limit:
        longest = max(range(len(counts)), key=lambda axis: (counts[axis], axis))
        if counts[longest] <= 2:
            break
        # In small steps, so that axes of equal length shrink together.
        counts[longest] -= max(1, counts[longest] // 50)
    return Thinned(tuple(shape), tuple(tuple(spread(n, most)) for n, most in zip(shape, counts, strict=True)))
