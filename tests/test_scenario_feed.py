"""The feed: amounts, rates, compositions, exact decimals, and which gases it brings in."""

from __future__ import annotations

import textwrap
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest

from gibbsmin.scenario import Scenario, load_scenario, parse_scenario


def scenario(
    feed: str, species: str = "{gases: all}", temperature: str = "1000 K", extra: str = ""
) -> Scenario:
    return parse_scenario(
        f"title: Feed\nspecies: {species}\nfeed:\n{feed}\n"
        f"grid: {{temperature: {temperature}, pressure: 1 bar}}\n{extra}"
    )


def amounts(result: Scenario) -> dict[str, Fraction]:
    return {name: values.item() for name, values in result.exact_feed_amounts().items()}


@pytest.mark.parametrize(
    "feed",
    [
        "  a: {amounts: {C3H8: 0.1 mol, O2: 0.5 mol}}",
        "  a: {amounts: {C3H8: 0.1, O2: 0.5}, unit: kmol/h}",
        "  a: {amounts: {C3H8: 0.7 mol/h}}\n  b: {amounts: {O2: 3.5 mol/h}}",
        "  a: {amounts: {C3H8: 0.1 kmol/s}}\n  b: {amounts: {O2: 1800 kmol/h}}",
        "  a: {mole per cent: {C3H8: 100}, total: 0.3 mol}\n  b: {mole per cent: {O2: 100}, total: 1.5 mol}",
        "  a: {mole per cent: {C3H8: 10, O2: 50, N2: rest}, total: 7 mol}",
        "  a: {amounts: {C3H8: 17 normal m3/h, O2: 85 normal m3/h}}",
        # 14.3 and 71.5 do not add up to 100 either and are scaled, but their quotient is five
        "  a: {mole per cent: {C3H8: 14.3, O2: 71.5, N2: 14.1}, total: 1 mol}",
    ],
)
def test_a_stoichiometric_feed_stays_exactly_stoichiometric(feed: str) -> None:
    # C3H8 + 5 O2 = 3 CO2 + 4 H2O
    exact = amounts(scenario(feed))
    assert exact["O2"] == 5 * exact["C3H8"] > 0


def test_amounts_in_moles_are_the_decimals_of_the_file() -> None:
    result = scenario("  a: {amounts: {CH4: 0.1 mol, H2O: 0.3 mol}}\n  b: {amounts: {H2O: 0.4 mol}}")
    assert amounts(result) == {"CH4": Fraction(1, 10), "H2O": Fraction(7, 10)}
    floats = result.feed_amounts()
    assert list(floats) == ["CH4", "H2O"]
    assert floats["H2O"].shape == ()
    assert floats["H2O"].dtype == np.float64
    assert float(floats["H2O"]) == 0.7  # and not 0.1 + 0.6 or 0.3 + 0.4 with their rounding


def test_rates_are_per_hour() -> None:
    result = scenario("  a: {amounts: {CH4: 1 kmol/h, H2O: 2 mol/s}}")
    assert (result.rate, result.amount_unit) == (True, "mol/h")
    assert amounts(result) == {"CH4": 1000, "H2O": 7200}


def test_mass_and_molar_compositions() -> None:
    by_mass = amounts(scenario("  a: {mass per cent: {N2: 50, H2: 50}, total: 1 kg}"))
    # N 14.007, H 1.0080: abridged standard atomic weights, IUPAC, Pure Appl. Chem. 94 (2022) 573
    assert float(by_mass["N2"]) == pytest.approx(500 / 28.014, rel=1e-12)
    assert float(by_mass["H2"]) == pytest.approx(500 / 2.016, rel=1e-12)
    in_moles = amounts(scenario("  a: {mass per cent: {N2: 50, H2: 50}, total: 1 mol}"))
    assert sum(in_moles.values()) == 1
    assert in_moles["N2"] / in_moles["H2"] == by_mass["N2"] / by_mass["H2"]
    by_moles = amounts(scenario("  a: {mole per cent: {N2: 25, H2: 75}, total: 8.5155 g}"))
    assert by_moles == {"N2": Fraction(1, 4), "H2": Fraction(3, 4)}  # (28.014 + 3 * 2.016)/4 = 8.5155


def test_the_rest_fills_up_to_a_hundred() -> None:
    result = amounts(scenario("  a: {mole per cent: {CH4: 62.5, CO2: rest, N2: 1.5}, total: 200 mol}"))
    assert result == {"CH4": 125, "CO2": 72, "N2": 3}


def test_a_rounded_analysis_is_scaled_and_said() -> None:
    result = scenario("  a: {mole per cent: {CH4: 62.4, CO2: 37.5}, total: 1 mol}")
    assert sum(amounts(result).values()) == 1
    assert any("add up to 99.9" in remark for remark in result.remarks)


