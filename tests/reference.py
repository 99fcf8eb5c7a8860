"""Extended-precision equilibrium of an ideal gas, an independent judge of the minimiser.

Problem: minimise sum n_j (c_j + ln(n_j / N)) subject to A n = b, n >= 0, N = sum n_j, all inputs taken as
exact rational numbers (a double is one).  The objective is convex, so whatever satisfies

    A n = b,   n_j = N exp(a_j . pi - c_j) for every species that can be non-zero,   N = sum n_j

is the solution, however it was found; `solve` therefore verifies these three statements on its answer and
raises `UnprovedError` when it cannot.  It shares no code with the package:

1. exact rational arithmetic (simplex with Bland's rule on `gmpy2.mpq`) drops redundant rows, proves
   infeasibility, finds every species that no feasible composition contains, an interior composition n1,
   and the vertex that is optimal without the entropy of mixing;
2. the species of that vertex are the components, in which the balance is C n = m with exact C and m, so
   that a trace of 1e-300 is not drowned by a major in the same row;
3. homotopy: n1 is the exact solution for potentials c(0) = -ln x1; c(t) moves in a straight line to the
   true ones while the balance stays exact, followed by tangent predictor and Newton corrector in ln n;
4. Newton at the end until the correction of every ln n_j is below 10^(-digits/2), with the pivots of the
   elimination watched; a system too ill-conditioned for the digits in use is solved again with twice as many.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import gmpy2
import numpy as np
from gmpy2 import mpfr, mpq

DEFAULT_DIGITS = 120
LARGEST_DIGITS = 960
Exact = int | float | Fraction


class UnprovedError(AssertionError):
    """The reference could not prove an answer."""


class InfeasibleError(ValueError):
    """No non-negative amounts of the species have these element amounts."""


@dataclass(frozen=True)
class Reference:
    """A verified solution.

    log_mole_fractions : float64 (S,), -inf for species that the balance excludes
    amounts            : float64 (S,) mol, zero where below the range of a double
    excluded           : bool (S,)
    exact_log_amounts  : gmpy2.mpfr, ln(n_j / mol) (None for excluded species), digits as below
    exact_log_total    : ln(N / mol)
    gibbs_energy       : mpfr, sum n_j (c_j + ln x_j) [mol]
    digits             : decimal digits of the arithmetic that satisfied the checks
    balance_residual   : largest |A n - b| relative to the largest term of its row, in the component basis
    newton_correction  : largest last correction of any ln n_j
    """

    log_mole_fractions: np.ndarray
    amounts: np.ndarray
    excluded: np.ndarray
    exact_log_amounts: list[Any]
    exact_log_total: Any
    gibbs_energy: Any
    digits: int
    balance_residual: float
    newton_correction: float
    steps: int


def exact(value: Any) -> mpq:
    """The rational number that an int, Fraction, float or numpy scalar is."""
    if isinstance(value, Fraction):
        return mpq(value.numerator, value.denominator)
    if isinstance(value, (int, np.integer)):
        return mpq(int(value))
    return mpq(*float(value).as_integer_ratio())


# -------------------------------------------------------------------------------------------- exact algebra


class Tableau:
    """B^-1 [A | b] for the current basis B, in rationals.  `basis[i]` is the column of row i."""

    def __init__(self, A: list[list[mpq]], b: list[mpq]) -> None:
        self.rows = [[*row, value] for row, value in zip(A, b, strict=True)]
        self.columns = len(A[0])
        self.basis: list[int] = []

    def pivot(self, row: int, column: int) -> None:
        lead = self.rows[row][column]
        self.rows[row] = pivot_row = [value / lead if value else value for value in self.rows[row]]
        nonzero = [(k, value) for k, value in enumerate(pivot_row) if value]
        for i, other in enumerate(self.rows):
            factor = other[column]
            if i != row and factor:
                for k, value in nonzero:
                    other[k] -= factor * value
        self.basis[row] = column

    def minimise(self, cost: list[mpq]) -> None:
        """Simplex with Bland's rule from the present feasible basis; the feasible set must be bounded."""
        while True:
            in_basis = set(self.basis)
            entering = -1
            weights = [cost[j] for j in self.basis]
            for j in range(self.columns):
                if j in in_basis:
                    continue
                reduced = cost[j]
                for weight, row in zip(weights, self.rows, strict=True):
                    if weight and row[j]:
                        reduced -= weight * row[j]
                if reduced < 0:
                    entering = j
                    break
            if entering < 0:
                return
            best: tuple[mpq, int, int] | None = None
            for i, row in enumerate(self.rows):
                if row[entering] > 0:
                    candidate = (row[-1] / row[entering], self.basis[i], i)
                    if best is None or candidate < best:
                        best = candidate
            if best is None:
                raise UnprovedError("unbounded feasible set: a species without elements is among the columns")
            self.pivot(best[2], entering)

    def vertex(self) -> list[mpq]:
        n = [mpq(0)] * self.columns
        for i, j in enumerate(self.basis):
            n[j] = self.rows[i][-1]
        return n


