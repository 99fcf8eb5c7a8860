"""Which values the colours of a map stand for: even steps, or decades where the field spans several."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from gibbsmin.figures.labels import number

DECADES_FROM = 1.7  # a field that spans more decades than this is coloured by its logarithm
MOST_DECADES = 6  # one colour stands for all that lies further below the largest value
CONSTANT_WITHIN = 1e-4  # relative spread below which a map would show rounding, not chemistry
_LINEAR_STEPS = 14
_MOST_NUMBERED, _MOST_NUMBERED_DECADES = 8, 13  # decades are read by their digits, so more of them fit
_MOST_NUMBERED_LINES = 6


@dataclass(frozen=True)
class Levels:
    """Colour levels: `places` are the limits between colours, in log10 of the value if `logarithmic`."""

    places: NDArray[np.float64]
    logarithmic: bool
    floor: float | None  # the smallest value told apart, if there are smaller ones

    def position(self, values: NDArray[np.float64]) -> NDArray[np.float64]:
        """The field on the scale of `places`; what lies below the floor is moved just under it."""
        if not self.logarithmic:
            return values
        lowest = self.places[0] - 0.5 * (self.places[1] - self.places[0])
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(np.isnan(values), np.nan, np.fmax(np.log10(values), lowest))

    @property
    def numbered(self) -> NDArray[np.float64]:
        """The levels that carry a number on the colour scale: all if they are few, else the round ones."""
        if len(self.places) <= (_MOST_NUMBERED_DECADES if self.logarithmic else _MOST_NUMBERED):
            return self.places
        if self.logarithmic:
            return self.places[self.round_places]
        step = 2 * float(self.places[1] - self.places[0])
        even = np.round(self.places / step)
        return self.places[np.abs(self.places / step - even) < 1e-6]

    @property
    def round_places(self) -> NDArray[np.bool_]:
        """Which of the levels of a logarithmic scale are whole decades."""
        return np.abs(self.places - np.round(self.places)) < 1e-9

    def numbered_lines(self, crossed: NDArray[np.float64]) -> NDArray[np.float64]:
        """Those of the levels that cross a panel on which a number is written, the most telling first."""
        chosen = crossed[np.isin(crossed, self.numbered)]
        if self.logarithmic:
            decade = np.isin(chosen, self.places[self.round_places])
            chosen = np.concatenate([chosen[decade], chosen[~decade]])
        return chosen[:_MOST_NUMBERED_LINES]

    def text(self, place: float) -> str:
        """A level as printed on the colour scale and on the lines."""
        if not self.logarithmic:
            return number(round(place, 12))
        exponent = math.floor(place + 1e-9)
        mantissa = round(10 ** (place - exponent))
        return number(float(f"{mantissa}e{exponent}"), digits=1)


def choose_levels(values: NDArray[np.float64], *, linear: bool = False) -> Levels | None:
    """Levels for the finite values of a field, or None where it is constant (or nowhere known).

    `linear` asks for even steps however wide the field is: decades would drown the edge of a phase, where its amount
    goes to a true zero.
    """
    known = values[np.isfinite(values)]
    if known.size == 0:
        return None
    low, high = float(known.min()), float(known.max())
    if high - low <= CONSTANT_WITHIN * max(abs(low), abs(high)):
        return None
    if low >= 0 and high > 0 and not linear:
        positive = known[known > 0]
        wide = low == 0 or math.log10(high / low) > DECADES_FROM
        if wide and positive.min() < high:
            return _decades(float(positive.min()), high, has_zero=low == 0)
    places = MaxNLocator(_LINEAR_STEPS, steps=[1, 2, 2.5, 5, 10]).tick_values(low, high)
    return Levels(np.asarray(places), False, None)


def _decades(low: float, high: float, *, has_zero: bool) -> Levels:
    top = math.log10(high)
    bottom = max(math.log10(low), math.ceil(top) - MOST_DECADES)
    floor = 10**bottom if bottom > math.log10(low) or has_zero else None
    span = top - bottom
    mantissas = (1, 2, 5) if span <= 4 else (1, 3) if span <= 7 else (1,)
    every = [
        math.log10(float(f"{m}e{e}"))
        for e in range(math.floor(bottom), math.ceil(top) + 1)
        for m in mantissas
    ]
    below = [place for place in every if place <= bottom + 1e-9][-1:]
    above = [place for place in every if place >= top - 1e-9][:1]
    inside = [place for place in every if bottom + 1e-9 < place < top - 1e-9]
    places = np.array(below + inside + above)
    if floor is not None:
        floor = 10 ** float(places[0])
    return Levels(places, True, floor)
