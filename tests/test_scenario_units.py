"""Units of a scenario file against published factors, their spelling, and what is refused."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import pint
import pytest

from gibbsmin.scenario import units
from gibbsmin.scenario.units import UnitFault, find_unit, read_quantity, split_quantity

ATMOSPHERE = Fraction(101325)


def si(text: str, kind: units.Kind) -> Fraction:
    return read_quantity(text, kind, ambient=ATMOSPHERE).si


# Factors as printed in NIST Special Publication 811 (2008), appendix B.8; tolerance: half of the last digit.
PUBLISHED_PRESSURES = [
    ("1 atm", 101325.0, 0.0),
    ("1 bar", 1.0e5, 0.0),
    ("1 mbar", 100.0, 0.0),
    ("1 torr", 133.3224, 0.5e-4),
    ("1 psi(a)", 6894.757, 0.5e-3),
    ("1 hPa", 100.0, 0.0),
    ("1 kPa", 1e3, 0.0),
    ("1 MPa", 1e6, 0.0),
]


@pytest.mark.parametrize(("text", "pascal", "tolerance"), PUBLISHED_PRESSURES)
def test_pressure_units_have_their_published_size(text: str, pascal: float, tolerance: float) -> None:
    assert abs(float(si(text, "pressure")) - pascal) <= tolerance


@pytest.mark.parametrize(
    ("text", "kelvin"),
    [
        ("0 degC", Fraction("273.15")),  # definition, BIPM, The International System of Units (2019)
        ("100 °C", Fraction("373.15")),
        ("32 degF", Fraction("273.15")),  # NIST SP 811: t/degC = (t/degF - 32)/1.8
        ("212 degF", Fraction("373.15")),
        ("-40 degF", Fraction("233.15")),
        ("1100.5 K", Fraction("1100.5")),
    ],
)
def test_temperatures_convert_exactly(text: str, kelvin: Fraction) -> None:
    assert si(text, "temperature") == kelvin


def test_a_degree_is_a_difference_where_a_step_is_meant() -> None:
    assert si("10 degC", "temperature difference") == 10
    assert si("9 degF", "temperature difference") == 5
    assert si("2 bar(g)", "pressure difference") == 200_000


@pytest.mark.parametrize("word", ["bar(g)", "barg", "bar gauge"])
def test_gauge_pressure_starts_from_the_ambient_pressure(word: str) -> None:
    assert si(f"3 {word}", "pressure") == 300_000 + 101_325
    at_altitude = read_quantity(f"3 {word}", "pressure", ambient=Fraction(80_000))
    assert at_altitude.si == 380_000
    assert at_altitude.unit.symbol == "bar(g)"
    assert at_altitude.unit.from_si(Fraction(380_000)) == 3


@pytest.mark.parametrize("word", ["psi(a)", "psia", "psi absolute"])
def test_absolute_spellings_mean_the_same(word: str) -> None:
    assert find_unit(word, "pressure", ambient=ATMOSPHERE) == find_unit(
        "psi(a)", "pressure", ambient=ATMOSPHERE
    )


def test_amounts_keep_decimals_exact() -> None:
    assert si("0.1 mol", "amount") == Fraction(1, 10)
    assert si("1.7 kmol/h", "amount") == 1700
    assert si("1 mol/s", "amount") == 3600
    assert si("24 kg/d", "amount") == 1


def test_amounts_in_pounds_and_tonnes() -> None:
    # international avoirdupois pound: 0.453 592 37 kg exactly, NIST SP 811
    assert si("1 lb", "amount") == Fraction("0.45359237")
    assert si("1 lbmol", "amount") == Fraction("453.59237")
    assert si("1 t/h", "amount") == 1000


def test_normal_and_standard_cubic_metre() -> None:
    # CODATA 2018: molar volume of the ideal gas at 273.15 K, 101.325 kPa is 22.413 969 54... L/mol (cut off)
    assert 0 <= float(1 / si("1 normal m3", "amount")) - 22.41396954e-3 < 1e-11
    assert si("1 Nm3/h", "amount") == si("1 normal m3/h", "amount")
    assert si("1 Sm3", "amount") / si("1 Nm3", "amount") == Fraction("273.15") / Fraction("288.15")


def test_factors_agree_with_the_list_that_comes_with_pint() -> None:
    full: Any = pint.UnitRegistry(non_int_type=Fraction)
    tables = [
        (units._TEMPERATURE, "kelvin"),
        (units._DEGREES, "kelvin"),
        (units._PRESSURE, "pascal"),
        (units._GAUGE, "pascal"),
        (units._MASS, "kilogram"),
        (units._MOLES, "mole"),
        (units._TIME, "second"),
    ]
    for table, target in tables:
        for unit in table.values():
            # lbmol is no single unit, so ask for the quantity rather than a number in a unit
            theirs = full.Quantity(Fraction(7), unit).to(target).magnitude
            ours = units._registry().Quantity(Fraction(7), unit).to(target).magnitude
            assert Fraction(theirs) == Fraction(ours), unit


@pytest.mark.parametrize(
    ("text", "kind", "said"),
    [
        ("5 psi", "pressure", "psi(a) or psi(g)"),
        ("5 baar", "pressure", "did you mean 'bar'?"),
        ("5 Bar", "pressure", "did you mean 'bar'?"),
        ("5 mol", "pressure", "is not a unit of pressure; allowed: Pa, hPa"),
        ("5 C", "temperature", "is not a unit of temperature; allowed: K, degC, degF; did you mean 'degC'?"),
        ("5", "temperature", "has no unit"),
        ("5,3 bar", "pressure", "write decimals with a point"),
        ("1 000 bar", "pressure", "no separators"),
        ("bar", "pressure", "expected a number with its unit"),
        ("nan K", "temperature", "expected a number with its unit"),
        ("5 kmol/week", "amount", "is not a unit of amount"),
        ("5 kmoll/h", "amount", "did you mean 'kmol/h'?"),
    ],
)
def test_what_cannot_be_read_is_refused_with_a_hint(text: str, kind: units.Kind, said: str) -> None:
    with pytest.raises(UnitFault) as caught:
        read_quantity(text, kind, ambient=ATMOSPHERE)
    assert said in str(caught.value)


def test_a_unit_beside_the_values_and_one_with_the_value_must_agree() -> None:
    assert read_quantity(5, "pressure", unit="kPa", ambient=ATMOSPHERE).si == 5000
    assert read_quantity("5 barg", "pressure", unit="bar(g)", ambient=ATMOSPHERE).si == 601_325
    with pytest.raises(UnitFault, match="has a unit of its own"):
        read_quantity("5 bar", "pressure", unit="kPa", ambient=ATMOSPHERE)


def test_numbers_are_read_as_the_decimals_they_are() -> None:
    assert split_quantity("1e-3 mol") == (Fraction(1, 1000), "mol")
    assert split_quantity(0.1) == (Fraction(1, 10), "")
    assert split_quantity(".5 bar") == (Fraction(1, 2), "bar")
