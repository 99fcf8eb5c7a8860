"""Where one reaction, or a few, may stand for the whole mixture: the trust map, and composition side by side."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import xarray as xr
from matplotlib.colors import BoundaryNorm, ListedColormap
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from matplotlib.ticker import MaxNLocator

from gibbsmin.figures.axes import SI_UNITS, DisplayUnit, axes_of, plan_panels
from gibbsmin.figures.constants import make_room_for_label, one_row
from gibbsmin.figures.labels import chemical, with_formulas
from gibbsmin.figures.look import FAINT, INK, LINE_COLOURS, LINE_STYLES
from gibbsmin.figures.page import Geometry, Page, Words
from gibbsmin.figures.ticks import cell_edges, set_scale
from gibbsmin.reactions.against_mixture import Reason
from gibbsmin.reactions.results import ShortcutSummary
from gibbsmin.reactions.shortcut_error import Tolerance

_COLOURS = {
    Reason.WITHIN: "#bfe3d0",
    Reason.K_ERROR: "#f2c48d",
    Reason.NEGLECTED_REACTIONS: "#9ec4e0",
    Reason.CONDENSED_PHASE: "#6f6f6f",
    Reason.NOT_SOLVED: "#ffffff",
}
"""Light to dark in grey as well, so that the map survives a copier."""

_ONE_PANEL = Geometry(panel_width=4.2, panel_height=3.0, right=1.9)
_PANELS = Geometry(panel_width=2.15, panel_height=1.95, right=1.9)
_PAIR = Geometry(panel_width=3.1, panel_height=2.7, right=0.25)
_LINES = Geometry(panel_width=2.6, panel_height=2.7, right=1.7)
_MOST_PRESSURES = 3
_SHOWN_KELVIN = 25.0  # K, the same where no temperature error is set as tolerance
_SHOWN_BEYOND = 4.0  # the error is drawn to this many tolerances; what is larger is of no use anyway


def draw_trust(
    reason: xr.DataArray,
    *,
    title: str,
    subtitle: str = "",
    units: Mapping[str, DisplayUnit] = SI_UNITS,
) -> Figure | None:
    """A map of the codes of `Reason` over temperature and pressure, one panel per value of the further axes.

    None where the grid has no two axes with several values.
    """
    axes = axes_of(reason, units)
    varied = [axis for axis in axes.values() if len(axis) > 1]
    if len(varied) < 2:
        return None
    across, up = varied[:2]
    plan = plan_panels([axis for axis in axes.values() if axis not in (across, up)])
    words = Words(title, ", ".join(filter(None, (subtitle, plan.fixed_words))), plan.notes)
    page = Page(plan, _PANELS if len(plan.panels) > 1 else _ONE_PANEL, words)
    colours = ListedColormap([_COLOURS[each] for each in Reason])
    norm = BoundaryNorm(np.arange(len(Reason) + 1) - 0.5, len(Reason))
    for panel in plan.panels:
        target = page.panels[panel.row, panel.column]
        set_scale(target, "x", across)
        set_scale(target, "y", up)
        codes = reason.isel(panel.held).transpose(up.name, across.name).values
        target.pcolormesh(
            cell_edges(across), cell_edges(up), codes, cmap=colours, norm=norm, rasterized=True, zorder=0.5
        )
        target.spines[["top", "right"]].set_visible(True)
    page.label_axes(across.label, up.label)
    values, counts = np.unique(reason.values, return_counts=True)
    share = dict(zip(values.tolist(), (counts / reason.size).tolist(), strict=True))
    handles = [
        Patch(
            facecolor=_COLOURS[each],
            edgecolor=FAINT,
            linewidth=0.5,
            label=f"{each.words}, {100 * share[each]:.0f} %",
        )
        for each in Reason
        if each in share
    ]
    g = page.geometry
    page.figure.legend(
        handles=handles,
        loc="upper left",
        bbox_to_anchor=(
            1 - (g.right - 0.12) / page.width,
            max(box.get_position().y1 for box in page.panels.values()),
        ),
        frameon=False,
        fontsize=7,
        borderaxespad=0.0,
        labelspacing=0.7,
    )
    return page.figure


def draw_shortcut_errors(
    shortcuts: Sequence[ShortcutSummary],
    tolerance: Tolerance,
    *,
    unit: DisplayUnit,
    subtitle: str = "",
) -> Figure | None:
    """Error of shortcuts of one reaction over temperature, in per cent of K and in kelvin, with the tolerance band.

    None for a single temperature.
    """
    if not shortcuts or len(shortcuts[0].errors.temperature) < 2:
        return None
    reaction = shortcuts[0].shortcut.reaction
    title = f"Error of shortcuts: {with_formulas(reaction.equation)}"
    page = Page(one_row(2), _PAIR, Words(title=title, subtitle=subtitle))
    panels = (
        (page.panels[0, 0], "per_cent", tolerance.per_cent_of_K, "Error of $K$ (%)"),
        (page.panels[0, 1], "kelvin", tolerance.kelvin, "Equivalent temperature error (K)"),
    )
    for axes, field, accepted, label in panels:
        axes.axhline(0, color=FAINT, linewidth=0.7)
        if accepted is not None:
            axes.axhspan(-accepted, accepted, color=_COLOURS[Reason.WITHIN], alpha=0.7, linewidth=0, zorder=0)
        largest = 0.0
        for count, each in enumerate(shortcuts):
            errors = each.errors
            values = getattr(errors, field)
            largest = max(largest, float(np.nanmax(np.abs(values), initial=0.0)))
            axes.plot(
                unit.show(errors.temperature),
                values,
                label=each.shortcut.name,
                color=LINE_COLOURS[count % 4],
                linestyle=LINE_STYLES[count // 4 % len(LINE_STYLES)],
            )
        if accepted is None:
            limit = min(largest, _SHOWN_KELVIN if field == "kelvin" else largest)
        else:
            limit = min(max(largest, 1.2 * accepted), _SHOWN_BEYOND * accepted)
        axes.set_ylim(-1.05 * limit, 1.05 * limit)
        axes.set_ylabel(label)
        axes.set_xlabel(f"Temperature ({unit.symbol})")
        axes.xaxis.set_major_locator(MaxNLocator(5))
        shown = unit.show(shortcuts[0].errors.temperature)
        axes.set_xlim(float(shown.min()), float(shown.max()))
    make_room_for_label(page, page.panels[0, 1])
    page.panels[0, 0].legend(frameon=False, fontsize=7, loc="best", handlelength=2.2)
    return page.figure


def draw_side_by_side(
    full: xr.DataArray,
    alone: Mapping[str, xr.DataArray],
    key_species: Sequence[str],
    *,
    title: str,
    subtitle: str = "",
    units: Mapping[str, DisplayUnit] = SI_UNITS,
    pressures: Sequence[float] = (),
) -> Figure | None:
    """Mole fractions along temperature: the full mixture as lines, the reactions alone as other lines.

    Args:
        full: (..., species). alone: words for the choice of K -> the same, for the reactions alone.
        pressures: of the grid [Pa], to be shown; empty for the lowest, the middle and the highest.

    None where temperature has a single value.
    """
    if pressures and full.sizes.get("pressure", 1) > 1:
        full = full.sel(pressure=list(pressures), method="nearest")
        alone = {name: field.sel(pressure=list(pressures), method="nearest") for name, field in alone.items()}
    axes = axes_of(full.isel(species=0, drop=True), units)
    along = axes["temperature"]
    if len(along) < 2:
        return None
    # One row of pressures; a further axis is held in its middle, where the trust map shows all of it.
    further = [axis for axis in axes.values() if axis.name not in ("temperature", "pressure")]
    held = {axis.name: len(axis) // 2 for axis in further}
    plan = plan_panels([axes["pressure"]], most_in_line=_MOST_PRESSURES)
    fixed = ", ".join(axis.at(held[axis.name]) for axis in further)
    words = Words(title, ", ".join(filter(None, (subtitle, plan.fixed_words, fixed))), plan.notes)
    page = Page(plan, _LINES, words)
    styles = dict(zip(alone, ((0, (4, 1.5)), (0, (1.2, 1.2)), (0, (5, 1, 1, 1)), (0, (8, 2))), strict=False))
    largest = 0.0
    for panel in plan.panels:
        target = page.panels[panel.row, panel.column]
        set_scale(target, "x", along)
        for count, name in enumerate(key_species):
            colour = LINE_COLOURS[count % len(LINE_COLOURS)]
            at = {**held, **panel.held}
            course = full.sel(species=name).isel(at).values
            largest = max(largest, float(np.nanmax(course, initial=0.0)))
            target.plot(along.values, course, color=colour, linewidth=1.6)
            for choice, style in styles.items():
                other = alone[choice].sel(species=name).isel(at).values
                largest = max(largest, float(np.nanmax(other, initial=0.0)))
                target.plot(along.values, other, color=colour, linestyle=style, linewidth=1.1)
        target.grid(axis="y", linewidth=0.4, color="#dddddd")
        target.set_axisbelow(True)
    for target in page.panels.values():
        target.set_ylim(0, 1.05 * largest)
    page.label_axes(along.label, "Mole fraction")
    handles = [
        *(
            Line2D([], [], color=LINE_COLOURS[i % len(LINE_COLOURS)], linewidth=2.2, label=chemical(name))
            for i, name in enumerate(key_species)
        ),
        Line2D([], [], color=INK, linewidth=1.6, label="whole mixture"),
        *(
            Line2D([], [], color=INK, linestyle=style, linewidth=1.1, label=name)
            for name, style in styles.items()
        ),
    ]
    page.figure.legend(
        handles=handles,
        loc="upper left",
        bbox_to_anchor=(
            1 - (page.geometry.right - 0.12) / page.width,
            max(box.get_position().y1 for box in page.panels.values()),
        ),
        frameon=False,
        fontsize=7,
        borderaxespad=0.0,
        handlelength=2.6,
    )
    return page.figure
