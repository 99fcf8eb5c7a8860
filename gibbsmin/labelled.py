"""Arrays with named dimensions, as far as broadcasting by name needs them (see `xarray` for the whole idea).

A bare tuple of names and a NumPy array costs a microsecond where a `DataArray` costs a hundred, which is
what a single-point call of the library would otherwise spend its time on.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import ArrayLike, NDArray

from gibbsmin.errors import ConditionsError


@dataclass(frozen=True)
class Labelled:
    """Values and the names of their dimensions; `coordinates` are what the caller attached to them."""

    dims: tuple[str, ...]
    values: NDArray[Any]
    coordinates: Mapping[str, xr.Variable] = field(default_factory=dict)

    @property
    def sizes(self) -> dict[str, int]:
        return dict(zip(self.dims, self.values.shape, strict=True))

    def spread_over(self, sizes: Mapping[str, int]) -> NDArray[Any]:
        """The values as a read-only view with exactly the dimensions of `sizes`, in that order."""
        order = [self.dims.index(dim) for dim in sizes if dim in self.dims]
        present = iter(self.values.transpose(order).shape)
        shape = [next(present) if dim in self.dims else 1 for dim in sizes]
        return np.broadcast_to(self.values.transpose(order).reshape(shape), tuple(sizes.values()))


def read_number(
    value: float | ArrayLike | xr.DataArray, quantity: str, own_dimension: str | None
) -> Labelled:
    """A caller's number, 1-D array or DataArray as finite doubles with named dimensions.

    Args:
        quantity: what it is, for messages.
        own_dimension: name of the dimension that a plain 1-D array spans; None where only a DataArray
            may hold several values.

    Raises:
        ConditionsError: not numbers, not finite, empty, or dimensions without names.
    """
    coordinates: dict[str, xr.Variable] = {}
    if isinstance(value, xr.DataArray):
        dims = tuple(str(dim) for dim in value.dims)
        coordinates = {str(name): coordinate.variable for name, coordinate in value.coords.items()}
        value = value.values
    else:
        dims = (own_dimension,) if own_dimension is not None and np.ndim(value) == 1 else ()
    try:
        values = np.asarray(value, dtype=np.float64)
    except (TypeError, ValueError) as error:
        raise ConditionsError(quantity, f"expected numbers, found {value!r}") from error
    if values.ndim != len(dims):
        raise ConditionsError(
            quantity,
            f"an array of {values.ndim} dimensions needs names for them; give an xarray.DataArray",
        )
    if values.size == 0:
        raise ConditionsError(quantity, "no values given")
    if not np.isfinite(values).all():
        raise ConditionsError(quantity, "every value must be a finite number")
    return Labelled(dims, values, coordinates)


def joint_sizes(parts: Iterable[Labelled]) -> dict[str, int]:
    """Dimension name -> size over all parts, in order of first appearance.

    Raises:
        ConditionsError: one dimension with two sizes, or with two different sets of coordinate labels.
    """
    sizes: dict[str, int] = {}
    labels: dict[str, NDArray[Any]] = {}
    for part in parts:
        for dim, size in part.sizes.items():
            if sizes.setdefault(dim, size) != size:
                raise ConditionsError(f"dimension {dim!r}", f"has both {sizes[dim]} and {size} points")
            if dim in part.coordinates:
                own = part.coordinates[dim].values
                if not np.array_equal(labels.setdefault(dim, own), own):
                    raise ConditionsError(
                        f"dimension {dim!r}", "its coordinate differs between the arguments"
                    )
    return sizes


def count(sizes: Mapping[str, int]) -> int:
    """Number of points that dimensions of these sizes span."""
    return math.prod(sizes.values())
