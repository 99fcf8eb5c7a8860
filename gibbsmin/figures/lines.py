"""Composition along one axis of the grid (temperature where it varies), one panel per value of the others."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, MaxNLocator, NullLocator
from numpy.typing import NDArray

from gibbsmin.figures.axes import SI_UNITS, Axis, DisplayUnit, axes_of, plan_panels
from gibbsmin.figures.labels import chemical, number
from gibbsmin.figures.look import HATCH, HATCH_COLOUR, LINE_COLOURS, LINE_STYLES
from gibbsmin.figures.page import Geometry, Page, Words
from gibbsmin.figures.ticks import cell_edges, set_scale

_ONE_PANEL = Geometry(panel_width=4.4, panel_height=3.1, right=0.85)
_PANELS = Geometry(panel_width=2.15, panel_height=1.95, right=0.85)
_MOST_PANELS = 3  # of one further axis: lowest, middle, highest
_TRACE = 0.02  # a species that nowhere reaches this share of the most abundant one needs a logarithmic scale
_DEEPEST = 1e-12  # mole fraction where a logarithmic scale ends at the latest
_BELOW_SMALLEST = 1e-3  # it ends three decades below the smallest of the species' own maxima
_LABEL_STEP = 0.13  # inches between the baselines of two labels at the end of lines


@dataclass(frozen=True)
class _Scale:
    logarithmic: bool
    low: float
    high: float

    def fraction(self, value: float) -> float:
        """Where a value lies between the lower and the upper end of the panel."""
        if not self.logarithmic:
            return (value - self.low) / (self.high - self.low)
        if value <= 0:
            return -math.inf
        return math.log(value / self.low) / math.log(self.high / self.low)


def draw_lines(
    fields: Mapping[str, xr.DataArray],
    *,
    title: str,
    subtitle: str = "",
    value_label: str,
    units: Mapping[str, DisplayUnit] = SI_UNITS,
    name_lines: bool = True,
    colour_order: Sequence[str] = (),
) -> Figure | None:
    """Several `fields` (mole fractions of species, say) along the first axis with more than one value.

    All fields share the dimensions of the grid and hold NaN where a point is not solved. The keys are species
    names, written at the ends of the lines if `name_lines`. `colour_order` lists them, perhaps with others,
    in the order in which colours are dealt, so that a species has one colour in several figures.

    Returns None where no axis has more than one value, or where no point is solved.
    Raises ValueError for fields that are not on a grid.
    """
    first = next(iter(fields.values()))
    axes = axes_of(first, units)
    along = next((axis for axis in axes.values() if len(axis) > 1), None)
    scale = _choose_scale([np.asarray(field.values, dtype=float) for field in fields.values()])
    if along is None or scale is None:
        return None
    plan = plan_panels((axis for axis in axes.values() if axis is not along), most_in_line=_MOST_PANELS)
    blank = ~np.isfinite(first.values)
    words = Words(
        title=title,
        subtitle=", ".join(filter(None, (subtitle, plan.fixed_words))),
        notes=plan.notes,
        unsolved=int(blank.sum()),
        points=blank.size,
    )
    page = Page(plan, _PANELS if len(plan.panels) > 1 else _ONE_PANEL, words)
    styles = {name: _style(index) for index, name in enumerate(colour_order or fields)}
    for panel in plan.panels:
        target = page.panels[panel.row, panel.column]
        set_scale(target, "x", along)
        _set_value_scale(target, scale)
        curves = {name: field.isel(panel.held).values.astype(float) for name, field in fields.items()}
        _hatch_gaps(target, along, np.isnan(next(iter(curves.values()))))
        for name, values in curves.items():
            target.plot(along.values, _loggable(values, scale), label=name, **styles[name])
        if name_lines and (panel.row, panel.column + 1) not in page.panels:
            _label_ends(target, page.geometry, curves, styles, scale)
    page.label_axes(along.label, value_label)
    return page.figure


def _style(index: int) -> dict[str, Any]:
    return {
        "color": LINE_COLOURS[index % len(LINE_COLOURS)],
        "linestyle": LINE_STYLES[index // len(LINE_COLOURS) % len(LINE_STYLES)],
        "marker": "",
    }


def _choose_scale(values: Sequence[NDArray[np.float64]]) -> _Scale | None:
    """One scale for all curves; None where nothing is known."""
    known = [v[np.isfinite(v)] for v in values]
    known = [v for v in known if v.size]
    if not known:
        return None
    low, high = min(float(v.min()) for v in known), max(float(v.max()) for v in known)
    if low < 0 or high == 0:
        margin = 0.04 * (high - low) or 1.0
        return _Scale(False, low - margin, high + margin)
    peaks = [peak for v in known if (peak := float(v.max())) > _DEEPEST]
    if not peaks or min(peaks) >= _TRACE * high:
        return _Scale(False, 0.0, 1.04 * high)
    smallest = min(float(v[v > 0].min()) for v in known if (v > 0).any())
    deepest = max(min(peaks) * _BELOW_SMALLEST, _DEEPEST, smallest)
    return _Scale(True, 10.0 ** math.floor(math.log10(deepest)), 10.0 ** math.ceil(math.log10(high)))


def _loggable(values: NDArray[np.float64], scale: _Scale) -> NDArray[np.float64]:
    """On a logarithmic scale a zero is drawn far below the panel rather than left out."""
    return np.where(values <= 0, scale.low * 1e-6, values) if scale.logarithmic else values


def _set_value_scale(axes: Axes, scale: _Scale) -> None:
    if scale.logarithmic:
        axes.set_yscale("log")
        axes.yaxis.set_major_locator(LogLocator(numticks=7))
        axes.yaxis.set_minor_locator(NullLocator())
    else:
        axes.yaxis.set_major_locator(MaxNLocator(6, steps=[1, 2, 2.5, 5, 10]))
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: number(value)))
    axes.set_ylim(scale.low, scale.high)
    axes.grid(axis="y", linewidth=0.4, color="#dddddd", zorder=0)
    axes.set_axisbelow(True)


def _hatch_gaps(axes: Axes, along: Axis, blank: NDArray[np.bool_]) -> None:
    edges = cell_edges(along)
    for index in np.flatnonzero(blank):
        span = axes.axvspan(
            edges[index],
            edges[index + 1],
            facecolor="white",
            edgecolor=HATCH_COLOUR,
            hatch=HATCH,
            linewidth=0,
        )
        span.set_gid("unsolved")


def _label_ends(
    axes: Axes,
    geometry: Geometry,
    curves: Mapping[str, NDArray[np.float64]],
    styles: Mapping[str, Mapping[str, Any]],
    scale: _Scale,
) -> None:
    """Write each species beside the end of its line, moved apart where they would overlap.

    A line that has left the panel at the bottom is named there with an arrow.
    """
    wanted: list[tuple[float, str]] = []
    for name, values in curves.items():
        known = values[np.isfinite(values)]
        if known.size:
            wanted.append((scale.fraction(float(known[-1])), name))
    wanted.sort()
    step = _LABEL_STEP / geometry.panel_height
    places = spread_apart([min(max(place, 0.0), 1.0) for place, _ in wanted], step, 1.02)
    for (true_place, name), place in zip(wanted, places, strict=True):
        colour = styles[name]["color"]
        off = true_place < 0
        axes.annotate(
            chemical(name) + (" \N{DOWNWARDS ARROW}" if off else ""),
            xy=(1.0, max(true_place, 0.0)),
            xytext=(1.0 + 0.14 / geometry.panel_width, place),
            xycoords="axes fraction",
            textcoords="axes fraction",
            ha="left",
            va="center",
            fontsize=8,
            color=colour,
            annotation_clip=False,
            arrowprops={
                "arrowstyle": "-",
                "color": colour,
                "linestyle": styles[name]["linestyle"],
                "linewidth": 0.6,
                "shrinkA": 1,
                "shrinkB": 0,
            },
        )


def spread_apart(places: Sequence[float], step: float, highest: float) -> list[float]:
    """Ascending places moved so that neighbours are at least `step` apart and none lies above `highest`.

    Groups that touch are moved as one around their mean, so that no label drifts further than it must.
    """
    groups: list[list[float]] = []  # [sum of wanted centres, count]
    for place in places:
        groups.append([place, 1])
        while len(groups) > 1 and _bottom(groups[-1], step) < _top(groups[-2], step) + step:
            upper = groups.pop()
            groups[-1][0] += upper[0]
            groups[-1][1] += upper[1]
    spread: list[float] = []
    for group in groups:
        start = _bottom(group, step)
        spread.extend(start + i * step for i in range(int(group[1])))
    for i in range(len(spread) - 1, -1, -1):
        ceiling = highest if i == len(spread) - 1 else spread[i + 1] - step
        spread[i] = min(spread[i], ceiling)
    return spread


def _bottom(group: list[float], step: float) -> float:
    return group[0] / group[1] - (group[1] - 1) * step / 2


def _top(group: list[float], step: float) -> float:
    return group[0] / group[1] + (group[1] - 1) * step / 2
