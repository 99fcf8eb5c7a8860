"""A problem as it is posed to the iteration: the species that may be present, independent balances; and its answer.

Species that the balance excludes are left out here and come back as exact zeros when the answer is filled in.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gibbsmin.minimiser.certificate import optimality_gap
from gibbsmin.minimiser.components import Amounts, Components, Floats, FormulaSystem, Indices, formula_system
from gibbsmin.minimiser.equilibria import Equilibria
from gibbsmin.minimiser.grouping import alike
from gibbsmin.minimiser.newton import STEP_LIMIT, Batch
from gibbsmin.minimiser.result import Minimum, Status

BALANCE_TOLERANCE = 1e-12
"""Part by which element amounts may miss what the species can hold, or what a dependent row asks: rounding of the feed."""

GAP_TOLERANCE = 1e-10
"""A point is solved if its gap is at most this part of the sum of |element amounts|."""


@dataclass
class Answers:
    """Result arrays of N points while they are being filled; the fields are those of Minimum."""

    amounts: Floats
    log_mole_fractions: Floats
    element_potentials: Floats
    iterations: Indices
    status: NDArray[np.int8]
    gap: Floats
    balance_residual: Floats

    @classmethod
    def blank(cls, points: int, elements: int, species: int) -> Answers:
        return cls(
            np.full((points, species), np.nan),
            np.full((points, species), np.nan),
            np.full((points, elements), np.nan),
            np.zeros(points, dtype=np.intp),
            np.full(points, Status.INFEASIBLE, dtype=np.int8),
            np.full(points, np.nan),
            np.full(points, np.nan),
        )

    def minimum(self) -> Minimum:
        return Minimum(
            self.amounts,
            self.log_mole_fractions,
            self.element_potentials,
            self.iterations.astype(np.int64),
            self.status,
            self.gap,
            self.balance_residual,
        )


@dataclass(frozen=True)
class Posed:
    """Formula matrix A (E, S), the species kept (s,), and the system of their independent balances."""

    A: Floats
    kept: Indices
    system: FormulaSystem

    @property
    def excluded(self) -> Indices:
        """Species left out."""
        return np.setdiff1d(np.arange(self.A.shape[1]), self.kept, assume_unique=True)

    @classmethod
    def of(cls, A: Floats, kept: Indices, b: Amounts) -> list[tuple[Posed, Indices]]:
        """Pose the points of element amounts b (n, E), with equal species kept; positions of points for each.

        Where element rows depend on each other, those of the scarcest elements are used: the balance of a plentiful
        element says nothing about a scarce one below the rounding of its amount. Points whose dependent rows disagree
        with the independent ones are left out: they have no solution.
        """
        whole = formula_system(A)
        columns = tuple(kept.tolist())
        system = whole if len(kept) == whole.n_species else whole.restricted(columns)
        everywhere = np.arange(len(b))
        if not system.dependent_rows:
            return [(cls(A, kept, system), everywhere)]
        posed = []
        order = np.argsort(np.abs(b.astype(np.float64)), axis=1, kind="stable")
        for row_order, members in alike(order, everywhere):
            system = whole.restricted(columns, tuple(row_order.tolist()))
            posed.append((cls(A, kept, system), members[_consistent(system, b[members])]))
        return posed

    def finish(
        self,
        batch: Batch,
        b: Amounts,
        c: Floats,
        points: Indices,
        answers: Answers,
        *,
        beside: bool = False,
    ) -> None:
        """Fill in amounts, potentials and the proof of the points of a finished batch of gases.

        b (N, E) and c (N, s) of all posed points, whose positions in `answers` are `points` (N,). A gas `beside`
        phases has no proof of its own, and counts as solved where the iteration converged.
        """
        log_x = batch.log_mole_fractions()
        amounts = np.exp(log_x + batch.log_total[:, None])
        costs = c[batch.points]
        pi = self.element_potentials(batch.components, batch.log_y + costs[:, batch.components.columns])
        at = points[batch.points]
        answers.iterations[at] = batch.steps
        no_phase = np.zeros(len(self.kept), dtype=bool)
        ended = (batch.steps < STEP_LIMIT) & (batch.log_total <= batch.ceiling)
        if beside:
            answers.status[at] = np.where(ended, Status.SOLVED, Status.STEP_LIMIT)
            self._fill(amounts, log_x, pi, ended, at, answers)
            return
        self._judge(no_phase, amounts, log_x, pi, b[batch.points], costs, at, answers)
        answers.status[at[~ended]] = Status.STEP_LIMIT

    def finish_phases(
        self,
        condensed: NDArray[np.bool_],
        found: Equilibria,
        b: Amounts,
        c: Floats,
        points: Indices,
        answers: Answers,
    ) -> None:
        """Fill in the points of equilibria with condensed phases: b (n, E), c (n, s), positions (n,) in `answers`."""
        pi = self.element_potentials(found.components, found.component_potentials)
        amounts = np.where(condensed, np.maximum(found.amounts, 0.0), found.amounts)
        answers.iterations[points] = found.steps
        self._judge(condensed, amounts, found.log_activities, pi, b, c, points, answers)

    def _judge(
        self,
        condensed: NDArray[np.bool_],
        amounts: Floats,
        log_x: Floats,
        pi: Floats,
        b: Amounts,
        costs: Floats,
        at: Indices,
        answers: Answers,
    ) -> None:
        """Set gap, residual and status of points `at`; fill in the values of those that are proved."""
        floats = b.astype(np.float64)
        inside = self.A[:, self.kept]
        gap = optimality_gap(
            inside, floats, costs, amounts, np.nan_to_num(pi), log_mole_fractions=log_x, condensed=condensed
        )
        turnover = np.maximum(amounts @ np.abs(inside).T, np.abs(floats))
        missed = np.abs(amounts @ inside.T - floats)
        residual = np.divide(missed, turnover, where=turnover > 0.0, out=np.zeros_like(missed)).max(axis=1)
        proved = (gap <= GAP_TOLERANCE * np.abs(floats).sum(axis=1)) & (residual <= BALANCE_TOLERANCE)
        answers.status[at] = np.where(proved, Status.SOLVED, Status.NOT_PROVED)
        answers.gap[at] = gap
        answers.balance_residual[at] = residual
        self._fill(amounts, log_x, pi, proved, at, answers)

    def _fill(
        self,
        amounts: Floats,
        log_x: Floats,
        pi: Floats,
        chosen: NDArray[np.bool_],
        at: Indices,
        answers: Answers,
    ) -> None:
        answers.amounts[at[chosen]] = 0.0
        answers.log_mole_fractions[at[chosen]] = -np.inf
        places = at[chosen][:, None], self.kept
        answers.amounts[places] = amounts[chosen]
        answers.log_mole_fractions[places] = log_x[chosen]
        answers.element_potentials[at[chosen]] = pi[chosen]

    def element_potentials(self, components: Components, of_components: Floats) -> Floats:
        """(n, E) pi from a_i.pi of the components (n, r); NaN for absent elements, 0 for rows that depend on others."""
        pi = np.full((len(of_components), len(self.A)), np.nan)
        pi[:, self.A[:, self.kept].any(axis=1)] = 0.0
        square = self.A[self.system.rows[:, None], self.kept[components.columns]]
        pi[:, self.system.rows] = np.linalg.solve(square.T, of_components.T).T
        return pi


def _consistent(system: FormulaSystem, b: Amounts) -> NDArray[np.bool_]:
    """(n,) whether the dependent element rows agree with the independent ones."""
    floats = b.astype(np.float64)
    agreed = np.ones(len(b), dtype=bool)
    for row, weights in system.dependent_rows:
        terms = floats[:, system.rows] * np.array([float(weight) for weight in weights])
        size = np.abs(terms).sum(axis=1) + np.abs(floats[:, row])
        agreed &= np.abs(terms.sum(axis=1) - floats[:, row]) <= BALANCE_TOLERANCE * size
    return agreed
