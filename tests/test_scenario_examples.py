"""The example scenarios: sound, valid against the schema, of a sensible size, and describing themselves."""

from __future__ import annotations

import re
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import jsonschema
import numpy as np
import pytest

from gibbsmin.scenario import Scenario, load_scenario
from gibbsmin.scenario.preview import preview
from gibbsmin.scenario.structure import schema
from gibbsmin.shipped_files import scenario_folder
from gibbsmin.strict_yaml import parse_file

FILES = sorted(scenario_folder().glob("*.yaml"))

# what the examples must cover, and a result each of them has to ask for
EXPECTED = {
    "ammonia_synthesis": "NH3",
    "digester_gas_carbon_limits": "CO",
    "digester_gas_reforming": "CO",
    "furnace_flue_gas": "NO",
    "iron_oxide_reduction": "H2",
    "lime_in_reformer": "H2",
    "shift_high_temperature": "CO",
    "shift_low_temperature": "CO",
    "steam_reforming": "CH4",
    "sulphur_cooler": "S8",
    "sulphur_recovery_furnace": "S2",
}


@pytest.fixture(params=FILES, ids=lambda path: path.stem)
def file(request: pytest.FixtureRequest) -> Path:
    path: Path = request.param
    return path


def test_all_processes_are_there() -> None:
    assert EXPECTED.keys() <= {file.stem for file in FILES}


def test_an_example_is_sound_and_asks_for_something(file: Path) -> None:
    scenario = load_scenario(file)
    assert scenario.notes.count("\n") >= 10
    assert "Caution" in scenario.notes
    if file.stem in EXPECTED:
        assert EXPECTED[file.stem] in scenario.results.key_species
    assert 500 <= scenario.points <= 10_000
    assert len(scenario.species) <= 100


def test_an_example_is_valid_against_the_schema(file: Path) -> None:
    errors = list(jsonschema.Draft202012Validator(schema()).iter_errors(parse_file(file).data))
    assert errors == []


def test_the_schema_comment_leads_to_the_schema(file: Path) -> None:
    first = file.read_text(encoding="utf-8").splitlines()[0]
    match = re.fullmatch(r"# yaml-language-server: \$schema=(\S+)", first)
    assert match is not None
    if file.parent.name == "scenarios" and file.parent.parent.joinpath("gibbsmin").is_dir():  # a checkout
        assert (file.parent / match[1]).resolve() == Path(load_scenario.__code__.co_filename).with_name(
            "schema.json"
        )


def test_an_example_describes_itself(file: Path) -> None:
    scenario = load_scenario(file)
    text = scenario.describe()
    assert scenario.title in text
    for stream in scenario.streams:
        assert stream in text
    for axis in scenario.axes:
        assert axis.title in text
    for name in scenario.choice.names:
        assert name in text
    assert f"{scenario.points:,} points x {len(scenario.species)} gases" in text
    size = preview(scenario)
    assert size.result_bytes >= scenario.points * len(scenario.species) * 16
    assert f"to cross-check {size.checked_points} points" in text
    for stream in scenario.streams.values():  # in the units of the file
        if stream.temperature is not None:
            assert f" {stream.display_temperature_unit}" in text


def test_time_foreseen_grows_with_points_species_and_checks() -> None:
    """Orders of magnitude only; no clock is asked."""
    scenario = scenario_named("steam_reforming")
    size = preview(scenario)
    assert size.checked_points == 50
    unchecked = replace(scenario, cross_check=replace(scenario.cross_check, extent="none"))
    assert preview(unchecked).checking_seconds == 0
    assert "cross-check" not in unchecked.describe()
    everywhere = replace(scenario, cross_check=replace(scenario.cross_check, extent="all"))
    assert preview(everywhere).checked_points == scenario.points
    assert preview(everywhere).checking_seconds > 10 * size.checking_seconds
    assert preview(scenario_named("shift_low_temperature")).solving_seconds < size.solving_seconds


def test_streams_are_shown_in_the_units_of_the_file() -> None:
    text = scenario_named("steam_reforming").describe()
    assert "520 degC" in text
    assert "32 bar(g)" in text


def scenario_named(name: str) -> Scenario:
    return load_scenario(scenario_folder() / f"{name}.yaml")


def test_steam_to_carbon_is_what_the_axis_says() -> None:
    scenario = scenario_named("steam_reforming")
    streams = scenario.exact_stream_amounts()
    gas = streams["natural gas"]
    carbon = sum(n * int(scenario.feed_species[s].composition.get("C", 0)) for s, n in gas.items())
    assert (streams["steam"]["H2O"] / carbon).tolist() == [Fraction(5, 2), 3, Fraction(7, 2), 4]


def test_flue_gas_at_air_ratio_one_is_exactly_stoichiometric() -> None:
    feed = scenario_named("furnace_flue_gas").exact_feed_amounts()
    excess = feed["O2"] - (2 * feed["CH4"] + Fraction(7, 2) * feed["C2H6"] + 5 * feed["C3H8"])
    assert excess.tolist()[1] == 0
    assert (excess[2:] > 0).all()
    assert excess[0] < 0


def test_the_second_shift_stage_is_fed_by_the_first() -> None:
    """Gas of stage two = equilibrium of stage one at 420 degC, half a mole of steam per mole of dry gas.

    Shift constant: ln K = 4577.8/T - 4.33 (Moe 1962, from memory); streams are rounded to whole kmol/h.
    """
    first, second = scenario_named("shift_high_temperature"), scenario_named("shift_low_temperature")
    row = first.further_axes[0].values.index(0.5)
    feed = {name: float(values[row]) / 1e3 for name, values in first.feed_amounts().items()}
    given = second.streams["gas from the first stage"].amounts
    out = {name: float(given[name]) / 1e3 for name in given}
    out["H2O"] = float(second.streams["steam"].amounts["H2O"]) / 1e3
    extent = feed["CO"] - out["CO"]
    for name, sign in {"CO2": 1, "H2": 1, "H2O": -1, "Ar": 0, "N2": 0}.items():
        assert out[name] == pytest.approx(feed[name] + sign * extent, abs=1.0)
    quotient = out["CO2"] * out["H2"] / (out["CO"] * out["H2O"])
    assert np.log(quotient) == pytest.approx(4577.8 / (420 + 273.15) - 4.33, abs=0.02)
