"""Small symmetric positive definite systems, many at a time.

The matrices are at most about ten wide, so the factorisation is written out over the batch axis: each operation acts
on one entry of all n matrices at once. Arrays hold the batch axis last. For a handful of systems the library routine
is quicker.

The factorisation needs no scaling: each entry of the factor and of a solution is found with the same relative error
whatever the sizes of the diagonal (Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed. (2002), sec. 10.1).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gibbsmin.minimiser.components import Indices

FEW = 4
"""Below this many systems for each entry of a matrix the library's solver costs less than the loop."""

Reals = NDArray[Any]
"""Doubles or single-precision numbers; results are of the same kind."""


@dataclass(frozen=True)
class Factors:
    """Cholesky factors L of n systems; root[i][k], k < i, holds entry (i, k) of all of them."""

    root: list[list[Reals]]
    reciprocals: list[Reals]

    @classmethod
    def of_packed(cls, packed: Reals) -> Factors:
        """Factorise lower triangles given row by row, (r (r + 1) / 2, n)."""
        root: list[list[Reals]] = []
        reciprocals: list[Reals] = []
        entries = iter(packed)
        for above in range(_width(len(packed))):
            row: list[Reals] = []
            for k in range(above):
                value = next(entries)
                for m in range(k):
                    value = value - row[m] * root[k][m]
                row.append(value * reciprocals[k])
            square = next(entries)
            for value in row:
                square = square - value * value
            reciprocals.append(1.0 / np.sqrt(square))
            root.append(row)
        return cls(root, reciprocals)

    def forward(self, right: Reals | Sequence[Reals]) -> list[Reals]:
        """L^-1 right, row by row, for right-hand sides (r, n)."""
        x: list[Reals] = []
        for value, row, reciprocal in zip(right, self.root, self.reciprocals, strict=True):
            for known, entry in zip(x, row, strict=True):
                value = value - entry * known
            x.append(value * reciprocal)
        return x

    def backward(self, right: Sequence[Reals]) -> Reals:
        """L^-T right (r, n)."""
        x = np.stack(right)
        for i in reversed(range(len(x))):
            for k in range(i + 1, len(x)):
                x[i] -= self.root[k][i] * x[k]
            x[i] *= self.reciprocals[i]
        return x

    def solve(self, right: Reals) -> Reals:
        """H^-1 right for right-hand sides (r, n)."""
        return self.backward(self.forward(right))


def product(first: Sequence[Reals], second: Sequence[Reals]) -> Reals:
    """(n,) scalar products of vectors given row by row."""
    total = first[0] * second[0]
    for one, other in zip(first[1:], second[1:], strict=True):
        total += one * other
    return total


def are_few(systems: int, width: int) -> bool:
    """Whether the library's solver is the quicker one for systems (r, r), r = `width`."""
    return systems < FEW * width**2


def solve_packed(packed: Reals, first: Reals, second: Reals) -> tuple[Reals, Reals]:
    """Solve H x = first and H x = second.

    Parameters: packed (r (r + 1) / 2, n), lower triangles row by row; first, second (r, n).
    """
    r, n = first.shape
    if not are_few(n, r):
        factors = Factors.of_packed(packed)
        return factors.solve(first), factors.solve(second)
    scale = 1.0 / np.sqrt(diagonal(packed))
    matrix = np.empty((r, r, n), packed.dtype)
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


def _width(entries: int) -> int:
    """r of a lower triangle with r (r + 1) / 2 entries."""
    return int((2 * entries) ** 0.5)


def diagonal(packed: Reals) -> Reals:
    """(r, n) diagonals of packed lower triangles (r (r + 1) / 2, n)."""
    return packed[[i * (i + 3) // 2 for i in range(_width(len(packed)))]]
