"""The judge judged: the extended-precision reference against algebra, mpmath and its own claims."""

from __future__ import annotations

from fractions import Fraction

import mpmath
import numpy as np
import pytest

from tests import reference
from tests.population import problems


def reactions(A: np.ndarray) -> list[list[Fraction]]:
    """A basis of {v: A v = 0} in exact rationals (Gauss-Jordan)."""
    rows = [[Fraction(float(v)) for v in row] for row in A]
    pivots: list[int] = []
    for column in range(A.shape[1]):
        rank = len(pivots)
        lead = next((i for i in range(rank, len(rows)) if rows[i][column]), None)
        if lead is None:
            continue
        rows[rank], rows[lead] = rows[lead], rows[rank]
        rows[rank] = [v / rows[rank][column] for v in rows[rank]]
        for i in range(len(rows)):
            if i != rank and rows[i][column]:
                factor = rows[i][column]
                rows[i] = [v - factor * w for v, w in zip(rows[i], rows[rank], strict=True)]
        pivots.append(column)
    vectors = []
    for free in (j for j in range(A.shape[1]) if j not in pivots):
        vector = [Fraction(0)] * A.shape[1]
        vector[free] = Fraction(1)
        for i, column in enumerate(pivots):
            vector[column] = -rows[i][free]
        vectors.append(vector)
    return vectors


def test_answers_satisfy_the_conditions_in_mpmath() -> None:
    """Element balance, and sum v_j (c_j + ln x_j) = 0 for a full set of reactions: no affinity above
    1e-90."""
    checked = 0
    for case in problems(60, seed=41, most_species=40):
        judged = reference.solve(case.formula_matrix, case.exact_element_amounts, case.potentials)
        kept = np.flatnonzero(~judged.excluded)
        with mpmath.workdps(400):
            log_n = [mpmath.mpf(str(judged.exact_log_amounts[j])) for j in kept]
            n = [mpmath.exp(v) for v in log_n]
            log_total = mpmath.log(mpmath.fsum(n))
            for row, b in zip(case.formula_matrix[:, kept], case.element_amounts, strict=True):
                terms = [int(a) * v for a, v in zip(row, n, strict=True)]
                error = abs(mpmath.fsum(terms) - mpmath.mpf(float(b)))
                assert error <= mpmath.mpf(10) ** -100 * (abs(float(b)) + mpmath.fsum(abs(v) for v in terms))
            potential = [
                mpmath.mpf(float(c)) + v - log_total
                for c, v in zip(case.potentials[kept], log_n, strict=True)
            ]
            for vector in reactions(case.formula_matrix[:, kept]):
                affinity = mpmath.fsum(
                    mpmath.mpf(v.numerator) / v.denominator * mu
                    for v, mu in zip(vector, potential, strict=True)
                    if v
                )
                assert abs(affinity) < mpmath.mpf(10) ** -90
                checked += 1
    assert checked > 200


def test_more_digits_change_nothing() -> None:
    for case in problems(25, seed=42, most_species=40):
        arguments = (case.formula_matrix, case.exact_element_amounts, case.potentials)
        at_120, at_400 = reference.solve(*arguments), reference.solve(*arguments, digits=400)
        assert at_400.digits >= 400
        for short, long in zip(at_120.exact_log_amounts, at_400.exact_log_amounts, strict=True):
            assert (short is None) == (long is None)
            if short is not None:
                assert abs(float(short - long)) < 1e-90


def test_dissociation_in_closed_form() -> None:
    """A2 = 2 A with K/p = 1e-300: 2 e with e = sqrt(K / (4 + K)), to 100 digits."""
    with mpmath.workdps(150):
        # a double for ln K, as the solver takes it exactly
        half = 345.38776394910684
        k = mpmath.exp(-2 * mpmath.mpf(half))
        expected = mpmath.log(2 * mpmath.sqrt(k / (4 + k)))
        judged = reference.solve([[2, 1]], [2], [0.0, half])
        assert abs(mpmath.mpf(str(judged.exact_log_amounts[1])) - expected) < mpmath.mpf(10) ** -100


def test_excluded_species_and_redundant_rows() -> None:
    """C4H8 alone with C7H7 and CH4 listed: nothing can balance C7H7 but CH4, and both rows say the same
    of C4H8."""
    A = [[4, 7, 4], [8, 7, 8]]  # C4H8, C7H7, C4H8 (isomer)
    judged = reference.solve(A, [4, 8], [0.0, -50.0, 1.0])
    assert judged.excluded.tolist() == [False, True, False]
    np.testing.assert_allclose(judged.amounts[0] / judged.amounts[2], np.exp(1.0), rtol=1e-14)
    with_hydrogen = reference.solve([[4, 7, 1], [8, 7, 4]], [4, 8], [0.0, -50.0, 1.0])
    assert not with_hydrogen.excluded.any()


def test_infeasible_amounts_are_refused() -> None:
    with pytest.raises(reference.InfeasibleError):
        reference.solve([[1, 1], [2, 4]], [1, 5], [0.0, 0.0])
    with pytest.raises(reference.InfeasibleError):
        reference.solve([[1], [2]], [1, Fraction(20000000001, 10**10)], [0.0])
    with pytest.raises(reference.InfeasibleError):
        reference.solve([[1, 1], [2, 4]], [0, 0], [0.0, 0.0])


def test_support_by_rational_arithmetic() -> None:
    np.testing.assert_array_equal(
        reference.support([[1, 1, 0], [0, 1, 2], [1, 0, 1]], [1, 0, 1]), [True, False, False]
    )
