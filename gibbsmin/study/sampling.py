"""Well-spread random values: Latin hypercube and Sobol sampling of ranges and distributions.

Sampling points of the unit cube come from `scipy.stats.qmc`: McKay, Beckman & Conover, Technometrics 21 (1979)
239 (Latin hypercube); Sobol, USSR Comput. Math. Math. Phys. 7 (1967) 86, scrambled after Owen, J. Complexity 14
(1998) 466. They are carried to each distribution by its inverse distribution function.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
DIGITS = 9
"""Significant digits of a sampled value: enough for any purpose, and free of the last bits of one machine."""

NEEDED = {
    "uniform": ("from", "to"),
    "logarithmic": ("from", "to"),
    "normal": ("mean", "standard deviation"),
    "log-normal": ("median", "geometric standard deviation"),
    "triangular": ("from", "most likely", "to"),
}
_ENDS = ("from", "to")


def distribution_fault(given: Mapping[str, Any]) -> str:
    """What is wrong with the parameters of a distribution, or ''."""
    kind = given.get("distribution", "uniform")
    needed = NEEDED[kind]
    if missing := [key for key in needed if key not in given]:
        return f"a {kind} distribution needs {' and '.join(repr(key) for key in missing)}"
    cut = _ENDS if "normal" in kind else ()
    if spare := [key for key in given if key not in (*needed, *cut, "distribution")]:
        return f"a {kind} distribution takes no {' and no '.join(repr(key) for key in spare)}"
    low, high = given.get("from", -math.inf), given.get("to", math.inf)
    if not low < high:
        return f"'from' ({low:g}) must be below 'to' ({high:g})"
    if kind == "logarithmic" and low <= 0:
        return f"a logarithmic distribution starts above zero, not at {low:g}"
    if kind == "triangular" and not low <= given["most likely"] <= high:
        return f"'most likely' ({given['most likely']:g}) lies outside {low:g} to {high:g}"
    if "normal" in kind:
        law = _law(given)
        if not law.cdf(_on_scale(kind, high)) - law.cdf(_on_scale(kind, low)) > 1e-9:
            return f"next to nothing of the distribution lies between {low:g} and {high:g}"
    return ""


def size_fault(method: str, size: int) -> str:
    """What is wrong with the size of a sample, or ''."""
    if method == "sobol" and size & (size - 1):
        below = 1 << (size.bit_length() - 1)
        return f"a Sobol sample is balanced only if its size is a power of two; take {below} or {2 * below}"
    return ""


def draw(
    method: str, size: int, seed: int, distributions: Sequence[Mapping[str, Any]]
) -> list[tuple[float, ...]]:
    """`size` samples of sound distributions, each a tuple in their order."""
    from scipy.stats import qmc

    dimensions = len(distributions)
    if method == "sobol":
        unit = qmc.Sobol(dimensions, scramble=True, rng=seed).random(size)
    else:
        unit = qmc.LatinHypercube(dimensions, rng=seed).random(size)
    columns = [_carry(given)(unit[:, k]) for k, given in enumerate(distributions)]
    return [tuple(float(f"{value:.{DIGITS}g}") for value in row) for row in zip(*columns, strict=True)]


def _carry(given: Mapping[str, Any]) -> Callable[[FloatArray], FloatArray]:
    """The inverse distribution function, cut off where that is asked for."""
    kind = given.get("distribution", "uniform")
    law = _law(given)
    low, high = law.cdf(_on_scale(kind, given.get("from", -math.inf))), 1.0
    if "to" in given:
        high = law.cdf(_on_scale(kind, given["to"]))
    bottom, top = given.get("from", -math.inf), given.get("to", math.inf)
    # A Sobol point may be exactly 0, where an unbounded law has no value.
    smallest = np.finfo(np.float64).tiny

    def carry(unit: FloatArray) -> FloatArray:
        values = law.ppf(np.clip(low + unit * (high - low), smallest, 1.0))
        values = np.exp(values) if _is_on_logarithm(kind) else values
        return np.asarray(np.clip(values, bottom, top), dtype=np.float64)

    return carry


def _law(given: Mapping[str, Any]) -> Any:
    from scipy import stats

    kind = given.get("distribution", "uniform")
    if kind == "normal":
        return stats.norm(given["mean"], given["standard deviation"])
    if kind == "log-normal":
        return stats.norm(math.log(given["median"]), math.log(given["geometric standard deviation"]))
    low, high = _on_scale(kind, given["from"]), _on_scale(kind, given["to"])
    if kind == "triangular":
        return stats.triang((given["most likely"] - low) / (high - low), low, high - low)
    return stats.uniform(low, high - low)


def _is_on_logarithm(kind: str) -> bool:
    return kind in ("logarithmic", "log-normal")


def _on_scale(kind: str, value: float) -> float:
    if not _is_on_logarithm(kind):
        return value
    return math.log(value) if value > 0 else -math.inf
