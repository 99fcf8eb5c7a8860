"""What a scenario would compute, before anything is computed: for `gibbsmin check`."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from gibbsmin.scenario.model import Axis, Scenario
from gibbsmin.scenario.units import Unit, find_unit

BYTES_PER_VALUE = 8

VALUES_PER_SPECIES = 2
"""Amount and mole fraction are kept for every species at every point."""

SINGLE_VALUES = 7
"""Numbers of a point whatever the number of species: status, gap, residual, gas amount and so on."""

# Seconds on one core of a 2-core server, fitted by eye to the examples (1,025 to 2,700 points, 5 to 76 gases)
# and to a map of 40,000 points and 121 gases, solving and derived results together; each is met within a
# factor of five, for how much of a map is settled by interpolation differs from case to case.
SECONDS_PER_MAP = 0.05
SECONDS_PER_POINT = 1e-5
SECONDS_PER_POINT_AND_SPECIES = 2e-7
SECONDS_PER_CHECKED_POINT = 1e-3
SECONDS_PER_CHECKED_POINT_AND_SPECIES = 1e-5


@dataclass(frozen=True)
class Preview:
    """Size of a run.

    `result_bytes` is the size of the results in memory, and close to that of the file before compression;
    working memory is bounded by the solver's chunks and comes on top. `solving_seconds` and
    `checking_seconds` are orders of magnitude for one core; pictures and the report come on top.
    """

    points: int
    species: int
    elements: int
    result_bytes: int
    checked_points: int
    solving_seconds: float
    checking_seconds: float


def preview(scenario: Scenario) -> Preview:
    """Size of the run that the scenario asks for."""
    species, elements = len(scenario.species), len(scenario.elements)
    values = VALUES_PER_SPECIES * species + elements + SINGLE_VALUES
    points = scenario.points
    checked = _checked_points(scenario)
    return Preview(
        points=points,
        species=species,
        elements=elements,
        result_bytes=points * values * BYTES_PER_VALUE,
        checked_points=checked,
        solving_seconds=SECONDS_PER_MAP
        + points * (SECONDS_PER_POINT + species * SECONDS_PER_POINT_AND_SPECIES),
        checking_seconds=checked
        * (SECONDS_PER_CHECKED_POINT + species * SECONDS_PER_CHECKED_POINT_AND_SPECIES),
    )


def _checked_points(scenario: Scenario) -> int:
    wanted = scenario.cross_check
    if wanted.extent == "none":
        return 0
    return scenario.points if wanted.extent == "all" else min(wanted.sample_size, scenario.points)


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
        _time_line(size),
    ]
    if scenario.reactions is not None:
        blocks.append("\n".join(["Reactions:", *_indented(scenario.reactions.in_words())]))
    if scenario.choice.left_out:
        left_out = [f"{name}: {reason}" for name, reason in scenario.choice.left_out.items()]
        blocks.append("\n".join(["Left out:", *_indented(left_out)]))
    if scenario.remarks:
        blocks.append("\n".join(["Remarks:", *_indented(scenario.remarks)]))
    return "\n\n".join(blocks)


def _time_line(size: Preview) -> str:
    checking = (
        f", {_seconds(size.checking_seconds)} to cross-check {size.checked_points:,} points"
        if size.checked_points
        else ""
    )
    return (
        f"Time: about {_seconds(size.solving_seconds)} to solve{checking} "
        "(order of magnitude, one core); start, pictures and report take some seconds more"
    )


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
    ambient = Fraction(scenario.ambient_pressure)
    rows.append(
        [
            "temperature",
            *(
                _state(
                    each.temperature, find_unit(each.display_temperature_unit, "temperature", ambient=ambient)
                )
                for each in scenario.streams.values()
            ),
        ]
    )
    rows.append(
        [
            "pressure",
            *(
                _state(each.pressure, find_unit(each.display_pressure_unit, "pressure", ambient=ambient))
                for each in scenario.streams.values()
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


def _state(value: float | None, unit: Unit) -> str:
    return "-" if value is None else f"{float(unit.from_si(Fraction(value))):.6g} {unit.symbol}"


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


def _seconds(seconds: float) -> str:
    for unit, scale in (("h", 3600.0), ("min", 60.0)):
        if seconds >= 2 * scale:
            return f"{seconds / scale:.1g} {unit}"
    return f"{seconds:.1g} s"


def _bytes(size: int) -> str:
    for unit, scale in (("GB", 1e9), ("MB", 1e6), ("kB", 1e3)):
        if size >= scale:
            return f"{size / scale:.3g} {unit}"
    return f"{size} bytes"
