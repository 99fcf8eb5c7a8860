"""Crossings along lines, and the boundaries of a scenario: all of them, exactly where the criterion is met."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest

import gibbsmin
from gibbsmin.boundaries import find_crossings
from gibbsmin.errors import ScenarioError
from gibbsmin.outcome import Outcome
from gibbsmin.scenario.loading import parse_scenario

REFORMER = """
title: carbon in a reformer
feed:
  gas: {amounts: {CH4: 1 mol, CO2: 0.5 mol}}
  steam: {amounts: {H2O: 1 mol}}
grid:
  temperature: {from: 600 K, to: 1400 K, points: 17}
  pressure: {from: 1 bar, to: 30 bar, points: 4, spacing: logarithmic}
  further axes:
    steam to methane:
      ratio: {of: {moles of: H2O}, to: {moles of: CH4}, by changing: steam}
      values: [0.2, 0.5, 1, 2]
species:
  gases: [CH4, CO2, CO, H2O, H2, C2H6]
  condensed: [graphite, H2O(l)]
results:
  dew points: [H2O]
  boundaries:
    carbon over temperature: {phase: graphite, along: temperature}
    carbon over pressure: {phase: graphite, along: pressure}
    carbon over steam: {phase: graphite, along: steam to methane}
    methane slip 2 %: {mole fraction of: CH4, value: 0.02, along: temperature}
    methane converted: {conversion of: CH4, value: 0.9, along: pressure}
cross-check: {points: none}
"""


@pytest.fixture(scope="module")
def outcome() -> Outcome:
    return gibbsmin.run(parse_scenario(REFORMER))


def test_two_crossings_between_scanned_positions_are_found_by_their_extreme() -> None:
    zeros = np.array([[1.02, 1.03], [1.52, 1.99]])  # the scan steps by 0.5

    def function(x: np.ndarray, line: np.ndarray) -> np.ndarray:
        return np.asarray((x - zeros[line, 0]) * (x - zeros[line, 1]))

    scanned = np.arange(0.0, 3.1, 0.5)
    values = np.array([function(scanned, np.full(7, i)) for i in range(2)])
    found = find_crossings(scanned, values, function)
    np.testing.assert_allclose(found.positions, zeros, rtol=1e-9)
    assert found.direction.tolist() == [[-1, 1], [-1, 1]]
    assert found.first_sign.tolist() == [1, 1]


def test_a_crossing_on_a_scanned_position_counts_once_and_gaps_make_none() -> None:
    scanned = np.array([0.0, 1.0, 2.0, 3.0, 4.0])
    values = np.array([[-1.0, 0.0, 1.0, np.nan, -1.0]])
    found = find_crossings(scanned, values, lambda x, line: x - 1.0)
    assert found.positions.tolist() == [[1.0]]
    assert found.direction.tolist() == [[1]]


def test_a_crossing_that_cannot_be_closed_in_on_is_counted_and_not_invented() -> None:
    scanned = np.array([0.0, 1.0])
    found = find_crossings(scanned, np.array([[-1.0, 1.0]]), lambda x, line: np.full(np.shape(x), np.nan))
    assert found.unsettled == 1
    assert found.positions.size == 0


@pytest.mark.parametrize("name", ["temperature", "pressure", "steam"])
def test_graphite_has_activity_one_at_its_boundaries_over_the_gas_alone(outcome: Outcome, name: str) -> None:
    (boundary,) = [each for each in outcome.boundaries if each.wanted.name == f"carbon over {name}"]
    assert boundary.crossings >= 5
    checked = 0
    for index in zip(*np.nonzero(boundary.direction), strict=True):
        at = {axis.name: axis.values[i] for axis, i in zip(boundary.others, index[:-1], strict=True)}
        at[boundary.along.name] = float(boundary.positions[index])
        for shift, expected in ((-1e-6, -1), (1e-6, 1)):
            moved = {**at, boundary.along.name: at[boundary.along.name] * (1 + shift)}
            feed = {"CH4": 1.0, "CO2": 0.5, "H2O": moved["steam_to_methane"]}
            gas = gibbsmin.equilibrium(
                feed,
                moved["temperature"],
                moved["pressure"],
                species=["CH4", "CO2", "CO", "H2O", "H2", "C2H6"],
                held_back="graphite",
            )
            log_activity = np.log(gas["phase_activity"].item())
            assert np.sign(log_activity) == expected * boundary.direction[index]
            checked += 1
    assert checked == 2 * boundary.crossings


def test_lower_and_upper_temperature_of_a_carbon_region_are_both_found() -> None:
    text = """
