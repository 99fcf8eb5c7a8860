"""Measured K: certified regressions, coverage of intervals, diagnostics, second and third law, published data sets."""

from __future__ import annotations

import math

import numpy as np
import pytest

from gibbsmin.constants import GAS_CONSTANT
from gibbsmin.errors import Fault, MeasurementError, ReactionError
from gibbsmin.reactions import ReactionFunctions, measured_constants, read_reaction, second_law, third_law
from gibbsmin.reactions.least_squares import fit, improvement_probability
from gibbsmin.reactions.measured import MeasuredConstants
from gibbsmin.reactions.third_law_analysis import data_uncertainty

SHIFT = read_reaction("CO + H2O = CO2 + H2", name="shift")
TETROXIDE = read_reaction("N2O4 = 2 NO2")
IODINE = read_reaction("I2 = 2 I")

# --- NIST StRD -----------------------------------------------------------------------------------------------
# NIST Statistical Reference Datasets, linear regression (certified values to 15 digits, from the data pages Norris,
# NoInt1, NoInt2, Longley, Wampler1 and Wampler2).

NORRIS_X = [
    0.2, 337.4, 118.2, 884.6, 10.1, 226.5, 666.3, 996.3, 448.6, 777.0, 558.2, 0.4, 0.6, 775.5, 666.9, 338.0, 447.5, 11.6,
    556.0, 228.1, 995.8, 887.6, 120.2, 0.3, 0.3, 556.8, 339.1, 887.2, 999.0, 779.0, 11.1, 118.3, 229.2, 669.1, 448.9, 0.5,
]  # fmt: skip
NORRIS_Y = [
    0.1, 338.8, 118.1, 888.0, 9.2, 228.1, 668.5, 998.5, 449.1, 778.9, 559.2, 0.3, 0.1, 778.1, 668.8, 339.3, 448.9, 10.8,
    557.7, 228.3, 998.0, 888.8, 119.6, 0.3, 0.6, 557.6, 339.3, 888.0, 998.5, 778.9, 10.2, 117.6, 228.9, 668.4, 449.2, 0.2,
]  # fmt: skip
LONGLEY = np.array([
    [60323, 83.0, 234289, 2356, 1590, 107608, 1947], [61122, 88.5, 259426, 2325, 1456, 108632, 1948],
    [60171, 88.2, 258054, 3682, 1616, 109773, 1949], [61187, 89.5, 284599, 3351, 1650, 110929, 1950],
    [63221, 96.2, 328975, 2099, 3099, 112075, 1951], [63639, 98.1, 346999, 1932, 3594, 113270, 1952],
    [64989, 99.0, 365385, 1870, 3547, 115094, 1953], [63761, 100.0, 363112, 3578, 3350, 116219, 1954],
    [66019, 101.2, 397469, 2904, 3048, 117388, 1955], [67857, 104.6, 419180, 2822, 2857, 118734, 1956],
    [68169, 108.4, 442769, 2936, 2798, 120445, 1957], [66513, 110.8, 444546, 4681, 2637, 121950, 1958],
    [68655, 112.6, 482704, 3813, 2552, 123366, 1959], [69564, 114.2, 502601, 3931, 2514, 125368, 1960],
    [69331, 115.7, 518173, 4806, 2572, 127852, 1961], [70551, 116.9, 554894, 4007, 2827, 130081, 1962],
])  # fmt: skip


def test_norris() -> None:
    x = np.array(NORRIS_X)
    found = fit(np.stack([np.ones_like(x), x], axis=1), np.array(NORRIS_Y))
    np.testing.assert_allclose(found.parameters, [-0.262323073774029, 1.00211681802045], rtol=1e-12)
    np.testing.assert_allclose(found.standard_errors, [0.232818234301152, 0.429796848199937e-03], rtol=1e-12)
    assert found.residual_deviation == pytest.approx(0.884796396144373, rel=1e-12)


