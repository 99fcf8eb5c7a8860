"""Shortcuts of ln K, the three measures of their error, windows, and best correlations with their guarantee."""

from __future__ import annotations

import math
import re
from fractions import Fraction

import numpy as np
import pytest

from gibbsmin.errors import ReactionError
from gibbsmin.reactions import (
    ConstantEnthalpy,
    ConstantHeatCapacity,
    Correlation,
    Tolerance,
    best_fit,
    best_fits,
    read_reaction,
    shortcut_errors,
    windows,
)
from gibbsmin.reactions.best_correlation import fewest_terms
from gibbsmin.reactions.shortcut_error import equivalent_temperature
from gibbsmin.reactions.standard import ReactionFunctions

SHIFT = read_reaction("CO + H2O = CO2 + H2", name="shift")
REFORMING = read_reaction("CH4 + H2O = CO + 3 H2", name="reforming")


def test_tangents_touch() -> None:
    """At the reference temperature the error and its slope vanish; with constant Delta Cp the curvature too."""
    functions = ReactionFunctions(REFORMING)
    for shortcut, order in (
        (ConstantEnthalpy.from_data(REFORMING, 900.0), 2),
        (ConstantHeatCapacity.from_data(REFORMING, 900.0), 3),
    ):
        far, near = (
            float(np.abs(shortcut.ln_K(900.0 + step) - functions.ln_K(900.0 + step)[0]))
            for step in (20.0, 10.0)
        )
        assert math.log2(far / near) == pytest.approx(order, abs=0.1)
        assert shortcut.ln_K(900.0) == pytest.approx(functions.ln_K(900.0)[0], abs=1e-13)


def test_secant_goes_through_both() -> None:
    functions = ReactionFunctions(SHIFT)
    shortcut = ConstantEnthalpy.through(SHIFT, 500.0, 700.0)
    np.testing.assert_allclose(shortcut.ln_K([500.0, 700.0]), functions.ln_K([500.0, 700.0]), atol=1e-13)
    given = ConstantEnthalpy.through(SHIFT, 500.0, 700.0, ln_K=(4.0, 2.0))
    np.testing.assert_allclose(given.ln_K([500.0, 700.0]), [4.0, 2.0], atol=1e-13)
    with pytest.raises(ReactionError, match="two different temperatures"):
        ConstantEnthalpy.through(SHIFT, 500.0, 500.0)


@pytest.mark.parametrize(
    "text",
    [
        "ln K = 4577.8/T - 4.33",
        "K = exp(4577.8/T - 4.33)",
        "ln Kp = -4.33 + 4577.8 / T",
        "lnK=-4.33+4.5778e3/T",
    ],
)
def test_one_correlation_in_several_spellings(text: str) -> None:
    assert float(Correlation.of(text, SHIFT).ln_K(700.0)) == pytest.approx(4577.8 / 700 - 4.33, rel=1e-14)


def test_all_terms_and_bases() -> None:
    T = 650.0
    read = Correlation.of(
        "log10 K = 1.5 - 2073/T + 0.5 ln(T) - 2 log10 T + 1e-3 T - 2e-7*T^2 + 3e4/T^2", SHIFT
    )
    expected = 1.5 - 2073 / T + 0.5 * math.log(T) - 2 * math.log10(T) + 1e-3 * T - 2e-7 * T**2 + 3e4 / T**2
    assert float(read.ln_K(T)) == pytest.approx(expected * math.log(10), rel=1e-13)
    in_atm = Correlation.of("ln K = 1 + 2/T", REFORMING, unit="atm^2")
    assert float(in_atm.ln_K(T)) == pytest.approx(1 + 2 / T + 2 * math.log(1.01325), rel=1e-13)
    assert "K in atm^2" in in_atm.describe()


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("4577.8/T - 4.33", "has no '='"),
        ("x = 4577.8/T", "must be ln K or log10 K"),
        ("ln K = 4577.8/T - 4.33 sin(T)", "is no term of a correlation"),
        ("ln K = 4577.8?T", "cannot read the term"),
        ("ln K = ", "at least one coefficient"),
    ],
)
def test_correlations_that_cannot_be_read(text: str, words: str) -> None:
    with pytest.raises(ReactionError) as caught:
        Correlation.of(text, SHIFT)
    assert words in str(caught.value)


