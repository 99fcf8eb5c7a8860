"""ThermoTable: accuracy, reproducibility, ranges, forms, conversion between standard pressures."""

from __future__ import annotations

import itertools
import json
from typing import Any

import mpmath
import numpy as np
import pytest

from gibbsmin.constants import STANDARD_ATMOSPHERE, STANDARD_PRESSURE
from gibbsmin.errors import TemperatureRangeError
from gibbsmin.species import Interval, Species, ThermoTable, standard_library

LIBRARY = standard_library()
ALL_FUNCTIONS = ("gibbs_RT", "enthalpy_RT", "entropy_R", "heat_capacity_R")


def own(
    name: str, model: str, intervals: list[dict[str, Any]], *, pressure: float = 1e5, state: str = "g"
) -> Species:
    """A gas, or a condensed substance with one crystal form per interval, of made-up data."""
    forms = (
        [{"state": "g", "source": "made up", "model": model, "intervals": intervals}]
        if state == "g"
        else [
            {
                "state": "cr",
                "label": f"form {number}",
                "source": "made up",
                "model": model,
                "intervals": [interval],
            }
            for number, interval in enumerate(intervals)
        ]
    )
    record = {
        "source": {"citation": "made up", "gas_constant": 8.31446, "reference_pressure": pressure},
        "species": [
            {
                "name": name,
                "formula": "Xe",
                "composition": {"Xe": 1},
                "state": state,
                "formation_enthalpy": 0.0,
                "forms": forms,
            }
        ],
    }
    return LIBRARY.with_records(json.loads(json.dumps(record))).find(name)


def exact(interval: Interval, T: float) -> dict[str, tuple[Any, Any]]:
    """Every function from the definition in 40 digits, with the sum of the magnitudes of its terms.

    Written from NASA/TP-2002-211556, eqs 1 to 3, apart from the code under test.
    """
    with mpmath.workdps(40):
        a = [mpmath.mpf(value) for value in interval.nine]
        t = mpmath.mpf(T)
        log_t = mpmath.log(t)
        h = [
            -a[0] / t**2,
            a[1] * log_t / t,
            a[2],
            a[3] * t / 2,
            a[4] * t**2 / 3,
            a[5] * t**3 / 4,
            a[6] * t**4 / 5,
            a[7] / t,
        ]
        s = [
            -a[0] / (2 * t**2),
            -a[1] / t,
            a[2] * log_t,
            a[3] * t,
            a[4] * t**2 / 2,
            a[5] * t**3 / 3,
            a[6] * t**4 / 4,
            a[8],
        ]
        cp = [a[0] / t**2, a[1] / t, a[2], a[3] * t, a[4] * t**2, a[5] * t**3, a[6] * t**4]
        terms = {
            "enthalpy_RT": h,
            "entropy_R": s,
            "heat_capacity_R": cp,
            "gibbs_RT": [*h, *(-term for term in s)],
        }
        return {name: (mpmath.fsum(each), mpmath.fsum(map(abs, each))) for name, each in terms.items()}  # fmt: skip


def test_every_function_equals_its_definition_to_rounding() -> None:
    """Seeded sample of 150 gases and 50 condensed substances: error below 6e-16 of the sum of the terms."""
    numbers = np.random.default_rng(2002)
    gases = numbers.choice(
        [entry.name for entry in LIBRARY.entries if entry.state == "g"], 150, replace=False
    )
    solids = numbers.choice(
        [entry.name for entry in LIBRARY.entries if entry.state != "g"], 50, replace=False
    )
    worst = 0.0
    for name in (*gases, *solids):
        species = LIBRARY.find(str(name))
        form = species.forms[-1]
        interval = form.intervals[int(numbers.integers(len(form.intervals)))]
        T = float(numbers.uniform(interval.lower, interval.upper))
        if name in ("LiNO3(cd)", "Mg2SiO4(cd)", "SiC(cd)", "SrCl2(cd)"):
            T = max(T, form.lower + 100.0)  # the overlap belongs to the form below
        table = ThermoTable([species])
        for function, (value, scale) in exact(interval, T).items():
            error = abs(getattr(table, function)([T])[0, 0] - value)
            worst = max(worst, float(error / scale))
    assert worst < 6e-16