def test_regressions_through_the_origin() -> None:
    x = np.arange(60.0, 71.0)[:, None]
    found = fit(x, np.arange(130.0, 141.0))
    assert found.parameters[0] == pytest.approx(2.07438016528926, rel=1e-13)
    assert found.standard_errors[0] == pytest.approx(0.165289256198347e-01, rel=1e-12)
    assert found.residual_deviation == pytest.approx(3.56753034006338, rel=1e-12)
    found = fit(np.array([[4.0], [5.0], [6.0]]), np.array([3.0, 4.0, 4.0]))
    assert found.parameters[0] == pytest.approx(0.727272727272727, rel=1e-13)
    assert found.standard_errors[0] == pytest.approx(0.420827318078432e-01, rel=1e-12)
    assert found.residual_deviation == pytest.approx(0.369274472937998, rel=1e-12)


def test_longley() -> None:
    """Columns that nearly depend on each other (condition number 5e9): nine digits and more."""
    found = fit(np.column_stack([np.ones(16), LONGLEY[:, 1:]]), LONGLEY[:, 0])
    certified = [
        -3482258.63459582,
        15.0618722713733,
        -0.358191792925910e-01,
        -2.02022980381683,
        -1.03322686717359,
        -0.511041056535807e-01,
        1829.15146461355,
    ]
    errors = [
        890420.383607373,
        84.9149257747669,
        0.334910077722432e-01,
        0.488399681651699,
        0.214274163161675,
        0.226073200069370,
        455.478499142212,
    ]
    np.testing.assert_allclose(found.parameters, certified, rtol=1e-9)
    np.testing.assert_allclose(found.standard_errors, errors, rtol=1e-9)
    assert found.residual_deviation == pytest.approx(304.854073561965, rel=1e-11)


def test_wampler() -> None:
    """Polynomials of the fifth degree over 0 ... 20, exactly representable: all coefficients 1, and 10^-k."""
    x = np.arange(21.0)
    powers = x[:, None] ** np.arange(6)
    np.testing.assert_allclose(fit(powers, powers.sum(axis=1)).parameters, np.ones(6), rtol=1e-8)
    coefficients = 10.0 ** -np.arange(6)
    np.testing.assert_allclose(fit(powers, powers @ coefficients).parameters, coefficients, rtol=1e-9)


@pytest.mark.parametrize("weighted", [False, True])
def test_diagnostics_agree_with_a_statistics_library(weighted: bool) -> None:
    """Covariance, leverage, studentised residuals, Cook's distance and the F-test against statsmodels' own."""
    statsmodels = pytest.importorskip("statsmodels.api")
    from statsmodels.stats.outliers_influence import OLSInfluence

    rng = np.random.default_rng(5)
    x = np.linspace(1.0, 2.0, 12)
    sigma = rng.uniform(0.5, 2.0, 12) if weighted else np.ones(12)
    y = 3 - 2 * x + sigma * rng.normal(size=12)
    matrix = np.stack([np.ones(12), x], axis=1)
    curved = np.column_stack([matrix, x**2])
    own = fit(matrix / sigma[:, None], y / sigma)
    theirs = statsmodels.WLS(y, matrix, weights=sigma**-2.0).fit()
    np.testing.assert_allclose(own.parameters, theirs.params, rtol=1e-10)
    np.testing.assert_allclose(own.covariance, theirs.cov_params(), rtol=1e-9)
    influence = OLSInfluence(statsmodels.OLS(y / sigma, matrix / sigma[:, None]).fit())
    np.testing.assert_allclose(own.leverage, influence.hat_matrix_diag, rtol=1e-9)
    np.testing.assert_allclose(own.studentised(), influence.resid_studentized_external, rtol=1e-8)
    np.testing.assert_allclose(own.cooks_distance(), influence.cooks_distance[0], rtol=1e-8)
    larger = fit(curved / sigma[:, None], y / sigma)
    whole = statsmodels.WLS(y, curved, weights=sigma**-2.0).fit()
    _, probability, _ = whole.compare_f_test(theirs)
    assert improvement_probability(own, larger) == pytest.approx(probability, rel=1e-8)
    # Stated uncertainties fix the scale: the covariance is then (X'WX)^-1.
    stated = fit(matrix, y, sigma)
    if not stated.enlarged:
        np.testing.assert_allclose(stated.covariance, theirs.normalized_cov_params, rtol=1e-9)


