"""Seeded population of random gas problems, and its run through the minimiser.

`problem(seed, index)` is reproducible on its own, so a failure is reported as two numbers.  Every kind of
feed that has made equilibrium solvers fail is drawn on purpose (`KINDS`); temperature is log-uniform over
200 to 20,000 K within the data of the chosen species, pressure log-uniform over 1e-8 to 1e4 bar.  All
element amounts but those of the kind "rounded" are exact in binary: 40-bit fixed-point multiples of whole
species, so that stoichiometry, boundaries of the feasible cone and redundant rows are exact, not exact to
rounding.
"""

from __future__ import annotations

import time
import warnings
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import lru_cache
from typing import Any

import numpy as np

COMMON = ("C", "H", "O", "N", "S", "Cl", "F", "Si", "P", "Ar")
OTHERS = (
    "Al",
    "B",
    "Br",
    "Ca",
    "Cr",
    "Cu",
    "Fe",
    "He",
    "I",
    "K",
    "Li",
    "Mg",
    "Na",
    "Ni",
    "Pb",
    "Ti",
    "Zn",
    "Zr",
)
ELEMENTS = COMMON + OTHERS
LOWEST_TEMPERATURE, HIGHEST_TEMPERATURE = 200.0, 20000.0  # K
LOWEST_PRESSURE, HIGHEST_PRESSURE = 1e-8, 1e4  # bar
MOST_SPECIES = 300
FIXED_POINT_BITS = 40  # 2^40 is twelve decades

KINDS = {
    "random": 0.24,  # one to six species, amounts over 12 decades
    "dense": 0.10,  # every neutral species in the feed, amounts over 12 decades
    "stoichiometric": 0.18,  # small whole numbers of one to three species
    "single": 0.08,  # one species alone
    "trace": 0.12,  # whole numbers, and one more species at ppb level
    "boundary": 0.10,  # the feed lies on a face of the feasible cone: the balance excludes species
    "square": 0.06,  # as many species as independent elements
    "redundant": 0.06,  # fewer independent element rows than rows
    "rounded": 0.06,  # element totals of decimal amounts, summed in double precision
}
IONISED_PART = 0.2  # of the kinds other than square and redundant


@dataclass(frozen=True)
class Problem:
    """One problem: formula_matrix (E, S), element_amounts (E,) mol, potentials (S,) = mu0/RT + ln(p/bar)."""

    formula_matrix: np.ndarray
    element_amounts: np.ndarray
    potentials: np.ndarray
    kind: str
    seed: int
    index: int
    elements: tuple[str, ...]  # row labels, "charge" among them where there are ions
    members: np.ndarray  # columns of the pool
    temperature: float  # K
    pressure: float  # bar

    @property
    def names(self) -> tuple[str, ...]:
        names = pool().names
        return tuple(names[j] for j in self.members)

    @property
    def exact_element_amounts(self) -> tuple[Fraction, ...]:
        """The doubles of `element_amounts`, exactly."""
        return tuple(Fraction(float(value)) for value in self.element_amounts)

    @property
    def label(self) -> str:
        return f"{self.kind} ({self.seed}, {self.index}): {len(self.members)} species of {self.elements}"


@dataclass(frozen=True)
class Pool:
    """All gases of `ELEMENTS` with their standard potentials on a fixed set of temperatures."""

    names: tuple[str, ...]
    composition: np.ndarray  # int (S, len(ELEMENTS))
    outside: np.ndarray  # uint64 bit mask of the elements contained (S,)
    charge: np.ndarray  # int (S,)
    temperature: np.ndarray  # K (nT,)
    potentials: np.ndarray  # mu0/RT at 1 bar, (nT, S)
    valid: np.ndarray  # bool (nT, S)


@lru_cache(maxsize=1)
def pool() -> Pool:
    """Read the species once and evaluate them on 320 temperatures."""
    from gibbsmin.species import ThermoTable, standard_library

    species = list(standard_library().gases(ELEMENTS, ions=True))
    T = np.geomspace(LOWEST_TEMPERATURE, HIGHEST_TEMPERATURE, 312)
    T = np.unique(np.concatenate([T, [250.0, 298.15, 300.0, 500.0, 1000.0, 2000.0, 6000.0, 10000.0]]))
    lower = np.array([s.lower for s in species])
    upper = np.array([s.upper for s in species])
    composition = np.array([[int(s.composition.get(e, 0)) for e in ELEMENTS] for s in species])
    bits = np.uint64(1) << np.arange(len(ELEMENTS), dtype=np.uint64)
    return Pool(
        names=tuple(s.name for s in species),
        composition=composition,
        outside=((composition > 0) * bits).sum(axis=1).astype(np.uint64),
        charge=np.array([s.charge for s in species]),
        temperature=T,
        potentials=ThermoTable(species, extrapolate=True).gibbs_RT(T),
        valid=(T[:, None] >= lower) & (T[:, None] <= upper),
    )


