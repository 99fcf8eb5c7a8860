"""K(T) and the standard functions: identities, units, validity, and published values with the source beside each."""

from __future__ import annotations

import math
from fractions import Fraction

import numpy as np
import pytest

from gibbsmin.constants import GAS_CONSTANT
from gibbsmin.errors import ReactionError, TemperatureRangeError
from gibbsmin.reactions import Correlation, direction, read_reaction, standard_functions, validity
from gibbsmin.reactions.constant_units import ConstantUnit
from gibbsmin.reactions.standard import ReactionFunctions
from tests.test_published_thermodynamics import janaf_table

SHIFT = read_reaction("CO + H2O = CO2 + H2", name="shift")
REFORMING = read_reaction("CH4 + H2O = CO + 3 H2", name="reforming")
REACTIONS = {
    "shift": SHIFT,
    "reforming": REFORMING,
    "ammonia": read_reaction("N2 + 3 H2 = 2 NH3"),
    "boudouard": read_reaction("C(gr) + CO2 = 2 CO"),
    "lime": read_reaction("CaCO3(s) = CaO(s) + CO2"),
    "sulphur": read_reaction("2 H2S + SO2 = 3/2 S2 + 2 H2O"),
}


@pytest.mark.parametrize("name", REACTIONS)
def test_gibbs_helmholtz(name: str) -> None:
    """d ln K / dT = Delta H / (R T^2), d Delta H / dT = Delta Cp, ln K = -Delta G / RT, Delta G = Delta H - T Delta S."""
    functions = ReactionFunctions(REACTIONS[name])
    T = np.linspace(310.0, 1190.0, 45)
    # Central differences over 0.02 K: truncation below 1e-9, rounding 1e-12.
    h = 0.01
    slope = (functions.ln_K(T + h) - functions.ln_K(T - h)) / (2 * h)
    np.testing.assert_allclose(slope * T**2, functions.enthalpy_R(T), rtol=2e-6, atol=0.02)
    bend = (functions.enthalpy_R(T + h) - functions.enthalpy_R(T - h)) / (2 * h)
    np.testing.assert_allclose(bend, functions.heat_capacity_R(T), atol=2e-5)
    np.testing.assert_allclose(
        functions.ln_K(T), -functions.enthalpy_R(T) / T + functions.entropy_R(T), rtol=1e-12, atol=1e-10
    )
    found = standard_functions(REACTIONS[name], T)
    np.testing.assert_allclose(found.gibbs, found.enthalpy - T * found.entropy, rtol=1e-10, atol=1e-6)


def test_integral_of_van_t_hoff() -> None:
    """ln K(1200) - ln K(400) by quadrature of Delta H / (R T^2): an independent route to the same number."""
    from scipy.integrate import quad

    functions = ReactionFunctions(REFORMING)
    whole, _ = quad(
        lambda T: float(functions.enthalpy_R(T)[0]) / T**2, 400, 1200, epsabs=1e-11, points=[1000]
    )
    one, two = functions.ln_K([400.0, 1200.0])
    assert two - one == pytest.approx(whole, abs=1e-7)


@pytest.mark.parametrize("standard_pressure", [101325.0, 1e5, 1.0])
def test_another_standard_pressure(standard_pressure: float) -> None:
    T = [600.0, 900.0]
    at_bar = standard_functions(REFORMING, T)
    other = standard_functions(REFORMING, T, standard_pressure=standard_pressure)
    np.testing.assert_allclose(other.ln_K, at_bar.ln_K + 2 * math.log(1e5 / standard_pressure), rtol=1e-13)
    np.testing.assert_allclose(other.gibbs, other.enthalpy - np.array(T) * other.entropy, rtol=1e-10)
    np.testing.assert_allclose(other.enthalpy, at_bar.enthalpy)
    # Kp in a unit does not know the standard pressure.
    np.testing.assert_allclose(other.Kp("atm"), at_bar.Kp("atm"), rtol=1e-12)


def test_units_of_constants() -> None:
    K = np.exp(standard_functions(REFORMING, 1000.0).ln_K)
    found = standard_functions(REFORMING, 1000.0)
    assert found.Kp("bar^2") == pytest.approx(K, rel=1e-12)
    assert found.Kp("atm^2") == pytest.approx(K / 1.01325**2, rel=1e-12)
    assert found.Kp("Pa") == pytest.approx(K * 1e10, rel=1e-12)
    assert found.Kp("mol/L") == pytest.approx(K * (1e5 / (GAS_CONSTANT * 1000.0 * 1000.0)) ** 2, rel=1e-12)
    assert ConstantUnit("atm").symbol(Fraction(2)) == "atm^2"
    assert ConstantUnit("atm").symbol(Fraction(0)) == "1"
    assert ConstantUnit("mol/L").symbol(Fraction(-1, 2)) == "(mol/L)^-1/2"


@pytest.mark.parametrize(
    ("unit", "words"),
    [
        ("atm^-2", "does not fit: moles of gas change by 2, so K has atm^2"),
        ("furlong", "is no unit of an equilibrium constant; allowed: 1, bar, atm"),
    ],
)
def test_units_that_do_not_fit(unit: str, words: str) -> None:
    with pytest.raises(ReactionError) as caught:
        standard_functions(REFORMING, 1000.0).Kp(unit)
    assert words in str(caught.value)


