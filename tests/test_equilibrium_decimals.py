"""Feed amounts read as the decimals they print as. Source of all expectations: arithmetic."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gibbsmin.decimal_amounts import element_amounts, element_amounts_of_fractions

PROPANE_OXYGEN = np.array([[3.0, 8.0, 0.0], [0.0, 0.0, 2.0]])  # C, H, O


def test_stoichiometric_decimals_give_exact_whole_numbers() -> None:
    amounts, factor = element_amounts(np.array([[0.1, 0.5]]), PROPANE_OXYGEN)
    assert amounts.tolist() == [[3.0, 8.0, 10.0]]
    assert factor.tolist() == [10.0]


def test_naive_product_of_the_same_feed_is_inexact() -> None:
    # what the module is for: in doubles, three tenths of carbon are not three times 0.1
    naive = np.array([0.1, 0.5]) @ PROPANE_OXYGEN
    assert naive[0] * 10 != 3 * naive[2]


@given(st.decimals(min_value="1e-12", max_value=1000, places=12), st.integers(1, 9))
def test_any_decimal_feed_keeps_its_ratio(tenth, multiple) -> None:  # type: ignore[no-untyped-def]
    first = float(tenth)
    exact = Fraction(str(first))
    second = float(exact * multiple)
    if Fraction(str(second)) != exact * multiple:  # the multiple needs more digits than a double prints
        return
    amounts, factor = element_amounts(np.array([[first, second]]), np.eye(2))
    if factor[0] != 1 or float(amounts[0, 0]).is_integer():
        assert Fraction(float(amounts[0, 1])) == multiple * Fraction(float(amounts[0, 0]))
        assert Fraction(float(amounts[0, 0])) / Fraction(float(factor[0])) == exact


def test_a_number_without_a_short_decimal_falls_back_to_doubles() -> None:
    feed = np.array([[0.1 + 0.2, 1.0]])  # prints as 0.30000000000000004
    amounts, factor = element_amounts(feed, np.eye(2))
    assert factor.tolist() == [1.0]
    np.testing.assert_array_equal(amounts, feed)


def test_one_difficult_feed_does_not_spoil_the_others() -> None:
    feed = np.array([[0.1, 0.5], [0.1 + 0.2, 1.0], [1e15, 5e15]])
    amounts, factor = element_amounts(feed, PROPANE_OXYGEN)
    assert amounts[0].tolist() == [3.0, 8.0, 10.0]
    np.testing.assert_allclose(amounts / factor[:, None], feed @ PROPANE_OXYGEN, rtol=1e-15)


def test_a_sweep_shares_one_factor() -> None:
    feed = np.array([[1.0, 2.0], [1.0, 2.5], [1.0, 2.25]])
    _, factor = element_amounts(feed, np.eye(2))
    assert factor.tolist() == [100.0] * 3


@pytest.mark.parametrize("power", [-25, -20, -3, 0, 12, 20])
def test_tiny_and_huge_amounts_survive(power: int) -> None:
    feed = np.array([[1.0, 5.0]]) * 10.0**power
    amounts, factor = element_amounts(feed, PROPANE_OXYGEN)
    np.testing.assert_allclose(amounts / factor[:, None], feed @ PROPANE_OXYGEN, rtol=1e-15)


def test_fractions_become_the_smallest_whole_numbers() -> None:
    feed = np.array([[Fraction(1, 3), Fraction(5, 3)], [Fraction(3600), Fraction(18000)]], dtype=object)
    amounts, factor = element_amounts_of_fractions(feed, PROPANE_OXYGEN)
    assert amounts.tolist() == [[3.0, 8.0, 10.0]] * 2
    assert factor.tolist() == [3.0, 1 / 3600]


def test_fractions_too_long_for_whole_numbers_stay_fractions() -> None:
    feed = np.array([[Fraction(1, 10**9 + 7), Fraction(1, 10**9 + 9), Fraction(1)]], dtype=object)
    amounts, factor = element_amounts_of_fractions(feed, np.eye(3))
    assert factor.tolist() == [1.0]
    assert amounts.dtype == object
    assert amounts.tolist() == feed.tolist()


def test_negative_totals_of_charge_are_kept() -> None:
    feed = np.array([[Fraction(1, 2), Fraction(1, 4)]], dtype=object)
    amounts, factor = element_amounts_of_fractions(feed, np.array([[1.0, 1.0], [0.0, -1.0]]))
    np.testing.assert_array_equal(amounts / factor[:, None], [[0.5, 0.25]])