def _feasible_tableau(A: list[list[mpq]], b: list[mpq]) -> Tableau:
    """A tableau with a feasible basis and without redundant rows (phase one with artificial columns)."""
    count, S = len(A), len(A[0])
    signed = [
        ([-v for v in row], -value) if value < 0 else (list(row), value)
        for row, value in zip(A, b, strict=True)
    ]
    tableau = Tableau(
        [row + [mpq(int(i == k)) for k in range(count)] for i, (row, _) in enumerate(signed)],
        [value for _, value in signed],
    )
    tableau.basis = [S + i for i in range(count)]
    tableau.minimise([mpq(0)] * S + [mpq(1)] * count)
    if any(j >= S and row[-1] != 0 for j, row in zip(tableau.basis, tableau.rows, strict=True)):
        raise InfeasibleError("no non-negative amounts of these species have these element amounts")
    for i in range(count):  # artificial columns that stay at zero: exchange them, or the row is redundant
        if tableau.basis[i] >= S:
            column = next((j for j in range(S) if tableau.rows[i][j] != 0), None)
            if column is not None:
                tableau.pivot(i, column)
    keep = [i for i in range(count) if tableau.basis[i] < S]
    tableau.rows = [tableau.rows[i][:S] + tableau.rows[i][-1:] for i in keep]
    tableau.basis = [tableau.basis[i] for i in keep]
    tableau.columns = S
    return tableau


def interior_point(tableau: Tableau) -> list[mpq]:
    """A feasible composition with every species positive that can be: a mean of vertices."""
    positive = {j for j, value in enumerate(tableau.vertex()) if value > 0}
    vertices = [tableau.vertex()]
    while len(positive) < tableau.columns:
        tableau.minimise([mpq(0) if j in positive else mpq(-1) for j in range(tableau.columns)])
        vertex = tableau.vertex()
        new = {j for j, value in enumerate(vertex) if value > 0} - positive
        if not new:
            break
        positive |= new
        vertices.append(vertex)
    weight = mpq(1, len(vertices))
    return [weight * sum(vertex[j] for vertex in vertices) for j in range(tableau.columns)]


def support(formula_matrix: Any, element_amounts: Sequence[Exact] | np.ndarray) -> np.ndarray:
    """bool (S,): True for species that some feasible composition contains.  Raises InfeasibleError."""
    A = [[exact(v) for v in row] for row in formula_matrix]
    point = interior_point(_feasible_tableau(A, [exact(v) for v in element_amounts]))
    return np.array([value > 0 for value in point])


# --------------------------------------------------------------------------------------- extended precision


def _real(value: mpq) -> Any:
    return mpfr(value)


