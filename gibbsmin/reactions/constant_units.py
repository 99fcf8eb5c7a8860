"""Units and pressure basis of equilibrium constants.

Everywhere inside, K is the thermodynamic constant at a standard pressure of 1 bar: the product of (p_i/1 bar)^nu_i
over gases (condensed substances have activity 1). People also use

- Kp in a pressure unit, the product of p_i^nu_i: its unit is that of pressure to the power Delta nu;
- Kc, the product of c_i^nu_i, with c_i = p_i/(R T) of an ideal gas;
- a plain number, meant at 1 bar, or at another standard pressure: that is Kp in units of it.

    K = Kp (unit / 1 bar)^(Delta nu)          K = Kc (unit R T / 1 bar)^(Delta nu)

Source: IUPAC, *Quantities, Units and Symbols in Physical Chemistry*, 3rd ed. (2007), section 2.11.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gibbsmin.constants import GAS_CONSTANT, STANDARD_ATMOSPHERE, STANDARD_PRESSURE
from gibbsmin.errors import ReactionError

Array = NDArray[np.float64]

_PSI = 0.45359237 * 9.80665 / 0.0254**2  # Pa, exact by the definitions of pound, standard gravity and inch
PRESSURES: dict[str, float] = {  # Pa
    "bar": STANDARD_PRESSURE,
    "atm": STANDARD_ATMOSPHERE,
    "Pa": 1.0,
    "kPa": 1e3,
    "MPa": 1e6,
    "mbar": 100.0,
    "torr": STANDARD_ATMOSPHERE / 760,
    "mmHg": STANDARD_ATMOSPHERE / 760,  # to 2e-7 the same
    "psi": _PSI,
}
CONCENTRATIONS: dict[str, float] = {  # mol/m3
    "mol/L": 1e3,
    "mol/l": 1e3,
    "mol/dm3": 1e3,
    "M": 1e3,
    "mmol/L": 1.0,
    "mol/m3": 1.0,
    "kmol/m3": 1e3,
    "mol/cm3": 1e6,
    "mol/cc": 1e6,
}
DIMENSIONLESS = ("1", "", "-", "dimensionless")
_ALIASES = {"psia": "psi", "psi(a)": "psi", "Torr": "torr", "bara": "bar", "bar(a)": "bar"}
_POWER = re.compile(
    r"\(?(?P<base>[^\s^*()]+(?:\(a\))?)\)?\s*(?:(?:\^|\*\*)\s*\(?(?P<power>[-+]?\d+(?:[./]\d+)?)\)?)\Z"
)


@dataclass(frozen=True)
class ConstantUnit:
    """Unit of an equilibrium constant.

    Attributes:
        base: "1" (no unit, standard pressure 1 bar), a unit of pressure, or a unit of concentration.
    """

    base: str = "1"

    @classmethod
    def of(cls, text: str, gas_change: Fraction, *, reaction: str = "") -> ConstantUnit:
        """The unit written as "atm", "atm^2", "bar^-1", "mol/L" or "1"; the power may be left out.

        Raises:
            ReactionError: no such unit, or a power that is not the Delta nu of the reaction.
        """
        word = text.strip()
        if word in DIMENSIONLESS:
            return cls("1")
        match = _POWER.match(word)
        base = match["base"] if match else word
        base = _ALIASES.get(base, base)
        if base not in PRESSURES and base not in CONCENTRATIONS:
            allowed = ", ".join(["1", *PRESSURES, *CONCENTRATIONS])
            raise ReactionError(
                reaction, f"{text!r} is no unit of an equilibrium constant; allowed: {allowed}"
            )
        if match and Fraction(match["power"]) != gas_change:
            raise ReactionError(
                reaction,
                f"the unit {text!r} does not fit: moles of gas change by {gas_change}, so K has "
                f"{cls(base).symbol(gas_change)}",
            )
        return cls(base)

    def symbol(self, gas_change: Fraction) -> str:
        """The unit with its power, as printed: `atm^2`, or `1`."""
        if self.base == "1" or not gas_change:
            return "1"
        base = f"({self.base})" if "/" in self.base and gas_change != 1 else self.base
        return base if gas_change == 1 else f"{base}^{gas_change}"

    def in_words(self, gas_change: Fraction) -> str:
        """`in atm^2`, `at 1 bar`, or `without unit`, after "K"."""
        symbol = self.symbol(gas_change)
        if symbol != "1":
            return f"in {symbol}"
        return "at 1 bar" if gas_change else "without unit"

    def log_factor(self, gas_change: Fraction, T: ArrayLike) -> Array:
        """ln K - ln K_given [1], where ln K is at 1 bar; shape of T [K]."""
        T = np.asarray(T, dtype=np.float64)
        if self.base == "1":
            return np.zeros_like(T)
        if self.base in PRESSURES:
            ratio = math.log(PRESSURES[self.base] / STANDARD_PRESSURE)
            return np.full_like(T, float(gas_change) * ratio)
        in_pascal = CONCENTRATIONS[self.base] * GAS_CONSTANT * T
        return np.asarray(float(gas_change) * np.log(in_pascal / STANDARD_PRESSURE))

    def to_standard(self, ln_K: ArrayLike, gas_change: Fraction, T: ArrayLike) -> Array:
        """ln K at 1 bar of ln K in this unit."""
        return np.asarray(ln_K, dtype=np.float64) + self.log_factor(gas_change, T)

    def from_standard(self, ln_K: ArrayLike, gas_change: Fraction, T: ArrayLike) -> Array:
        """ln K in this unit of ln K at 1 bar."""
        return np.asarray(ln_K, dtype=np.float64) - self.log_factor(gas_change, T)
