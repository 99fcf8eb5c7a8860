"""The answer depends on element totals and potentials alone.

Measure: |d ln x_j| for every species, against 1e-12 times max(1, |ln x_j|, largest |c|).  Beyond that two
doubles cannot agree: ln x_j = a_j . pi - c_j is itself a difference of terms of the size of c, so one
rounding of c, which the reference sees as another problem, moves it by as much.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from tests.population import Problem, problems

TOLERANCE = 1e-12


def solve(A: np.ndarray, b: np.ndarray, c: np.ndarray) -> Any:
    from gibbsmin import minimise
    from gibbsmin.minimiser import Status

    answer = minimise(A, b, c)
    assert np.all(answer.status == Status.SOLVED)
    return answer


def sample(seed: int, count: int = 120) -> list[Problem]:
    return [case for case in problems(count, seed, most_species=80) if case.kind != "rounded"]


def assert_same(first: np.ndarray, second: np.ndarray, c: np.ndarray, label: str) -> None:
    np.testing.assert_array_equal(np.isneginf(first), np.isneginf(second), err_msg=label)
    kept = np.isfinite(first)
    scale = np.maximum(np.abs(first[kept]), max(1.0, float(np.abs(c).max())))
    error = np.abs(first[kept] - second[kept]) / scale
    assert error.max() <= TOLERANCE, f"{label}: {error.max():.1e}"
    majors = first[kept] > np.log(1e-6)
    difference = np.abs(np.expm1(first[kept] - second[kept]))[majors]
    assert difference.max() <= TOLERANCE * max(1.0, np.abs(c).max()), label


def test_order_of_species() -> None:
    rng = np.random.default_rng(1)
    for case in sample(21):
        order = rng.permutation(len(case.potentials))
        first = solve(case.formula_matrix, case.element_amounts, case.potentials)
        second = solve(case.formula_matrix[:, order], case.element_amounts, case.potentials[order])
        assert_same(
            first.log_mole_fractions[0, order], second.log_mole_fractions[0], case.potentials, case.label
        )


def test_order_of_elements() -> None:
    rng = np.random.default_rng(2)
    for case in sample(22):
        order = rng.permutation(len(case.element_amounts))
        first = solve(case.formula_matrix, case.element_amounts, case.potentials)
        second = solve(case.formula_matrix[order], case.element_amounts[order], case.potentials)
        assert_same(first.log_mole_fractions[0], second.log_mole_fractions[0], case.potentials, case.label)


@pytest.mark.parametrize("factor", [2.0**-60, 2.0**-20, 4.0, 2.0**40])
def test_scale_of_the_feed(factor: float) -> None:
    for case in sample(23, 60):
        first = solve(case.formula_matrix, case.element_amounts, case.potentials)
        second = solve(case.formula_matrix, case.element_amounts * factor, case.potentials)
        assert_same(first.log_mole_fractions[0], second.log_mole_fractions[0], case.potentials, case.label)
        np.testing.assert_allclose(
            second.amounts[0].sum(), factor * first.amounts[0].sum(), rtol=1e-12, err_msg=case.label
        )


def test_repeated_call_gives_the_same_bits() -> None:
    cases = sample(24, 40)
    first = [solve(case.formula_matrix, case.element_amounts, case.potentials) for case in cases]
    for case, before in zip(reversed(cases), reversed(first), strict=True):
        again = solve(case.formula_matrix, case.element_amounts, case.potentials)
        np.testing.assert_array_equal(before.amounts, again.amounts)
        np.testing.assert_array_equal(before.log_mole_fractions, again.log_mole_fractions)


def test_inputs_are_left_alone() -> None:
    for case in sample(25, 20):
        A, b, c = case.formula_matrix.copy(), case.element_amounts.copy(), case.potentials.copy()
        solve(A, b, c)
        np.testing.assert_array_equal(A, case.formula_matrix)
        np.testing.assert_array_equal(b, case.element_amounts)
        np.testing.assert_array_equal(c, case.potentials)


def test_feed_split_into_parts_or_fed_as_other_species() -> None:
    """Element totals of n and of the equilibrium amounts of n (exact to rounding) give the same majors."""
    for case in problems(200, seed=26, most_species=60):
        if case.kind != "dense" or "charge" in case.elements:
            continue
        first = solve(case.formula_matrix, case.element_amounts, case.potentials)
        totals = case.formula_matrix @ first.amounts[0]
        second = solve(case.formula_matrix, totals, case.potentials)
        majors = first.log_mole_fractions[0] > np.log(1e-3)
        np.testing.assert_allclose(
            second.amounts[0, majors], first.amounts[0, majors], rtol=1e-9, err_msg=case.label
        )


def test_element_of_zero_amount_equals_leaving_it_out() -> None:
    compared = 0
    for case in sample(27, 200):
        absent = case.element_amounts == 0
        absent &= np.all(case.formula_matrix >= 0, axis=1)  # not the charge row
        gone = case.formula_matrix[absent].any(axis=0)
        if not gone.any() or gone.all():
            continue
        first = solve(case.formula_matrix, case.element_amounts, case.potentials)
        second = solve(
            case.formula_matrix[~absent][:, ~gone], case.element_amounts[~absent], case.potentials[~gone]
        )
        assert np.all(first.amounts[0, gone] == 0)
        assert_same(
            first.log_mole_fractions[0, ~gone],
            second.log_mole_fractions[0],
            case.potentials[~gone],
            case.label,
        )
        compared += 1
    assert compared > 40


def test_potentials_measured_from_other_reference_states() -> None:
    """c_j + a_j . s for any s: other zero points of the elements, the same composition."""
    rng = np.random.default_rng(3)
    for case in sample(28, 60):
        shift = rng.integers(-64, 65, len(case.element_amounts)).astype(float)
        moved = case.potentials + shift @ case.formula_matrix
        first = solve(case.formula_matrix, case.element_amounts, case.potentials)
        second = solve(case.formula_matrix, case.element_amounts, moved)
        largest = np.array([max(np.abs(moved).max(), np.abs(case.potentials).max())])
        assert_same(first.log_mole_fractions[0], second.log_mole_fractions[0], largest, case.label)


def batch(case: Problem, count: int, seed: int) -> tuple[np.ndarray, np.ndarray]:
    """Element amounts and potentials of `count` neighbours: other pressures, other temperatures in the
    small."""
    rng = np.random.default_rng(seed)
    log_pressure = rng.uniform(-8, 8, count)
    tilt = rng.normal(0, 2.0, (count, 1)) * np.linspace(-1, 1, len(case.potentials))
    b = case.element_amounts * 2.0 ** rng.integers(-5, 6, count)[:, None]
    return b, case.potentials + log_pressure[:, None] + tilt


def test_batches_equal_single_points_in_any_order() -> None:
    for number, case in enumerate(sample(29, 24)):
        b, c = batch(case, 16, number)
        together = solve(case.formula_matrix, b, c)
        order = np.random.default_rng(number).permutation(16)
        shuffled = solve(case.formula_matrix, b[order], c[order])
        half = solve(case.formula_matrix, b[:5], c[:5])
        for k in range(16):
            label = f"{case.label}, point {k}"
            alone = solve(case.formula_matrix, b[k], c[k])
            assert_same(together.log_mole_fractions[k], alone.log_mole_fractions[0], c[k], label)
            place = int(np.flatnonzero(order == k)[0])
            assert_same(together.log_mole_fractions[k], shuffled.log_mole_fractions[place], c[k], label)
            if k < 5:
                assert_same(together.log_mole_fractions[k], half.log_mole_fractions[k], c[k], label)


def test_one_feed_for_many_potentials_equals_the_feed_repeated() -> None:
    for number, case in enumerate(sample(30, 12)):
        _, c = batch(case, 8, number)
        shared = solve(case.formula_matrix, case.element_amounts, c)
        repeated = solve(case.formula_matrix, np.tile(case.element_amounts, (8, 1)), c)
        for k in range(8):
            assert_same(shared.log_mole_fractions[k], repeated.log_mole_fractions[k], c[k], case.label)


def test_one_bad_point_does_not_spoil_its_neighbours() -> None:
    """NaN potentials and an infeasible feed in a batch: their own status, NaN values, the others as alone."""
    from gibbsmin import minimise
    from gibbsmin.minimiser import Status

    A = np.array([[2.0, 0.0, 2.0, 1.0], [0.0, 2.0, 1.0, 1.0]])
    c = np.tile([0.0, 0.0, -30.0, 10.0], (4, 1))
    c[1, 2] = np.nan
    b = np.array([[2.0, 1.0], [2.0, 1.0], [2.0, -1.0], [2.0, 1.0]])
    answer = minimise(A, b, c)
    assert answer.status[0] == answer.status[3] == Status.SOLVED
    assert answer.status[1] != Status.SOLVED
    assert answer.status[2] != Status.SOLVED
    assert np.all(np.isnan(answer.amounts[1:3]))
    assert np.all(np.isnan(answer.log_mole_fractions[1:3]))
    alone = solve(A, b[0], c[0])
    np.testing.assert_allclose(answer.amounts[[0, 3]], np.tile(alone.amounts[0], (2, 1)), rtol=1e-12)
