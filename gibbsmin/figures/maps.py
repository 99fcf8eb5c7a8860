"""Filled contour maps of one quantity over two axes of the grid, one panel per value of the others."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Literal

import numpy as np
import xarray as xr
from matplotlib import colormaps
from matplotlib.axes import Axes
from matplotlib.collections import PolyCollection
from matplotlib.colors import BoundaryNorm
from matplotlib.contour import QuadContourSet
from matplotlib.figure import Figure
from matplotlib.transforms import Affine2D
from numpy.typing import NDArray

from gibbsmin.figures.axes import SI_UNITS, Axis, DisplayUnit, axes_of, plan_panels
from gibbsmin.figures.boundary_lines import BoundaryLines, draw_boundaries, legend
from gibbsmin.figures.label_places import place_labels
from gibbsmin.figures.levels import Levels, choose_levels
from gibbsmin.figures.look import HATCH, HATCH_COLOUR, INK, MAP_COLOURS
from gibbsmin.figures.page import Geometry, Page, Words
from gibbsmin.figures.refining import refine
from gibbsmin.figures.ticks import set_scale

_ONE_PANEL = Geometry(panel_width=4.2, panel_height=3.1, right=1.0)
_PANELS = Geometry(panel_width=2.15, panel_height=1.95, right=1.0)
_USUAL_DIGITS, _DIGIT = 6, 0.062  # of a number beside the colour scale, and the width of one [inch]
_FEW_POINTS = 150  # up to so many points a map marks each, so that its resolution can be seen
_NO_CHANGE = 0.02  # of the colour scale: what changes a field by less is no axis worth drawing
_ENOUGH_FOR_AN_AXIS = 3
_PALE = 0.5  # lightness above which a colour gets dark writing


def draw_map(
    field: xr.DataArray,
    *,
    title: str,
    subtitle: str = "",
    scale_label: str = "",
    units: Mapping[str, DisplayUnit] = SI_UNITS,
    boundaries: Sequence[BoundaryLines] = (),
    linear: bool = False,
    blank_means: str = "not solved",
) -> Figure | None:
    """A filled contour map of `field` [any unit] over its first two axes with more than one value.

    Parameters: `field` has the dimensions of the grid only, NaN where a point is not solved; `title` and
    `scale_label` may hold matplotlib markup, `subtitle` is taken literally; `units` says how temperature and
    pressure are shown; `boundaries` are drawn over the map where they lie along one of its axes;
    `linear` asks for even colour steps; `blank_means` is what a NaN says about its point.

    Returns None where there is no map to draw: fewer than two axes with several values, or the same
    value everywhere.
    Raises ValueError for a field that is not on a grid.
    """
    axes = axes_of(field, units)
    levels = choose_levels(np.asarray(field.values, dtype=float), linear=linear)
    if levels is None or sum(len(axis) > 1 for axis in axes.values()) < 2:
        return None
    across, up, dropped = _choose_axes(field, list(axes.values()), levels)
    others = [axis for axis in axes.values() if axis not in (across, up, dropped)]
    plan = plan_panels(others)
    held = {} if dropped is None else {dropped.name: len(dropped) // 2}
    blank = ~np.isfinite(field.values)
    few = len(across) * len(up) <= _FEW_POINTS
    notes = ["dots: computed points"] if few else []
    if dropped is not None:
        middle = dropped.at(held[dropped.name])
        notes.append(
            f"drawn at {middle}: {dropped.title} changes it by less than {100 * _NO_CHANGE:g} % of the scale"
        )
    notes += legend(boundaries, across, up)
    words = Words(
        title=title,
        subtitle=", ".join(filter(None, (subtitle, plan.fixed_words))),
        notes=[*notes, *plan.notes],
        unsolved=int(blank.sum()),
        points=blank.size,
        blank=blank_means,
    )
    geometry = _PANELS if len(plan.panels) > 1 else _ONE_PANEL
    page = Page(plan, replace(geometry, right=geometry.right + _more_room(levels)), words)
    areas = None
    for panel in plan.panels:
        values = field.isel({**held, **panel.held}).transpose(up.name, across.name).values.astype(float)
        drawn = _draw_panel(page.panels[panel.row, panel.column], across, up, values, levels, few)
        areas = areas or drawn
        draw_boundaries(
            page.panels[panel.row, panel.column], across, up, {**held, **panel.held}, boundaries, units
        )
    page.label_axes(across.label, up.label)
    if areas is not None:
        _draw_colour_scale(page, areas, levels, scale_label)
    return page.figure


def _choose_axes(field: xr.DataArray, axes: list[Axis], levels: Levels) -> tuple[Axis, Axis, Axis | None]:
    """The axis across, the axis up, and one that is left out because it makes no difference.

    The first two with several values, temperature and pressure as a rule. Where pressure hardly changes the
    field (the shift reaction has as many moles on both sides), a further axis takes its place.
    """
    across, up, *further = [axis for axis in axes if len(axis) > 1]
    if not further or len(further[0]) < _ENOUGH_FOR_AN_AXIS:
        return across, up, None
    position = levels.position(np.asarray(field.values, dtype=float))
    spread = position.max(axis=field.get_axis_num(up.name)) - position.min(axis=field.get_axis_num(up.name))
    scale = float(levels.places[-1] - levels.places[0])
    # A NaN compares false: with an unsolved point the map stays over the usual axes, and shows it.
    if bool((spread < _NO_CHANGE * scale).all()):
        return across, further[0], up
    return across, up, None


def _draw_panel(
    axes: Axes, across: Axis, up: Axis, values: NDArray[np.float64], levels: Levels, dots: bool
) -> QuadContourSet | None:
    """One panel; returns its coloured areas, or None where no point of it is solved."""
    set_scale(axes, "x", across, most_ticks=6)
    set_scale(axes, "y", up, most_ticks=6)
    axes.spines[["top", "right"]].set_visible(True)
    _hatch_blank(axes, across, up, np.isnan(values))
    position = np.ma.masked_invalid(levels.position(values))
    if position.count() == 0:
        return None
    if dots:
        x, y = np.meshgrid(across.values, up.values)
        known = ~np.isnan(values)
        axes.plot(
            x[known],
            y[known],
            linestyle="none",
            marker=".",
            markersize=2.2,
            color="white",
            markeredgecolor=INK,
            markeredgewidth=0.3,
            clip_on=False,
            zorder=3,
        )
    x, y, fine = refine(position.filled(np.nan), up, across)
    grid = (x, y, np.ma.masked_invalid(fine))
    norm = _norm(levels)
    # Whole squares next to an unsolved point stay blank: exactly those that are hatched.
    areas = axes.contourf(
        *grid, levels.places, cmap=MAP_COLOURS, norm=norm, extend=norm.extend, corner_mask=False
    )
    crossed = [place for place in levels.places if position.min() < place < position.max()]
    if crossed:
        lines = axes.contour(
            *grid, crossed, colors="white", linewidths=0.45, linestyles="solid", corner_mask=False
        )
        _number_lines(axes, lines, levels, norm)
    return areas


def _norm(levels: Levels) -> BoundaryNorm:
    extend: Literal["min", "neither"] = "min" if levels.floor is not None else "neither"
    return BoundaryNorm(levels.places, colormaps[MAP_COLOURS].N, extend=extend)


def _number_lines(axes: Axes, lines: QuadContourSet, levels: Levels, norm: BoundaryNorm) -> None:
    numbered = levels.numbered_lines(np.asarray(lines.levels))
    vertices = dict(zip(lines.levels, (path.vertices for path in lines.get_paths()), strict=True))
    paths = [np.asarray(vertices[level]) for level in numbered]
    size = np.asarray(axes.bbox.size) / axes.figure.dpi
    inches = axes.transData + axes.transAxes.inverted() + Affine2D().scale(*size)
    places = place_labels([inches.transform(path) for path in paths], size)
    colours = colormaps[MAP_COLOURS]
    for level, place in zip(numbered, places, strict=True):
        if place is None:
            continue
        writing = "black" if _lightness(colours(norm(level))) > _PALE else "white"
        axes.clabel(
            lines,
            [level],
            manual=[inches.inverted().transform(place)],
            fontsize=6.5,
            colors=writing,
            fmt=levels.text,
            inline_spacing=2,
        )


def _lightness(colour: tuple[float, float, float, float]) -> float:
    """Luma in the weights of ITU-R BT.709: enough to choose black or white writing."""
    return 0.2126 * colour[0] + 0.7152 * colour[1] + 0.0722 * colour[2]


def _hatch_blank(axes: Axes, across: Axis, up: Axis, blank: NDArray[np.bool_]) -> None:
    """Hatch every square of the grid that has an unsolved point at a corner."""
    squares = blank[1:, 1:] | blank[1:, :-1] | blank[:-1, 1:] | blank[:-1, :-1]
    if not squares.any():
        return
    x, y = across.values, up.values
    corners = [
        [(x[i], y[j]), (x[i + 1], y[j]), (x[i + 1], y[j + 1]), (x[i], y[j + 1])]
        for j, i in zip(*np.nonzero(squares), strict=True)
    ]
    hatched = PolyCollection(
        corners, facecolor="white", edgecolor=HATCH_COLOUR, hatch=HATCH, linewidth=0.0, zorder=0.5
    )
    hatched.set_gid("unsolved")
    axes.add_collection(hatched, autolim=False)


def _more_room(levels: Levels) -> float:
    """Inches that the colour scale's longest number takes beyond what there is room for."""
    longest = max(len(levels.text(place)) for place in levels.numbered)
    return _DIGIT * max(0, longest - _USUAL_DIGITS)


def _draw_colour_scale(page: Page, areas: QuadContourSet, levels: Levels, label: str) -> None:
    scale = page.figure.colorbar(areas, cax=page.add_colour_box(), spacing="uniform")
    scale.set_ticks(list(levels.numbered), labels=[levels.text(place) for place in levels.numbered])
    scale.ax.tick_params(length=2, labelsize=7)
    scale.outline.set_linewidth(0.5)
    if label:
        scale.set_label(label, fontsize=7.5)
