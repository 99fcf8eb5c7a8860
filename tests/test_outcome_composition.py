"""Results that follow from amounts: each against its definition worked out by hand on a small data set."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

import gibbsmin
from gibbsmin.errors import UnknownSpeciesError
from gibbsmin.outcome import composition

GASES = ["CH4", "H2O", "CO", "CO2", "H2", "N2"]


@pytest.fixture(scope="module")
def reformed() -> xr.Dataset:
    steam = xr.DataArray([2.0, 3.0], dims="steam", coords={"steam": [2.0, 3.0]})
    feed = {"CH4": 1.0, "H2O": steam, "CO2": 0.25, "N2": 0.1}
    return gibbsmin.equilibrium(feed, [900.0, 1100.0, 1300.0], [1e5, 30e5], species=GASES)


def n(dataset: xr.Dataset, name: str) -> np.ndarray:
    return dataset["amount"].sel(species=name).values


def test_dry_fractions_sum_to_one_and_keep_the_ratios(reformed: xr.Dataset) -> None:
    dry = composition.dry_mole_fractions(reformed)
    np.testing.assert_allclose(dry.sum("species").values, 1.0, rtol=1e-14)
    assert (dry.sel(species="H2O") == 0).all()
    wet = reformed["mole_fraction"]
    np.testing.assert_allclose(
        dry.sel(species="CO").values,
        wet.sel(species="CO").values / (1 - wet.sel(species="H2O").values),
        rtol=1e-13,
    )
    assert dry.attrs["units"] == "1"
    assert dry.dims == wet.dims


def test_dry_fractions_in_nearly_pure_steam_keep_their_digits() -> None:
    steam = gibbsmin.equilibrium({"H2O": 1}, 500.0, 1e5, species=["H2O", "H2", "O2"])
    dry = composition.dry_mole_fractions(steam)
    # 2 H2O = 2 H2 + O2 is the only reaction: exactly two to one (stoichiometry)
    np.testing.assert_allclose(dry.sel(species=["H2", "O2"]).values, [2 / 3, 1 / 3], rtol=1e-9)


def test_dry_basis_without_water_changes_nothing() -> None:
    gas = gibbsmin.equilibrium({"N2": 1, "O2": 1}, 2000.0, 1e5, species=["N2", "O2", "NO"])
    np.testing.assert_array_equal(composition.dry_mole_fractions(gas).values, gas["mole_fraction"].values)


def test_conversion_is_one_less_what_is_left(reformed: xr.Dataset) -> None:
    result = composition.conversion(reformed, "CH4")
    np.testing.assert_allclose(result.values, 1 - n(reformed, "CH4") / 1.0, rtol=1e-12)
    steam = composition.conversion(reformed, "H2O").transpose(*reformed["status"].dims)
    fed = np.array([2.0, 3.0])[:, None, None]
    np.testing.assert_allclose(steam.values, 1 - n(reformed, "H2O") / fed, rtol=1e-12)


def test_conversion_of_a_product_is_undefined_and_of_a_net_product_negative(reformed: xr.Dataset) -> None:
    assert np.isnan(composition.conversion(reformed, "H2").values).all()  # none was fed
    shifted = gibbsmin.equilibrium({"CO": 1, "H2O": 2, "CO2": 0.1}, 600.0, 1e5, species=GASES[1:5])
    assert float(composition.conversion(shifted, "CO2")) < -5  # the water-gas shift makes it
    np.testing.assert_allclose(composition.conversion(reformed, "N2").values, 0.0, atol=1e-13)


def test_yields_count_what_is_formed(reformed: xr.Dataset) -> None:
    hydrogen = composition.product_yield(reformed, "H2", "CH4")
    np.testing.assert_allclose(hydrogen.values, n(reformed, "H2") / 1.0, rtol=1e-12)
    carbon = composition.element_yield(reformed, "CO", "C", "CH4")
    np.testing.assert_allclose(carbon.values, n(reformed, "CO") / 1.0, rtol=1e-12)
    of_feed = composition.element_yield(reformed, "CO2", "C")
    np.testing.assert_allclose(of_feed.values, (n(reformed, "CO2") - 0.25) / 1.25, rtol=1e-12)
    water = composition.element_yield(reformed, "H2", "H").transpose(*reformed["status"].dims)
    hydrogen_fed = np.array([8.0, 10.0])[:, None, None]  # atoms: 4 in methane, 2 in each steam
    np.testing.assert_allclose(water.values, 2 * n(reformed, "H2") / hydrogen_fed, rtol=1e-12)


def test_selectivities_of_all_carbon_products_sum_to_one(reformed: xr.Dataset) -> None:
    total = sum(composition.selectivity(reformed, product, "CH4", "C") for product in ("CO", "CO2"))
    np.testing.assert_allclose(
        total.values, 1.0, rtol=1e-9
    )  # carbon balance: methane is the only other carbon


def test_ratios_of_sums(reformed: xr.Dataset) -> None:
    module = composition.amount_ratio(reformed, ["H2"], ["CO", "CO2"])
    np.testing.assert_allclose(
        module.values, n(reformed, "H2") / (n(reformed, "CO") + n(reformed, "CO2")), rtol=1e-14
    )


def test_mean_molar_mass_conserves_mass(reformed: xr.Dataset) -> None:
    mass_out = composition.mean_molar_mass(reformed) * reformed["gas_amount"]
    mass_in = xr.dot(reformed["feed_amount"], reformed["feed_molar_mass"], dim="feed_species")
    np.testing.assert_allclose(mass_out.values, mass_in.broadcast_like(mass_out).values, rtol=1e-12)


def test_density_of_nitrogen_at_normal_conditions() -> None:
    # Molar volume of an ideal gas at 273.15 K and 101325 Pa: 22.413 969 54 L/mol (CODATA 2018); molar
    # mass of N2 28.014 g/mol (IUPAC 2021 standard atomic weight of nitrogen, 14.007, five digits).
    gas = gibbsmin.equilibrium({"N2": 1}, 273.15, 101325.0, species=["N2"])
    density = composition.density(gas)
    np.testing.assert_allclose(float(density), 28.014e-3 / 22.41396954e-3, rtol=2e-5)
    assert density.attrs["units"] == "kg m-3"


def test_unsolved_points_stay_blank_in_every_result() -> None:
    hydrogen = xr.DataArray([1.0, 3.0], dims="case")  # at 3, H2O and O2 cannot hold all the hydrogen
    gas = gibbsmin.equilibrium({"H2": hydrogen, "O2": 1.0}, 1000.0, 1e5, species=["H2O", "O2"])
    for result in (
        composition.dry_mole_fractions(gas).sum("species", skipna=False),
        composition.conversion(gas, "H2"),
        composition.product_yield(gas, "H2O", "H2"),
        composition.amount_ratio(gas, ["H2O"], ["O2"]),
        composition.mean_molar_mass(gas),
        composition.density(gas),
    ):
        assert np.isnan(result.values).tolist() == [False, True], result.name


def test_a_feed_species_that_is_no_listed_gas_is_used_up_entirely() -> None:
    gas = gibbsmin.equilibrium(
        {"C2H6": 1.0, "H2O": 4.0}, 1000.0, 1e5, species=["CH4", "H2O", "CO", "CO2", "H2"]
    )
    assert float(composition.conversion(gas, "C2H6")) == 1.0


def test_a_name_that_plays_no_part_is_refused(reformed: xr.Dataset) -> None:
    with pytest.raises(UnknownSpeciesError, match="NH3"):
        composition.amount_ratio(reformed, ["NH3"], ["N2"])
