"""Extended-precision equilibrium of an ideal gas beside pure condensed phases: a judge of the minimiser.

The problem is convex. With potentials g of everything that can be there, a composition n with A n = b, n >= 0 is
the solution if some pi exists with

    a_k . pi = g_k for every phase that is present,  a_k . pi <= g_k for every phase that is not,
    n_j = N exp(a_j . pi - c_j) for every gas, where there is gas (N > 0, mole fractions then sum to one),
    sum_j exp(a_j . pi - c_j) <= 1 where there is none.

However a candidate was found, these statements prove it. `solve` starts from a candidate (a double-precision answer,
right or wrong) or, without one, from the exact linear program without the entropy of mixing; it exchanges phases by
the signs of amounts and affinities until all statements hold in extended precision, all inputs taken as exact
rationals, and raises `UnprovedError` if it cannot. It shares no code with the package: exact algebra and Newton are
those of reference.py.

A basis of the balance is taken in exact rationals from the present phases, then from the gases by falling abundance;
so the balance reads n_i + sum_j C_ij n_j = m_i, with exact zeros where a feed is stoichiometric. Rows of phases give
their amounts; rows of gases are a gas problem with potentials measured from the basis. A row with a basis column that
is neither leaves its potential open (feed CaCO3 below its decomposition: p(CO2) is anything up to the decomposition
pressure); there the candidate's potentials serve as witness, and the statements are checked on it.
"""

from __future__ import annotations

import itertools
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

DIGITS = (120, 240)
MOST_SETS = 40
TINY = 1e-300
MOST_REPEATS = 6
MOST_STEPS = 400
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
    candidate: Any = None,
) -> Equilibrium:
    """The verified equilibrium; a candidate, a Minimum of one point, makes it quick but not otherwise.

    formula_matrix (E, S), element_amounts (E,) [mol], potentials (S,) [-], +inf for a phase out of question,
    condensed (S,) bool. Raises reference.InfeasibleError, or UnprovedError when no answer could be proved.
    """
    possible = np.flatnonzero(np.isfinite(potentials))
    A = [[exact(row[j]) for j in possible] for row in formula_matrix]
    b = [exact(v) for v in element_amounts]
    inside = reference.interior_point(reference._feasible_tableau(A, b))
    kept = [k for k, value in enumerate(inside) if value > 0]
    columns = possible[kept]
    rows = [[row[k] for k in kept] for row in A]
    c = [exact(potentials[j]) for j in columns]
    of_phase = np.asarray(condensed)[columns]
    starts = [_without_mixing(rows, b, c, of_phase)]
    if candidate is not None and np.isfinite(candidate.amounts[0]).all():
        levels = candidate.log_mole_fractions[0, columns]
        starts.insert(0, (candidate.amounts[0, columns], np.where(np.isneginf(levels), -1e4, levels)))
    errors = []
    for digits, (amounts, levels) in itertools.product(DIGITS, starts):
        with gmpy2.context(precision=int(digits * 3.3219281) + 32) as context:
            context.emax, context.emin = gmpy2.get_emax_max(), gmpy2.get_emin_min()
            balance = [[*row, value] for row, value in zip(rows, b, strict=True)]
            problem = _Problem(balance, c, of_phase, amounts.copy(), levels.copy())
            try:
                return problem.search(digits, columns, len(potentials))
            except (ArithmeticError, UnprovedError) as error:
                errors.append(f"{digits} digits: {error}")
    raise UnprovedError("; ".join(errors))


