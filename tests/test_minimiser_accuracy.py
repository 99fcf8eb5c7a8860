"""Every mole fraction above 1e-200 within 1e-9 of an extended-precision solution of the very same doubles.

The potentials and element amounts handed to the minimiser are taken exactly by the reference, so that
traces are well posed even where rounding of a feed would decide them: the rounded feed is the problem.
"""

from __future__ import annotations

import numpy as np
import pytest

from tests import reference
from tests.gas_cases import assert_agrees
from tests.population import Problem, problems


def judge_problem(case: Problem) -> bool:
    """Compare one problem; False where the exact doubles are infeasible (rounded totals on a boundary)."""
    from gibbsmin import minimise
    from gibbsmin.minimiser import Status

    try:
        judged = reference.solve(case.formula_matrix, case.exact_element_amounts, case.potentials)
    except reference.InfeasibleError:
        assert case.kind == "rounded", case.label
        return False
    answer = minimise(case.formula_matrix, case.element_amounts, case.potentials)
    assert answer.status[0] == Status.SOLVED, case.label
    try:
        assert_agrees(answer, judged)
    except AssertionError as error:
        raise AssertionError(
            f"{case.label}, {case.temperature:.1f} K, {case.pressure:.2e} bar\n{error}"
        ) from None
    return True


@pytest.mark.parametrize("seed", [11, 12, 13])
def test_traces_of_lists_up_to_60_species(seed: int) -> None:
    compared = sum(judge_problem(case) for case in problems(300, seed, most_species=60))
    assert compared > 290


def test_traces_of_lists_up_to_300_species() -> None:
    compared = sum(judge_problem(case) for case in problems(60, seed=14))
    assert compared > 55


@pytest.mark.slow
def test_traces_of_many_more() -> None:
    compared = sum(judge_problem(case) for case in problems(5000, seed=15))
    assert compared > 4900


def test_traces_below_1e_200_keep_their_logarithm() -> None:
    """Amounts may underflow; ln x does not: to 1e-9 absolute for every species that the balance allows."""
    from gibbsmin import minimise

    smallest = 0.0
    for case in problems(100, seed=16, most_species=60):
        if case.temperature > 500 or case.kind == "rounded":
            continue
        judged = reference.solve(case.formula_matrix, case.exact_element_amounts, case.potentials)
        answer = minimise(case.formula_matrix, case.element_amounts, case.potentials)
        kept = ~judged.excluded
        np.testing.assert_allclose(
            answer.log_mole_fractions[0, kept],
            judged.log_mole_fractions[kept],
            rtol=1e-12,
            atol=1e-9,
            err_msg=case.label,
        )
        smallest = min(smallest, float(judged.log_mole_fractions[kept].min()))
    assert smallest < np.log(1e-250)  # the sample did reach there


def test_element_potentials_reproduce_the_composition() -> None:
    """ln x_j = a_j . pi - c_j with the potentials handed back, wherever they are all determined."""
    from gibbsmin import minimise

    checked = 0
    for case in problems(200, seed=17, most_species=60):
        answer = minimise(case.formula_matrix, case.element_amounts, case.potentials)
        pi, log_x = answer.element_potentials[0], answer.log_mole_fractions[0]
        determined = np.isfinite(pi)
        present = np.isfinite(log_x) & ~case.formula_matrix[~determined].any(axis=0)
        terms = case.formula_matrix[determined][:, present] * pi[determined, None]
        scale = np.abs(terms).sum(axis=0) + np.abs(case.potentials[present]) + 1
        error = np.abs(terms.sum(axis=0) - case.potentials[present] - log_x[present])
        assert np.all(error <= 1e-12 * scale), case.label
        checked += int(present.sum())
    assert checked > 1000
