"""Linear algebra in rational numbers, for the few and small matrices of stoichiometry.

A rank decided by a tolerance can be wrong; with fractions it cannot.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import gcd, lcm

Row = list[Fraction]


def as_fraction(number: float | int | Fraction) -> Fraction:
    """A composition number or coefficient as the decimal it prints as: 0.947 is 947/1000."""
    return number if isinstance(number, Fraction) else Fraction(repr(number))


def reduced(rows: Sequence[Sequence[Fraction]]) -> tuple[list[Row], list[int]]:
    """Reduced row echelon form (rows that are zero left out) and its pivot columns."""
    work = [list(row) for row in rows]
    pivots: list[int] = []
    done = 0
    for column in range(len(work[0]) if work else 0):
        pivot = next((r for r in range(done, len(work)) if work[r][column]), None)
        if pivot is None:
            continue
        work[done], work[pivot] = work[pivot], work[done]
        head = work[done][column]
        work[done] = [value / head for value in work[done]]
        for r in range(len(work)):
            factor = work[r][column]
            if r != done and factor:
                work[r] = [a - factor * b for a, b in zip(work[r], work[done], strict=True)]
        pivots.append(column)
        done += 1
    return work[:done], pivots


def rank(rows: Sequence[Sequence[Fraction]]) -> int:
    return len(reduced(rows)[1])


class Span:
    """The span of vectors added one by one, as an echelon form with its pivots."""

    def __init__(self, vectors: Sequence[Sequence[Fraction]] = ()) -> None:
        self._by_pivot: dict[int, dict[int, Fraction]] = {}
        for vector in vectors:
            self.add(vector)

    def __len__(self) -> int:
        """Its dimension."""
        return len(self._by_pivot)

    def add(self, vector: Sequence[Fraction]) -> bool:
        """Whether the vector was independent of those before it; it then belongs to the span."""
        rest = {column: value for column, value in enumerate(vector) if value}
        while rest:
            pivot = min(rest)
            row = self._by_pivot.get(pivot)
            if row is None:
                head = rest[pivot]
                self._by_pivot[pivot] = {column: value / head for column, value in rest.items()}
                return True
            factor = rest[pivot]
            for column, value in row.items():
                changed = rest.get(column, Fraction(0)) - factor * value
                if changed:
                    rest[column] = changed
                else:
                    rest.pop(column, None)
        return False


def null_space(rows: Sequence[Sequence[Fraction]], columns: int) -> list[Row]:
    """A basis of the vectors x with M x = 0, one for each column without a pivot, which has a 1 there."""
    echelon, pivots = reduced(rows)
    basis: list[Row] = []
    for free in (column for column in range(columns) if column not in pivots):
        vector = [Fraction(0)] * columns
        vector[free] = Fraction(1)
        for row, pivot in zip(echelon, pivots, strict=True):
            vector[pivot] = -row[free]
        basis.append(vector)
    return basis


def weights_in(rows: Sequence[Sequence[Fraction]], target: Sequence[Fraction]) -> Row | None:
    """w with w M = target, or None where the target is no combination of the (independent) rows."""
    count = len(rows)
    if not count:
        return None if any(target) else []
    columns = len(target)
    system = [[*(rows[r][c] for r in range(count)), target[c]] for c in range(columns)]
    echelon, pivots = reduced(system)
    if count in pivots:
        return None
    weights = [Fraction(0)] * count
    for row, pivot in zip(echelon, pivots, strict=True):
        weights[pivot] = row[count]
    return weights


def whole(vector: Sequence[Fraction]) -> Row:
    """The vector times the positive factor that makes it whole numbers without a common divisor."""
    factor = lcm(*(value.denominator for value in vector))
    common = gcd(*(int(value * factor) for value in vector)) or 1
    return [value * factor / common for value in vector]