def test_gibbs_energies_of_process_gases_are_good_to_1e_13() -> None:
    """ln K takes the absolute error of g/RT; relative to max(1, |g/RT|) it stays below 1e-13 for the 200-odd gases of
    C, H, O, N, S and Cl. (Crystals with lambda points have terms of 1e5 that cancel: there only 5e-10 is left.)"""
    species = LIBRARY.gases(["C", "H", "O", "N", "S", "Cl"], largest_carbon_number=4)
    worst = 0.0
    for T in (298.15, 612.0, 1234.5):
        table = ThermoTable(species, extrapolate=True)
        computed = table.gibbs_RT([T])[0]
        for each, value in zip(species, computed, strict=True):
            form = each.forms[0]
            interval = next((i for i in form.intervals if i.upper >= T), form.intervals[-1])
            reference = exact(interval, T)["gibbs_RT"][0]
            worst = max(worst, float(abs(value - reference) / max(1, abs(reference))))
    assert worst < 1e-13


@pytest.mark.parametrize("function", ALL_FUNCTIONS)
def test_equal_temperatures_give_equal_bits_whatever_stands_beside_them(function: str) -> None:
    species = [*LIBRARY.gases(["C", "H", "O", "N"])[:60], LIBRARY.find("C(gr)")]
    table = ThermoTable(species)
    T = np.concatenate([np.linspace(300.0, 3000.0, 901), [1000.0, 298.15]])
    together = getattr(table, function)(T)
    backwards = getattr(table, function)(T[::-1])[::-1]
    np.testing.assert_array_equal(together, backwards)
    for row in (0, 1, 7, 234, 450, 900, 901, 902):
        np.testing.assert_array_equal(together[row], getattr(table, function)(T[row : row + 1])[0])
        np.testing.assert_array_equal(together[row : row + 5], getattr(table, function)(T[row : row + 5]))
    for column in (0, 13, 60):
        alone = ThermoTable([species[column]])
        np.testing.assert_array_equal(together[:, column], getattr(alone, function)(T)[:, 0])


def test_formula_matrix_and_elements() -> None:
    table = ThermoTable([LIBRARY.find(name) for name in ("H2O", "CO2", "C(gr)", "NH3", "Fe0.947O(cd)")])
    assert table.elements == ("C", "H", "Fe", "N", "O")
    np.testing.assert_array_equal(
        table.formula_matrix,
        [[0, 1, 1, 0, 0], [2, 0, 0, 3, 0], [0, 0, 0, 0, 0.947], [0, 0, 0, 1, 0], [1, 2, 0, 0, 1]],
    )


def test_charge_is_the_last_row_when_there_are_ions() -> None:
    table = ThermoTable([LIBRARY.find(name) for name in ("NO", "NO+", "e-")])
    assert table.elements == ("N", "O", "charge")
    np.testing.assert_array_equal(table.formula_matrix, [[1, 1, 0], [1, 1, 0], [0, 1, -1]])


def test_a_table_without_species_or_temperatures_is_empty() -> None:
    empty = ThermoTable([])
    assert empty.formula_matrix.shape == (0, 0)
    assert empty.gibbs_RT([300.0, 400.0]).shape == (2, 0)
    assert ThermoTable([LIBRARY.find("CO")]).gibbs_RT([]).shape == (0, 1)
    assert ThermoTable([LIBRARY.find("CO")]).form_index([]).shape == (0, 1)


# --- ranges ------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("T", [199.9, 100.0, 6000.1, 20000.0])
@pytest.mark.parametrize("function", [*ALL_FUNCTIONS, "form_index"])
def test_a_gas_outside_its_range_is_an_error_naming_it(function: str, T: float) -> None:
    table = ThermoTable([LIBRARY.find("O2"), LIBRARY.find("CH4")])
    if T == 20000.0:
        table = ThermoTable([LIBRARY.find("CO"), LIBRARY.find("CH4")])
    with pytest.raises(TemperatureRangeError) as caught:
        getattr(table, function)([300.0, T, 500.0])
    assert caught.value.temperature == T
    assert (caught.value.lower, caught.value.upper) == (
        LIBRARY.find(caught.value.species).lower,
        LIBRARY.find(caught.value.species).upper,
    )
    assert caught.value.species in str(caught.value)
    assert f"{T:g} K" in str(caught.value)