# --- known truth ---------------------------------------------------------------------------------------------

TRUE_H, TRUE_S = -40_000.0, -38.0  # J/mol, J/(mol K)
T = np.array([600.0, 620.0, 645.0, 670.0, 700.0, 735.0, 770.0, 800.0])


def synthetic(
    rng: np.random.Generator, sigma: np.ndarray, stated: bool, curve: float = 0.0
) -> MeasuredConstants:
    T_m = 1 / np.mean(1 / T)
    ln_K = -TRUE_H / (GAS_CONSTANT * T) + TRUE_S / GAS_CONSTANT
    ln_K = ln_K + curve / GAS_CONSTANT * (T_m / T - 1 - np.log(T_m / T)) + sigma * rng.normal(size=len(T))
    return measured_constants(SHIFT, T, ln_K, quantity="ln K", uncertainty=sigma if stated else None)


@pytest.mark.parametrize("stated", [False, True])
def test_intervals_cover_the_truth_as_often_as_they_say(stated: bool) -> None:
    """3000 seeded repeats of eight values, of unequal uncertainty where that is stated. 95 % intervals must hold the
    truth in 95 % of them; the standard deviation of that count is 0.4 %, so 93.8 to 96.2 % is three of them. With stated
    uncertainties one repeat in twenty is enlarged, which may add up to half a per cent. Measured: 94.5 and 94.6 % for
    Delta H, 94.6 and 94.6 % for Delta S."""
    rng = np.random.default_rng(11)
    sigma = np.array([0.02, 0.05, 0.03, 0.02, 0.04, 0.02, 0.06, 0.03]) if stated else np.full(8, 0.03)
    inside = np.zeros(3)
    repeats = 3000
    for _ in range(repeats):
        found = second_law(synthetic(rng, sigma, stated), bootstrap=0)
        inside += [
            found.enthalpy.lower <= TRUE_H <= found.enthalpy.upper,
            found.entropy.lower <= TRUE_S <= found.entropy.upper,
            abs(float(found.ln_K(np.array([1000.0]))[0]) - (-TRUE_H / 1000.0 + TRUE_S) / GAS_CONSTANT)
            <= float(found.half_width(np.array([1e-3]))[0]),
        ]
    share = inside / repeats
    low, high = 0.938, 0.967 if stated else 0.962
    assert (share >= low).all(), share
    assert (share <= high).all(), share


def test_curvature_is_found_when_there_and_rarely_when_not() -> None:
    rng = np.random.default_rng(3)
    sigma = np.full(8, 0.002)
    found = [second_law(synthetic(rng, sigma, False), bootstrap=0).curvature for _ in range(400)]
    alarms = np.mean([each is not None and each.demanded for each in found])
    assert alarms < 0.08  # the F-test alone has 5 %, AICc can only refuse
    bent = [second_law(synthetic(rng, sigma, False, curve=-60.0), bootstrap=0).curvature for _ in range(100)]
    assert np.mean([each is not None and each.demanded for each in bent]) > 0.9
    assert np.mean([each.heat_capacity.value for each in bent if each]) == pytest.approx(-60.0, abs=4.0)


def test_bootstrap_stands_beside_the_formula() -> None:
    rng = np.random.default_rng(8)
    many = np.tile(T, 5)
    ln_K = -TRUE_H / (GAS_CONSTANT * many) + TRUE_S / GAS_CONSTANT + 0.03 * rng.normal(size=len(many))
    data = measured_constants(SHIFT, many, ln_K, quantity="ln K")
    found = second_law(data)
    assert found.bootstrap_enthalpy[1] - found.bootstrap_enthalpy[0] == pytest.approx(
        found.enthalpy.upper - found.enthalpy.lower, rel=0.12
    )
    assert found.bootstrap_entropy[1] - found.bootstrap_entropy[0] == pytest.approx(
        found.entropy.upper - found.entropy.lower, rel=0.12
    )
    assert second_law(data).bootstrap_enthalpy == found.bootstrap_enthalpy  # seeded
    assert second_law(data, seed=1).bootstrap_enthalpy != found.bootstrap_enthalpy
    assert np.isnan(second_law(data, bootstrap=0).bootstrap_enthalpy).all()


