"""Temperature, pressure and feed of each point of a data set that an independent program solves again."""

from __future__ import annotations

from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
Index = tuple[int, ...]


class ComparedPoints:
    """Points by their position along the dimensions of a data set.

    Attributes:
        feed_names: the J species of the feed.
        feed_atoms: atoms of each element in them, (J, E).
    """

    def __init__(self, dataset: xr.Dataset, dims: tuple[str, ...]) -> None:
        like = dataset["status"]
        self._dims = dims
        # Views over all points.
        self._temperature = dataset["temperature"].broadcast_like(like).transpose(*dims).values
        self._pressure = dataset["pressure"].broadcast_like(like).transpose(*dims).values
        self._feed = dataset["feed_amount"].transpose(..., "feed_species")
        self._axes = {dim: dataset[dim].values if dim in dataset.coords else None for dim in dims}
        self.feed_names = [str(name) for name in dataset["feed_species"].values]
        self.feed_atoms: FloatArray = dataset["feed_atoms"].values

    @property
    def temperatures(self) -> tuple[float, float]:
        """The lowest and the highest [K]."""
        return float(self._temperature.min()), float(self._temperature.max())

    def conditions(self, index: Index) -> tuple[float, float]:
        """Temperature [K] and pressure [Pa]."""
        return float(self._temperature[index]), float(self._pressure[index])

    def feed_index(self, index: Index) -> Index:
        """Position of a point's feed along the dimensions that the feed has."""
        where = dict(zip(self._dims, index, strict=True))
        return tuple(where[str(dim)] for dim in self._feed.dims[:-1])

    def feed(self, index: Index) -> FloatArray:
        """Amounts fed, (J,)."""
        amounts: FloatArray = self._feed.values[self.feed_index(index)]
        return amounts

    def place(self, index: Index) -> tuple[tuple[str, float], ...]:
        """Coordinate name -> value there (SI units)."""
        place: dict[str, Any] = {}
        for (dim, values), position in zip(self._axes.items(), index, strict=True):
            value = position if values is None else values[position]
            place[dim] = float(value) if np.issubdtype(np.asarray(value).dtype, np.number) else str(value)
        T, p = self.conditions(index)
        return tuple({**place, "temperature": T, "pressure": p}.items())
