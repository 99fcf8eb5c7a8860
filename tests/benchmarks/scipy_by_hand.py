"""Against `scipy.optimize.minimize`, as people write it by hand: SLSQP and trust-constr.

G/RT over the amounts, element balances as linear constraints, amounts bounded below by a trace, exact first
(and for trust-constr second) derivatives, element totals scaled to a sum of one, all species in equal amounts
as the first guess, and options a user would raise: many iterations, tight tolerances.
"""

from __future__ import annotations

import time
import warnings
from collections import Counter
from collections.abc import Callable
from functools import partial
from typing import Any

import numpy as np
from scipy import optimize

from gibbsmin import minimise
from tests.benchmarks.gases import Floats, reforming_gases, scattered_reforming
from tests.benchmarks.measuring import Measured, Table, latencies, spread
from tests.benchmarks.ours import potentials_of

TITLE = "Against scipy.optimize.minimize"
minimize: Any = optimize.minimize  # its overloads do not know every mixture of options
LEAST_AMOUNT = {"SLSQP": 1e-10, "trust-constr": 1e-12}
"""mol per mol of atoms, below which no amount may fall: the logarithm needs a limit. Of 1e-8 to 1e-20, and of
function tolerances of 1e-9 to 1e-14, those that got most points right for each solver."""
STANDARDS = {"right": (1e-6, 1e-4), "roughly right": (1e-3, 1e-2)}
"""Mole fractions above the first have to be right to the second, relative."""


def measure(quick: bool) -> Measured:
    table = reforming_gases()
    counts = {"SLSQP": 3, "trust-constr": 1} if quick else {"SLSQP": 100, "trust-constr": 100}
    most = max(counts.values())
    feeds, T, p = scattered_reforming(most)
    A = table.formula_matrix
    b = feeds.element_amounts / feeds.element_amounts.sum(axis=1, keepdims=True)
    potentials = potentials_of(table, T, p)
    ours = minimise(A, b, potentials)
    calls = [partial(minimise, A, b[k], potentials[k]) for k in range(most)]
    found: Measured = {
        "species": A.shape[1],
        "gibbsmin": {
            "seconds": spread(latencies(calls)),
            "points": most,
            "reports success": int(ours.solved.sum()),
            **{name: int(ours.solved.sum()) for name in STANDARDS},
        },
    }
    solvers: dict[str, Callable[..., Any]] = {"SLSQP": slsqp, "trust-constr": trust_constr}
    for name, solver in solvers.items():
        seconds, says_success, excess = [], 0, []
        met: Counter[str] = Counter()
        for k in range(counts[name]):
            begin = time.perf_counter()
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")
                answer = solver(A, b[k], potentials[k])
            seconds.append(time.perf_counter() - begin)
            says_success += bool(answer.success)
            amounts = np.maximum(answer.x, 0.0)
            met.update(
                standard for standard in STANDARDS if _meets(amounts, ours.amounts[k], *STANDARDS[standard])
            )
            excess.append(_energy(amounts, potentials[k], 0.0) - _energy(ours.amounts[k], potentials[k], 0.0))
        found[name] = {
            "seconds": spread(seconds),
            "points": counts[name],
            "reports success": says_success,
            **{standard: met[standard] for standard in STANDARDS},
            "energy above ours, least": min(excess),
            "energy above ours, median": float(np.median(excess)),
        }
    return found


def slsqp(A: Floats, b: Floats, c: Floats) -> Any:
    least = LEAST_AMOUNT["SLSQP"]
    start = np.full(A.shape[1], 1.0 / A.shape[1])
    balance = {"type": "eq", "fun": lambda n: A @ n - b, "jac": lambda n: A}
    return minimize(
        _energy,
        start,
        args=(c, least),
        jac=_slope,
        method="SLSQP",
        bounds=[(least, None)] * len(start),
        constraints=[balance],
        options={"maxiter": 1000, "ftol": 1e-12},
    )


def trust_constr(A: Floats, b: Floats, c: Floats) -> Any:
    least = LEAST_AMOUNT["trust-constr"]
    start = np.full(A.shape[1], 1.0 / A.shape[1])
    return minimize(
        _energy,
        start,
        args=(c, least),
        jac=_slope,
        hess=_curvature,
        method="trust-constr",
        bounds=optimize.Bounds(least, np.inf),
        constraints=[optimize.LinearConstraint(A, b, b)],
        options={"maxiter": 2000, "gtol": 1e-10, "xtol": 1e-12, "barrier_tol": 1e-12},
    )


def _energy(n: Floats, c: Floats, least: float) -> float:
    n = np.maximum(n, least)
    present = n > 0
    return float(n[present] @ (c + np.log(n / n.sum(), where=present, out=np.zeros_like(n)))[present])


def _slope(n: Floats, c: Floats, least: float) -> Floats:
    n = np.maximum(n, least)
    slope: Floats = c + np.log(n / n.sum())
    return slope


def _curvature(n: Floats, c: Floats, least: float) -> Floats:
    n = np.maximum(n, least)
    curvature: Floats = np.diag(1.0 / n) - 1.0 / n.sum()
    return curvature


def _meets(amounts: Floats, expected: Floats, least: float, tolerance: float) -> bool:
    """Whether every mole fraction above `least` is right to `tolerance`, relative."""
    if not np.isfinite(amounts).all() or amounts.sum() == 0.0:
        return False
    x, y = amounts / amounts.sum(), expected / expected.sum()
    larger = np.maximum(x, y)
    return bool((np.abs(x - y)[larger > least] <= tolerance * larger[larger > least]).all())


def tables(measured: Measured) -> list[Table]:
    ours = measured["gibbsmin"]["seconds"]["median"]
    rows: list[list[Any]] = []
    for name, label in (
        ("gibbsmin", "`gibbsmin.minimise`"),
        ("SLSQP", "SLSQP"),
        ("trust-constr", "trust-constr"),
    ):
        case = measured[name]
        typical = case["seconds"]["median"]
        rows.append(
            [
                label,
                case["points"],
                typical * 1e3,
                None if name == "gibbsmin" else typical / ours,
                case["reports success"],
                *(case[standard] for standard in STANDARDS),
            ]
        )
    return [
        Table(
            f"{TITLE}: random points of steam reforming, {measured['species']} gases, one at a time",
            ["", "points", "ms a point (median)", "times `minimise`", "report success", *STANDARDS],
            rows,
            "; ".join(
                f"{standard}: every mole fraction above {least:g} within {tolerance:g}, relative, of the proved answer"
                for standard, (least, tolerance) in STANDARDS.items()
            )
            + ".",
        )
    ]