def problems(count: int, seed: int, *, most_species: int = MOST_SPECIES, first: int = 0) -> Iterator[Problem]:
    """The problems (seed, first) to (seed, first + count - 1)."""
    for index in range(first, first + count):
        yield problem(seed, index, most_species=most_species)


def problem(seed: int, index: int, *, most_species: int = MOST_SPECIES) -> Problem:
    """The problem (seed, index); most_species caps the list without changing the kind."""
    rng = np.random.default_rng((seed, index))
    kind = str(_KIND_NAMES[np.searchsorted(_KIND_SUMS, rng.random())])
    while True:
        drawn = _draw(rng, kind, most_species)
        if drawn is None:
            continue
        A, b, members, elements, row, pressure = drawn
        return Problem(
            formula_matrix=A,
            element_amounts=b,
            potentials=pool().potentials[row, members] + np.log(pressure),
            kind=kind,
            seed=seed,
            index=index,
            elements=elements,
            members=members,
            temperature=float(pool().temperature[row]),
            pressure=pressure,
        )


def mixed_batch(seed: int, index: int, count: int, *, most_species: int = 80) -> Problem | None:
    """The list of problem (seed, index) with `count` feeds of all exact kinds, each at its own
    temperature and pressure: element_amounts (count, E), potentials (count, S).  None where the list has
    a row that is no element.
    """
    case, gases = problem(seed, index, most_species=most_species), pool()
    if "all atoms" in case.elements:
        return None
    rng = np.random.default_rng((seed, index, count))
    rows = rng.choice(np.flatnonzero(gases.valid[:, case.members].all(axis=1)), count)
    log_pressure = rng.uniform(np.log(LOWEST_PRESSURE), np.log(HIGHEST_PRESSURE), count)
    charged = "charge" in case.elements
    A = case.formula_matrix[: len(case.elements) - charged].astype(int)
    neutral = np.flatnonzero(gases.charge[case.members] == 0)
    b = np.zeros((count, len(case.elements)))
    for point in range(count):
        feed = _feed(rng, MIXED_KINDS[int(rng.integers(len(MIXED_KINDS)))], A, neutral)
        b[point, : len(A)] = np.ldexp((A[:, feed[0]] @ feed[1]).astype(float), -FIXED_POINT_BITS)
    return replace(
        case,
        element_amounts=b,
        potentials=gases.potentials[np.ix_(rows, case.members)] + log_pressure[:, None],
        kind="mixed batch",
    )


MIXED_KINDS = ("random", "dense", "stoichiometric", "single", "trace", "boundary")
_KIND_NAMES = np.array(list(KINDS))
_KIND_SUMS = np.cumsum(list(KINDS.values()))
_KIND_SUMS[-1] = 1.0
_ELEMENT_WEIGHTS = np.array([8.0] * len(COMMON) + [0.8] * len(OTHERS))
_ELEMENT_WEIGHTS /= _ELEMENT_WEIGHTS.sum()


def _draw(rng: np.random.Generator, kind: str, most_species: int) -> Any:
    gases = pool()
    row = int(rng.integers(len(gases.temperature)))
    pressure = float(np.exp(rng.uniform(np.log(LOWEST_PRESSURE), np.log(HIGHEST_PRESSURE))))
    count = int(1 + 8 * np.sqrt(rng.random()))  # more often many elements than few
    if kind == "redundant":
        count = max(count, 2)
    chosen = np.sort(rng.choice(len(ELEMENTS), count, replace=False, p=_ELEMENT_WEIGHTS))
    ionised = kind not in ("square", "redundant") and rng.random() < IONISED_PART
    mask = np.uint64(sum(1 << int(e) for e in chosen))
    usable = gases.valid[row] & ((gases.outside & ~mask) == 0)
    if not ionised:
        usable &= gases.charge == 0
    if kind == "boundary":  # with every element as a species of its own, a face is only an absent element
        usable &= (gases.composition > 0).sum(axis=1) != 1
    candidates = np.flatnonzero(usable)
    if len(candidates) < 2:
        return None
    most = min(most_species, len(candidates))
    # half of the lists drawn evenly over their lengths, half evenly over the decades
    long = rng.random() < 0.5
    size = int(rng.integers(2, most + 1) if long else np.exp(rng.uniform(np.log(2), np.log(most + 1))))
    if kind == "redundant" and rng.random() < 0.6:
        size = min(size, int(rng.integers(2, count + 1)))
    members = rng.permutation(candidates)[:size]
    A = gases.composition[np.ix_(members, chosen)].T
    neutral = np.flatnonzero(gases.charge[members] == 0)
    if len(neutral) == 0:
        return None
    if kind == "square":
        members, A = _independent(members, A)
        if len(members) < 2:
            return None
        neutral = np.arange(len(members))

    listed = A.any(axis=1)  # elements that no chosen species contains make no row
    A, chosen = A[listed], chosen[listed]
    feed = _feed(rng, kind, A, neutral)
    if feed is None:
        return None
    if kind == "rounded":
        b = (A[:, feed[0]] * (feed[1] * 1e-3)).sum(axis=1)
    else:
        totals = A[:, feed[0]] @ feed[1]
        if totals.max() >= 2**53:
            return None
        b = np.ldexp(totals.astype(float), -FIXED_POINT_BITS)
    elements = tuple(ELEMENTS[e] for e in chosen)
    if gases.charge[members].any():
        A = np.vstack([A, gases.charge[members]])
        b = np.append(b, 0.0)
        elements += ("charge",)
    if kind == "redundant" and np.linalg.matrix_rank(A) == len(A):
        if totals.sum() >= 2**53:
            return None
        A = np.vstack([A, A.sum(axis=0)])
        b = np.append(b, b.sum())
        elements += ("all atoms",)
    return A.astype(float), b, members, elements, row, pressure


