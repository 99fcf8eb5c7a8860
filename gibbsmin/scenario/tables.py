"""Tables of measured values in CSV files: headings with units, rows with their line.

A heading is a name and, where needed, a unit: `T [degC]`, `T (degC)` or, as ISO 80000 writes it, `T / degC`. Columns are
parted by comma, semicolon or tab; lines that begin with `#` are remarks; decimals have a point.
"""

from __future__ import annotations

import csv
import io
import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from os import PathLike
from pathlib import Path

from gibbsmin.errors import Fault, MeasurementError

LARGEST_FILE = 10_000_000
"""Bytes; a table of measured values is a few thousand."""

_HEADING = re.compile(
    r"\s*(?P<name>.+?)\s*(?:\[(?P<square>[^\]]*)\]|\((?P<round>[^()]*(?:\([^()]*\))?)\))\s*\Z"
)
_SLASH = re.compile(r"\s*(?P<name>[^/]+?)\s*/\s*(?P<unit>.+?)\s*\Z")


@dataclass(frozen=True)
class Heading:
    """Name and unit ("" where none is written) of a column."""

    name: str
    unit: str


@dataclass(frozen=True)
class Row:
    """One line of the table: heading name -> text, blank cells left out; and its place."""

    cells: Mapping[str, str]
    place: Fault


@dataclass(frozen=True)
class Table:
    """A table with its headings by name, in the order of the file."""

    headings: Mapping[str, Heading]
    rows: tuple[Row, ...]
    place: Fault


def read_table(path: str | PathLike[str], *, shown_as: str = "") -> Table:
    """Read a CSV file.

    Raises:
        MeasurementError: the file cannot be read, is no table, or has rows that do not fit its headings.
    """
    name = shown_as or str(path)
    try:
        raw = Path(path).read_bytes()
    except OSError as error:
        raise MeasurementError([Fault(f"cannot be read: {error.strerror or error}", name)]) from None
    if len(raw) > LARGEST_FILE:
        raise MeasurementError([Fault(f"is no table of values: {len(raw)} bytes", name)])
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        raise MeasurementError([Fault("the file is not UTF-8 text here", name, line)]) from None
    return parse_table(text, name)


def parse_table(text: str, name: str = "", *, first_line: int = 1) -> Table:
    """As `read_table`, for text; `first_line` is the number of its first line when it is part of a file."""
    lines = [
        (number, line)
        for number, line in enumerate(text.splitlines(), first_line)
        if line.strip() and not line.lstrip().startswith("#")
    ]
    if not lines:
        raise MeasurementError([Fault("the table is empty", name, first_line if first_line > 1 else None)])
    first, head = lines[0]
    delimiter = max(",;\t", key=head.count)
    headings = [_heading(cell) for cell in _cells(head, delimiter)]
    faults = _heading_faults(headings, name, first)
    rows = []
    for number, line in lines[1:]:
        cells = _cells(line, delimiter)
        if len(cells) != len(headings):
            faults.append(
                Fault(f"{len(cells)} cells, but the heading has {len(headings)} columns", name, number)
            )
            continue
        by_name = {h.name: cell for h, cell in zip(headings, cells, strict=True) if cell}
        rows.append(Row(by_name, Fault("", name, number)))
    if not rows and not faults:
        faults.append(Fault("the table has a heading but no values", name, first))
    if faults:
        raise MeasurementError(faults)
    return Table({each.name: each for each in headings}, tuple(rows), Fault("", name, first))


def number(row: Row, column: str, faults: list[Fault]) -> float:
    """The finite number in a column; NaN after a fault, which says what was found."""
    text = row.cells.get(column)
    if text is None:
        faults.append(_at(row, f"{column} is missing"))
        return math.nan
    try:
        value = float(text)
    except ValueError:
        hint = "; write decimals with a point" if "," in text else ""
        faults.append(_at(row, f"{column}: expected a number, found {text!r}{hint}"))
        return math.nan
    if not math.isfinite(value):
        faults.append(_at(row, f"{column}: expected a finite number, found {text!r}"))
        return math.nan
    return value


def _at(row: Row, message: str) -> Fault:
    return Fault(message, row.place.file, row.place.line)


def _cells(line: str, delimiter: str) -> list[str]:
    return [
        cell.strip()
        for cell in next(csv.reader(io.StringIO(line), delimiter=delimiter, skipinitialspace=True))
    ]


def _heading(cell: str) -> Heading:
    match = _HEADING.match(cell)
    # u(CO) is a name, not a quantity with the unit CO; a unit in round brackets has a blank before it.
    if match and (match["square"] is not None or cell[: match.start("round") - 1].endswith(" ")):
        return Heading(match["name"], (match["square"] or match["round"] or "").strip())
    slash = _SLASH.match(cell)
    if slash:
        unit = slash["unit"]
        return Heading(slash["name"], unit[1:-1] if unit.startswith("(") and unit.endswith(")") else unit)
    return Heading(cell.strip(), "")


def _heading_faults(headings: list[Heading], name: str, line: int) -> list[Fault]:
    faults = []
    seen: set[str] = set()
    for count, each in enumerate(headings, 1):
        if not each.name:
            faults.append(Fault(f"column {count} has no heading", name, line))
        elif each.name in seen:
            faults.append(Fault(f"the column {each.name!r} is there twice", name, line))
        seen.add(each.name)
    return faults
