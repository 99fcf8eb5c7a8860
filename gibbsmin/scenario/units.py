"""Units of a scenario file: which are read, how they are spelled, and their exact conversion.

Conversion factors come from pint, worked out in rational numbers, so that 1 kmol/h is exactly 1000 mol/h and
0.1 bar exactly 10000 Pa. Nothing but the units below is read; a bare number never gets a silent unit.

Spelling:

- temperature: K, degC, degF;
- absolute pressure: Pa, hPa, kPa, MPa, mbar, bar, atm, torr, psi(a); bar(a) and its like are read too;
- gauge pressure: kPa(g), MPa(g), mbar(g), bar(g), psi(g); the habitual barg, bara, psig, psia and "bar gauge"
  are read as well. Plain "psi" is refused: some readers take it for gauge, some for absolute;
- amount: mol, kmol, lbmol, g, kg, t, lb, normal m3 (273.15 K, 101325 Pa: DIN 1343), standard m3 (288.15 K,
  101325 Pa: ISO 13443), alone or per s, min, h or d; Nm3 and Sm3 are read as well.
"""

from __future__ import annotations

import re
from collections.abc import Iterable
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction
from functools import cache
from importlib.resources import files
from typing import Any, Literal

from gibbsmin.constants import GAS_CONSTANT, NORMAL_PRESSURE, NORMAL_TEMPERATURE
from gibbsmin.scenario.ratios import as_exact
from gibbsmin.scenario.words import listed, nearest

STANDARD_GAS_TEMPERATURE = (
    288.15  # K, of the standard cubic metre, ISO 13443; its pressure is that of the normal one
)

_TEMPERATURE = {"K": "kelvin", "degC": "degree_Celsius", "degF": "degree_Fahrenheit"}
_DEGREES = {"K": "kelvin", "degC": "delta_degree_Celsius", "degF": "delta_degree_Fahrenheit"}
_PRESSURE = {
    "Pa": "pascal",
    "hPa": "hectopascal",
    "kPa": "kilopascal",
    "MPa": "megapascal",
    "mbar": "millibar",
    "bar": "bar",
    "atm": "standard_atmosphere",
    "torr": "torr",
    "psi(a)": "pound_force_per_square_inch",
}
_GAUGE = {
    "kPa(g)": "kilopascal",
    "MPa(g)": "megapascal",
    "mbar(g)": "millibar",
    "bar(g)": "bar",
    "psi(g)": "pound_force_per_square_inch",
}
_MOLES = {"mol": "mole", "kmol": "kilomole", "lbmol": "pound / gram * mole"}
_MASS = {"g": "gram", "kg": "kilogram", "t": "metric_ton", "lb": "pound"}
_GAS_VOLUME = {"normal m3": NORMAL_TEMPERATURE, "standard m3": STANDARD_GAS_TEMPERATURE}
_TIME = {"s": "second", "min": "minute", "h": "hour", "d": "day"}

_ALIASES = {
    "°C": "degC",
    "°F": "degF",
    "Nm3": "normal m3",
    "Sm3": "standard m3",
    "normal m³": "normal m3",
    "standard m³": "standard m3",
    "Nm³": "normal m3",
    "Sm³": "standard m3",
    "psia": "psi(a)",
    "psi absolute": "psi(a)",
    **{f"{unit}(a)": unit for unit in ("kPa", "MPa", "mbar", "bar")},
    **{f"{unit}a": unit for unit in ("kPa", "MPa", "mbar", "bar")},
    **{f"{unit} absolute": unit for unit in ("kPa", "MPa", "mbar", "bar")},
    **{f"{unit[:-3]}g": unit for unit in _GAUGE},
    **{f"{unit[:-3]} gauge": unit for unit in _GAUGE},
}

_TEMPERATURE_WORDS = {"c": "degC", "celsius": "degC", "f": "degF", "fahrenheit": "degF", "kelvin": "K"}
"""Not read, for C is the coulomb and F the farad, but understood well enough to suggest the right word."""

_QUANTITY = re.compile(r"\s*([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d{1,3})?)\s*(.*?)\s*\Z", re.DOTALL)

Kind = Literal["temperature", "temperature difference", "pressure", "pressure difference", "amount"]


class UnitFault(ValueError):  # noqa: N818  caught at once and turned into a Fault with its place
    """A quantity that cannot be read; the message says what was found and what is allowed."""


@dataclass(frozen=True)
class Unit:
    """A unit that was looked up: SI value = scale * number + offset.

    Attributes:
        symbol: the spelling used in results.
        kind: of quantity. The SI value of an "amount" is in mol or kg (`by_mass`), or per hour (`rate`).
    """

    symbol: str
    kind: Kind
    scale: Fraction
    offset: Fraction = Fraction(0)
    by_mass: bool = False
    rate: bool = False

    def to_si(self, number: Fraction) -> Fraction:
        return self.scale * number + self.offset

    def from_si(self, value: Fraction) -> Fraction:
        return (value - self.offset) / self.scale


@dataclass(frozen=True)
class Quantity:
    """A number with its unit, exact."""

    number: Fraction
    unit: Unit

    @property
    def si(self) -> Fraction:
        return self.unit.to_si(self.number)


