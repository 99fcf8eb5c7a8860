"""Points close to solved ones: the iteration without the linear programs of a cold start."""

from __future__ import annotations

import numpy as np

from gibbsmin.minimiser.components import Amounts, Components, Floats
from gibbsmin.minimiser.newton import Batch, minimise_batches
from gibbsmin.minimiser.posing import Answers, Posed
from gibbsmin.minimiser.result import Minimum


def pose_like(A: Floats, b: Amounts, log_x: Floats) -> Posed:
    """The problem of element amounts b (E,) as posed at a solved point with mole fractions ln x (S,)."""
    ((posed, _),) = Posed.of(A, np.flatnonzero(np.isfinite(log_x)), b[None, :])
    return posed


def abundant_components(posed: Posed, log_x: Floats, known: Components | None = None) -> Components:
    """Components that suit a composition ln x (s,) of the kept species, sought from `known` ones if given."""
    if known is None:
        known = posed.system.components(posed.system.independent_columns(np.argsort(-log_x, kind="stable")))
    return known.adapted(log_x)


def minimise_near(
    posed: Posed,
    b: Amounts,
    c: Floats,
    components: Components,
    log_y: Floats,
    log_total: Floats,
    *,
    beside: bool = False,
) -> Minimum:
    """Solve points from estimates of their own.

    Parameters
    ----------
    posed : the problem, shared by all points.
    b : (E,) mol, shared by all points, or (n, E).
    c : (n, s) potentials of the kept species.
    components : of the estimates.
    log_y : (n, r) ln mole fractions of the components.
    log_total : (n,) ln(N / mol).
    beside : whether the gas is one beside condensed phases, as phases.py poses it.

    Returns
    -------
    Minimum of all S species.
    """
    points = np.arange(len(c))
    of_each = np.broadcast_to(b, (len(c), b.shape[-1]))
    independent = of_each[:, posed.system.rows]
    m = components.amounts(independent)
    batch = Batch.begin(components, points, m, log_y.copy(), np.exp(log_total), c)
    answers = Answers.blank(len(c), *posed.A.shape)
    for finished in minimise_batches([batch], independent, c):
        posed.finish(finished, of_each, c, points, answers, beside=beside)
    return answers.minimum()