def test_equivalent_temperature_error_does_the_same() -> None:
    """By definition: the exact ln K at T + error is the shortcut's ln K at T."""
    shortcut = ConstantEnthalpy.from_data(SHIFT, 298.15)
    T = np.linspace(400.0, 1500.0, 23)
    errors = shortcut_errors(shortcut, T)
    np.testing.assert_allclose(
        ReactionFunctions(SHIFT).ln_K(T + errors.kelvin), shortcut.ln_K(T), rtol=1e-9, atol=1e-9
    )
    np.testing.assert_allclose(errors.per_cent, 100 * (np.exp(errors.ln_K) - 1), rtol=1e-12)


def test_equivalent_temperature_is_nan_where_none_exists() -> None:
    functions = ReactionFunctions(SHIFT)
    assert np.isnan(equivalent_temperature(functions, 700.0, 100.0)).all()  # no T has K = e^100
    assert np.isfinite(equivalent_temperature(functions, 700.0, 3.0)).all()


def test_equivalent_temperature_stays_on_its_branch() -> None:
    """K of this reaction takes each value twice, below and above 1621 K; the nearer side of the turn is meant."""
    functions = ReactionFunctions(read_reaction("CO + H2S = COS + H2"))
    wanted = float(functions.ln_K(1200.0)[0])
    below = equivalent_temperature(functions, [1100.0, 1400.0], [wanted, wanted])
    np.testing.assert_allclose(below, 1200.0, atol=1e-4)
    above = float(equivalent_temperature(functions, 2000.0, wanted)[0])
    assert above > 1621
    assert float(functions.ln_K(above)[0]) == pytest.approx(wanted, abs=1e-9)


def test_window_edges_are_where_the_error_is_the_tolerance() -> None:
    shortcut = ConstantEnthalpy.from_data(REFORMING, 1000.0)
    for tolerance in (Tolerance(5.0), Tolerance(None, 2.0), Tolerance(5.0, 2.0)):
        window = next(
            each for each in windows(shortcut, tolerance, 400.0, 3500.0) if each.lower < 1000 < each.upper
        )
        assert 400 < window.lower < 1000 < window.upper < 3500
        errors = shortcut_errors(shortcut, [window.lower, window.upper])
        ratios = [
            np.abs(errors.per_cent) / 5.0 if tolerance.per_cent_of_K else np.zeros(2),
            np.abs(errors.kelvin) / 2.0 if tolerance.kelvin else np.zeros(2),
        ]
        np.testing.assert_allclose(np.max(ratios, axis=0), 1.0, rtol=1e-8)


def test_window_of_a_secant_is_in_one_piece_or_in_two() -> None:
    shortcut = ConstantEnthalpy.through(SHIFT, 473.15, 773.15)
    assert len(windows(shortcut, Tolerance(5.0), 300.0, 1500.0)) == 1
    apart = windows(shortcut, Tolerance(1.0), 300.0, 1500.0)  # near each of the two points only
    assert len(apart) == 2
    assert apart[0].lower < 473.15 < apart[0].upper < apart[1].lower < 773.15 < apart[1].upper


def test_audit_of_a_published_shift_correlation() -> None:
    """Moe, Chem. Eng. Prog. 58 (1962) 33, from memory: Kp = exp(4577.8/T - 4.33). Against the data over 200 to 500 degC it
    is 3.0 to 11.2 per cent of K low, most at 200 degC; 3.0 to 5.6 K. It keeps 5 per cent from 296 to 546 degC."""
    moe = Correlation.of("K = exp(4577.8/T - 4.33)", SHIFT, unit="atm")
    errors = shortcut_errors(moe, np.linspace(473.15, 773.15, 61))
    assert errors.per_cent.min() == pytest.approx(-11.24, abs=0.05)
    assert errors.per_cent.max() == pytest.approx(-3.04, abs=0.05)
    assert errors.per_cent[0] == errors.per_cent.min()
    assert errors.kelvin.min() == pytest.approx(2.98, abs=0.05)
    assert errors.kelvin.max() == pytest.approx(5.61, abs=0.05)
    (window,) = windows(moe, Tolerance(5.0), 400.0, 1000.0)
    assert (window.lower, window.upper) == (pytest.approx(569.2, abs=0.2), pytest.approx(819.9, abs=0.2))


# --- best fits -----------------------------------------------------------------------------------------------

WINDOWS = [
    (SHIFT, 473.15, 773.15, "1"),
    (REFORMING, 773.15, 1273.15, "atm^2"),
    (REFORMING, 600.0, 1400.0, "mol/L"),
]


