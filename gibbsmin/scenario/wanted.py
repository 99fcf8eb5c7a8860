"""What the file wants reported: key species, conversions, yields, selectivities, ratios, cross-check."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import TYPE_CHECKING, Any, Literal

from gibbsmin.errors import AmbiguousSpeciesError, FormulaError, UnknownSpeciesError
from gibbsmin.scenario.feed import Feed
from gibbsmin.scenario.model import (
    DEFAULT_SAMPLE_SIZE,
    DEFAULT_TOLERANCE,
    Axis,
    Conversion,
    CrossCheckWanted,
    OutputWanted,
    ProductRatio,
    Selectivity,
    SpeciesChoice,
    WantedBoundary,
    WantedResults,
    Yield,
)
from gibbsmin.scenario.reading import Reading
from gibbsmin.scenario.structure import FAULTY
from gibbsmin.strict_yaml import YamlPath

if TYPE_CHECKING:
    from gibbsmin.species import Species

_BOUNDARY_KINDS: dict[str, Literal["phase", "mole fraction", "conversion"]] = {
    "phase": "phase",
    "mole fraction of": "mole fraction",
    "conversion of": "conversion",
}

NEAR_ENOUGH = 0.01
"""Fraction by which the nearest pressure of the grid may differ from one of 'lines at' without a remark."""


def read_cross_check(data: Mapping[str, Any]) -> CrossCheckWanted:
    return CrossCheckWanted(
        extent=data.get("points", "sample"),
        sample_size=int(data.get("sample size", DEFAULT_SAMPLE_SIZE)),
        tolerance=float(data.get("tolerance", DEFAULT_TOLERANCE)),
    )


def read_output(data: Mapping[str, Any]) -> OutputWanted:
    tables = dict.fromkeys(each for each in data.get("tables", ()) if each is not FAULTY)
    return OutputWanted(tables=tuple(tables))


def read_results(
    reading: Reading,
    data: Mapping[str, Any],
    feed: Feed | None,
    choice: SpeciesChoice | None,
    pressure: Axis | None,
    axes: Sequence[Axis] = (),
) -> WantedResults:
    """The wanted results; faults are recorded, so the return value counts only when there are none.

    Without a sound feed or choice, what depends on it is not checked, but everything else still is.
    """
    reader = _ResultsReader(reading, feed, choice)
    return WantedResults(
        key_species=reader.several(data.get("key species", ()), ("results", "key species")),
        conversions=tuple(reader.conversions(data.get("conversions", ()))),
        yields=tuple(reader.yields(data.get("yields", {}))),
        selectivities=tuple(reader.selectivities(data.get("selectivities", {}))),
        ratios=tuple(reader.ratios(data.get("ratios", {}))),
        dry_basis=bool(data.get("dry basis", True)),
        line_pressures=reader.line_pressures(data.get("lines at", ()), pressure),
        dew_points=tuple(reader.dew_points(data.get("dew points", ()))),
        boundaries=tuple(reader.boundaries(data.get("boundaries", {}), axes)),
    )


class _ResultsReader:
    def __init__(self, reading: Reading, feed: Feed | None, choice: SpeciesChoice | None) -> None:
        self.reading = reading
        self.feed = feed
        self.gases = None if choice is None else [species.name for species in choice.species]
        self.phases = {} if choice is None else {each.name: each for each in choice.condensed}

    def product(self, name: Any, path: YamlPath) -> Species | None:
        """A gas or a condensed phase that takes part; the gas where both have the name."""
        species = None if name is FAULTY else self.reading.species(name, path)
        if species is None or self.gases is None or species.name in self.phases:
            return species
        if species.name not in self.gases:
            same = [each for each in self.phases.values() if each.formula == species.formula]
            if same:
                return same[0]
        everything = [*self.gases, *self.phases]
        what = "a gas or phase that takes part" if self.phases else "a gas that takes part"
        return species if self.reading.choice(species.name, everything, what, path) else None

    def gas(self, name: Any, path: YamlPath) -> Species | None:
        """A gas that takes part."""
        species = None if name is FAULTY else self.reading.species(name, path)
        if species is None or self.gases is None:
            return species
        takes_part = self.reading.choice(species.name, self.gases, "a gas that takes part", path)
        return species if takes_part else None

    def reactant(self, name: Any, path: YamlPath) -> Species | None:
        """A gas of the feed, or a condensed phase of it that takes part."""
        species = None if name is FAULTY else self.reading.species(name, path)
        if species is None or self.feed is None:
            return species
        fed = [name for name, each in self.feed.species.items() if each.state == "g" or name in self.phases]
        return species if self.reading.choice(species.name, fed, "a gas of the feed", path) else None

    def several(self, value: Any, path: YamlPath) -> tuple[str, ...]:
        if isinstance(value, str):
            found = self.gas(value, path)
            return () if found is None else (found.name,)
        names: dict[str, None] = {}
        for i, item in enumerate(value):
            species = self.gas(item, (*path, i))
            if species is None:
                continue
            if species.name in names:
                self.reading.fault((*path, i), f"{species.name} is listed twice")
            names[species.name] = None
        return tuple(names)

    def conversions(self, data: Iterable[Any]) -> Iterable[Conversion]:
        for i, item in enumerate(data):
            species = self.reactant(item, ("results", "conversions", i))
            if species is not None:
                yield Conversion(f"conversion of {species.name}", species.name)

    def yields(self, data: Mapping[str, Any]) -> Iterable[Yield]:
        for name, entry in data.items():
            path = ("results", "yields", name)
            if "of" not in entry:
                continue
            product = self.product(entry["of"], (*path, "of"))
            reactant = self.reactant(entry["from"], (*path, "from")) if "from" in entry else None
            element = entry.get("element")
            if reactant is None and "from" not in entry and element is None:
                self.reading.fault(path, "a yield needs 'from', 'element', or both", of_key=True)
            if product is None or (reactant is None and "from" in entry):
                continue
            if element is None or self._counts(element, product, reactant, (*path, "element")):
                yield Yield(name, product.name, None if reactant is None else reactant.name, element)

    def selectivities(self, data: Mapping[str, Any]) -> Iterable[Selectivity]:
        for name, entry in data.items():
            path = ("results", "selectivities", name)
            if not {"of", "from", "element"} <= entry.keys():
                continue
            product = self.product(entry["of"], (*path, "of"))
            reactant = self.reactant(entry["from"], (*path, "from"))
            if product is None or reactant is None:
                continue
            if self._counts(entry["element"], product, reactant, (*path, "element")):
                yield Selectivity(name, product.name, reactant.name, entry["element"])

    def ratios(self, data: Mapping[str, Any]) -> Iterable[ProductRatio]:
        for name, entry in data.items():
            path = ("results", "ratios", name)
            if "of" not in entry or "to" not in entry:
                continue
            numerator = self.several(entry["of"], (*path, "of"))
            denominator = self.several(entry["to"], (*path, "to"))
            if numerator and denominator:
                yield ProductRatio(name, numerator, denominator)

    def dew_points(self, data: Iterable[Any]) -> Iterable[str]:
        for i, item in enumerate(data):
            path = ("results", "dew points", i)
            vapour = self.gas(item, path)
            if vapour is None:
                continue
            try:
                liquid = self.reading.library.find_condensed(f"{vapour.formula}(l)")
            except (UnknownSpeciesError, AmbiguousSpeciesError, FormulaError):
                self.reading.fault(path, f"the library has no liquid {vapour.formula}")
                continue
            if liquid.composition != vapour.composition:
                self.reading.fault(path, f"{liquid.name} is no liquid of {vapour.name}")
                continue
            yield vapour.name

    def boundaries(self, data: Mapping[str, Any], axes: Sequence[Axis]) -> Iterable[WantedBoundary]:
        for name, entry in data.items():
            path: YamlPath = ("results", "boundaries", name)
            found = [key for key in _BOUNDARY_KINDS if key in entry]
            if len(found) != 1:
                told = " and ".join(map(repr, found)) or "none of them"
                self.reading.fault(
                    path,
                    f"needs one of 'phase', 'mole fraction of', 'conversion of'; found {told}",
                    of_key=True,
                )
                continue
            key = found[0]
            if ("value" in entry) == (key == "phase"):
                fault = "needs a 'value'" if key != "phase" else "takes no 'value': the activity is 1 there"
                self.reading.fault((*path, key), f"{key!r} {fault}", of_key=True)
                continue
            species = self._boundary_species(key, entry[key], (*path, key))
            along = entry.get("along")
            titles = {axis.title: axis for axis in axes}
            if axes and along is not None and self.reading.choice(along, titles, "an axis", (*path, "along")):
                axis = titles[along]
                if len(axis) < 2:
                    self.reading.fault((*path, "along"), f"{along} has one value; a boundary needs a range")
                elif species is not None:
                    value = self._boundary_value(entry, key, path)
                    if value is not None:
                        yield WantedBoundary(name, _BOUNDARY_KINDS[key], species.name, axis.name, value)

    def _boundary_species(self, key: str, name: Any, path: YamlPath) -> Species | None:
        if key == "mole fraction of":
            return self.gas(name, path)
        if key == "conversion of":
            return self.reactant(name, path)
        return self.reading.condensed(name, path)

    def _boundary_value(self, entry: Mapping[str, Any], key: str, path: YamlPath) -> float | None:
        if key == "phase":
            return 1.0
        value = float(entry["value"])
        least = 0.0 if key == "mole fraction of" else -1e30
        if not least < value < 1:
            self.reading.fault(
                (*path, "value"), f"{value:g} is no {key.removesuffix(' of')} that can be crossed"
            )
            return None
        return value

    def line_pressures(self, data: Iterable[Any], pressure: Axis | None) -> tuple[float, ...]:
        found: dict[float, None] = {}
        for i, item in enumerate(data):
            path = ("results", "lines at", i)
            quantity = None if item is FAULTY else self.reading.quantity(item, "pressure", path)
            if quantity is None or pressure is None:
                continue
            wanted = float(quantity.si)
            # a wanted end of the grid may differ from it by the rounding of a unit
            low, high = pressure.values[0] * (1 - 1e-9), pressure.values[-1] * (1 + 1e-9)
            if not low <= wanted <= high:
                first, *_, last = (pressure.display_values[0], *pressure.display_values)
                ends = f"{first:g} to {last:g} {pressure.display_unit}"
                self.reading.fault(path, f"{item} is outside the pressures of the grid, {ends}")
                continue
            k = min(range(len(pressure)), key=lambda j: abs(pressure.values[j] - wanted))
            if abs(pressure.values[k] - wanted) > NEAR_ENOUGH * wanted:
                self.reading.remarks.append(
                    f"lines at {item}: drawn at {pressure.display_values[k]:g} {pressure.display_unit}, "
                    "the nearest pressure of the grid"
                )
            found[pressure.values[k]] = None
        return tuple(found)

    def _counts(self, element: str, product: Species, reactant: Species | None, path: YamlPath) -> bool:
        """Whether the element is in the product and in what it comes from."""
        if not self.reading.choice(element, product.composition, f"an element of {product.name}", path):
            return False
        if reactant is not None:
            return self.reading.choice(element, reactant.composition, f"an element of {reactant.name}", path)
        if self.feed is None:
            return True
        of_feed = dict.fromkeys(e for species in self.feed.species.values() for e in species.composition)
        return self.reading.choice(element, of_feed, "an element of the feed", path)
