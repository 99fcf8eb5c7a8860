"""Maps with condensed phases against the minimiser itself."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from gibbsmin.grid import solve_grid
from gibbsmin.minimiser import Status, minimise, optimality_gap
from gibbsmin.species import ThermoTable, standard_library

LIBRARY = standard_library()


class Beside:
    """Gases and condensed phases, a feed, and a window of temperature and pressure."""

    def __init__(self, gases: str, phases: str, feed: dict[str, float], T: Any, bar: Any):
        names = [*gases.split(), *phases.split()]
        self.T, self.log_p = np.asarray(T, dtype=float), np.log(np.asarray(bar, dtype=float))
        table = ThermoTable([LIBRARY.find(name) for name in names])
        self.A, self.g = table.formula_matrix, table.gibbs_RT(self.T)
        self.condensed = np.arange(len(names)) >= len(gases.split())
        n = np.zeros(len(names))
        for name, amount in feed.items():
            n[names.index(name)] = amount
        self.b = self.A @ n

    def grid(self, **options: Any) -> Any:
        return solve_grid(
            self.A, self.b[None], self.g, self.T, self.log_p, condensed=self.condensed, **options
        )

    def potentials(self, row: Any, column: Any) -> Any:
        return self.g[row] + self.log_p[column, None] * ~self.condensed


REFORMING = Beside(
    "CH4 H2O CO CO2 H2 O2 OH CH3 C2H4 C2H6 HCHO,formaldehyde C".replace("HCHO,formaldehyde", "HCHO"),
    "C(gr)",
    {"CH4": 1, "H2O": 0.8},
    np.linspace(600, 1500, 181),
    np.geomspace(0.1, 100, 60),
)
WET_GAS = Beside(
    "H2 H2O CO CO2 O2",
    "H2O(l)",
    {"H2": 1, "H2O": 2, "CO": 1},
    np.linspace(300, 590, 120),
    np.geomspace(0.1, 50, 60),
)
IRON = Beside(
    "H2 H2O O2 OH",
    "Fe(cd) Fe0.947O(cd) Fe3O4(cd)",
    {"H2": 3, "H2O": 1, "Fe(cd)": 1},
    np.linspace(600, 1000, 160),
    np.geomspace(0.1, 10, 60),
)
MAPS = {"carbon": REFORMING, "water": WET_GAS, "iron": IRON}


@pytest.mark.parametrize("name", MAPS)
def test_map_agrees_with_single_points(name: str) -> None:
    mixture = MAPS[name]
    solved = mixture.grid()
    assert (solved.status == Status.SOLVED).all()
    rng = np.random.default_rng(5)
    row, column = rng.integers(0, len(mixture.T), 300), rng.integers(0, len(mixture.log_p), 300)
    single = minimise(mixture.A, mixture.b, mixture.potentials(row, column), condensed=mixture.condensed)
    mine = solved.amounts[0, row, column]
    gas = ~mixture.condensed
    visible = (single.amounts > 1e-290) & gas
    assert np.abs(mine / np.where(visible, single.amounts, 1.0) - 1.0)[visible].max() < 1e-11
    np.testing.assert_allclose(
        mine[:, ~gas], single.amounts[:, ~gas], rtol=1e-10, atol=1e-12 * mixture.b.sum()
    )


@pytest.mark.parametrize("name", MAPS)
def test_more_than_one_set_of_phases_occurs_and_every_point_has_its_proof(name: str) -> None:
    mixture = MAPS[name]
    solved = mixture.grid()
    sets = np.unique(
        solved.amounts[0][..., mixture.condensed].reshape(-1, mixture.condensed.sum()) > 0, axis=0
    )
    assert len(sets) > 1
    assert (solved.gap <= 1e-10 * mixture.b.sum()).all()
    assert (solved.balance_residual <= 1e-12).all()
    rng = np.random.default_rng(6)
    row, column = rng.integers(0, len(mixture.T), 200), rng.integers(0, len(mixture.log_p), 200)
    full = optimality_gap(
        mixture.A,
        mixture.b,
        mixture.potentials(row, column),
        solved.amounts[0, row, column],
        solved.element_potentials[0, row, column],
        condensed=mixture.condensed,
    )
    assert (full <= 1e-10 * mixture.b.sum()).all()


def test_most_points_take_the_short_way() -> None:
    assert np.mean(REFORMING.grid().iterations == 2) > 0.97


def test_threads_do_not_matter() -> None:
    np.testing.assert_array_equal(REFORMING.grid(threads=1).amounts, REFORMING.grid(threads=3).amounts)