title: carbon between two temperatures
feed: {gas: {amounts: {CH4: 1 mol, H2O: 1.3 mol}}}
grid: {temperature: {from: 500 K, to: 1500 K, points: 11}, pressure: 1 bar}
species: {gases: [CH4, CO2, CO, H2O, H2], held back: [graphite]}
results: {boundaries: {carbon: {phase: graphite, along: temperature}}}
cross-check: {points: none}
"""
    outcome = gibbsmin.run(parse_scenario(text))
    (boundary,) = outcome.boundaries
    assert boundary.direction.tolist() == [[1, -1]]
    low, high = boundary.positions[0]
    assert 600 < low < 900 < high < 1100
    # by the activity of the map itself: above 1 exactly between the two
    activity = outcome.dataset["phase_activity"].values.ravel()
    T = outcome.dataset["temperature"].values
    np.testing.assert_array_equal(activity > 1, (low < T) & (high > T))


def test_contours_lie_where_the_result_has_the_value(outcome: Outcome) -> None:
    by_name = {each.wanted.name: each for each in outcome.boundaries}
    species = ["CH4", "CO2", "CO", "H2O", "H2", "C2H6"]
    slip, converted = by_name["methane slip 2 %"], by_name["methane converted"]
    i, j, k = (int(each[0]) for each in np.nonzero(slip.direction))
    ratio, pressure = slip.others[0].values[i], slip.others[1].values[j]
    feed = {"CH4": 1.0, "CO2": 0.5, "H2O": ratio}
    there = gibbsmin.equilibrium(
        feed, float(slip.positions[i, j, k]), pressure, species=species, condensed="graphite"
    )
    assert there["mole_fraction"].sel(species="CH4").item() == pytest.approx(0.02, rel=1e-7)
    i, j, k = (int(each[-1]) for each in np.nonzero(converted.direction))
    feed["H2O"] = converted.others[0].values[i]
    there = gibbsmin.equilibrium(
        feed,
        converted.others[1].values[j],
        float(converted.positions[i, j, k]),
        species=species,
        condensed="graphite",
    )
    assert 1 - there["amount"].sel(species="CH4").item() == pytest.approx(0.9, rel=1e-7)
    assert int(converted.direction[i, j, k]) == -1  # pressure pushes methane back


def test_boundaries_are_variables_rows_of_a_table_and_lines_of_the_summary(
    outcome: Outcome, tmp_path: Path
) -> None:
    dataset = outcome.dataset
    variable = dataset["boundary carbon over temperature"]
    assert variable.attrs["boundary_along"] == "temperature"
    assert variable.attrs["units"] == "K"
    assert variable.dims == ("steam_to_methane", "pressure", "root")
    folder = outcome.save(tmp_path / "out")
    with (folder / "boundaries.csv").open(encoding="utf-8") as stream:
        rows = list(csv.DictReader(stream))
    assert len(rows) == sum(each.crossings for each in outcome.boundaries)
    own = [float(row["temperature [K]"]) for row in rows if row["boundary"] == "carbon over temperature"]
    positions = variable.values[np.isfinite(variable.values)]
    np.testing.assert_allclose(sorted(own), np.sort(positions), rtol=1e-12)
    summary = " ".join(outcome.summary().split())
    assert (
        f"carbon over temperature (C(gr) begins to form, along temperature): {len(own)} crossings" in summary
    )
    assert "carbon over temperature (C(gr) begins to form" in outcome._repr_html_()
    assert "H2O(l) has data from 273.15 to 600 K; outside them it counts as absent" in summary


def test_dew_point_of_a_gas_over_liquid_water_is_its_own_temperature() -> None:
    text = REFORMER.replace("{from: 600 K, to: 1400 K, points: 17}", "[350 K, 400 K]")
    dataset = gibbsmin.run(
        parse_scenario(text.split("  boundaries:")[0] + "cross-check: {points: none}\n")
    ).dataset
    wet = dataset["phase_amount"].sel(phase="H2O(l)").values > 0
    assert wet.any()
    dew = dataset["dew point of H2O"]
    own = dataset["temperature"].broadcast_like(dew).transpose(*dew.dims)
    np.testing.assert_allclose(dew.values[wet], own.values[wet], rtol=1e-9)
    dry = ~wet & np.isfinite(dew.values)
    assert (dew.values[dry] < own.values[dry]).all()


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("{phase: graphite, along: pressure}", "{phase: graphite, along: depth}", "'depth' is not an axis"),
        ("{phase: graphite, along: pressure}", "{along: pressure}", "needs one of 'phase'"),
        (
            "{phase: graphite, along: pressure}",
            "{phase: graphite, value: 2, along: pressure}",
            "takes no 'value'",
        ),
        ("value: 0.02, ", "", "needs a 'value'"),
        ("value: 0.02", "value: 1.2", "1.2 is no mole fraction"),
        ("{from: 1 bar, to: 30 bar, points: 4, spacing: logarithmic}", "2 bar", "pressure has one value"),
        ("dew points: [H2O]", "dew points: [CO]", "the library has no liquid CO"),
        ("condensed: [graphite, H2O(l)]", "condensed: [graphite, C(gr)]", "C(gr) is listed twice"),
        (
            "condensed: [graphite, H2O(l)]",
            "condensed: [graphite]\n  held back: [graphite]",
            "cannot be held back",
        ),
    ],
)
def test_faults_of_boundaries_and_phases_are_told(old: str, new: str, message: str) -> None:
    assert old in REFORMER
    with pytest.raises(ScenarioError) as caught:
        parse_scenario(REFORMER.replace(old, new))
    assert message in str(caught.value)
