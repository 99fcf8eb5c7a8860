"""What the notes of the example scenarios say in figures, held against the solved examples."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import gibbsmin
from gibbsmin.scenario import Scenario, load_scenario
from gibbsmin.shipped_files import scenario_folder


def example(name: str) -> Scenario:
    return load_scenario(scenario_folder() / f"{name}.yaml")


def solved(scenario: Scenario, feed: int, temperature: Any, pressure: Any, *, all_gases: bool = False) -> Any:
    """Equilibrium of one feed of the scenario (flat index over its further axes), every point solved."""
    amounts = {name: float(values.reshape(-1)[feed]) for name, values in scenario.feed_amounts().items()}
    species = None if all_gases else scenario.choice.names
    result = gibbsmin.equilibrium(amounts, temperature, pressure, species=species, library=scenario.library)
    assert (result["status"] == 0).all()
    return result


@pytest.mark.parametrize("name", ["steam_reforming", "digester_gas_reforming"])
def test_gases_that_were_left_out_stay_under_a_millionth(name: str) -> None:
    scenario = example(name)
    ends = [np.array([axis.values[0], axis.values[-1]]) for axis in (scenario.temperature, scenario.pressure)]
    listed = set(scenario.choice.names)
    for feed in (0, int(np.prod(scenario.feed_shape)) - 1):
        result = solved(scenario, feed, *ends, all_gases=True)
        others = [each for each in result["species"].values if each not in listed]
        assert len(others) > 50
        assert float(result["mole_fraction"].sel(species=others).max()) < 1e-6


def test_feeds_of_digester_gas_hold_more_oxygen_than_carbon_atoms() -> None:
    scenario = example("digester_gas_reforming")
    feed = scenario.feed_amounts()
    atoms = {
        element: sum(n * scenario.feed_species[s].composition.get(element, 0) for s, n in feed.items())
        for element in ("C", "O")
    }
    assert (np.asarray(atoms["O"]) > np.asarray(atoms["C"])).all()


def test_sulphur_yield_has_its_minimum_near_600_degrees() -> None:
    scenario = example("sulphur_recovery_furnace")
    vapours = [each for each in scenario.choice.names if each.strip("S").isdigit() or each == "S"]
    assert len(vapours) == 8
    for feed in range(scenario.feed_shape[0]):
        result = solved(scenario, feed, scenario.temperature.array, 1.5e5)
        atoms = sum(
            result["amount"].sel(species=s) * scenario.library.find(s).composition["S"] for s in vapours
        )
        assert 550 <= scenario.temperature.display_values[int(np.argmin(np.asarray(atoms)))] <= 650


def test_a_temperature_error_moves_the_slip_of_the_second_shift_stage_by_a_tenth() -> None:
    scenario = example("shift_low_temperature")
    for feed in range(scenario.feed_shape[0]):
        result = solved(scenario, feed, np.array([473.15, 478.15, 493.15, 498.15]), 25e5)
        slip = result["mole_fraction"].sel(species="CO").values.ravel()
        assert 0.08 < slip[1] / slip[0] - 1 < 0.12
        assert 0.08 < slip[3] / slip[2] - 1 < 0.12
        assert 0.0005 < slip[0] < 0.005


def test_methane_would_take_most_of_the_carbon_monoxide_in_the_first_shift_stage() -> None:
    scenario = example("shift_high_temperature")
    feed = {name: float(values[2]) for name, values in scenario.feed_amounts().items()}
    result = gibbsmin.equilibrium(feed, 623.15, 25e5, species=[*scenario.choice.names, "CH4"])
    assert float(result["amount"].sel(species="CH4")) > 0.8 * feed["CO"]
