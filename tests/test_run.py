"""A scenario from text to outcome: exact feeds, wanted results, heat duty by stream, summary, exit facts."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest

import gibbsmin
from gibbsmin.errors import ConditionsError
from gibbsmin.outcome import Outcome, composition
from gibbsmin.outcome.assembling import RESULT_NAMES
from gibbsmin.outcome.wanted import variable_name
from gibbsmin.scenario import parse_scenario

REFORMER = """\
title: Reforming of a <test> gas & steam
notes: Invented figures.
feed:
  gas:
    temperature: 25 degC
    amounts: {CH4: 95 kmol/h, N2: 5 kmol/h}
  steam:
    temperature: 180 degC
    amounts: {H2O: 300 kmol/h}
species:
  gases: [CH4, H2O, CO, CO2, H2, N2, C2H6]
grid:
  temperature: {from: 700 degC, to: 900 degC, points: 3}
  pressure: [1 bar, 30 bar]
  further axes:
    steam to carbon:
      ratio: {of: {moles of: H2O}, to: {atoms of: C}, by changing: steam}
      values: [2.5, 3.5]
results:
  key species: [H2, CH4]
  conversions: [CH4]
  yields:
    CO yield: {of: CO, from: CH4, element: C}
    hydrogen per methane: {of: H2, from: CH4}
    carbon to CO2: {of: CO2, element: C}
  selectivities:
    CO selectivity: {of: CO, from: CH4, element: C}
  ratios:
    H2/CO: {of: H2, to: CO}
    gap: {of: CO, to: CO2}
"""


CARBON = """
title: carbon
feed:
  gas: {amounts: {CH4: 1 mol, CO2: 1 mol}}
grid: {temperature: 900 K, pressure: 1 bar}
species: {condensed: [graphite]}
cross-check: {points: none}
"""


@pytest.fixture(scope="module")
def outcome() -> Outcome:
    return gibbsmin.run(parse_scenario(REFORMER))


def test_the_map_has_the_dimensions_of_the_scenario(outcome: Outcome) -> None:
    dataset = outcome.dataset
    assert dataset["mole_fraction"].dims == ("steam_to_carbon", "temperature", "pressure", "species")
    assert dataset["mole_fraction"].shape == (2, 3, 2, 7)
    assert dataset["steam_to_carbon"].values.tolist() == [2.5, 3.5]
    np.testing.assert_allclose(dataset["temperature"].values, [973.15, 1073.15, 1173.15])
    assert dataset["amount"].attrs["units"] == "mol h-1"
    assert dataset.attrs["title"] == "Reforming of a <test> gas & steam"
    assert outcome.points == 12
    assert outcome.all_solved
    assert outcome.all_confirmed


def test_the_run_equals_the_direct_call(outcome: Outcome) -> None:
    direct = gibbsmin.equilibrium(
        {"CH4": 95e3, "N2": 5e3, "H2O": 3.5 * 95e3}, 1073.15, 30e5, species=outcome.scenario.choice.names
    )
    mapped = outcome.dataset.isel(steam_to_carbon=1, temperature=1, pressure=1)
    np.testing.assert_allclose(mapped["amount"].values, direct["amount"].values, rtol=1e-9)


def test_every_variable_has_units_and_a_long_name(outcome: Outcome) -> None:
    for name, variable in outcome.dataset.variables.items():
        assert variable.attrs.get("long_name"), name
        if variable.dtype.kind != "U":
            assert variable.attrs.get("units"), name


def test_wanted_results_have_the_names_of_the_scenario(outcome: Outcome) -> None:
    dataset = outcome.dataset
    n = {str(name): dataset["amount"].sel(species=name).values for name in dataset["species"].values}
    np.testing.assert_allclose(dataset["conversion of CH4"].values, 1 - n["CH4"] / 95e3, rtol=1e-12)
    np.testing.assert_allclose(dataset["CO yield"].values, n["CO"] / 95e3, rtol=1e-12)
    np.testing.assert_allclose(dataset["hydrogen per methane"].values, n["H2"] / 95e3, rtol=1e-12)
    np.testing.assert_allclose(dataset["carbon to CO2"].values, n["CO2"] / 95e3, rtol=1e-12)
    np.testing.assert_allclose(dataset["CO selectivity"].values, n["CO"] / (95e3 - n["CH4"]), rtol=1e-9)
    np.testing.assert_allclose(dataset["H2 to CO"].values, n["H2"] / n["CO"], rtol=1e-14)
    assert dataset["H2 to CO"].dims == dataset["status"].dims


def test_a_wanted_result_cannot_hide_the_evidence(outcome: Outcome) -> None:
    dataset = outcome.dataset
    assert dataset["gap"].attrs["long_name"].startswith("upper bound")
    np.testing.assert_allclose(
        dataset["gap (wanted)"].values,
        (dataset["amount"].sel(species="CO") / dataset["amount"].sel(species="CO2")).values,
    )
    assert variable_name("species", dataset) == "species (wanted)"


def test_dry_fractions_come_along_unless_refused(outcome: Outcome) -> None:
    np.testing.assert_array_equal(
        outcome.dataset["dry_mole_fraction"].values, composition.dry_mole_fractions(outcome.dataset).values
    )
    wet = gibbsmin.run(parse_scenario(REFORMER + "  dry basis: false\n"))
    assert "dry_mole_fraction" not in wet.dataset


def test_heat_duty_takes_each_stream_at_its_own_temperature(outcome: Outcome) -> None:
    # By hand: H_out(T) less gas at 298.15 K and steam at 453.15 K, per hour, in W.
    from gibbsmin.species import ThermoTable

    def h(name: str, T: float) -> float:
        species = gibbsmin.standard_library().find(name)
        return float(ThermoTable([species]).enthalpy_RT([T])[0, 0]) * species.gas_constant * T

    at = outcome.dataset.isel(steam_to_carbon=0, temperature=2, pressure=1)
    T = float(at["temperature"])
    leaving = sum(float(at["amount"].sel(species=name)) * h(str(name), T) for name in at["species"].values)
    fed = 95e3 * h("CH4", 298.15) + 5e3 * h("N2", 298.15) + 2.5 * 95e3 * h("H2O", 453.15)
    np.testing.assert_allclose(float(at["heat_duty"]), (leaving - fed) / 3600, rtol=1e-10)
    assert at["heat_duty"].attrs["units"] == "W"
    total = 100e3 + 2.5 * 95e3
    np.testing.assert_allclose(float(at["heat_duty_per_feed"]), (leaving - fed) / total, rtol=1e-10)
    assert at["heat_duty_per_feed"].attrs["units"] == "J mol-1"


def test_without_a_stream_temperature_there_is_no_heat_duty() -> None:
    outcome = gibbsmin.run(parse_scenario(REFORMER.replace("    temperature: 180 degC\n", "")))
    assert "heat_duty" not in outcome.dataset
    assert "no heat duty" in outcome.summary()


def test_rates_in_other_units_stay_exactly_stoichiometric() -> None:
    # 1 mol/s propane with 5 mol/s oxygen; neither 3.6 kmol/h nor its multiple is exact in binary
    text = """\
