"""ln K against 1/T: the data, shortcuts, measured values with their line, band and extrapolation.

The lower scale is 1000/T, in which a constant reaction enthalpy is a straight line; the upper one is the temperature in
degrees Celsius.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FixedLocator, FuncFormatter, MaxNLocator, NullLocator
from numpy.typing import NDArray

from gibbsmin.constants import GAS_CONSTANT
from gibbsmin.figures.axes import Panel, PanelPlan
from gibbsmin.figures.labels import number, with_formulas
from gibbsmin.figures.look import FAINT, INK, LINE_COLOURS, LINE_STYLES
from gibbsmin.figures.page import Geometry, Page, Words
from gibbsmin.reactions.equation import Reaction
from gibbsmin.reactions.results import MeasuredSummary
from gibbsmin.reactions.shortcuts import Shortcut
from gibbsmin.reactions.standard import ReactionFunctions, validity

Floats = NDArray[np.float64]

_GEOMETRY = Geometry(panel_width=4.6, panel_height=3.1, right=0.25)
_PAIR = Geometry(panel_width=3.3, panel_height=2.9, right=0.25)
_LABEL_ROOM = 0.42  # inches
_SCALE_ROOM = 0.42  # inches that the upper scale takes
_CURVE_POINTS = 241
_CELSIUS = (
    *(-200, -100, 0, 25, 50, 75, 100, 150, 200, 250, 300, 350, 400, 450, 500),
    *(600, 700, 800, 900, 1000, 1200, 1500, 2000, 3000, 5000),
)
_LEAST_GAP = 0.42  # inches between two numbers of the upper scale
_BAND = "#cfe3f1"


def draw_constants(
    reaction: Reaction,
    lower: float,
    upper: float,
    *,
    shortcuts: Sequence[Shortcut] = (),
    measured: Sequence[MeasuredSummary] = (),
    subtitle: str = "",
) -> Figure:
    """ln K (1 bar) of the species data between two temperatures [K], shortcuts and measured values beside it."""
    page = _page(1, _GEOMETRY, f"Equilibrium constant of {with_formulas(reaction.equation)}", subtitle)
    axes = page.panels[0, 0]
    _shorten(page, axes)
    T = 1 / np.linspace(1 / upper, 1 / lower, _CURVE_POINTS)
    axes.plot(1e3 / T, ReactionFunctions(reaction, extrapolate=True).ln_K(T), color=INK, label="species data")
    for count, each in enumerate(shortcuts):
        style = _style(count)
        axes.plot(1e3 / T, each.ln_K(T), label=each.name, linewidth=1.3, **style)
    for count, summary in enumerate(measured):
        _points(axes, summary, LINE_COLOURS[(len(shortcuts) + count) % len(LINE_COLOURS)])
    axes.set_xlim(1e3 / upper, 1e3 / lower)
    _finish(axes, page)
    axes.legend(frameon=False, fontsize=7, loc="best", handlelength=2.6)
    return page.figure


def draw_measured(summary: MeasuredSummary, *, subtitle: str = "") -> Figure:
    """Measured ln K with the straight line and its 95 % band: over the data, and drawn out to 1/T = 0."""
    data, second = summary.data, summary.second
    title = f"Measured K of {with_formulas(data.reaction.equation)}"
    distance = f"1/T = 0 lies {number(second.distance, 2)} widths of the data from their middle"
    page = _page(2, _PAIR, title, subtitle or data.name, notes=[distance])
    near, far = page.panels[0, 0], page.panels[0, 1]
    for axes in (near, far):
        _shorten(page, axes)
    x = 1 / data.temperature
    margin = 0.12 * float(np.ptp(x))
    low, high = max(float(x.min()) - margin, 1e-6), float(x.max()) + margin
    _line_and_band(near, summary, np.linspace(low, high, 101), inside=True)
    _data_curve(near, summary, low, high)
    _points(near, summary, LINE_COLOURS[1])
    near.set_xlim(1e3 * low, 1e3 * high)
    _line_and_band(far, summary, np.linspace(0.0, high, 201), inside=False)
    _data_curve(far, summary, 1 / _highest(data.reaction), high)
    _points(far, summary, LINE_COLOURS[1])
    far.set_xlim(0.0, 1e3 * high)
    _intercept(far, summary)
    near.legend(frameon=False, fontsize=7, loc="best", handlelength=2.2)
    for axes in (near, far):
        _finish(axes, page)
    far.set_ylabel("")
    return page.figure


def draw_residuals(summary: MeasuredSummary, *, subtitle: str = "") -> Figure:
    """Residuals of ln K from the straight line, and Delta H(298.15 K) value by value, both over temperature."""
    data, second, third = summary.data, summary.second, summary.third
    title = f"Measured K of {with_formulas(data.reaction.equation)}: residuals and third law"
    page = _page(2, Geometry(3.1, 2.5, right=0.25), title, subtitle or data.name)
    left, right = page.panels[0, 0], page.panels[0, 1]
    T = data.temperature
    left.axhline(0, color=FAINT, linewidth=0.7)
    left.errorbar(T, second.fit.residuals, yerr=data.uncertainty, **_marks(LINE_COLOURS[1]))
    for each in second.residuals:
        if each.outlier or each.influential:
            left.annotate(
                "outlier" if each.outlier else "influential",
                (each.temperature, each.residual),
                xytext=(0, 7),
                textcoords="offset points",
                ha="center",
                fontsize=6.5,
                color=FAINT,
            )
    left.margins(x=0.14, y=0.25)
    left.set_ylabel("Residual of ln K")
    shown = third.enthalpies / 1e3
    spread = None if data.uncertainty is None else GAS_CONSTANT * T * data.uncertainty / 1e3
    value = third.data_enthalpy
    if np.isfinite(value.standard_error):
        right.axhspan(value.lower / 1e3, value.upper / 1e3, color="#e6e6e6", linewidth=0)
    right.axhline(value.value / 1e3, color=INK, linewidth=1.2, label="species data, 95 %")
    right.errorbar(T, shown, yerr=spread, label="value by value", **_marks(LINE_COLOURS[1]))
    right.axhline(third.enthalpy.value / 1e3, color=LINE_COLOURS[1], linewidth=1.0, label="their mean")
    right.margins(y=0.25)
    right.set_ylabel("Δ$H$(298.15 K) (kJ/mol), third law")
    right.legend(frameon=False, fontsize=7, loc="best")
    make_room_for_label(page, right)
    for axes in (left, right):
        axes.set_xlabel("Temperature (K)")
        axes.xaxis.set_major_locator(MaxNLocator(5))
    return page.figure


def make_room_for_label(page: Page, axes: Axes) -> None:
    """Narrow a right-hand panel so that its own label and numbers stand clear of the panel beside it."""
    box = axes.get_position()
    room = _LABEL_ROOM / page.width
    axes.set_position((box.x0 + room, box.y0, box.width - room, box.height))


def one_row(columns: int) -> PanelPlan:
    """A plan of panels side by side that are not over the axes of a grid."""
    panels = tuple(Panel(0, column, {}) for column in range(columns))
    return PanelPlan(panels, None, None, (), ())


# --- inner ---------------------------------------------------------------------------------------------------


def _page(columns: int, geometry: Geometry, title: str, subtitle: str, notes: Sequence[str] = ()) -> Page:
    page = Page(one_row(columns), geometry, Words(title=title, subtitle=subtitle, notes=notes))
    for axes in page.panels.values():
        axes.grid(linewidth=0.4, color="#e3e3e3")
        axes.set_axisbelow(True)
    return page


def _style(count: int) -> dict[str, Any]:
    colours = LINE_COLOURS[:4]  # black is the data
    return {
        "color": colours[count % len(colours)],
        "linestyle": LINE_STYLES[1 + count % 2],
    }


def _marks(colour: str) -> dict[str, Any]:
    return {
        "linestyle": "none",
        "marker": "o",
        "markersize": 3.6,
        "markerfacecolor": "white",
        "color": colour,
        "elinewidth": 0.9,
        "capsize": 2,
        "zorder": 4,
    }


def _points(axes: Axes, summary: MeasuredSummary, colour: str) -> None:
    data = summary.data
    axes.errorbar(
        1e3 / data.temperature,
        data.ln_K,
        yerr=data.uncertainty,
        label=f"measured: {data.name}",
        **_marks(colour),
    )


def _data_curve(axes: Axes, summary: MeasuredSummary, low: float, high: float) -> None:
    functions = ReactionFunctions(summary.data.reaction)
    limits = functions.validity
    x = np.linspace(max(low, 1 / limits.upper), min(high, 1 / limits.lower), _CURVE_POINTS)
    T = np.clip(1 / x, limits.lower, limits.upper)
    axes.plot(1e3 * x, functions.ln_K(T), color=INK, linewidth=1.1, label="species data")


def _line_and_band(axes: Axes, summary: MeasuredSummary, x: Floats, *, inside: bool) -> None:
    second = summary.second
    a, b = second.fit.parameters
    line = a + b * (x - 1 / second.mean_temperature)
    half = second.half_width(x)
    axes.fill_between(
        1e3 * x, line - half, line + half, color=_BAND, linewidth=0, label="95 % band of the line"
    )
    own = 1 / summary.data.temperature
    within = (x >= own.min()) & (x <= own.max())
    axes.plot(1e3 * x[within], line[within], color=LINE_COLOURS[0], linewidth=1.6, label="straight line")
    if not inside:
        before = x <= own.min()
        axes.plot(1e3 * x[before], line[before], color=LINE_COLOURS[0], linewidth=1.0, linestyle=(0, (4, 2)))


def _intercept(axes: Axes, summary: MeasuredSummary) -> None:
    """The interval of the intercept at 1/T = 0, with what it means for Delta S."""
    second = summary.second
    value, error = second.intercept.value, second.fit.quantile() * second.intercept.standard_error
    axes.errorbar(
        [0.0],
        [value],
        yerr=[error],
        color=LINE_COLOURS[0],
        marker="o",
        markersize=4,
        capsize=3,
        clip_on=False,
        zorder=5,
    )
    entropy = second.entropy
    half = (entropy.upper - entropy.lower) / 2
    falling = second.enthalpy.value > 0
    axes.annotate(
        f"extrapolated: Δ$S$ = {number(entropy.value)} ± {number(half, 2)} J/(mol K)\nnot measured here",
        (0.0, value),
        xytext=(0.97, 0.97 if falling else 0.03),
        textcoords="axes fraction",
        ha="right",
        va="top" if falling else "bottom",
        fontsize=7,
        color=INK,
        arrowprops={"arrowstyle": "-", "color": FAINT, "linewidth": 0.6},
    )


def _shorten(page: Page, axes: Axes) -> None:
    """Make room for the upper scale."""
    box = axes.get_position()
    axes.set_position((box.x0, box.y0, box.width, box.height - _SCALE_ROOM / page.height))


def _finish(axes: Axes, page: Page) -> None:
    axes.set_xlabel("1000 K / $T$")
    axes.set_ylabel("ln $K$ (standard pressure 1 bar)")
    axes.xaxis.set_major_locator(MaxNLocator(6))
    low, high = axes.get_xlim()
    width = axes.get_position().width * page.width
    upper = axes.secondary_xaxis("top")
    upper.xaxis.set_major_locator(
        FixedLocator([1e3 / (c + 273.15) for c in _celsius_ticks(low, high, width)])
    )
    upper.xaxis.set_minor_locator(NullLocator())
    upper.xaxis.set_major_formatter(
        FuncFormatter(lambda x, _: number(round(1e3 / x - 273.15), 4) if x > 0 else "")
    )
    upper.set_xlabel("Temperature (°C)")


def _celsius_ticks(low: float, high: float, width: float) -> list[float]:
    """Round temperatures inside a span of 1000/T, none closer to another than can be read."""
    every: list[float] = [float(c) for c in _CELSIUS]
    hottest, coldest = 1e3 / max(low, 1e-3) - 273.15, 1e3 / high - 273.15
    if hottest - coldest < 120:
        step = 5.0 if hottest - coldest < 60 else 10.0
        every = list(np.arange(np.ceil(coldest / step) * step, hottest + 1e-9, step))
    chosen: list[float] = []
    for c in every:
        place = (1e3 / (c + 273.15) - low) / (high - low) * width
        if not -1e-9 <= place <= width + 1e-9:
            continue
        if all(abs(place - (1e3 / (o + 273.15) - low) / (high - low) * width) >= _LEAST_GAP for o in chosen):
            chosen.append(c)
    return chosen


def _highest(reaction: Reaction) -> float:
    return validity(reaction).upper
