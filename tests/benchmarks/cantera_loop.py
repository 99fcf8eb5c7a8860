"""The loop that a user of Cantera writes: set the state of every point, equilibrate, keep the mole fractions.

Same species data on both sides (`gibbsmin.cantera_gas`), Cantera's default solver and options, one thread, as
Cantera has no other.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from gibbsmin.cantera_gas import CanteraGas, silenced
from gibbsmin.species import ThermoTable
from tests.benchmarks.gases import Floats


class CanteraLoop:
    """An ideal gas of the table's species, for temperatures [K] between two limits."""

    def __init__(self, table: ThermoTable, temperatures: tuple[float, float]) -> None:
        # The phase itself: CanteraGas.equilibrate guards standard output at every call, which costs time.
        self.phase: Any = CanteraGas(table, temperatures)._gas

    def solve(
        self, temperature: Floats, pressure: Floats, feed: Floats, *, from_neighbour: bool = False
    ) -> tuple[Floats, int]:
        """Mole fractions (N, S), NaN where Cantera raised, and the number of those points.

        Args:
            temperature: K. pressure: Pa. (N,) each.
            feed: mole fractions (S,) for all points or (N, S).
            from_neighbour: start every point but the first from the answer of the one before, which has the
                same element totals.
        """
        phase, failures = self.phase, 0
        out = np.empty((len(temperature), phase.n_species))
        feeds = np.broadcast_to(feed, out.shape)
        points = zip(temperature.tolist(), pressure.tolist(), feeds, strict=True)
        fresh = True
        with silenced():
            for number, (T, p, X) in enumerate(points):
                if fresh or not from_neighbour:
                    phase.TPX = T, p, X
                else:
                    phase.TP = T, p
                try:
                    phase.equilibrate("TP")
                    out[number] = phase.X
                    fresh = False
                except Exception:  # CanteraError, whose class is only known to the module imported inside
                    out[number] = np.nan
                    failures += 1
                    fresh = True
        return out, failures
