"""The arrays of a solved map."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gibbsmin.minimiser import Minimum, Status

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class GridSolution:
    """Results of many points; the fields are those of :class:`gibbsmin.minimiser.Minimum` with the shape of the map.

    amounts (..., S) mol, element_potentials (..., E), iterations, status, gap [mol] and balance_residual (...); NaN in
    the values of points that are not solved.
    """

    amounts: Floats
    element_potentials: Floats
    iterations: NDArray[np.int32]
    status: NDArray[np.int8]
    gap: Floats
    balance_residual: Floats

    @classmethod
    def blank(cls, shape: tuple[int, ...], elements: int, species: int) -> GridSolution:
        """Arrays to be filled; until then every point counts as not solved.

        Memory holds the amounts species by species, as tasks write and maps read them.
        """
        return cls(
            np.moveaxis(np.empty((species, *shape)), 0, -1),
            np.moveaxis(np.empty((elements, *shape)), 0, -1),
            np.zeros(shape, dtype=np.int32),
            np.full(shape, Status.STEP_LIMIT, dtype=np.int8),
            np.empty(shape),
            np.empty(shape),
        )

    def fill(self, at: Any, minimum: Minimum) -> None:
        """Copy solved points to the places `at` of the leading shape."""
        for each in fields(self):
            getattr(self, each.name)[at] = getattr(minimum, each.name)

    def part(self, at: Any) -> GridSolution:
        """A view of (or, for index arrays, a copy of) some places of the leading shape."""
        return GridSolution(*(getattr(self, each.name)[at] for each in fields(self)))

    def reshaped(self, shape: tuple[int, ...]) -> GridSolution:
        """The same arrays with another leading shape."""
        arrays = (getattr(self, each.name) for each in fields(self))
        lead = self.status.ndim
        return GridSolution(*(array.reshape(*shape, *array.shape[lead:]) for array in arrays))
