"""Results as tables: extremes over the grid, and the whole picture at chosen points."""

from __future__ import annotations

import itertools
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from gibbsmin.boundaries.results import rows, summary_lines
from gibbsmin.figures import key_species
from gibbsmin.figures.labels import number
from gibbsmin.outcome.summary import key_results
from gibbsmin.report.markup import Markup, bullets, pretty_name, pretty_words, table, tag
from gibbsmin.report.quantities import quantities, unit_shown
from gibbsmin.report.quantity_text import axis_value, place, state_value

if TYPE_CHECKING:
    import xarray as xr

    from gibbsmin.outcome import Outcome
    from gibbsmin.scenario.model import Axis, Scenario

FloatArray = NDArray[np.float64]

_MOST_SPECIES = 16
_LEAST_FRACTION = 1e-6  # a species below it at all chosen points is left to the charts
_MOST_POINTS = 9
_MOST_CROSSINGS = 200
_SHOWN_KINDS = ("phase", "result", "energy", "property")


def results_part(outcome: Outcome) -> list[Markup | None]:
    return [_extremes(outcome), *_at_chosen_points(outcome)]


def _extremes(outcome: Outcome) -> Markup:
    rows = [_extreme_row(name, array, outcome) for name, array in key_results(outcome)]
    headings = ["result", "unit", "lowest", "at", "highest", "at"]
    caption = "Lowest and highest value of each result over the grid"
    return table(caption, headings, rows, words=(1, 3, 5))


def _extreme_row(name: str, array: xr.DataArray, outcome: Outcome) -> list[object]:
    unit, factor = unit_shown(array)
    values = array.transpose(*outcome.dataset["status"].dims).values
    species, comma, rest = name.partition(",")
    shown = pretty_name(species) + comma + rest if comma else pretty_words(name)
    if not np.isfinite(values).any():
        return [shown, unit or "–", "–", "–", "–", "–"]
    ends: list[object] = []
    for at in (int(np.nanargmin(values)), int(np.nanargmax(values))):
        index = [int(i) for i in np.unravel_index(at, values.shape)]
        ends += [
            _value(float(values.flat[at]) * factor, unit, outcome.scenario),
            place(index, outcome.scenario) or "–",
        ]
    return [shown, _unit(unit), *ends]


def _unit(unit: str) -> str:
    """What the unit's column says: temperatures carry theirs, which the reader may change."""
    return "–" if unit in ("", "K") else unit


def _value(value: float, unit: str, scenario: Scenario, *, solved: bool = True) -> object:
    if not np.isfinite(value):
        return "no value" if solved else "not solved"
    return state_value(value, unit, scenario) if unit == "K" else number(value)


def _at_chosen_points(outcome: Outcome) -> list[Markup | None]:
    scenario = outcome.scenario
    points = chosen_points(scenario)
    dataset = outcome.dataset
    fraction = dataset["mole_fraction"].transpose(*dataset["status"].dims, "species").values
    names = [str(name) for name in dataset["species"].values]
    columns = [fraction[index] for index in points]
    largest = np.nan_to_num(np.max(columns, axis=0))
    order = sorted(range(len(names)), key=lambda i: -largest[i])
    wanted = [
        names.index(name) for name in key_species(dataset, scenario.results.key_species) if name in names
    ]
    ordered = dict.fromkeys([*wanted, *(i for i in order if largest[i] > _LEAST_FRACTION)][:_MOST_SPECIES])
    headings = ["point", "unit", *(str(position) for position in range(1, len(points) + 1))]
    rows: list[list[object]] = [
        [pretty_words(axis.title), "", *(axis_value(axis, index[position]) for index in points)]
        for position, axis in enumerate(scenario.axes)
    ]
    solved = dataset["status"].values == 0

    def cells(values: FloatArray, unit: str) -> list[object]:
        return [_value(float(values[at]), unit, scenario, solved=bool(solved[at])) for at in points]

    rows += [[pretty_name(names[i]), "mol/mol", *cells(fraction[..., i], "")] for i in ordered]
    for each in quantities(dataset):
        if each.kind in _SHOWN_KINDS and not each.flags:
            values = each.values.transpose(*dataset["status"].dims).values
            rows.append([each.label, _unit(each.unit), *cells(values, each.unit)])
    where = _window_words(outcome.scenario, len(points))
    held = [axis.title for axis in scenario.further_axes if len(axis) > 1]
    if held:
        where += f", lowest and highest {pretty_words(held[0])}"
        where += f", {' and '.join(held[1:])} in the middle" if held[1:] else ""
    caption = f"Composition and results at chosen points: {where}"
    others = len(names) - len(ordered)
    note = f"{others} further species are below the limit of this table; the charts and results.nc hold them."
    return [table(caption, headings, rows, words=(1,)), tag("p", note, class_="note") if others else None]


def chosen_points(scenario: Scenario) -> list[tuple[int, ...]]:
    """Corners and middle of temperature and pressure, at both ends of the first further axis with several values.

    Other further axes are held in the middle. In the order of the grid, each point once.
    """
    varied = next((axis.name for axis in scenario.further_axes if len(axis) > 1), None)
    further = []
    for axis in scenario.further_axes:
        ends = [0, len(axis) - 1] if axis.name == varied else [len(axis) // 2]
        further.append(sorted(set(ends)))
    t, p = len(scenario.temperature), len(scenario.pressure)
    window = sorted({*itertools.product((0, t - 1), (0, p - 1)), (t // 2, p // 2)})
    if varied is not None:  # two ends of a further axis: the middle of the window would make too many columns
        window = sorted(set(itertools.product((0, t - 1), (0, p - 1))))
    return [(*left, *right) for left in itertools.product(*further) for right in window][:_MOST_POINTS]


def _window_words(scenario: Scenario, points: int) -> str:
    if points == 1:
        return "the only point"
    varied = any(len(axis) > 1 for axis in scenario.further_axes)
    return "corners of temperature and pressure" + ("" if varied else ", and their middle")


def boundaries_part(outcome: Outcome) -> list[Markup | None]:
    """Where phases begin to form or results take the values asked for; call it only with boundaries."""
    tables = []
    for boundary in outcome.boundaries:
        listed = list(rows(boundary))
        axes = [*boundary.others, boundary.along]
        shown = [
            [*(_in_unit(value, axis) for value, axis in zip((*places, position), axes, strict=True)), above]
            for places, position, above in listed[:_MOST_CROSSINGS]
        ]
        caption = f"{boundary.wanted.name}: {pretty_words(boundary.title)}"
        if len(listed) > len(shown):
            caption += f", the first {len(shown)} of {len(listed):,} crossings"
        headings = [*(pretty_words(axis.title) for axis in axes), "above it"]
        tables.append(
            table(caption, headings, shown, words=(len(axes),), class_="long" if len(shown) > 20 else "")
        )
    return [bullets(map(pretty_words, summary_lines(outcome.boundaries))), *tables]


def _in_unit(value: float, axis: Axis) -> str:
    unit = "" if axis.display_unit == "1" else f" {axis.display_unit.replace('deg', '°')}"
    return f"{value:.6g}{unit}"
