"""Temperatures and pressures in the text of the page, marked so that the chooser of units reaches them too."""

from __future__ import annotations

from typing import TYPE_CHECKING

from gibbsmin.figures.labels import number
from gibbsmin.figures.of_outcome import display_units
from gibbsmin.report.markup import Markup, joined, pretty_words, tag

if TYPE_CHECKING:
    from collections.abc import Sequence

    from gibbsmin.scenario.model import Axis, Scenario

KINDS = {"K": "temperature", "Pa": "pressure"}
_PLAIN_DIGITS = 6


def axis_value(axis: Axis, position: int, *, named: bool = False) -> Markup:
    """One value of an axis with its unit; `named` puts the axis' title before a bare number."""
    text = f"{axis.display_values[position]:.{_PLAIN_DIGITS}g}"
    symbol = "" if axis.display_unit == "1" else axis.display_unit.replace("deg", "°")
    shown = switchable(f"{text} {symbol}".strip(), KINDS.get(axis.unit), axis.values[position])
    return joined((f"{pretty_words(axis.title)} ", shown)) if named and not symbol else shown


def switchable(text: str, kind: str | None, value: float) -> Markup:
    """Text of a value in SI units that the page can show in other units."""
    if kind is None:
        return joined((text,))
    return tag("span", text, class_="quantity", data_kind=kind, data_value=repr(float(value)))


def state_value(value: float | None, unit: str, scenario: Scenario) -> Markup:
    """A temperature [K] or pressure [Pa] of a stream, in the unit in which the scenario gives the grid."""
    if value is None:
        return Markup("–")
    axis = scenario.temperature if unit == "K" else scenario.pressure
    shown = display_units(scenario)[axis.name] if len(axis) > 1 else None
    text = (
        f"{number(float(shown.show(value)))} {shown.symbol}" if shown else f"{value:.{_PLAIN_DIGITS}g} {unit}"
    )
    return switchable(text, KINDS[unit], value)


def place(index: Sequence[int], scenario: Scenario) -> Markup:
    """A point of the grid; axes of one value are left out."""
    parts: list[object] = []
    for axis, position in zip(scenario.axes, index, strict=True):
        if len(axis) > 1:
            parts += [", " if parts else None, axis_value(axis, int(position), named=True)]
    return joined(parts)