class _System:
    """C n = m, n_j = N exp(C_j . lambda - c_j) in one precision; unknown lambda (r) and nu = ln N."""

    def __init__(self, C: list[list[mpq]], m: list[mpq]) -> None:
        self.r, self.S = len(C), len(C[0])
        # whole numbers stay Python ints: mpfr * int is cheaper than mpfr * mpfr and exact
        number = [[int(v) if v.denominator == 1 else _real(v) for v in row] for row in C]
        self.row_terms = [[(j, v) for j, v in enumerate(row) if v] for row in number]
        self.column_terms = [
            [(i, number[i][j]) for i in range(self.r) if number[i][j]] for j in range(self.S)
        ]
        self.products = {
            (i, k): [(j, v * number[k][j]) for j, v in self.row_terms[i] if number[k][j]]
            for i in range(self.r)
            for k in range(i, self.r)
        }
        self.m = [_real(v) for v in m]

    def log_amounts(self, unknown: list[Any], c: list[Any]) -> list[Any]:
        nu = unknown[-1]
        result = []
        for j, terms in enumerate(self.column_terms):
            total = nu - c[j]
            for i, v in terms:
                total += v * unknown[i]
            result.append(total)
        return result

    def matrix(self, n: list[Any], N: Any) -> list[list[Any]]:
        r = self.r
        M = [[mpfr(0)] * (r + 1) for _ in range(r + 1)]
        for (i, k), terms in self.products.items():
            total = mpfr(0)
            for j, v in terms:
                total += v * n[j]
            M[i][k] = M[k][i] = total
        for i, row in enumerate(self.row_terms):
            total = mpfr(0)
            for j, v in row:
                total += v * n[j]
            M[i][r] = M[r][i] = total
        M[r][r] = gmpy2.fsum(n) - N
        return M

    def residual(self, M: list[list[Any]]) -> list[Any]:
        """-(C n - m), -(sum n - N); the first r come from the last column of the matrix."""
        return [self.m[i] - M[i][self.r] for i in range(self.r)] + [-M[self.r][self.r]]


def _solve(M: list[list[Any]], rhs: list[list[Any]]) -> tuple[list[list[Any]], Any]:
    """Gaussian elimination with full row scaling and partial pivoting; also the smallest scaled pivot."""
    size = len(M)
    scale: list[Any] = [
        gmpy2.sqrt(abs(M[i][i])) if M[i][i] > 0 and i < size - 1 else None for i in range(size)
    ]
    last = max((abs(M[i][size - 1]) / scale[i] for i in range(size - 1) if scale[i]), default=mpfr(1))
    scale = [s if s else (last if last > 0 else mpfr(1)) for s in scale]
    rows = [
        [M[i][k] / (scale[i] * scale[k]) for k in range(size)] + [vector[i] / scale[i] for vector in rhs]
        for i in range(size)
    ]
    smallest = mpfr("inf")
    for p in range(size):
        best = max(range(p, size), key=lambda i: abs(rows[i][p]))
        rows[p], rows[best] = rows[best], rows[p]
        pivot = rows[p][p]
        smallest = min(smallest, abs(pivot))
        if pivot == 0:
            raise ZeroDivisionError
        for i in range(p + 1, size):
            factor = rows[i][p]
            if factor:
                factor /= pivot
                row, lead = rows[i], rows[p]
                for k in range(p + 1, size + len(rhs)):
                    row[k] -= factor * lead[k]
    solutions = []
    for v in range(len(rhs)):
        x = [mpfr(0)] * size
        for i in reversed(range(size)):
            total = rows[i][size + v]
            for k in range(i + 1, size):
                total -= rows[i][k] * x[k]
            x[i] = total / rows[i][i]
        solutions.append([x[i] / scale[i] for i in range(size)])
    return solutions, smallest


def _changes(system: _System, step: list[Any]) -> list[Any]:
    changes = []
    for terms in system.column_terms:
        total = step[-1]
        for i, v in terms:
            total += v * step[i]
        changes.append(total)
    return changes


def _newton(
    system: _System, unknown: list[Any], c: list[Any], goal: Any, limit: int
) -> tuple[list[Any], Any, Any, int]:
    """Plain Newton until the largest |d ln n| is below goal; ArithmeticError if it does not contract."""
    previous = None
    for step in range(1, limit + 1):
        log_n = system.log_amounts(unknown, c)
        n = [gmpy2.exp(v) for v in log_n]
        M = system.matrix(n, gmpy2.exp(unknown[-1]))
        (delta,), pivot = _solve(M, [system.residual(M)])
        largest = max(abs(v) for v in _changes(system, delta))
        unknown = [u + d for u, d in zip(unknown, delta, strict=True)]
        if not gmpy2.is_finite(largest) or largest > 3 or (previous is not None and largest > previous / 2):
            raise ArithmeticError("no contraction")
        if largest < goal:
            return unknown, largest, pivot, step
        previous = largest
    raise ArithmeticError("too many steps")


