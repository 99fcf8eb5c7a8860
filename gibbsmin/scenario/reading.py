"""What all parts of the scenario reader share: the document, the library, and the faults found so far."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from fractions import Fraction
from typing import TYPE_CHECKING, Any

from gibbsmin.constants import STANDARD_ATMOSPHERE
from gibbsmin.errors import AmbiguousSpeciesError, Fault, FormulaError, UnknownSpeciesError
from gibbsmin.scenario.ratios import as_exact
from gibbsmin.scenario.units import Kind, Quantity, UnitFault, read_quantity
from gibbsmin.scenario.words import listed, nearest
from gibbsmin.strict_yaml import Document, YamlPath

if TYPE_CHECKING:
    from gibbsmin.species import Species, SpeciesLibrary


@dataclass
class Reading:
    """One scenario file being read."""

    document: Document
    library: SpeciesLibrary
    ambient: Fraction = field(default_factory=lambda: as_exact(STANDARD_ATMOSPHERE))
    faults: list[Fault] = field(default_factory=list)
    remarks: list[str] = field(default_factory=list)

    def fault(self, path: YamlPath, message: str, *, of_key: bool = False) -> None:
        self.faults.append(self.document.fault(path, message, of_key=of_key))

    def quantity(self, value: Any, kind: Kind, path: YamlPath, *, unit: str | None = None) -> Quantity | None:
        """The quantity at `path`, or None after a fault."""
        try:
            quantity = read_quantity(value, kind, unit=unit, ambient=self.ambient)
        except UnitFault as fault:
            self.fault(path, str(fault))
            return None
        problem = out_of_bounds(quantity.si, kind)
        if problem:
            self.fault(path, f"{_written(value, unit)} {problem}")
            return None
        return quantity

    def species(self, name: str, path: YamlPath, *, of_key: bool = False) -> Species | None:
        """The species called `name`, or None after a fault."""
        return self._found(self.library.find, name, path, of_key)

    def condensed(self, name: str, path: YamlPath) -> Species | None:
        """The solid or liquid called `name`, or None after a fault."""
        try:
            found = self.library.find(name)
            if found.state == "g":
                self.library.find_condensed(name)
        except UnknownSpeciesError as error:
            if error.query != name:  # the gas was found, but nothing condensed of its formula
                self.fault(path, f"{name} is a gas, and no solid or liquid of its formula is known")
                return None
        except (AmbiguousSpeciesError, FormulaError):
            pass  # told below
        return self._found(self.library.find_condensed, name, path, False)

    def _found(
        self, find: Callable[[str], Species], name: str, path: YamlPath, of_key: bool
    ) -> Species | None:
        try:
            return find(name)
        except UnknownSpeciesError as error:
            hint = f"; did you mean {', '.join(error.suggestions)}?" if error.suggestions else ""
            self.fault(path, f"no species is called {name!r}{hint}", of_key=of_key)
        except AmbiguousSpeciesError as error:
            self.fault(
                path,
                f"{name!r} is the formula of several species; choose one of {', '.join(error.candidates)}",
                of_key=of_key,
            )
        except FormulaError as error:
            self.fault(path, f"no species is called {name!r} ({error.reason})", of_key=of_key)
        return None

    def choice(self, word: str, allowed: Iterable[str], what: str, path: YamlPath) -> bool:
        """Whether `word` is one of `allowed`; a fault if not."""
        words = list(allowed)
        if word in words:
            return True
        self.fault(path, f"{word!r} is not {what}; allowed: {listed(words)}{nearest(word, words)}")
        return False


MAGNITUDES = (Fraction(1, 10**30), Fraction(10**30))
"""Smallest and largest size, in SI, of a number that is not zero; beyond it floats would overflow later."""


def out_of_bounds(value: Fraction, kind: Kind | None) -> str:
    """What is wrong with an SI value of this kind (None: a ratio), or ''."""
    if value and not MAGNITUDES[0] <= abs(value) <= MAGNITUDES[1]:
        return "is beyond all measure"
    if kind == "temperature" and value <= 0:
        return "is not above absolute zero (0 K, -273.15 degC, -459.67 degF)"
    if kind == "pressure" and value <= 0:
        return "is not above vacuum (0 Pa absolute)"
    if kind in ("amount", None) and value < 0:
        return "is negative"
    return ""


def identifier(title: str) -> str:
    """Coordinate name for a title: 'CO2 to methane' becomes 'CO2_to_methane'."""
    name = re.sub(r"\W+", "_", title).strip("_")
    return f"axis_{name}" if name[:1].isdigit() else name


def _written(value: Any, unit: str | None) -> str:
    return f"{value} {unit}" if unit is not None and not isinstance(value, str) else f"{value}"
