"""The cross-check: same data on both sides, nothing hidden, and it notices what it should."""

from __future__ import annotations

import ctypes

import numpy as np
import pytest
import xarray as xr

import gibbsmin
from gibbsmin import crosscheck
from gibbsmin.cantera_gas import CanteraGas, NoAnswerError, silenced
from gibbsmin.comparison import imbalance, stationarity
from gibbsmin.crosscheck import choose_points, cross_check
from gibbsmin.species import ThermoTable

GASES = ["CH4", "H2O", "CO", "CO2", "H2", "N2", "NH3", "C2H4", "C2H6", "H", "OH"]
FEED = {"CH4": 1.0, "H2O": 3.0, "N2": 0.2}


def table(dataset: xr.Dataset, *, extrapolate: bool = False) -> ThermoTable:
    library = gibbsmin.standard_library()
    names = dataset["species"].values.tolist()
    return ThermoTable([library.find(name) for name in names], extrapolate=extrapolate)


@pytest.fixture(scope="module")
def reformed() -> xr.Dataset:
    # 1000 K is a limit between two intervals of most species' data
    return gibbsmin.equilibrium(FEED, np.linspace(600, 1400, 9), np.geomspace(1e5, 1e7, 8), species=GASES)


def test_both_programs_agree_over_a_map(reformed: xr.Dataset) -> None:
    result = cross_check(reformed, table(reformed), extent="all")
    assert len(result.points) == 72
    assert result.confirmed == 72
    assert result.all_confirmed
    assert result.library.startswith("Cantera 3.2")
    assert result.worst is not None
    # Tolerance 1e-6 by the measured scatter of Cantera's answers (see the module); this map is an easy one.
    assert result.worst.relative < 1e-8


def test_standard_potentials_are_the_same_numbers_on_both_sides(reformed: xr.Dataset) -> None:
    result = cross_check(reformed, table(reformed), extent="all")
    assert result.data_difference < 1e-12


def test_seven_coefficient_data_and_another_reference_pressure_are_carried_over() -> None:
    from dataclasses import replace

    library = gibbsmin.standard_library()
    changed = []
    for name in ("H2O", "H2", "O2"):
        species = library.find(name)
        intervals = tuple(
            replace(each, model="NASA-7", coefficients=(3.5, 1e-4, 0.0, 0.0, 0.0, *each.nine[7:]))
            for each in species.forms[0].intervals
        )
        form = replace(species.forms[0], intervals=intervals)
        changed.append(replace(species, forms=(form,), reference_pressure=101325.0))
    gas = gibbsmin.equilibrium({"H2": 2, "O2": 1}, [900.0, 1000.0, 1100.0], [1e5, 1e6], species=changed)
    result = cross_check(gas, ThermoTable(changed), extent="all")
    assert result.data_difference < 1e-12
    assert result.confirmed == 6


def test_extrapolated_points_can_be_checked() -> None:
    names = ["H2O", "H2", "O2", "OH", "H", "O"]
    top = gibbsmin.standard_library().find("H2O").upper
    gas = gibbsmin.equilibrium({"H2O": 1}, [top + 500.0], 1e5, species=names, extrapolate=True)
    result = cross_check(gas, table(gas, extrapolate=True), extent="all")
    assert result.confirmed == 1


@pytest.mark.parametrize("share", [1e-5, 1e-3, 0.1])
def test_a_corrupted_result_is_caught_and_judged(reformed: xr.Dataset, share: float) -> None:
    wrong = reformed.copy(deep=True)
    at = {"temperature": 3, "pressure": 2}
    wrong["mole_fraction"][{**at, "species": GASES.index("CO")}] *= 1 + share
    result = cross_check(wrong, table(wrong), extent="all")
    assert not result.all_confirmed
    (point,) = result.having("differs")
    assert point.index == (3, 2)
    assert point.species == "CO"
    np.testing.assert_allclose(point.relative, share / (1 + share), rtol=1e-3)
    assert point.verdict == "theirs"
    assert "vcs agrees with that answer" in point.reason
    assert result.worst == point


def test_a_wrong_answer_of_the_other_program_is_judged_too(
    reformed: xr.Dataset, monkeypatch: pytest.MonkeyPatch
) -> None:
    genuine = CanteraGas.equilibrate

    def unmoved(self, temperature, pressure, fractions, solver):  # type: ignore[no-untyped-def]
        # the feed returned as the answer: how that program fails without saying so, where it does
        return (
            (fractions, solver)
            if solver == "auto"
            else genuine(self, temperature, pressure, fractions, solver)
        )

    monkeypatch.setattr(CanteraGas, "equilibrate", unmoved)
    result = cross_check(reformed, table(reformed), sample_size=5)
    assert not result.all_confirmed
    assert result.differing == len(result.points)
    for point in result.points:
        assert point.verdict == "ours"
        assert "vcs agrees with ours" in point.reason


