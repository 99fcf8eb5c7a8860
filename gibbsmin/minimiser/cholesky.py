"""Small symmetric positive definite systems, many at a time.

The matrices are at most about ten wide, so the factorisation is written out over the batch axis: each operation acts
on one entry of all matrices at once. For a handful of systems the library routine is quicker.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from gibbsmin.minimiser.components import Floats

FEW = 12
"""Below this many systems the library's solver costs less than the loop."""


@dataclass(frozen=True)
class Factors:
    """Cholesky factors of n systems scaled by their diagonals; root[i][k] holds entry (i, k) of all of them."""

    diagonal: Floats  # (n, r)
    scales: list[Floats]
    root: list[list[Floats]]
    reciprocals: list[Floats]

    @classmethod
    def of_packed(cls, packed: Floats, r: int) -> Factors:
        """Factorise lower triangles given row by row, (n, r (r + 1) / 2)."""
        diagonal = _diagonal(packed, r)
        scales = [1.0 / np.sqrt(diagonal[:, i]) for i in range(r)]
        root: list[list[Floats]] = []
        reciprocals: list[Floats] = []
        for i in range(r):
            row: list[Floats] = []
            for k in range(i):
                value = packed[:, i * (i + 1) // 2 + k] * scales[i]
                value *= scales[k]
                for m in range(k):
                    value -= row[m] * root[k][m]
                value *= reciprocals[k]
                row.append(value)
            square = np.ones(len(packed))
            for entry in row:
                square -= entry * entry
            last = np.sqrt(square, out=square)
            reciprocals.append(1.0 / last)
            root.append([*row, last])
        return cls(diagonal, scales, root, reciprocals)

    def solve(self, right: Floats) -> Floats:
        """H^-1 right for right-hand sides (n, r)."""
        r = len(self.root)
        x: list[Floats] = []
        for i in range(r):
            value = right[:, i] * self.scales[i]
            for k in range(i):
                value -= self.root[i][k] * x[k]
            value *= self.reciprocals[i]
            x.append(value)
        out = np.empty_like(right)
        for i in reversed(range(r)):
            for k in range(i + 1, r):
                x[i] -= self.root[k][i] * x[k]
            x[i] *= self.reciprocals[i]
            np.multiply(x[i], self.scales[i], out=out[:, i])
        return out


def solve_packed(packed: Floats, first: Floats, second: Floats) -> tuple[Floats, Floats]:
    """Solve H x = first and H x = second.

    Parameters: packed (n, r (r + 1) / 2), lower triangles row by row; first, second (n, r).
    """
    n, r = first.shape
    if n >= FEW:
        factors = Factors.of_packed(packed, r)
        return factors.solve(first), factors.solve(second)
    scale = 1.0 / np.sqrt(_diagonal(packed, r))
    matrix = np.empty((n, r, r))
    rows, columns = np.tril_indices(r)
    matrix[:, rows, columns] = packed
    matrix[:, columns, rows] = packed
    matrix *= scale[:, :, None] * scale[:, None, :]
    right = np.stack([first, second], axis=2) * scale[:, :, None]
    solution = np.linalg.solve(matrix, right) * scale[:, :, None]
    return solution[:, :, 0], solution[:, :, 1]


def _diagonal(packed: Floats, r: int) -> Floats:
    return packed[:, [i * (i + 3) // 2 for i in range(r)]]
