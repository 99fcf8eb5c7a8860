"""The section `reactions` of a scenario: what it becomes, and every fault with its place."""

from __future__ import annotations

import math
import pickle
from pathlib import Path

import pytest

from gibbsmin.errors import ScenarioError
from gibbsmin.reactions import ConstantEnthalpy, ConstantHeatCapacity, Correlation
from gibbsmin.reactions.wanted import ReactionsWanted
from gibbsmin.scenario import load_scenario, parse_scenario

BASE = """\
title: Reactions
species:
  gases: [CH4, H2O, CO, CO2, H2, N2]
feed:
  gas:
    amounts: {CH4: 1 mol, H2O: 3 mol, N2: 0.05 mol}
grid:
  temperature: {from: 600 degC, to: 900 degC, step: 100 K}
  pressure: [1 bar, 10 bar]
results:
  key species: [H2, CO]
  conversions: [CH4]
"""
SECTION = """\
reactions:
  equations:
    reforming: CH4 + H2O = CO + 3 H2
    shift: CO + H2O = CO2 + H2
    deposit: 2 CO = C(gr) + CO2
  standard pressure: 1 atm
  unit of K: atm
  tolerance: {per cent of K: 3, kelvin: 2, mole fraction: 0.005, conversion: 0.01}
  shortcuts:
    tangent:
      reaction: reforming
      constant enthalpy at: 700 degC
    given:
      reaction: shift
      constant enthalpy at: 400 degC
      K: 12
      enthalpy: -38 kJ/mol
    secant:
      reaction: reforming
      constant enthalpy through: [700 degC, 900 degC]
    two values:
      reaction: reforming
      constant enthalpy through: [700 degC, 900 degC]
      K: [12.1, 1440]
      unit: atm^2
    with heat capacity:
      reaction: shift
      constant heat capacity at: 500 degC
    published:
      reaction: shift
      correlation: ln K = 4577.8/T - 4.33
  alone:
    one: [reforming]
    both: [reforming, shift]
  measured:
    bench:
      reaction: shift
      table: |
        T [degC], K, u
        360, 19.2, 0.6
        400, 12.6, 0.4
        460, 7.0, 0.25
  outlet analyses:
    reactions: [shift]
    basis: dry
    table: |
      sample, T [degC], p [bar], H2, CO, CO2, CH4, N2
      tube, 816.85, 10, 73.5, 14.0, 8.7, 2.6, 1.2
"""
SOUND = BASE + SECTION


def wanted(text: str = SOUND) -> ReactionsWanted:
    found = parse_scenario(text, file="plant.yaml").reactions
    assert found is not None
    return found


def test_everything_is_read() -> None:
    found = wanted()
    assert [each.name for each in found.reactions] == ["reforming", "shift", "deposit"]
    assert found.standard_pressure == 101325.0
    assert found.unit == "atm"
    assert (found.tolerance.per_cent_of_K, found.tolerance.kelvin) == (3.0, 2.0)
    assert (found.mixture_tolerance.mole_fraction, found.mixture_tolerance.conversion) == (0.005, 0.01)
    by_name = {each.name: each for each in found.shortcuts}
    assert list(by_name) == ["tangent", "given", "secant", "two values", "with heat capacity", "published"]
    given = by_name["given"]
    assert isinstance(given, ConstantEnthalpy)
    assert float(given.ln_K(673.15)) == pytest.approx(2.4849066497880004)  # ln 12
    assert given.enthalpy_R == pytest.approx(-38000 / 8.31446261815324)
    two = by_name["two values"]
    assert isinstance(two, ConstantEnthalpy)
    assert float(two.ln_K(973.15)) == pytest.approx(
        math.log(12.1 * 1.01325**2), rel=1e-12
    )  # ln 12.1 atm^2 in bar^2
    assert isinstance(by_name["with heat capacity"], ConstantHeatCapacity)
    assert isinstance(by_name["published"], Correlation)
    assert [(each.name, len(each.reactions)) for each in found.subsets] == [("one", 1), ("both", 2)]
    assert found.measured[0].temperature[0] == pytest.approx(633.15)
    assert found.analyses[0].feed == {"CH4": 1.0, "H2O": 3.0, "N2": 0.05}  # that of the scenario
    assert [each.name for each in found.analysed] == ["shift"]


