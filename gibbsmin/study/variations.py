"""The cases that a study file asks for, as values of quantities; nothing is known here of what they mean."""

from __future__ import annotations

import csv
import itertools
import re
from collections import Counter
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, TypeAlias

from gibbsmin.errors import Fault
from gibbsmin.scenario.ranges import read_values
from gibbsmin.scenario.reading import Reading
from gibbsmin.scenario.structure import FAULTY
from gibbsmin.scenario.units import UnitFault, split_quantity
from gibbsmin.scenario.words import listed, nearest
from gibbsmin.strict_yaml import YamlPath
from gibbsmin.study.placing import BETWEEN_KEYS, Place, read_place
from gibbsmin.study.sampling import distribution_fault, draw, size_fault

Value: TypeAlias = "int | float | str"

MOST_CASES = 1_000_000
"""Cases of one study; more is a slip of the pen."""

CASE_COLUMN = "case"
_HEADING = re.compile(r"(.*?)\s*\[(.*)\]\s*\Z")


@dataclass(frozen=True)
class Quantity:
    """A varied quantity: its name, the places that take its values, the unit of plain numbers."""

    name: str
    places: tuple[Place, ...]
    unit: str | None = None

    def written(self, value: Value) -> Value:
        """The value as the scenario file takes it."""
        return value if self.unit is None or isinstance(value, str) else f"{value!r} {self.unit}"


@dataclass(frozen=True)
class Variant:
    """One case: values by name of quantity, its name where a table gives one, and where it comes from."""

    values: Mapping[str, Value]
    name: str = ""
    file: str = ""
    line: int | None = None


