"""How an equilibrium composition answers a small change of its chemical potentials.

For min sum n_j (c_j + ln n_j/N) with A n = b fixed, a change dc of the reduced potentials moves the amounts
by

    d ln n_j = a_j . dpi + d ln N - dc_j,     sum_j a_j n_j d ln n_j = 0,     sum_j n_j d ln n_j = N d ln N,

a symmetric linear system in (dpi, d ln N), the same as one Newton step of the minimisation (Smith & Missen,
*Chemical Reaction Equilibrium Analysis*, 1982, chapter 8: sensitivity analysis). Temperature enters as
dc_j/d ln T = -h_j/RT and pressure as dc_j/d ln p = 1.

In element rows the system is as ill-conditioned as the traces are small. So the rows are written in
components (the most abundant independent species), C = B^-1 A: every row is then as large as its own
component, and scaled by its diagonal the system is well-conditioned whatever the amounts.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]

# A basis serves a point as long as no species outgrows a component it is made of by more than this; the
# scaled system's condition number grows with it, and 100 leaves 13 digits.
_OUTGROWN = 100.0
_NO_ENTRY = 1e-9  # far above rounding, far below any ratio of numbers of atoms
_DEPENDENT = 1e-9  # same, for what is left of a column after projection


def composition_response(
    formula_matrix: FloatArray, amounts: FloatArray, potential_derivative: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Derivatives of ln n and ln N with respect to whatever `potential_derivative` is taken to.

    Args:
        formula_matrix: [1], (E, S).
        amounts: equilibrium amounts of the gases [mol], (N, S); zero for a species that the balance excludes.
        potential_derivative: derivative of mu_j0/RT + ln(p/p0), (N, S) or (S,).

    Returns:
        d ln n (N, S), zero for species of zero amount, and d ln N (N,). Points whose amounts are not
        finite come back as NaN.
    """
    amounts = np.atleast_2d(amounts)
    derivative = np.broadcast_to(potential_derivative, amounts.shape)
    response = np.full(amounts.shape, np.nan)
    total = np.full(len(amounts), np.nan)
    todo = np.flatnonzero(np.isfinite(amounts).all(axis=1) & (amounts.sum(axis=1) > 0))
    while todo.size:
        components = abundant_components(formula_matrix, amounts[todo[0]])
        C = in_components(formula_matrix, components)
        foreign = np.abs(formula_matrix[:, components] @ C - formula_matrix).max(axis=0) > _NO_ENTRY
        fits = _basis_serves(C, components, foreign, amounts[todo])
        fits[0] = True  # the basis was made for this point, so each round settles at least one
        here = todo[fits]
        response[here], total[here] = _response_in_components(C, amounts[here], derivative[here])
        todo = todo[~fits]
    return response, total


def response_beside_phases(
    formula_matrix: FloatArray,
    phase_matrix: FloatArray,
    amounts: FloatArray,
    potential_derivative: FloatArray,
    phase_derivative: FloatArray,
) -> tuple[FloatArray, FloatArray] | None:
    """`composition_response` of a gas beside pure condensed phases that are all present.

    A phase demands a_k.dpi = dc_k. What its potential fixes is taken out of the element rows, and what is left is
    a gas problem again.

    Args:
        formula_matrix: of the gases, (E, S). phase_matrix: of the phases, (E, K), K may be 0.
        amounts: of the gases, (N, S). potential_derivative: (N, S). phase_derivative: (N, K).

    Returns:
        d ln n (N, S) and d ln N (N,), or None where the phases depend on each other or leave the gas no freedom.
    """
    if phase_matrix.shape[1] == 0:
        return composition_response(formula_matrix, amounts, potential_derivative)
    rows = abundant_components(phase_matrix.T, np.ones(len(phase_matrix)))
    if len(rows) < phase_matrix.shape[1]:
        return None
    square = phase_matrix[rows]
    others = np.setdiff1d(np.arange(len(phase_matrix)), rows)
    # Whole numbers stay whole when multiplied by the determinant (Cramer's rule).
    determinant = abs(float(np.linalg.det(square)))
    left: FloatArray = determinant * (
        formula_matrix[others] - phase_matrix[others] @ np.linalg.solve(square, formula_matrix[rows])
    )
    whole = np.rint(left)
    left = np.where(np.abs(left - whole) < _NO_ENTRY, whole, left)
    if not (np.abs(left[:, (amounts > 0).any(axis=0)]) > _NO_ENTRY).any():
        return None
    fixed = np.linalg.solve(square.T, phase_derivative.T).T @ formula_matrix[rows]
    return composition_response(left, amounts, potential_derivative - fixed)