def test_centring_changes_nothing_but_the_numerics() -> None:
    """Delta H, Delta S, their covariance: those of ln K = S/R - H/(R T) fitted without centring."""
    sigma = np.array([0.02, 0.05, 0.03, 0.02, 0.04, 0.02, 0.06, 0.03])
    data = synthetic(np.random.default_rng(2), sigma, True)
    found = second_law(data, bootstrap=0)
    direct = fit(np.stack([-1 / T, np.ones_like(T)], axis=1) / GAS_CONSTANT, data.ln_K, sigma)
    np.testing.assert_allclose([found.enthalpy.value, found.entropy.value], direct.parameters, rtol=1e-9)
    np.testing.assert_allclose(
        [found.enthalpy.standard_error, found.entropy.standard_error], direct.standard_errors, rtol=1e-7
    )
    expected = direct.covariance[0, 1] / np.prod(direct.standard_errors)
    assert found.correlation == pytest.approx(expected, rel=1e-7)
    assert found.correlation > 0.99
    # At the mean temperature ln K and its slope are uncorrelated.
    assert abs(found.fit.covariance[0, 1]) < 1e-9 * math.sqrt(
        found.fit.covariance[0, 0] * found.fit.covariance[1, 1]
    )
    assert float(found.half_width(np.array([0.0]))[0]) == pytest.approx(
        found.intercept.upper - found.intercept.value, rel=1e-9
    )


def test_an_outlier_is_found_and_leaving_it_out_is_told_right() -> None:
    data = synthetic(np.random.default_rng(4), np.full(8, 0.01), False)
    spoiled = data.ln_K.copy()
    spoiled[2] += 0.25
    found = second_law(measured_constants(SHIFT, T, spoiled, quantity="ln K"), bootstrap=0)
    assert [each.outlier for each in found.residuals] == [i == 2 for i in range(8)]
    kept = np.arange(8) != 2
    without = second_law(measured_constants(SHIFT, T[kept], spoiled[kept], quantity="ln K"), bootstrap=0)
    assert found.residuals[2].enthalpy_without == pytest.approx(without.enthalpy.value, rel=1e-9)
    assert not any(each.outlier for each in second_law(data, bootstrap=0).residuals)


def test_scatter_beyond_the_stated_uncertainty_enlarges_the_intervals() -> None:
    rng = np.random.default_rng(6)
    ln_K = -TRUE_H / (GAS_CONSTANT * T) + TRUE_S / GAS_CONSTANT + 0.05 * rng.normal(size=8)
    found = second_law(
        measured_constants(SHIFT, T, ln_K, quantity="ln K", uncertainty=np.full(8, 0.01)), bootstrap=0
    )
    assert found.fit.enlarged
    assert found.fit.scatter == pytest.approx(found.fit.residual_deviation)
    without = second_law(measured_constants(SHIFT, T, ln_K, quantity="ln K"), bootstrap=0)
    assert found.enthalpy.standard_error == pytest.approx(without.enthalpy.standard_error, rel=1e-9)


def test_units_and_quantities_say_the_same() -> None:
    K = np.exp(ReactionFunctions(TETROXIDE).ln_K(T[:4]))
    relative = 0.02
    forms = [
        measured_constants(TETROXIDE, T[:4], K, uncertainty=relative * K),
        measured_constants(TETROXIDE, T[:4], K / 1.01325, unit="atm", uncertainty=relative * K / 1.01325),
        measured_constants(TETROXIDE, T[:4], K * 1e5, unit="Pa^1", uncertainty=relative * K * 1e5),
        measured_constants(TETROXIDE, T[:4], np.log(K), quantity="ln K", uncertainty=relative),
        measured_constants(
            TETROXIDE, T[:4], np.log10(K), quantity="log10 K", uncertainty=relative / math.log(10)
        ),
        measured_constants(
            TETROXIDE, T[:4], K * 1e5 / (GAS_CONSTANT * T[:4]) / 1000, unit="mol/L",
            uncertainty=relative * K * 100 / (GAS_CONSTANT * T[:4]),
        ),
    ]  # fmt: skip
    for each in forms[1:]:
        np.testing.assert_allclose(each.ln_K, forms[0].ln_K, rtol=1e-12)
        assert each.uncertainty is not None
        np.testing.assert_allclose(each.uncertainty, relative, rtol=1e-9)