@dataclass
class Variations:
    """Reader of the sections 'quantities' and 'variations'; faults go to `reading`."""

    reading: Reading
    folder: Path
    quantities: dict[str, Quantity] = field(default_factory=dict)

    def read_quantities(self, data: Mapping[str, Any]) -> None:
        for name, entry in data.items():
            if "place" not in entry:
                continue
            given = entry["place"] if isinstance(entry["place"], list) else [entry["place"]]
            places = tuple(read_place(each) for each in given if each is not FAULTY)
            self.quantities[name] = Quantity(name, places, entry.get("unit"))

    def read(self, data: Any) -> Iterator[Variant]:
        """The cases of all entries, in order."""
        for i, entry in enumerate(data):
            if entry is FAULTY:
                continue
            path: YamlPath = ("variations", i)
            parts: list[list[Variant]] = []
            if "rows of" in entry:
                parts.append(self._rows(entry["rows of"], (*path, "rows of")))
            if "every combination of" in entry:
                parts.append(self._factorial(entry["every combination of"], (*path, "every combination of")))
            if "sample" in entry:
                parts.append(self._sample(entry["sample"], (*path, "sample")))
            yield from self._combined(parts, path)

    def _combined(self, parts: list[list[Variant]], path: YamlPath) -> Iterator[Variant]:
        names = [name for part in parts if part for name in part[0].values]
        for name in dict.fromkeys(name for name in names if names.count(name) > 1):
            self.reading.fault(path, f"{name!r} is varied twice within one entry", of_key=True)
            return
        count = 1
        for part in parts:
            count *= len(part)
        if count > MOST_CASES:
            self.reading.fault(path, f"{count} cases are too many for one study (at most {MOST_CASES})")
            return
        line = (self.reading.document.position(path) or (None,))[0]
        per_name: Counter[str] = Counter()
        for combination in itertools.product(*parts):
            values = {name: value for variant in combination for name, value in variant.values.items()}
            named = next((each for each in combination if each.name or each.file), None)
            if named is None:
                yield Variant(values, file=self.reading.document.file, line=line)
            else:
                per_name[named.name] += 1
                ending = f" {per_name[named.name]}" if named.name and len(parts) > 1 else ""
                yield Variant(values, named.name + ending, named.file, named.line)

    def _known(self, name: str, path: YamlPath) -> bool:
        """Whether a name is that of a quantity; a place is made one on the spot."""
        if name in self.quantities:
            return True
        if BETWEEN_KEYS in name:
            self.quantities[name] = Quantity(name, (read_place(name),))
            return True
        self.reading.fault(path, self._unknown(name), of_key=True)
        return False

    def _unknown(self, name: str) -> str:
        known = f"; defined: {listed(self.quantities)}" if self.quantities else ""
        return (
            f"{name!r} is neither a quantity of this study nor a place of the scenario (such as "
            f"'grid / pressure'){known}{nearest(name, self.quantities)}"
        )

    def _factorial(self, data: Mapping[str, Any], path: YamlPath) -> list[Variant]:
        columns: dict[str, list[Value]] = {}
        for name, given in data.items():
            if not self._known(name, (*path, name)):
                continue
            if isinstance(given, list):
                columns[name] = [value for value in given if value is not FAULTY]
                if len(set(map(str, columns[name]))) < len(columns[name]):
                    self.reading.fault((*path, name), f"a value of {name!r} is listed twice")
                continue
            found = read_values(self.reading, given, (*path, name), None)
            if found is not None:
                columns[name] = [
                    int(value) if value.denominator == 1 else float(value) for value in found.values
                ]
        count = 1
        for values in columns.values():
            count *= len(values)
        if count > MOST_CASES:
            self.reading.fault(path, f"{count} cases are too many for one study (at most {MOST_CASES})")
            return []
        rows = itertools.product(*columns.values())
        return [Variant(dict(zip(columns, row, strict=True))) for row in rows] if columns else []

    def _sample(self, data: Mapping[str, Any], path: YamlPath) -> list[Variant]:
        sound = True
        for name, given in data.get("quantities", {}).items():
            place = (*path, "quantities", name)
            sound = self._known(name, place) and sound
            if fault := distribution_fault(given):
                self.reading.fault(place, fault, of_key=True)
                sound = False
        if not {"method", "size"} <= data.keys() or not data.get("quantities"):
            return []
        if fault := size_fault(data["method"], int(data["size"])):
            self.reading.fault((*path, "size"), fault)
            sound = False
        if not sound:
            return []
        names = list(data["quantities"])
        rows = draw(
            data["method"], int(data["size"]), int(data.get("seed", 0)), list(data["quantities"].values())
        )
        return [Variant(dict(zip(names, row, strict=True))) for row in rows]

    def _rows(self, name: str, path: YamlPath) -> list[Variant]:
        file = self.folder / name
        shown = str(file)
        try:
            with file.open(encoding="utf-8-sig", newline="") as stream:
                lines = list(csv.reader(stream, strict=True))
        except (OSError, UnicodeDecodeError, csv.Error) as error:
            reason = error.strerror if isinstance(error, OSError) else error
            self.reading.fault(path, f"cannot read the table {name!r}: {reason}")
            return []
        if len(lines) < 2:
            self.reading.fault(path, f"the table {name!r} needs a heading and at least one row")
            return []
        headings = self._headings(lines[0], shown)
        found = [self._row(row, headings, shown, k) for k, row in enumerate(lines[1:], 2) if any(row)]
        return [variant for variant in found if variant is not None]

    def _headings(self, cells: list[str], file: str) -> list[tuple[str, str | None]]:
        """Name of the quantity and unit of each column; '' for one with a fault."""
        headings: list[tuple[str, str | None]] = []
        for k, cell in enumerate(cells):
            match = _HEADING.match(cell.strip())
            name, unit = (match[1], match[2]) if match else (cell.strip(), None)
            fault = ""
            if name in [earlier for earlier, _ in headings]:
                fault = f"the column {name!r} is there twice"
            elif name != CASE_COLUMN and name not in self.quantities:
                if BETWEEN_KEYS in name:
                    self.quantities[name] = Quantity(name, (read_place(name),), unit)
                else:
                    fault = self._unknown(name)
            if fault:
                self.reading.faults.append(Fault(f"column {k + 1}: {fault}", file, 1))
            headings.append(("" if fault else name, unit))
        return headings

    def _row(
        self, cells: list[str], headings: list[tuple[str, str | None]], file: str, line: int
    ) -> Variant | None:
        if len(cells) != len(headings):
            message = f"{len(cells)} cells, but the heading has {len(headings)}"
            self.reading.faults.append(Fault(message, file, line))
            return None
        values: dict[str, Value] = {}
        case = ""
        for (name, unit), cell in zip(headings, map(str.strip, cells), strict=True):
            if not cell:
                self.reading.faults.append(Fault(f"the cell of {name!r} is empty", file, line))
            elif name == CASE_COLUMN:
                case = cell
            elif name:
                values[name] = _cell(cell, unit)
        return Variant(values, case, file, line)


def _cell(text: str, unit: str | None) -> Value:
    """A plain number as such, or with the unit of its heading; everything else as the text it is."""
    try:
        number, word = split_quantity(text)
    except UnitFault:
        return text
    if word:
        return text
    if unit is not None:
        return f"{text} {unit}"
    return int(number) if number.denominator == 1 else float(text)
