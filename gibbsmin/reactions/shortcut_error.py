"""By how much a shortcut of ln K errs, in the three ways that people ask for, and where it may be used.

The equivalent temperature error is the number of kelvin by which the temperature would have to be off to do the same:
the exact ln K at T + error equals the shortcut's ln K at T.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gibbsmin.errors import ReactionError
from gibbsmin.reactions.shortcuts import Shortcut
from gibbsmin.reactions.standard import ReactionFunctions

Array = NDArray[np.float64]

SEARCH_POINTS = 801  # of a window search; the edges found between them are then refined
_BISECTIONS = 60
_NEWTON_STEPS = 60
_CLOSE = 1e-9  # K, of the equivalent temperature


@dataclass(frozen=True)
class Tolerance:
    """What error of a shortcut is accepted; at least one of the two.

    Attributes:
        per_cent_of_K: largest |K_shortcut/K - 1| in per cent.
        kelvin: largest equivalent temperature error [K].
    """

    per_cent_of_K: float | None = 5.0  # noqa: N815
    kelvin: float | None = None

    def __post_init__(self) -> None:
        given = [each for each in (self.per_cent_of_K, self.kelvin) if each is not None]
        if not given or not all(np.isfinite(each) and each > 0 for each in given):
            raise ReactionError("tolerance", "give per cent of K or kelvin (or both), above zero")

    def __str__(self) -> str:
        parts = [f"{self.per_cent_of_K:g} % of K"] if self.per_cent_of_K is not None else []
        return " and ".join([*parts, *([f"{self.kelvin:g} K"] if self.kelvin is not None else [])])

    def excess(self, errors: ShortcutErrors) -> Array:
        """How far the worse of the two is above its tolerance, as a ratio less one; negative is within."""
        worst = np.full_like(errors.ln_K, -np.inf)
        if self.per_cent_of_K is not None:
            worst = np.maximum(worst, np.abs(errors.per_cent) / self.per_cent_of_K)
        if self.kelvin is not None:
            # Without an equivalent temperature there is none within any tolerance.
            worst = np.maximum(worst, np.nan_to_num(np.abs(errors.kelvin), nan=np.inf) / self.kelvin)
        return worst - 1


@dataclass(frozen=True)
class ShortcutErrors:
    """Errors of a shortcut at temperatures, all (nT,): in ln K [1], in per cent of K, in kelvin.

    `kelvin` is NaN where no temperature within the data has the shortcut's K.
    """

    temperature: Array
    ln_K: Array  # noqa: N815
    per_cent: Array
    kelvin: Array


@dataclass(frozen=True)
class Window:
    """An interval of temperature [K] within which a shortcut keeps a tolerance."""

    lower: float
    upper: float

    def __str__(self) -> str:
        return f"{self.lower:.1f} to {self.upper:.1f} K"


def shortcut_errors(shortcut: Shortcut, T: ArrayLike, *, extrapolate: bool = False) -> ShortcutErrors:
    """Errors against the species data at T [K]. Raises TemperatureRangeError outside them."""
    functions = ReactionFunctions(shortcut.reaction, extrapolate=extrapolate)
    T = np.atleast_1d(np.asarray(T, dtype=np.float64))
    short = np.asarray(shortcut.ln_K(T))
    error = short - functions.ln_K(T)
    with np.errstate(over="ignore"):
        per_cent = 100 * np.expm1(error)
    return ShortcutErrors(T, error, per_cent, equivalent_temperature(functions, T, short) - T)


def equivalent_temperature(functions: ReactionFunctions, T: ArrayLike, ln_K: ArrayLike) -> Array:
    """The temperature [K] nearest to T at which the reaction has this ln K; NaN where there is none.

    Newton's method on ln K over 1/T, in which it is nearly straight, kept on the branch of T: where Delta H
    changes sign, K takes each value twice.
    """
    start = np.atleast_1d(np.asarray(T, dtype=np.float64))
    wanted = np.broadcast_to(np.asarray(ln_K, dtype=np.float64), start.shape)
    low, high = _range(functions)
    branch = np.sign(functions.enthalpy_R(start))
    x = 1 / start
    with np.errstate(all="ignore"):
        for _ in range(_NEWTON_STEPS):
            at = np.clip(1 / x, low, high)
            slope = -functions.enthalpy_R(at)
            step = (wanted - functions.ln_K(at)) / slope
            # Half of 1/T is as far as one step may go; straightness ends somewhere.
            step = np.clip(step, -0.5 / at, 0.5 / at)
            x = np.clip(1 / at + step, 1 / high, 1 / low)
            if (np.abs(step) * at * at < _CLOSE).all():
                break
        found = np.clip(1 / x, low, high)
        miss = np.abs(functions.ln_K(found) - wanted)
        slope = np.abs(functions.enthalpy_R(found)) / found**2
        good = (miss <= np.maximum(slope * 1e-6, 1e-12 * (1 + np.abs(wanted)))) & (
            np.sign(functions.enthalpy_R(found)) == branch
        )
    return np.where(good & (branch != 0), found, np.nan)


def windows(
    shortcut: Shortcut, tolerance: Tolerance, lower: float, upper: float, *, extrapolate: bool = False
) -> list[Window]:
    """Every interval between two temperatures [K] in which the shortcut is within the tolerance.

    Searched at evenly spaced temperatures and refined by bisection; an island narrower than 1/800 of the range
    can be missed.
    """
    if not 0 < lower < upper:
        raise ReactionError(shortcut.reaction.name, f"no range of temperature from {lower:g} to {upper:g} K")

    def excess(T: Array) -> Array:
        return tolerance.excess(shortcut_errors(shortcut, T, extrapolate=extrapolate))

    T = np.linspace(lower, upper, SEARCH_POINTS)
    inside = excess(T) <= 0
    edges = np.flatnonzero(inside[1:] != inside[:-1])
    places = _bisect(excess, T[edges], T[edges + 1], inside[edges])
    limits = [*([lower] if inside[0] else []), *places.tolist(), *([upper] if inside[-1] else [])]
    return [Window(a, b) for a, b in zip(limits[::2], limits[1::2], strict=True)]


def _bisect(excess: Callable[[Array], Array], a: Array, b: Array, inside_a: NDArray[np.bool_]) -> Array:
    if not a.size:
        return a
    for _ in range(_BISECTIONS):
        middle = (a + b) / 2
        same = (excess(middle) <= 0) == inside_a
        a, b = np.where(same, middle, a), np.where(same, b, middle)
    return (a + b) / 2


def _range(functions: ReactionFunctions) -> tuple[float, float]:
    if functions.extrapolate:
        return 1.0, 20_000.0
    return functions.validity.lower, functions.validity.upper
