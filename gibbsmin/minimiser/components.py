"""Component bases of a formula matrix, with exact arithmetic where exactness decides.

Choose r linearly independent species (the components, columns B of A, r = rank A). Every species is then
written in them, C = B^-1 A, and so are the element amounts, m = B^-1 b. With a pure-H2O feed and components
H2O and H2 the second balance reads exactly 0 = n_H2 - 2 n_O2 + ..., so traces keep full relative accuracy,
where the element balances would drown them in the rounding of the major species.

C and m must therefore be free of cancellation error: B is inverted as an exact integer adjugate over an exact
determinant (composition numbers are integers or decimals; each column is scaled to integers), and m is the
correctly rounded image of the given doubles b.

Source: component (basis) form of the balances: Smith & Missen, Chemical Reaction Equilibrium Analysis (1982), ch. 2.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction
from functools import cached_property, lru_cache
from math import gcd, inf, lcm, log
from operator import mul
from typing import Any, Generic, TypeVar

import numpy as np
from numpy.typing import NDArray

from gibbsmin.errors import ProblemError
from gibbsmin.minimiser.accurate_sums import dot

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
Indices = NDArray[np.intp]
Amounts = NDArray[Any]
"""Element amounts: doubles, or exact Fractions in an object array."""

RANK_PRIME = 2**31 - 1
"""Ranks are taken over the integers modulo this prime: exact up to a chance of about 1e-9, no tolerance needed."""

EXACT_IN_DOUBLE = 2.0**52
"""Integers below this survive a round trip through a double with room for one addition."""

EXACT_IN_INT64 = 2.0**62
"""Bound on products formed in 64-bit integers."""

EXCHANGE = 10.0
"""A species j replaces component i if C_ij^2 x_j exceeds this multiple of x_i."""

LOG_EXCHANGE = log(EXCHANGE)

CANCELLATION = 1e-2
"""A sum smaller than this part of its terms is recomputed with more digits."""

LOST = 1e-20
"""Below this part even these are few: it is then summed exactly, and a zero found to be one."""


FEW = 6
"""So few points are mapped exactly in less time than the arrays take."""

FEASIBLE_KEPT = 1024
COMPONENTS_KEPT = 4096

Key = TypeVar("Key")
Value = TypeVar("Value")


def quotient(numerator: int, denominator: int) -> float:
    """The double nearest to a ratio; infinite beyond the largest."""
    try:
        return numerator / denominator
    except OverflowError:
        return inf if (numerator < 0) == (denominator < 0) else -inf


def _as_integers(values: Sequence[Any]) -> tuple[list[int], int]:
    """Finite numbers as integers over a common denominator."""
    ratios = [value.as_integer_ratio() for value in values]
    common = lcm(*(denominator for _, denominator in ratios))
    return [numerator * (common // denominator) for numerator, denominator in ratios], common


def exact(value: Any) -> Fraction:
    return value if isinstance(value, Fraction) else Fraction(float(value))


class Components:
    """One choice of components: columns (r,), C (r, S) and the map b -> m.

    Attributes
    ----------
    columns : (r,) int, ascending species indices of the components.
    C : (r, S) float, formula matrix in components; exact zeros are exact.
    """

    def __init__(self, system: FormulaSystem, columns: tuple[int, ...]) -> None:
        self.system = system
        self.key = columns
        self.columns = np.array(columns, dtype=np.intp)
        square = system.integers[:, self.columns]
        adjugate, determinant = _adjugate(square)
        self._adjugate = adjugate
        self._determinant = determinant
        self.trace_systems: dict[tuple[tuple[int, ...], tuple[int, ...]], FormulaSystem] = {}
        product = _exact_product(adjugate, system.integers)
        self.integer_C = product
        scale = system.scale
        self.C: Floats = (
            product.astype(np.float64) / float(determinant) * (scale[self.columns][:, None] / scale[None, :])
        )

    @cached_property
    def sums(self) -> Floats:
        """(S, 1 + r + r (r + 1) / 2): columns 1, C_i, C_i C_k (i >= k); one product with y gives all sums of a step."""
        C = self.C
        lower = np.tril_indices(len(self.columns))
        return np.ascontiguousarray(
            np.concatenate([np.ones((1, C.shape[1])), C, C[lower[0]] * C[lower[1]]]).T
        )

    @cached_property
    def steepness(self) -> Floats:
        """(S,) 1 / length of the edge of the linear program along which a species comes in at the cost of components."""
        return np.asarray(1.0 / np.sqrt(1.0 + (self.C**2).sum(axis=0)))

    @cached_property
    def largest(self) -> Floats:
        """(r,) largest |C_ij| of each row."""
        return np.asarray(np.abs(self.C).max(axis=1))

    @cached_property
    def log_squares(self) -> Floats:
        """(r, S) ln C_ij^2."""
        with np.errstate(divide="ignore"):
            return np.asarray(2.0 * np.log(np.abs(self.C)))

    def offsets(self, c: Floats) -> Floats:
        """Delta_j = c_j - sum_i C_ij c_i of potentials c (n, S), exactly zero for the components."""
        out: Floats = c - c[:, self.columns] @ self.C
        out[:, self.columns] = 0.0
        return out

    def amounts(self, element_amounts: Amounts) -> Floats:
        """m = B^-1 b; sums that cancel are taken exactly, so that a zero is a zero.

        Parameters: element_amounts (n, r) mol, rows of the system's independent elements; doubles or exact fractions.
        Returns: (n, r) mol of each component.
        """
        if len(element_amounts) > 1 and (element_amounts == element_amounts[0]).all():
            return np.repeat(self.amounts(element_amounts[:1]), len(element_amounts), axis=0)
        if len(element_amounts) <= FEW and np.isfinite(element_amounts.astype(np.float64)).all():
            every = range(len(self.columns))
            return np.array([self._rounded(b, every) for b in element_amounts.tolist()]).reshape(
                len(element_amounts), -1
            )
        weights = self._float_adjugate
        floats = element_amounts.astype(np.float64)
        m = floats @ weights.T
        size = np.abs(floats) @ np.abs(weights).T
        doubtful = (np.abs(m) < CANCELLATION * size) | ((size > 0.0) & (not self._exact_weights))
        m *= self._factors
        if doubtful.any():
            self._mend(element_amounts, m, doubtful)
        return m

    def rough_amounts(self, element_amounts: Amounts) -> Floats:
        """m = B^-1 b (r, n) of element amounts (r, n) without that care: sums that cancel are off by their rounding."""
        to_m = self._float_adjugate * self._factors[:, None]
        return np.asarray(to_m @ element_amounts.astype(np.float64))

    @cached_property
    def _factors(self) -> Floats:
        """(r,) scale over determinant, which turn adj(B) b into m."""
        return np.asarray(self.system.scale[self.columns] / float(self._determinant))

    def _mend(self, b: Amounts, m: Floats, doubtful: NDArray[np.bool_]) -> None:
        """Replace the doubtful ones of amounts m (n, r) by accurate sums."""
        points, positions = np.nonzero(doubtful)
        if b.dtype != object and self._exact_weights:
            weights = self._float_adjugate[positions]
            terms = b[points]
            with np.errstate(over="ignore", invalid="ignore"):  # amounts near the largest double
                accurate = dot(weights, terms)
                enough = np.abs(accurate) >= LOST * (np.abs(weights) * np.abs(terms)).sum(axis=1)
            m[points, positions] = accurate * self._factors[positions]
            lost = ~(enough & np.isfinite(accurate))
            points, positions = points[lost], positions[lost]
        for point, component in zip(points, positions.tolist(), strict=True):
            (m[point, component],) = self._rounded(b[point].tolist(), [component])

    def _rounded(self, b: Sequence[Any], positions: Iterable[int]) -> list[float]:
        """Amounts m_i of some components for the finite element amounts b of one point, rounded once."""
        numbers, common = _as_integers(b)
        rows, scale = self._exact_rows
        below = common * int(self._determinant)
        return [quotient(sum(map(mul, rows[i], numbers)) * scale[i], below) for i in positions]

    @cached_property
    def _exact_rows(self) -> tuple[list[list[int]], list[int]]:
        """Rows of the adjugate and the scales of the components, as integers of any size."""
        return self._adjugate.tolist(), [int(factor) for factor in self.system.scale[self.columns]]

    def scaled_amounts(self, element_amounts: Amounts, positions: Indices) -> list[Fraction]:
        """adj(B) b of one point, exactly: the amounts of some components times determinant over scale."""
        numbers, common = _as_integers(element_amounts.tolist())
        rows, _ = self._exact_rows
        return [Fraction(sum(map(mul, rows[i], numbers)), common) for i in positions.tolist()]

    def exact_amounts(self, element_amounts: Amounts) -> list[Fraction]:
        """m = B^-1 b of one point, exactly."""
        numbers, common = _as_integers(element_amounts.tolist())
        below = common * int(self._determinant)
        return [
            Fraction(sum(map(mul, row, numbers)) * factor, below)
            for row, factor in zip(*self._exact_rows, strict=True)
        ]

    def element_amounts(self, m: list[Fraction]) -> list[Fraction]:
        """b = B m of the independent rows, exactly."""
        scale = self.system.scale[self.columns]
        per_scale = [amount / int(factor) for amount, factor in zip(m, scale, strict=True)]
        return [
            sum((int(entry) * amount for entry, amount in zip(row, per_scale, strict=True)), Fraction(0))
            for row in self.system.integers[:, self.columns]
        ]

    def exact_ratios(self, element_amounts: Amounts, positions: Indices, species: int) -> list[Fraction]:
        """m_i / C_ij of one species j for the components at some positions i, up to a common factor."""
        numbers, _ = _as_integers(element_amounts.tolist())
        rows, _ = self._exact_rows
        return [
            Fraction(sum(map(mul, rows[i], numbers)), int(self.integer_C[i, species]))
            for i in positions.tolist()
        ]

    @cached_property
    def _float_adjugate(self) -> Floats:
        return self._adjugate.astype(np.float64)

    @cached_property
    def _exact_weights(self) -> bool:
        return bool(np.abs(self._float_adjugate).max(initial=0.0) < EXACT_IN_DOUBLE)

    def adapted(self, log_x: Floats) -> Components:
        """Components as abundant as a composition ln x (S,) allows, by exchanges from the present ones.

        Each exchange enlarges the product of the abundances, so there is an end to them.
        """
        components = self
        while True:
            gain = components.log_squares + (log_x[None, :] - log_x[components.columns][:, None])
            position, species = np.unravel_index(np.argmax(gain), gain.shape)
            if not gain[position, species] > LOG_EXCHANGE:  # nor where it is not a number
                return components
            components = components.exchange(int(position), int(species))

    def exchange(self, leaving: int, entering: int) -> Components:
        """The choice of components in which position `leaving` gives way to species `entering`."""
        columns = list(self.key)
        columns[leaving] = entering
        return self.system.components(columns)


class BoundedCache(dict[Key, Value], Generic[Key, Value]):
    """A dictionary that is emptied when full: a long run must not keep every feed it has seen."""

    def __init__(self, capacity: int) -> None:
        super().__init__()
        self.capacity = capacity

    def __setitem__(self, key: Key, value: Value) -> None:
        if len(self) >= self.capacity:
            self.clear()
        super().__setitem__(key, value)


class FormulaSystem:
    """A formula matrix prepared for exact component arithmetic.

    Attributes
    ----------
    matrix : (E, S) float, as given.
    integers : (r, S) int, independent rows, each column j multiplied by scale[j].
    rows : (r,) int, indices of the independent element rows, the first ones in row_order.
    """

    def __init__(self, integers: Integers, scale: Floats, row_order: Sequence[int] | None = None) -> None:
        rows = _independent_rows(integers, row_order)
        self.rows = np.array(rows, dtype=np.intp)
        self.all_integers = integers
        self.integers = integers[self.rows]
        self.scale = scale
        self.rank = len(rows)
        self._restricted = BoundedCache[tuple[tuple[int, ...], tuple[int, ...] | None], FormulaSystem](
            FEASIBLE_KEPT
        )
        self.feasible = BoundedCache[tuple[Any, ...], Components | None](FEASIBLE_KEPT)
        self._components = BoundedCache[tuple[int, ...], Components](COMPONENTS_KEPT)

    @property
    def n_species(self) -> int:
        return int(self.integers.shape[1])

    def components(self, columns: Sequence[int] | NDArray[np.intp]) -> Components:
        key = tuple(sorted(int(column) for column in columns))
        found = self._components.get(key)
        if found is None:
            found = self._components[key] = Components(self, key)
        return found

    def restricted(self, columns: tuple[int, ...], row_order: tuple[int, ...] | None = None) -> FormulaSystem:
        """The system of a subset of the species; independent rows are sought in the given order."""
        found = self._restricted.get((columns, row_order))
        if found is None:
            index = list(columns)
            found = FormulaSystem(self.all_integers[:, index], self.scale[index], row_order)
            self._restricted[columns, row_order] = found
        return found

    def independent_columns(self, order: Indices) -> list[int]:
        """The first independent species in the given order: r of them."""
        return _independent_rows(self.integers.T, order.tolist())

    @cached_property
    def dependent_rows(self) -> list[tuple[int, list[Fraction]]]:
        """Each redundant element row with its weights in the independent ones."""
        out = []
        known = set(self.rows.tolist())
        basis = _independent_rows(self.integers.T)
        square = self.integers[:, basis]
        adjugate, determinant = _adjugate(square)
        for row in range(self.all_integers.shape[0]):
            if row in known:
                continue
            weights = _exact_product(self.all_integers[row : row + 1, basis], adjugate)[0]
            out.append((row, [Fraction(int(weight), int(determinant)) for weight in weights]))
        return out


@lru_cache(maxsize=256)
def _system_of_bytes(data: bytes, shape: tuple[int, int]) -> FormulaSystem:
    matrix = np.frombuffer(data, dtype=np.float64).reshape(shape)
    integers, scale = _integer_columns(matrix)
    return FormulaSystem(integers, scale)


def formula_system(matrix: Floats) -> FormulaSystem:
    """The prepared system of a formula matrix (E, S); cached by value."""
    contiguous = np.ascontiguousarray(matrix, dtype=np.float64)
    return _system_of_bytes(contiguous.tobytes(), contiguous.shape)


def _integer_columns(matrix: Floats) -> tuple[Integers, Floats]:
    """Scale each column to integers, reading a composition number as the decimal it prints as."""
    rounded = np.rint(matrix)
    scale = np.ones(matrix.shape[1])
    if np.array_equal(rounded, matrix):
        return rounded.astype(np.int64), scale
    columns: list[list[int]] = []
    for j in range(matrix.shape[1]):
        entries = [Fraction(repr(float(value))) for value in matrix[:, j]]
        factor = lcm(*(entry.denominator for entry in entries))
        scale[j] = float(factor)
        columns.append([int(entry * factor) for entry in entries])
    largest = max((abs(value) for column in columns for value in column), default=0)
    dtype = np.int64 if largest < 2**62 else object
    return np.array(columns, dtype=dtype).T, scale


def _independent_rows(integers: Integers, order: Sequence[int] | None = None) -> list[int]:
    """Indices of a maximal set of independent rows, the first ones in the order taken first."""
    work = np.array(integers % RANK_PRIME, dtype=np.int64)
    kept: list[int] = []
    pivots: list[tuple[int, NDArray[np.int64]]] = []
    for row in range(work.shape[0]) if order is None else order:
        vector = work[row]
        for column, pivot in pivots:
            if vector[column]:
                vector = (vector - vector[column] * pivot) % RANK_PRIME
        nonzero = np.flatnonzero(vector)
        if nonzero.size:
            column = int(nonzero[0])
            inverse = pow(int(vector[column]), -1, RANK_PRIME)
            pivots.append((column, vector * inverse % RANK_PRIME))
            kept.append(row)
            if len(kept) == work.shape[1]:
                break
    return sorted(kept)


def _adjugate(square: Integers) -> tuple[Integers, int]:
    """Exact adjugate and determinant of a regular integer matrix, common factor divided out."""
    size = square.shape[0]
    if size == 0:
        return np.zeros((0, 0), dtype=np.int64), 1
    if square.dtype != object:
        floats = square.astype(np.float64)
        determinant = np.rint(np.linalg.det(floats))
        if 0.5 < abs(determinant) < EXACT_IN_DOUBLE:
            adjugate = np.rint(np.linalg.inv(floats) * determinant)
            bound = np.abs(adjugate).max() * np.abs(floats).max() * size
            if bound < EXACT_IN_INT64:
                candidate = adjugate.astype(np.int64)
                if np.array_equal(candidate @ square, int(determinant) * np.eye(size, dtype=np.int64)):
                    return _reduced(candidate, int(determinant))
    return _adjugate_in_fractions(square)


def _reduced(adjugate: Integers, determinant: int) -> tuple[Integers, int]:
    common = gcd(int(np.gcd.reduce(adjugate, axis=None)), determinant)
    if determinant < 0:
        common = -common
    return adjugate // common, determinant // common


def _adjugate_in_fractions(square: Integers) -> tuple[Integers, int]:
    size = square.shape[0]
    work = [
        [Fraction(int(value)) for value in square[i]] + [Fraction(int(i == k)) for k in range(size)]
        for i in range(size)
    ]
    for column in range(size):
        pivot = next((row for row in range(column, size) if work[row][column]), None)
        if pivot is None:
            raise ProblemError("the chosen components are linearly dependent")
        work[column], work[pivot] = work[pivot], work[column]
        work[column] = [value / work[column][column] for value in work[column]]
        for row in range(size):
            if row != column and work[row][column]:
                factor = work[row][column]
                work[row] = [a - factor * b for a, b in zip(work[row], work[column], strict=True)]
    inverse = [row[size:] for row in work]
    denominator = lcm(*(value.denominator for row in inverse for value in row))
    integers = [[int(value * denominator) for value in row] for row in inverse]
    largest = max(abs(value) for row in integers for value in row)
    return np.array(integers, dtype=np.int64 if largest < 2**62 else object), denominator


def _exact_product(left: Integers, right: Integers) -> Integers:
    if left.dtype != object and right.dtype != object and left.size and right.size:
        bound = float(np.abs(left).max()) * float(np.abs(right).max()) * left.shape[1]
        if bound < EXACT_IN_INT64:
            return left @ right
    product: Integers = left.astype(object) @ right.astype(object)
    return product
