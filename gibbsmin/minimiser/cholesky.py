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
    factors = Factors.of_packed(packed)
    return factors.solve(first), factors.solve(second)


def solve_few(packed: Reals, first: Reals, second: Reals) -> tuple[Reals, Reals]:
    """The same by the library, with the systems first: packed (n, r (r + 1) / 2); first, second (n, r)."""
    r = first.shape[1]
    scale = 1.0 / np.sqrt(packed[:, diagonal_entries(r)])
    matrix = packed[:, _square_entries(r)]
    matrix *= scale[:, :, None]
    matrix *= scale[:, None, :]
    right = np.empty((*first.shape, 2), first.dtype)
    right[:, :, 0] = first
    right[:, :, 1] = second
    right *= scale[:, :, None]
    solution = np.linalg.solve(matrix, right)
    solution *= scale[:, :, None]
    return solution[:, :, 0], solution[:, :, 1]


@cache
def diagonal_entries(width: int) -> Indices:
    """(r,) places of the diagonal in a packed lower triangle."""
    return np.array([i * (i + 3) // 2 for i in range(width)], dtype=np.intp)


@cache
def _square_entries(width: int) -> Indices:
    """(r, r) places of all entries of a symmetric matrix in its packed lower triangle."""
    row, column = np.indices((width, width))
    low, high = np.minimum(row, column), np.maximum(row, column)
    return np.asarray(high * (high + 1) // 2 + low)


def _width(entries: int) -> int:
    """r of a lower triangle with r (r + 1) / 2 entries."""
    return int((2 * entries) ** 0.5)


def diagonal(packed: Reals) -> Reals:
    """(r, n) diagonals of packed lower triangles (r (r + 1) / 2, n)."""
    return packed[diagonal_entries(_width(len(packed)))]