# --- third law -----------------------------------------------------------------------------------------------


def test_third_law_gives_back_the_data_without_trend() -> None:
    T_here = np.linspace(600, 800, 7)
    exact = ReactionFunctions(SHIFT).ln_K(T_here)
    found = third_law(measured_constants(SHIFT, T_here, exact, quantity="ln K", uncertainty=0.01))
    np.testing.assert_allclose(found.enthalpies, found.data_enthalpy.value, rtol=1e-10)
    assert not found.has_trend
    assert found.disagreement(found.enthalpy) == pytest.approx(0.0, abs=1e-6)
    # Delta H(298) off by 1 kJ/mol shows as that, without trend; the second law agrees.
    off = third_law(
        measured_constants(
            SHIFT, T_here, exact - 1000 / (GAS_CONSTANT * T_here), quantity="ln K", uncertainty=0.01
        )
    )
    np.testing.assert_allclose(off.enthalpies - off.data_enthalpy.value, 1000.0, rtol=1e-6)
    assert off.second_law_298.value - off.data_enthalpy.value == pytest.approx(1000.0, rel=1e-6)
    assert not off.has_trend


def test_third_law_trend_betrays_a_systematic_error() -> None:
    """K too large by a factor of 1.5 throughout: Delta H falls by R T ln 1.5, which goes with T."""
    T_here = np.linspace(600, 800, 7)
    wrong = ReactionFunctions(SHIFT).ln_K(T_here) + math.log(1.5)
    found = third_law(measured_constants(SHIFT, T_here, wrong, quantity="ln K", uncertainty=0.01))
    assert found.has_trend
    assert found.trend.value == pytest.approx(-GAS_CONSTANT * math.log(1.5), rel=1e-6)
    assert "systematic" in found.verdict


def test_uncertainty_of_the_data_is_that_of_the_formation_enthalpies() -> None:
    value, unknown = data_uncertainty(SHIFT)
    halves = [each.formation_enthalpy_uncertainty or 0.0 for each in SHIFT.species]
    assert unknown == ()
    assert value == pytest.approx(math.hypot(*halves) / 1.959964, rel=1e-6)


# --- published -----------------------------------------------------------------------------------------------


def test_dissociation_of_nitrogen_tetroxide() -> None:
    """F. H. Verhoek & F. Daniels, J. Am. Chem. Soc. 53 (1931) 1250: Kp = 0.1426, 0.3183, 0.6706 atm at 25, 35 and
    45 degC, extrapolated to zero pressure; Delta H = 14,600 cal/mol by the slope (values from memory).
    Later work puts Delta H(298.16 K) at 13.640 +- 0.100 kcal/mol (J. Chem. Phys. 47 (1967) 1703, abstract). The slope of
    these data gives the first, their third law the second: the trend shows that the slope is wrong."""
    data = measured_constants(TETROXIDE, [298.15, 308.15, 318.15], [0.1426, 0.3183, 0.6706], unit="atm")
    second, third = second_law(data), third_law(data)
    assert second.enthalpy.value / 4184 == pytest.approx(14.6, abs=0.05)
    assert third.enthalpy.value / 4184 == pytest.approx(13.640, abs=0.100)
    assert third.has_trend
    assert abs(third.disagreement(third.second_law_298)) > 10
    assert second.curvature is None
    assert second.distance == pytest.approx(15.4, abs=0.1)


