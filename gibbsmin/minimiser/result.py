"""What a minimisation returns: amounts, potentials, and the evidence for them."""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


class Status(IntEnum):
    """Outcome of one point; every member explains itself and suggests what to do."""

    SOLVED = 0
    INFEASIBLE = 1
    EMPTY = 2
    NOT_FINITE = 3
    STEP_LIMIT = 4
    NOT_PROVED = 5

    @property
    def explanation(self) -> str:
        return _EXPLANATIONS[self][0]

    @property
    def remedy(self) -> str:
        return _EXPLANATIONS[self][1]


_EXPLANATIONS = {
    Status.SOLVED: ("the minimum is found and proved", "nothing to do"),
    Status.INFEASIBLE: (
        "no non-negative amounts of the listed species have the given element amounts",
        "list species that can hold every element of the feed in the given proportions",
    ),
    Status.EMPTY: ("all element amounts are zero", "give a feed"),
    Status.NOT_FINITE: (
        "an element amount or a potential is not a finite number",
        "check the input, and the temperature against the range of the species data",
    ),
    Status.STEP_LIMIT: (
        "the iteration ended at its step limit",
        "please report the problem: formula matrix, element amounts and potentials",
    ),
    Status.NOT_PROVED: (
        "the iteration ended, but the balance or the optimality gap is larger than allowed",
        "check the input for species whose potentials differ by more than doubles can resolve",
    ),
}


@dataclass(frozen=True)
class Minimum:
    """Result of :func:`gibbsmin.minimise` for N points, S species and E elements.

    Attributes
    ----------
    amounts : (N, S) mol. Exactly zero for species that the balance excludes; NaN where the point is not solved.
    log_mole_fractions : (N, S) natural logarithm of the mole fractions, valid far below the smallest double;
        -inf for species that the balance excludes.
    element_potentials : (N, E) pi with a_j.pi = potential_j + ln x_j [-]; NaN for an element that is absent,
        0 for one whose balance depends on the others.
    iterations : (N,) Newton steps.
    status : (N,) int8, members of :class:`Status`.
    gap : (N,) mol, upper bound on (G - G_min) / RT.
    balance_residual : (N,) largest error of an element balance, relative to the turnover of that element.
    """

    amounts: Floats
    log_mole_fractions: Floats
    element_potentials: Floats
    iterations: NDArray[np.int64]
    status: NDArray[np.int8]
    gap: Floats
    balance_residual: Floats

    @property
    def solved(self) -> NDArray[np.bool_]:
        """(N,) True where the minimum is found and proved."""
        return np.asarray(self.status == Status.SOLVED)

    def __repr__(self) -> str:
        points, species = self.amounts.shape
        return (
            f"<Minimum: {points} points, {species} species, {int(self.solved.sum())} solved, "
            f"largest gap {np.nanmax(self.gap, initial=0.0):.2g} mol>"
        )
