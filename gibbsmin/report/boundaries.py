"""Boundaries over the map: where a phase begins to form, where a result takes a given value.

A variable is a boundary if its attribute `boundary_along` names an axis of the grid. It has the other
dimensions of the grid, and perhaps one more for several roots, and holds positions along that axis in the
axis' own unit (K, Pa); NaN where there is none.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
import xarray as xr

ATTRIBUTE = "boundary_along"


def is_boundary(array: xr.DataArray) -> bool:
    return ATTRIBUTE in array.attrs


def boundaries(dataset: xr.Dataset, kept: dict[str, tuple[int, ...]]) -> Iterator[dict[str, Any]]:
    """Each boundary as the page draws it, at the kept positions of the axes; one entry for each root."""
    grid = [str(dim) for dim in dataset["status"].dims]
    for name, array in dataset.data_vars.items():
        along = array.attrs.get(ATTRIBUTE)
        if along not in grid:
            continue
        others = [dim for dim in grid if dim != along]
        roots = [str(dim) for dim in array.dims if dim not in others]
        if len(roots) > 1 or not set(others) <= set(map(str, array.dims)):
            continue
        thinned = array.transpose(*roots, *others).isel({dim: list(kept[dim]) for dim in others})
        values = np.asarray(thinned.values, dtype=np.float64)
        for branch in values if roots else values[np.newaxis]:
            if np.isfinite(branch).any():
                yield {
                    "label": str(array.attrs.get("long_name", name)),
                    "along": along,
                    "over": others,
                    "values": [float(value) if np.isfinite(value) else None for value in branch.ravel()],
                }
