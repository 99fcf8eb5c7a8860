"""What `gibbsmin.equilibrium` accepts, refuses, and returns: dimensions, labels, units, exactness, speed."""

from __future__ import annotations

import subprocess
import sys

import numpy as np
import pytest
import xarray as xr

import gibbsmin
from gibbsmin.errors import (
    ConditionsError,
    GibbsminError,
    TemperatureRangeError,
    UnknownSpeciesError,
)

REFORMING = ["CH4", "H2O", "CO", "CO2", "H2"]
FEED = {"CH4": 1.0, "H2O": 3.0}


# --- shapes and labels ------------------------------------------------------------------------------------


def test_plain_arrays_span_a_grid() -> None:
    result = gibbsmin.equilibrium(FEED, [900.0, 1100.0], [1e5, 5e5, 20e5], species=REFORMING)
    assert result["mole_fraction"].dims == ("temperature", "pressure", "species")
    assert result["element_potential"].dims == ("temperature", "pressure", "element")
    assert result["status"].dims == ("temperature", "pressure")
    assert result["temperature"].values.tolist() == [900.0, 1100.0]
    assert result["pressure"].values.tolist() == [1e5, 5e5, 20e5]
    assert result["species"].values.tolist() == REFORMING
    assert (result["status"] == 0).all()


def test_scalars_add_no_dimension() -> None:
    result = gibbsmin.equilibrium(FEED, 1100, 1e5, species=REFORMING)
    assert result["mole_fraction"].dims == ("species",)
    assert float(result["temperature"]) == 1100.0
    column = gibbsmin.equilibrium(FEED, [1100, 1200], 1e5, species=REFORMING)
    assert column["gas_amount"].dims == ("temperature",)


def test_scattered_points_share_a_dimension_and_equal_the_grid() -> None:
    T, p = [900.0, 1000.0, 1100.0], [1e5, 5e5]
    grid = gibbsmin.equilibrium(FEED, T, p, species=REFORMING)
    where = [(2, 1), (0, 0), (1, 1), (2, 0)]
    points = gibbsmin.equilibrium(
        FEED,
        xr.DataArray([T[i] for i, _ in where], dims="point"),
        xr.DataArray([p[k] for _, k in where], dims="point"),
        species=REFORMING,
    )
    assert points["mole_fraction"].dims == ("point", "species")
    for n, (i, k) in enumerate(where):
        np.testing.assert_allclose(
            points["mole_fraction"].values[n], grid["mole_fraction"].values[i, k], rtol=1e-10
        )


def test_feed_that_varies_along_its_own_dimension_spans_a_grid() -> None:
    steam = xr.DataArray([2.0, 3.0, 4.0], dims="steam_to_carbon", coords={"steam_to_carbon": [2.0, 3.0, 4.0]})
    result = gibbsmin.equilibrium({"CH4": 1, "H2O": steam}, [900, 1100], 1e5, species=REFORMING)
    assert result["amount"].dims == ("steam_to_carbon", "temperature", "species")
    assert result["steam_to_carbon"].values.tolist() == [2.0, 3.0, 4.0]
    alone = gibbsmin.equilibrium({"CH4": 1, "H2O": 4.0}, 1100, 1e5, species=REFORMING)
    np.testing.assert_allclose(result["amount"].values[2, 1], alone["amount"].values, rtol=1e-10)


def test_feed_and_temperature_that_share_a_dimension_vary_together() -> None:
    steam = xr.DataArray([2.0, 4.0], dims="case")
    T = xr.DataArray([900.0, 1100.0], dims="case")
    result = gibbsmin.equilibrium({"CH4": 1, "H2O": steam}, T, [1e5, 1e6], species=REFORMING)
    assert result["amount"].dims == ("case", "pressure", "species")
    alone = gibbsmin.equilibrium({"CH4": 1, "H2O": 4.0}, 1100, 1e6, species=REFORMING)
    np.testing.assert_allclose(result["amount"].values[1, 1], alone["amount"].values, rtol=1e-10)