def _tangent(system: _System, unknown: list[Any], c: list[Any], dc: list[Any]) -> list[Any]:
    """d(unknown)/dt for potentials moving at the rate dc: C D (C^T lambda' + nu') = C D dc."""
    n = [gmpy2.exp(v) for v in system.log_amounts(unknown, c)]
    M = system.matrix(n, gmpy2.exp(unknown[-1]))
    M[-1][-1] = mpfr(0)
    weighted = [v * d for v, d in zip(n, dc, strict=True)]
    rhs = []
    for row in system.row_terms:
        total = mpfr(0)
        for j, v in row:
            total += v * weighted[j]
        rhs.append(total)
    rhs.append(gmpy2.fsum(weighted))
    (tangent,), _ = _solve(M, [rhs])
    return tangent


def _follow(system: _System, start: list[Any], c0: list[Any], c1: list[Any]) -> tuple[list[Any], int]:
    """Homotopy from (start, c0), solved exactly, to c1."""
    dc = [b - a for a, b in zip(c0, c1, strict=True)]
    unknown, t, dt, steps = start, mpfr(0), mpfr(1), 0
    coarse = mpfr("1e-2")
    while t < 1:
        at = [a + t * d for a, d in zip(c0, dc, strict=True)]
        tangent = _tangent(system, unknown, at, dc)
        steps += 1
        while True:
            dt = min(dt, 1 - t)
            predicted = [u + dt * v for u, v in zip(unknown, tangent, strict=True)]
            new = t + dt if dt < 1 - t else mpfr(1)
            try:
                corrected, _, _, used = _newton(
                    system, predicted, [a + new * d for a, d in zip(c0, dc, strict=True)], coarse, 6
                )
            except (ArithmeticError, ZeroDivisionError):
                steps += 1
                dt /= 4
                if dt < mpfr("1e-12"):
                    raise UnprovedError(f"the homotopy stalls at t = {float(t)}") from None
                continue
            steps += used
            unknown, t = corrected, new
            dt *= 4 if used <= 2 else 2 if used <= 3 else 1
            break
    return unknown, steps


# ------------------------------------------------------------------------------------------------ the judge


def solve(
    formula_matrix: Any,
    element_amounts: Sequence[Exact] | np.ndarray,
    potentials: Sequence[Any] | np.ndarray,
    *,
    digits: int = DEFAULT_DIGITS,
) -> Reference:
    """The verified equilibrium of an ideal gas.

    formula_matrix (E, S), element_amounts (E,) [mol], potentials (S,) [-] = mu0/RT + ln(p/p0), all taken
    exactly. digits is the least precision to use; more is taken where the problem needs it.
    Raises InfeasibleError, or UnprovedError when no answer could be proved.
    """
    A = [[exact(v) for v in row] for row in formula_matrix]
    b = [exact(v) for v in element_amounts]
    c = [exact(v) for v in potentials]
    tableau = _feasible_tableau(A, b)
    inside = interior_point(tableau)
    kept = [j for j, value in enumerate(inside) if value > 0]
    if not kept:
        raise InfeasibleError("there is no matter in the feed")
    # on the kept species alone: rows that only excluded species touched become 0 = 0 and are dropped again
    tableau = _feasible_tableau([[row[j] for j in kept] for row in A], b)
    # coarse potentials keep the rationals short; the vertex only chooses components and the start
    tableau.minimise([mpq(round(float(c[j]) * 64), 64) for j in kept])
    last_error: Exception | None = None
    while digits <= LARGEST_DIGITS:
        try:
            return _solve_with(digits, tableau, [inside[j] for j in kept], kept, len(c), [c[j] for j in kept])
        except (ArithmeticError, ZeroDivisionError, UnprovedError) as error:
            last_error = error
            digits *= 2
    raise UnprovedError(f"not proved with {LARGEST_DIGITS} digits: {last_error}")


