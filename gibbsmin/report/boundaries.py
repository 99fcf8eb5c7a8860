"""Boundaries over the map: where a phase begins to form, where a result takes a given value.

A variable is a boundary if its attribute `boundary_along` names an axis of the grid. It has the other
dimensions of the grid, and perhaps one more for several roots, and holds positions along that axis in the
axis' own unit (K, Pa); NaN where there is none. The direction of each crossing, in the variable beside it, keeps the
lower and the upper end of a region apart.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gibbsmin.boundaries.results import ALONG, DIRECTION

FloatArray = NDArray[np.float64]


def is_boundary(array: xr.DataArray) -> bool:
    return ALONG in array.attrs


def boundaries(dataset: xr.Dataset, kept: Mapping[str, tuple[int, ...]]) -> Iterator[dict[str, Any]]:
    """Each boundary as the page draws it, at the kept positions of the axes; one entry for each line of it."""
    grid = [str(dim) for dim in dataset["status"].dims]
    for name, array in dataset.data_vars.items():
        along = array.attrs.get(ALONG)
        if along not in grid:
            continue
        others = [dim for dim in grid if dim != along]
        roots = [str(dim) for dim in array.dims if dim not in others]
        if len(roots) > 1 or not set(others) <= set(map(str, array.dims)):
            continue
        at = {dim: list(kept[dim]) for dim in others}
        values = _over_roots(array, roots, others, at)
        direction = dataset.get(f"{name}{DIRECTION}")
        known = np.zeros(values.shape) if direction is None else _over_roots(direction, roots, others, at)
        for line in _lines(values, known):
            yield {
                "label": str(array.attrs.get("long_name", name)),
                "along": along,
                "over": others,
                "values": [float(value) if np.isfinite(value) else None for value in line.ravel()],
            }


def _over_roots(
    array: xr.DataArray, roots: list[str], others: list[str], at: Mapping[str, list[int]]
) -> FloatArray:
    """Values (root, *others) at the kept positions."""
    values = np.asarray(array.transpose(*roots, *others).isel(at).values, dtype=np.float64)
    return values if roots else values[np.newaxis]


def _lines(values: FloatArray, direction: FloatArray) -> Iterator[FloatArray]:
    """The first crossing of each direction, then the second of each, and so on: what belongs together.

    Crossings are counted for each direction by itself, because where a region reaches the end of the axis its lower
    end is gone and the first crossing is its upper end.
    """
    for sign in np.unique(direction):
        chosen = np.where((direction == sign) & np.isfinite(values), values, np.nan)
        for line in np.sort(chosen, axis=0):  # NaN last
            if np.isfinite(line).any():
                yield line
