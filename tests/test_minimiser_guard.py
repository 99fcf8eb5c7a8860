"""What the iteration promises in its docstring: every step descends, and the nested form alone solves everything."""

from __future__ import annotations

from typing import Any

import mpmath
import numpy as np
import pytest

from gibbsmin.minimiser import Status, minimise, newton
from gibbsmin.minimiser.components import formula_system
from tests.population import problems

CASES = list(problems(150, 4711, most_species=40))


def test_nested_form_alone_solves_the_population(monkeypatch: pytest.MonkeyPatch) -> None:
    joint = [minimise(case.formula_matrix, case.element_amounts, case.potentials) for case in CASES]
    monkeypatch.setattr(newton, "JOINT_STEPS", 0)
    for case, known in zip(CASES, joint, strict=True):
        nested = minimise(case.formula_matrix, case.element_amounts, case.potentials)
        assert nested.status[0] == Status.SOLVED, case.label
        finite = np.isfinite(known.log_mole_fractions)
        assert (np.isfinite(nested.log_mole_fractions) == finite).all()
        size = np.maximum(1.0, np.abs(known.log_mole_fractions[finite]).max(initial=1.0))
        difference = np.abs(nested.log_mole_fractions[finite] - known.log_mole_fractions[finite])
        assert difference.max() <= 1e-10 * size, case.label


def phi(system: Any, m: Any, offsets: Any, total: float, log_y: Any) -> Any:
    """phi(lambda) = N sum y - m.lambda of newton.py, in 60 digits."""
    C = system.C
    with mpmath.workdps(60):
        value = mpmath.mpf(0)
        for j in range(C.shape[1]):
            exponent = -mpmath.mpf(float(offsets[j]))
            for i in range(C.shape[0]):
                exponent += mpmath.mpf(float(C[i, j])) * mpmath.mpf(float(log_y[i]))
            value += mpmath.mpf(total) * mpmath.exp(exponent)
        for amount, each in zip(m, log_y, strict=True):
            value -= mpmath.mpf(float(amount)) * mpmath.mpf(float(each))
        return value


def test_every_guarded_step_descends_from_wild_starts() -> None:
    """Steps at fixed N from starts off by up to 40 in ln y: phi falls at each, judged in 60 digits."""
    A = np.array([[4, 2, 0, 2, 0, 0, 1], [1, 0, 1, 0, 1, 0, 0], [0, 1, 1, 0, 2, 2, 1]], dtype=float)
    c = np.array([[-20.0, -40.0, -28.0, -18.0, -55.0, -27.0, -10.0]])
    b = np.array([[10.0, 1.0, 3.0]])
    system = formula_system(A)
    first = system.components([1, 2, 3])
    rng = np.random.default_rng(3)
    falls = 0
    for _ in range(200):
        log_all = rng.uniform(-40, 3, (1, 3)) @ first.C - first.offsets(c)
        components = first.adapted(log_all[0])
        m, log_y = components.amounts(b), log_all[:, components.columns]
        batch = newton.Batch.begin(components, np.array([0]), m, log_y, np.array([6.0]), c)
        batch.steps[:] = newton.JOINT_STEPS  # nested form: N stays while the balances do not hold
        for _ in range(6):
            log_all = batch.log_mole_fractions()
            with np.errstate(all="ignore"):
                sums = newton.sums_over_species(components, log_all.copy())
                before = phi(
                    components, m[0], batch.offsets[0], float(np.exp(batch.log_total[0])), batch.log_y[0]
                )
                old = (batch.log_y.copy(), batch.log_total.copy())
                newton._step(batch, sums, log_all)
            if batch.log_total[0] != old[1][0]:
                break
            after = phi(components, m[0], batch.offsets[0], float(np.exp(batch.log_total[0])), batch.log_y[0])
            moved = np.abs(batch.log_y - old[0]).max()
            if moved > 1e-9:
                assert after < before
                falls += 1
    assert falls > 500