title: Stoichiometric
feed:
  fuel: {amounts: {C3H8: 0.1 mol/s}}
  oxygen: {amounts: {O2: 1.8 kmol/h}}
species:
  gases: [C3H8, O2, CO2, H2O, CO, H2]
grid:
  temperature: [400 K, 1500 K]
  pressure: 1 bar
"""
    dataset = gibbsmin.run(parse_scenario(text)).dataset.squeeze("pressure")
    whole = gibbsmin.equilibrium(
        {"C3H8": 1, "O2": 5}, [400.0, 1500.0], 1e5, species=dataset["species"].values.tolist()
    )
    np.testing.assert_allclose(dataset["mole_fraction"].values, whole["mole_fraction"].values, rtol=1e-10)
    assert (
        float(dataset["mole_fraction"].sel(species="O2")[0]) < 1e-19
    )  # doubles taken as they are leave 1e-17


def test_a_stoichiometric_feed_given_by_mass_stays_exact() -> None:
    # Molar masses put seven-digit numbers into every denominator: no common factor makes them whole doubles.
    text = """\
title: Stoichiometric by mass
feed:
  fuel: {amounts: {CH4: 17.1 kg/h, C2H6: 3.3 kg/h, C3H8: 1.7 kg/h}}
  water: {amounts: {H2O: 0.37 kg/h}}
  oxygen: {amounts: {O2: 1 kg/h}}
species:
  gases: [CH4, C2H6, C3H8, O2, CO2, H2O, CO, H2]
grid:
  temperature: 400 K
  pressure: 1 bar
  further axes:
    oxygen to what the fuel needs:
      ratio: {of: {moles of: O2}, to: {moles of: [CH4]}, by changing: oxygen}
      values: [1]
