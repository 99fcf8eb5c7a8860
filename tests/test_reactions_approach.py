"""Approach to equilibrium: gases made at a known temperature, completed analyses, uncertainty, impossible analyses."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import gibbsmin
from gibbsmin.errors import Fault, MeasurementError
from gibbsmin.reactions import Analysis, approaches, complete_analysis, read_reaction
from gibbsmin.scenario.measurements import analyses_from_file, measured_from_file
from gibbsmin.species import standard_library

LIBRARY = standard_library()
NAMES = ["CH4", "H2O", "CO", "CO2", "H2", "N2"]
SPECIES = {name: LIBRARY.find(name) for name in [*NAMES, "Ar", "O2", "C2H6"]}
REFORMING = read_reaction("CH4 + H2O = CO + 3 H2", name="reforming")
SHIFT = read_reaction("CO + H2O = CO2 + H2", name="shift")
FEED = {"CH4": 1.0, "H2O": 3.0, "N2": 0.05}
T_EQUILIBRIUM = 1090.0


def gas(T: float = T_EQUILIBRIUM) -> dict[str, float]:
    """Wet mole per cent at equilibrium at T and 24 bar."""
    solved = gibbsmin.equilibrium(FEED, T, 24e5, species=NAMES)
    return {name: 100 * float(solved["mole_fraction"].sel(species=name)) for name in NAMES}


def dry(wet: dict[str, float]) -> dict[str, float]:
    rest = 100 - wet["H2O"]
    return {name: 100 * x / rest for name, x in wet.items() if name != "H2O"}


def analysis(per_cent: dict[str, float], **options: object) -> Analysis:
    return Analysis("tube", T_EQUILIBRIUM, 24e5, per_cent, **options)  # type: ignore[arg-type]


def test_a_gas_at_equilibrium_has_no_approach() -> None:
    carbon = read_reaction("2 CO = C(gr) + CO2")
    found = approaches([analysis(gas())], [REFORMING, SHIFT, carbon], SPECIES)
    for each in found[:2]:
        assert each.ratio == pytest.approx(1.0, rel=1e-9)
        assert each.approach == pytest.approx(0.0, abs=1e-6)
        assert each.equilibrium_temperature == pytest.approx(T_EQUILIBRIUM, abs=1e-6)
    # Graphite counts with activity one: Q/K > 1 here says that carbon would burn away, 1/(Q/K) is its activity.
    assert found[2].ratio > 1


def test_approach_is_positive_where_the_reaction_falls_short() -> None:
    """The gas of 1075 K at a tube temperature of 1090 K: 15 K short for the endothermic reaction, and for the exothermic
    one, whose equilibrium at 1090 K lies further left, 15 K too far."""
    reforming, shift = approaches([analysis(gas(1075.0))], [REFORMING, SHIFT], SPECIES)
    assert reforming.approach == pytest.approx(15.0, abs=1e-6)
    assert reforming.verdict == "falls short of equilibrium"
    assert reforming.ratio < 1
    assert shift.approach == pytest.approx(-15.0, abs=1e-6)
    assert shift.verdict == "has gone beyond equilibrium"
    assert shift.ratio > 1
    backwards = read_reaction("CO + 3 H2 = CH4 + H2O", name="methanation")
    (other,) = approaches([analysis(gas(1075.0))], [backwards], SPECIES)
    assert other.approach == pytest.approx(-15.0, abs=1e-6)


@pytest.mark.parametrize("how", ["known", "balance"])
def test_water_of_a_dry_analysis(how: str) -> None:
    wet = gas()
    options = {"water": wet["H2O"]} if how == "known" else {"feed": FEED}
    completed = complete_analysis(analysis(dry(wet), basis="dry", **options), SPECIES)
    for name, x in wet.items():
        assert completed.mole_fraction[name] == pytest.approx(x / 100, rel=1e-9)
    for miss in completed.imbalance.values():
        assert abs(miss) < 1e-9
    found = approaches([analysis(dry(wet), basis="dry", **options)], [REFORMING, SHIFT], SPECIES)
    assert [each.approach for each in found] == [pytest.approx(0.0, abs=1e-5)] * 2


def test_rounded_analyses_are_brought_to_one_hundred() -> None:
    rounded = {name: round(x, 1) for name, x in gas().items()}
    completed = complete_analysis(analysis(rounded), SPECIES)
    assert sum(completed.mole_fraction.values()) == pytest.approx(1.0, rel=1e-14)


@pytest.mark.parametrize(("basis", "how"), [("wet", ""), ("dry", "known"), ("dry", "balance")])
def test_uncertainty_agrees_with_repeated_draws(basis: str, how: str) -> None:
    """First-order propagation against 4000 seeded draws through the whole calculation; 4 standard errors are 4.5 %."""
    wet = gas(1075.0)
    values = wet if basis == "wet" else dry(wet)
    spread = {name: 0.004 * x for name, x in values.items()}
    options: dict[str, object] = {"basis": basis}
    if how == "known":
        options["water"] = wet["H2O"]
        spread["H2O"] = 0.3
    if how == "balance":
        options["feed"] = FEED
    (expected,) = approaches([analysis(values, uncertainty=spread, **options)], [REFORMING], SPECIES)
    rng = np.random.default_rng(12)
    draws = []
    for _ in range(4000 if how != "balance" else 1500):
        changed = {name: x + spread[name] * rng.normal() for name, x in values.items()}
        own = dict(options)
        if how == "known":
            own["water"] = wet["H2O"] + 0.3 * rng.normal()
        done = complete_analysis(analysis(changed, **own), SPECIES, sum_tolerance=10, balance_tolerance=1)
        y = done.mole_fraction
        draws.append(np.log(y["CO"] * y["H2"] ** 3 / (y["CH4"] * y["H2O"])))
    assert expected.ln_Q_error == pytest.approx(np.std(draws), rel=0.06)
    assert expected.approach_error == pytest.approx(
        expected.ln_Q_error * 8.314462618 * expected.equilibrium_temperature**2 / 226_400, rel=0.01
    )


def test_uncertainty_of_the_thermometer_counts_as_it_is() -> None:
    (alone,) = approaches([analysis(gas(), temperature_uncertainty=3.0)], [SHIFT], SPECIES)
    assert alone.approach_error == pytest.approx(3.0)
    assert alone.verdict in (
        "falls short of equilibrium",
        "has gone beyond equilibrium",
        "at equilibrium within its uncertainty",
    )


def test_a_quotient_beyond_all_constants_has_no_temperature() -> None:
    strange = {"CO": 1e-9, "H2O": 1e-9, "CO2": 49.999999999, "H2": 50.0}
    (found,) = approaches([analysis(strange)], [SHIFT], SPECIES)
    assert np.isnan(found.equilibrium_temperature)
    assert np.isnan(found.approach)
    assert found.ratio > 1e10


SOUND = {"CH4": 5.0, "H2O": 35.0, "CO": 8.0, "CO2": 6.0, "H2": 46.0}


@pytest.mark.parametrize(
    ("per_cent", "options", "words"),
    [
        ({**SOUND, "CO": -1.0, "H2": 55.0}, {}, "CO: -1 per cent is impossible"),
        ({**SOUND, "CO": float("nan")}, {}, "CO: nan per cent is impossible"),
        ({**SOUND, "CO": 4.0}, {}, "the shares add up to 96 per cent, not to 100 within 1"),
        (SOUND, {"basis": "dry"}, "a dry analysis cannot hold water"),
        ({"CO": 50.0, "H2": 50.0}, {"basis": "dry"}, "must be known, or closed by the balance"),
        ({"CO": 50.0, "H2": 50.0}, {"basis": "dry", "water": 120.0}, "water: 120 per cent is impossible"),
        (SOUND, {"water": 30.0}, "a wet analysis holds its water already"),
        (SOUND, {"feed": {"CH4": 1.0, "H2O": 9.0}}, "the element balance against the feed is broken"),
        (SOUND, {"feed": {"CH4": 0.0}}, "the feed is nothing"),
        ({**SOUND, "N2": 0.5}, {"feed": {"CH4": 1.0, "H2O": 3.0}}, "N +inf %"),
        (SOUND, {"uncertainty": {"CO": -0.1}}, "CO: an uncertainty of -0.1 per cent is impossible"),
        (SOUND, {"uncertainty": {"Ar": 0.1}}, "Ar has an uncertainty but no value"),
        ({}, {}, "it has no species"),
        (
            {"CO": 60.0, "H2": 40.0},
            {"basis": "dry", "feed": {"N2": 1.0, "CO": 1.0}},
            "cannot be closed by the balance",
        ),
    ],
)
def test_impossible_analyses(per_cent: dict[str, float], options: dict[str, object], words: str) -> None:
    with pytest.raises(MeasurementError) as caught:
        complete_analysis(analysis(per_cent, **options), SPECIES)
    assert words in str(caught.value)
    assert "tube" in str(caught.value)


def test_a_missing_species_is_named_and_all_faults_come_at_once() -> None:
    bad = Analysis("second", -3.0, 24e5, SOUND, place=Fault("", "outlet.csv", 3))
    lacking = Analysis("first", 1000.0, 24e5, {"H2": 60.0, "H2O": 40.0}, place=Fault("", "outlet.csv", 2))
    with pytest.raises(MeasurementError) as caught:
        approaches([lacking, bad], [SHIFT], SPECIES)
    lines = str(caught.value).splitlines()
    assert lines[0].startswith("outlet.csv:2: first: CO, CO2 is not in the analysis")
    assert lines[1] == "outlet.csv:3: second: the temperature -3 is not above zero"


# --- files ---------------------------------------------------------------------------------------------------


def test_analyses_from_a_file(tmp_path: Path) -> None:
    file = tmp_path / "outlet.csv"
    file.write_text(
        "# two samples\nsample; T [degC]; p [bar(g)]; basis; water; H2; CO; CO2; methane; u(CO); u(T); u(water)\n"
        "A; 816.85; 22.98675; wet; ; 46; 8; 6; 5; 0.1; 3;\nB; 816.85; 22.98675; dry; 35; 70.8; 12.3; 9.2; 7.7; ; ; 0.5\n",
        encoding="utf-8",
    )
    found, species = analyses_from_file(file, LIBRARY)
    with pytest.raises(MeasurementError, match=r"outlet.csv:3: A: the shares add up to 65"):
        approaches(found, [SHIFT], species)
    file.write_text(file.read_text().replace("46; 8; 6; 5;", "71; 12.3; 9; 7.7;"), encoding="utf-8")
    found, species = analyses_from_file(file, LIBRARY)
    assert found[0].temperature == pytest.approx(1090.0)
    assert found[0].pressure == pytest.approx(24e5)
    assert found[0].uncertainty == {"CO": 0.1}
    assert found[0].temperature_uncertainty == 3.0
    assert found[1].water == 35.0
    assert found[1].uncertainty == {"H2O": 0.5}
    assert species["methane"].name == "CH4"
    (approach,) = approaches(found[1:], [REFORMING], species)
    assert approach.ln_Q_error > 0


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("T,p [bar],H2,basis\n1,2,100,wet\n", "the unit of T is missing; write T [degC]"),
        ("T [degC],p [bar],H2\n1,2,100\n", "say whether the analyses are wet or dry"),
        ("T [degC],p [bar],Hydrogenium,basis\n1,2,100,wet\n", "no species is called 'Hydrogenium'"),
        ("T [degC],p [bar],H2,basis\n1,2,100,damp\n", ":2: basis: expected wet or dry, found 'damp'"),
        ("T [degC],p [bar],H2,basis\n1,2,a lot,wet\n", ":2: H2: expected a number, found 'a lot'"),
        ("T [degC],p [bar],H2,basis\n1,2,wet\n", ":2: 3 cells, but the heading has 4 columns"),
        ("T [degC],H2,basis\n1,2,wet\n", "no column holds the pressure"),
        ("T [degC],T [degC],p [bar]\n", "the column 'T' is there twice"),
        ("T [degC],p [furlong],H2,basis\n1,2,100,wet\n", "'furlong' is not a unit of pressure"),
        ("T [degC],p [bar],H2 [mg/l],basis\n1,2,100,wet\n", "shares are in mole per cent, not 'mg/l'"),
        ("", "the table is empty"),
        ("T [degC],p [bar],H2,basis\n", "a heading but no values"),
    ],
)
def test_files_with_faults(tmp_path: Path, text: str, words: str) -> None:
    file = tmp_path / "outlet.csv"
    file.write_text(text, encoding="utf-8")
    with pytest.raises(MeasurementError) as caught:
        analyses_from_file(file, LIBRARY)
    assert words in str(caught.value)
    assert "outlet.csv" in str(caught.value)


@pytest.mark.parametrize(
    ("head", "unit"),
    [
        ("T [degC],Kp [atm],u", ""),
        ("T / degC,K / atm,u", ""),
        ("T (degC);K (atm);u", ""),
        ("T [degC]\tK\tu", "atm"),
    ],
)
def test_measured_values_from_a_file(tmp_path: Path, head: str, unit: str) -> None:
    delimiter = next(mark for mark in ";\t," if mark in head)
    rows = [("25", "0.1426", "0.002"), ("35", "0.3183", "0.004"), ("45", "0.6706", "0.008")]
    file = tmp_path / "n2o4.csv"
    file.write_text("\n".join([head, *(delimiter.join(row) for row in rows)]) + "\n", encoding="utf-8")
    found = measured_from_file(file, read_reaction("N2O4 = 2 NO2"), unit=unit)
    np.testing.assert_allclose(found.temperature, [298.15, 308.15, 318.15])
    np.testing.assert_allclose(np.exp(found.ln_K), np.array([0.1426, 0.3183, 0.6706]) * 1.01325, rtol=1e-12)
    assert found.uncertainty is not None
    np.testing.assert_allclose(found.uncertainty, [0.002 / 0.1426, 0.004 / 0.3183, 0.008 / 0.6706])


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("T [degC],K\n25,1\n35,2\n45,3\n", "the unit of K is missing: moles of gas change by 1"),
        ("T,K [atm]\n25,1\n35,2\n45,3\n", "the unit of T is missing"),
        ("T [degC],log K\n25,1\n", "'log K' may mean ln K or log10 K"),
        ("T [degC],y\n25,1\n", "no column holds the constant"),
        ("T [degC],K [atm],colour\n25,1,red\n", "the column 'colour' is not understood"),
        ("T [degC],K [atm]\n25,1\n35,-2\n45,3\n", ":3: K = -2 is not above zero"),
        ("T [degC],K [atm]\n25,1\n35,\n45,3\n", ":3: K is missing"),
        ("T [degC];K [atm]\n25;1,5\n35;2\n45;3\n", "write decimals with a point"),
        ("T [degC],K [atm]\n25,1\n35,2\n", "2 values are too few"),
        ("T [degC],K [atm]\n-300,1\n35,2\n45,3\n", ":2: a temperature of -26.85 K"),
    ],
)
def test_measured_files_with_faults(tmp_path: Path, text: str, words: str) -> None:
    file = tmp_path / "k.csv"
    file.write_text(text, encoding="utf-8")
    with pytest.raises(MeasurementError) as caught:
        measured_from_file(file, read_reaction("N2O4 = 2 NO2"))
    assert words in str(caught.value)


def test_a_file_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(MeasurementError, match="cannot be read: No such file"):
        measured_from_file(tmp_path / "none.csv", SHIFT)