def test_validity_from_the_records() -> None:
    lime = validity(REACTIONS["lime"])
    assert (lime.lower, lime.upper, lime.upper_species) == (200.0, 1603.0, "CaCO3(cr)")
    quartz = validity(read_reaction("SiO2(cd) + 2 H2 = Si(cd) + 2 H2O"))
    assert any("SiO2" in str(each) for each in quartz.transitions)
    with pytest.raises(TemperatureRangeError, match="CaCO3"):
        standard_functions(REACTIONS["lime"], 1700.0)
    beyond = standard_functions(REACTIONS["lime"], 1700.0, extrapolate=True)
    assert beyond.extrapolated.all()
    assert np.isfinite(beyond.ln_K).all()


def test_direction_and_why() -> None:
    assert "falls with temperature: the reaction gives off heat" in direction(SHIFT, [500, 900])
    assert "rises with temperature: the reaction takes up heat" in direction(REFORMING, [500, 900])
    turning = read_reaction("CO + H2S = COS + H2")
    words = direction(turning, np.linspace(1000, 2500, 301))
    assert "K turns at 1621 K, where Delta H changes sign" in words
    functions = ReactionFunctions(turning)
    assert functions.ln_K([1500.0]) > functions.ln_K([1621.0]) < functions.ln_K([1750.0])


@pytest.mark.parametrize("bad", [0.0, -5.0, math.nan, math.inf])
def test_bad_temperatures(bad: float) -> None:
    with pytest.raises(ReactionError, match="above 0 K"):
        standard_functions(SHIFT, [300.0, bad])


# --- published -----------------------------------------------------------------------------------------------

LN10 = math.log(10.0)


@pytest.mark.parametrize(
    ("text", "tolerance"),
    [
        ("CO + H2O = CO2 + H2", 0.008),
        ("H2 + 1/2 O2 = H2O", 0.006),
        ("CO + 1/2 O2 = CO2", 0.006),
        ("1/2 N2 + 3/2 H2 = NH3", 0.016),
        ("1/2 H2 + 1/2 Cl2 = HCl", 0.002),
        ("2 NH3 + 3/2 O2 = N2 + 3 H2O", 0.048),
        ("CH4 + H2O = CO + 3 H2", 0.15),
        ("C2H4 + 3 O2 = 2 CO2 + 2 H2O", 0.008),
    ],
)
def test_constants_of_nist_janaf(text: str, tolerance: float) -> None:
    """NIST-JANAF Thermochemical Tables, 4th ed. (1998): log K of the reaction from log Kf of each compound, 298 to
    3000 K. Each is printed to 0.001. Largest differences measured: 0.0073, 0.0055, 0.0057, 0.0158, 0.0013, 0.0472, 0.1370,
    0.0068, all but the third above 2800 K, where the heat capacities of CH4 and NH3 differ."""
    reaction = read_reaction(text)
    tables = []
    for each, nu in zip(reaction.species, reaction.coefficients, strict=True):
        if each.name not in ("H2", "O2", "N2", "Cl2"):  # reference elements: log Kf = 0
            T, log_k, _ = janaf_table(each.name)
            tables.append({t: float(nu) * value for t, value in zip(T.tolist(), log_k.tolist(), strict=True)})
    T = np.array(sorted(set.intersection(*(set(table) for table in tables))))
    assert len(T) >= 28
    expected = [sum(table[t] for table in tables) for t in T.tolist()]
    found = ReactionFunctions(reaction).ln_K(T) / LN10
    assert np.abs(found - expected).max() < tolerance


def test_published_table_of_the_shift_reaction() -> None:
    """M. V. Twigg (ed.), *Catalyst Handbook*, 2nd ed. (1989), appendix on the water-gas shift equilibrium; values from
    memory. They are 3.5 to 4.6 per cent below ours, 1.6 to 6 K: the handbook goes back to older data."""
    celsius = np.array([200, 250, 300, 350, 400, 450, 500.0])
    published = np.array([227.9, 86.51, 39.22, 20.34, 11.70, 7.311, 4.878])
    found = np.exp(ReactionFunctions(SHIFT).ln_K(celsius + 273.15))
    deviation = 100 * (published / found - 1)
    assert (deviation < -3.0).all()
    assert (deviation > -5.0).all()


def test_published_table_of_steam_reforming() -> None:
    """Same book, appendix on the methane-steam equilibrium (values from memory): within 6 per cent of K in bar^2,
    most at 300 degC. At 0.27 kJ/mol the two formation enthalpies of CH4 in use differ by 6 per cent of K there."""
    celsius = np.array([300, 400, 500, 600, 700, 800, 900.0])
    published = np.array([6.378e-8, 5.737e-5, 9.433e-3, 0.5023, 12.13, 164.5, 1440.0])
    found = standard_functions(REFORMING, celsius + 273.15).Kp("bar^2")
    assert np.abs(published / found - 1).max() < 0.06


def test_xu_and_froment_constants_of_reforming() -> None:
    """J. Xu & G. F. Froment, AIChE J. 35 (1989) 88: K = exp(30.114 - 26830/T) bar^2, from memory; for 500 to 850 degC.
    It stays within 3.5 per cent of K of the data there, 0.94 K at most."""
    T = np.linspace(773.15, 1123.15, 15)
    short = Correlation.of("ln K = 30.114 - 26830/T", REFORMING, unit="bar^2")
    assert np.abs(np.exp(short.ln_K(T) - ReactionFunctions(REFORMING).ln_K(T)) - 1).max() < 0.04