"""
    scenario = parse_scenario(text)
    fed = {name: amounts.item() for name, amounts in scenario.exact_feed_amounts().items()}
    needed = 2 * fed["CH4"] + Fraction(7, 2) * fed["C2H6"] + 5 * fed["C3H8"]
    ratio = needed / fed["CH4"]
    exact = replace(scenario.further_axes[0], values=(float(ratio),), exact_values=(ratio,))
    outcome = gibbsmin.run(replace(scenario, further_axes=(exact,)))
    oxygen = float(outcome.dataset["mole_fraction"].sel(species="O2").squeeze())
    assert outcome.all_solved
    assert outcome.all_confirmed
    assert 1e-20 < oxygen < 1e-19  # with rounded element amounts 1e-27, beside 1e-16 of H2


def test_extent_and_tolerance_of_the_crosscheck_come_from_the_scenario() -> None:
    none = gibbsmin.run(parse_scenario(REFORMER + "cross-check: {points: none}\n"))
    assert none.crosscheck.points == ()
    assert "none, as asked" in none.summary()
    strict = gibbsmin.run(parse_scenario(REFORMER + "cross-check: {points: all, tolerance: 1.0e-30}\n"))
    assert len(strict.crosscheck.points) == 12
    assert not strict.all_confirmed  # no two programs agree to 1e-30
    assert "differs" in strict.summary()


def test_progress_counts_every_point() -> None:
    done: list[int] = []
    checked: list[int] = []
    gibbsmin.run(parse_scenario(REFORMER), progress=done.append, check_progress=checked.append)
    assert sum(done) == 12
    assert sum(checked) == 12


def test_the_summary_says_what_was_found(outcome: Outcome) -> None:
    text = outcome.summary()
    for part in (
        "Reforming of a <test> gas & steam",
        "temperature: 700 to 900 degC, 3 points",
        "H2, mole fraction",
        "conversion of CH4",
        "solved 12 of 12 points",
        "12 confirmed, 0 differ",
        "Equilibrium is a limit, not a rate",
    ):
        assert part in text, part
    assert f"{float(outcome.dataset['conversion of CH4'].max()):.4g}" in text


def test_the_notebook_page_escapes_what_comes_from_the_file(outcome: Outcome) -> None:
    page = outcome._repr_html_()
    assert "&lt;test&gt; gas &amp; steam" in page
    assert "<test>" not in page
    assert page.count("<table>") == page.count("</table>") == 1


def test_unsolved_points_are_counted_and_explained(monkeypatch: pytest.MonkeyPatch) -> None:
    from gibbsmin import grid, solving
    from gibbsmin.minimiser import Status

    genuine = grid.solve_grid

    def one_point_fails(*args, **options):  # type: ignore[no-untyped-def]
        solution = genuine(*args, **options)
        solution.status[0, 1, 0] = Status.STEP_LIMIT
        for values in (solution.amounts, solution.gap, solution.balance_residual):
            values[0, 1, 0] = np.nan
        return solution

    monkeypatch.setattr(solving, "solve_grid", one_point_fails)
    outcome = gibbsmin.run(parse_scenario(REFORMER))
    assert outcome.unsolved == 1
    assert not outcome.all_solved
    assert "solved 11 of 12 points" in outcome.summary()
    assert f"1 points unsolved: {Status.STEP_LIMIT.explanation}" in outcome.summary()
    assert "warning" in outcome._repr_html_()
    assert outcome.crosscheck.unsolved == 1
    assert len(outcome.crosscheck.points) == 11
    blank = outcome.dataset.isel(steam_to_carbon=0, temperature=1, pressure=0)
    for name in ("mole_fraction", "dry_mole_fraction", "density", "enthalpy", "heat_duty", "H2 to CO"):
        assert np.isnan(blank[name].values).all(), name
    for name in ("heat_capacity_frozen", "heat_capacity_equilibrium", "CO yield", "crosscheck_difference"):
        assert np.isnan(blank[name].values).all(), name


def test_the_example_scenario_files_run() -> None:
    from gibbsmin.shipped_files import scenario_folder

    paths = sorted(scenario_folder().glob("*.yaml"))
    assert paths
    scenario = gibbsmin.load_scenario(paths[0])
    assert gibbsmin.run(scenario).points == scenario.points


def test_an_axis_cannot_take_the_name_of_a_result() -> None:
    scenario = parse_scenario(REFORMER)
    axis = replace(scenario.further_axes[0], name="density")
    with pytest.raises(ConditionsError, match="'density': this name belongs to the results"):
        gibbsmin.run(replace(scenario, further_axes=(axis,)))


def test_the_list_of_result_names_is_complete(outcome: Outcome) -> None:
    wanted = {name for name, array in outcome.dataset.data_vars.items() if "description" in array.attrs}
    axes = {"temperature", "pressure", "steam_to_carbon"}
    beside = gibbsmin.run(parse_scenario(CARBON)).dataset
    found = set(map(str, (*outcome.dataset.variables, *beside.variables))) - wanted - axes
    assert found == RESULT_NAMES - {"extrapolated", "root"}