def test_all_gases_of_the_feed_are_the_default() -> None:
    result = scenario("  a: {amounts: {CH4: 1 mol, H2O: 1 mol}}")
    assert {"CO", "CO2", "H2", "OH", "C2H4"} <= set(result.choice.names)
    assert all(set(species.composition) <= {"C", "H", "O"} for species in result.species)
    assert all(species.charge == 0 and species.state == "g" for species in result.species)
    assert result.choice.names[:2] == ("CH4", "H2O")  # what is fed comes first
    without_section = parse_scenario(result.text.replace("species: {gases: all}\n", ""))
    assert without_section.choice.names == result.choice.names


def test_elements_that_no_stream_holds_are_said() -> None:
    result = scenario("  a: {amounts: {H2: 1 mol, O2: 1 mol}}", "{elements: [H, O, S]}")
    assert "SO2" in result.choice.names
    assert any("no stream holds S" in remark for remark in result.remarks)


def test_limits_on_all_gases() -> None:
    feed = "  a: {amounts: {C3H8: 1 mol, H2O: 1 mol}}"
    species = "{gases: all, largest carbon number: 1, radicals: false, leave out: [CH3OH]}"
    result = scenario(feed, species)
    assert "C3H8" in result.choice.names  # because it is fed
    assert not {"C2H4", "OH", "CH3OH"} & set(result.choice.names)
    assert {"CH4", "CO", "H2"} <= set(result.choice.names)
    with_ions = scenario(feed, "{ions: true}").choice.names
    assert set(scenario(feed).choice.names) < set(with_ions)


def test_a_list_of_gases_is_taken_as_it_is() -> None:
    result = scenario("  a: {amounts: {CO: 1 mol, H2O: 1 mol}}", "{gases: [H2, CO2, H2O, CO]}")
    assert result.choice.names == ("H2", "CO2", "H2O", "CO")


def test_nitric_oxide_is_no_false() -> None:
    result = scenario("  a: {amounts: {NO: 1 mol}}", "{gases: [NO, N2, O2]}")
    assert result.choice.names == ("NO", "N2", "O2")


def test_condensed_feed_brings_its_elements_but_takes_no_part() -> None:
    result = scenario("  a: {temperature: 25 degC, amounts: {H2O(l): 1 mol, CH4: 1 mol}}")
    assert "H2O(l)" in result.feed_species
    assert "H2O(l)" not in result.choice.names
    assert "H2O" in result.choice.names


def test_gases_outside_their_data() -> None:
    feed = "  a: {amounts: {O2: 1 mol, H2: 1 mol}}"
    with pytest.raises(Exception, match="go beyond the data of"):
        scenario(feed, temperature="[1000 K, 7000 K]")
    left_out = scenario(feed, "{outside data range: leave out}", temperature="[1000 K, 7000 K]")
    assert "HO2" not in left_out.choice.names
    assert "200 to 6000 K" in left_out.choice.left_out["HO2"]
    assert not left_out.extrapolate
    extrapolated = scenario(feed, "{outside data range: extrapolate}", temperature="[1000 K, 7000 K]")
    assert "HO2" in extrapolated.choice.names
    assert extrapolated.extrapolate


OWN = """
source: {citation: invented for this test, gas_constant: 8.314510, reference_pressure: 100000}
species:
- name: tracer
  formula: Ar
  composition: {Ar: 1}
  charge: 0
  state: g
  radical: false
  molar_mass: 39.95
  formation_enthalpy: 0.0
  forms:
  - state: g
    source: "monatomic gas, heat capacity 5/2 R"
    intervals:
    - range: [200.0, 6000.0]
      heat_capacity: [0, 0, 2.5, 0, 0, 0, 0]
      integration: [-745.375, 4.37967491]
"""


def test_own_species_in_the_file_or_beside_it(tmp_path: Path) -> None:
    feed = "feed: {a: {amounts: {tracer: 1 mol}}}\n"
    rest = "title: Own\ngrid: {temperature: 1000 K, pressure: 1 bar}\n"
    (tmp_path / "own.yaml").write_text(OWN)
    beside = tmp_path / "scenario.yaml"
    beside.write_text(f"{rest}{feed}species: {{files: [own.yaml], gases: [tracer]}}\n")
    inside = tmp_path / "inside.yaml"
    inside.write_text(f"{rest}{feed}species:\n  gases: [tracer]\n  own:\n{textwrap.indent(OWN, '    ')}")
    for file in (beside, inside):
        result = load_scenario(file)
        assert result.choice.names == ("tracer",)
        assert result.species[0].formation_enthalpy == 0.0
        assert "tracer" in result.library


def test_states_of_streams() -> None:
    result = scenario("  a: {temperature: 500 degF, pressure: 3 bar(g), amounts: {CH4: 1 mol}}")
    stream = result.streams["a"]
    assert stream.temperature == float((Fraction(500) - 32) * 5 / 9 + Fraction("273.15"))
    assert stream.pressure == 401325.0
    assert (stream.display_temperature_unit, stream.display_pressure_unit) == ("degF", "bar(g)")
    unknown = scenario("  a: {amounts: {CH4: 1 mol}}")
    assert unknown.streams["a"].temperature is None
    assert any("no heat duty" in remark for remark in unknown.remarks)
