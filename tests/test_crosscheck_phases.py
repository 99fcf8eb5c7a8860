"""The cross-check with condensed phases: what Cantera confirms, and when its answer does not count.

The multiphase failures of Cantera 3.2.0 are measured ones: each case was run with that version, and its true answer
follows from the closed form or the element balance named beside it.
"""

from __future__ import annotations

import numpy as np
import pytest

import gibbsmin
from gibbsmin.cantera_gas import NoAnswerError
from gibbsmin.cantera_phases import CanteraMixtures
from gibbsmin.comparison_phases import ACCEPTED, phase_residual
from gibbsmin.constants import STANDARD_PRESSURE
from gibbsmin.crosscheck import cross_check
from gibbsmin.outcome import Outcome
from gibbsmin.scenario import load_scenario
from gibbsmin.shipped_files import scenario_folder
from gibbsmin.solving import read_conditions, solve
from gibbsmin.species import ThermoTable, standard_library

LIBRARY = standard_library()
SCENARIOS = (
    "digester_gas_carbon_limits",
    "sulphur_cooler",
    "iron_oxide_reduction",
    "lime_in_reformer",
)


@pytest.fixture(scope="module", params=SCENARIOS)
def outcome(request: pytest.FixtureRequest) -> Outcome:
    return gibbsmin.run(load_scenario(scenario_folder() / f"{request.param}.yaml"))


def test_every_example_with_phases_is_solved_and_confirmed(outcome: Outcome) -> None:
    assert outcome.all_solved
    assert outcome.crosscheck.differing == 0
    assert outcome.crosscheck.confirmed >= 45  # of 50: Cantera may have no answer at some
    assert outcome.crosscheck.data_difference < 1e-10


class Beside:
    """One point: gases and phases by name, a feed [mol], temperature [K], pressure [Pa]."""

    def __init__(self, gases: str, phases: str, feed: dict[str, float], T: float, p: float) -> None:
        names = [*gases.split(), *phases.split()]
        self.table = ThermoTable([LIBRARY.find(name) for name in names])
        self.condensed = np.arange(len(names)) >= len(gases.split())
        self.A = self.table.formula_matrix
        self.T, self.p = T, p
        self.potentials = self.table.gibbs_RT([T])[0] + np.log(p / STANDARD_PRESSURE) * ~self.condensed
        self.n = np.array([feed.get(name, 0.0) for name in names])
        self.fed = self.A @ self.n
        self.all = np.ones(len(names), dtype=bool)

    def cantera(self, solver: str) -> np.ndarray:
        mixtures = CanteraMixtures(self.table, (self.T, self.T))
        return mixtures.equilibrate(self.T, self.p, self.n, self.all, solver)

    def ours(self) -> np.ndarray:
        found = gibbsmin.minimise(self.A, self.fed, self.potentials, condensed=self.condensed)
        assert found.solved.all()
        return np.asarray(found.amounts[0])

    def residual(self, amounts: np.ndarray) -> float:
        return phase_residual(self.A, self.condensed, self.potentials, self.fed, amounts)


B1C = Beside("CO CO2 O2", "C(gr)", {"CO": 1.0, "O2": 1.0, "C(gr)": 1.0}, 900.0, 1e5)


def test_carbon_free_gas_with_oxygen_beside_carbon_monoxide_is_not_accepted() -> None:
    wrong = B1C.cantera("auto")
    # Cantera 3.2.0 calls this converged: no graphite, and oxygen beside carbon monoxide
    assert wrong[3] == pytest.approx(0.0, abs=1e-9)
    assert wrong[2] > 0.1
    np.testing.assert_allclose(B1C.A @ wrong, B1C.fed, rtol=1e-9)
    assert B1C.residual(wrong) > 0.99  # carbon dioxide ought to be there
    right = B1C.ours()
    assert B1C.residual(right) < 1e-9
    assert right[3] > 0.1


def test_the_right_answer_of_the_solver_gibbs_is_accepted_there() -> None:
    found = B1C.cantera("gibbs")
    assert B1C.residual(found) < ACCEPTED
    np.testing.assert_allclose(found, B1C.ours(), rtol=1e-6, atol=1e-9)


