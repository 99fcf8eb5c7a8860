"""Condensed phases in scenario files: naming them, results, figures of them, and where they are refused."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from matplotlib.figure import Figure

import gibbsmin
from gibbsmin.errors import ScenarioError
from gibbsmin.figures import figures_of, shown_phases
from gibbsmin.figures.boundary_lines import boundaries_of, joined
from gibbsmin.figures.of_outcome import count_figures, figure_options, write_outcome_figures
from gibbsmin.outcome import Outcome
from gibbsmin.outcome.saving import as_table
from gibbsmin.scenario import Scenario
from gibbsmin.scenario.loading import parse_scenario

LIME = """
title: lime and carbon
feed:
  gas: {temperature: 25 degC, amounts: {CH4: 1 mol, H2O: 2 mol}}
  lime: {temperature: 25 degC, amounts: {CaO(cd): 1 mol}}
grid:
  temperature: {from: 500 degC, to: 900 degC, points: 9}
  pressure: {from: 1 bar, to: 10 bar, points: 4, spacing: logarithmic}
species:
  gases: [CH4, H2O, CO, CO2, H2]
  condensed: [CaO, CaCO3]
  held back: [graphite]
results:
  key species: [H2, CH4]
  yields:
    carbon as carbonate: {of: CaCO3, element: C}
  ratios:
    carbonate to lime: {of: CO2, to: H2}
  boundaries:
    carbonate begins: {phase: CaCO3, along: temperature}