def test_extrapolation_happens_on_request_and_is_flagged() -> None:
    methane, argon = LIBRARY.find("CH4"), LIBRARY.find("Ar")
    T = [150.0, 200.0, 300.0, 6000.0, 6500.0]
    table = ThermoTable([methane, argon], extrapolate=True)
    np.testing.assert_array_equal(
        table.extrapolated(T), [[True, True], [False, False], [False, False], [False, False], [True, False]]
    )
    for temperature, interval in (
        (150.0, methane.forms[0].intervals[0]),
        (6500.0, methane.forms[0].intervals[-1]),
    ):
        expected = float(exact(interval, temperature)["gibbs_RT"][0])
        assert table.gibbs_RT([temperature])[0, 0] == pytest.approx(expected, rel=1e-13)
    strict = ThermoTable([methane, argon])
    assert not strict.extrapolated(T).any()
    np.testing.assert_array_equal(table.gibbs_RT(T[1:4]), strict.gibbs_RT(T[1:4]))


def test_a_limit_met_after_unit_conversion_is_inside() -> None:
    table = ThermoTable([LIBRARY.find("CO"), LIBRARY.find("H2O(cd)")])
    slightly_below = np.nextafter(200.0, 0.0)
    assert np.isfinite(table.gibbs_RT([slightly_below])).all()
    assert not table.absent([slightly_below]).any()
    degrees_fahrenheit = -99.67  # 200 K
    assert np.isfinite(table.gibbs_RT([(degrees_fahrenheit + 459.67) / 1.8])).all()


def test_at_an_interval_limit_the_lower_interval_counts() -> None:
    step = [
        {"range": [200, 1000], "heat_capacity": [2.5, 0, 0, 0, 0], "integration": [0, 0]},
        {"range": [1000, 2000], "heat_capacity": [3.5, 0, 0, 0, 0], "integration": [0, 0]},
    ]
    table = ThermoTable([own("Xe step", "NASA-7", step)])
    T = [999.0, 1000.0, 1000.001, 2000.0]
    np.testing.assert_array_equal(table.heat_capacity_R(T)[:, 0], [2.5, 2.5, 3.5, 3.5])


@pytest.mark.parametrize("T", [[0.0], [-5.0], [np.nan], [np.inf], [[300.0]]])
def test_temperatures_that_are_none_are_refused(T: Any) -> None:
    with pytest.raises(ValueError, match="temperatures must be"):
        ThermoTable([LIBRARY.find("CO")], extrapolate=True).gibbs_RT(T)


# --- condensed substances ----------------------------------------------------------------------------------------


def test_sulfur_passes_through_its_forms() -> None:
    # Transition and melting point of the records: 368.3 and 388.36 K (Gurvich et al. 1989).
    sulfur = LIBRARY.find("S(cd)")
    table = ThermoTable([sulfur])
    T = [200.0, 368.3, 368.4, 388.36, 388.4, 6000.0]
    np.testing.assert_array_equal(table.form_index(T)[:, 0], [0, 0, 1, 1, 2, 2])
    form = table.form_at(370.0, 0)
    assert form is sulfur.forms[1]
    assert form.label == "beta"
    around = table.gibbs_RT([368.3, 368.3 + 1e-6, 388.36, 388.36 + 1e-6])[:, 0]
    assert abs(around[1] - around[0]) < 1e-5  # the records join to 2e-6 RT
    assert abs(around[3] - around[2]) < 1e-5