def read_quantity(value: Any, kind: Kind, *, unit: str | None = None, ambient: Fraction) -> Quantity:
    """Read '850 degC', or a plain number whose unit is given beside it.

    Args:
        value: text, int or float of the file.
        kind: of quantity that is expected.
        unit: unit of plain numbers, or None.
        ambient: Pa, added to gauge pressures.

    Raises UnitFault.
    """
    number, word = split_quantity(value)
    if not word:
        if unit is None:
            raise UnitFault(f"{value!r} has no unit; allowed: {listed(allowed_units(kind))}")
        word = unit
    elif unit is not None and find_unit(word, kind, ambient=ambient) != find_unit(
        unit, kind, ambient=ambient
    ):
        raise UnitFault(
            f"{value!r} has a unit of its own, but the unit {unit!r} is given for all values beside it"
        )
    return Quantity(number, find_unit(word, kind, ambient=ambient))


def split_quantity(value: Any) -> tuple[Fraction, str]:
    """Exact number and unit word ('' if there is none) of a value. Raises UnitFault."""
    if isinstance(value, int) and not isinstance(value, bool):
        return Fraction(value), ""
    if isinstance(value, float):
        return as_exact(value), ""
    match = _QUANTITY.match(str(value))
    if not match:
        raise UnitFault(f"expected a number with its unit, found {value!r}")
    number, word = match.groups()
    if word[:1] in (",", ".") or (word[:1].isdigit()):
        raise UnitFault(f"cannot read the number in {value!r}; write decimals with a point and no separators")
    return Fraction(Decimal(number)), " ".join(word.split())


def allowed_units(kind: Kind) -> list[str]:
    """Spellings of a kind, for messages; units of amount without their 'per time'."""
    if kind in ("temperature", "temperature difference"):
        return list(_TEMPERATURE)
    if kind in ("pressure", "pressure difference"):
        return [*_PRESSURE, *_GAUGE]
    return [*_MOLES, *_MASS, *_GAS_VOLUME, "and these /s, /min, /h, /d"]


def find_unit(word: str, kind: Kind, *, ambient: Fraction) -> Unit:
    """The unit a word of the file means. Raises UnitFault with the allowed ones and the nearest."""
    symbol = _ALIASES.get(word, word)
    if kind == "temperature" and symbol in _TEMPERATURE:
        return _affine(symbol, kind, _TEMPERATURE[symbol], "kelvin")
    if kind == "temperature difference" and symbol in _DEGREES:
        return _affine(symbol, kind, _DEGREES[symbol], "kelvin")
    if kind in ("pressure", "pressure difference"):
        if symbol in _PRESSURE:
            return _affine(symbol, kind, _PRESSURE[symbol], "pascal")
        if symbol in _GAUGE:
            unit = _affine(symbol, kind, _GAUGE[symbol], "pascal")
            return unit if kind == "pressure difference" else Unit(symbol, kind, unit.scale, ambient)
        if symbol.casefold() == "psi":
            raise UnitFault("plain 'psi' may mean absolute or gauge; write psi(a) or psi(g)")
    if kind == "amount":
        unit_of_amount = _amount(word)
        if unit_of_amount is not None:
            return unit_of_amount
    known: Iterable[str] = [*allowed_units(kind), *_ALIASES] if kind != "amount" else _amount_spellings()
    listing = listed(allowed_units(kind))
    hint = nearest(_TEMPERATURE_WORDS.get(word.casefold(), word), known)
    raise UnitFault(f"{word!r} is not a unit of {kind}; allowed: {listing}{hint}")


def _amount(word: str) -> Unit | None:
    what, slash, per = (part.strip() for part in word.partition("/"))
    what = _ALIASES.get(what, what)
    if slash and per not in _TIME:
        return None
    symbol = f"{what}/{per}" if slash else what
    per_hour = _scale("hour", _TIME[per]) if slash else Fraction(1)
    if what in _MOLES:
        scale = _scale(_MOLES[what], "mole")
    elif what in _MASS:
        scale = _scale(_MASS[what], "kilogram")
    elif what in _GAS_VOLUME:
        # ideal gas, which is what a normal cubic metre stands for
        scale = as_exact(NORMAL_PRESSURE) / (as_exact(GAS_CONSTANT) * as_exact(_GAS_VOLUME[what]))
    else:
        return None
    return Unit(symbol, "amount", scale * per_hour, by_mass=what in _MASS, rate=bool(slash))


def _amount_spellings() -> list[str]:
    alone = [*_MOLES, *_MASS, *_GAS_VOLUME, "Nm3", "Sm3"]
    return alone + [f"{unit}/{time}" for unit in alone for time in _TIME]


@cache
def _registry() -> Any:
    import pint  # 0.15 s, so only when a unit is met

    registry: Any = pint.UnitRegistry(None, non_int_type=Fraction)
    registry.load_definitions(files(__package__).joinpath("units.txt").read_text("utf-8").splitlines())
    return registry


@cache
def _scale(unit: str, target: str) -> Fraction:
    return Fraction(_registry().Quantity(Fraction(1), unit).to(target).magnitude)


@cache
def _affine(symbol: str, kind: Kind, unit: str, target: str) -> Unit:
    quantity = _registry().Quantity
    at_zero = Fraction(quantity(Fraction(0), unit).to(target).magnitude)
    at_one = Fraction(quantity(Fraction(1), unit).to(target).magnitude)
    return Unit(symbol, kind, at_one - at_zero, at_zero)
