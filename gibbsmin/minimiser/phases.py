"""Gas beside pure condensed phases: which phases are present, and how much of each.

A pure condensed phase k has the fixed potential g_k. Present, it takes part in the balances with any amount
n_k >= 0 and demands a_k.pi = g_k; absent, it demands a_k.pi <= g_k. For a chosen set W of independent phases the rest is
a gas problem again: with W among the components, each species is written in W and gas components,

    balances of the gas components:  sum_j C_ij n_j = m_i      (no n_k in them)
    potentials of the gas:           c_j - sum_k C_kj g_k

and the balances of W only say what is left for them, n_k = m_k - sum_j C_kj n_j. So `minimise` solves it as it stands.

The linear program over all species (vertex.py) proposes W. Each answer tells what is wrong with it: a negative amount
(the phase goes) or a supersaturated absent phase (it comes, in exchange for another if it depends on W). Points travel in
groups of equal W. A point that would meet a W again is handed to the interior method (interior.py), which follows a path
and cannot cycle.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gibbsmin.minimiser.certificate import log_sum
from gibbsmin.minimiser.components import Amounts, Components, Floats, FormulaSystem, Indices
from gibbsmin.minimiser.equilibria import Equilibria
from gibbsmin.minimiser.interior import Inside, follow_path
from gibbsmin.minimiser.posing import Posed
from gibbsmin.minimiser.result import Minimum
from gibbsmin.minimiser.vertex import PIVOT_SIZE, UnboundedError, optimal_vertices

NEGATIVE_AMOUNT = 1e-13
"""Amounts of phases above minus this part of the feed are zero: the phase is at its boundary."""

CANCELLED = 1e-3
"""An amount below this part of the terms it is the difference of is made anew."""

STAYS = 1e6
"""Weight by which a present phase stays among the components, whatever the gas."""

MOST_GUESSES = 20
"""Phases tried as the trace that is missing."""

SUPERSATURATION = 1e-11
"""ln activity of an absent phase up to which it is at its boundary: the rounding of potentials of some hundreds of RT."""


@dataclass(frozen=True)
class GasProblem:
    """The gas that is left when the phases W are present.

    matrix (q, s) of the gas species `gas` (indices into the posed species); rows of the gas components.
    """

    posed: Posed
    present: tuple[int, ...]
    gas: Indices
    components: Components
    gas_rows: Indices
    phase_rows: Indices
    empty_rows: Indices
    matrix: Floats

    @classmethod
    def of(cls, posed: Posed, condensed: NDArray[np.bool_], present: tuple[int, ...]) -> GasProblem | None:
        """The gas problem beside phases `present` (positions among the posed species); None if these are dependent."""
        system = posed.system
        gas = np.flatnonzero(~condensed)
        others = np.setdiff1d(np.flatnonzero(condensed), present, assume_unique=True)
        order = np.concatenate([np.array(present, dtype=np.intp), gas, others])
        columns = system.independent_columns(order)
        if not set(present) <= set(columns):
            return None
        components = system.components(columns)
        is_present = np.isin(components.columns, present)
        is_gas = ~condensed[components.columns]
        gas_rows = np.flatnonzero(is_gas)
        matrix = components.integer_C[np.ix_(gas_rows, gas)].astype(np.float64) / system.scale[gas]
        empty = np.flatnonzero(~is_present & ~is_gas)
        return cls(posed, present, gas, components, gas_rows, np.flatnonzero(is_present), empty, matrix)

    def amounts(self, b: Amounts) -> Amounts:
        """(n, q) element amounts of the gas problem, exact, from independent element amounts b (n, r)."""
        distinct: dict[tuple[Any, ...], list[Fraction]] = {}
        out = np.empty((len(b), len(self.gas_rows)), dtype=object)
        for point, row in enumerate(b):
            key = tuple(row.tolist())
            if key not in distinct:
                distinct[key] = self.components.scaled_amounts(row, self.gas_rows)
            out[point] = distinct[key]
        return out

    def potentials(self, c: Floats) -> Floats:
        """(n, s) potentials of the gas species less those of the phases in them; c (n, S) of all posed species."""
        phases = self.components.columns[self.phase_rows]
        out: Floats = c[:, self.gas] - c[:, phases] @ self.components.C[np.ix_(self.phase_rows, self.gas)]
        return out


GasSolver = Callable[[Floats, Amounts, Floats], Minimum]


def solve_beside(problem: GasProblem, b: Amounts, c: Floats, solve_gas: GasSolver) -> Equilibria:
    """Equilibria with exactly the phases of `problem`, whether or not their amounts come out negative.

    Parameters: b (n, r) independent element amounts [mol]; c (n, S) potentials of all posed species.
    """
    if not (problem.gas.size and problem.gas_rows.size):
        return _without_gas(problem, b, c)
    components = problem.components
    C = components.C
    n, S = c.shape
    m = components.amounts(b)
    found = solve_gas(problem.matrix, problem.amounts(b), problem.potentials(c))
    solved = found.solved & (m[:, problem.empty_rows] == 0.0).all(axis=1)
    # a species that only these phases rule out calls for another phase to be present
    solved &= np.isfinite(found.log_mole_fractions).all(axis=1)
    amounts = np.zeros((n, S))
    amounts[:, problem.gas] = found.amounts
    phases = components.columns[problem.phase_rows]
    amounts[:, phases] = _held(problem, m, found, b)
    potentials = np.zeros((n, len(C)))
    own = np.searchsorted(problem.gas, components.columns[problem.gas_rows])
    potentials[:, problem.gas_rows] = found.element_potentials @ problem.matrix[:, own]
    potentials[:, problem.phase_rows] = c[:, phases]
    # a component that no gas touches and that is absent: as stable as it may be without forming
    potentials[:, problem.empty_rows] = c[:, components.columns[problem.empty_rows]]
    log_activities = potentials @ C - c
    log_activities[:, problem.gas] = found.log_mole_fractions
    log_activities[:, phases] = 0.0
    return Equilibria(components, amounts, log_activities, potentials, found.iterations, solved)


def _held(problem: GasProblem, m: Floats, found: Minimum, b: Amounts) -> Floats:
    """(n, k) what is left for the present phases.

    Where little is left of much, components as abundant as this composition allows make the difference again without
    cancellation: the phase of a scarce element is then counted by that element.
    """
    components = problem.components
    C = components.C[np.ix_(problem.phase_rows, problem.gas)]
    held: Floats = m[:, problem.phase_rows] - found.amounts @ C.T
    terms = np.abs(m[:, problem.phase_rows]) + found.amounts @ np.abs(C).T
    phases = components.columns[problem.phase_rows]
    for point in np.flatnonzero((np.abs(held) < CANCELLED * terms).any(axis=1) & found.solved):
        weights = np.full(components.C.shape[1], -np.inf)
        weights[problem.gas] = found.log_mole_fractions[point]
        weights[phases] = STAYS
        if not np.isfinite(weights[components.columns]).all():
            continue
        adapted = components.adapted(weights)
        rows = np.searchsorted(adapted.columns, phases)
        left = adapted.amounts(b[point : point + 1])[0, rows]
        held[point] = left - adapted.C[np.ix_(rows, problem.gas)] @ found.amounts[point]
    return held


def _without_gas(problem: GasProblem, b: Amounts, c: Floats) -> Equilibria:
    """Phases that fix all potentials by themselves; the activities of the gas are those it would have."""
    components = problem.components
    m = components.amounts(b)
    phases = components.columns[problem.phase_rows]
    amounts = np.zeros(c.shape)
    amounts[:, phases] = m[:, problem.phase_rows]
    potentials = c[:, components.columns]
    log_activities = potentials @ components.C - c
    log_activities[:, phases] = 0.0
    solved = (m[:, problem.empty_rows] == 0.0).all(axis=1)
    if problem.gas.size:
        solved &= log_sum(log_activities[:, problem.gas]) <= SUPERSATURATION
    return Equilibria(
        components, amounts, log_activities, potentials, np.zeros(len(c), dtype=np.intp), solved
    )


def next_phases(
    problem: GasProblem, answer: Equilibria, condensed: NDArray[np.bool_], size: Floats
) -> list[tuple[int, ...] | None]:
    """The phases to try next at each point (n,); the present ones where the answer stands, None where it is no help.

    size (n,) mol: a negative amount up to NEGATIVE_AMOUNT of it stands; zero asks for none.
    """
    present = np.array(problem.present, dtype=np.intp)
    absent = np.setdiff1d(np.flatnonzero(condensed), present, assume_unique=True)
    out: list[tuple[int, ...] | None] = []
    for point, solved in enumerate(answer.solved):
        if not solved:
            out.append(_for_gas(problem, answer, point))
            continue
        held = answer.amounts[point, present]
        if held.size and held.min() < -NEGATIVE_AMOUNT * size[point]:
            out.append(_without(problem.present, int(present[np.argmin(held)])))
            continue
        excess = answer.log_activities[point, absent]
        if absent.size and excess.max() > SUPERSATURATION:
            out.append(_with(problem, int(absent[np.argmax(excess)]), answer.amounts[point]))
            continue
        out.append(problem.present)
    return out


def _for_gas(problem: GasProblem, answer: Equilibria, point: int) -> tuple[int, ...] | None:
    """Phases that fix all potentials, with a gas above saturation: the one that the gas uses up first goes."""
    gas = answer.log_activities[point, problem.gas]
    if problem.gas_rows.size or not problem.gas.size or not np.isfinite(gas).any():
        return None
    columns = problem.components.columns
    used = problem.components.C[:, problem.gas] @ np.exp(gas - gas.max())
    held = answer.amounts[point, columns]
    if log_sum(gas[None])[0] <= SUPERSATURATION or (held < 0.0).any() or not (used > PIVOT_SIZE).any():
        return None
    ratio = np.divide(held, used, where=used > PIVOT_SIZE, out=np.full(len(used), np.inf))
    return _without(problem.present, int(columns[np.argmin(ratio)]))


def _without(phases: tuple[int, ...], phase: int) -> tuple[int, ...]:
    return tuple(each for each in phases if each != phase)


def _with(problem: GasProblem, phase: int, amounts: Floats) -> tuple[int, ...]:
    """Add a phase; if it can be made of present ones alone, it replaces the one that making it uses up first."""
    column = problem.components.C[:, phase]
    phases = problem.present
    if not (np.abs(column[problem.gas_rows]) > PIVOT_SIZE).any():
        making = column[problem.phase_rows]
        used = np.flatnonzero(making > PIVOT_SIZE)
        if used.size:
            members = problem.components.columns[problem.phase_rows[used]]
            phases = _without(phases, int(members[np.argmin(amounts[members] / making[used])]))
    return tuple(sorted((*phases, phase)))


def settle(
    posed: Posed,
    condensed: NDArray[np.bool_],
    first: dict[tuple[int, ...], Indices],
    start: Components,
    b: Amounts,
    c: Floats,
    solve_gas: GasSolver,
) -> Iterator[tuple[Indices, Equilibria]]:
    """Find the phases of all points, and their equilibria.

    Parameters
    ----------
    condensed : (S,) which posed species are pure condensed phases.
    first : points by the phases to try first.
    start : components from which the interior method may begin.
    b, c : (n, r) independent element amounts [mol], (n, S) potentials.
    solve_gas : takes (formula matrix, element amounts, potentials) of the gas beside the phases.

    Yields points and their equilibria; `solved` is False where none was found.
    """
    size = np.abs(b.astype(np.float64)).sum(axis=1)
    tried: list[set[tuple[int, ...]]] = [set() for _ in range(len(b))]
    queue = dict(first)
    lost: list[int] = []
    while queue:
        phases, points = queue.popitem()
        problem = GasProblem.of(posed, condensed, phases)
        if problem is None:
            lost.extend(points.tolist())
            continue
        answer = solve_beside(problem, b[points], c[points], solve_gas)
        following = next_phases(problem, answer, condensed, 0.0 * size[points])
        if any(
            each != phases and each in tried[p] for p, each in zip(points.tolist(), following, strict=True)
        ):
            # to and fro between two sets: at a boundary, where rounding decides
            following = next_phases(problem, answer, condensed, size[points])
        stands = np.array([each == phases for each in following])
        if stands.any():
            yield points[stands], answer.take(stands)
        onward: dict[tuple[int, ...], list[int]] = {}
        for point, each in zip(points[~stands].tolist(), itertools.compress(following, ~stands), strict=True):
            tried[point].add(phases)
            if each is None or each in tried[point]:
                lost.append(point)
            else:
                onward.setdefault(each, []).append(point)
        for each, members in onward.items():
            queue[each] = np.concatenate([queue.get(each, np.zeros(0, dtype=np.intp)), members])
    for point in lost:
        yield (
            np.array([point]),
            _from_inside(posed, condensed, start, b[point], c[point], float(size[point]), solve_gas),
        )


def _from_inside(
    posed: Posed,
    condensed: NDArray[np.bool_],
    start: Components,
    b: Amounts,
    c: Floats,
    size: float,
    solve_gas: GasSolver,
) -> Equilibria:
    """One point by the interior method; the phases it shows are then taken exactly."""
    inside = follow_path(posed, condensed, start, b, c)
    slack = -inside.log_activities
    held = inside.amounts / size
    likely = np.flatnonzero(inside.staying)
    order = likely[np.argsort(slack[likely] / held[likely], kind="stable")]
    others = np.setdiff1d(np.arange(len(c)), order, assume_unique=True)
    columns = posed.system.independent_columns(np.concatenate([order, others]))
    phases = tuple(sorted(set(columns) & set(likely.tolist())))
    if not inside.gas_stays:
        return _gas_free(posed, condensed, inside, phases, b, c, size)
    for guess in _guesses(posed, phases, condensed, inside, b, c):
        answer = _exchanged(posed, condensed, guess, b, c, size, solve_gas)
        if answer is not None:
            answer.steps += inside.steps
            return answer
    return _as_it_is(inside, c)


def _guesses(
    posed: Posed,
    phases: tuple[int, ...],
    condensed: NDArray[np.bool_],
    inside: Inside,
    b: Amounts,
    c: Floats,
) -> Iterator[tuple[int, ...]]:
    """The phases that the interior method shows; then with those that traces call for, too few for it to show."""
    yield phases
    more = _with_trace_phases(posed, phases, condensed, inside, b, c)
    while more is not None:  # traces of the next level, and so on
        yield more
        further = _with_trace_phases(posed, more, condensed, inside, b, c)
        more = further if further != more else None
    absent = np.setdiff1d(np.flatnonzero(condensed), phases)
    for phase in absent[np.argsort(-inside.log_activities[absent], kind="stable")][:MOST_GUESSES]:
        yield tuple(sorted((*phases, int(phase))))


def _with_trace_phases(
    posed: Posed,
    phases: tuple[int, ...],
    condensed: NDArray[np.bool_],
    inside: Inside,
    b: Amounts,
    c: Floats,
) -> tuple[int, ...] | None:
    """Add the phases that take part in the cheapest way to balance traces where the major species leave a zero.

    As start.py does for a gas: among the species that touch the degenerate balances, the linear program of least cost;
    a phase counts nothing in the sum, since its amount adds no mixing term.
    """
    weights = np.where(condensed, inside.log_activities - STAYS, inside.log_activities)
    weights[list(phases)] = STAYS
    components = inside.components.adapted(weights)
    columns = components.columns
    m = components.amounts(b[None, :])[0]
    is_phase = np.isin(columns, phases)
    rows = np.flatnonzero(~is_phase & (m == 0.0))
    if is_phase.sum() != len(phases) or not rows.size:
        return None
    known = np.where(is_phase, 0.0, inside.log_activities[columns])
    known[rows] = 0.0
    touched = np.flatnonzero((np.abs(components.C[rows]) > PIVOT_SIZE).any(axis=0))
    cost = components.offsets(c[None, :])[0] - known @ components.C
    scale = posed.system.scale[touched]
    counted = np.where(condensed[touched], 0.0, scale).astype(components.integer_C.dtype)
    level = FormulaSystem(np.vstack([components.integer_C[np.ix_(rows, touched)], counted]), scale)
    if level.rank <= len(rows):
        return None
    one = np.zeros((1, level.rank))
    one[0, -1] = 1.0
    try:
        groups, _ = optimal_vertices(level, one, cost[None, touched])
    except UnboundedError:
        return None
    for group in groups:
        carried = touched[group.components.columns[group.amounts[0] > 0.0]]
        return tuple(sorted({*phases, *carried[condensed[carried]].tolist()}))
    return None


def _exchanged(
    posed: Posed,
    condensed: NDArray[np.bool_],
    phases: tuple[int, ...],
    b: Amounts,
    c: Floats,
    size: float,
    solve_gas: GasSolver,
) -> Equilibria | None:
    """One point from a guess of its phases, by exchanges; None if they come to no end."""
    tried: set[tuple[int, ...]] = set()
    following: tuple[int, ...] | None = phases
    while following is not None and following not in tried:
        tried.add(following)
        problem = GasProblem.of(posed, condensed, following)
        if problem is None:
            return None
        answer = solve_beside(problem, b[None, :], c[None, :], solve_gas)
        (following,) = next_phases(problem, answer, condensed, np.zeros(1))
        if following in tried:
            (following,) = next_phases(problem, answer, condensed, np.array([size]))
        if following == problem.present:
            return answer
    return None


def _gas_free(
    posed: Posed,
    condensed: NDArray[np.bool_],
    inside: Inside,
    phases: tuple[int, ...],
    b: Amounts,
    c: Floats,
    size: float,
) -> Equilibria:
    """Phases alone hold the feed; the potentials are those of the interior point, which leave the gas below saturation."""
    problem = GasProblem.of(posed, condensed, phases)
    if problem is None:
        return _as_it_is(inside, c)
    components = problem.components
    m = components.amounts(b[None, :])
    amounts = np.zeros((1, len(c)))
    held = m[0, problem.phase_rows]
    amounts[0, components.columns[problem.phase_rows]] = held
    rest = np.delete(m[0], problem.phase_rows)
    if (held < -NEGATIVE_AMOUNT * size).any() or (np.abs(rest) > NEGATIVE_AMOUNT * size).any():
        return _as_it_is(inside, c)
    # potentials at which the present phases are exactly saturated, the others' being as the interior point has them
    potentials = inside.log_activities[components.columns] + c[components.columns]
    potentials[problem.phase_rows] = c[components.columns[problem.phase_rows]]
    log_activities = potentials @ components.C - c
    log_activities[components.columns[problem.phase_rows]] = 0.0
    gas = log_activities[problem.gas]
    if (log_activities[condensed] > SUPERSATURATION).any() or (
        gas.size and log_sum(gas[None])[0] > SUPERSATURATION
    ):
        return replace(_as_it_is(inside, c), amounts=amounts)
    steps = np.array([inside.steps])
    return Equilibria(
        components, amounts, log_activities[None, :], potentials[None, :], steps, np.array([True])
    )


def _as_it_is(inside: Inside, c: Floats) -> Equilibria:
    columns = inside.components.columns
    return Equilibria(
        inside.components,
        inside.amounts[None, :],
        inside.log_activities[None, :],
        (inside.log_y + c[columns])[None, :],
        np.array([inside.steps]),
        np.array([True]),
    )
