"""Seeded problems with made-up formulas and potentials, harsher than any species data.

Up to 8 elements with up to 30 atoms each, sometimes a row of charges, potentials normal with a spread of
0.01 to `largest_spread`, feeds dense over ten decades, of one to three species, the latter off by a few
units of the last place of the element totals, or scaled by powers of two up to 2^300.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

MODES = ("dense", "few", "last place", "scaled")


@dataclass(frozen=True)
class Invented:
    """formula_matrix (E, S), element_amounts (E,) [mol], potentials (S,) [-]."""

    formula_matrix: np.ndarray
    element_amounts: np.ndarray
    potentials: np.ndarray
    kind: str
    seed: int
    index: int

    @property
    def exact_element_amounts(self) -> tuple[Fraction, ...]:
        """The doubles of `element_amounts`, exactly."""
        return tuple(Fraction(float(value)) for value in self.element_amounts)

    @property
    def label(self) -> str:
        return f"invented {self.kind} ({self.seed}, {self.index})"


def invented_problem(seed: int, index: int, *, largest_spread: float = 1000.0) -> Invented:
    """The problem (seed, index); its element amounts are feasible but for rounding in the mode "last
    place"."""
    rng = np.random.default_rng((seed, index))
    E, S = int(rng.integers(1, 9)), int(rng.integers(1, 41))
    most_atoms = int(rng.choice([2, 4, 13, 30]))
    A = rng.integers(0, most_atoms, (E, S)).astype(float) * (rng.random((E, S)) < rng.choice([0.3, 0.6, 1.0]))
    A[rng.integers(0, E, S), np.arange(S)] += 1.0  # no species without matter
    if rng.random() < 0.2:
        A = np.vstack([A, rng.integers(-2, 3, S).astype(float)])
    kind = str(rng.choice(MODES))
    feed = np.zeros(S)
    if kind == "dense":
        feed = rng.integers(1, 16, S) * 2.0 ** -rng.integers(0, 36, S)
    else:
        few = rng.choice(S, min(S, int(rng.integers(1, 4))), replace=False)
        feed[few] = rng.integers(1, 9, len(few))
    b = A @ feed
    if kind == "last place":
        b = b * (1 + rng.integers(-2, 3, len(b)) * np.finfo(float).eps)
    if kind == "scaled":
        b = b * 2.0 ** int(rng.integers(-300, 300))
    spread = 10.0 ** rng.uniform(-2, np.log10(largest_spread))
    c = rng.normal(0, spread, S)
    if rng.random() < 0.2:
        c = np.round(c)  # ties between species and between reactions
    return Invented(A, b, c, kind, seed, index)


def invented_problems(count: int, seed: int, **options: float) -> Iterator[Invented]:
    """The problems (seed, 0) to (seed, count - 1)."""
    return (invented_problem(seed, index, **options) for index in range(count))
