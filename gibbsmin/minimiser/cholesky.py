"""Small symmetric positive definite systems, many at a time.

The matrices are at most about ten wide, so the factorisation is written out over the batch axis: each operation acts
on one entry of all n matrices at once. Arrays hold the batch axis last. For a handful of systems the library routine
is quicker.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np

from gibbsmin.minimiser.components import Floats, Indices

FEW = 12
"""Below this many systems the library's solver costs less than the loop."""


@dataclass(frozen=True)
class Factors:
    """Cholesky factors of n systems scaled by their diagonals; root[i][k] holds entry (i, k) of all of them."""

    scales: list[Floats]
    root: list[list[Floats]]
    reciprocals: list[Floats]

    @classmethod
    def of_packed(cls, packed: Floats) -> Factors:
        """Factorise lower triangles given row by row, (r (r + 1) / 2, n)."""
        scales = [1.0 / np.sqrt(entry) for entry in diagonal(packed)]
        root: list[list[Floats]] = []
        reciprocals: list[Floats] = []
        for i, scale in enumerate(scales):
            row: list[Floats] = []
            square = np.ones(packed.shape[1])
            for k in range(i):
                value = packed[i * (i + 1) // 2 + k] * scale
                value *= scales[k]
                for m in range(k):
                    value -= row[m] * root[k][m]
                value *= reciprocals[k]
                square -= value * value
                row.append(value)
            reciprocals.append(1.0 / np.sqrt(square, out=square))
            root.append(row)
        return cls(scales, root, reciprocals)

    def solve(self, right: Floats) -> Floats:
        """H^-1 right for right-hand sides (r, n)."""
        r = len(self.scales)
        x = np.empty_like(right)
        for i in range(r):
            np.multiply(right[i], self.scales[i], out=x[i])
            for k in range(i):
                x[i] -= self.root[i][k] * x[k]
            x[i] *= self.reciprocals[i]
        for i in reversed(range(r)):
            for k in range(i + 1, r):
                x[i] -= self.root[k][i] * x[k]
            x[i] *= self.reciprocals[i]
        for i in range(r):
            x[i] *= self.scales[i]
        return x


def solve_packed(packed: Floats, first: Floats, second: Floats) -> tuple[Floats, Floats]:
    """Solve H x = first and H x = second.

    Parameters: packed (r (r + 1) / 2, n), lower triangles row by row; first, second (r, n).
    """
    r, n = first.shape
    if n >= FEW:
        factors = Factors.of_packed(packed)
        return factors.solve(first), factors.solve(second)
    scale = 1.0 / np.sqrt(diagonal(packed))
    matrix = np.empty((r, r, n))
    rows, columns = _lower_triangle(r)
    matrix[rows, columns] = packed
    matrix[columns, rows] = packed
    matrix *= scale[:, None] * scale
    right = np.stack([first, second], axis=1) * scale[:, None]
    solution = np.linalg.solve(matrix.transpose(2, 0, 1), right.transpose(2, 0, 1)).transpose(1, 2, 0)
    solution = solution * scale[:, None]
    return solution[:, 0], solution[:, 1]


@cache
def _lower_triangle(size: int) -> tuple[Indices, Indices]:
    return np.tril_indices(size)


def diagonal(packed: Floats) -> Floats:
    """(r, n) diagonals of packed lower triangles (r (r + 1) / 2, n)."""
    r = int((2 * len(packed)) ** 0.5)
    return packed[[i * (i + 3) // 2 for i in range(r)]]
