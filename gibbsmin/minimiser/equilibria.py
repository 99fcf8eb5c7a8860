"""Equilibria of gas and condensed phases on their way from the choice of phases to the answer."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gibbsmin.minimiser.components import Components, Floats, Indices


@dataclass
class Equilibria:
    """Points (n,) with their phases chosen: amounts (n, S), ln activities (n, S), potentials of the components (n, r)."""

    components: Components
    amounts: Floats
    log_activities: Floats
    component_potentials: Floats
    steps: Indices
    solved: NDArray[np.bool_]

    def take(self, chosen: NDArray[np.bool_]) -> Equilibria:
        return Equilibria(
            self.components,
            self.amounts[chosen],
            self.log_activities[chosen],
            self.component_potentials[chosen],
            self.steps[chosen],
            self.solved[chosen],
        )