def abundant_components(formula_matrix: FloatArray, amounts: FloatArray) -> NDArray[np.intp]:
    """Indices of the most abundant linearly independent species of one point, most abundant first.

    Only species of non-zero amount count, so there may be fewer than elements.
    """
    order = np.argsort(-amounts, kind="stable")
    chosen: list[int] = []
    basis = np.empty((0, formula_matrix.shape[0]))
    for j in order[amounts[order] > 0]:
        column = formula_matrix[:, j]
        rest = column - (basis @ column) @ basis
        rest -= (basis @ rest) @ basis  # twice is enough (Kahan and Parlett)
        size = float(np.linalg.norm(rest))
        if size > _DEPENDENT * max(1.0, float(np.linalg.norm(column))):
            chosen.append(int(j))
            basis = np.vstack([basis, rest / size])
            if len(chosen) == formula_matrix.shape[0]:
                break
    return np.array(chosen, dtype=np.intp)


def in_components(formula_matrix: FloatArray, components: NDArray[np.intp]) -> FloatArray:
    """All species written in components, (R, S): column j holds the stoichiometric coefficients of species j.

    Columns of species outside the span of the components (all of zero amount) are meaningless.
    """
    columns = formula_matrix[:, components]
    # Independent rows of the components' columns, found as independent columns of their transpose.
    rows = abundant_components(columns.T, np.ones(len(columns)))
    C = np.asarray(np.linalg.solve(columns[rows], formula_matrix[rows]), dtype=np.float64)
    # By Cramer's rule the entries are whole numbers over the determinant (for whole numbers of atoms).
    # Made so again, a balance that is zero by stoichiometry is zero, and traces are not drowned in it.
    determinant = round(abs(float(np.linalg.det(columns[rows]))))
    if determinant:
        whole = np.rint(C * determinant)
        C = np.where(np.abs(C * determinant - whole) < _NO_ENTRY, whole / determinant, C)
    C[np.abs(C) < _NO_ENTRY] = 0.0
    C[:, components] = np.eye(len(components))
    return C


def _basis_serves(
    C: FloatArray, components: NDArray[np.intp], foreign: NDArray[np.bool_], amounts: FloatArray
) -> NDArray[np.bool_]:
    """For which points no species outgrows a component it contains, and none lies outside the basis."""
    serves: NDArray[np.bool_] = (amounts[:, components] > 0).all(axis=1) & (amounts[:, foreign] == 0).all(
        axis=1
    )
    for row, component in zip(C, components, strict=True):
        made_of_it = np.abs(row) > 0
        serves &= (amounts[:, made_of_it] <= _OUTGROWN * amounts[:, [component]]).all(axis=1)
    return serves


def _response_in_components(C: FloatArray, n: FloatArray, dc: FloatArray) -> tuple[FloatArray, FloatArray]:
    rank = len(C)
    pairs = (C[:, None, :] * C[None, :, :]).reshape(rank * rank, -1)
    total = n.sum(axis=1)
    weighted = n * dc
    matrix = np.zeros((len(n), rank + 1, rank + 1))
    matrix[:, :rank, :rank] = (n @ pairs.T).reshape(-1, rank, rank)
    matrix[:, rank, :rank] = matrix[:, :rank, rank] = n @ C.T
    right = np.concatenate([weighted @ C.T, weighted.sum(axis=1, keepdims=True)], axis=1)
    # Rows and columns scaled by the square root of the diagonal; N takes the place of the zero in the corner.
    diagonal = np.concatenate([np.einsum("nii->ni", matrix)[:, :rank], total[:, None]], axis=1)
    scale = 1.0 / np.sqrt(diagonal)
    matrix *= scale[:, :, None] * scale[:, None, :]
    solution = scale * np.linalg.solve(matrix, (scale * right)[:, :, None])[:, :, 0]
    response = solution[:, :rank] @ C + solution[:, rank:] - dc
    return np.where(n > 0, response, 0.0), solution[:, rank]
