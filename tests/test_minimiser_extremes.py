"""Problems no species data would give: invented formula matrices, potentials and amounts at the ends of
the range."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import numpy as np
import pytest

from tests import reference
from tests.gas_cases import assert_agrees
from tests.invented_problems import Invented, invented_problem, invented_problems


def solve(A: Any, b: Any, c: Any) -> Any:
    from gibbsmin import minimise
    from gibbsmin.minimiser import Status

    answer = minimise(np.asarray(A, dtype=float), np.asarray(b, dtype=float), np.asarray(c, dtype=float))
    assert np.all(answer.status == Status.SOLVED), answer.status
    return answer


def check(A: Any, b: Any, c: Any) -> Any:
    answer = solve(A, b, c)
    judged = reference.solve(np.asarray(A), np.asarray(b, dtype=float).tolist(), np.asarray(c, dtype=float))
    assert_agrees(answer, judged)
    return answer


def judge_invented(case: Invented) -> bool:
    """Compare with the reference to 1e-9; False where the exact doubles are infeasible, which a status
    may say.

    Potentials here reach ten times those of real gases, so the agreement asked for grows with them: 16
    roundings of the largest one times the largest number of atoms.
    """
    from gibbsmin import minimise
    from gibbsmin.minimiser import Status

    answer = minimise(case.formula_matrix, case.element_amounts, case.potentials)
    status = Status(int(answer.status[0]))
    try:
        judged = reference.solve(case.formula_matrix, case.exact_element_amounts, case.potentials)
    except reference.InfeasibleError:
        assert case.kind == "last place" or not case.element_amounts.any(), case.label
        assert status in (Status.SOLVED, Status.INFEASIBLE, Status.EMPTY), f"{case.label}: {status!r}"
        return False
    assert status is Status.SOLVED, f"{case.label}: {status!r}"
    assert answer.gap[0] <= 1e-10 * np.abs(case.element_amounts).sum(), case.label
    assert answer.balance_residual[0] <= 1e-12, case.label
    size = float(np.abs(case.potentials).max() * np.abs(case.formula_matrix).max())
    try:
        assert_agrees(answer, judged, tolerance=max(1e-9, 16 * np.finfo(float).eps * size))
    except AssertionError as error:
        raise AssertionError(f"{case.label}\n{error}") from None
    return True


@pytest.mark.parametrize("largest_spread", [10.0, 1000.0])
def test_invented_problems(largest_spread: float) -> None:
    compared = sum(judge_invented(case) for case in invented_problems(500, 61, largest_spread=largest_spread))
    assert compared > 400


@pytest.mark.slow
def test_many_more_invented_problems() -> None:
    compared = sum(judge_invented(case) for case in invented_problems(10_000, 62))
    assert compared > 8000


@pytest.mark.parametrize(
    ("seed", "index", "largest_spread"),
    [
        (1, 3607, 1e3),  # element totals a unit of the last place off: a singular matrix
        (2, 2222, 1e4),
        (1, 3017, 1e3),  # gap zero, yet no end of steps
        (2, 370, 1e4),
        (2, 386, 1e4),
        (2, 615, 1e4),
        (2, 1178, 1e4),
        (2, 2122, 1e4),
    ],
)
def test_invented_problems_that_failed_once(seed: int, index: int, largest_spread: float) -> None:
    judge_invented(invented_problem(seed, index, largest_spread=largest_spread))


@pytest.mark.parametrize("exponent", [-300, -200, -100, 100, 200, 300])
def test_amounts_of_any_scale(exponent: int) -> None:
    """H2, O2, H2O, OH from 2 H + O scaled by powers of two near 10^exponent: same mole fractions."""
    A = [[2, 0, 2, 1], [0, 2, 1, 1]]
    c = [0.0, 0.0, -30.0, 10.0]
    factor = 2.0 ** round(exponent * np.log2(10))
    expected = check(A, [2.0, 1.0], c)
    answer = solve(A, [2.0 * factor, 1.0 * factor], c)
    np.testing.assert_allclose(answer.log_mole_fractions, expected.log_mole_fractions, rtol=1e-12)
    np.testing.assert_allclose(answer.amounts[0, 2], expected.amounts[0, 2] * factor, rtol=1e-12)


@pytest.mark.parametrize("ratio", [1e-15, 1e-30, 1e-100, 1e-200, 1e-290])
def test_elements_hundreds_of_decades_apart(ratio: float) -> None:
    """An element at any trace level: its species share it as they would if it were alone in the carrier."""
    A = [[2, 0, 2, 1, 0], [0, 2, 1, 1, 0], [0, 0, 0, 0, 1]]
    answer = check(A, [2.0 * ratio, 1.0 * ratio, 1.0], [0.0, 0.0, -30.0, 10.0, 0.0])
    assert answer.amounts[0, 4] == pytest.approx(1.0, rel=1e-15)


def test_the_same_species_listed_twice() -> None:
    """Two identical columns share what one would hold, and the amounts of the others follow the lumped
    potential."""
    A = np.array([[2.0, 0, 2, 1, 2], [0.0, 2, 1, 1, 1]])
    twice = check(A, [2.0, 1.0], [0.0, 0.0, -8.0, 1.0, -8.0])
    once = check(A[:, :4], [2.0, 1.0], [0.0, 0.0, -8.0 - np.log(2.0), 1.0])
    assert twice.amounts[0, 2] == pytest.approx(twice.amounts[0, 4], rel=1e-13)
    assert twice.amounts[0, 2] + twice.amounts[0, 4] == pytest.approx(once.amounts[0, 2], rel=1e-13)


def test_rows_given_twice_or_as_sums() -> None:
    A = np.array([[2.0, 0, 2, 1], [0.0, 2, 1, 1]])
    c = [0.0, 0.0, -8.0, 1.0]
    plain = solve(A, [2.0, 1.0], c)
    more = check(np.vstack([A, A[0], A.sum(axis=0), 2 * A[1]]), [2.0, 1.0, 2.0, 3.0, 2.0], c)
    np.testing.assert_allclose(more.log_mole_fractions, plain.log_mole_fractions, rtol=1e-12)


def test_contradicting_rows_are_infeasible() -> None:
    from gibbsmin import minimise
    from gibbsmin.minimiser import Status

    A = np.array([[2.0, 0, 2, 1], [0.0, 2, 1, 1], [2.0, 0, 2, 1]])
    answer = minimise(A, np.array([2.0, 1.0, 2.1]), np.zeros(4))
    assert answer.status[0] == Status.INFEASIBLE
    assert np.all(np.isnan(answer.amounts))


@pytest.mark.parametrize("b", [[0.0, 1.0], [1.0, -1.0], [-1.0, -1.0]])
def test_amounts_no_list_can_hold_are_infeasible(b: list[float]) -> None:
    """CH4 and C2H4 from hydrogen without carbon, or from negative totals: a status, not an exception."""
    from gibbsmin import minimise
    from gibbsmin.minimiser import Status

    answer = minimise(np.array([[1.0, 2.0], [4.0, 4.0]]), np.array(b), np.zeros(2))
    assert answer.status[0] == Status.INFEASIBLE
    assert np.all(np.isnan(answer.amounts))


def test_fractional_formulas() -> None:
    """Formulas need not be whole numbers: CH1.5 O0.25 as a lumped fuel."""
    A = np.array([[1.0, 1, 1, 0, 0], [1.5, 0, 0, 2, 2], [0.25, 1, 2, 0, 1]])
    check(A, [1.0, 1.5, 1.25], [5.0, -12.0, -20.0, 0.0, -15.0])


@pytest.mark.parametrize("species", [2, 5, 40, 300])
def test_one_element_many_clusters(species: int) -> None:
    """X1 ... Xn of one element, potentials nearly linear in size: all amounts alike, then all in the
    extremes."""
    size = np.arange(1, species + 1, dtype=float)
    for slope, bend in ((0.0, 0.0), (1.0, 1e-3), (-1.0, -1e-3), (3.0, 0.01)):
        check(size[None, :], [1.0], slope * size + bend * size**2)


def test_tie_between_two_stable_assemblages() -> None:
    """Reaction Gibbs energy exactly zero: the linear program without mixing has a whole edge of optima."""
    A = np.array([[1.0, 0, 1, 0], [0.0, 1, 0, 1], [1.0, 0, 0, 1], [0.0, 1, 1, 0]])
    check(A, [1.0, 1.0, 1.0, 1.0], [0.0, 0.0, 0.0, 0.0])
    check([[2, 0, 1], [0, 2, 1]], [1.0, 1.0], [0.0, 0.0, 0.0])


def test_charges_without_a_neutral_species() -> None:
    """A fully ionised gas: only ions and electrons listed, the balance allows no other."""
    A = np.array([[1.0, 1, 0], [1.0, 2, -1]])  # X+, X2+, e-
    check(A, [1.0, 0.0], [0.0, 3.0, 0.0])


def test_negative_ions_hold_all_electrons() -> None:
    """Electron attachment so strong that free electrons are traces of 1e-60."""
    A = np.array([[1.0, 1, 0, 0, 0], [0.0, 0, 1, 1, 0], [0.0, 1, 0, -1, -1]])  # M, M+, X, X-, e-
    check(A, [1.0, 1.0, 0.0], [0.0, 60.0, 0.0, -60.0, 80.0])
    check(A, [1.0, 0.5, 0.0], [0.0, 10.0, 0.0, -300.0, 200.0])
    check(A, [0.5, 1.0, 0.0], [0.0, 300.0, 0.0, -100.0, 200.0])


EXTREME_MATRIX = np.array([[1.0, 2, 0, 1], [0.0, 0, 2, 2]])
EXTREME_POTENTIALS = np.array([0.0, -1.0, -2.0, -30.0])


@pytest.mark.parametrize("size", [1e-320, 1e-310, 1e-200, 1e200, 5e307])
def test_amounts_at_the_ends_of_the_range_of_doubles(size: float) -> None:
    """Warnings count as errors here: nothing overflows on the way, and the composition is that of one mole."""
    answer = solve(EXTREME_MATRIX, [size, size], EXTREME_POTENTIALS)
    one = solve(EXTREME_MATRIX, [1.0, 1.0], EXTREME_POTENTIALS)
    np.testing.assert_allclose(answer.log_mole_fractions, one.log_mole_fractions, rtol=1e-12)
    least = np.nextafter(0.0, 1.0)  # what a subnormal amount can be off by
    np.testing.assert_allclose(answer.amounts, one.amounts * size, rtol=1e-12, atol=least)
    assert (answer.gap <= 1e-10 * 2.0 * size + least).all()


def test_extreme_exact_amounts_beside_ordinary_ones() -> None:
    from gibbsmin import minimise

    tiny = Fraction(1, 10**200)
    amounts = np.array([[tiny, 2 * tiny], [Fraction(1), Fraction(2)]], dtype=object)
    answer = minimise(EXTREME_MATRIX, amounts, EXTREME_POTENTIALS)
    assert (answer.status == 0).all()
    np.testing.assert_allclose(answer.log_mole_fractions[0], answer.log_mole_fractions[1], rtol=1e-12)


def test_complex_numbers_are_refused() -> None:
    from gibbsmin import minimise
    from gibbsmin.errors import ProblemError

    with pytest.raises(ProblemError, match="real"):
        minimise(EXTREME_MATRIX, np.array([1.0 + 1.0j, 2.0]), EXTREME_POTENTIALS)
