"""The composition of a single point, one bar per species."""

from __future__ import annotations

import math
from collections.abc import Mapping

import xarray as xr
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, NullLocator

from gibbsmin.figures.axes import SI_UNITS, DisplayUnit, axes_of, plan_panels
from gibbsmin.figures.labels import chemical, number
from gibbsmin.figures.look import LINE_COLOURS
from gibbsmin.figures.page import Geometry, Page, Words

_SMALLEST_SHOWN = 1e-9  # mole fraction
_WIDE = 100.0  # ratio of largest to smallest from which the scale is logarithmic


def draw_bars(
    fields: Mapping[str, xr.DataArray],
    *,
    title: str,
    subtitle: str = "",
    value_label: str,
    units: Mapping[str, DisplayUnit] = SI_UNITS,
) -> Figure | None:
    """The values (mole fractions, [1]) of a grid of one point as bars, each with its number.

    Returns None where the grid has more than one point, or the point is not solved.
    """
    first = next(iter(fields.values()))
    if first.size != 1:
        return None
    values = {name: float(field.values.reshape(())) for name, field in fields.items()}
    values = {name: value for name, value in values.items() if value >= _SMALLEST_SHOWN}
    if not values:
        return None
    plan = plan_panels(axes_of(first, units).values())
    page = Page(
        plan,
        Geometry(panel_width=3.6, panel_height=0.24 * len(values) + 0.1, left=1.2, right=0.9),
        Words(title, ", ".join(filter(None, (subtitle, plan.fixed_words)))),
    )
    axes = page.panels[0, 0]
    places = range(len(values))
    smallest, largest = min(values.values()), max(values.values())
    if largest / smallest >= _WIDE:
        axes.set_xscale("log")
        axes.set_xlim(10.0 ** (math.ceil(math.log10(smallest)) - 1), 10.0 ** math.ceil(math.log10(largest)))
        axes.xaxis.set_major_locator(LogLocator(numticks=7))
        axes.xaxis.set_minor_locator(NullLocator())
    else:
        axes.set_xlim(0, 1.05 * largest)
    axes.xaxis.set_major_formatter(FuncFormatter(lambda value, _: number(value)))
    bars = axes.barh(places, list(values.values()), height=0.62, color=LINE_COLOURS[0])
    axes.bar_label(bars, [number(value, 3) for value in values.values()], padding=3, fontsize=7.5)
    axes.set_yticks(places, [chemical(name) for name in values])
    axes.set_ylim(len(values) - 0.5, -0.5)
    axes.tick_params(axis="y", length=0)
    axes.set_xlabel(value_label)
    return page.figure