@pytest.mark.parametrize(("reaction", "lower", "upper", "unit"), WINDOWS)
@pytest.mark.parametrize("terms", [2, 3, 4])
def test_best_fit_holds_its_guarantee_off_the_grid(reaction, lower, upper, unit, terms) -> None:  # type: ignore[no-untyped-def]
    fit = best_fit(reaction, lower, upper, terms=terms, unit=unit)
    T = np.random.default_rng(terms).uniform(lower, upper, 200_000)
    error = np.abs(fit.correlation.ln_K(T) - ReactionFunctions(reaction).ln_K(T)).max()
    assert error <= fit.largest_error
    # Honest also the other way: hardly larger than what is found, and than the best possible.
    assert fit.largest_error < 1.02 * error + 1e-8
    assert fit.best_possible <= fit.largest_error < 1.02 * fit.best_possible + 1e-8


@pytest.mark.parametrize("terms", [2, 3, 4])
def test_best_fit_equioscillates(terms: int) -> None:
    """Chebyshev's alternation theorem: the best fit of m terms reaches its largest error at m + 1 points, signs in
    turn. The linear program does not know the theorem."""
    fit = best_fit(SHIFT, 473.15, 773.15, terms=terms)
    T = np.linspace(473.15, 773.15, 4001)
    error = fit.correlation.ln_K(T) - ReactionFunctions(SHIFT).ln_K(T)
    signs = np.sign(error[np.abs(error) > 0.97 * np.abs(error).max()])
    assert 1 + int((np.diff(signs) != 0).sum()) == terms + 1


def test_more_terms_err_less_and_the_fewest_are_found() -> None:
    fits = best_fits(SHIFT, 473.15, 773.15)
    errors = [each.largest_error for each in fits]
    assert errors[0] > 10 * errors[1] > 20 * errors[2]
    assert errors[0] == pytest.approx(0.0178, abs=0.0002)  # 1.8 per cent of K for the straight line
    assert fewest_terms(fits, Tolerance(2.0)) is fits[0]
    assert fewest_terms(fits, Tolerance(1.0)) is fits[1]
    assert fewest_terms(fits, Tolerance(1e-6)) is None


def test_a_fit_of_what_the_terms_can_say_is_exact() -> None:
    """The electron and the ions of bare nuclei have cp = 5/2 R exactly, so Delta Cp of this exchange is constant and
    three terms say all: the error is rounding, and the linear program must not stumble over that."""
    fit = best_fit(read_reaction("He+ + Ne = He + Ne+"), 300.0, 320.0, terms=4)
    assert fit.largest_error < 1e-6


@pytest.mark.parametrize(("reaction", "lower", "upper", "unit"), WINDOWS)
def test_pasted_lines_evaluate_right(reaction, lower, upper, unit) -> None:  # type: ignore[no-untyped-def]
    """The very text printed, evaluated: Python by Python, the spreadsheet formula after renaming its functions."""
    for fit in best_fits(reaction, lower, upper, unit=unit):
        scope: dict[str, object] = {"math": math}
        exec(fit.python, scope)
        formula = fit.spreadsheet
        assert formula.startswith("=EXP(")
        translated = re.sub(r"\bEXP\b", "math.exp", formula[1:])
        translated = re.sub(r"\bLN\b", "math.log", translated)
        for T in np.linspace(lower, upper, 7).tolist():
            own = ReactionFunctions(reaction).ln_K(T)
            expected = float(fit.correlation.unit.from_standard(own, Fraction(reaction.gas_change), T)[0])
            pasted = eval(translated.replace("A1", repr(T)), {"math": math})
            assert scope["K"](T) == pytest.approx(pasted, rel=1e-12)  # type: ignore[operator]
            assert abs(math.log(pasted) - expected) <= fit.largest_error * (1 + 1e-9) + 1e-12


def test_transition_inside_the_window_keeps_the_guarantee() -> None:
    """Sulphur melts at 388 K: ln K of its evaporation has kinks inside the window."""
    reaction = read_reaction("2 S(cd) = S2")
    fit = best_fit(reaction, 330.0, 600.0, terms=3)
    T = np.linspace(330.0, 600.0, 300_007)
    assert np.abs(fit.correlation.ln_K(T) - ReactionFunctions(reaction).ln_K(T)).max() <= fit.largest_error


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ({"terms": 5}, "2, 3 or 4 terms"),
        ({"lower": 800.0}, "no window"),
        ({"unit": "atm^3"}, "does not fit"),
    ],
)
def test_best_fit_refuses(arguments: dict[str, object], words: str) -> None:
    options: dict[str, object] = {"lower": 473.15, "upper": 773.15, **arguments}
    with pytest.raises(ReactionError) as caught:
        best_fit(SHIFT, options.pop("lower"), options.pop("upper"), **options)  # type: ignore[arg-type]
    assert words in str(caught.value)