def test_outside_its_data_a_substance_is_absent_not_an_error() -> None:
    water = LIBRARY.find("H2O(cd)")
    table = ThermoTable([water, LIBRARY.find("H2O")])
    T = [300.0, 600.0, 601.0]
    np.testing.assert_array_equal(table.absent(T), [[False, False], [False, False], [True, False]])
    assert table.gibbs_RT(T)[2, 0] == np.inf
    assert np.isnan(table.enthalpy_RT(T)[2, 0])
    assert np.isfinite(table.gibbs_RT(T)[:, 1]).all()
    assert table.form_index(T)[2, 0] == -1
    assert table.form_at(601.0, 0) is None
    extended = ThermoTable([water], extrapolate=True)
    assert not extended.absent(T).any()
    np.testing.assert_array_equal(extended.extrapolated(T)[:, 0], [False, False, True])
    assert np.isfinite(extended.gibbs_RT(T)).all()


def test_a_gap_between_forms_is_absence_even_with_extrapolation() -> None:
    table = ThermoTable([LIBRARY.find("Mg(OH)2(cd)")], extrapolate=True)
    T = [1000.0, 1050.0, 1100.0, 1200.0]
    np.testing.assert_array_equal(table.absent(T)[:, 0], [False, True, False, False])
    assert not table.extrapolated(T).any()
    assert table.gibbs_RT(T)[1, 0] == np.inf


def test_a_gap_of_rounding_is_bridged() -> None:
    table = ThermoTable([LIBRARY.find(name) for name in ("Sn(cd)", "Cd(cd)", "In(cd)", "Br2(cd)")])
    for T in (505.115, 594.255, 429.782, 332.502):
        assert not table.absent([T])[0].any()


@pytest.mark.parametrize(
    ("name", "below", "transition"),
    [("LiNO3(cd)", 0, 526.0), ("Mg2SiO4(cd)", 0, 2171.0), ("SiC(cd)", 0, 3103.0), ("SrCl2(cd)", 0, 990.0)],
)
def test_overlapping_forms_give_way_where_they_join(name: str, below: int, transition: float) -> None:
    table = ThermoTable([LIBRARY.find(name)])
    index = table.form_index([transition - 0.01, transition, transition + 0.01])[:, 0]
    np.testing.assert_array_equal(index, [below, below, below + 1])
    g = table.gibbs_RT([transition, transition + 1e-5])[:, 0]
    assert abs(g[1] - g[0]) < 2e-5


def test_overlapping_forms_that_cross_give_way_at_the_crossing() -> None:
    # g/RT = 3 (1 - ln T) - 100/T + 1 and 3 (1 - ln T) + 250/T: equal where -100/T + 1 = 250/T, at 350 K
    intervals = [
        {"range": [200, 400], "heat_capacity": [3, 0, 0, 0, 0], "integration": [-100, -1]},
        {"range": [300, 600], "heat_capacity": [3, 0, 0, 0, 0], "integration": [250, 0]},
    ]
    table = ThermoTable([own("Xe(cd)", "NASA-7", intervals, state="condensed")])
    np.testing.assert_array_equal(
        table.form_index([300.0, 349.999999, 350.000001, 399.0])[:, 0], [0, 0, 1, 1]
    )


def test_single_forms_can_be_used_alone() -> None:
    both = ThermoTable([LIBRARY.find(name) for name in ("H2O(l)", "H2O(cr)", "H2O(cd)")])
    T = [250.0, 300.0]
    np.testing.assert_array_equal(both.absent(T), [[True, False, False], [False, True, False]])
    g = both.gibbs_RT(T)
    assert g[0, 1] == g[0, 2]
    assert g[1, 0] == g[1, 2]


# --- sources with other conventions ------------------------------------------------------------------------------


