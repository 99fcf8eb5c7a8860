"""The best short correlation of ln K over a window: least possible largest error, with a proof.

The minimax fit of ln K by A + B/T (+ C ln T + D T) is a linear program: least t with |ln K(T_i) - sum c_k f_k(T_i)| <= t
on a fine grid. Its optimum is a lower bound (no choice of coefficients does better); the error re-checked between the
grid points, with the curvature that the data have there, is the upper one. Coefficients are rounded to the fewest
digits that hardly add to the error, and the error stated is that of the rounded ones, as printed.

Source: Chebyshev approximation as a linear program, e.g. Boyd & Vandenberghe, *Convex Optimization* (2004), sec. 6.1.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gibbsmin.errors import ReactionError
from gibbsmin.reactions.constant_units import CONCENTRATIONS, ConstantUnit
from gibbsmin.reactions.equation import Reaction
from gibbsmin.reactions.shortcut_error import Tolerance, shortcut_errors
from gibbsmin.reactions.shortcuts import Correlation
from gibbsmin.reactions.standard import ReactionFunctions

Array = NDArray[np.float64]

TERMS = ("1", "1/T", "ln T", "T")
"""In the order in which they are added; the first three are exact for a constant Delta Cp."""

GRID = 601  # points of the linear program, closer together at the ends where the error peaks
CHECK = 20_001  # points of the check between them
ROUNDING_SHARE = 0.01  # part of the error that rounding the coefficients may add
SMALLEST_ERROR = 1e-9  # in ln K; the rounding of the data's own evaluation is near 1e-13
SPREADSHEET_CELL = "A1"


@dataclass(frozen=True)
class BestFit:
    """A correlation with the largest error that it can have over its window.

    Attributes:
        correlation: with rounded coefficients.
        lower, upper: the window [K].
        largest_error: in ln K, guaranteed for the rounded coefficients: the largest on a fine grid plus what the
            curvature of the error allows between its points.
        best_possible: in ln K; no coefficients of these terms have a smaller largest error.
        largest_kelvin: largest equivalent temperature error on the grid [K]; NaN where none exists.
    """

    correlation: Correlation
    lower: float
    upper: float
    largest_error: float
    best_possible: float
    largest_kelvin: float

    @property
    def per_cent(self) -> float:
        """The largest error in per cent of K."""
        return 100 * math.expm1(self.largest_error)

    @property
    def python(self) -> str:
        """A line of Python that gives K from T in K."""
        return f"K = lambda T: math.exp({self._sum('T', 'math.log')})"

    @property
    def spreadsheet(self) -> str:
        """A spreadsheet formula that gives K from T in K in cell A1."""
        return f"=EXP({self._sum(SPREADSHEET_CELL, 'LN')})"

    @property
    def unit(self) -> str:
        """Unit of K."""
        return self.correlation.unit.symbol(self.correlation.reaction.gas_change)

    def units_of_coefficients(self) -> dict[str, str]:
        return {
            term: {"1": "1", "1/T": "K", "ln T": "1", "T": "1/K"}[term]
            for term in self.correlation.coefficients
        }

    def _sum(self, variable: str, logarithm: str) -> str:
        shown = {"1": "", "1/T": f"/{variable}", "ln T": f"*{logarithm}({variable})", "T": f"*{variable}"}
        parts: list[str] = []
        for term, value in self.correlation.coefficients.items():
            text = f"{value!r}{shown[term]}"
            parts.append(text if not parts or text.startswith("-") else f"+{text}")
        return "".join(parts)

    def __str__(self) -> str:
        basis = self.correlation.unit.in_words(self.correlation.reaction.gas_change)
        kelvin = "" if math.isnan(self.largest_kelvin) else f", {self.largest_kelvin:.2g} K"
        return (
            f"{self.correlation.describe()}\n"
            f"  {self.lower:g} to {self.upper:g} K: largest error {self.largest_error:.3g} in ln K "
            f"({self.per_cent:.3g} % of K{kelvin}); no {len(self.correlation.coefficients)} such terms do better "
            f"than {self.best_possible:.3g}\n"
            f"  spreadsheet, T in K in {SPREADSHEET_CELL}, K {basis}: {self.spreadsheet}\n"
            f"  Python: {self.python}"
        )


def best_fit(
    reaction: Reaction,
    lower: float,
    upper: float,
    *,
    terms: int = 3,
    unit: str = "1",
    extrapolate: bool = False,
) -> BestFit:
    """The correlation of 2, 3 or 4 terms with the least largest error in ln K between two temperatures [K].

    Args:
        reaction: the reaction.
        lower, upper: the window [K].
        terms: 2 (A + B/T), 3 (+ C ln T) or 4 (+ D T).
        unit: of K: "1" at 1 bar, or of pressure or concentration.
        extrapolate: use data beyond their range.

    Raises:
        ReactionError: no such window or number of terms.
        TemperatureRangeError: the window leaves the data.
    """
    if terms not in (2, 3, 4):
        raise ReactionError(reaction.name, f"a correlation has 2, 3 or 4 terms, not {terms}")
    if not (math.isfinite(upper) and 0 < lower < upper):
        raise ReactionError(reaction.name, f"no window from {lower:g} to {upper:g} K")
    chosen = ConstantUnit.of(unit, reaction.gas_change, reaction=reaction.name)
    functions = ReactionFunctions(reaction, extrapolate=extrapolate)
    names = TERMS[:terms]
    nodes = (lower + upper) / 2 - (upper - lower) / 2 * np.cos(np.pi * np.arange(GRID) / (GRID - 1))
    nodes[0], nodes[-1] = lower, upper
    target = chosen.from_standard(functions.ln_K(nodes), reaction.gas_change, nodes)
    coefficients, least = _minimax(_basis(nodes, names), target)
    check = np.linspace(lower, upper, CHECK)
    exact = chosen.from_standard(functions.ln_K(check), reaction.gas_change, check)
    values = _rounded(coefficients, names, check, exact, least)
    correlation = Correlation(
        f"best fit, {terms} terms", reaction, dict(zip(names, map(float, values), strict=True)), False, chosen
    )
    error = np.abs(_basis(check, names) @ values - exact)
    kelvin = shortcut_errors(correlation, nodes, extrapolate=extrapolate).kelvin
    worst_kelvin = float("nan") if np.isnan(kelvin).any() else float(np.abs(kelvin).max())
    slack = _between(functions, chosen, values, names, check)
    return BestFit(correlation, lower, upper, float(error.max()) + slack, least, worst_kelvin)


def best_fits(
    reaction: Reaction,
    lower: float,
    upper: float,
    *,
    terms: Sequence[int] = (2, 3, 4),
    unit: str = "1",
    extrapolate: bool = False,
) -> list[BestFit]:
    """`best_fit` with several numbers of terms."""
    return [
        best_fit(reaction, lower, upper, terms=each, unit=unit, extrapolate=extrapolate) for each in terms
    ]


def fewest_terms(fits: Sequence[BestFit], tolerance: Tolerance) -> BestFit | None:
    """The shortest of these fits that is within the tolerance everywhere, or None."""
    for fit in sorted(fits, key=lambda each: len(each.correlation.coefficients)):
        small = tolerance.per_cent_of_K is None or fit.per_cent <= tolerance.per_cent_of_K
        if small and (tolerance.kelvin is None or fit.largest_kelvin <= tolerance.kelvin):
            return fit
    return None


def _basis(T: Array, names: Sequence[str]) -> Array:
    columns = {"1": np.ones_like(T), "1/T": 1 / T, "ln T": np.log(T), "T": T}
    return np.stack([columns[name] for name in names], axis=1)


def _minimax(basis: Array, target: Array) -> tuple[Array, float]:
    """Coefficients with the least largest |basis @ c - target|, and that error."""
    from scipy.optimize import linprog

    # Orthonormal columns and a target of order one keep the linear program well scaled.
    q, r = np.linalg.qr(basis)
    start = q.T @ target
    rest = target - q @ start
    size = float(np.abs(rest).max())
    if size < SMALLEST_ERROR:  # the terms reproduce the data as they are; only zero is sure to be no better
        return np.linalg.solve(r, start), 0.0
    q = q * math.sqrt(len(target))
    ones = np.ones((len(target), 1))
    found = linprog(
        np.r_[np.zeros(q.shape[1]), 1.0],
        A_ub=np.vstack([np.hstack([q, -ones]), np.hstack([-q, -ones])]),
        b_ub=np.r_[rest, -rest] / size,
        bounds=[(None, None)] * (q.shape[1] + 1),
        method="highs",
    )
    if found.x is None or found.fun is None:  # cannot be: the program is feasible and bounded
        raise RuntimeError(f"minimax fit: {found.message}")
    correction = found.x[:-1] * size * math.sqrt(len(target))
    coefficients = np.linalg.solve(r, start + correction)
    # The optimum of the program is a bound up to its own tolerance, by which it is lowered.
    return coefficients, float(found.fun) * size * (1 - 1e-6)


def _rounded(values: Array, names: Sequence[str], T: Array, exact: Array, least: float) -> Array:
    """The values with as few significant digits as leave the largest error nearly as it is."""
    basis = _basis(T, names)
    unrounded = float(np.abs(basis @ values - exact).max())
    allowed = unrounded * (1 + ROUNDING_SHARE) + SMALLEST_ERROR
    for digits in range(4, 17):
        rounded = np.array([float(f"{value:.{digits - 1}e}") for value in values])
        if np.abs(basis @ rounded - exact).max() <= allowed:
            return rounded
    return values


def _between(
    functions: ReactionFunctions, unit: ConstantUnit, values: Array, names: Sequence[str], T: Array
) -> float:
    """What the error can exceed its largest value on the grid T by: h^2/8 max |second derivative|.

    The second derivative of ln K is Delta Cp/(R T^2) - 2 Delta H/(R T^3); a tenth is added for its own change
    between the points.
    """
    second = functions.heat_capacity_R(T) / T**2 - 2 * functions.enthalpy_R(T) / T**3
    own = {"1": 0.0 * T, "1/T": 2 / T**3, "ln T": -1 / T**2, "T": 0.0 * T}
    second = second - sum(value * own[name] for name, value in zip(names, values, strict=True))
    nu = float(functions.reaction.gas_change)
    if unit.base in CONCENTRATIONS:  # ln Kc = ln K - nu ln(R T c/p)
        second = second + nu / T**2
    step = float(T[1] - T[0])
    smooth = step**2 / 8 * float(np.abs(second).max())
    # Where a condensed substance changes its form the slope jumps by Delta H of the transition / (R T^2).
    jump = np.abs(np.diff(functions.enthalpy_R(T))) / T[:-1] ** 2
    inside = any(T[0] < each.temperature < T[-1] for each in functions.validity.transitions)
    return 1.1 * (smooth + (step / 4 * float(jump.max()) if inside else 0.0))
