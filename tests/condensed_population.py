"""Seeded population of random problems of an ideal gas beside pure condensed phases, and its judging.

`problem(seed, index)` is reproducible on its own, so a failure is reported as two numbers. Half of the lists hold
every condensed substance of their elements, those without data at the temperature too (potential +inf), the rest a
random part of them. Temperature is log-uniform over 300 to 3000 K, pressure over 0.01 to 100 bar. Feeds are whole
multiples of 2^-40 mol of listed species, hence exactly stoichiometric where they look so; where a formula is not
whole (Fe0.947O) the element amounts are fractions that no double holds.
"""

from __future__ import annotations

import time
import warnings
from collections import Counter
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from typing import Any

import numpy as np

from tests import population, reference
from tests.population import FIXED_POINT_BITS, LARGEST_BALANCE_RESIDUAL, LARGEST_GAP

NON_METALS = ("C", "H", "O", "N", "S")
METALS = ("Al", "Ca", "Cr", "Cu", "Fe", "K", "Li", "Mg", "Na", "Ni", "Pb", "Si", "Ti", "Zn", "Zr")
LOWEST_TEMPERATURE, HIGHEST_TEMPERATURE = 300.0, 3000.0  # K
LOWEST_PRESSURE, HIGHEST_PRESSURE = 0.01, 100.0  # bar
MOST_GASES = 160

FAMILIES = {
    "graphite": 0.3,  # C(gr) alone beside a gas of carbon and others of C, H, O, N, S
    "non-metals": 0.25,  # all condensed substances of some of C, H, O, N, S
    "metals": 0.45,  # one or two metals with their oxides, chlorides, sulfides, carbides, salts ...
}
KINDS = {
    "gas": 0.22,  # one to six gases, amounts over 12 decades
    "mixed": 0.18,  # gases and solids or liquids, amounts over 12 decades
    "solids": 0.10,  # small whole numbers of condensed substances alone
    "stoichiometric": 0.20,  # small whole numbers of one to three of all species
    "single": 0.10,  # one species alone
    "trace": 0.10,  # whole numbers, and one more species at ppb level
    "absent": 0.10,  # whole numbers of species that lack an element of the list
}
EVERY_PHASE_PART = 0.5
NO_GAS_PART = 0.02


@dataclass(frozen=True)
class Posed:
    """formula_matrix (E, S), element_amounts (E,) mol, potentials (S,) = mu0/RT (+ ln(p/p0) of a gas)."""

    formula_matrix: np.ndarray
    element_amounts: np.ndarray  # float64, or Fraction where no double holds an amount
    potentials: np.ndarray
    condensed: np.ndarray
    names: tuple[str, ...]
    elements: tuple[str, ...]

    @property
    def feed_size(self) -> float:
        """Sum of the element amounts [mol]."""
        return float(self.element_amounts.sum())

    def solve(self) -> Any:
        from gibbsmin import minimise

        return minimise(self.formula_matrix, self.element_amounts, self.potentials, condensed=self.condensed)


@dataclass(frozen=True)
class Problem(Posed):
    """One problem of the population; pressures are in bar."""

    family: str
    kind: str
    every_phase: bool
    seed: int
    index: int
    temperature: float  # K
    pressure: float  # bar

    @property
    def label(self) -> str:
        return (
            f"{self.family}, {self.kind} ({self.seed}, {self.index}): {int((~self.condensed).sum())} gases, "
            f"{int(self.condensed.sum())} phases of {self.elements}, {self.temperature:.1f} K, {self.pressure:.2e} bar"
        )


@dataclass(frozen=True)
class Pool:
    """Condensed substances of all elements in use, on the temperatures of the gases' pool."""

    names: tuple[str, ...]
    composition: np.ndarray  # (S, len(population.ELEMENTS))
    potentials: np.ndarray  # (nT, S), +inf where a substance has no data


@lru_cache(maxsize=1)
def pool() -> Pool:
    from gibbsmin.species import ThermoTable, standard_library

    species = list(standard_library().condensed((*NON_METALS, "Cl", *METALS)))
    return Pool(
        names=tuple(s.name for s in species),
        composition=np.array(
            [[s.composition.get(e, 0) for e in population.ELEMENTS] for s in species], float
        ),
        potentials=ThermoTable(species).gibbs_RT(population.pool().temperature),
    )


def problems(count: int, seed: int, *, first: int = 0, most_gases: int = MOST_GASES) -> Iterator[Problem]:
    """The problems (seed, first) to (seed, first + count - 1)."""
    for index in range(first, first + count):
        yield problem(seed, index, most_gases=most_gases)


