"""A coarse field made fine by straight lines between its points, on the scales of the axes as drawn.

Contours of a coarse grid have few vertices. Between them they are straight on the page, while the numbers on
them are placed as if they were straight in the values: on a logarithmic axis the two part. On a fine grid
they meet. Nothing is smoothed: at the grid's points the values are those computed, inside a
square they are bilinear.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gibbsmin.figures.axes import Axis

_FINE = 80  # points along an axis from which straight pieces look smooth


def refine(
    field: NDArray[np.float64], up: Axis, across: Axis
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Values across, values up and the field (up, across) on a finer grid that keeps the coarse points.

    A square of the coarse grid with NaN at a corner is NaN inside.
    """
    field, y = _refine_rows(field, up)
    turned, x = _refine_rows(field.T, across)
    return x, y, turned.T


def _refine_rows(field: NDArray[np.float64], axis: Axis) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    count = len(axis)
    pieces = max(1, -(-_FINE // (count - 1)))
    fine = np.arange((count - 1) * pieces + 1)
    lower, share = fine // pieces, (fine % pieces) / pieces
    upper = np.minimum(lower + 1, count - 1)
    places = axis.places
    values = axis.values_at(places[lower] + share * (places[upper] - places[lower]))
    values[::pieces] = axis.values
    between = (1 - share[:, None]) * field[lower] + share[:, None] * field[upper]
    # At the points themselves the neighbour has no say, not even as NaN.
    return np.where(share[:, None] == 0, field[lower], between), values
