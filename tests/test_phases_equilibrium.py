"""Condensed phases through `gibbsmin.equilibrium`: names, forms, results, and derived results beside them."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

import gibbsmin
from gibbsmin.errors import ConditionsError
from gibbsmin.outcome import composition, energy
from gibbsmin.solving import read_conditions, solve, thermo_table

REFORMING = {"CH4": 1.0, "H2O": 1.0}
LIME = {"CaO(cd)": 1.0, "CO2": 0.5, "H2O": 1.0}


@pytest.fixture(scope="module")
def lime() -> xr.Dataset:
    return gibbsmin.equilibrium(LIME, [300.0, 500.0, 800.0, 1300.0], 1e5, condensed="all")


def test_a_name_a_list_and_all_bring_in_the_same_graphite() -> None:
    results = [
        gibbsmin.equilibrium(REFORMING, 900.0, 1e5, condensed=condensed)
        for condensed in ("graphite", ["C(gr)"], "all")
    ]
    for result in results:
        assert int(result["status"]) == 0
        graphite = result["phase_amount"].sel(phase="C(gr)")
        assert float(graphite) == pytest.approx(float(results[0]["phase_amount"][0]), rel=1e-12)
        assert float(graphite) > 0.1


def test_a_formula_that_a_gas_has_too_means_the_solid_among_condensed_phases() -> None:
    result = gibbsmin.equilibrium(LIME, 1300.0, 1e5, condensed=["CaO"])
    assert result["phase"].values.tolist() == ["CaO(cd)"]


def test_a_gas_among_condensed_phases_and_a_phase_both_held_back_and_taking_part_are_refused() -> None:
    gas = gibbsmin.standard_library().find("CO2")
    with pytest.raises(ConditionsError, match="CO2 is a gas"):
        gibbsmin.equilibrium(REFORMING, 900.0, 1e5, condensed=[gas])
    with pytest.raises(ConditionsError, match="cannot be held back and take part"):
        gibbsmin.equilibrium(REFORMING, 900.0, 1e5, condensed="graphite", held_back="C(gr)")


def test_elements_are_balanced_over_gas_and_phases(lime: xr.Dataset) -> None:
    assert (lime["status"] == 0).all()
    held = xr.dot(lime["amount"], lime["atoms"], dim="species") + xr.dot(
        lime["phase_amount"], lime["phase_atoms"], dim="phase"
    )
    fed = xr.dot(lime["feed_amount"], lime["feed_atoms"], dim="feed_species")
    np.testing.assert_allclose(held.transpose("temperature", "element"), np.tile(fed, (4, 1)), rtol=1e-12)


def test_present_phases_have_activity_one_and_absent_ones_less(lime: xr.Dataset) -> None:
    present = lime["phase_amount"].values > 0
    activity = lime["phase_activity"].values
    assert present.any(axis=0).sum() == 4  # CaCO3, Ca(OH)2, CaO and water, each somewhere
    assert (activity[present] == 1.0).all()
    known = np.isfinite(activity) & ~present
    assert (activity[known] < 1.0).all()


def test_shares_of_an_element_in_phases_and_gas_add_up_to_one(lime: xr.Dataset) -> None:
    in_phases = lime["phase_element_fraction"].sum("phase")
    fed = xr.dot(lime["feed_amount"], lime["feed_atoms"], dim="feed_species")
    in_gas = xr.dot(lime["amount"], lime["atoms"], dim="species") / fed
    np.testing.assert_allclose((in_phases + in_gas).values, 1.0, rtol=1e-12)


def test_amounts_of_a_phase_per_feed_and_by_mass_follow_from_its_amount(lime: xr.Dataset) -> None:
    np.testing.assert_allclose(lime["phase_amount_per_feed"], lime["phase_amount"] / 2.5, rtol=1e-15)
    carbonate = lime.sel(phase="CaCO3(cd)")
    # 100.087 g/mol: standard atomic weights of IUPAC 2021, Ca 40.078, C 12.011, O 15.999
    mass = carbonate["phase_mass"].values[0]
    assert mass == pytest.approx(0.5 * 0.100087, rel=2e-5)


def test_where_no_gas_is_left_its_mole_fractions_are_unknown_and_the_point_is_solved(
    lime: xr.Dataset,
) -> None:
    cold = lime.isel(temperature=0)
    assert float(cold["gas_amount"]) == 0.0
    assert int(cold["status"]) == 0
    assert np.isnan(cold["mole_fraction"]).all()
    assert float(composition.amount_at_equilibrium(cold)) > 1.0


def test_forms_follow_the_temperature_and_a_substance_without_data_is_absent() -> None:
    result = gibbsmin.equilibrium(
        {"H2S": 2.0, "SO2": 1.0}, [360.0, 380.0, 400.0, 700.0], 1e5, condensed=["sulfur", "H2O"]
    )
    assert result["phase_form"].sel(phase="S(cd)").values.tolist() == [
        "crystal, alpha",
        "crystal, beta",
        "liquid",
        "liquid",
    ]
    assert result["phase_form"].sel(phase="H2O(cd)").values[-1] == ""  # its data end at 600 K
    assert np.isnan(result["phase_activity"].sel(phase="H2O(cd)").values[-1])
    assert float(result["phase_amount"].sel(phase="H2O(cd)")[-1]) == 0.0
    assert (result["phase_amount"].sel(phase="S(cd)")[:3] > 0).all()


def test_a_phase_held_back_tells_its_activity_over_the_metastable_gas() -> None:
    T, p = [900.0, 1300.0], 1e5
    alone = gibbsmin.equilibrium(REFORMING, T, p)
    held = gibbsmin.equilibrium(REFORMING, T, p, held_back="graphite")
    np.testing.assert_array_equal(alone["amount"], held["amount"])
    # a_C = K x_CO^2 p / x_CO2 of the gas itself, K of 2 CO = C + CO2 from the same data
    table = thermo_table([gibbsmin.standard_library().find(name) for name in ("CO", "C(gr)", "CO2")], False)
    g = table.gibbs_RT(T)
    x = held["mole_fraction"]
    expected = np.exp(2 * g[:, 0] - g[:, 1] - g[:, 2]) * x.sel(species="CO") ** 2 / x.sel(species="CO2")
    np.testing.assert_allclose(held["phase_activity"].values[:, 0], expected, rtol=1e-10)
    assert held["phase_activity"].values[0, 0] > 1.0
    assert float(held["phase_amount"].sum()) == 0.0


def test_an_element_not_fed_gives_activity_zero_and_one_not_determined_gives_none() -> None:
    no_carbon = gibbsmin.equilibrium({"H2": 1.0, "O2": 0.4}, 900.0, 1e5, held_back="graphite")
    assert no_carbon["phase_activity"].item() == 0.0
    # CO2 alone says nothing of how its potential is shared between carbon and oxygen
    alone = gibbsmin.equilibrium({"CO2": 1.0}, 900.0, 1e5, species=["CO2"], held_back="graphite")
    assert np.isnan(alone["phase_activity"].item())


def test_a_phase_that_takes_up_all_of_a_fed_solid_counts_in_its_conversion() -> None:
    result = gibbsmin.equilibrium({"C(gr)": 2.0, "CO2": 1.0}, [700.0, 1400.0], 1e5, condensed="graphite")
    left = result["phase_amount"].sel(phase="C(gr)").values
    np.testing.assert_allclose(composition.conversion(result, "C(gr)"), 1 - left / 2.0, rtol=1e-12)
    share = composition.element_yield(result, "C(gr)", "C")
    np.testing.assert_allclose(share, (left - 2.0) / 3.0, rtol=1e-12)
    # by hand: 1 mol CO2 left as CO2 or 2 CO, carbon accordingly (Boudouard), nothing else above a millionth
    co = result["amount"].sel(species="CO").values
    np.testing.assert_allclose(2.0 - left, co / 2, rtol=1e-5)


CASES = [
    (REFORMING, {"condensed": "graphite"}, 900.0),
    ({"H2": 3.0, "H2O": 1.0, "Fe(cd)": 1.0}, {"condensed": "all"}, 860.0),
    ({"CaCO3": 1.0, "H2O": 1.0}, {"condensed": "all"}, 1000.0),
    ({"CaCO3": 1.0, "H2O": 1.0}, {"condensed": "all"}, 300.0),  # no gas
    (REFORMING, {"condensed": "graphite"}, 1300.0),  # no solid
]


@pytest.mark.parametrize(("feed", "options", "T"), CASES)
def test_heat_capacity_at_equilibrium_is_the_slope_of_the_enthalpy(
    feed: dict[str, float], options: dict[str, str], T: float
) -> None:
    step = 0.2  # the slope is then good to 1e-5: amounts are solved to some 1e-10
    conditions = read_conditions(feed, [T - step, T, T + step], 1e5, **options)  # type: ignore[arg-type]
    result = solve(conditions)
    phases = thermo_table(conditions.phases, False)
    h = energy.enthalpy_per_feed(result, conditions.gas_table, phases).values
    found = energy.heat_capacities_with_phases(result, conditions.gas_table, phases)
    slope = (h[2] - h[0]) / (2 * step)
    assert found["heat_capacity_equilibrium_per_feed"].values[1] == pytest.approx(slope, rel=1e-5)


def test_without_phases_present_the_heat_capacity_is_that_of_the_gas() -> None:
    conditions = read_conditions(REFORMING, 1300.0, 1e5, condensed="graphite")
    result = solve(conditions)
    phases = thermo_table(conditions.phases, False)
    per_feed = energy.heat_capacities_with_phases(result, conditions.gas_table, phases)
    of_gas = energy.heat_capacities(result, conditions.gas_table)
    for kind in ("frozen", "equilibrium"):
        expected = float(of_gas[f"heat_capacity_{kind}"]) * float(result["gas_amount"]) / 2.0
        assert float(per_feed[f"heat_capacity_{kind}_per_feed"]) == pytest.approx(expected, rel=1e-12)


def test_heat_duty_of_burning_lime_counts_the_solids() -> None:
    # CaCO3 -> CaO + CO2 takes 178.3 kJ/mol at 298.15 K: from the CODATA Key Values (1989), -635.09 (CaO),
    # -393.51 (CO2), and -1206.9 for calcite (CRC Handbook, from memory). Here both streams are at 1300 K, and
    # by Kirchhoff the value falls by some 13 kJ/mol (the two heat capacities differ by about -13 J/(mol K)).
    conditions = read_conditions({"CaCO3": 1.0}, 1300.0, 1e5, condensed=["CaCO3", "CaO"])
    result = solve(conditions)
    assert float(result["phase_amount"].sel(phase="CaO(cd)")) == pytest.approx(1.0, rel=1e-9)
    part = energy.FeedPart(
        thermo_table([gibbsmin.standard_library().find("CaCO3")], False),
        xr.DataArray([1.0], dims="part_species"),
        298.15,
    )
    phases = thermo_table(conditions.phases, False)
    duty = energy.heat_duty(result, conditions.gas_table, energy.feed_enthalpy([part]), phases)
    lime_h, gas_h = (
        energy.molar_enthalpies(
            thermo_table([gibbsmin.standard_library().find(name)], False), np.array([298.15, 1300.0])
        )
        for name in ("CaO(cd)", "CO2")
    )
    heating = np.diff(lime_h[:, 0])[0] + np.diff(gas_h[:, 0])[0]
    assert float(duty["heat_duty"]) - heating == pytest.approx(178.3e3, abs=1.0e3)