def _independent(members: np.ndarray, A: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """The first columns of A that are linearly independent."""
    basis: list[np.ndarray] = []
    keep = []
    for j in range(A.shape[1]):
        column = A[:, j].astype(float)
        rest = column.copy()
        for vector in basis:
            rest -= (rest @ vector) * vector
        norm = np.linalg.norm(rest)
        if norm > 1e-9 * np.linalg.norm(column):
            basis.append(rest / norm)
            keep.append(j)
            if len(keep) == len(A):
                break
    return members[keep], A[:, keep]


def _feed(rng: np.random.Generator, kind: str, A: np.ndarray, neutral: np.ndarray) -> Any:
    """Columns and amounts; the amounts are whole multiples of 2^-40 mol (of 0.001 mol for "rounded")."""
    one = 1 << FIXED_POINT_BITS
    if kind == "single":
        return rng.choice(neutral, 1), np.array([one >> int(rng.integers(0, 20))])
    if kind == "square":
        some = neutral if rng.random() < 0.7 else neutral[: max(1, len(neutral) - 1)]
        return some, rng.integers(1, 9, len(some)) * one
    if kind == "boundary":
        neutral = _extreme(rng, A, neutral)
        if len(neutral) == 0:
            return None
    few = rng.choice(neutral, min(len(neutral), int(rng.integers(1, 4))), replace=False)
    if kind in ("stoichiometric", "boundary", "redundant"):
        return few, rng.integers(1, 9, len(few)) * one
    if kind == "trace":
        more = rng.choice(neutral, 1)
        return np.append(few, more), np.append(rng.integers(1, 9, len(few)) * one, rng.integers(1, 1 << 10))
    if kind == "rounded":
        return few, rng.integers(1, 10000, len(few))
    some = (
        neutral
        if kind == "dense"
        else rng.choice(neutral, min(len(neutral), int(rng.integers(1, 7))), replace=False)
    )
    if kind == "dense" and len(some) > 40:  # more would overflow the 53 bits of the totals
        some = rng.choice(some, 40, replace=False)
    return some, rng.integers(1, 16, len(some)) << rng.integers(0, FIXED_POINT_BITS - 3, len(some))


def _extreme(rng: np.random.Generator, A: np.ndarray, neutral: np.ndarray) -> np.ndarray:
    """Neutral columns on a face of the cone of feasible element amounts.

    The face of least ratio of two elements where no species has one without the other; else an extreme ray.
    """
    for _ in range(6 if len(A) > 1 else 0):
        top, bottom = rng.choice(len(A), 2, replace=False)
        a, c = A[top, neutral], A[bottom, neutral]
        having = np.flatnonzero(c > 0)
        if len(having) and a[having].min() > 0:
            best = having[np.argmin(a[having] / c[having])]
            return np.asarray(neutral[a * c[best] == c * a[best]])
    fractions = A[:, neutral] / A[:, neutral].sum(axis=0)
    outermost = np.argmax(rng.normal(size=len(A)) @ fractions)
    return np.asarray(neutral[[outermost]])


# -------------------------------------------------------------------------------------------------- judging

LARGEST_GAP = 1e-10  # of the sum of the element amounts
LARGEST_BALANCE_RESIDUAL = 1e-12


def run_population(
    count: int, seed: int, *, first: int = 0, most_species: int = MOST_SPECIES
) -> dict[str, Any]:
    """Solve `count` problems one call each and say how it went.

    Keys: count, seconds (in the minimiser alone), by_status {name: count}, exceptions, not_finite,
    worst_gap (relative to sum b), worst_residual, most_iterations, by_kind {kind: (count, failures,
    seconds)}, failures [(seed, index, kind, reason)] (at most 200 of them), worst {what: (seed, index)}.
    """
    pool()
    with warnings.catch_warnings():
        warnings.simplefilter("error")  # a warning of the arithmetic counts as an exception
        return _run(problems(count, seed, first=first, most_species=most_species), count, seed)


def _run(cases: Iterator[Problem], count: int, seed: int) -> dict[str, Any]:
    from gibbsmin import minimise

    by_status: Counter[str] = Counter()
    kinds: dict[str, list[float]] = {kind: [0, 0, 0.0] for kind in KINDS}
    failures: list[tuple[int, int, str, str]] = []
    worst = {"gap": (-1.0, -1), "residual": (-1.0, -1), "iterations": (-1.0, -1), "seconds": (-1.0, -1)}
    exceptions = not_finite = 0
    seconds = 0.0
    for case in cases:
        begin = time.perf_counter()
        try:
            answer = minimise(case.formula_matrix, case.element_amounts, case.potentials)
        except Exception as error:  # the population run counts exceptions, whatever they are
            exceptions += 1
            by_status["exception"] += 1
            failures.append((seed, case.index, case.kind, f"{type(error).__name__}: {error}"))
            kinds[case.kind][0] += 1
            kinds[case.kind][1] += 1
            continue
        spent = time.perf_counter() - begin
        seconds += spent
        reasons, gap, residual = judge(case, answer)
        by_status[_status_name(answer)] += 1
        not_finite += any(reason == "not finite" for reason in reasons)
        iterations = float(np.max(answer.iterations))
        for what, value in (
            ("gap", gap),
            ("residual", residual),
            ("iterations", iterations),
            ("seconds", spent),
        ):
            if value > worst[what][0]:
                worst[what] = (value, case.index)
        kinds[case.kind][0] += 1
        kinds[case.kind][1] += bool(reasons)
        kinds[case.kind][2] += spent
        if reasons:
            failures.append((seed, case.index, case.kind, "; ".join(reasons)))
    return {
        "count": count,
        "seed": seed,
        "seconds": seconds,
        "by_status": dict(by_status),
        "exceptions": exceptions,
        "not_finite": not_finite,
        "worst_gap": worst["gap"][0],
        "worst_residual": worst["residual"][0],
        "most_iterations": worst["iterations"][0],
        "slowest": worst["seconds"][0],
        "by_kind": {kind: tuple(values) for kind, values in kinds.items()},
        "failure_count": len(failures),
        "failures": failures[:200],
        "worst": {what: (seed, index) for what, (_, index) in worst.items()},
    }


def _status_name(answer: Any) -> str:
    from gibbsmin.minimiser import Status

    return str(Status(int(np.ravel(answer.status)[0])).name)


def judge(case: Problem, answer: Any) -> tuple[list[str], float, float]:
    """What is wrong with an answer (nothing: an empty list), its relative gap, its balance residual.

    The balance residual is recomputed here: |A n - b| relative to the larger of b and the largest term of
    the row.
    """
    reasons: list[str] = []
    status = _status_name(answer)
    if status != "SOLVED":
        return [f"status {status}"], np.nan, np.nan
    A, b = case.formula_matrix, case.element_amounts
    n = np.ravel(answer.amounts)
    log_x = np.ravel(answer.log_mole_fractions)
    if not np.all(np.isfinite(n)) or np.any(np.isnan(log_x)) or np.any(log_x == np.inf):
        return ["not finite"], np.nan, np.nan
    if np.any(n < 0):
        reasons.append("negative amount")
    terms = np.abs(A) * n
    scale = np.maximum(np.abs(b), terms.max(axis=1))
    error = np.abs(A @ n - b)
    residual = float(np.max(error[scale > 0] / scale[scale > 0], initial=0.0))
    if residual > LARGEST_BALANCE_RESIDUAL:
        reasons.append(f"balance residual {residual:.1e}")
    if float(np.ravel(answer.balance_residual)[0]) > LARGEST_BALANCE_RESIDUAL:
        reasons.append(f"reported residual {float(np.ravel(answer.balance_residual)[0]):.1e}")
    gap = float(np.ravel(answer.gap)[0]) / float(b.sum())
    if not gap <= LARGEST_GAP:
        reasons.append(f"gap {gap:.1e}")
    if gap < 0:
        reasons.append(f"negative gap {gap:.0e}")
    return reasons, gap, residual
