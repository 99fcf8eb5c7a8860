"""The certificate is a bound: never below the true excess of the Gibbs energy, whatever amounts it is
shown.

The true excess of a perturbed composition is taken over the minimum for that composition's own element
totals, both in extended precision and with the doubles taken exactly, so the perturbations need not be
feasible to rounding.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
import pytest

from tests import reference
from tests.population import Problem, problems

# the certificate is itself a sum of doubles: rounding of its largest term, not a tolerance on the bound
ROUNDING = 64 * np.finfo(float).eps


def bound(case: Problem, amounts: np.ndarray, element_potentials: np.ndarray) -> float:
    from gibbsmin.minimiser.certificate import optimality_gap

    totals = case.formula_matrix @ amounts
    gap = optimality_gap(case.formula_matrix, totals, case.potentials, amounts, element_potentials)
    return float(np.ravel(gap)[0])


def solved(count: int, seed: int, **options: Any) -> Iterator[tuple[Problem, Any]]:
    from gibbsmin import minimise

    for case in problems(count, seed, **options):
        if case.kind != "rounded":
            yield case, minimise(case.formula_matrix, case.element_amounts, case.potentials)


def moved(case: Problem, amounts: np.ndarray, size: float, rng: np.random.Generator) -> np.ndarray | None:
    """Amounts moved along a random combination of reactions by the part `size` of the way to the boundary."""
    present = amounts > 1e-280
    A = case.formula_matrix[:, present]
    _, values, right = np.linalg.svd(A)
    rank = int(np.sum(values > 1e-9 * values[0]))
    reactions = right[rank:]
    if len(reactions) == 0:
        return None
    step = rng.normal(size=len(reactions)) @ reactions
    step[np.abs(step) < 1e-12] = 0.0
    n = amounts[present]
    falling = step < 0
    if not falling.any():
        return None
    n = np.maximum(n + size * np.min(-n[falling] / step[falling]) * step, 0.0)
    result = np.zeros_like(amounts)
    result[present] = n
    return result


def scale(case: Problem, amounts: np.ndarray) -> float:
    present = amounts > 0
    log_x = np.log(amounts[present] / amounts.sum())
    return float(np.sum(amounts[present] * (np.abs(case.potentials[present]) + np.abs(log_x))))


@pytest.mark.parametrize("size", [1e-6, 1e-3, 0.1, 0.9, 1.0])
def test_bound_is_never_below_the_true_excess(size: float) -> None:
    """Perturbed amounts with the potentials of the optimum: the bound holds, and is not idle."""
    rng = np.random.default_rng(int(1e6 * size))
    compared = sharp = 0
    for case, answer in solved(150, 51, most_species=40):
        amounts = moved(case, answer.amounts[0], size, rng)
        if amounts is None:
            continue
        true = reference.excess(case.formula_matrix, case.potentials, amounts)
        claimed = bound(case, amounts, answer.element_potentials[0])
        room = ROUNDING * scale(case, amounts)
        assert claimed >= true - room, f"{case.label}: {claimed:.3e} below {true:.3e}"
        compared += 1
        sharp += claimed <= 1.001 * true + 1e-11 * case.element_amounts.sum()
    assert compared > 60
    assert sharp > 0.9 * compared  # a bound from the optimum's own potentials is the excess itself


@pytest.mark.parametrize("noise", [1e-9, 1e-3, 1.0, 30.0])
def test_bound_holds_for_any_element_potentials(noise: float) -> None:
    """Weak duality asks nothing of the potentials: wrong ones only make the bound loose."""
    rng = np.random.default_rng(int(1e9 * noise))
    compared = 0
    for case, answer in solved(100, 52, most_species=40):
        amounts = answer.amounts[0]
        wrong = answer.element_potentials[0] + noise * rng.normal(size=len(case.element_amounts))
        true = reference.excess(case.formula_matrix, case.potentials, amounts)
        claimed = bound(case, amounts, wrong)
        assert claimed >= true - ROUNDING * scale(case, amounts), case.label
        compared += 1
    assert compared > 60


def test_feed_is_never_certified_as_the_answer() -> None:
    """Amounts far from equilibrium, here all present species in equal amounts, get a gap that says so."""
    compared = 0
    for case, answer in solved(100, 53, most_species=40):
        amounts = np.where(np.isfinite(answer.log_mole_fractions[0]), 1.0, 0.0)
        if "charge" in case.elements:
            continue
        true = reference.excess(case.formula_matrix, case.potentials, amounts)
        if true < 1e-6:
            continue
        for potentials in (answer.element_potentials[0], np.zeros(len(case.element_amounts))):
            claimed = bound(case, amounts, potentials)
            assert claimed >= true - ROUNDING * scale(case, amounts), case.label
        compared += 1
    assert compared > 40


def test_gap_of_the_answers_covers_their_true_excess() -> None:
    """The gap that comes with an answer, against the excess of its amounts over the exact minimum."""
    for case, answer in solved(200, 54, most_species=60):
        true = reference.excess(case.formula_matrix, case.potentials, answer.amounts[0])
        assert true <= 1e-10 * case.element_amounts.sum(), case.label
        assert answer.gap[0] >= true - ROUNDING * scale(case, answer.amounts[0]), case.label
        assert answer.gap[0] >= 0