def problem(seed: int, index: int, *, most_gases: int = MOST_GASES) -> Problem:
    """The problem (seed, index); most_gases caps the list without changing family and kind."""
    rng = np.random.default_rng((seed, index, 4))
    family, kind = _choose(rng, FAMILIES), _choose(rng, KINDS)
    if family == "graphite" and kind == "solids":
        kind = "mixed"  # graphite alone is what kind "single" often is
    every_phase = bool(rng.random() < EVERY_PHASE_PART)
    no_gas = kind == "solids" and rng.random() < NO_GAS_PART / KINDS["solids"]
    while True:
        drawn = _draw(rng, family, kind, every_phase, 0 if no_gas else most_gases)
        if drawn is not None:
            return Problem(**drawn, family=family, kind=kind, every_phase=every_phase, seed=seed, index=index)


def _choose(rng: np.random.Generator, parts: dict[str, float]) -> str:
    return str(rng.choice(list(parts), p=list(parts.values())))


def _elements(rng: np.random.Generator, family: str) -> list[str]:
    if family == "graphite":
        return ["C", *_some(rng, ("H", "O", "N", "S"), 1)]
    if family == "non-metals":
        return _some(rng, NON_METALS, 2)
    metals = rng.choice(METALS, int(rng.integers(1, 3)), replace=False).tolist()
    return [*metals, *_some(rng, (*NON_METALS, "Cl"), 1)]


def _some(rng: np.random.Generator, of: tuple[str, ...], least: int) -> list[str]:
    return [str(e) for e in rng.choice(of, int(rng.integers(least, len(of) + 1)), replace=False)]


def _draw(
    rng: np.random.Generator, family: str, kind: str, every_phase: bool, most_gases: int
) -> dict[str, Any] | None:
    gases, phases = population.pool(), pool()
    elements = _elements(rng, family)
    rows = [population.ELEMENTS.index(e) for e in elements]
    others = np.setdiff1d(np.arange(len(population.ELEMENTS)), rows)
    in_range = (gases.temperature >= LOWEST_TEMPERATURE) & (gases.temperature <= HIGHEST_TEMPERATURE)
    at = int(rng.choice(np.flatnonzero(in_range)))
    pressure = float(np.exp(rng.uniform(np.log(LOWEST_PRESSURE), np.log(HIGHEST_PRESSURE))))

    usable = gases.valid[at] & (gases.charge == 0) & ~gases.composition[:, others].any(axis=1)
    candidates = rng.permutation(np.flatnonzero(usable))
    most = min(most_gases, len(candidates))
    if most_gases and most < 2:
        return None
    # half of the lists drawn evenly over their lengths, half evenly over the decades
    even = rng.random() < 0.5
    length = (
        (rng.integers(2, most + 1) if even else np.exp(rng.uniform(np.log(2), np.log(most + 1))))
        if most
        else 0
    )
    chosen_gases = candidates[: int(length)]

    if family == "graphite":
        of_elements = np.array([phases.names.index("C(gr)")])
    else:
        of_elements = np.flatnonzero(~phases.composition[:, others].any(axis=1))
    if not every_phase and len(of_elements) > 1:
        of_elements = rng.permutation(of_elements)[: int(rng.integers(1, len(of_elements) + 1))]
    if len(of_elements) == 0:
        return None

    A = np.vstack(
        [gases.composition[np.ix_(chosen_gases, rows)], phases.composition[np.ix_(of_elements, rows)]]
    ).T
    c = np.concatenate(
        [gases.potentials[at, chosen_gases] + np.log(pressure), phases.potentials[at, of_elements]]
    )
    condensed = np.arange(len(c)) >= len(chosen_gases)
    listed = A.any(axis=1)
    A, elements = A[listed].astype(float), [e for e, k in zip(elements, listed, strict=True) if k]
    columns, amounts = _feed(rng, kind, A, np.isfinite(c), condensed)
    if len(columns) == 0:
        return None
    b = [
        sum(
            Fraction(float(a)) * Fraction(int(n), 1 << FIXED_POINT_BITS)
            for a, n in zip(row, amounts, strict=True)
        )
        for row in A[:, columns]
    ]
    as_doubles = np.array([float(v) for v in b])
    order = rng.permutation(len(c))  # gases and phases stand anywhere in the list
    names = [gases.names[j] for j in chosen_gases] + [phases.names[j] for j in of_elements]
    return {
        "formula_matrix": A[:, order],
        "element_amounts": as_doubles if all(map(_equal, b, as_doubles)) else np.array(b, dtype=object),
        "potentials": c[order],
        "condensed": condensed[order],
        "names": tuple(names[j] for j in order),
        "elements": tuple(elements),
        "temperature": float(gases.temperature[at]),
        "pressure": pressure,
    }


def _equal(exact: Fraction, double: float) -> bool:
    return exact == Fraction(float(double))


