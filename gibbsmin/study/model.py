"""A study as frozen data: what its cases share (layouts), what each is (cases), what is kept of it.

Cases are reduced to the arrays that solving needs as soon as their scenarios are found sound: a scenario with
its rational axes takes a hundred times the memory.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, Literal

import numpy as np
from numpy.typing import NDArray

from gibbsmin.scenario.model import WantedResults

if TYPE_CHECKING:
    from gibbsmin.species import Species
    from gibbsmin.study.variations import Quantity, Value

FloatArray = NDArray[np.float64]
Composition = Literal["key species", "all", "none"]

DEFAULT_CHECKED_POINTS = 1
"""Points of each case that are solved again: over hundreds of cases, hundreds of independent answers."""


@dataclass(frozen=True)
class AxisLabel:
    """What an axis is called in the results ("steam_to_carbon"), in the file, and its unit ("K", "Pa", "1")."""

    name: str
    title: str
    unit: str


@dataclass(frozen=True, eq=False)
class Layout:
    """What cases must have in common to lie in the same arrays.

    Attributes:
        species: the S gases that take part; `feed_species` the J of the feed.
        condensed: pure condensed phases that may form; `held_back` those whose activity alone is wanted.
        axes: further axes in the order of the scenario, then temperature and pressure; `shape` their lengths.
        results: what the scenarios ask for by name.
        kept_species: indices of the species whose mole fractions are stored.
        amount_unit: "mol" or "mol/h".
        extrapolate: whether species data are used outside their range.
        tolerance: of the cross-check.
    """

    species: tuple[Species, ...]
    feed_species: tuple[Species, ...]
    axes: tuple[AxisLabel, ...]
    shape: tuple[int, ...]
    results: WantedResults
    kept_species: tuple[int, ...]
    amount_unit: str
    extrapolate: bool
    tolerance: float
    condensed: tuple[Species, ...] = ()
    held_back: tuple[Species, ...] = ()

    @property
    def phases(self) -> tuple[Species, ...]:
        """All condensed phases that results speak of."""
        return (*self.condensed, *self.held_back)

    @property
    def used_species(self) -> tuple[Species, ...]:
        """Every species whose data decide the values."""
        return (*self.species, *self.phases, *self.feed_species)

    @property
    def points(self) -> int:
        """Points of one case."""
        return math.prod(self.shape)

    @property
    def feed_shape(self) -> tuple[int, ...]:
        return self.shape[:-2]

    def matches(self, other: Layout) -> bool:
        """Whether cases of the two lie in the same arrays."""
        mine, others = self._without_species(), other._without_species()
        return mine == others and self.used_species == other.used_species

    def _without_species(self) -> tuple[Any, ...]:
        return (
            self.axes,
            self.shape,
            self.results,
            self.kept_species,
            self.amount_unit,
            self.extrapolate,
            self.tolerance,
            len(self.species),
            len(self.condensed),
            len(self.held_back),
        )


@dataclass(frozen=True, eq=False)
class Case:
    """One case, ready to be solved.

    Attributes:
        number: position in the study, from 0; `name` is unique.
        layout: index of its layout.
        digest: SHA-256 of its scenario's text.
        values: the varied quantities.
        axes: values of the layout's axes, in K, Pa, mol/mol ...
        feed: (*feed shape, J) in the layout's amount unit.
        element_amounts, factor: as in `gibbsmin.solving.Conditions`, (F, E) and (F,).
        fed_enthalpy: of the whole feed, (*feed shape), or None where a stream has no temperature.
    """

    number: int
    name: str
    title: str
    layout: int
    digest: str
    values: Mapping[str, Value]
    axes: tuple[FloatArray, ...]
    feed: FloatArray
    element_amounts: NDArray[Any]
    factor: FloatArray
    fed_enthalpy: FloatArray | None = None

    @property
    def temperature(self) -> FloatArray:
        return self.axes[-2]

    @property
    def pressure(self) -> FloatArray:
        return self.axes[-1]


@dataclass(frozen=True)
class Keep:
    """What is stored; `further` are the words of the study file ("heat duty")."""

    composition: Composition = "key species"
    further: tuple[str, ...] = ()


@dataclass(frozen=True, eq=False)
class Study:
    """A whole study, every fault already ruled out.

    Attributes:
        file, text: the study file and what it says; the text is "" for a study made in Python.
        quantities: the varied quantities in the order in which cases name them.
        checked_points: points of each case that the cross-check solves again.
        cases_per_chunk: as the file asks for, or None.
    """

    title: str
    notes: str
    file: str
    text: str
    cases: tuple[Case, ...]
    layouts: tuple[Layout, ...]
    quantities: Mapping[str, Quantity] = field(default_factory=dict)
    keep: Keep = field(default_factory=Keep)
    checked_points: int = DEFAULT_CHECKED_POINTS
    cases_per_chunk: int | None = None

    @property
    def points(self) -> int:
        """Points of all cases."""
        return sum(self.layouts[case.layout].points for case in self.cases)

    def cases_of(self, layout: int) -> list[Case]:
        return [case for case in self.cases if case.layout == layout]