def test_defaults() -> None:
    found = wanted(BASE + "reactions:\n  equations: {shift: CO + H2O = CO2 + H2}\n")
    assert found.tolerance.per_cent_of_K == 5.0
    assert found.standard_pressure == 1e5
    assert found.unit == "1"
    assert found.subsets == found.shortcuts == found.measured == found.analyses == ()
    assert parse_scenario(BASE).reactions is None


def test_files_are_found_beside_the_scenario(tmp_path: Path) -> None:
    (tmp_path / "bench.csv").write_text("T [degC],K\n360,19.2\n400,12.6\n460,7\n", encoding="utf-8")
    text = BASE + (
        "reactions:\n  equations: {shift: CO + H2O = CO2 + H2}\n"
        "  measured:\n    bench: {reaction: shift, file: bench.csv}\n"
    )
    file = tmp_path / "plant.yaml"
    file.write_text(text, encoding="utf-8")
    found = load_scenario(file).reactions
    assert found is not None
    assert len(found.measured[0]) == 3
    (tmp_path / "bench.csv").write_text("T [degC],K\n360,19.2\n400,-1\n460,7\n", encoding="utf-8")
    with pytest.raises(ScenarioError, match=r"bench.csv:3: K = -1 is not above zero"):
        load_scenario(file)


@pytest.mark.parametrize(
    ("old", "new", "marker", "words"),
    [
        ("CO + 3 H2", "CO + 2 H2", "CH4 + H2O", "H: 6 on the left, 4 on the right, so 2 missing on the right"),
        ("CO2 + H2\n    dep", "CO2 + Hydro\n    dep", "CO + H2O", "no species is called 'Hydro'"),
        ("2 CO = C(gr)", "2 CO + C(gr)", "2 CO +", "it has no '='"),
        ("standard pressure: 1 atm", "standard pressure: 0 bar(g)", "0 bar(g)", "a standard pressure is absolute"),
        ("standard pressure: 1 atm", "standard pressure: -1 bar", "-1 bar", "not above vacuum"),
        ("unit of K: atm", "unit of K: hogshead", "hogshead", "no unit of an equilibrium constant"),
        ("per cent of K: 3", "per cent of K: 0", "0, kelvin", "expected more than 0"),
        ("constant enthalpy at: 700 degC", "constant enthalpy at: 700 degrees", "700 degrees",
         "is not a unit of temperature"),
        ("constant enthalpy at: 700 degC", "correlate: x", "correlate", "unknown key 'correlate'"),
        ("      reaction: reforming\n      constant enthalpy at: 700 degC", "      reaction: reforming", "tangent",
         "needs one of"),
        ("      constant enthalpy at: 700 degC",
         "      constant enthalpy at: 700 degC\n      correlation: ln K = 1/T", "tangent",
         "found 'constant enthalpy at' and 'correlation'"),
        ("      K: 12\n      enthalpy: -38 kJ/mol", "      K: 12", "given", "give K and enthalpy, or neither"),
        ("      K: 12\n", "      K: -12\n", "-12", "K must be a number above zero"),
        ("-38 kJ/mol", "-38 kJ", "-38 kJ", "expected a number with one of the units J/mol"),
        ("through: [700 degC, 900 degC]\n    two", "through: [700 degC]\n    two", "[700 degC]",
         "needs two temperatures"),
        ("through: [700 degC, 900 degC]\n    two", "through: [700 degC, 700 degC]\n    two", "[700 degC, 700",
         "two different temperatures"),
        ("K: [12.1, 1440]", "K: [12.1]", "[12.1]", "needs two values of K"),
        ("unit: atm^2", "unit: atm^3", "[12.1", "does not fit: moles of gas change by 2"),
        ("ln K = 4577.8/T - 4.33", "ln K = 4577.8/T - tan(T)", "ln K = 4577", "is no term of a correlation"),
        ("one: [reforming]", "one: [refining]", "refining", "'refining' is not one of the reactions"),
        ("both: [reforming, shift]", "both: [reforming, shift, reforming]", "both", "depend on each other"),
        ("gases: [CH4, H2O, CO, CO2, H2, N2]", "gases: [CH4, H2O, CO, H2, N2]", "both", "CO2 is not among the gases"),
        ("400, 12.6, 0.4", "400, 0, 0.4", "400, 0", "K = 0 is not above zero"),
        ("400, 12.6, 0.4", "400, 12.6", "400, 12.6\n", "2 cells, but the heading has 3 columns"),
        ("T [degC], K, u\n", "T, K, u\n", "T, K, u", "the unit of T is missing"),
        ("360, 19.2, 0.6\n        400, 12.6, 0.4\n        460",
         "400, 19.2, 0.6\n        400, 12.6, 0.4\n        400", "400, 19.2", "all values are at 673.15 K"),
        ("    basis: dry\n", "", "sample, T", "say whether the analyses are wet or dry"),
        ("tube, 816.85, 10, 73.5", "tube, 816.85, 10, -73.5", "tube, 816", "H2: -73.5 per cent is impossible"),
        ("tube, 816.85, 10, 73.5", "tube, 816.85, 10, 63.5", "tube, 816", "the shares add up to 90"),
        ("14.0, 8.7, 2.6, 1.2", "4.0, 8.7, 2.6, 11.2", "tube, 816", "the element balance against the feed is broken"),
        ("reactions: [shift]", "reactions: [deposit, shifty]", "shifty", "'shifty' is not one of the reactions"),
        ("from: 600 degC, to: 900 degC", "from: 600 degC, to: 6500 degC", "", "outside"),
    ],
)  # fmt: skip
def test_a_fault_is_told_with_its_place(old: str, new: str, marker: str, words: str) -> None:
    assert SOUND.count(old) == 1
    text = SOUND.replace(old, new)
    with pytest.raises(ScenarioError) as caught:
        parse_scenario(text, file="plant.yaml")
    told = str(caught.value)
    assert words in told
    line = next(each for each in told.splitlines() if words in each)
    if marker:
        at = text[: text.index(marker, text.index(new) if new and marker in new else 0)].count("\n") + 1
        assert line.startswith(f"plant.yaml:{at}:"), line


