"""The minimiser against problems with an algebraic solution.  Potentials are invented; the algebra is
exact."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

TOLERANCE = 1e-13


def solved(A: Any, b: Any, c: Any) -> Any:
    from gibbsmin import minimise
    from gibbsmin.minimiser import Status

    answer = minimise(np.array(A, dtype=float), np.array(b, dtype=float), np.array(c, dtype=float))
    assert np.all(answer.status == Status.SOLVED)
    return answer


@pytest.mark.parametrize("log_k", [-700.0, -40.0, -3.0, 0.0, 0.5, 3.0, 40.0, 700.0])
def test_isomerisation_splits_by_its_constant(log_k: float) -> None:
    """A = B: x_B / x_A = K, whatever the pressure."""
    for log_pressure in (-20.0, 0.0, 9.0):
        answer = solved([[1, 1]], [2.0], np.array([0.0, -log_k]) + log_pressure)
        x = answer.log_mole_fractions[0]
        assert x[1] - x[0] == pytest.approx(log_k, abs=1e-12 * max(1.0, abs(log_k)))
        assert answer.amounts[0].sum() == pytest.approx(2.0, rel=TOLERANCE)


def dissociated(k_over_p: float) -> float:
    """Extent of A2 = 2 A per mole of A2: K/p = 4 e^2 / (1 - e^2)."""
    return float(np.sqrt(k_over_p / (4 + k_over_p)))


@pytest.mark.parametrize("log_k", [-200.0, -60.0, -10.0, -1.0, 0.0, 2.0, 12.0, 30.0])
@pytest.mark.parametrize("log_pressure", [-18.0, 0.0, 9.0])
def test_dissociation(log_k: float, log_pressure: float) -> None:
    """A2 = 2 A: both amounts to rounding, whichever is the trace."""
    answer = solved([[2, 1]], [2.0], np.array([0.0, -log_k / 2]) + log_pressure)
    ratio = np.exp(log_k - log_pressure)
    extent = dissociated(ratio)
    rest = 4 / (4 + ratio) / (1 + extent)  # 1 - extent, without its cancellation
    assert answer.amounts[0, 1] == pytest.approx(2 * extent, rel=1e-12)
    assert answer.amounts[0, 0] == pytest.approx(rest, rel=1e-12)


@pytest.mark.parametrize("inert", [1e-9, 0.3, 1.0, 50.0, 1e9])
def test_inert_dilution_acts_as_lower_pressure(inert: float) -> None:
    """A2 = 2 A in an inert gas: K/p = 4 e^2 / ((1 - e)(1 + e + inert))."""
    k = 0.7
    answer = solved([[2, 1, 0], [0, 0, 1]], [2.0, inert], [0.0, -np.log(k) / 2, 0.4])
    a, b, c = 4 + k, k * inert, -k * (1 + inert)
    extent = 2 * -c / (b + np.sqrt(b * b - 4 * a * c))
    assert answer.amounts[0, 1] == pytest.approx(2 * extent, rel=1e-12)
    assert answer.amounts[0, 2] == pytest.approx(inert, rel=1e-13)
    assert answer.log_mole_fractions[0, 2] == pytest.approx(
        np.log(inert / (1 + extent + inert)), rel=1e-12, abs=1e-13
    )


def test_pressure_shifts_dissociation_back() -> None:
    """A hundred pressures in one call against the closed form; the extent falls without exception."""
    log_pressure = np.linspace(-18.4, 9.2, 100)
    answer = solved([[2, 1]], [2.0], np.array([0.0, -0.5]) + log_pressure[:, None])
    expected = [2 * dissociated(float(np.exp(1.0 - value))) for value in log_pressure]
    np.testing.assert_allclose(answer.amounts[:, 1], expected, rtol=1e-12)
    assert np.all(np.diff(answer.amounts[:, 1]) < 0)


def test_pressure_leaves_equimolar_reactions_alone() -> None:
    """CO + H2O = CO2 + H2 with K = 2 from equal amounts: e/(1 - e) = sqrt(K) at every pressure."""
    A = [[1, 0, 1, 0], [1, 1, 2, 0], [0, 2, 0, 2]]
    c = np.array([0.0, 0.0, -np.log(2.0), 0.0])
    answer = solved(A, [1, 2, 2], c + np.linspace(-18, 9, 28)[:, None])
    extent = np.sqrt(2) / (1 + np.sqrt(2))
    np.testing.assert_allclose(
        answer.amounts, np.tile([1 - extent, 1 - extent, extent, extent], (28, 1)), rtol=1e-13
    )


@pytest.mark.parametrize("spread", [0.1, 5.0, 100.0, 500.0])
def test_isomers_split_by_boltzmann_factors(spread: float) -> None:
    """Three isomers: x_j = exp(-c_j) / sum exp(-c)."""
    c = np.array([-3.0, -3.0 + spread, -3.0 + 2 * spread])
    answer = solved([[4, 4, 4], [8, 8, 8]], [4.0, 8.0], c)
    expected = -(c - c[0]) - np.log(np.exp(-(c - c[0])).sum())
    np.testing.assert_allclose(answer.log_mole_fractions[0], expected, rtol=1e-13, atol=1e-13)


def test_isomer_group_may_be_lumped() -> None:
    """Isomers act as one species with exp(-c) summed (Smith & Missen, Chemical Reaction Equilibrium Analysis,
    1982, treat isomer groups so; the identity follows from the closed form above)."""
    c = np.array([-2.0, -1.2, 0.3])
    lumped = -np.log(np.exp(-c).sum())
    A = np.array([[1, 1, 1, 0, 2], [2, 2, 2, 1, 3]])
    whole = solved(A, [1.0, 2.5], [*c, -0.4, -3.1])
    short = solved(A[:, 2:], [1.0, 2.5], [lumped, -0.4, -3.1])
    np.testing.assert_allclose(whole.amounts[0, :3].sum(), short.amounts[0, 0], rtol=1e-13)
    np.testing.assert_allclose(whole.amounts[0, 3:], short.amounts[0, 1:], rtol=1e-13)


def test_one_species_alone() -> None:
    answer = solved([[1], [4]], [3.0, 12.0], [-17.0])
    assert answer.amounts[0, 0] == pytest.approx(3.0, rel=1e-15)
    assert answer.log_mole_fractions[0, 0] == pytest.approx(0.0, abs=1e-15)


def test_no_reaction_possible() -> None:
    """As many species as independent elements: the balance alone decides, potentials of any size do not
    matter."""
    for c in ([0.0, 0.0], [900.0, -900.0], [-900.0, 900.0]):
        answer = solved([[1, 1], [1, 2]], [3.0, 5.0], c)
        np.testing.assert_allclose(answer.amounts[0], [1.0, 2.0], rtol=1e-14)


@pytest.mark.parametrize("decades", [3, 9, 12])
def test_traces_of_an_exactly_stoichiometric_feed(decades: int) -> None:
    """Pure H2O = H2 + 1/2 O2: with K tiny, x(H2) = (2 K^2)^(1/3) to first order, and x(H2) = 2 x(O2) to
    rounding."""
    log_k = -np.log(10.0) * decades * 3
    A = [[2, 2, 0], [1, 0, 2]]
    answer = solved(A, [2.0, 1.0], [0.0, -log_k, 0.0])
    water, hydrogen, oxygen = answer.log_mole_fractions[0]
    assert hydrogen - oxygen == pytest.approx(np.log(2.0), rel=1e-12)
    assert hydrogen + oxygen / 2 - water == pytest.approx(log_k, rel=1e-13)
    first_order = (2 * np.exp(2 * log_k)) ** (1 / 3)
    assert np.exp(hydrogen) == pytest.approx(first_order, rel=max(1e-12, 3 * first_order))
