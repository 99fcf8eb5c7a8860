"""Proof of optimality: a bound on how far a composition lies above the true minimum.

The dual of the minimisation is: maximise b.pi subject to ln sum_j exp(a_j.pi - c_j) <= 0 over the gas species and
a_k.pi <= c_k for each pure condensed phase. Every feasible pi bounds
the minimum from below, G_min / RT >= b.pi (weak duality; Boyd & Vandenberghe, Convex Optimization (2004), ch. 5).
Any pi is made feasible by moving it against a vector w with w.a_j >= 1 for every species. So for any composition n

    gap = G(n) / RT - b.pi_feasible >= (G(n) - G_min) / RT.

The proof asks nothing about how n and pi were found. Species that the balance excludes are left out: their amounts
are zero in every composition with these element amounts.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from gibbsmin.errors import ProblemError
from gibbsmin.minimiser.result import Floats


def optimality_gap(
    formula_matrix: Floats,
    element_amounts: Floats,
    potentials: Floats,
    amounts: Floats,
    element_potentials: Floats,
    *,
    log_mole_fractions: Floats | None = None,
    excluded: NDArray[np.bool_] | None = None,
    condensed: NDArray[np.bool_] | None = None,
) -> Floats:
    """Upper bound on (G(n) - G_min) / RT of one or many compositions.

    Parameters
    ----------
    formula_matrix : (E, S) atoms per formula unit.
    element_amounts : (E,) or (N, E) mol.
    potentials : (S,) or (N, S) mu0 / RT + ln(p / p0).
    amounts : (S,) or (N, S) mol, the composition to be judged.
    element_potentials : (E,) or (N, E); NaN for elements that are absent.
    log_mole_fractions : (N, S), where known more exactly than ln(n / sum n).
    condensed : (S,) mask of pure condensed phases; log_mole_fractions are not used for them.
    excluded : (N, S), species that the balance forces to zero; without it, those that hold an absent element.

    Returns
    -------
    (N,) gap [mol]. Where the composition misses the balance by rounding, the bound allows for that.

    Raises
    ------
    ProblemError : no w exists, because a species could be made from nothing.
    """
    A = np.asarray(formula_matrix, dtype=np.float64)
    n = np.atleast_2d(np.asarray(amounts, dtype=np.float64))
    c = np.broadcast_to(np.asarray(potentials, dtype=np.float64), n.shape)
    pi = np.broadcast_to(np.asarray(element_potentials, dtype=np.float64), (len(n), len(A)))
    b = np.broadcast_to(np.asarray(element_amounts, dtype=np.float64), pi.shape)
    absent = np.isnan(pi)
    if excluded is None:
        excluded = absent.astype(np.float64) @ np.abs(A) > 0.0
    possible = ~np.asarray(excluded)
    pi = np.where(absent, 0.0, pi)
    level = np.where(possible, pi @ A - c, -np.inf)  # ln of the mole fraction that pi assigns to each species
    if log_mole_fractions is None:
        with np.errstate(divide="ignore", invalid="ignore"):
            gas = n if condensed is None else np.where(condensed, 0.0, n)
            log_x = np.log(n / gas.sum(axis=1, keepdims=True))
    else:
        log_x = np.broadcast_to(log_mole_fractions, n.shape)
    is_gas = np.ones(n.shape[1], dtype=bool) if condensed is None else ~condensed
    log_x = np.where(is_gas, log_x, 0.0)
    counted = possible & (n > 0.0)
    difference = np.subtract(log_x, level, where=counted, out=np.zeros(n.shape))
    above_dual = (n * difference).sum(axis=1)  # G(n) / RT - (A n).pi
    imbalance = ((n @ A.T - b) * pi).sum(axis=1)
    excess = np.maximum(log_sum(level[:, is_gas]), level[:, ~is_gas].max(axis=1, initial=-np.inf))
    reach = b @ shift_weight(A)
    # a negative sum is rounding: no composition lies below the minimum
    return np.asarray(np.maximum(above_dual + imbalance + np.maximum(excess, 0.0) * reach, 0.0))


def log_sum(level: Floats) -> Floats:
    """(n,) ln sum exp over the last axis of (n, s); -inf where there is nothing to sum."""
    highest = level.max(axis=1, initial=-np.inf)
    scale = np.where(np.isfinite(highest), highest, 0.0)
    with np.errstate(divide="ignore"):
        return np.asarray(scale + np.log(np.exp(level - scale[:, None]).sum(axis=1)))


def shift_weight(A: Floats) -> Floats:
    """A vector w (E,) with w.a_j >= 1 for every species j of A (E, S). Raises ProblemError if there is none."""
    return _shift_weight_of_bytes(np.ascontiguousarray(A).tobytes(), A.shape)


@lru_cache(maxsize=256)
def _shift_weight_of_bytes(data: bytes, shape: tuple[int, int]) -> Floats:
    A = np.frombuffer(data, dtype=np.float64).reshape(shape)
    signed = (A < 0.0).any(axis=1)
    # atoms pull up, charge pulls down; the atoms of an ion outweigh its charge
    w = np.where(signed, -1.0, 1.0 + np.abs(A[signed]).sum(axis=0).max(initial=0.0))
    least = (w @ A).min()
    if least > 0.0:
        return np.asarray(w / least)
    from scipy.optimize import linprog

    found = linprog(A.sum(axis=1), A_ub=-A.T, b_ub=-np.ones(shape[1]), bounds=(None, None))
    if not found.success:
        raise ProblemError("a combination of species holds no elements: the formula matrix bounds no amounts")
    return np.asarray(found.x)
