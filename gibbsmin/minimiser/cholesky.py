"""Small symmetric positive definite systems, many at a time.

The matrices are at most about ten wide, so the factorisation is written out over the batch axis: each operation acts
on one entry of all matrices at once. For a handful of systems the library routine is quicker.
"""

from __future__ import annotations

import numpy as np

from gibbsmin.minimiser.components import Floats

FEW = 12
"""Below this many systems the library's solver costs less than the loop."""


def solve_packed(packed: Floats, first: Floats, second: Floats) -> tuple[Floats, Floats]:
    """Solve H x = first and H x = second.

    Parameters: packed (n, r (r + 1) / 2), lower triangles row by row; first, second (n, r).
    The systems are scaled by their diagonals before factorisation.
    """
    n, r = first.shape
    diagonal = packed[:, [i * (i + 3) // 2 for i in range(r)]]
    scale = 1.0 / np.sqrt(diagonal)
    if n < FEW:
        return _solve_few(packed, scale, first, second)
    root: list[list[Floats]] = []
    scales = list(scale.T)
    for i in range(r):
        row: list[Floats] = []
        for k in range(i + 1):
            value = packed[:, i * (i + 1) // 2 + k] * scales[i]
            value *= scales[k]
            for m in range(k):
                value -= row[m] * (root[k][m] if k < i else row[m])
            row.append(np.sqrt(value) if k == i else value / root[k][k])
        root.append(row)
    return _back_substituted(root, scales, first), _back_substituted(root, scales, second)


def _back_substituted(root: list[list[Floats]], scales: list[Floats], right: Floats) -> Floats:
    r = len(root)
    x: list[Floats] = []
    for i in range(r):
        value = right[:, i] * scales[i]
        for k in range(i):
            value -= root[i][k] * x[k]
        value /= root[i][i]
        x.append(value)
    for i in reversed(range(r)):
        for k in range(i + 1, r):
            x[i] -= root[k][i] * x[k]
        x[i] /= root[i][i]
    for i in range(r):
        x[i] *= scales[i]
    return np.stack(x, axis=1)


def _solve_few(packed: Floats, scale: Floats, first: Floats, second: Floats) -> tuple[Floats, Floats]:
    n, r = first.shape
    matrix = np.empty((n, r, r))
    rows, columns = np.tril_indices(r)
    matrix[:, rows, columns] = packed
    matrix[:, columns, rows] = packed
    matrix *= scale[:, :, None] * scale[:, None, :]
    right = np.stack([first, second], axis=2) * scale[:, :, None]
    solution = np.linalg.solve(matrix, right) * scale[:, :, None]
    return solution[:, :, 0], solution[:, :, 1]
