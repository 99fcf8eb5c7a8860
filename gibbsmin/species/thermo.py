"""Thermodynamic functions of many species at many temperatures.

For every species the record gives, by temperature interval, the nine coefficients of

    cp/R = a1 T^-2 + a2 T^-1 + a3 + a4 T + a5 T^2 + a6 T^3 + a7 T^4
    h/RT = -a1 T^-2 + a2 T^-1 ln T + a3 + a4 T/2 + a5 T^2/3 + a6 T^3/4 + a7 T^4/5 + b1/T
    s/R  = -a1 T^-2/2 - a2 T^-1 + a3 ln T + a4 T + a5 T^2/2 + a6 T^3/3 + a7 T^4/4 + b2
    g/RT = h/RT - s/R, summed term by term

(NASA/TP-2002-211556 (2002); the seven-coefficient form is this with a1 = a2 = 0). Standard state: 1 bar,
ideal gas for gases; entropies of gases whose source uses another pressure are converted by
R ln(p_source / 1 bar). Enthalpies are relative to the elements in their reference states at 298.15 K.

Evaluation: the interval limits of all species cut the temperature axis into segments; within one, each
species has one row of coefficients, so a function is a sum of nine products basis(T) x coefficient. The sum
is written out over the terms rather than left to a matrix product: each value is then rounded the same way
whatever other temperatures and species stand beside it, so equal temperatures give equal bits.

At an interval limit the lower interval counts. Dimensionless throughout: J/mol is h_RT * gas_constant * T
with the gas constant of the species' own source. Sources with different gas constants (8.314510 and the
exact value differ by 6e-6) are mixed as they stand.
"""

from __future__ import annotations

from bisect import bisect_left
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import log
from typing import TypeAlias

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gibbsmin.array_settings import unbuffered
from gibbsmin.constants import STANDARD_PRESSURE
from gibbsmin.errors import TemperatureRangeError
from gibbsmin.species.elements import sort_elements
from gibbsmin.species.record import ROUNDING_GAP, Form, Interval, Species

__all__ = ["ThermoTable"]

Array: TypeAlias = NDArray[np.float64]

RANGE_SLACK = 1e-9
"""Relative; a temperature this little beyond a limit is that limit after a unit conversion."""

JOINED = 1e-4
"""Difference in g/RT within which two forms count as joined; joins of the shipped data are this accurate."""

_TERMS = 9

_BLOCK = 1024
"""Temperatures evaluated together: the values of a hundred species then stay in a core's second-level cache."""


