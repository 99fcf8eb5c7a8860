"""The arrays of a solved map."""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from gibbsmin.minimiser import Minimum, Status

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class GridSolution:
    """The fields of :class:`gibbsmin.minimiser.Minimum` with the leading shape of the map.

    amounts (..., S) mol, log_mole_fractions (..., S), element_potentials (..., E), iterations, status, gap [mol] and
    balance_residual (...); NaN in the values of points that are not solved.
    """

    amounts: Floats
    log_mole_fractions: Floats
    element_potentials: Floats
    iterations: NDArray[np.int64]
    status: NDArray[np.int8]
    gap: Floats
    balance_residual: Floats

    @classmethod
    def blank(cls, shape: tuple[int, ...], elements: int, species: int) -> GridSolution:
        """Arrays to be filled."""
        return cls(
            np.full((*shape, species), np.nan),
            np.full((*shape, species), np.nan),
            np.full((*shape, elements), np.nan),
            np.zeros(shape, dtype=np.int64),
            np.full(shape, Status.STEP_LIMIT, dtype=np.int8),
            np.full(shape, np.nan),
            np.full(shape, np.nan),
        )

    def fill(self, at: slice | NDArray[np.intp], minimum: Minimum) -> None:
        """Copy solved points into the flat positions `at`."""
        for each in fields(self):
            getattr(self, each.name)[at] = getattr(minimum, each.name)

    def reshaped(self, shape: tuple[int, ...]) -> GridSolution:
        """The same arrays with another leading shape."""
        return GridSolution(
            *(
                array.reshape(*shape, *array.shape[1:])
                for array in (getattr(self, each.name) for each in fields(self))
            )
        )