def _without_mixing(
    A: list[list[mpq]], b: list[mpq], c: list[mpq], condensed: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Amounts of the optimal vertex, and ln of the activities that its potentials give, as doubles.

    Phases of the vertex whose amount is zero count as present to begin with: gas may need them.
    """
    tableau = reference._feasible_tableau(A, b)
    coarse = [mpq(round(float(v) * 64), 64) for v in c]  # keeps the rationals short
    tableau.minimise(coarse)
    weights = [coarse[j] for j in tableau.basis]
    levels = [
        sum((w * row[k] for w, row in zip(weights, tableau.rows, strict=True)), mpq(0)) - coarse[k]
        for k in range(len(c))
    ]
    amounts = np.array([float(v) for v in tableau.vertex()])
    amounts[[k for k in tableau.basis if condensed[k] and amounts[k] == 0.0]] = TINY
    return amounts, np.array([float(v) for v in levels])


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
            if has_gas and (needed := self.needed(basis, phases)):
                phases = phases | needed
                continue
            try:
                trial = self.trial(basis, phases, has_gas, digits)
            except ArithmeticError:
                if not has_gas:
                    raise
                has_gas = False  # a gas that phases leave no room for has no equilibrium of its own
                continue
            present = {k for k in phases if k in trial.amounts}  # dependent ones hold nothing
            self.remember(trial, has_gas)
            negative = min(present, key=lambda k: trial.amounts[k], default=None)
            if negative is not None and trial.amounts[negative] < -SIGN_SLACK:
                phases = present - {negative}
                continue
            absent = [int(k) for k in np.flatnonzero(self.condensed) if k not in present]
            highest = max(absent, key=lambda k: trial.log_activities[k], default=None)
            if highest is not None and trial.log_activities[highest] > SIGN_SLACK:
                column = [row[highest] for row in basis.rows]
                phases = present - _leaving(basis, phases, column, trial) | {highest}
                continue
            if not has_gas and trial.log_sum is not None and trial.log_sum > SIGN_SLACK:
                gases = np.flatnonzero(~self.condensed).tolist()
                x = [float(gmpy2.exp(trial.log_activities[k] - trial.log_sum)) for k in gases]
                column = [sum(float(row[k]) * v for k, v in zip(gases, x, strict=True)) for row in basis.rows]
                phases, has_gas = present - _leaving(basis, phases, column, trial), True
                continue
            return self.verified(trial, present, has_gas, digits, columns, species, tried)
        raise UnprovedError(f"no set of phases in {MOST_SETS} trials")

    def needed(self, basis: Tableau, phases: set[int]) -> set[int]:
        """A phase that must join, at nothing to begin with, for all gases to be possible beside the present ones."""
        gas = np.flatnonzero(~self.condensed).tolist()
        for row, k in zip(basis.rows, basis.basis, strict=True):
            if self.condensed[k] or row[-1] != 0:
                continue
            sign = 1 if all(row[j] >= 0 for j in gas) else -1 if all(row[j] <= 0 for j in gas) else 0
            others = [j for j in np.flatnonzero(self.condensed) if j not in phases and sign * row[j] < 0]
            if others:
                return {int(max(others, key=lambda j: self.levels[j]))}
        return set()

    def remember(self, trial: _Trial, has_gas: bool) -> None:
        """Start the next trial from this one."""
        shift = mpfr(0) if has_gas or trial.log_sum is None else trial.log_sum
        for k, value in enumerate(trial.log_activities):
            self.levels[k] = float(value if self.condensed[k] else value - shift)
        if has_gas:
            for k in np.flatnonzero(~self.condensed).tolist():
                self.amounts[k] = float(trial.amounts[k])
        for k in np.flatnonzero(self.condensed).tolist():
            self.amounts[k] = float(trial.amounts.get(k, 0.0))

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
            if not any(system.m):
                raise ArithmeticError("the phases hold all of the feed")
            # a gas that is only about to form is started small
            total = max(self.amounts[~self.condensed].sum(), LEAST_GAS * self.amounts.sum())
            solution = [mpfr(float(self.levels[basis.basis[i]])) for i in of_gas]
            solution.append(mpfr(float(np.log(total))))
            c = [relative[k] for k in gases]
            goal = mpfr(10) ** (-digits // 2)
            residual = mpfr(1)
            # Newton looks at ln n; where these are right at once, ln N may lag behind
            for _ in range(MOST_REPEATS):
                try:
                    solution, correction, pivot, _ = reference._newton(system, solution, c, goal, 40)
                except (ArithmeticError, ZeroDivisionError):
                    solution = _move(system, solution, c)
                    continue
                log_n = system.log_amounts(solution, c)
                amounts = {k: gmpy2.exp(v) for k, v in zip(gases, log_n, strict=True)}
                residual = _residual(system, [amounts[k] for k in gases], gmpy2.exp(solution[-1]))
                if residual <= mpfr(10) ** (20 - digits):
                    break
            if not amounts:
                raise ArithmeticError("no contraction")
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
        # the row of a phase of exactly nothing holds no gas either
        open_rows = free + [i for i in of_phase if abs(amounts[basis.basis[i]]) <= SIGN_SLACK]
        undetermined = {k for k in range(len(self.c)) if any(basis.rows[i][k] for i in open_rows)}
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


def _leaving(basis: Tableau, phases: set[int], column: list[Any], trial: _Trial) -> set[int]:
    """The phase that must go where one more comes that consists of the present ones; none if it does not."""
    of_phase = [i for i, k in enumerate(basis.basis) if k in phases]
    if any(abs(column[i]) > 1e-12 for i in range(len(column)) if i not in of_phase):
        return set()
    ratios = [
        (trial.amounts[basis.basis[i]] / mpfr(column[i]), basis.basis[i]) for i in of_phase if column[i] > 0
    ]
    return {min(ratios)[1]} if ratios else set()


def _move(system: Any, start: list[Any], c1: list[Any]) -> list[Any]:
    """Homotopy to potentials c1 and the system's balance, from a gas like that of `start` but solved exactly.

    Its mole fractions, cut to a range and normalised, define potentials c0, its amounts a balance m0; both then go
    in a straight line to the true ones. Raises ArithmeticError where the line leads to no gas.
    """
    m1 = list(system.m)
    nu = start[-1]
    log_x = [min(max(v - nu, mpfr(-60)), mpfr(0)) for v in system.log_amounts(start, c1)]
    log_sum = gmpy2.log(gmpy2.fsum([gmpy2.exp(v) for v in log_x]))
    log_n = [v - log_sum + nu for v in log_x]
    c0 = [v - n for v, n in zip(system.log_amounts(start, [mpfr(0)] * system.S), log_n, strict=True)]
    m0 = [gmpy2.fsum([v * gmpy2.exp(log_n[j]) for j, v in row]) for row in system.row_terms]
    dc = [b - a for a, b in zip(c0, c1, strict=True)]
    dm = [b - a for a, b in zip(m0, m1, strict=True)]
    unknown, t, dt = start, mpfr(0), mpfr(1)
    try:
        for _ in range(MOST_STEPS):  # a balance that ends at a trace is approached by decades
            tangent = _tangent(system, unknown, [a + t * d for a, d in zip(c0, dc, strict=True)], dc, dm)
            while True:
                dt = min(dt, 1 - t)
                new = t + dt if dt < 1 - t else mpfr(1)
                system.m = [a + new * d for a, d in zip(m0, dm, strict=True)]
                c = [a + new * d for a, d in zip(c0, dc, strict=True)]
                predicted = [u + dt * v for u, v in zip(unknown, tangent, strict=True)]
                try:
                    unknown, _, _, used = reference._newton(system, predicted, c, mpfr("1e-2"), 6)
                except (ArithmeticError, ZeroDivisionError):
                    dt /= 4
                    if dt < mpfr("1e-60"):
                        raise ArithmeticError(f"the homotopy stalls at t = {float(t)}") from None
                    continue
                t, dt = new, dt * (4 if used <= 2 else 2 if used <= 3 else 1)
                break
            if t == 1:
                return unknown
        raise ArithmeticError(f"the homotopy has come to t = {float(t)} only")
    finally:
        system.m = m1


def _tangent(system: Any, unknown: list[Any], c: list[Any], dc: list[Any], dm: list[Any]) -> list[Any]:
    """d(unknown)/dt for potentials and balance moving at the rates dc and dm."""
    n = [gmpy2.exp(v) for v in system.log_amounts(unknown, c)]
    M = system.matrix(n, gmpy2.exp(unknown[-1]))
    M[-1][-1] = mpfr(0)
    weighted = [v * d for v, d in zip(n, dc, strict=True)]
    rhs = [
        gmpy2.fsum([d, *(v * weighted[j] for j, v in row)])
        for d, row in zip(dm, system.row_terms, strict=True)
    ]
    (tangent,), _ = reference._solve(M, [[*rhs, gmpy2.fsum(weighted)]])
    return list(tangent)


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
    else:  # the gas is then a phase like the others: an amount lost in the rounding of the feed is none
        np.testing.assert_allclose(amounts[~condensed], 0.0, atol=1e-15 * feed_size, err_msg="a gas")
