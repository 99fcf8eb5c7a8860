"""Enthalpy, heat duty and heat capacity: against published values, identities and finite differences."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

import gibbsmin
from gibbsmin.outcome import energy
from gibbsmin.species import ThermoTable


def table(names: list[str]) -> ThermoTable:
    library = gibbsmin.standard_library()
    return ThermoTable([library.find(name) for name in names])


def feed_part(amounts: dict[str, float], temperature: float) -> energy.FeedPart:
    return energy.FeedPart(
        table(list(amounts)), xr.DataArray(list(amounts.values()), dims="part_species"), temperature
    )


def duty(feed: dict[str, float], feed_temperature: float, gas: xr.Dataset) -> xr.Dataset:
    fed = energy.feed_enthalpy([feed_part(feed, feed_temperature)])
    return energy.heat_duty(gas, table(gas["species"].values.tolist()), fed)


def test_lower_heating_value_of_methane() -> None:
    # Formation enthalpies at 298.15 K: CO2 -393.51 +- 0.13 and H2O(g) -241.826 +- 0.040 kJ/mol (CODATA key
    # values, Cox, Wagman & Medvedev 1989), CH4 -74.6 +- 0.3 kJ/mol (CRC Handbook): 802.56 +- 0.35 kJ/mol.
    feed = {"CH4": 1.0, "O2": 2.0}
    gas = gibbsmin.equilibrium(feed, 298.15, 1e5, species=["CH4", "O2", "CO2", "H2O"])
    result = duty(feed, 298.15, gas)
    np.testing.assert_allclose(float(result["heat_duty"]), -802.56e3, atol=0.35e3)
    np.testing.assert_allclose(
        float(result["heat_duty_per_feed"]) * 3, float(result["heat_duty"]), rtol=1e-14
    )
    assert result["heat_duty"].attrs["units"] == "J"


def test_enthalpy_of_the_elements_is_zero_at_the_reference_temperature() -> None:
    # by definition of the reference state (IUPAC); to the rounding of the coefficients
    gas = gibbsmin.equilibrium({"N2": 0.79, "O2": 0.21}, 298.15, 1e5, species=["N2", "O2"])
    assert abs(float(energy.mixture_enthalpy(gas, table(["N2", "O2"])))) < 0.1


def test_no_reaction_at_the_feeds_own_temperature_needs_no_heat() -> None:
    feed = (
        {"N2": 0.79, "AR": 0.01, "O2": 0.2} if "AR" in gibbsmin.standard_library() else {"N2": 0.8, "O2": 0.2}
    )
    gas = gibbsmin.equilibrium(feed, [400.0, 700.0], [1e5, 1e6], species=list(feed))
    result = duty(feed, 700.0, gas)["heat_duty"]
    np.testing.assert_allclose(result.sel(temperature=700.0).values, 0.0, atol=1e-9)
    assert (result.sel(temperature=400.0) < -1000).all()


def test_duty_does_not_depend_on_how_the_feed_is_split_into_streams() -> None:
    gas = gibbsmin.equilibrium({"CH4": 1, "H2O": 3}, [900.0, 1100.0], 1e6)
    functions = table(gas["species"].values.tolist())
    together = energy.feed_enthalpy([feed_part({"CH4": 1.0, "H2O": 3.0}, 500.0)])
    apart = energy.feed_enthalpy([feed_part({"CH4": 1.0, "H2O": 1.0}, 500.0), feed_part({"H2O": 2.0}, 500.0)])
    np.testing.assert_allclose(
        energy.heat_duty(gas, functions, together)["heat_duty"].values,
        energy.heat_duty(gas, functions, apart)["heat_duty"].values,
        rtol=1e-12,
    )


def test_boiling_water_in_the_feed_counts() -> None:
    # Heat of vaporisation of water at 298.15 K, 43.99 kJ/mol (CODATA key values: H2O(l) -285.830,
    # H2O(g) -241.826 kJ/mol).
    gas = gibbsmin.equilibrium({"H2O(l)": 1.0}, 298.15, 1e3, species=["H2O"])
    np.testing.assert_allclose(float(duty({"H2O(l)": 1.0}, 298.15, gas)["heat_duty"]), 44.004e3, atol=60)


def test_frozen_heat_capacity_of_nitrogen() -> None:
    # NIST-JANAF thermochemical tables, 4th ed. (1998): cp of N2 29.124 at 298.15 K, 32.697 at 1000 K.
    gas = gibbsmin.equilibrium({"N2": 1}, [298.15, 1000.0], 1e5, species=["N2"])
    result = energy.heat_capacities(gas, table(["N2"]))
    np.testing.assert_allclose(result["heat_capacity_frozen"].values, [29.124, 32.697], atol=2e-3)
    np.testing.assert_array_equal(  # one gas that cannot react
        result["heat_capacity_equilibrium"].values, result["heat_capacity_frozen"].values
    )


@pytest.mark.parametrize(
    ("feed", "T"),
    [
        ({"CH4": 1, "H2O": 3}, 900.0),
        ({"CH4": 1, "O2": 2, "N2": 7.5}, 2600.0),  # exactly stoichiometric
        ({"H2O": 1}, 350.0),
        ({"N2O4": 1}, 330.0),
        ({"H2S": 1, "O2": 0.5}, 1200.0),
    ],
)
def test_equilibrium_heat_capacity_is_the_slope_of_the_enthalpy(feed: dict[str, float], T: float) -> None:
    step = 0.05
    around = gibbsmin.equilibrium(feed, T + step * np.array([-2.0, -1.0, 0.0, 1.0, 2.0]), [1e4, 1e6])
    functions = table(around["species"].values.tolist())
    H = (energy.mixture_enthalpy(around, functions) * around["gas_amount"]).values
    slope = (8 * (H[3] - H[1]) - (H[4] - H[0])) / (12 * step)
    here = around.isel(temperature=[2])
    result = energy.heat_capacities(here, functions)
    reacting = (result["heat_capacity_equilibrium"] * here["gas_amount"]).values[0]
    frozen = (result["heat_capacity_frozen"] * here["gas_amount"]).values[0]
    np.testing.assert_allclose(reacting, slope, rtol=2e-7)
    assert (reacting >= frozen).all()


def test_heat_capacities_have_units_and_leave_unsolved_points_blank() -> None:
    hydrogen = xr.DataArray([1.0, 3.0], dims="case")  # at 3, H2O and O2 cannot hold all the hydrogen
    gas = gibbsmin.equilibrium({"H2": hydrogen, "O2": 1.0}, 1000.0, 1e5, species=["H2O", "O2"])
    result = energy.heat_capacities(gas, table(["H2O", "O2"]))
    for name in ("heat_capacity_frozen", "heat_capacity_equilibrium"):
        assert result[name].attrs["units"] == "J mol-1 K-1"
        assert np.isnan(result[name].values).tolist() == [False, True]


def test_heat_capacities_of_many_points_do_not_depend_on_their_number() -> None:
    T = np.linspace(600.0, 1500.0, 50)
    p = np.geomspace(1e4, 1e7, 50)  # 2,500 points: more than are taken at once
    names = ["CH4", "H2O", "CO", "CO2", "H2"]
    whole = gibbsmin.equilibrium({"CH4": 1, "H2O": 2}, T, p, species=names)
    part = whole.isel(temperature=[49], pressure=[49])
    functions = table(names)
    np.testing.assert_allclose(
        energy.heat_capacities(whole, functions)["heat_capacity_equilibrium"].values[49, 49],
        energy.heat_capacities(part, functions)["heat_capacity_equilibrium"].values[0, 0],
        rtol=1e-11,
    )