def test_dissociation_of_iodine() -> None:
    """M. L. Perlman & G. K. Rollefson, J. Chem. Phys. 9 (1941) 362, as textbooks give it (values from memory): Kp = 1.81e-4,
    1.80e-3, 1.08e-2, 4.80e-2 atm at 872, 973, 1073 and 1173 K; dissociation energy at 0 K 35.56 kcal/mol = 148.8 kJ/mol,
    which is 151.1 kJ/mol at 298.15 K with H(298) - H(0) of I2 and 2 I (10.12 and 12.39 kJ/mol, CODATA)."""
    data = measured_constants(
        IODINE, [872.0, 973.0, 1073.0, 1173.0], [1.81e-4, 1.80e-3, 1.08e-2, 4.80e-2], unit="atm"
    )
    second, third = second_law(data), third_law(data)
    published = (148.8 + 12.39 - 10.12) * 1e3
    assert third.enthalpy.lower < published < third.enthalpy.upper
    assert third.enthalpy.value == pytest.approx(published, abs=300)
    assert third.second_law_298.lower < published < third.second_law_298.upper
    assert not third.has_trend
    assert second.curvature is not None
    assert not second.curvature.demanded


def test_hydrogen_iodide() -> None:
    """A. H. Taylor & R. H. Crist, J. Am. Chem. Soc. 63 (1941) 1377: K = 60.80 at 666.8 K, 54.5 at 698.6 K, 49.5 at 730.8 K,
    45.6 at 763.8 K (from memory, the last two to a per cent). Delta H(298.15 K) of H2 + I2 = 2 HI by the third law is
    -9.48 kJ/mol from CODATA's formation enthalpies (2 * 26.50 - 62.42, from memory)."""
    reaction = read_reaction("H2 + I2 = 2 HI")
    data = measured_constants(reaction, [666.8, 698.6, 730.8, 763.8], [60.80, 54.5, 49.5, 45.6])
    third = third_law(data)
    assert third.enthalpy.value == pytest.approx(-9480, abs=120)
    assert second_law(data).enthalpy.value == pytest.approx(-12_500, abs=800)


# --- faults --------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("T_given", "K", "options", "words"),
    [
        ([600, 700, 800], [1, 0, 2], {}, "value 2: K = 0 is not above zero"),
        ([600, 700, 800], [1, -3, 2], {}, "value 2: K = -3 is not above zero"),
        ([600, -5, 800], [1, 2, 3], {}, "value 2: a temperature of -5 K"),
        ([600, 0, 800], [1, 2, 3], {}, "value 2: a temperature of 0 K"),
        ([600, 700, 800], [1, math.nan, 3], {}, "value 2: K is not a finite number"),
        ([600, 700], [1, 2], {}, "2 values are too few"),
        ([600, 600, 600], [1, 2, 3], {}, "all values are at 600 K"),
        ([600, 700, 800], [1, 2], {}, "3 temperatures do not go with 2 values"),
        (
            [600, 700, 800],
            [1, 2, 3],
            {"uncertainty": [0.1, 0, 0.1]},
            "value 2: the uncertainty 0 is not above zero",
        ),
        ([600, 700, 800], [1, 2, 3], {"quantity": "log K"}, "'log K' is not one of K, ln K, log10 K"),
    ],
)
def test_faults(T_given: list[float], K: list[float], options: dict[str, object], words: str) -> None:
    with pytest.raises(MeasurementError) as caught:
        measured_constants(SHIFT, T_given, K, **options)  # type: ignore[arg-type]
    assert words in str(caught.value)


def test_all_faults_come_at_once_with_their_places() -> None:
    places = [Fault("", "bench.csv", line) for line in (4, 5, 6)]
    with pytest.raises(MeasurementError) as caught:
        measured_constants(SHIFT, [600, -1, 800], [0, 1, -2], places=places)
    assert [fault.line for fault in caught.value.faults] == [4, 5, 6]
    assert str(caught.value).startswith("bench.csv:4: K = 0")


def test_a_unit_that_does_not_fit() -> None:
    with pytest.raises(ReactionError, match=r"does not fit: moles of gas change by 1, so K has atm"):
        measured_constants(TETROXIDE, [300, 310, 320], [1, 2, 3], unit="atm^2")
