"""A scenario as frozen, typed data: what one scenario file asks for, with every fault already ruled out.

Inside, everything is SI: temperature in K, pressure in Pa (absolute), ratios in mol/mol (or kg/kg). Feed
amounts are the one exception. They are in mol, or in mol/h when the streams are rates, because kmol/h to
mol/s divides by 3.6 and would make an exactly stoichiometric feed inexact.

Feed amounts and axis values are exact rational numbers (`fractions.Fraction`): what was written as 0.1 is one
tenth. `Scenario.feed_amounts` rounds them once, to the nearest float; `Scenario.exact_feed_amounts` does not.

Objects of this module are built by `gibbsmin.scenario.loading`; they can be pickled.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import TYPE_CHECKING, Literal

import numpy as np
from numpy.typing import NDArray

from gibbsmin.scenario.ratios import FeedEquations

if TYPE_CHECKING:
    from gibbsmin.reactions.wanted import ReactionsWanted
    from gibbsmin.species import Species, SpeciesLibrary

Measure = Literal["moles", "atoms", "mass", "oxygen demand"]
Spacing = Literal["list", "linear", "logarithmic"]

DEFAULT_SAMPLE_SIZE = 50
"""Points of a run that are solved again by the cross-check unless the file says otherwise."""

DEFAULT_TOLERANCE = 1e-6
"""Largest relative difference that the cross-check accepts; the reference solver itself is no better."""


@dataclass(frozen=True)
class Axis:
    """One axis of the grid.

    Attributes:
        name: coordinate name in the results, an identifier ("temperature", "steam_to_carbon").
        title: the name as the file has it ("steam to carbon").
        values: in `unit`, ascending and distinct.
        unit: "K", "Pa", "mol", "mol/h" or "1".
        display_values: the same points in `display_unit`.
        display_unit: the unit the user wrote ("degC", "bar(g)", "kmol/h"; "1" for a ratio).
        spacing: how the values were given.
        exact_values: `values` before rounding to floats.
    """

    name: str
    title: str
    values: tuple[float, ...]
    unit: str
    display_values: tuple[float, ...]
    display_unit: str
    spacing: Spacing
    exact_values: tuple[Fraction, ...] = field(repr=False)

    def __len__(self) -> int:
        return len(self.values)

    @property
    def array(self) -> NDArray[np.float64]:
        """`values` as a new array, shape (len(self),)."""
        return np.array(self.values, dtype=np.float64)

    @property
    def display_array(self) -> NDArray[np.float64]:
        """`display_values` as a new array, shape (len(self),)."""
        return np.array(self.display_values, dtype=np.float64)


@dataclass(frozen=True)
class RatioTerm:
    """Numerator or denominator of a feed ratio.

    Attributes:
        measure: "moles" of species, "atoms" of elements, "oxygen demand" of species (all mol), or "mass" of
            species (kg).
        names: species (or elements, for "atoms"); empty means everything in the streams.
        streams: the streams that count; empty means the whole feed.
    """

    measure: Measure
    names: tuple[str, ...]
    streams: tuple[str, ...]

    def __str__(self) -> str:
        what = f"{self.measure} of {' + '.join(self.names) or 'everything'}"
        return f"{what} in {' + '.join(self.streams)}" if self.streams else what


@dataclass(frozen=True)
class FeedRatio:
    """A ratio within the feed, e.g. steam to carbon: `numerator` over `denominator`."""

    numerator: RatioTerm
    denominator: RatioTerm


@dataclass(frozen=True)
class FurtherAxis(Axis):
    """An axis that changes the feed: the total of one stream, or a ratio reached by changing one stream.

    Attributes:
        stream: the stream whose amount follows this axis; its composition stays.
        ratio: None when the axis is the stream's total itself.
    """

    stream: str = ""
    ratio: FeedRatio | None = None


@dataclass(frozen=True)
class Stream:
    """One named feed stream.

    Attributes:
        amounts: species name -> mol (or mol/h for a rate), exact. Where a further axis sets the stream's
            total and the file gives none, they sum to 1.
        temperature: K, or None when the file gives none (then no heat duty can be worked out).
        pressure: Pa absolute, or None.
        display_unit: unit of the amounts as the user wrote it.
        axis: title of the further axis that sets this stream's total, or None.
    """

    name: str
    amounts: Mapping[str, Fraction]
    temperature: float | None = None
    pressure: float | None = None
    display_unit: str = "mol"
    display_temperature_unit: str = "K"
    display_pressure_unit: str = "Pa"
    axis: str | None = None

    @property
    def total(self) -> Fraction:
        """Sum of the amounts, mol or mol/h."""
        return sum(self.amounts.values(), Fraction(0))


@dataclass(frozen=True)
class Conversion:
    """Fraction of a feed species that is gone: 1 - (amount out) / (amount in)."""

    name: str
    species: str


@dataclass(frozen=True)
class Yield:
    """Product formed per feed.

    With `element` None: (product out - product in) / (`reactant` in), mol/mol. With `element` given:
    atoms of it in the product, out minus in, as a fraction of those in `reactant` in (in the whole
    feed where `reactant` is None).
    """

    name: str
    product: str
    reactant: str | None
    element: str | None


@dataclass(frozen=True)
class Selectivity:
    """Atoms of `element` in the product (out minus in) over those in the `reactant` that is gone."""

    name: str
    product: str
    reactant: str
    element: str


@dataclass(frozen=True)
class ProductRatio:
    """Amount of some species over that of others at equilibrium, e.g. H2/CO."""

    name: str
    numerator: tuple[str, ...]
    denominator: tuple[str, ...]


@dataclass(frozen=True)
class WantedBoundary:
    """Where along an axis something happens.

    Attributes:
        name: as the file has it.
        kind: "phase" (the phase begins to form), "mole fraction" or "conversion" (takes the value).
        species: name of the phase or of the gas.
        along: coordinate name of the axis.
        value: mole fraction or conversion [1]; 1 for a phase, its activity.
    """

    name: str
    kind: Literal["phase", "mole fraction", "conversion"]
    species: str
    along: str
    value: float = 1.0


@dataclass(frozen=True)
class WantedResults:
    """What to report and draw beside the full composition.

    `line_pressures` are the pressures [Pa], all of them points of the grid, at which composition is drawn
    against temperature; empty means that the figures choose. With an empty `key_species` the most abundant
    ones are chosen once they are known. `dew_points` are gases whose own liquid is meant.
    """

    key_species: tuple[str, ...]
    conversions: tuple[Conversion, ...] = ()
    yields: tuple[Yield, ...] = ()
    selectivities: tuple[Selectivity, ...] = ()
    ratios: tuple[ProductRatio, ...] = ()
    dry_basis: bool = True
    line_pressures: tuple[float, ...] = ()
    dew_points: tuple[str, ...] = ()
    boundaries: tuple[WantedBoundary, ...] = ()


@dataclass(frozen=True)
class CrossCheckWanted:
    """How much of the run is solved again by the independent solver, and how well it must agree."""

    extent: Literal["sample", "all", "none"] = "sample"
    sample_size: int = DEFAULT_SAMPLE_SIZE
    tolerance: float = DEFAULT_TOLERANCE


@dataclass(frozen=True)
class OutputWanted:
    """Files beside the NetCDF data set; `tables` is a subset of ("csv", "parquet")."""

    tables: tuple[Literal["csv", "parquet"], ...] = ()


@dataclass(frozen=True)
class SpeciesChoice:
    """Which gases and condensed phases take part, and by which rule of the file.

    Attributes:
        species: the gases themselves, in the order of the results.
        condensed: the pure condensed phases that may form. held_back: those whose activity alone is wanted.
        rule: one sentence for people.
        extrapolate: whether polynomials may be used outside their range.
        left_out: species that the rule found but that were left out, name -> reason.
    """

    species: tuple[Species, ...]
    rule: str
    extrapolate: bool = False
    left_out: Mapping[str, str] = field(default_factory=dict)
    condensed: tuple[Species, ...] = ()
    held_back: tuple[Species, ...] = ()

    @property
    def names(self) -> tuple[str, ...]:
        return tuple(each.name for each in self.species)


@dataclass(frozen=True, eq=False)
class Scenario:
    """A sound scenario: everything needed to solve it, nothing computed yet.

    Attributes:
        title, notes: text of the file.
        file: the path as it was given, or "" for text.
        text: the whole source text; `digest` is its SHA-256 in hex.
        streams: name -> Stream, in the order of the file. The feed is their sum.
        rate: True when streams are per time; then amounts are in mol/h.
        temperature, pressure, further_axes: the grid. The solved map has the shape
            (*further axes, temperature, pressure).
        species: the gases that take part; condensed phases are in `choice`.
        feed_species: every species of the feed, name -> Species; condensed ones (liquid water, coal) may be
            among them whether or not they take part in the equilibrium.
        library: the species library with the scenario's own species in it.
        ambient_pressure: Pa; gauge pressures were read against it.
        remarks: things that are no fault but should be told.
        positions: path in the file -> (line, column), both from 1.
        reactions: what is asked about single reactions, or None.
    """

    title: str
    notes: str
    file: str
    text: str = field(repr=False)
    digest: str = field(repr=False)
    streams: Mapping[str, Stream]
    rate: bool
    temperature: Axis
    pressure: Axis
    further_axes: tuple[FurtherAxis, ...]
    choice: SpeciesChoice
    feed_species: Mapping[str, Species] = field(repr=False)
    library: SpeciesLibrary = field(repr=False)
    results: WantedResults
    cross_check: CrossCheckWanted
    output: OutputWanted
    ambient_pressure: float
    remarks: tuple[str, ...] = ()
    positions: Mapping[tuple[str | int, ...], tuple[int, int]] = field(default_factory=dict, repr=False)
    reactions: ReactionsWanted | None = field(default=None, repr=False)

    @property
    def species(self) -> tuple[Species, ...]:
        return self.choice.species

    @property
    def extrapolate(self) -> bool:
        return self.choice.extrapolate

    @property
    def elements(self) -> tuple[str, ...]:
        """Elements of the feed, in order of first appearance."""
        seen: dict[str, None] = {}
        for each in self.feed_species.values():
            seen.update(dict.fromkeys(each.composition))
        return tuple(seen)

    @property
    def amount_unit(self) -> Literal["mol", "mol/h"]:
        return "mol/h" if self.rate else "mol"

    @property
    def axes(self) -> tuple[Axis, ...]:
        """All axes in the order of the map's dimensions."""
        return (*self.further_axes, self.temperature, self.pressure)

    @property
    def shape(self) -> tuple[int, ...]:
        return tuple(len(axis) for axis in self.axes)

    @property
    def feed_shape(self) -> tuple[int, ...]:
        """Shape over the further axes; () when there are none."""
        return tuple(len(axis) for axis in self.further_axes)

    @property
    def points(self) -> int:
        """Number of states to solve."""
        return math.prod(self.shape)

    def exact_stream_amounts(self) -> Mapping[str, Mapping[str, NDArray[np.object_]]]:
        """Stream -> species -> amounts as Fractions [`amount_unit`], object arrays of shape `feed_shape`."""
        result: dict[str, dict[str, NDArray[np.object_]]] = {
            name: {species: np.empty(self.feed_shape, dtype=object) for species in stream.amounts}
            for name, stream in self.streams.items()
        }
        for index, factors in self._stream_factors():
            for name, stream in self.streams.items():
                for species, amount in stream.amounts.items():
                    result[name][species][index] = amount * factors.get(name, 1)
        return result

    def exact_feed_amounts(self) -> Mapping[str, NDArray[np.object_]]:
        """Species -> amounts in the whole feed as Fractions [`amount_unit`], shape `feed_shape`."""
        total: dict[str, NDArray[np.object_]] = {}
        for amounts in self.exact_stream_amounts().values():
            for species, values in amounts.items():
                # np.asarray: adding two 0-d object arrays gives a bare Fraction
                total[species] = (
                    np.asarray(total[species] + values, dtype=object) if species in total else values
                )
        return total

    def stream_amounts(self) -> Mapping[str, Mapping[str, NDArray[np.float64]]]:
        """Stream -> species -> amounts [`amount_unit`], shape `feed_shape`."""
        return {
            stream: {species: values.astype(np.float64) for species, values in amounts.items()}
            for stream, amounts in self.exact_stream_amounts().items()
        }

    def feed_amounts(self) -> Mapping[str, NDArray[np.float64]]:
        """Species -> amounts in the whole feed [`amount_unit`], shape `feed_shape`, as they appear."""
        return {species: values.astype(np.float64) for species, values in self.exact_feed_amounts().items()}

    def describe(self) -> str:
        """What this scenario would compute, as text for people (see `gibbsmin.scenario.preview`)."""
        from gibbsmin.scenario.preview import describe

        return describe(self)

    def _stream_factors(self) -> Iterator[tuple[tuple[int, ...], Mapping[str, Fraction]]]:
        """For every combination of further-axis values: its index, and the factor on each changed stream."""
        equations = FeedEquations(self.streams, self.further_axes, self.feed_species)
        for index in itertools.product(*(range(size) for size in self.feed_shape)):
            values = [axis.exact_values[i] for axis, i in zip(self.further_axes, index, strict=True)]
            yield index, equations.factors(values)
