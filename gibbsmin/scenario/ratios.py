"""How much of each stream the further axes ask for.

Each further axis changes one stream by a factor f and leaves its composition alone. A stream axis fixes f
directly. A ratio axis with value r asks for

    sum over streams of f_s (N_s - r D_s) = 0

with N_s and D_s what stream s adds to numerator and denominator and f_s = 1 for streams that no axis changes.
Ratios that change different streams may share species, so the factors come from one small linear system. It
is solved in rational arithmetic: a stoichiometric ratio gives an exactly stoichiometric feed.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from decimal import Decimal
from fractions import Fraction
from typing import TYPE_CHECKING

OXYGEN_DEMAND = {
    "C": Fraction(1),
    "H": Fraction(1, 4),
    "S": Fraction(1),
    "O": Fraction(-1, 2),
    **dict.fromkeys(("N", "He", "Ne", "Ar", "Kr", "Xe"), Fraction(0)),
}
"""Moles of O2 that burn one mole of atoms to CO2, H2O, SO2 and N2."""

if TYPE_CHECKING:
    from gibbsmin.scenario.model import FurtherAxis, RatioTerm, Stream
    from gibbsmin.species import Species


class RatioImpossibleError(ValueError):
    """No non-negative amount of the changed stream gives the ratio `value` of the axis titled `axis`."""

    def __init__(self, axis: str, value: Fraction, reason: str) -> None:
        self.axis = axis
        self.value = value
        self.reason = reason
        super().__init__(f"{axis} = {float(value):g}: {reason}")

    def __reduce__(self) -> tuple[type[RatioImpossibleError], tuple[str, Fraction, str]]:
        return type(self), (self.axis, self.value, self.reason)


def as_exact(value: float) -> Fraction:
    """The decimal number that a float prints as: 0.1 becomes 1/10, not 0x1.999999999999ap-4."""
    return Fraction(Decimal(repr(float(value))))


def term_amount(term: RatioTerm, stream: Stream, species: Mapping[str, Species]) -> Fraction:
    """What one stream contributes to a ratio term, mol (or kg), per unit factor."""
    if term.streams and stream.name not in term.streams:
        return Fraction(0)
    total = Fraction(0)
    for name, amount in stream.amounts.items():
        if term.measure == "atoms":
            composition = species[name].composition
            counted = term.names or tuple(composition)
            total += amount * sum(
                (as_exact(composition.get(element, 0.0)) for element in counted), Fraction(0)
            )
        elif not term.names or name in term.names:
            total += amount * _per_mole(term, species[name])
    return total


def _per_mole(term: RatioTerm, species: Species) -> Fraction:
    if term.measure == "mass":
        return as_exact(species.molar_mass)
    if term.measure == "oxygen demand":
        return sum(
            (as_exact(n) * OXYGEN_DEMAND.get(element, 0) for element, n in species.composition.items()),
            Fraction(0),
        )
    return Fraction(1)


class FeedEquations:
    """The linear system above, its coefficients worked out once for all axis values."""

    def __init__(
        self, streams: Mapping[str, Stream], axes: Sequence[FurtherAxis], species: Mapping[str, Species]
    ) -> None:
        self.axes = tuple(axes)
        self.totals = {name: stream.total for name, stream in streams.items()}
        self._parts: list[dict[str, tuple[Fraction, Fraction]]] = []
        for axis in self.axes:
            parts: dict[str, tuple[Fraction, Fraction]] = {}
            if axis.ratio is not None:
                for name, stream in streams.items():
                    parts[name] = (
                        term_amount(axis.ratio.numerator, stream, species),
                        term_amount(axis.ratio.denominator, stream, species),
                    )
            self._parts.append(parts)

    def factors(self, values: Sequence[Fraction]) -> dict[str, Fraction]:
        """Factor on each changed stream for one value per axis.

        Raises RatioImpossibleError when no non-negative amounts give the ratios.
        """
        factors = {
            axis.stream: value / self.totals[axis.stream]
            for axis, value in zip(self.axes, values, strict=True)
            if axis.ratio is None
        }
        unknown = [k for k, axis in enumerate(self.axes) if axis.ratio is not None]
        matrix: list[list[Fraction]] = []
        for k in unknown:
            r = values[k]
            row = [self._slope(k, self.axes[j].stream, r) for j in unknown]
            changed = {self.axes[j].stream for j in unknown}
            fixed = sum(
                (
                    factors.get(s, Fraction(1)) * self._slope(k, s, r)
                    for s in self._parts[k]
                    if s not in changed
                ),
                Fraction(0),
            )
            matrix.append([*row, -fixed])
        solution = _solve(matrix)
        for row_number, k in enumerate(unknown):
            factor = None if solution is None else solution[row_number]
            if factor is None or factor < 0:
                raise RatioImpossibleError(self.axes[k].title, values[k], self._why(k, factors, unknown))
            factors[self.axes[k].stream] = factor
        for k in unknown:
            if sum(factors.get(s, Fraction(1)) * parts[1] for s, parts in self._parts[k].items()) == 0:
                raise RatioImpossibleError(self.axes[k].title, values[k], self._why(k, factors, unknown))
        return factors

    def _slope(self, k: int, stream: str, ratio: Fraction) -> Fraction:
        numerator, denominator = self._parts[k][stream]
        return numerator - ratio * denominator

    def _why(self, k: int, factors: Mapping[str, Fraction], unknown: Sequence[int]) -> str:
        axis = self.axes[k]
        numerator, denominator = self._parts[k][axis.stream]
        if numerator == 0 and denominator == 0:
            return f"changing {axis.stream!r} does not change this ratio"
        others = [s for s in self._parts[k] if s != axis.stream]
        fixed_numerator = sum(
            (factors.get(s, Fraction(1)) * self._parts[k][s][0] for s in others), Fraction(0)
        )
        fixed_denominator = sum(
            (factors.get(s, Fraction(1)) * self._parts[k][s][1] for s in others), Fraction(0)
        )
        without = _shown(fixed_numerator, fixed_denominator)
        alone = _shown(numerator, denominator)
        assert axis.ratio is not None
        if not denominator and not fixed_denominator:
            return f"the {axis.ratio.denominator} would be nothing"
        if not fixed_numerator and not fixed_denominator:
            return f"changing {axis.stream!r} keeps it at {alone}, since no other stream takes part in it"
        if len(unknown) > 1:
            return f"no amount of {axis.stream!r} gives it together with the other ratios"
        return (
            f"changing {axis.stream!r} can only give values between {without} (with none of it) "
            f"and {alone} (with nothing else)"
        )


def _shown(numerator: Fraction, denominator: Fraction) -> str:
    if denominator == 0:
        return "infinity" if numerator else "0/0"
    return f"{float(numerator / denominator):.6g}"


def _solve(matrix: list[list[Fraction]]) -> list[Fraction] | None:
    """Solve the augmented system by Gauss-Jordan elimination; None when it is singular."""
    size = len(matrix)
    rows = [list(row) for row in matrix]
    for column in range(size):
        pivot = next((i for i in range(column, size) if rows[i][column] != 0), None)
        if pivot is None:
            return None
        rows[column], rows[pivot] = rows[pivot], rows[column]
        scale = rows[column][column]
        rows[column] = [value / scale for value in rows[column]]
        for i in range(size):
            if i != column and rows[i][column] != 0:
                factor = rows[i][column]
                rows[i] = [a - factor * b for a, b in zip(rows[i], rows[column], strict=True)]
    return [row[size] for row in rows]