class ThermoTable:
    """The thermodynamic functions of a list of species, for arrays of temperature.

    Args:
        species: S of them, gases and condensed substances in any order.
        extrapolate: evaluate the lowest or highest interval of a species beyond its range, instead of raising
            TemperatureRangeError (gases) or calling it absent (condensed). `extrapolated` says where.

    Attributes:
        species: the species, as given.
        elements: their E elements in Hill order, then "charge" if any of the species is charged.
        formula_matrix: (E, S), atoms of each element in each species; the charge, if any, is the last row.

    A condensed substance goes through its crystal forms and liquid by its data: `form_index` says which is
    in use. Where the ranges of two forms overlap, one gives way to the other where their Gibbs energies
    agree. Outside all forms the substance is absent: `absent` is True, g/RT is +inf, the rest is NaN.
    """

    def __init__(self, species: Sequence[Species], *, extrapolate: bool = False) -> None:
        self.species = tuple(species)
        self.extrapolate = extrapolate
        charged = any(each.charge for each in self.species)
        atoms = sort_elements(symbol for each in self.species for symbol in each.composition)
        self.elements: tuple[str, ...] = (*atoms, "charge") if charged else atoms
        self.formula_matrix: Array = np.array(
            [
                [
                    each.charge if element == "charge" else each.composition.get(element, 0.0)
                    for each in self.species
                ]
                for element in self.elements
            ],
            dtype=np.float64,
        ).reshape(len(self.elements), len(self.species))
        self._pieces = [_pieces_of(each) for each in self.species]
        self._lowest = np.array([pieces[0].lower for pieces in self._pieces]) * (1.0 - RANGE_SLACK)
        self._highest = np.array([pieces[-1].upper for pieces in self._pieces]) * (1.0 + RANGE_SLACK)
        self._is_gas = np.array([each.state == "g" for each in self.species], dtype=bool)
        self._limits = np.array(
            sorted(
                {limit for pieces in self._pieces for piece in pieces for limit in (piece.lower, piece.upper)}
            )
        )
        # s/R at 1 bar is s/R at the source's pressure plus this; zero for the shipped data.
        self._entropy_shift = np.array(
            [
                log(each.reference_pressure / STANDARD_PRESSURE) if each.state == "g" else 0.0
                for each in self.species
            ]
        )
        self._segments: dict[int, _Segment] = {}

    # --- functions of temperature ---------------------------------------------------------------------------

    def gibbs_RT(self, T: ArrayLike) -> Array:  # noqa: N802
        """Standard Gibbs energy g/RT [-], (nT, S), at T [K], (nT,); +inf where a substance is absent.

        Raises TemperatureRangeError outside the range of a gas unless the table extrapolates.
        """
        values = self._evaluate(T, _gibbs_basis, absent=np.inf)
        if self._entropy_shift.any():
            values -= self._entropy_shift
        return values

    def enthalpy_RT(self, T: ArrayLike) -> Array:  # noqa: N802
        """Enthalpy h/RT [-], (nT, S), at T [K], (nT,); NaN where absent. Raises as `gibbs_RT`."""
        return self._evaluate(T, _enthalpy_basis, absent=np.nan)

    def entropy_R(self, T: ArrayLike) -> Array:  # noqa: N802
        """Standard entropy s/R [-], (nT, S), at T [K], (nT,) and 1 bar. Raises as `gibbs_RT`."""
        values = self._evaluate(T, _entropy_basis, absent=np.nan)
        values += self._entropy_shift
        return values

    def heat_capacity_R(self, T: ArrayLike) -> Array:  # noqa: N802
        """Heat capacity cp/R [-], (nT, S), at T [K], (nT,). Raises as `gibbs_RT`."""
        return self._evaluate(T, _heat_capacity_basis, absent=np.nan)

    # --- where the data end ---------------------------------------------------------------------------------

    def extrapolated(self, T: ArrayLike) -> NDArray[np.bool_]:
        """Where functions are evaluated beyond the data, (nT, S); all False unless the table extrapolates."""
        column = _temperatures(T)[:, np.newaxis]
        outside: NDArray[np.bool_] = (column < self._lowest) | (column > self._highest)
        return outside & self.extrapolate

    def absent(self, T: ArrayLike) -> NDArray[np.bool_]:
        """Where a condensed substance has no data and so cannot form, (nT, S); never True for a gas."""
        temperatures = _temperatures(T)
        absent = np.empty((temperatures.size, len(self.species)), dtype=np.bool_)
        for segment, rows in self._grouped(temperatures):
            absent[rows] = segment.form < 0
        return absent

    def form_index(self, T: ArrayLike) -> NDArray[np.intp]:
        """Which of the species' `forms` is in use, (nT, S), as an index into them; -1 where it is absent."""
        temperatures = _temperatures(T)
        self._check_range(temperatures)
        indices = np.empty((temperatures.size, len(self.species)), dtype=np.intp)
        for segment, rows in self._grouped(temperatures):
            indices[rows] = segment.form
        return indices

    def form_at(self, T: float, species: int) -> Form | None:
        """The form of species number `species` at T [K], or None where it is absent."""
        index = int(self.form_index([T])[0, species])
        return None if index < 0 else self.species[species].forms[index]

    # --- inner ----------------------------------------------------------------------------------------------

    def _evaluate(self, T: ArrayLike, basis: Callable[[Array], tuple[Array, ...]], *, absent: float) -> Array:
        temperatures = _temperatures(T)
        self._check_range(temperatures)
        groups = self._grouped(temperatures)
        values = np.empty((len(self.species), temperatures.size))
        first = 0
        for segment, rows in groups:
            segment.evaluate(temperatures[rows], basis, absent, values[:, first : first + rows.size])
            first += rows.size
        if len(groups) > 1:
            back = np.argsort(np.concatenate([rows for _, rows in groups]))
            for row in values:
                row[...] = row.take(back)
        return values.T

    def _grouped(self, temperatures: Array) -> list[tuple[_Segment, NDArray[np.intp]]]:
        """The segments that the temperatures fall into, each with the rows of its temperatures.

        Segment 2k lies between limits k - 1 and k, segment 2k + 1 is limit k itself.
        """
        numbers = np.searchsorted(self._limits * (1.0 - RANGE_SLACK), temperatures, side="right")
        numbers += np.searchsorted(self._limits * (1.0 + RANGE_SLACK), temperatures, side="left")
        if numbers.size == 0:
            return []
        if (numbers == numbers[0]).all():
            return [(self._segment(int(numbers[0])), np.arange(numbers.size))]
        order = np.argsort(numbers, kind="stable")
        cuts = np.flatnonzero(np.diff(numbers[order])) + 1
        return [(self._segment(int(numbers[rows[0]])), rows) for rows in np.split(order, cuts)]

    def _segment(self, number: int) -> _Segment:
        segment = self._segments.get(number)
        if segment is None:
            limits = [-np.inf, *self._limits.tolist(), np.inf]
            lower, upper = limits[(number + 1) // 2], limits[number // 2 + 1]
            coefficients = np.zeros((_TERMS, len(self.species)))
            form = np.full(len(self.species), -1, dtype=np.intp)
            for column, pieces in enumerate(self._pieces):
                beyond = self.extrapolate or bool(self._is_gas[column])
                piece = _piece_for(pieces, lower, upper, beyond=beyond)
                if piece is not None:
                    coefficients[:, column] = piece.coefficients
                    form[column] = piece.form
            segment = self._segments[number] = _Segment(coefficients, form)
        return segment

    def _check_range(self, temperatures: Array) -> None:
        if temperatures.size == 0 or self.extrapolate:
            return
        coldest, hottest = float(temperatures.min()), float(temperatures.max())
        below = self._is_gas & (coldest < self._lowest)
        above = self._is_gas & (hottest > self._highest)
        for wrong, temperature in ((below, coldest), (above, hottest)):
            if wrong.any():
                species = self.species[int(np.flatnonzero(wrong)[0])]
                raise TemperatureRangeError(species.name, temperature, species.lower, species.upper)


@dataclass(frozen=True)
class _Segment:
    """Coefficients (9, S) and form number (S,) of every species between two neighbouring limits."""

    coefficients: Array
    form: NDArray[np.intp]

    def evaluate(
        self, T: Array, basis: Callable[[Array], tuple[Array, ...]], absent: float, values: Array
    ) -> None:
        """Set values (S, nT); `absent` of species without a form."""
        product = np.empty((len(self.form), min(T.size, _BLOCK)))
        with unbuffered():
            for first in range(0, T.size, _BLOCK):
                part = values[:, first : first + _BLOCK]
                room = product[:, : part.shape[1]]
                terms = basis(T[first : first + _BLOCK])
                np.multiply(self.coefficients[0][:, np.newaxis], terms[0], out=part)
                for term, coefficients in zip(terms[1:], self.coefficients[1:], strict=True):
                    part += np.multiply(coefficients[:, np.newaxis], term, out=room)
        values[self.form < 0] = absent


@dataclass(frozen=True)
class _Piece:
    """One interval of one form, trimmed to where it counts [K]."""

    lower: float
    upper: float
    coefficients: tuple[float, ...]
    form: int


def _pieces_of(species: Species) -> list[_Piece]:
    """The intervals of all forms by rising temperature, without overlaps and without gaps by rounding."""
    pieces: list[_Piece] = []
    for number, form in enumerate(species.forms):
        lower = form.lower
        if pieces and lower < pieces[-1].upper:
            lower = _transition(species.forms[number - 1], form)
            pieces = [piece for piece in pieces if piece.lower < lower]
            pieces[-1] = _Piece(pieces[-1].lower, lower, pieces[-1].coefficients, pieces[-1].form)
        for interval in form.intervals:
            start = max(interval.lower, lower)
            if start < interval.upper:
                if pieces and 0.0 < start - pieces[-1].upper <= ROUNDING_GAP:
                    last = pieces[-1]
                    pieces[-1] = _Piece(last.lower, start, last.coefficients, last.form)
                pieces.append(_Piece(start, interval.upper, interval.nine, number))
    return pieces


def _transition(below: Form, above: Form) -> float:
    """Temperature [K] in the overlap of two forms at which one gives way to the other.

    That is an end of the overlap at which their Gibbs energies agree, for there the source joined them; else
    the temperature at which they are equal; else the end at which they are nearest. The lower Gibbs energy
    does not decide: where a range was stated too wide (SrCl2 beta from 900 K, with its transition at 990 K),
    a polynomial outside its fit may well lie lower.
    """
    low, high = above.lower, min(below.upper, above.upper)
    at_low, at_high = _excess(below, above, low), _excess(below, above, high)
    nearest = low if abs(at_low) < abs(at_high) else high
    if min(abs(at_low), abs(at_high)) <= JOINED or at_low * at_high >= 0.0:
        return nearest
    while True:
        middle = (low + high) / 2.0
        if middle in (low, high):
            return middle
        if _excess(below, above, middle) * at_low > 0.0:
            low = middle
        else:
            high = middle


def _excess(below: Form, above: Form, temperature: float) -> float:
    """g/RT of `below` minus that of `above`."""
    terms = [float(term[0]) for term in _gibbs_basis(np.array([temperature]))]

    def gibbs(form: Form) -> float:
        coefficients = _interval_at(form, temperature).nine
        return sum(term * coefficient for term, coefficient in zip(terms, coefficients, strict=True))

    return gibbs(below) - gibbs(above)


def _interval_at(form: Form, temperature: float) -> Interval:
    uppers = [interval.upper for interval in form.intervals]
    return form.intervals[min(bisect_left(uppers, temperature), len(uppers) - 1)]


def _piece_for(pieces: Sequence[_Piece], lower: float, upper: float, *, beyond: bool) -> _Piece | None:
    """The piece that counts between two neighbouring limits, or at one limit if `lower` equals `upper`.

    At a limit the lower piece counts. With `beyond`, the first and last pieces reach past their ends.
    """
    for piece in pieces:
        if piece.lower <= lower and upper <= piece.upper:
            return piece
    if beyond and upper <= pieces[0].lower:
        return pieces[0]
    if beyond and lower >= pieces[-1].upper:
        return pieces[-1]
    return None


def _temperatures(T: ArrayLike) -> Array:
    temperatures = np.atleast_1d(np.asarray(T, dtype=np.float64))
    if temperatures.ndim != 1:
        raise ValueError(f"temperatures must be one-dimensional, not of shape {temperatures.shape}")
    if not (temperatures > 0.0).all() or not np.isfinite(temperatures).all():
        raise ValueError("temperatures must be finite and above 0 K")
    return temperatures


# --- the terms that multiply a1 ... a7, b1, b2 ----------------------------------------------------------


def _heat_capacity_basis(T: Array) -> tuple[Array, ...]:
    one, zero = np.ones_like(T), np.zeros_like(T)
    return (1.0 / (T * T), 1.0 / T, one, T, T * T, T * T * T, T * T * T * T, zero, zero)


def _enthalpy_basis(T: Array) -> tuple[Array, ...]:
    T2 = T * T
    return (
        -1.0 / T2,
        np.log(T) / T,
        np.ones_like(T),
        T / 2.0,
        T2 / 3.0,
        T2 * T / 4.0,
        T2 * T2 / 5.0,
        1.0 / T,
        np.zeros_like(T),
    )


def _entropy_basis(T: Array) -> tuple[Array, ...]:
    T2 = T * T
    return (
        -0.5 / T2,
        -1.0 / T,
        np.log(T),
        T,
        T2 / 2.0,
        T2 * T / 3.0,
        T2 * T2 / 4.0,
        np.zeros_like(T),
        np.ones_like(T),
    )


def _gibbs_basis(T: Array) -> tuple[Array, ...]:
    T2 = T * T
    log_T = np.log(T)
    return (
        -0.5 / T2,
        (1.0 + log_T) / T,
        1.0 - log_T,
        T / -2.0,
        T2 / -6.0,
        T2 * T / -12.0,
        T2 * T2 / -20.0,
        1.0 / T,
        -np.ones_like(T),
    )
