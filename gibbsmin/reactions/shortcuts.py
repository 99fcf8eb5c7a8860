"""The short forms of ln K(T) that plants and spreadsheets use.

Constant reaction enthalpy (the integrated van 't Hoff equation), constant heat-capacity change, and any correlation

    ln K (or log10 K) = A + B/T + C ln T + D T + E T^2 + ...

Whatever its own units and pressure basis, a shortcut gives ln K at 1 bar, so that all can be compared.
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gibbsmin.constants import GAS_CONSTANT
from gibbsmin.errors import ReactionError
from gibbsmin.reactions.constant_units import ConstantUnit
from gibbsmin.reactions.equation import Reaction
from gibbsmin.reactions.standard import ReactionFunctions

Array = NDArray[np.float64]


class Shortcut(Protocol):
    """A short form of ln K(T) of one reaction."""

    @property
    def name(self) -> str: ...

    @property
    def reaction(self) -> Reaction: ...

    def ln_K(self, T: ArrayLike) -> Array:  # noqa: N802
        """ln K [1] at 1 bar at T [K], any shape."""
        ...

    def describe(self) -> str:
        """The formula with its numbers, on one line."""
        ...


@dataclass(frozen=True)
class ConstantEnthalpy:
    """ln K = ln K_ref - (Delta H/R) (1/T - 1/T_ref).

    Attributes:
        reference: T_ref [K]. ln_K_ref: ln K there [1] at 1 bar. enthalpy_R: Delta H / R [K].
    """

    name: str
    reaction: Reaction
    reference: float
    ln_K_ref: float  # noqa: N815
    enthalpy_R: float  # noqa: N815

    @classmethod
    def from_data(cls, reaction: Reaction, reference: float, *, name: str = "") -> ConstantEnthalpy:
        """K and Delta H of the species data at one temperature [K]: the tangent of ln K over 1/T."""
        functions = ReactionFunctions(reaction)
        ln_K, slope = float(functions.ln_K(reference)[0]), float(functions.enthalpy_R(reference)[0])
        return cls(name or f"constant enthalpy at {reference:g} K", reaction, reference, ln_K, slope)

    @classmethod
    def through(
        cls,
        reaction: Reaction,
        first: float,
        second: float,
        *,
        ln_K: tuple[float, float] | None = None,
        name: str = "",
    ) -> ConstantEnthalpy:
        """Through ln K at two temperatures [K]: those given (at 1 bar), or those of the species data."""
        _require_temperatures(reaction, first, second)
        if first == second:
            raise ReactionError(
                reaction.name, f"two different temperatures are needed, found {first:g} K twice"
            )
        if ln_K is None:
            one, two = ReactionFunctions(reaction).ln_K([first, second])
            ln_K = float(one), float(two)
        slope = -(ln_K[1] - ln_K[0]) / (1 / second - 1 / first)
        return cls(
            name or f"constant enthalpy through {first:g} and {second:g} K", reaction, first, ln_K[0], slope
        )

    def ln_K(self, T: ArrayLike) -> Array:  # noqa: N802
        T = np.asarray(T, dtype=np.float64)
        return np.asarray(self.ln_K_ref - self.enthalpy_R * (1 / T - 1 / self.reference))

    def describe(self) -> str:
        return (
            f"ln K = {self.ln_K_ref:.6g} - (Delta H/R) (1/T - 1/{self.reference:g} K), "
            f"Delta H = {self.enthalpy_R * GAS_CONSTANT / 1e3:.5g} kJ/mol; "
            f"K {ConstantUnit().in_words(self.reaction.gas_change)}"
        )


@dataclass(frozen=True)
class ConstantHeatCapacity:
    """ln K = ln K_ref - (Delta H_ref/R) (1/T - 1/T_ref) + (Delta Cp/R) (ln(T/T_ref) + T_ref/T - 1).

    Attributes:
        reference: T_ref [K]. ln_K_ref: ln K there [1] at 1 bar. enthalpy_R: Delta H / R [K] there.
        heat_capacity_R: Delta Cp / R [1].
    """

    name: str
    reaction: Reaction
    reference: float
    ln_K_ref: float  # noqa: N815
    enthalpy_R: float  # noqa: N815
    heat_capacity_R: float  # noqa: N815

    @classmethod
    def from_data(cls, reaction: Reaction, reference: float, *, name: str = "") -> ConstantHeatCapacity:
        """K, Delta H and Delta Cp of the species data at one temperature [K]."""
        functions = ReactionFunctions(reaction)
        return cls(
            name or f"constant heat capacity at {reference:g} K",
            reaction,
            reference,
            float(functions.ln_K(reference)[0]),
            float(functions.enthalpy_R(reference)[0]),
            float(functions.heat_capacity_R(reference)[0]),
        )

    def ln_K(self, T: ArrayLike) -> Array:  # noqa: N802
        T = np.asarray(T, dtype=np.float64)
        ratio = self.reference / T
        return np.asarray(
            self.ln_K_ref
            - self.enthalpy_R * (1 / T - 1 / self.reference)
            + self.heat_capacity_R * (ratio - 1 - np.log(ratio))
        )

    def describe(self) -> str:
        return (
            f"ln K from {self.ln_K_ref:.6g} at {self.reference:g} K with "
            f"Delta H = {self.enthalpy_R * GAS_CONSTANT / 1e3:.5g} kJ/mol there and "
            f"Delta Cp = {self.heat_capacity_R * GAS_CONSTANT:.4g} J/(mol K); "
            f"K {ConstantUnit().in_words(self.reaction.gas_change)}"
        )


# --- correlations --------------------------------------------------------------------------------------------

_LOG_TERMS = {"ln T": 1.0, "log10 T": math.log(10.0)}
_POWER_TERM = re.compile(
    r"(?:T(?:\^(?P<up>[-+]?\d+(?:\.\d+)?))?|(?P<over>1)/T(?:\^(?P<down>\d+(?:\.\d+)?))?)\Z"
)
_NUMBER = r"(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?"
_TERM = re.compile(
    rf"(?P<sign>[+-]?)(?:(?P<number>{_NUMBER})(?:[*\u00b7]?(?P<times>[A-Za-z].*)|(?P<over>/.*))?|(?P<bare>[A-Za-z].*))\Z"
)
_LEFT = {
    "lnK": 1.0, "ln(K)": 1.0, "log10K": math.log(10.0), "log10(K)": math.log(10.0), "lgK": math.log(10.0),
    "lnKp": 1.0, "ln(Kp)": 1.0, "log10Kp": math.log(10.0), "log10(Kp)": math.log(10.0), "lgKp": math.log(10.0),
}  # fmt: skip
_FUNCTIONS = {"ln(T)": "ln T", "lnT": "ln T", "log10(T)": "log10 T", "log10T": "log10 T", "lgT": "log10 T"}


@dataclass(frozen=True)
class Correlation:
    """ln K (or log10 K) = sum of coefficients times functions of T [K].

    Attributes:
        coefficients: function -> coefficient. Functions are "1", "1/T", "ln T", "log10 T", "T", and powers
            "T^2", "1/T^2", "T^0.5".
        decadic: the sum is log10 K, not ln K.
        unit: of K: "1" (1 bar), or a unit of pressure or concentration.
    """

    name: str
    reaction: Reaction
    coefficients: Mapping[str, float]
    decadic: bool = False
    unit: ConstantUnit = field(default_factory=ConstantUnit)

    def __post_init__(self) -> None:
        if not self.coefficients:
            raise ReactionError(self.reaction.name, "a correlation needs at least one coefficient")
        for term, value in self.coefficients.items():
            _function(term, self.reaction)
            if not math.isfinite(value):
                raise ReactionError(self.reaction.name, f"the coefficient of {term!r} is not a finite number")

    @classmethod
    def of(cls, text: str, reaction: Reaction, *, unit: str = "1", name: str = "") -> Correlation:
        """Read `ln K = 4577.8/T - 4.33` or `log10 K = 2073/T - 2.029`; `K = exp(...)` is ln K = ... .

        Terms are a number, a number over T or a power of it, a number times ln(T), log10(T), T or a power.

        Raises:
            ReactionError: a part that is none of these, or a unit that does not fit the reaction.
        """
        decadic, terms = _read_correlation(text, reaction)
        chosen = ConstantUnit.of(unit, reaction.gas_change, reaction=reaction.name)
        return cls(name or text.strip(), reaction, terms, decadic, chosen)

    def ln_K(self, T: ArrayLike) -> Array:  # noqa: N802
        T = np.asarray(T, dtype=np.float64)
        total = np.zeros_like(T)
        for term, value in self.coefficients.items():
            total = total + value * _function(term, self.reaction)(T)
        own = total * (math.log(10.0) if self.decadic else 1.0)
        return self.unit.to_standard(own, self.reaction.gas_change, T)

    def describe(self) -> str:
        left = "log10 K" if self.decadic else "ln K"
        basis = self.unit.in_words(self.reaction.gas_change)
        return f"{left} = {sum_text(self.coefficients)}; T in K, K {basis}"


def sum_text(coefficients: Mapping[str, float]) -> str:
    """`-4.33 + 4577.8/T` of coefficients by function."""
    parts: list[str] = []
    for term, value in coefficients.items():
        if term == "1":
            body = f"{abs(value):.12g}"
        elif term.startswith("1/"):
            body = f"{abs(value):.12g}{term[1:]}"
        else:
            body = f"{abs(value):.12g} {term}"
        sign = "-" if value < 0 else "+"
        parts.append(f"{sign} {body}" if parts else (f"-{body}" if value < 0 else body))
    return " ".join(parts)


def _function(term: str, reaction: Reaction):  # type: ignore[no-untyped-def]
    if term == "1":
        return np.ones_like
    if term == "ln T":
        return np.log
    if term == "log10 T":
        return np.log10
    match = _POWER_TERM.match(term)
    if match is None:
        raise ReactionError(
            reaction.name,
            f"{term!r} is no term of a correlation; allowed: 1, 1/T, ln T, log10 T, T, T^2, 1/T^2 ...",
        )
    power = -float(match["down"] or 1) if match["over"] else float(match["up"] or 1)
    return lambda T: T**power


def _read_correlation(text: str, reaction: Reaction) -> tuple[bool, dict[str, float]]:
    left, equals, right = ("".join(part.split()) for part in text.partition("="))
    if not equals:
        raise ReactionError(reaction.name, f"the correlation {text!r} has no '='; write ln K = A + B/T")
    factor = _LEFT.get(left)
    if factor is None and left in ("K", "Kp"):
        for head, decadic in (("exp(", False), ("10^(", True), ("10**(", True)):
            if right.startswith(head) and right.endswith(")"):
                right, factor = right[len(head) : -1], math.log(10.0) if decadic else 1.0
    if factor is None:
        raise ReactionError(
            reaction.name, f"the left side of {text!r} must be ln K or log10 K (or K = exp(...))"
        )
    terms: dict[str, float] = {}
    for part in _split_sum(right):
        term, value = _read_term(part, text, reaction)
        terms[term] = terms.get(term, 0.0) + value
    return factor != 1.0, terms


def _split_sum(text: str) -> list[str]:
    """The terms of a sum, each with its sign; the sign of an exponent stays where it is."""
    return [part for part in re.split(r"(?<![eE^(])(?=[+-])", text.replace("\u2212", "-")) if part]


def _read_term(part: str, text: str, reaction: Reaction) -> tuple[str, float]:
    match = _TERM.match(part)
    if match is None:
        raise ReactionError(
            reaction.name, f"cannot read the term {part!r} of {text!r}; write 4577.8/T or 2.1 ln(T)"
        )
    value = float(match["number"] or 1) * (-1 if match["sign"] == "-" else 1)
    body = match["times"] or match["bare"]
    term = f"1{match['over']}" if match["over"] else (_FUNCTIONS.get(body, body) if body else "1")
    term = term.replace("**", "^")
    _function(term, reaction)
    return term, value


def _require_temperatures(reaction: Reaction, *temperatures: float) -> None:
    for T in temperatures:
        if not (math.isfinite(T) and T > 0):
            raise ReactionError(reaction.name, f"{T:g} K is not above absolute zero")
