"""What a scenario would compute, before anything is computed: for `gibbsmin check`."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gibbsmin.scenario.model import Axis, Scenario

BYTES_PER_VALUE = 8

VALUES_PER_SPECIES = 2
"""Amount and mole fraction are kept for every species at every point."""

SINGLE_VALUES = 7
"""Numbers of a point whatever the number of species: status, gap, residual, gas amount and so on."""


@dataclass(frozen=True)
class Preview:
    """Size of a run.

    `result_bytes` is the size of the results in memory, and close to that of the file before compression;
    working memory is bounded by the solver's chunks and comes on top.
    """

    points: int
    species: int
    elements: int
    result_bytes: int


def preview(scenario: Scenario) -> Preview:
    """Size of the run that the scenario asks for."""
    species, elements = len(scenario.species), len(scenario.elements)
    values = VALUES_PER_SPECIES * species + elements + SINGLE_VALUES
    return Preview(scenario.points, species, elements, scenario.points * values * BYTES_PER_VALUE)


def describe(scenario: Scenario) -> str:
    """What the scenario would compute, as text for people."""
    size = preview(scenario)
    blocks = [
        scenario.title,
        "\n".join(["Feed by stream:", *_indented(feed_table(scenario))]),
        "\n".join(["Grid:", *_indented(_grid_lines(scenario))]),
        "\n".join([f"Gases: {size.species}, {scenario.choice.rule}", *_wrapped(scenario.choice.names)]),
        f"Elements: {', '.join(scenario.elements)}",
        f"Results: {size.points:,} points x {size.species} gases, about {_bytes(size.result_bytes)}",
    ]
    if scenario.choice.left_out:
        left_out = [f"{name}: {reason}" for name, reason in scenario.choice.left_out.items()]
        blocks.append("\n".join(["Left out:", *_indented(left_out)]))
    if scenario.remarks:
        blocks.append("\n".join(["Remarks:", *_indented(scenario.remarks)]))
    return "\n\n".join(blocks)


def feed_table(scenario: Scenario) -> list[str]:
    """Lines of a table with a row for each species and a column for each stream.

    Where a further axis changes a stream, its smallest and largest amount over the axes is shown.
    """
    unit = "kmol/h" if scenario.rate else "mol"
    factor = 1e-3 if scenario.rate else 1.0
    by_stream = scenario.stream_amounts()
    names = list(scenario.feed_species)
    rows = [["", *scenario.streams]]
    for name in names:
        row = [name]
        for amounts in by_stream.values():
            row.append(_span(amounts[name] * factor) if name in amounts else "-")
        rows.append(row)
    rows.append([f"total, {unit}", *(_span(_total(amounts) * factor) for amounts in by_stream.values())])
    rows.append(["temperature", *(_state(s.temperature, "K") for s in scenario.streams.values())])
    rows.append(
        [
            "pressure",
            *(
                _state(None if s.pressure is None else s.pressure / 1e5, "bar")
                for s in scenario.streams.values()
            ),
        ]
    )
    return _aligned(rows)


def _total(amounts: Mapping[str, NDArray[np.float64]]) -> NDArray[np.float64]:
    return np.asarray(sum(amounts.values()))


def _grid_lines(scenario: Scenario) -> list[str]:
    return _aligned([[axis.title, _count(len(axis)), _ends(axis)] for axis in scenario.axes])


def _count(number: int) -> str:
    return f"{number:,} value" if number == 1 else f"{number:,} values"


def _ends(axis: Axis) -> str:
    unit = "" if axis.display_unit == "1" else f" {axis.display_unit}"
    first, last = axis.display_values[0], axis.display_values[-1]
    if len(axis) == 1:
        return f"{first:g}{unit}"
    kind = "" if axis.spacing == "list" else f", {axis.spacing}"
    return f"{first:g} to {last:g}{unit}{kind}"


def _span(values: NDArray[np.float64]) -> str:
    low, high = f"{values.min():.6g}", f"{values.max():.6g}"
    return low if low == high else f"{low} to {high}"


def _state(value: float | None, unit: str) -> str:
    return "-" if value is None else f"{value:.6g} {unit}"


def _aligned(rows: list[list[str]]) -> list[str]:
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
    return ["  ".join(cell.ljust(w) for cell, w in zip(row, widths, strict=True)).rstrip() for row in rows]


def _indented(lines: Iterable[str]) -> list[str]:
    return [f"  {line}" for line in lines]


def _wrapped(words: tuple[str, ...]) -> list[str]:
    # names hold spaces ("C2H2 (acetylene)"), which a plain wrap would break at
    glued = ", ".join(word.replace(" ", "\0") for word in words)
    lines = textwrap.wrap(glued, 96, break_long_words=False, break_on_hyphens=False)
    return _indented([line.replace("\0", " ") for line in lines])


def _bytes(size: int) -> str:
    for unit, scale in (("GB", 1e9), ("MB", 1e6), ("kB", 1e3)):
        if size >= scale:
            return f"{size / scale:.3g} {unit}"
    return f"{size} bytes"
