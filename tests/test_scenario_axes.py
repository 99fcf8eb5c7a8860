"""Axes of the grid: lists, ranges, units, exact values, and ratios reached by changing a stream."""

from __future__ import annotations

import pickle
from fractions import Fraction

import numpy as np
import pytest

from gibbsmin.scenario import Scenario, parse_scenario

FRAME = """
title: Axes
species: {{gases: [CH4, H2O, CO, CO2, H2, O2, N2]}}
feed:
  gas: {{amounts: {{CH4: 2 mol, CO2: 0.5 mol}}}}
  steam: {{amounts: {{H2O: 3 mol}}}}
  air: {{mole per cent: {{N2: 79, O2: 21}}, total: 1 mol}}
grid:
  temperature: {temperature}
  pressure: {pressure}
  further axes: {further}
"""


def scenario(temperature: str = "1000 K", pressure: str = "1 bar", further: str = "{}") -> Scenario:
    return parse_scenario(FRAME.format(temperature=temperature, pressure=pressure, further=further))


@pytest.mark.parametrize(
    ("text", "kelvin"),
    [
        ("850 degC", [1123.15]),
        ("[500 degC, 1000 K, 700 degC]", [773.15, 973.15, 1000.0]),
        ("{values: [600, 500], unit: degC}", [773.15, 873.15]),
        ("{from: 500 degC, to: 520 degC, step: 10 K}", [773.15, 783.15, 793.15]),
        ("{from: 500, to: 520, step: 10, unit: degC}", [773.15, 783.15, 793.15]),
        ("{from: 1000 K, to: 1010 K, step: 9 degF}", [1000.0, 1005.0, 1010.0]),
        ("{from: 300 K, to: 301 K, points: 5}", [300.0, 300.25, 300.5, 300.75, 301.0]),
        ("{from: 500 K, to: 2000 K, factor: 2}", [500.0, 1000.0, 2000.0]),
    ],
)
def test_temperatures(text: str, kelvin: list[float]) -> None:
    axis = scenario(temperature=text).temperature
    assert axis.values == tuple(kelvin)
    assert axis.unit == "K"


def test_pressures_in_gauge_units_keep_what_the_user_wrote() -> None:
    axis = scenario(pressure="{from: 0 bar(g), to: 10 bar(g), step: 2.5 bar}").pressure
    assert axis.display_unit == "bar(g)"
    assert axis.display_values == (0.0, 2.5, 5.0, 7.5, 10.0)
    assert axis.values == (101325.0, 351325.0, 601325.0, 851325.0, 1101325.0)


def test_ambient_pressure_of_the_file_counts() -> None:
    text = FRAME.format(temperature="1000 K", pressure="2 bar(g)", further="{}")
    assert parse_scenario("ambient pressure: 850 mbar\n" + text).pressure.values == (285000.0,)


def test_a_logarithmic_range_has_equal_quotients_and_exact_ends() -> None:
    axis = scenario(pressure="{from: 1 bar, to: 40 bar, points: 20, spacing: logarithmic}").pressure
    assert (axis.values[0], axis.values[-1], len(axis)) == (1e5, 40e5, 20)
    # inner points are rounded to nine digits, so each logarithm may be off by 5e-9
    np.testing.assert_allclose(np.diff(np.log(axis.array)), np.log(40) / 19, rtol=0, atol=1e-8)


def test_a_logarithmic_range_by_factor_reaches_its_end() -> None:
    axis = scenario(pressure="{from: 1 bar, to: 1000 bar, factor: 10}").pressure
    assert axis.values == (1e5, 1e6, 1e7, 1e8)


def test_linear_ranges_are_formed_in_decimals() -> None:
    further = "{ratio axis: {ratio: {of: {moles of: H2O}, to: {moles of: CH4}, by changing: steam}, %s}}"
    axis = scenario(further=further % "from: 2.5, to: 4, step: 0.1").further_axes[0]
    # 2.5 + 8 * 0.1 is 3.3000000000000003 in floats
    assert axis.values == (2.5, 2.6, 2.7, 2.8, 2.9, 3.0, 3.1, 3.2, 3.3, 3.4, 3.5, 3.6, 3.7, 3.8, 3.9, 4.0)


def test_a_range_that_its_step_does_not_fill_is_said() -> None:
    result = scenario(temperature="{from: 500 degC, to: 520 degC, step: 15 K}")
    assert result.temperature.display_values == (500.0, 515.0)
    assert any("no whole number of steps" in remark and "515" in remark for remark in result.remarks)