def test_arguments_of_two_dimensions_broadcast_by_name() -> None:
    T = xr.DataArray([[900.0, 1000.0], [1100.0, 1200.0]], dims=("row", "column"))
    p = xr.DataArray([1e5, 1e6], dims="column")
    result = gibbsmin.equilibrium(FEED, T, p, species=REFORMING)
    assert result["gas_amount"].dims == ("row", "column")
    alone = gibbsmin.equilibrium(FEED, 1100, 1e5, species=REFORMING)
    np.testing.assert_allclose(result["amount"].values[1, 0], alone["amount"].values, rtol=1e-10)


# --- CF conventions ---------------------------------------------------------------------------------------


def test_every_variable_has_units_and_a_long_name() -> None:
    result = gibbsmin.equilibrium(FEED, [900.0], [1e5], species=REFORMING, extrapolate=True)
    for name, variable in result.variables.items():
        assert variable.attrs.get("long_name"), name
        if variable.dtype.kind != "U":
            assert variable.attrs.get("units"), name
    assert result["amount"].attrs["units"] == "mol"
    assert result["temperature"].attrs["units"] == "K"
    assert result["pressure"].attrs["units"] == "Pa"


def test_status_carries_its_legend_as_cf_flags() -> None:
    from gibbsmin.minimiser import Status

    status = gibbsmin.equilibrium(FEED, 900.0, 1e5, species=REFORMING)["status"]
    assert status.dtype == np.int8
    assert status.attrs["flag_values"].dtype == np.int8
    assert status.attrs["flag_values"].tolist() == [member.value for member in Status]
    assert status.attrs["flag_meanings"].split() == [member.name.lower() for member in Status]


def test_extrapolation_is_flagged_where_it_happens_and_only_when_allowed() -> None:
    top = gibbsmin.standard_library().find("H2O").upper
    gases = ["H2O", "H2", "O2"]
    allowed = gibbsmin.equilibrium({"H2O": 1}, [1000.0, top + 100], 1e5, species=gases, extrapolate=True)
    flags = allowed["extrapolated"].sel(species="H2O")
    assert flags.values.tolist() == [0, 1]
    assert "extrapolated" not in gibbsmin.equilibrium({"H2O": 1}, 1000.0, 1e5, species=gases)
    with pytest.raises(TemperatureRangeError, match="H2O"):
        gibbsmin.equilibrium({"H2O": 1}, top + 100, 1e5, species=["H2O"])


# --- what the numbers must obey (identities; no source needed) ---------------------------------------------


def test_elements_balance_and_fractions_sum_to_one() -> None:
    result = gibbsmin.equilibrium({"CH4": 0.7, "H2O": 1.9, "N2": 0.3}, np.linspace(500, 2000, 7), [1e4, 1e7])
    atoms = xr.dot(result["amount"], result["atoms"], dim="species")
    fed = xr.dot(result["feed_amount"], result["feed_atoms"], dim="feed_species")
    np.testing.assert_allclose(atoms.values, np.broadcast_to(fed.values, atoms.shape), rtol=1e-12)
    np.testing.assert_allclose(result["mole_fraction"].sum("species").values, 1.0, rtol=1e-14)
    np.testing.assert_allclose(
        result["amount"].sum("species").values, result["gas_amount"].values, rtol=1e-14
    )


def test_exact_stoichiometry_of_decimal_feeds() -> None:
    gases = ["C3H8", "O2", "CO2", "H2O", "CO", "H2", "OH"]
    tenths = gibbsmin.equilibrium({"C3H8": 0.1, "O2": 0.5}, [400, 1500], 1e5, species=gases)
    whole = gibbsmin.equilibrium({"C3H8": 1, "O2": 5}, [400, 1500], 1e5, species=gases)
    # With doubles taken as they are, 1e-17 of O2 or CO would be left over at 400 K; so compare traces too.
    np.testing.assert_allclose(tenths["mole_fraction"].values, whole["mole_fraction"].values, rtol=1e-10)
    oxygen = float(whole["mole_fraction"].sel(species="O2", temperature=400))
    assert 0 < oxygen < 1e-19
    np.testing.assert_allclose(tenths["amount"].values * 10, whole["amount"].values, rtol=1e-10)


