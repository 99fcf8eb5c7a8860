"""What the generators of random problems have in common: each problem can be drawn again by itself."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from typing import Any

import numpy as np


def assert_drawn_again(cases: Iterable[Any], problem: Callable[[int, int], Any], seed: int) -> None:
    """`cases` drawn in a row from a seed are what `problem(seed, index)` draws one by one."""
    for case in cases:
        again = problem(seed, case.index)
        np.testing.assert_array_equal(case.formula_matrix, again.formula_matrix)
        np.testing.assert_array_equal(case.element_amounts, again.element_amounts)
        np.testing.assert_array_equal(case.potentials, again.potentials)
        assert case.names == again.names