def test_the_shape_is_further_axes_then_temperature_then_pressure() -> None:
    result = scenario(
        temperature="[1000 K, 1100 K]",
        pressure="[1 bar, 2 bar, 3 bar]",
        further="{Air flow!: {stream: air, values: [1 mol, 2 mol, 3 mol, 4 mol]}}",
    )
    assert [axis.name for axis in result.axes] == ["Air_flow", "temperature", "pressure"]
    assert result.further_axes[0].title == "Air flow!"
    assert result.shape == (4, 2, 3)
    assert result.points == 24
    assert result.feed_shape == (4,)


def test_a_stream_axis_sets_the_total_and_keeps_the_composition() -> None:
    result = scenario(further="{air flow: {stream: air, values: [0 mol, 2 mol, 1 kmol]}}")
    np.testing.assert_array_equal(result.feed_amounts()["O2"], [0.0, 0.42, 210.0])
    np.testing.assert_array_equal(result.feed_amounts()["N2"], [0.0, 1.58, 790.0])
    np.testing.assert_array_equal(result.feed_amounts()["CH4"], [2.0, 2.0, 2.0])


def test_a_stream_axis_by_mass() -> None:
    result = scenario(further="{steam flow: {stream: steam, values: [18.015 g, 1 kg]}}")
    axis = result.further_axes[0]
    # H 1.0080, O 15.999: abridged standard atomic weights, IUPAC, Pure Appl. Chem. 94 (2022) 573
    np.testing.assert_allclose(axis.values, [1.0, 1000 / 18.015], rtol=1e-12)
    assert axis.display_unit == "g"
    assert axis.display_values == (18.015, 1000.0)
    assert axis.unit == "mol"


def test_a_ratio_changes_one_stream_and_counts_all() -> None:
    further = "{s: {ratio: {of: {moles of: H2O}, to: {atoms of: C}, by changing: steam}, values: [1, 3]}}"
    result = scenario(further=further)
    np.testing.assert_array_equal(result.feed_amounts()["H2O"], [2.5, 7.5])  # carbon: 2 CH4 + 0.5 CO2
    assert result.stream_amounts()["steam"]["H2O"].tolist() == [2.5, 7.5]


def test_a_ratio_within_named_streams() -> None:
    further = (
        "{r: {ratio: {of: {moles of: [CO2, CH4], in: gas}, to: {moles of: everything, in: [air, steam]}, "
        "by changing: air}, values: [0.5]}}"
    )
    result = scenario(further=further)
    # 2.5 / (3 + air) = 0.5
    assert result.exact_feed_amounts()["O2"].tolist() == [Fraction(21, 100) * 2]


def test_a_ratio_by_mass() -> None:
    further = "{m: {ratio: {of: {mass of: H2O}, to: {mass of: CH4}, by changing: steam}, values: [1.123]}}"
    # abridged standard atomic weights: H 1.0080, C 12.011, O 15.999 (IUPAC, Pure Appl. Chem. 94 (2022) 573)
    amount = scenario(further=further).feed_amounts()["H2O"][0]
    assert amount == pytest.approx(2 * 1.123 * 16.043 / 18.015, rel=1e-12)


def test_the_air_ratio_counts_what_burns() -> None:
    further = (
        "{air ratio: {ratio: {of: {moles of: O2, in: air}, to: {oxygen demand of: everything, in: gas}, "
        "by changing: air}, values: [1, 1.2]}}"
    )
    result = scenario(further=further)
    # CH4 + 2 O2 = CO2 + 2 H2O; CO2 needs none
    np.testing.assert_array_equal(result.feed_amounts()["O2"], [4.0, 4.8])


def test_two_ratios_are_met_together() -> None:
    further = """
    oxygen to everything:
      ratio: {of: {moles of: O2}, to: {moles of: everything}, by changing: air}
      values: [0.05, 0.1]
    steam to everything:
      ratio: {of: {moles of: H2O}, to: {moles of: everything}, by changing: steam}
      values: [0.2, 0.4, 0.5]
    """
    result = scenario(further=further)
    assert result.feed_shape == (2, 3)
    amounts = result.exact_feed_amounts()
    total = np.sum(list(amounts.values()), axis=0)
    for i, oxygen in enumerate([Fraction(1, 20), Fraction(1, 10)]):
        for j, steam in enumerate([Fraction(1, 5), Fraction(2, 5), Fraction(1, 2)]):
            assert amounts["O2"][i, j] / total[i, j] == oxygen
            assert amounts["H2O"][i, j] / total[i, j] == steam


def test_a_scenario_can_be_pickled() -> None:
    original = scenario(temperature="[1000 K, 1100 K]", further="{a: {stream: air, values: [1 mol, 2 mol]}}")
    copy = pickle.loads(pickle.dumps(original))
    assert copy.digest == original.digest
    assert copy.axes == original.axes
    assert copy.exact_feed_amounts()["O2"].tolist() == original.exact_feed_amounts()["O2"].tolist()