def test_zero_amount_in_the_feed_equals_leaving_it_out() -> None:
    without = gibbsmin.equilibrium({"H2": 2, "O2": 1}, 3000, 1e5)
    with_zero = gibbsmin.equilibrium({"H2": 2, "O2": 1, "CH4": 0}, 3000, 1e5)
    np.testing.assert_array_equal(without["mole_fraction"].values, with_zero["mole_fraction"].values)


def test_order_of_species_and_of_the_feed_does_not_matter() -> None:
    one = gibbsmin.equilibrium(FEED, 1000, 1e6, species=REFORMING)
    other = gibbsmin.equilibrium(dict(reversed(FEED.items())), 1000, 1e6, species=REFORMING[::-1])
    np.testing.assert_allclose(
        one["mole_fraction"].values, other["mole_fraction"].sel(species=REFORMING).values, rtol=1e-11
    )


def test_only_element_totals_of_the_feed_matter() -> None:
    one = gibbsmin.equilibrium({"CH4": 1, "H2O": 1}, 1000, 1e6, species=REFORMING)
    other = gibbsmin.equilibrium({"CO": 1, "H2": 3}, 1000, 1e6, species=REFORMING)
    np.testing.assert_allclose(one["amount"].values, other["amount"].values, rtol=1e-11)


def test_names_aliases_and_records_mean_the_same() -> None:
    library = gibbsmin.standard_library()
    one = gibbsmin.equilibrium({"methane": 1, "water": 3}, 1000, 1e6, species=["methane", *REFORMING[1:]])
    other = gibbsmin.equilibrium(FEED, 1000, 1e6, species=[library.find(name) for name in REFORMING])
    assert one.identical(other)


def test_default_species_are_all_neutral_gases_of_the_feeds_elements() -> None:
    result = gibbsmin.equilibrium({"H2": 2, "O2": 1}, 3000, 1e5)
    names = result["species"].values.tolist()
    assert {"H2", "O2", "H2O", "H", "O", "OH"} <= set(names)
    assert not any(gibbsmin.standard_library().find(name).charge for name in names)
    assert names == [each.name for each in gibbsmin.standard_library().gases(["H", "O"])]


def test_an_impossible_feed_is_marked_and_harms_no_other_point() -> None:
    hydrogen = xr.DataArray([1.0, 3.0, 2.0], dims="case")  # at 3, H2O and O2 cannot hold all the hydrogen
    result = gibbsmin.equilibrium({"H2": hydrogen, "O2": 1.0}, 1000, 1e5, species=["H2O", "O2"])
    assert (result["status"].values != 0).tolist() == [False, True, False]
    assert np.isnan(result["mole_fraction"].values[1]).all()
    assert np.isnan(result["gas_amount"].values[1])
    np.testing.assert_allclose(result["amount"].values[0], [1.0, 0.5], rtol=1e-12)
    np.testing.assert_allclose(result["amount"].values[2], [2.0, 0.0], rtol=1e-12, atol=1e-300)


