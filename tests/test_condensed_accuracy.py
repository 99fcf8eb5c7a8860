"""Gas traces above 1e-200 within 1e-9, phases within 1e-10 of the feed, of an extended-precision proof.

The doubles handed to the minimiser are taken exactly by the judge, and every optimality condition is verified with
at least 100 digits: amounts, activities of all absent phases, balance, and the gas that would form where none is.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from tests import condensed_reference
from tests.condensed_population import Posed, Problem, problems
from tests.condensed_reference import Equilibrium


def judged(case: Posed, candidate: Any = None) -> Equilibrium:
    return condensed_reference.solve(
        case.formula_matrix, case.element_amounts.tolist(), case.potentials, case.condensed, candidate
    )


def judge_problem(case: Problem) -> Equilibrium:
    answer = case.solve()
    assert answer.status[0] == 0, case.label
    try:
        truth = judged(case, answer)
        condensed_reference.assert_agrees(answer, truth, case.condensed, case.feed_size)
    except AssertionError as error:
        raise AssertionError(f"{case.label}\n{error}") from None
    return truth


@pytest.mark.parametrize("seed", [31, 32])
def test_lists_up_to_60_gases(seed: int) -> None:
    truths = [judge_problem(case) for case in problems(200, seed, most_gases=60)]
    assert sum(bool(truth.phases) for truth in truths) > 100
    assert sum(not truth.has_gas for truth in truths) > 20
    assert max(len(truth.phases) for truth in truths) >= 4
    assert all(truth.sets_tried == 1 for truth in truths)  # the very phases of the answer


def test_lists_up_to_160_gases() -> None:
    for case in problems(80, seed=33):
        judge_problem(case)


@pytest.mark.slow
def test_many_more() -> None:
    for case in problems(5000, seed=4):
        judge_problem(case)


def test_judge_without_a_candidate_comes_to_the_same() -> None:
    """From the linear program alone, so that nothing of the answer enters. A few problems need a candidate."""
    alone = 0
    for case in problems(150, seed=36, most_gases=40):
        answer = case.solve()
        try:
            truth = judged(case)
        except condensed_reference.UnprovedError:
            continue
        condensed_reference.assert_agrees(answer, truth, case.condensed, case.feed_size)
        alone += 1
    assert alone >= 145


# ------------------------------------------------------------------------------------- the judge, judged


def test_judge_finds_the_phases_from_a_wrong_candidate() -> None:
    """Candidates that lack the present phase, or claim an absent one: the same proof in the end, or none."""
    found = refused = 0
    for case in problems(80, seed=34, most_gases=30):
        answer = case.solve()
        truth = judged(case, answer)
        if not truth.has_gas:
            continue
        phases = np.flatnonzero(case.condensed & np.isfinite(answer.log_mole_fractions[0]))
        for k in phases[:3]:
            spoilt = case.solve()
            spoilt.amounts[0, k] = 0.0 if answer.amounts[0, k] > 0.0 else 0.1 * case.feed_size
            try:
                again = judged(case, spoilt)
            except condensed_reference.UnprovedError:
                refused += 1
                continue
            assert again.phases == truth.phases, case.label
            np.testing.assert_allclose(
                again.amounts, truth.amounts, rtol=1e-14, atol=1e-300, err_msg=case.label
            )
            found += again.sets_tried > 1
    assert found > 50
    assert refused < found / 10


def test_judge_against_closed_forms() -> None:
    """A2 = 2 A over a phase A of ln K = 0, with inert B: x(A) = exp(g), x(A2) = x(A)^2, the rest from the balance."""
    from tests.test_condensed_named_cases import invented

    g = -1.3
    case = invented("A A2 B", "A", [0.0, 0.0, 0.0, g], {"A": 3.0, "B": 1.0})
    truth = judged(case, case.solve())
    x = np.exp(g)
    total = 1.0 / (1.0 - x - x * x)
    expected = [total * x, total * x * x, 1.0, 3.0 - total * (x + 2 * x * x)]
    np.testing.assert_allclose(truth.amounts, expected, rtol=1e-13)
    np.testing.assert_allclose(
        truth.log_activities, [g, 2 * g, np.log(1.0 / total), 0.0], rtol=1e-13, atol=1e-15
    )
    assert truth.phases == (3,)


def test_judge_of_phases_alone() -> None:
    """B left over in A B + B; the gas B would stand at exp(-2), and A B fixes A."""
    from tests.test_condensed_named_cases import invented

    case = invented("B A", "B AB", [0.0, 0.0, -2.0, -5.0], {"A": 1.0, "B": 3.0})
    truth = judged(case, case.solve())
    np.testing.assert_array_equal(truth.amounts, [0.0, 0.0, 2.0, 1.0])
    np.testing.assert_allclose(truth.log_activities, [-2.0, -3.0, 0.0, 0.0], atol=1e-15)
    assert truth.unique.all()
    assert not truth.has_gas


def test_judge_does_not_believe_a_candidate() -> None:
    """No gas, where the phase's own vapour stands above the pressure: all of it evaporates."""
    from tests.test_condensed_named_cases import invented

    case = invented("A", "A", [0.0, 0.5], {"A": 1.0})
    wrong = case.solve()
    wrong.amounts[0] = [0.0, 1.0]
    wrong.log_mole_fractions[0] = [0.5, 0.0]
    truth = judged(case, wrong)
    np.testing.assert_array_equal(truth.amounts, [1.0, 0.0])
    np.testing.assert_allclose(truth.log_activities, [0.0, -0.5], atol=1e-15)
    with pytest.raises(AssertionError):
        condensed_reference.assert_agrees(wrong, truth, case.condensed, case.feed_size)
