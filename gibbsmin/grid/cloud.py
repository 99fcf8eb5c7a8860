"""Scattered points by index, and the coordinates in which near points have similar compositions."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gibbsmin.grid.nodes import Floats, Indices
from gibbsmin.minimiser.components import Amounts

LN_T_SCALE, LN_P_SCALE, LN_FEED_SCALE = 30.0, 1.5, 5.0
"""Change of a typical ln y with ln T (enthalpy of reaction over RT), ln p, and the logarithm of an element's share."""


@dataclass(frozen=True)
class Cloud:
    """Points by index: element amounts b (F, E) mol, gibbs_RT (nT, S), log_pressure (nP,), and their indices (N,)."""

    A: Floats
    b: Amounts
    gibbs_RT: Floats  # noqa: N815 - the field's own symbol
    temperature: Floats
    log_pressure: Floats
    feed: Indices
    at_T: Indices  # noqa: N815
    at_p: Indices
    condensed: NDArray[np.bool_]

    def potentials(self, index: Indices | slice) -> Floats:
        """(n, S) g / RT of some points, plus ln p of the gases."""
        return self.gibbs_RT[self.at_T[index]] + self.log_pressure[self.at_p[index], None] * ~self.condensed

    def log_size(self, index: Indices, elements: Indices) -> Floats:
        """(n,) logarithm of the sum of element amounts."""
        return np.asarray(np.log(self.b[self.feed[index]][:, elements].astype(np.float64).sum(axis=1)))

    def standard(self, species: Indices, index: Indices) -> Floats:
        """(q, n) g / RT of some species and points."""
        out = np.empty((len(species), len(index)))
        at = self.at_T[index]
        for row, one in zip(out, species, strict=True):
            self.gibbs_RT[:, one].take(at, out=row, mode="clip")
        return out

    def features(self, index: Indices | slice, elements: Indices) -> Floats:
        """(n, d) coordinates in which near points have similar compositions."""
        shares = self.b[self.feed[index]][:, elements].astype(np.float64)
        return np.column_stack(
            [
                LN_T_SCALE * np.log(self.temperature[self.at_T[index]]),
                LN_P_SCALE * self.log_pressure[self.at_p[index]],
                LN_FEED_SCALE * np.log(shares / shares.sum(axis=1, keepdims=True)),
            ]
        )