# --- refusals ---------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("feed", "temperature", "pressure", "message"),
    [
        (FEED, 0.0, 1e5, r"temperature: 0 K is not above zero"),
        (FEED, [900, -5.0], 1e5, r"temperature: -5 K is not above zero"),
        (FEED, 900, 0.0, r"pressure: 0 Pa is not above zero"),
        (FEED, 900, -1e5, r"pressure: -100000 Pa is not above zero"),
        (FEED, float("nan"), 1e5, r"temperature: every value must be a finite number"),
        (FEED, 900, float("inf"), r"pressure: every value must be a finite number"),
        (FEED, [], 1e5, r"temperature: no values given"),
        (FEED, "hot", 1e5, r"temperature: expected numbers, found 'hot'"),
        (FEED, [[900, 1000]], 1e5, r"temperature: an array of 2 dimensions needs names"),
        ({}, 900, 1e5, r"feed: it is empty"),
        ({"CH4": 0.0}, 900, 1e5, r"feed: it is empty"),
        ({"CH4": -1.0, "H2O": 3}, 900, 1e5, r"feed of CH4: -1 mol is negative"),
        ({"CH4": [1.0, 2.0]}, 900, 1e5, r"feed of CH4: an array of 1 dimensions needs names"),
        ({"CH4": 1, "methane": 1}, 900, 1e5, r"feed of methane: CH4 is named twice"),
        ({"CH4": 1, "N2": 1}, 900, 1e5, r"feed of N2: none of the listed species contains N"),
        (["CH4"], 900, 1e5, r"feed: expected a mapping of species name to mol, found list"),
    ],
)
def test_impossible_requests_say_what_and_where(feed, temperature, pressure, message) -> None:  # type: ignore[no-untyped-def]
    with pytest.raises(ConditionsError, match=message):
        gibbsmin.equilibrium(feed, temperature, pressure, species=REFORMING)


def test_unknown_species_come_with_a_suggestion() -> None:
    with pytest.raises(UnknownSpeciesError) as caught:
        gibbsmin.equilibrium({"methan": 1}, 900, 1e5)
    assert caught.value.suggestions


def test_condensed_species_and_bare_text_are_refused_as_species_lists() -> None:
    with pytest.raises(ConditionsError, match="condensed"):
        gibbsmin.equilibrium({"CH4": 1}, 900, 1e5, species=["CH4", "C(gr)"])
    with pytest.raises(ConditionsError, match="list of names"):
        gibbsmin.equilibrium({"CH4": 1}, 900, 1e5, species="CH4")
    with pytest.raises(ConditionsError, match="the list is empty"):
        gibbsmin.equilibrium({"CH4": 1}, 900, 1e5, species=[])


def test_dimensions_that_do_not_fit_are_refused() -> None:
    two, three = xr.DataArray([900.0, 1000.0], dims="x"), xr.DataArray([1e5, 2e5, 3e5], dims="x")
    with pytest.raises(ConditionsError, match="both 2 and 3 points"):
        gibbsmin.equilibrium(FEED, two, three, species=REFORMING)
    with pytest.raises(ConditionsError, match="belongs to the results"):
        gibbsmin.equilibrium(FEED, two.rename(x="species"), 1e5, species=REFORMING)
    one = xr.DataArray([900.0, 1000.0], dims="x", coords={"x": [1, 2]})
    other = xr.DataArray([1e5, 2e5], dims="x", coords={"x": [1, 3]})
    with pytest.raises(ConditionsError, match="coordinate differs"):
        gibbsmin.equilibrium(FEED, one, other, species=REFORMING)


def test_all_refusals_share_one_base() -> None:
    assert issubclass(ConditionsError, GibbsminError)


# --- cost -------------------------------------------------------------------------------------------------


def test_importing_the_package_loads_no_numerical_library() -> None:
    program = (
        "import sys, gibbsmin; gibbsmin.__version__;"
        "print(sorted({'numpy','xarray','pint','matplotlib','cantera','pandas'} & set(sys.modules)))"
    )
    answer = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    assert answer.stdout.strip() == "[]"


def test_public_names_are_all_there() -> None:
    for name in gibbsmin.__all__:
        assert getattr(gibbsmin, name) is not None
    assert callable(gibbsmin.equilibrium)
    with pytest.raises(AttributeError, match="no attribute 'equilibrate'"):
        gibbsmin.equilibrate  # noqa: B018