cross-check: {points: none}
"""


@pytest.fixture(scope="module")
def outcome() -> Outcome:
    return gibbsmin.run(parse_scenario(LIME))


def species_of(section: str) -> Scenario:
    text = LIME.replace("  condensed: [CaO, CaCO3]\n  held back: [graphite]\n", section)
    return parse_scenario(text.split("results:")[0] + "cross-check: {points: none}\n")


def test_all_brings_in_every_phase_of_the_elements_but_those_left_out() -> None:
    everything = species_of("  condensed: all\n").choice.condensed
    names = {each.name for each in everything}
    assert {"CaO(cd)", "CaCO3(cd)", "Ca(OH)2(cd)", "C(gr)", "H2O(cd)"} <= names
    fewer = parse_scenario(
        LIME.split("species:")[0]
        + "species: {gases: all, condensed: all, leave out: [graphite, Ca(OH)2(cd)], outside data range: leave out}\n"
    ).choice.condensed
    assert names - {each.name for each in fewer} == {"C(gr)", "Ca(OH)2(cd)"}
    held = species_of("  condensed: all\n  held back: [graphite]\n").choice
    assert names - {each.name for each in held.condensed} == {"C(gr)"}
    assert [each.name for each in held.held_back] == ["C(gr)"]


def test_a_gas_among_condensed_phases_is_a_fault_with_its_place() -> None:
    with pytest.raises(ScenarioError, match="CO2 is a gas, and no solid or liquid"):
        species_of("  condensed: [CO2]\n")


def test_without_a_gas_or_phase_for_an_element_the_feed_is_a_fault() -> None:
    with pytest.raises(ScenarioError, match="contains Ca"):
        species_of("  held back: [graphite]\n")


def test_the_share_of_an_element_in_a_phase_is_a_yield(outcome: Outcome) -> None:
    dataset = outcome.dataset
    share = dataset["phase_element_fraction"].sel(phase="CaCO3(cd)", element="C")
    np.testing.assert_allclose(dataset["carbon as carbonate"], share, rtol=1e-12)
    assert float(share.max()) > 0.5


def test_density_and_mean_molar_mass_are_those_of_the_gas(outcome: Outcome) -> None:
    dataset = outcome.dataset
    mass = (dataset["amount"] * dataset["molar_mass"]).sum("species") / dataset["gas_amount"]
    np.testing.assert_allclose(dataset["mean_molar_mass"], mass, rtol=1e-12)
    volume = dataset["gas_amount"] * 8.31446261815324 * dataset["temperature"] / dataset["pressure"]
    expected = (dataset["amount"] * dataset["molar_mass"]).sum("species") / volume
    np.testing.assert_allclose(dataset["density"], expected, rtol=1e-12)


def test_heat_duty_of_a_map_is_the_enthalpy_of_all_that_leaves_less_the_feed(outcome: Outcome) -> None:
    dataset = outcome.dataset
    difference = dataset["enthalpy_per_feed"] - dataset["heat_duty_per_feed"]
    assert float(difference.max() - difference.min()) < 1e-6 * abs(
        float(difference.mean())
    )  # the feed's, constant


def test_what_is_held_back_is_reported_but_does_not_form(outcome: Outcome) -> None:
    dataset = outcome.dataset
    graphite = dataset.sel(phase="C(gr)")
    assert int(graphite["phase_takes_part"]) == 0
    assert float(graphite["phase_amount"].max()) == 0.0
    assert (graphite["phase_activity"] > 0).all()
    summary = outcome.summary()
    assert "condensed phases that may form: CaO(cd), CaCO3(cd)" in summary
    assert "condensed phases held back: C(gr)" in summary
    assert "CaCO3(cd), amount per mol of feed" in summary
    assert "C(gr), activity" in summary


def test_the_table_has_amounts_and_activities_of_phases(outcome: Outcome) -> None:
    table = as_table(outcome.dataset)
    assert "phase_amount CaCO3(cd) [mol]" in table
    assert "phase_activity C(gr) [1]" in table


def test_phases_and_boundaries_have_their_figures(outcome: Outcome, tmp_path: Path) -> None:
    drawn = {each.name: each.figure for each in figures_of(outcome.dataset, **figure_options(outcome))}
    assert {
        "map_CaCO3_amount",
        "map_CaO_amount",
        "map_C_gr_activity",
        "map_carbon_as_carbonate",
    } <= drawn.keys()
    assert len(drawn) == count_figures(outcome)
    figure = drawn["map_CaCO3_amount"]
    assert isinstance(figure, Figure)
    lines = [line for axes in figure.axes for line in axes.get_lines() if line.get_gid() == "boundary"]
    (boundary,) = outcome.boundaries
    assert len(lines) == 1
    celsius = boundary.positions[:, 0] - 273.15
    np.testing.assert_allclose(np.asarray(lines[0].get_xdata(), dtype=float), celsius, rtol=1e-9)
    words = " ".join(text.get_text() for text in figure.texts)
    assert "solid line: carbonate begins" in words
    assert write_outcome_figures(outcome, tmp_path).left_out == {}


def test_figures_know_boundaries_by_their_attribute(outcome: Outcome) -> None:
    (lines,) = boundaries_of(outcome.dataset)
    assert lines.label == "carbonate begins"
    assert lines.along == "temperature"
    assert ("C(gr)", "phase_activity") in shown_phases(outcome.dataset)


def test_two_branches_that_meet_become_one_line() -> None:
    # A parabola x = +-sqrt(y - 1): no crossing at y = 0 and 1/2, two from y = 2 on
    y = np.array([0.0, 0.5, 2.0, 3.0, 5.0])
    x = np.sqrt(np.maximum(y - 1, 0))
    places = np.where((y > 1)[:, None], np.stack([-x, x], axis=1), np.nan)
    direction = np.where((y > 1)[:, None], [[1, -1]], 0).astype(np.int8)
    (line,) = joined(y, places, direction)
    assert line.along.tolist() == [-2.0, -np.sqrt(2.0), -1.0, 1.0, np.sqrt(2.0), 2.0]
    assert line.over.tolist() == [5.0, 3.0, 2.0, 2.0, 3.0, 5.0]
    assert line.direction == -1  # walked against the run that rises


def test_a_ring_of_crossings_is_closed() -> None:
    y = np.array([0.0, 1.0, 2.0, 3.0])
    places = np.array([[np.nan, np.nan], [1.0, 2.0], [1.0, 2.0], [np.nan, np.nan]])
    direction = np.array([[0, 0], [1, -1], [1, -1], [0, 0]], dtype=np.int8)
    (line,) = joined(y, places, direction)
    assert (line.over[0], line.along[0]) == (line.over[-1], line.along[-1])
    assert len(line.over) == 5


def test_runs_of_one_direction_stay_apart() -> None:
    y = np.arange(4.0)
    places = np.stack([y, 10 + y], axis=1)
    direction = np.ones((4, 2), dtype=np.int8)
    lines = joined(y, places, direction)
    assert sorted(line.along.tolist() for line in lines) == [[0, 1, 2, 3], [10, 11, 12, 13]]
