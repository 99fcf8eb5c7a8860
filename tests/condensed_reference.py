"""Extended-precision equilibrium of an ideal gas beside pure condensed phases: a judge of the minimiser.

The problem is convex. With potentials g of everything that can be there, a composition n with A n = b, n >= 0 is
the solution if some pi exists with

    a_k . pi = g_k for every phase that is present,  a_k . pi <= g_k for every phase that is not,
    n_j = N exp(a_j . pi - c_j) for every gas, where there is gas (N > 0, mole fractions then sum to one),
    sum_j exp(a_j . pi - c_j) <= 1 where there is none.

However a candidate was found, these statements prove it. `solve` takes a candidate (a double-precision answer, right
or wrong), corrects its set of phases by the signs of amounts and affinities until all statements hold in extended
precision, all inputs taken as exact rationals, and raises `UnprovedError` if it cannot. It shares no code with the
package: exact algebra and Newton are those of reference.py.

A basis of the balance is taken in exact rationals from the present phases, then from the gases by falling abundance;
so the balance reads n_i + sum_j C_ij n_j = m_i, with exact zeros where a feed is stoichiometric. Rows of phases give
their amounts; rows of gases are a gas problem with potentials measured from the basis. A row with a basis column that
is neither leaves its potential open (feed CaCO3 below its decomposition: p(CO2) is anything up to the decomposition
pressure); there the candidate's potentials serve as witness, and the statements are checked on it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import gmpy2
import numpy as np
from gmpy2 import mpfr, mpq
from scipy.optimize import minimize
from scipy.special import logsumexp, softmax

from tests import reference
from tests.reference import Tableau, UnprovedError, exact

DIGITS = (120, 240, 480)
MOST_SETS = 40
MOST_REPEATS = 6
LEAST_GAS = 1e-11  # of all amounts; a candidate with less may have none
STEEPNESS = 20.0  # of a phase's activity beside the sum of mole fractions, where a witness is sought
SIGN_SLACK = mpfr("1e-40")  # an amount or an affinity this near zero is zero


@dataclass(frozen=True)
class Equilibrium:
    """A verified solution.

    amounts        : float64 (S,) mol
    log_activities : float64 (S,), ln x of a gas (of the gas that would form, where there is none), ln a of a phase;
                     -inf for what the balance excludes
    excluded       : bool (S,)
    unique         : bool (S,), whether the equilibrium fixes the activity
    has_gas        : whether there is any
    phases         : present phases, as indices
    digits         : decimal digits of the arithmetic that satisfied the checks
    balance_residual, newton_correction : as in reference.py
    sets_tried     : sets of phases until the conditions held
    """

    amounts: np.ndarray
    log_activities: np.ndarray
    excluded: np.ndarray
    unique: np.ndarray
    has_gas: bool
    phases: tuple[int, ...]
    digits: int
    balance_residual: float
    newton_correction: float
    sets_tried: int


def solve(
    formula_matrix: np.ndarray,
    element_amounts: Sequence[Any] | np.ndarray,
    potentials: np.ndarray,
    condensed: np.ndarray,
    candidate: Any,
) -> Equilibrium:
    """The verified equilibrium nearest to a candidate, a Minimum of one point.

    formula_matrix (E, S), element_amounts (E,) [mol], potentials (S,) [-], +inf for a phase out of question,
    condensed (S,) bool. Raises reference.InfeasibleError, or UnprovedError when no answer could be proved.
    """
    possible = np.flatnonzero(np.isfinite(potentials))
    A = [[exact(row[j]) for j in possible] for row in formula_matrix]
    b = [exact(v) for v in element_amounts]
    inside = reference.interior_point(reference._feasible_tableau(A, b))
    kept = [k for k, value in enumerate(inside) if value > 0]
    columns = possible[kept]
    problem = _Problem(
        rows=[[*(row[k] for k in kept), value] for row, value in zip(A, b, strict=True)],
        c=[exact(potentials[j]) for j in columns],
        condensed=np.asarray(condensed)[columns],
        amounts=np.nan_to_num(candidate.amounts[0, columns]),
        levels=np.nan_to_num(candidate.log_mole_fractions[0, columns], nan=-1.0, neginf=-1e4),
    )
    errors = []
    for digits in DIGITS:
        with gmpy2.context(precision=int(digits * 3.3219281) + 32) as context:
            context.emax, context.emin = gmpy2.get_emax_max(), gmpy2.get_emin_min()
            try:
                return problem.search(digits, columns, len(potentials))
            except (ArithmeticError, UnprovedError) as error:
                errors.append(f"{digits} digits: {error}")
    raise UnprovedError("; ".join(errors))


@dataclass(frozen=True)
class _Trial:
    """The balance, solved for one set of phases; everything by position among the kept species."""

    amounts: dict[int, Any]  # of basis phases and of gases
    log_activities: list[Any]
    free: set[int]  # species whose activity the conditions leave open
    log_sum: Any  # ln of the sum of the mole fractions of the gas; None if no gas is listed
    residual: Any
    correction: Any


@dataclass
class _Problem:
    rows: list[list[mpq]]  # A | b
    c: list[mpq]
    condensed: np.ndarray
    amounts: np.ndarray
    levels: np.ndarray

    def search(self, digits: int, columns: np.ndarray, species: int) -> Equilibrium:
        """Exchange phases by the signs of amounts and affinities until every condition holds."""
        phases = {int(k) for k in np.flatnonzero(self.condensed & (self.amounts > 0.0))}
        has_gas = bool(np.any(self.amounts[~self.condensed] > 0.0))
        seen: set[frozenset[int]] = set()
        for tried in range(1, MOST_SETS + 1):
            key = frozenset(phases | ({-1} if has_gas else set()))
            if key in seen:
                raise UnprovedError(f"the phases {sorted(phases)} came up again")
            seen.add(key)
            basis = self.basis(phases)
            try:
                trial = self.trial(basis, phases, has_gas, digits)
            except ArithmeticError:
                if not has_gas or self.amounts[~self.condensed].sum() > LEAST_GAS * self.amounts.sum():
                    raise
                has_gas = False  # a gas of rounding errors has no equilibrium of its own
                continue
            present = {k for k in phases if k in trial.amounts}  # dependent ones hold nothing
            negative = min(present, key=lambda k: trial.amounts[k], default=None)
            if negative is not None and trial.amounts[negative] < -SIGN_SLACK:
                phases = present - {negative}
                continue
            absent = [int(k) for k in np.flatnonzero(self.condensed) if k not in present]
            highest = max(absent, key=lambda k: trial.log_activities[k], default=None)
            if highest is not None and trial.log_activities[highest] > SIGN_SLACK:
                phases = present | {highest}
                continue
            if not has_gas and trial.log_sum is not None and trial.log_sum > SIGN_SLACK:
                raise UnprovedError(f"a gas would form: ln sum x = {float(trial.log_sum):.3g}")
            return self.verified(trial, present, has_gas, digits, columns, species, tried)
        raise UnprovedError(f"no set of phases in {MOST_SETS} trials")

    def basis(self, phases: set[int]) -> Tableau:
        """The balance solved for phases first, then gases by abundance, then whatever is needed."""
        tableau = Tableau([row[:-1] for row in self.rows], [row[-1] for row in self.rows])
        tableau.basis = [-1] * len(self.rows)
        ranked = sorted(phases, key=lambda k: -self.amounts[k])
        ranked += sorted(np.flatnonzero(~self.condensed).tolist(), key=lambda k: -self.levels[k])
        ranked += sorted(set(np.flatnonzero(self.condensed).tolist()) - phases, key=lambda k: -self.levels[k])
        for column in ranked:
            row = next(
                (i for i, r in enumerate(tableau.rows) if tableau.basis[i] < 0 and r[column] != 0), None
            )
            if row is not None:
                tableau.pivot(row, column)
        solved = [i for i, k in enumerate(tableau.basis) if k >= 0]
        tableau.rows = [tableau.rows[i] for i in solved]  # the others are 0 = 0: the feed is feasible
        tableau.basis = [tableau.basis[i] for i in solved]
        return tableau

    def trial(self, basis: Tableau, phases: set[int], has_gas: bool, digits: int) -> _Trial:
        gases = np.flatnonzero(~self.condensed).tolist()
        of_phase = [i for i, k in enumerate(basis.basis) if k in phases]
        of_gas = [i for i, k in enumerate(basis.basis) if has_gas and not self.condensed[k]]
        free = [i for i in range(len(basis.basis)) if i not in of_phase and i not in of_gas]
        for i in free:
            if basis.rows[i][-1] != 0:
                raise UnprovedError("the phases present cannot hold the feed")
        potential = [self.c[k] for k in basis.basis]
        relative = [
            mpfr(
                c - sum((row[k] * g for row, g in zip(basis.rows, potential, strict=True) if row[k]), mpq(0))
            )
            for k, c in enumerate(self.c)
        ]
        unknown = [mpfr(0)] * len(basis.basis)  # ln activity of each basis species
        for i, witness in zip(free, self.witness(basis, free, relative, has_gas), strict=True):
            unknown[i] = mpfr(witness)
        residual, correction = mpfr(0), mpfr(0)
        amounts: dict[int, Any] = {}
        if has_gas:
            if not of_gas:
                raise ArithmeticError("phases alone fix all potentials, so nothing fixes the amount of gas")
            system = reference._System(
                [[basis.rows[i][k] for k in gases] for i in of_gas], [basis.rows[i][-1] for i in of_gas]
            )
            start = [mpfr(float(self.levels[basis.basis[i]])) for i in of_gas]
            start.append(mpfr(float(np.log(self.amounts[~self.condensed].sum()))))
            c = [relative[k] for k in gases]
            goal = mpfr(10) ** (-digits // 2)
            solution, residual = start, mpfr(1)
            for _ in range(
                MOST_REPEATS
            ):  # Newton looks at ln n; where these are right at once, ln N may lag behind
                solution, correction, pivot, _ = reference._newton(system, solution, c, goal, 40)
                log_n = system.log_amounts(solution, c)
                amounts = {k: gmpy2.exp(v) for k, v in zip(gases, log_n, strict=True)}
                residual = _residual(system, [amounts[k] for k in gases], gmpy2.exp(solution[-1]))
                if residual <= mpfr(10) ** (20 - digits):
                    break
            if pivot < mpfr(10) ** (-digits // 3):
                raise UnprovedError(f"pivot {float(pivot):.1e}")
            for i, value in zip(of_gas, solution[:-1], strict=True):
                unknown[i] = value
        for i in of_phase:
            # mole numbers of the rest, which are not counted to the basis
            terms = [basis.rows[i][k] * n for k, n in amounts.items() if k in gases and basis.rows[i][k]]
            amounts[basis.basis[i]] = mpfr(basis.rows[i][-1]) - gmpy2.fsum(terms)
        log_activities = [
            gmpy2.fsum([row[k] * u for row, u in zip(basis.rows, unknown, strict=True)]) - relative[k]
            for k in range(len(self.c))
        ]
        undetermined = {k for k in range(len(self.c)) if any(basis.rows[i][k] for i in free)}
        log_sum = None
        if gases:
            log_sum = gmpy2.log(gmpy2.fsum([gmpy2.exp(log_activities[k]) for k in gases]))
        return _Trial(amounts, log_activities, undetermined, log_sum, residual, correction)

    def witness(self, basis: Tableau, free: list[int], relative: list[Any], has_gas: bool) -> list[float]:
        """Potentials of the open rows: the candidate's, unless it fails, then those far inside the conditions.

        Only a suggestion, in doubles; the conditions are checked on it in extended precision.
        """
        suggested = [float(self.levels[basis.basis[i]]) for i in free]
        if not free or has_gas:
            return suggested
        C = np.array([[float(v) for v in basis.rows[i][:-1]] for i in free])
        touched = np.flatnonzero(C.any(axis=0))
        C, steep = C[:, touched], np.where(self.condensed[touched], STEEPNESS, 1.0)
        offset = -np.array([float(relative[k]) for k in touched])

        def level(x: np.ndarray) -> np.ndarray:
            return np.asarray(steep * (x @ C + offset))

        def height(x: np.ndarray) -> float:
            return float(logsumexp(level(x)))

        def slope(x: np.ndarray) -> np.ndarray:
            return np.asarray((C * steep) @ softmax(level(x)))

        start = np.array(suggested)
        if level(start).max() < -1e-6 and logsumexp(level(start)[~self.condensed[touched]]) < -1e-6:
            return suggested
        return [float(v) for v in minimize(height, start, jac=slope, method="BFGS").x]

    def verified(
        self,
        trial: _Trial,
        present: set[int],
        has_gas: bool,
        digits: int,
        columns: np.ndarray,
        species: int,
        tried: int,
    ) -> Equilibrium:
        """All conditions once more, on the untransformed balance; then the answer as doubles."""
        n = [trial.amounts.get(k, mpfr(0)) for k in range(len(self.c))]
        residual = trial.residual
        for row in self.rows:
            terms = [a * v for a, v in zip(row[:-1], n, strict=True) if a]
            scale = max((abs(v) for v in terms), default=mpfr(0))
            if scale > 0:
                residual = max(residual, abs(gmpy2.fsum([*terms, -row[-1]])) / scale)
        limit = mpfr(10) ** (20 - digits)
        if residual > limit:
            raise UnprovedError(f"balance residual {float(residual):.1e}")
        if any(v < -SIGN_SLACK for v in n):
            raise UnprovedError("a negative amount")
        if any(abs(trial.log_activities[k]) > limit for k in present):
            raise UnprovedError("a phase is present at an activity other than one")
        if has_gas and (trial.log_sum is None or abs(trial.log_sum) > mpfr(10) ** (-digits // 2)):
            raise UnprovedError("mole fractions do not sum to one")
        amounts, log_a = np.zeros(species), np.full(species, -np.inf)
        unique = np.ones(species, dtype=bool)
        for k, j in enumerate(columns):
            amounts[j] = max(float(n[k]), 0.0)
            log_a[j] = float(trial.log_activities[k])
            unique[j] = k not in trial.free
        return Equilibrium(
            amounts=amounts,
            log_activities=log_a,
            excluded=np.isneginf(log_a),
            unique=unique,
            has_gas=has_gas,
            phases=tuple(sorted(int(columns[k]) for k in present if n[k] > SIGN_SLACK)),
            digits=digits,
            balance_residual=float(residual),
            newton_correction=float(trial.correction),
            sets_tried=tried,
        )


def _residual(system: Any, n: list[Any], total: Any) -> Any:
    worst = mpfr(0)
    rows = [*system.row_terms, [(j, 1) for j in range(system.S)]]
    for row, target in zip(rows, [*system.m, total], strict=True):
        terms = [v * n[j] for j, v in row]
        worst = max(worst, abs(gmpy2.fsum([*terms, -target])) / max(abs(v) for v in terms))
    return worst


def assert_agrees(
    answer: Any, judged: Equilibrium, condensed: np.ndarray, feed_size: float, *, least: float = 1e-200
) -> None:
    """Gas: every mole fraction above `least`, and every amount, within 1e-9 relative. Phases: amounts within 1e-10
    of the feed (mol of atoms), activities within 1e-9. What the balance excludes is the same in both."""
    log_a, amounts = answer.log_mole_fractions[0], answer.amounts[0]
    np.testing.assert_array_equal(
        np.isneginf(log_a), judged.excluded, err_msg="species that the balance excludes"
    )
    assert not np.any(amounts[judged.excluded])
    compared = judged.unique & (judged.log_activities > np.log(least))
    np.testing.assert_allclose(
        log_a[compared], judged.log_activities[compared], rtol=0, atol=1e-9, err_msg="ln of activities"
    )
    np.testing.assert_allclose(
        amounts[condensed],
        judged.amounts[condensed],
        rtol=0,
        atol=1e-10 * feed_size,
        err_msg="amounts of phases",
    )
    gas = ~condensed & compared & (judged.amounts > 1e-290)
    if judged.has_gas:
        np.testing.assert_allclose(amounts[gas], judged.amounts[gas], rtol=1e-9, err_msg="amounts of gases")
    else:
        assert not np.any(amounts[~condensed])