def test_reactions_whose_data_end_inside_the_grid() -> None:
    text = SOUND.replace("deposit: 2 CO = C(gr) + CO2", "deposit: CaCO3(s) = CaO(s) + CO2").replace(
        "to: 900 degC", "to: 1400 degC"
    )
    with pytest.raises(
        ScenarioError, match=r"the grid goes from 873.15 to 1673.15 K, the data of this reaction only"
    ):
        parse_scenario(text)


def test_all_faults_are_told_at_once() -> None:
    text = (
        SOUND.replace("CO + 3 H2", "CO + 2 H2")
        .replace("-38 kJ/mol", "-38")
        .replace("400, 12.6", "400, -12.6")
    )
    with pytest.raises(ScenarioError) as caught:
        parse_scenario(text)
    assert len(caught.value.faults) == 3
    assert [each.line for each in caught.value.faults] == sorted(
        each.line or 0 for each in caught.value.faults
    )


def test_faults_of_reactions_come_with_those_of_other_sections() -> None:
    text = SOUND.replace("CO + 3 H2", "CO + 2 H2").replace("N2: 0.05 mol", "N2: 0.05 moll")
    with pytest.raises(ScenarioError) as caught:
        parse_scenario(text)
    assert len(caught.value.faults) == 2


def test_the_preview_says_what_will_be_worked_out() -> None:
    told = parse_scenario(SOUND).describe()
    for words in (
        "shift: CO + H2O = CO2 + H2",
        "shortcuts to audit: tangent, given, secant",
        "alone against the whole map: one, both",
        "measured K of shift, bench: 3 values",
        "approach to equilibrium of shift: 1 analyses",
    ):
        assert words in told


def test_a_scenario_with_reactions_travels_to_other_processes() -> None:
    scenario = parse_scenario(SOUND)
    again = pickle.loads(pickle.dumps(scenario))
    assert [each.name for each in again.reactions.shortcuts] == [each.name for each in wanted().shortcuts]
    assert float(again.reactions.shortcuts[-1].ln_K(700.0)) == float(wanted().shortcuts[-1].ln_K(700.0))


def test_solid_feed_that_no_reaction_of_a_set_touches() -> None:
    text = SOUND.replace("CH4: 1 mol, H2O: 3 mol", "C(gr): 1 mol, H2O: 3 mol").replace(
        "conversions: [CH4]", "dry basis: true"
    )
    text = text[: text.index("  outlet analyses:")]
    with pytest.raises(
        ScenarioError, match=r"the feed holds C\(gr\), which takes no part in these reactions"
    ):
        parse_scenario(text)
    found = wanted(
        text.replace("one: [reforming]", "one: [deposit]").replace("    both: [reforming, shift]\n", "")
    )
    assert found.subsets[0].reactions[0].name == "deposit"
