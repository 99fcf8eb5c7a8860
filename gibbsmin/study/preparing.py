"""From sound scenarios to cases: the arrays that solving needs, and the layout each of them fits."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from gibbsmin.running import fed_enthalpy, scenario_conditions
from gibbsmin.study.model import AxisLabel, Case, Keep, Layout

if TYPE_CHECKING:
    from gibbsmin.scenario import Scenario

FloatArray = NDArray[np.float64]


class Preparing:
    """Cases and layouts as they come in."""

    def __init__(self, keep: Keep) -> None:
        self.keep = keep
        self.cases: list[Case] = []
        self.layouts: list[Layout] = []
        self._axes: dict[bytes, FloatArray] = {}

    def add(self, name: str, values: Mapping[str, Any], scenario: Scenario) -> None:
        """Raises ConditionsError where an axis of the scenario is called like a result."""
        conditions = scenario_conditions(scenario)
        enthalpy = None
        if "heat duty" in self.keep.further and (fed := fed_enthalpy(scenario)) is not None:
            enthalpy = np.broadcast_to(fed.values, scenario.feed_shape)
        self.cases.append(
            Case(
                number=len(self.cases),
                name=name,
                title=scenario.title,
                layout=self._layout_of(scenario),
                digest=scenario.digest,
                values=dict(values),
                axes=tuple(self._shared(axis.array) for axis in scenario.axes),
                feed=conditions.feed.values,
                element_amounts=conditions.element_amounts,
                factor=conditions.factor,
                fed_enthalpy=enthalpy,
            )
        )

    def _layout_of(self, scenario: Scenario) -> int:
        names = [each.name for each in scenario.species]
        if self.keep.composition == "none":
            kept: list[int] = []
        elif self.keep.composition == "key species" and scenario.results.key_species:
            kept = sorted(names.index(name) for name in scenario.results.key_species)
        else:
            kept = list(range(len(names)))
        layout = Layout(
            species=scenario.species,
            feed_species=tuple(scenario.feed_species.values()),
            axes=tuple(AxisLabel(axis.name, axis.title, axis.unit) for axis in scenario.axes),
            shape=scenario.shape,
            results=replace(scenario.results, line_pressures=()),  # only for drawing
            kept_species=tuple(kept),
            amount_unit=scenario.amount_unit,
            extrapolate=scenario.extrapolate,
            tolerance=scenario.cross_check.tolerance,
            condensed=scenario.choice.condensed,
            held_back=scenario.choice.held_back,
        )
        for i, known in enumerate(self.layouts):
            if known.matches(layout):
                return i
        self.layouts.append(layout)
        return len(self.layouts) - 1

    def _shared(self, values: FloatArray) -> FloatArray:
        """The same array for the same values: cases usually differ in one axis or none."""
        return self._axes.setdefault(values.tobytes(), values)