def test_a_genuine_difference_at_exact_stoichiometry_is_judged_by_the_balance_of_components() -> None:
    # Ethene with three oxygen at 1000 K and 100 Pa: Cantera 3.2.0 returns the 1.1e-6 of O2 wrong by 2e-4 (its
    # stopping rule looks at element totals), while its own solver vcs agrees with ours.
    library = gibbsmin.standard_library()
    gases = library.gases(["C", "H", "O"], largest_carbon_number=2)
    gas = gibbsmin.equilibrium({"C2H4": 1, "O2": 3}, 1000.0, 100.0, species=gases)
    result = cross_check(gas, ThermoTable(gases))
    (point,) = result.points
    assert point.status == "differs"
    assert not result.all_confirmed
    assert point.species in ("O2", "H2", "CO")
    assert 1e-5 < point.relative < 1e-3
    assert point.residual < 1e-9
    assert point.other_residual > 1e-5
    assert point.verdict == "ours"
    assert "vcs agrees with ours" in point.reason


def test_points_without_an_answer_are_listed_with_the_reason(
    reformed: xr.Dataset, monkeypatch: pytest.MonkeyPatch
) -> None:
    def fail(self, temperature, pressure, fractions, solver):  # type: ignore[no-untyped-def]
        raise NoAnswerError("Cantera's solver auto failed: no convergence")

    monkeypatch.setattr(CanteraGas, "equilibrate", fail)
    result = cross_check(reformed, table(reformed), sample_size=5)
    assert result.unanswered == len(result.points) > 0
    assert {point.reason for point in result.points} == {"Cantera's solver auto failed: no convergence"}
    assert result.worst is None
    assert result.all_confirmed  # listed, but it contradicts nothing


def test_a_real_failure_of_the_other_solver_becomes_a_reason() -> None:
    # Exactly stoichiometric hydrogen and oxygen at 298.15 K: its element-potential solver reports a singular
    # matrix there (measured with 3.2.0), which `auto` then works around.
    names = ["H2O", "H2", "O2"]
    gas = CanteraGas(ThermoTable([gibbsmin.standard_library().find(n) for n in names]), (298.15, 298.15))
    with pytest.raises(NoAnswerError, match="solver element_potential failed"):
        gas.equilibrate(298.15, 1e5, np.array([0.0, 2 / 3, 1 / 3]), "element_potential")
    found, solver = gas.equilibrate(298.15, 1e5, np.array([0.0, 2 / 3, 1 / 3]), "auto")
    np.testing.assert_allclose(found, [1, 0, 0], atol=1e-12)
    assert solver == "auto"


def test_ions_are_checked_hot_and_skipped_cold_with_a_reason() -> None:
    # Below 2000 K Cantera's electron fractions were measured wrong by decades in air with ions.
    library = gibbsmin.standard_library()
    names = ["N2", "O2", "NO", "N", "O", "NO+", "e-"]
    gas = gibbsmin.equilibrium({"N2": 0.79, "O2": 0.21}, [1500.0, 4000.0], 1e5, species=names)
    functions = ThermoTable([library.find(name) for name in names])
    cold, hot = cross_check(gas, functions, extent="all").points
    assert cold.status == "no independent answer"
    assert "ions below 2000 K" in cold.reason
    assert hot.status == "confirmed"


def test_feeds_that_are_no_listed_gases_are_checked_from_another_start() -> None:
    gas = gibbsmin.equilibrium({"C2H6": 1, "H2O(l)": 4}, [900.0, 1100.0], 1e5, species=GASES[:5])
    result = cross_check(gas, table(gas), extent="all")
    assert result.confirmed == 2


def test_species_that_the_other_program_refuses_leave_every_point_without_an_answer(
    reformed: xr.Dataset, monkeypatch: pytest.MonkeyPatch
) -> None:
    def refuse(*_):  # type: ignore[no-untyped-def]
        raise NoAnswerError("Cantera refuses the species: unknown element")

    monkeypatch.setattr(CanteraGas, "__init__", refuse)
    result = cross_check(reformed, table(reformed), sample_size=4)
    assert {point.reason for point in result.points} == {"Cantera refuses the species: unknown element"}


def test_different_data_are_no_confirmation(reformed: xr.Dataset, monkeypatch: pytest.MonkeyPatch) -> None:
    genuine = CanteraGas.standard_gibbs_RT
    monkeypatch.setattr(CanteraGas, "standard_gibbs_RT", lambda self, T: genuine(self, T) + 1e-6)
    result = cross_check(reformed, table(reformed), sample_size=4)
    assert result.confirmed == 0
    assert all("standard potentials differ" in point.reason for point in result.points)