def test_a_missing_phase_a_wrong_amount_and_a_lost_element_all_show_in_the_residual() -> None:
    point = Beside("H2 H2O CH4 CO CO2", "C(gr)", {"CH4": 1.0, "H2O": 0.5}, 1000.0, 1e5)
    right = point.ours()
    assert right[-1] > 0
    assert point.residual(right) < 1e-9
    gas_only = gibbsmin.minimise(point.A[:, :-1], point.fed, point.potentials[:-1]).amounts[0]
    assert point.residual(np.append(gas_only, 0.0)) > 0.01  # graphite ought to be there
    moved = right * (1 + 1e-4 * np.arange(6))
    assert point.residual(moved) > 1e-5
    lost = right.copy()
    lost[-1] *= 0.999
    assert point.residual(lost) > 1e-5


@pytest.mark.parametrize("pressure", [1e3, 1e5, 1e6, 1e7])
def test_pressure_has_no_say_in_the_potential_of_a_pure_phase(pressure: float) -> None:
    # Cantera's default density of 0.001 kg/m3 would put C(gr) at 1000 K and 10 bar to some +1300 RT
    mixtures = CanteraMixtures(B1C.table, (900.0, 900.0))
    _, (_, graphite) = mixtures._mixture(900.0, B1C.all)
    graphite.TP = 900.0, pressure
    own = graphite.chemical_potentials[0] / (8314.46261815324 * 900.0)
    assert own == pytest.approx(B1C.potentials[-1], abs=1e-9)


def test_a_phase_of_an_element_that_is_not_fed_is_kept_from_cantera() -> None:
    conditions = read_conditions(
        {"H2": 2.0, "O2": 1.0},
        1000.0,
        101325.0,
        species=["H2", "O2", "H2O", "OH", "CO", "CO2"],
        condensed="graphite",
    )
    result = solve(conditions)
    check = cross_check(result, conditions.table)
    assert check.confirmed == 1


def test_a_point_without_gas_that_cantera_cannot_hold_is_listed_without_an_answer() -> None:
    conditions = read_conditions(
        {"CaO(cd)": 1.0, "SiO2(cd)": 0.5}, 1000.0, 1e5, species=["O2"], condensed=["CaO", "SiO2(cd)"]
    )
    result = solve(conditions)
    assert int(result["status"]) == 0
    check = cross_check(result, conditions.table)
    (point,) = check.points
    assert point.status in ("confirmed", "no independent answer")
    assert check.all_confirmed


def test_a_difference_is_found_where_our_amounts_are_falsified() -> None:
    conditions = read_conditions({"CH4": 1.0, "H2O": 0.5}, 1000.0, 1e5, condensed="graphite")
    result = solve(conditions)
    false = result.assign(phase_amount=result["phase_amount"] * 0.99)
    check = cross_check(false, conditions.table)
    assert check.differing == 1
    assert check.points[0].verdict == "theirs"
    assert check.points[0].species == "C(gr)"


def test_the_wish_for_a_species_that_cantera_refuses_is_told() -> None:
    with pytest.raises(NoAnswerError, match="failed"):
        Beside("CO CO2 O2", "C(gr)", {"CO": 1.0}, 900.0, 1e5).cantera("no such solver")


def test_what_the_notes_of_the_examples_say_holds(outcome: Outcome) -> None:
    dataset = outcome.dataset
    name = outcome.scenario.title.split(",")[0]
    if name.startswith("Reforming with lime"):
        carbonate = dataset["phase_amount"].sel(phase="CaCO3(cd)") > 0
        dry = dataset["dry_mole_fraction"].sel(species="H2")
        assert float(dry.where(carbonate).max()) > 0.9
        assert float(dataset["phase_amount"].sel(phase="C(gr)").max()) == 0.0
        cold = dataset["phase_amount"].sel(phase="Ca(OH)2(cd)").isel(temperature=0)
        assert (cold > 0).all()
    elif name.startswith("Reduction of iron oxide"):
        wustite = dataset["phase_amount"].sel(phase="Fe0.947O(cd)") > 0
        T = dataset["temperature"] - 273.15
        assert not bool(wustite.where(T < 595, False).any())
        assert bool(wustite.where((T > 595) & (T < 610), False).any())
    elif name.startswith("Cooling of a sulphur"):
        form = dataset["phase_form"].sel(phase="S(cd)")
        kelvin = dataset["temperature"].values
        np.testing.assert_array_equal(form.values == "liquid", kelvin > 388.36)
    else:
        limit, steam, slip = outcome.boundaries
        assert limit.crossings > 30
        assert steam.crossings > 100
        assert slip.crossings > 40