def test_nasa_7_equals_its_own_definition() -> None:
    # NASA TM-4513 (1993): cp/R = a1 + a2 T + ... + a5 T^4, with a6 and a7 the constants of integration
    a1, a2, a3, a4, a5, a6, a7 = 3.5, 1.1e-3, -4.2e-7, 6.0e-11, -3.0e-15, -1050.0, 4.2
    interval = {"range": [200, 3000], "heat_capacity": [a1, a2, a3, a4, a5], "integration": [a6, a7]}
    table = ThermoTable([own("Xe seven", "NASA-7", [interval])])
    T = np.array([200.0, 298.15, 1000.0, 2999.0])
    cp = a1 + a2 * T + a3 * T**2 + a4 * T**3 + a5 * T**4
    h = a1 + a2 * T / 2 + a3 * T**2 / 3 + a4 * T**3 / 4 + a5 * T**4 / 5 + a6 / T
    s = a1 * np.log(T) + a2 * T + a3 * T**2 / 2 + a4 * T**3 / 3 + a5 * T**4 / 4 + a7
    np.testing.assert_allclose(table.heat_capacity_R(T)[:, 0], cp, rtol=1e-14)
    np.testing.assert_allclose(table.enthalpy_RT(T)[:, 0], h, rtol=1e-14)
    np.testing.assert_allclose(table.entropy_R(T)[:, 0], s, rtol=1e-14)
    np.testing.assert_allclose(table.gibbs_RT(T)[:, 0], h - s, rtol=1e-13)


def test_entropies_at_another_standard_pressure_are_converted_to_one_bar() -> None:
    interval = {"range": [200, 3000], "heat_capacity": [2.5, 0, 0, 0, 0], "integration": [-745.375, 4.0]}
    at_bar = ThermoTable([own("Xe bar", "NASA-7", [interval])])
    at_atmosphere = ThermoTable([own("Xe atm", "NASA-7", [interval], pressure=STANDARD_ATMOSPHERE)])
    T = [298.15, 1500.0]
    # An ideal gas at the lower pressure has the higher entropy: R ln(101325/100000) = 0.1094 J/(mol K).
    shift = np.log(STANDARD_ATMOSPHERE / STANDARD_PRESSURE)
    np.testing.assert_allclose(at_atmosphere.entropy_R(T), at_bar.entropy_R(T) + shift, rtol=1e-15)
    np.testing.assert_allclose(at_atmosphere.gibbs_RT(T), at_bar.gibbs_RT(T) - shift, rtol=1e-15)
    np.testing.assert_array_equal(at_atmosphere.enthalpy_RT(T), at_bar.enthalpy_RT(T))
    np.testing.assert_array_equal(at_atmosphere.heat_capacity_R(T), at_bar.heat_capacity_R(T))


def test_condensed_entropies_do_not_depend_on_the_standard_pressure() -> None:
    interval = {"range": [200, 3000], "heat_capacity": [2.5, 0, 0, 0, 0], "integration": [-745.375, 4.0]}
    tables = [
        ThermoTable([own("Xe(cd)", "NASA-7", [interval], pressure=pressure, state="condensed")])
        for pressure in (STANDARD_PRESSURE, STANDARD_ATMOSPHERE)
    ]
    np.testing.assert_array_equal(tables[0].gibbs_RT([300.0]), tables[1].gibbs_RT([300.0]))


# --- consistency -------------------------------------------------------------------------------------------------


def test_functions_are_consistent_by_finite_differences() -> None:
    """d(g/RT)/dT = -h/(R T^2) (Gibbs-Helmholtz) and dh/dT = cp, away from interval limits."""
    table = ThermoTable(LIBRARY.gases(["C", "H", "O", "N"])[:80])
    step = 1e-2
    for T in (350.0, 777.0, 1500.0, 4000.0):
        g = table.gibbs_RT([T - step, T + step])
        slope = (g[1] - g[0]) / (2 * step)
        np.testing.assert_allclose(slope, -table.enthalpy_RT([T])[0] / T, rtol=1e-7, atol=1e-9)
        h = table.enthalpy_RT([T - step, T + step]) * np.array([[T - step], [T + step]])
        np.testing.assert_allclose((h[1] - h[0]) / (2 * step), table.heat_capacity_R([T])[0], rtol=2e-7)


def test_species_are_evaluated_in_the_order_given() -> None:
    names = ["CO2", "H2", "H2O", "CO"]
    T = [900.0]
    for order in itertools.permutations(range(4)):
        species = [LIBRARY.find(names[place]) for place in order]
        g = ThermoTable(species).gibbs_RT(T)[0]
        for place, value in zip(order, g, strict=True):
            assert value == ThermoTable([LIBRARY.find(names[place])]).gibbs_RT(T)[0, 0]
