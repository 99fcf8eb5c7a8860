"""Maps and scattered points against the minimiser itself: the short way gives the same answers."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import gibbsmin.grid.map
import gibbsmin.grid.scattered
from gibbsmin.grid import solve_grid, solve_points
from gibbsmin.minimiser import Status, minimise, optimality_gap
from gibbsmin.species import ThermoTable, standard_library

LIBRARY = standard_library()


class Mixture:
    """Gases of some elements, a feed, and a window of temperature and pressure."""

    def __init__(self, elements: list[str], feed: dict[str, float], T: Any, bar: Any, **which: Any):
        gases = LIBRARY.gases(elements, **which)
        named = [LIBRARY.find(name) for name in feed]
        species = named + [gas for gas in gases if gas not in named]
        self.T = np.asarray(T, dtype=float)
        self.log_p = np.log(np.asarray(bar, dtype=float))
        table = ThermoTable(
            [each for each in species if each.lower <= self.T.min() and each.upper >= self.T.max()]
        )
        self.A = table.formula_matrix
        self.g = table.gibbs_RT(self.T)
        self.names = [each.name for each in table.species]
        n = np.zeros(len(self.names))
        for name, amount in feed.items():
            n[self.names.index(LIBRARY.find(name).name)] = amount
        self.b = self.A @ n

    def grid(self, **options: Any) -> Any:
        return solve_grid(self.A, self.b[None], self.g, self.T, self.log_p, **options)

    def minimum(self, row: Any, column: Any) -> Any:
        return minimise(self.A, self.b, self.g[row] + self.log_p[column, None])


REFORMING = Mixture(
    ["C", "H", "O", "N"],
    {"CH4": 1, "H2O": 3, "N2": 0.1, "O2": 0},
    np.linspace(600, 1500, 181),
    np.geomspace(0.1, 100, 60),
    largest_carbon_number=2,
)
PURE_STEAM = Mixture(["H", "O"], {"H2O": 1}, np.linspace(300, 3000, 200), np.geomspace(0.01, 100, 60))
LEAN_FLAME = Mixture(
    ["C", "H", "O", "N"],
    {"CH4": 1, "O2": 2, "N2": 7.52},
    np.linspace(400, 2500, 200),
    np.geomspace(0.1, 50, 60),
    largest_carbon_number=2,
)
ARGON_PLASMA = Mixture(["Ar"], {"Ar": 1}, np.linspace(1000, 12000, 200), np.geomspace(0.01, 1, 60), ions=True)
MAPS = {
    "reforming": REFORMING,
    "pure steam": PURE_STEAM,
    "stoichiometric": LEAN_FLAME,
    "plasma": ARGON_PLASMA,
}


@pytest.mark.parametrize("name", MAPS)
def test_map_agrees_with_single_points_down_to_traces(name: str) -> None:
    mixture = MAPS[name]
    solved = mixture.grid()
    assert (solved.status == Status.SOLVED).all()
    rng = np.random.default_rng(5)
    row = np.concatenate([[0, -1, 0, -1], rng.integers(0, len(mixture.T), 400)])
    column = np.concatenate([[0, 0, -1, -1], rng.integers(0, len(mixture.log_p), 400)])
    single = mixture.minimum(row, column)
    mine = solved.amounts[0, row, column]
    visible = single.amounts > 1e-290
    difference = np.abs(mine / np.where(visible, single.amounts, 1.0) - 1.0)[visible]
    assert difference.max() < 1e-12 * max(
        1.0, np.abs(mixture.g).max() / 100
    )  # potentials of 1000 round to 1e-13
    assert (mine[single.amounts == 0] == 0).all()


@pytest.mark.parametrize("name", MAPS)
def test_map_comes_with_evidence_of_its_own(name: str) -> None:
    mixture = MAPS[name]
    solved = mixture.grid()
    assert (solved.gap <= 1e-10 * np.abs(mixture.b).sum()).all()
    assert (solved.balance_residual <= 1e-12).all()
    rng = np.random.default_rng(6)
    row, column = rng.integers(0, len(mixture.T), 200), rng.integers(0, len(mixture.log_p), 200)
    full = optimality_gap(
        mixture.A,
        mixture.b,
        mixture.g[row] + mixture.log_p[column, None],
        solved.amounts[0, row, column],
        solved.element_potentials[0, row, column],
        excluded=solved.amounts[0, row, column] == 0.0,
    )
    assert (full <= 1e-10 * np.abs(mixture.b).sum()).all()
    # the certificate from sums bounds the one computed in full, but for rounding of the latter
    assert (full <= solved.gap[0, row, column] + 1e-12 * np.abs(mixture.b).sum()).all()


def test_most_points_of_a_map_take_the_short_way() -> None:
    solved = REFORMING.grid()
    assert np.mean(solved.iterations == 2) > 0.99


@pytest.fixture
def small_chunks(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(gibbsmin.grid.map, "CHUNK", 97)
    monkeypatch.setattr(gibbsmin.grid.map, "PRESSURES", 13)
    monkeypatch.setattr(gibbsmin.grid.scattered, "BLOCK", 97)


def test_chunks_do_not_matter(small_chunks: None, request: pytest.FixtureRequest) -> None:
    chopped = REFORMING.grid()
    request.getfixturevalue("monkeypatch").undo()
    whole = REFORMING.grid()
    np.testing.assert_allclose(chopped.amounts, whole.amounts, rtol=1e-12)


def test_threads_do_not_matter() -> None:
    one, three = REFORMING.grid(threads=1), REFORMING.grid(threads=3)
    np.testing.assert_array_equal(one.amounts, three.amounts)


def test_order_of_points_does_not_matter() -> None:
    rng = np.random.default_rng(7)
    rows, columns = rng.permutation(len(REFORMING.T)), rng.permutation(len(REFORMING.log_p))
    mixed = solve_grid(
        REFORMING.A, REFORMING.b[None], REFORMING.g[rows], REFORMING.T[rows], REFORMING.log_p[columns]
    )
    whole = REFORMING.grid()
    np.testing.assert_array_equal(mixed.amounts[0], whole.amounts[0][np.ix_(rows, columns)])
    np.testing.assert_array_equal(mixed.gap[0], whole.gap[0][np.ix_(rows, columns)])


def test_repeated_temperatures_are_solved_alike() -> None:
    twice = np.repeat(np.arange(len(REFORMING.T)), 2)[:40]
    solved = solve_grid(
        REFORMING.A, REFORMING.b[None], REFORMING.g[twice], REFORMING.T[twice], REFORMING.log_p
    )
    np.testing.assert_allclose(solved.amounts[0, 0::2], solved.amounts[0, 1::2], rtol=1e-12)


def test_several_feeds_each_have_their_map() -> None:
    feeds = REFORMING.b * np.array([[1.0], [2.0]]) + np.array([[0.0], [1.0]]) * REFORMING.A[:, 1]
    both = solve_grid(REFORMING.A, feeds, REFORMING.g, REFORMING.T, REFORMING.log_p)
    second = solve_grid(REFORMING.A, feeds[1:], REFORMING.g, REFORMING.T, REFORMING.log_p)
    np.testing.assert_array_equal(both.amounts[1], second.amounts[0])


def scattered_problem(count: int, seed: int) -> tuple[Any, ...]:
    """Points without order around REFORMING: feeds with air, any temperature and pressure of its window."""
    rng = np.random.default_rng(seed)
    at_T = rng.integers(0, len(REFORMING.T), count)
    log_p = rng.uniform(REFORMING.log_p[0], REFORMING.log_p[-1], count)
    steam, oxygen = REFORMING.A[:, 1], np.where(np.array(REFORMING.names) == "O2")[0][0]
    b = REFORMING.b + rng.uniform(-2, 3, (count, 1)) * steam
    b = (b + rng.uniform(0, 1, (count, 1)) * REFORMING.A[:, oxygen]) * rng.uniform(0.1, 10, (count, 1))
    return b, log_p, np.arange(count), at_T, np.arange(count)


def test_scattered_points_agree_with_single_points() -> None:
    b, log_p, feed, at_T, at_p = scattered_problem(3000, 8)
    solved = solve_points(REFORMING.A, b, REFORMING.g, REFORMING.T, log_p, feed, at_T, at_p)
    single = minimise(REFORMING.A, b, REFORMING.g[at_T] + log_p[:, None])
    assert (solved.status == Status.SOLVED).all()
    assert (solved.gap <= 1e-10 * b.sum(axis=1)).all()
    np.testing.assert_allclose(solved.amounts, single.amounts, rtol=1e-12)


def test_blocks_of_scattered_points_do_not_matter(small_chunks: None, request: pytest.FixtureRequest) -> None:
    b, log_p, feed, at_T, at_p = scattered_problem(1000, 12)
    chopped = solve_points(REFORMING.A, b, REFORMING.g, REFORMING.T, log_p, feed, at_T, at_p)
    request.getfixturevalue("monkeypatch").undo()
    whole = solve_points(REFORMING.A, b, REFORMING.g, REFORMING.T, log_p, feed, at_T, at_p)
    np.testing.assert_allclose(chopped.amounts, whole.amounts, rtol=1e-12)


def test_threads_do_not_matter_for_scattered_points(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(gibbsmin.grid.scattered, "BLOCK", 300)
    b, log_p, feed, at_T, at_p = scattered_problem(2000, 13)
    one, three = (
        solve_points(REFORMING.A, b, REFORMING.g, REFORMING.T, log_p, feed, at_T, at_p, threads=threads)
        for threads in (1, 3)
    )
    np.testing.assert_array_equal(one.amounts, three.amounts)


def test_progress_counts_every_scattered_point_once() -> None:
    b, log_p, feed, at_T, at_p = scattered_problem(2000, 14)
    b[::7] = REFORMING.A[:, 0]  # nothing but methane: of another kind than the others
    seen: list[int] = []
    solve_points(REFORMING.A, b, REFORMING.g, REFORMING.T, log_p, feed, at_T, at_p, progress=seen.append)
    assert sum(seen) == 2000


CLOUDS: dict[str, tuple[list[str], float, float]] = {
    "nitrogen and oxygen": (["N", "O"], 300.0, 6000.0),
    "hydrocarbons": (["C", "H"], 300.0, 3000.0),
    "halogens": (["H", "Cl", "F"], 400.0, 5000.0),
    "deposition": (["Si", "H", "Cl", "Ar"], 700.0, 2500.0),
    "sulphur": (["C", "H", "N", "O", "S"], 400.0, 2000.0),
}


@pytest.mark.parametrize("name", CLOUDS)
def test_scattered_points_of_any_elements_agree_with_single_points(name: str) -> None:
    """Feeds over four decades of every element, wide ranges of temperature and pressure: neighbours are far."""
    elements, low, high = CLOUDS[name]
    gases = standard_library().gases(elements, largest_carbon_number=3)
    table = ThermoTable([each for each in gases if each.lower <= low and each.upper >= high])
    rng = np.random.default_rng(15)
    count = 1500
    T = rng.uniform(low, high, count)
    log_p = rng.uniform(np.log(1e-3), np.log(100.0), count)
    b = 10.0 ** rng.uniform(-4, 0, (count, len(table.elements)))
    g, A, at = table.gibbs_RT(T), table.formula_matrix, np.arange(count)
    solved = solve_points(A, b, g, T, log_p, at, at, at)
    single = minimise(A, b, g + log_p[:, None])
    assert (solved.status == Status.SOLVED).all()
    visible = single.amounts > 1e-290
    difference = np.abs(solved.amounts / np.where(visible, single.amounts, 1.0) - 1.0)[visible]
    assert difference.max() < 1e-12 * max(1.0, np.abs(g).max() / 100)  # potentials of 1000 round to 1e-13


def test_species_that_only_some_feeds_exclude_are_not_left_out_of_the_others() -> None:
    """CO, CO2 and O2: as much carbon as oxygen leaves nothing but CO, more oxygen brings in all three."""
    A = np.array([[1.0, 1.0, 0.0], [1.0, 2.0, 2.0]])
    rng = np.random.default_rng(16)
    count = 400
    b = np.ones((count, 2))
    b[::50, 1] = rng.uniform(1.1, 3.0, count // 50)
    g = rng.uniform(-5.0, 5.0, (count, 3))
    at = np.arange(count)
    solved = solve_points(A, b, g, np.linspace(500.0, 900.0, count), np.zeros(count), at, at, at)
    single = minimise(A, b, g)
    assert (single.amounts[::50] > 0.0).all()
    np.testing.assert_allclose(solved.amounts, single.amounts, rtol=1e-12)


def test_order_of_scattered_points_does_not_matter() -> None:
    b, log_p, feed, at_T, at_p = scattered_problem(2500, 9)
    order = np.random.default_rng(10).permutation(2500)
    straight = solve_points(REFORMING.A, b, REFORMING.g, REFORMING.T, log_p, feed, at_T, at_p)
    mixed = solve_points(
        REFORMING.A, b, REFORMING.g, REFORMING.T, log_p, feed[order], at_T[order], at_p[order]
    )
    np.testing.assert_allclose(mixed.amounts, straight.amounts[order], rtol=1e-12)


def test_scattered_points_of_different_kinds_are_solved_too() -> None:
    b, log_p, feed, at_T, at_p = scattered_problem(1500, 11)
    nitrogen = np.flatnonzero((REFORMING.A[:, 2] > 0) & (REFORMING.A[:, 0] == 0))
    b[::3, nitrogen] = 0.0
    solved = solve_points(REFORMING.A, b, REFORMING.g, REFORMING.T, log_p, feed, at_T, at_p)
    assert (solved.status == Status.SOLVED).all()
    with_nitrogen = REFORMING.A[nitrogen[0]] > 0
    assert (solved.amounts[::3][:, with_nitrogen] == 0).all()


def test_a_point_that_cannot_be_solved_leaves_the_others_alone() -> None:
    b = np.stack([REFORMING.b, REFORMING.b])
    b[1, 0] = -1.0
    solved = solve_grid(REFORMING.A, b, REFORMING.g, REFORMING.T, REFORMING.log_p)
    assert (solved.status[0] == Status.SOLVED).all()
    assert (solved.status[1] == Status.INFEASIBLE).all()
    assert np.isnan(solved.amounts[1]).all()


def test_potentials_that_are_not_finite_spoil_only_their_row() -> None:
    g = REFORMING.g.copy()
    g[17, 3] = np.nan
    solved = solve_grid(REFORMING.A, REFORMING.b[None], g, REFORMING.T, REFORMING.log_p)
    assert (solved.status[0, 17] == Status.NOT_FINITE).all()
    assert (np.delete(solved.status[0], 17, axis=0) == Status.SOLVED).all()


def test_progress_counts_every_point_once() -> None:
    seen: list[int] = []
    REFORMING.grid(progress=seen.append)
    assert sum(seen) == len(REFORMING.T) * len(REFORMING.log_p)