def excess(
    formula_matrix: Any, potentials: Sequence[Any] | np.ndarray, amounts: Sequence[float] | np.ndarray
) -> float:
    """(G - Gmin)/RT [mol] of these very amounts (doubles, taken exactly) over the minimum for their own
    balance."""
    n = [exact(v) for v in amounts]
    b = [sum((exact(a) * v for a, v in zip(row, n, strict=True) if a), mpq(0)) for row in formula_matrix]
    totals = [Fraction(int(v.numerator), int(v.denominator)) for v in b]
    least = solve(formula_matrix, totals, potentials)
    with gmpy2.context(precision=500) as context:
        context.emax, context.emin = gmpy2.get_emax_max(), gmpy2.get_emin_min()
        N = _real(sum(n))
        energy = gmpy2.fsum(
            [
                _real(v) * (_real(exact(c)) + gmpy2.log(_real(v) / N))
                for v, c in zip(n, potentials, strict=True)
                if v
            ]
        )
        above = energy - least.gibbs_energy
        if above < -(mpfr(10) ** -90):
            raise UnprovedError(f"an energy {float(above):.1e} below the minimum")
        return max(float(above), 0.0)  # rounding of the last digits


def _solve_with(
    digits: int, tableau: Tableau, inside: list[mpq], kept: list[int], S: int, c_exact: list[mpq]
) -> Reference:
    with gmpy2.context(precision=int(digits * 3.3219281) + 32) as context:
        context.emax, context.emin = gmpy2.get_emax_max(), gmpy2.get_emin_min()
        C = [row[:-1] for row in tableau.rows]
        m = [row[-1] for row in tableau.rows]
        system = _System(C, m)
        # lambda_i = ln x_i of component i: potentials measured from the components', exactly
        relative = [
            _real(c_j - sum((C[i][k] * c_exact[tableau.basis[i]] for i in range(system.r)), mpq(0)))
            for k, c_j in enumerate(c_exact)
        ]
        log_inside = [gmpy2.log(_real(v)) for v in inside]
        log_N = gmpy2.log(_real(sum(inside)))
        start = [log_inside[j] - log_N for j in tableau.basis] + [log_N]
        c0 = [
            v + n
            for v, n in zip(
                system.log_amounts(start, [mpfr(0)] * system.S), (-v for v in log_inside), strict=True
            )
        ]
        unknown, steps = _follow(system, start, c0, relative)
        goal = mpfr(10) ** (-digits // 2)
        unknown, correction, pivot, used = _newton(system, unknown, relative, goal, 30)
        if pivot < mpfr(10) ** (-digits // 3):
            raise UnprovedError(f"pivot {float(pivot):.1e} too small for {digits} digits")

        log_n = system.log_amounts(unknown, relative)
        n = [gmpy2.exp(v) for v in log_n]
        N = gmpy2.exp(unknown[-1])
        residual = mpfr(0)
        for row, target in zip(
            [*system.row_terms, [(j, 1) for j in range(system.S)]], [*system.m, N], strict=True
        ):
            terms = [v * n[j] for j, v in row]
            residual = max(residual, abs(gmpy2.fsum([*terms, -target])) / max(abs(v) for v in terms))
        if residual > mpfr(10) ** (20 - digits):
            raise UnprovedError(f"balance residual {float(residual):.1e} with {digits} digits")
        gibbs = gmpy2.fsum(
            [v * (_real(c_j) + ln - unknown[-1]) for v, c_j, ln in zip(n, c_exact, log_n, strict=True)]
        )

        log_x = np.full(S, -np.inf)
        amounts = np.zeros(S)
        exact_log: list[Any] = [None] * S
        for k, j in enumerate(kept):
            log_x[j] = float(log_n[k] - unknown[-1])
            amounts[j] = float(n[k])
            exact_log[j] = log_n[k]
        return Reference(
            log_mole_fractions=log_x,
            amounts=amounts,
            excluded=~np.isfinite(log_x),
            exact_log_amounts=exact_log,
            exact_log_total=unknown[-1],
            gibbs_energy=gibbs,
            digits=digits,
            balance_residual=float(residual),
            newton_correction=float(correction),
            steps=steps + used,
        )