def _feed(
    rng: np.random.Generator, kind: str, A: np.ndarray, possible: np.ndarray, condensed: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Columns and their amounts in whole multiples of 2^-40 mol; no columns where the kind cannot be had."""
    one = 1 << FIXED_POINT_BITS
    everything, nothing = np.flatnonzero(possible), np.array([], dtype=int)
    gases, phases = np.flatnonzero(possible & ~condensed), np.flatnonzero(possible & condensed)

    def some(of: np.ndarray, most: int) -> np.ndarray:
        return rng.choice(of, min(len(of), int(rng.integers(1, most + 1))), replace=False)

    def whole(count: int) -> np.ndarray:
        return rng.integers(1, 9, count) * one

    def decades(count: int) -> np.ndarray:
        return rng.integers(1, 16, count) << rng.integers(0, FIXED_POINT_BITS - 3, count)

    if kind in ("gas", "mixed"):
        if len(gases) == 0 or (kind == "mixed" and len(phases) == 0):
            return nothing, nothing
        columns = some(gases, 6)
        if kind == "mixed":
            columns = np.concatenate([columns, some(phases, 3)])
        return columns, decades(len(columns))
    if kind == "solids":
        columns = some(phases, 3) if len(phases) else nothing
        return columns, whole(len(columns))
    if kind == "absent":
        lacking = everything[A[int(rng.integers(len(A))), everything] == 0]
        columns = some(lacking, 3) if len(lacking) else nothing
        return columns, whole(len(columns))
    if kind == "single":
        half = phases if len(phases) and (rng.random() < 0.5 or len(gases) == 0) else gases
        return rng.choice(half, 1), np.array([one >> int(rng.integers(0, 20))])
    columns = some(everything, 3)
    amounts = whole(len(columns))
    if kind == "trace":
        columns = np.append(columns, rng.choice(everything, 1))
        amounts = np.append(amounts, rng.integers(1, 1 << 10))
    return columns, amounts


# -------------------------------------------------------------------------------------------------- judging


def run_population(cases: Iterable[Problem]) -> dict[str, Any]:
    """Solve the problems one call each and say how it went.

    Keys: count, seconds (in the minimiser alone), by_status, failures [(seed, index, family, kind, reason)],
    worst {what: (value, (seed, index))}, with_phases and without_gas (answers that hold a phase, no gas).
    """
    by_status: Counter[str] = Counter()
    failures: list[tuple[int, int, str, str, str]] = []
    worst: dict[str, tuple[float, tuple[int, int]]] = {}
    count = with_phases = without_gas = 0
    seconds = 0.0
    with warnings.catch_warnings():
        warnings.simplefilter("error")  # a warning of the arithmetic counts as an exception
        for case in cases:
            count += 1
            key = (case.seed, case.index)
            begin = time.perf_counter()
            try:
                answer = case.solve()
            except Exception as error:  # the population run counts exceptions, whatever they are
                by_status["exception"] += 1
                failures.append((*key, case.family, case.kind, f"{type(error).__name__}: {error}"))
                continue
            spent = time.perf_counter() - begin
            seconds += spent
            by_status[_status_name(answer)] += 1
            reasons, measures = judge(case, answer)
            measures |= {"seconds": spent, "iterations": float(answer.iterations[0])}
            for what, value in measures.items():
                if what not in worst or value > worst[what][0]:
                    worst[what] = (value, key)
            with_phases += bool(np.any(answer.amounts[0, case.condensed] > 0.0))
            without_gas += not np.any(answer.amounts[0, ~case.condensed] > 0.0)
            if reasons:
                failures.append((*key, case.family, case.kind, "; ".join(reasons)))
    return {
        "count": count,
        "seconds": seconds,
        "by_status": dict(by_status),
        "failures": failures,
        "worst": worst,
        "with_phases": with_phases,
        "without_gas": without_gas,
    }


def _status_name(answer: Any) -> str:
    from gibbsmin.minimiser import Status

    return str(Status(int(answer.status[0])).name)


def judge(case: Posed, answer: Any) -> tuple[list[str], dict[str, float]]:
    """What is wrong with an answer (nothing: an empty list), and its measures, relative to the feed where they
    are amounts.

    The package's certificate is asked with the amounts and element potentials alone; balance, dual feasibility
    and gap are computed once more here, in long double.
    """
    from gibbsmin.minimiser import optimality_gap

    status = _status_name(answer)
    if status != "SOLVED":
        return [f"status {status}"], {}
    A, c, condensed = case.formula_matrix, case.potentials, case.condensed
    b = case.element_amounts.astype(float)
    n, log_a, pi = answer.amounts[0], answer.log_mole_fractions[0], answer.element_potentials[0]
    if not np.all(np.isfinite(n)) or np.any(np.isnan(log_a)) or np.any(log_a == np.inf):
        return ["not finite"], {}
    reasons = []
    if np.any(n < 0.0):
        reasons.append("negative amount")
    excluded = np.isneginf(log_a) | np.isposinf(c)
    if np.any(n[excluded]):
        reasons.append("an amount of an excluded species")
    if not np.array_equal(excluded, _truly_excluded(case, excluded)):
        reasons.append("species called excluded that are not, or the other way round")

    reported, residual = float(answer.gap[0]) / case.feed_size, float(answer.balance_residual[0])
    certified = float(
        optimality_gap(
            A, b, np.where(np.isinf(c), 0.0, c), n, pi, excluded=excluded[None], condensed=condensed
        )[0]
    )
    own = _own_measures(case, n, log_a, pi, excluded)
    measures = {"gap": reported, "residual": residual, "certified gap": certified / case.feed_size, **own}
    for what, largest in _LARGEST.items():
        if not measures[what] <= largest:
            reasons.append(f"{what} {measures[what]:.1e}")
    if reported < 0.0:
        reasons.append(f"negative gap {reported:.0e}")
    return reasons, measures


_LARGEST = {
    "gap": LARGEST_GAP,
    "residual": LARGEST_BALANCE_RESIDUAL,
    "certified gap": LARGEST_GAP,
    "own residual": LARGEST_BALANCE_RESIDUAL,
    "own gap": LARGEST_GAP,
    "below the bound": LARGEST_GAP / 10,  # primal energy below the dual one: impossible but for rounding
    "activity of a phase": 1e-9,  # excess over 1 of any phase
    "activity of a present phase": 1e-9,  # |ln a|
    "sum of the gas": 1e-9,  # excess over 1 of the sum of mole fractions that the potentials demand
    "activities reported": 1e-9,  # |reported ln a - (a.pi - c)|
}


def _own_measures(
    case: Posed, n: np.ndarray, log_a: np.ndarray, pi: np.ndarray, excluded: np.ndarray
) -> dict[str, float]:
    wide = np.longdouble
    A, condensed, kept = case.formula_matrix.astype(wide), case.condensed, ~excluded
    b = np.array([_wide(v) for v in case.element_amounts])
    c, amounts = np.where(excluded, 0.0, case.potentials).astype(wide), n.astype(wide)
    potential = np.where(np.isnan(pi), 0.0, pi).astype(wide)
    level = potential @ A - c  # ln of the activity that the element potentials give each species

    balance = A @ amounts - b
    scale = np.maximum(b, (A * amounts).max(axis=1))
    gas, phase = kept & ~condensed, kept & condensed
    total = amounts[gas].sum()
    here = gas & (n > 0.0)
    energy = (amounts * c).sum() + (amounts[here] * np.log(amounts[here] / total)).sum()
    log_sum = np.log(np.exp(level[gas]).sum()) if gas.any() else wide(-np.inf)
    highest = level[phase].max(initial=-np.inf)
    excess = max(log_sum, highest, wide(0.0))
    atoms = A.sum(axis=0).min()
    gap = energy - b @ potential + excess * b.sum() / atoms
    # pi of an element that is absent is not determined, and 0 stands for a dependent row's
    reported = np.abs(log_a[kept] - level[kept]) / np.maximum(1.0, np.abs(level[kept]) * 1e-3)
    return {
        "own residual": float(np.max(np.abs(balance[scale > 0]) / scale[scale > 0], initial=0.0)),
        "own gap": float(gap) / case.feed_size,
        "below the bound": -float(gap) / case.feed_size,
        "activity of a phase": float(highest),
        "activity of a present phase": float(np.abs(level[phase & (n > 0.0)]).max(initial=0.0)),
        "sum of the gas": float(log_sum),
        "activities reported": float(np.max(reported, initial=0.0)),
    }


def _wide(value: Any) -> Any:
    exact = Fraction(value) if isinstance(value, Fraction) else Fraction(float(value))
    high = float(exact)
    return np.longdouble(high) + np.longdouble(float(exact - Fraction(high)))


def _truly_excluded(case: Posed, claimed: np.ndarray) -> np.ndarray:
    """Species of absent elements and without data; exact rational arithmetic where more are claimed."""
    b = case.element_amounts.astype(float)
    trivially = case.formula_matrix[b == 0.0].any(axis=0) | np.isposinf(case.potentials)
    if np.array_equal(trivially, claimed):
        return claimed  # that these are excluded needs no proof; that no others are, the gap proves
    support = np.zeros(len(claimed), dtype=bool)
    possible = np.isfinite(case.potentials)
    support[possible] = reference.support(case.formula_matrix[:, possible], case.element_amounts.tolist())
    return ~support
