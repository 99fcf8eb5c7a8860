"""All zeros of functions along lines: scanned on given positions, then each closed in on, all lines at once.

Between two scanned positions of opposite sign lies one zero at least. Two zeros may also hide between neighbours of
the same sign; where the scanned values have an extreme towards zero, it is sought and shows them if there are any.
What is still missed is a pair of zeros beside an end of a line, or within one step without such an extreme.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
Indices = NDArray[np.intp]
Function = Callable[[FloatArray, Indices], FloatArray]
"""Positions (n,) and the numbers of their lines (n,) to values (n,); NaN where there is none."""

ACCURACY = 1e-10
"""Relative, of a zero's position: well inside the millionth that is promised."""


@dataclass(frozen=True)
class Crossings:
    """Zeros of L lines, in ascending order on each.

    Attributes:
        positions: (L, R), NaN beyond the last zero of a line.
        direction: (L, R) int8, +1 where the function rises through zero, -1 where it falls, 0 beyond the last.
        residual: (L, R), the function's value at the position found.
        first_sign: (L,) sign of the function at the lowest position where it has a value, 0 if there is none.
        unsettled: brackets that could not be closed in on, because the function had no value inside.
    """

    positions: FloatArray
    direction: NDArray[np.int8]
    residual: FloatArray
    first_sign: NDArray[np.int8]
    unsettled: int


def find_crossings(positions: FloatArray, values: FloatArray, function: Function) -> Crossings:
    """Zeros of every line.

    Args:
        positions: scanned, ascending, (M,). values: of the function there, (L, M); NaN where it has none.
    """
    lines = len(values)
    first_sign = _first_sign(values)
    parts = [_brackets(positions, values), *_hidden_brackets(positions, values, function)]
    low = np.concatenate([part.low for part in parts])
    high = np.concatenate([part.high for part in parts])
    line = np.concatenate([part.line for part in parts])
    rising = np.concatenate([part.rising for part in parts])
    found, residual = _zeros(low, high, line, function)
    settled = np.isfinite(found)
    exact_line, exact_at = np.nonzero(values == 0.0)
    line = np.concatenate([line[settled], exact_line])
    found = np.concatenate([found[settled], positions[exact_at]])
    residual = np.concatenate([residual[settled], np.zeros(exact_line.size)])
    rising = np.concatenate([rising[settled], _direction_at(values, exact_line, exact_at)])
    order = np.lexsort((found, line))
    line, found, residual, rising = line[order], found[order], residual[order], rising[order]
    rank = np.arange(line.size) - np.searchsorted(line, line)
    width = int(rank.max(initial=-1)) + 1
    shape = (lines, width)
    result = (np.full(shape, np.nan), np.zeros(shape, dtype=np.int8), np.full(shape, np.nan))
    for target, each in zip(result, (found, rising, residual), strict=True):
        target[line, rank] = each
    return Crossings(*result, first_sign, int((~settled).sum()))


def _first_sign(values: FloatArray) -> NDArray[np.int8]:
    known = np.isfinite(values)
    if not values.shape[1]:
        return np.zeros(len(values), dtype=np.int8)
    first = np.take_along_axis(values, known.argmax(axis=1)[:, None], axis=1)[:, 0]
    return np.where(known.any(axis=1), np.sign(np.nan_to_num(first)), 0.0).astype(np.int8)


class _Brackets(NamedTuple):
    """Pairs of positions of opposite sign, their lines, and whether the function rises from low to high (+1, -1)."""

    low: FloatArray
    high: FloatArray
    line: Indices
    rising: NDArray[np.int8]


def _brackets(positions: FloatArray, values: FloatArray) -> _Brackets:
    with np.errstate(invalid="ignore", over="ignore"):
        line, at = np.nonzero(np.sign(values[:, :-1]) * np.sign(values[:, 1:]) < 0)
    rising = np.where(values[line, at] < 0, 1, -1).astype(np.int8)
    return _Brackets(positions[at], positions[at + 1], line, rising)


def _hidden_brackets(positions: FloatArray, values: FloatArray, function: Function) -> list[_Brackets]:
    """Brackets on both sides of an extreme that lies beyond zero though no scanned value does."""
    left, middle, right = values[:, :-2], values[:, 1:-1], values[:, 2:]
    with np.errstate(invalid="ignore"):
        same = (np.sign(left) == np.sign(middle)) & (np.sign(right) == np.sign(middle)) & (middle != 0)
        extreme = same & (np.abs(middle) <= np.abs(left)) & (np.abs(middle) <= np.abs(right))
        # A constant (activity zero all along) has no extreme worth a search.
        extreme &= (np.abs(middle) < np.abs(left)) | (np.abs(middle) < np.abs(right))
    line, at = np.nonzero(extreme)
    if not line.size:
        return []
    from scipy.optimize import elementwise

    sign = np.sign(middle[line, at])
    number = np.arange(line.size)

    def towards_zero(x: FloatArray, i: Indices) -> FloatArray:
        result: FloatArray = sign[i] * function(x, line[i])
        return result

    a, b, c = positions[at], positions[at + 1], positions[at + 2]
    found = elementwise.find_minimum(
        towards_zero, (a, b, c), args=(number,), tolerances={"xrtol": 1e-6, "frtol": 1e-9}, maxiter=60
    )
    beyond = np.flatnonzero(np.isfinite(found.f_x) & (found.f_x < 0))
    x, falls = found.x[beyond], (-sign[beyond]).astype(np.int8)
    return [_Brackets(a[beyond], x, line[beyond], falls), _Brackets(x, c[beyond], line[beyond], -falls)]


def _zeros(
    low: FloatArray, high: FloatArray, line: Indices, function: Function
) -> tuple[FloatArray, FloatArray]:
    if not low.size:
        return np.zeros(0), np.zeros(0)
    from scipy.optimize import elementwise

    found = elementwise.find_root(
        function,
        (low, high),
        args=(line,),
        tolerances={"xatol": 0.0, "xrtol": ACCURACY, "fatol": 0.0, "frtol": 0.0},
    )
    return np.where(found.success, found.x, np.nan), np.asarray(found.f_x)


def _direction_at(values: FloatArray, line: Indices, at: Indices) -> NDArray[np.int8]:
    """Sign of the step from the value before to the value after an exact zero."""
    before = values[line, np.maximum(at - 1, 0)]
    after = values[line, np.minimum(at + 1, values.shape[1] - 1)]
    step: NDArray[np.int8] = np.sign(np.nan_to_num(after) - np.nan_to_num(before)).astype(np.int8)
    return step