# --- choice of points -------------------------------------------------------------------------------------


def test_a_sample_has_the_corners_and_the_largest_gaps(reformed: xr.Dataset) -> None:
    marked = reformed.copy(deep=True)
    marked["gap"][4, 5] = 1e-3
    chosen = choose_points(marked, "sample", 20, seed=1)
    assert len(chosen) == 20
    assert len(set(chosen)) == 20
    assert {(0, 0), (0, 7), (8, 0), (8, 7), (4, 5)} <= set(chosen)
    assert chosen == sorted(chosen)


def test_the_same_seed_chooses_the_same_points(reformed: xr.Dataset) -> None:
    assert choose_points(reformed, "sample", 20, 1) == choose_points(reformed, "sample", 20, 1)
    assert choose_points(reformed, "sample", 20, 1) != choose_points(reformed, "sample", 20, 2)


def test_all_none_and_small_maps(reformed: xr.Dataset) -> None:
    assert len(choose_points(reformed, "all", 5, 1)) == 72
    assert len(choose_points(reformed, "sample", 500, 1)) == 72
    nothing = cross_check(reformed, table(reformed), extent="none")
    assert nothing.points == ()
    assert nothing.all_confirmed
    single = gibbsmin.equilibrium(FEED, 1000.0, 1e5, species=GASES)
    assert choose_points(single, "sample", 50, 1) == [()]
    assert cross_check(single, table(single)).confirmed == 1


def test_unsolved_points_are_not_checked_but_counted() -> None:
    hydrogen = xr.DataArray([1.0, 3.0], dims="case")  # at 3, H2O and O2 cannot hold all the hydrogen
    gas = gibbsmin.equilibrium({"H2": hydrogen, "O2": 1.0}, 1000.0, 1e5, species=["H2O", "O2"])
    result = cross_check(gas, table(gas), extent="all")
    assert [point.index for point in result.points] == [(0,)]
    assert result.unsolved == 1


# --- evidence ---------------------------------------------------------------------------------------------


def test_stationarity_sees_a_species_that_ought_to_be_there() -> None:
    A = np.array([[1.0, 1.0]])
    potentials = np.array([0.0, 1.0])  # x2/x1 = exp(-1) at equilibrium
    right = np.exp(-potentials) / np.exp(-potentials).sum()
    assert stationarity(A, potentials, right) < 1e-15
    assert stationarity(A, potentials, np.array([1.0, 0.0])) == 1.0
    np.testing.assert_allclose(stationarity(A, potentials, right * [1, 1.001]), 1e-3, rtol=2e-3)


def test_imbalance_is_measured_against_the_small_row_it_spoils() -> None:
    A = np.array([[2.0, 2.0, 0.0], [1.0, 0.0, 2.0]])  # H2O, H2, O2
    fed = np.array([2.0, 1.0])
    exact = np.array([1.0, 2e-5, 1e-5])
    assert imbalance(A, fed, exact / exact.sum()) < 1e-10
    # a thousandth of the oxygen missing is 1e-8 of all oxygen, and still a thousandth
    short = np.array([1.0, 2e-5, 0.999e-5])
    np.testing.assert_allclose(imbalance(A, fed, short / short.sum()), 5e-4, rtol=0.01)
    # rows below the threshold do not count
    traces = np.array([1.0, 2e-9, 0.5e-9])
    assert imbalance(A, fed, traces / traces.sum()) < 1e-8


def test_results_carry_the_outcome_as_cf_flags(reformed: xr.Dataset) -> None:
    result = cross_check(reformed, table(reformed), sample_size=20)
    dataset = result.add_to(reformed)
    status = dataset["crosscheck_status"]
    meanings = dict(
        zip(status.attrs["flag_meanings"].split(), status.attrs["flag_values"].tolist(), strict=True)
    )
    assert (status.values == meanings["confirmed"]).sum() == 20
    assert (status.values == meanings["not_checked"]).sum() == 52
    assert np.isfinite(dataset["crosscheck_difference"].values).sum() == 20
    assert set(crosscheck.STATUS_CODES.values()) <= set(meanings.values())


def test_standard_output_stays_clean(capfd: pytest.CaptureFixture[str]) -> None:
    with silenced():
        ctypes.CDLL(None).puts(b"ERROR: FAILURE its = 1001!")
        print("and from Python")
    print("ours")
    captured = capfd.readouterr()
    assert captured.out == "ours\n"
