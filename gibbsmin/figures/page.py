"""A page of panels of fixed size, with a head and a foot; all lengths in inches.

Text has a fixed size, so margins are worked out from it rather than left to an iterative layout: panels
then stand at the same place in every figure, and a figure takes a fraction of the time.
"""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from dataclasses import dataclass

from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.patches import Patch

from gibbsmin.figures.axes import PanelPlan
from gibbsmin.figures.labels import with_formulas
from gibbsmin.figures.look import FAINT, HATCH, HATCH_COLOUR

_CHARACTER = 0.066  # inches, mean width of a character of 8-point type
_LINE = 0.15  # inches from one baseline of 8-point type to the next
_TITLE_WIDER = 1.35  # bold 10-point type against that
_GAP_ACROSS, _GAP_DOWN = 0.34, 0.16  # between panels, titles and tick labels not counted
_HEAD, _TOP, _BOTTOM = 0.24, 0.16, 0.50


@dataclass(frozen=True)
class Geometry:
    """Size of a panel and the margins beside the panels."""

    panel_width: float
    panel_height: float
    left: float = 0.72
    right: float = 0.25


@dataclass(frozen=True)
class Words:
    """What is written around the panels: `title` in matplotlib markup, the others as plain words."""

    title: str
    subtitle: str = ""
    notes: Sequence[str] = ()
    unsolved: int = 0
    points: int = 0
    blank: str = "not solved"


class Page:
    """A figure with one panel for each of a plan.

    `figure` is the matplotlib figure, `panels[(row, column)]` its axes, `width` and `height` its size.
    """

    def __init__(self, plan: PanelPlan, geometry: Geometry, words: Words) -> None:
        g = self.geometry = geometry
        self._plan = plan
        self.width = g.left + plan.columns * g.panel_width + (plan.columns - 1) * _GAP_ACROSS + g.right
        room = self.width - g.left - 0.1
        title = _wrap(words.title, room / _TITLE_WIDER) if "$" not in words.title else [words.title]
        subtitle = _wrap(words.subtitle, room)
        notes = _wrap("; ".join(words.notes), self.width - 0.4)
        self._panel_titles = {
            (panel.row, panel.column): _wrap_parts(plan.title(panel), g.panel_width) for panel in plan.panels
        }
        lines = max(len(each) for each in self._panel_titles.values())
        self._gap_down = _GAP_DOWN + lines * _LINE
        self._top = _HEAD + 0.19 * (len(title) - 1) + _LINE * (len(subtitle) + lines) + _TOP
        foot = _LINE * (bool(words.unsolved) + len(notes)) + (0.12 if words.unsolved or notes else 0.0)
        self._bottom = _BOTTOM + foot
        down = plan.rows * g.panel_height + (plan.rows - 1) * self._gap_down
        self.height = self._top + down + self._bottom
        self.figure = Figure(figsize=(self.width, self.height))
        FigureCanvasAgg(self.figure)
        self._write_head(title, subtitle)
        self._write_foot(notes, words)
        self.panels: dict[tuple[int, int], Axes] = {}
        for panel in plan.panels:
            self._add_panel(panel.row, panel.column)

    def _add_panel(self, row: int, column: int) -> None:
        g = self.geometry
        left = g.left + column * (g.panel_width + _GAP_ACROSS)
        bottom = self.height - self._top - (row + 1) * g.panel_height - row * self._gap_down
        axes = self.add_box(left, bottom, g.panel_width, g.panel_height)
        axes.spines[["top", "right"]].set_visible(False)
        axes.set_title("\n".join(map(with_formulas, self._panel_titles[row, column])), pad=4)
        self.panels[row, column] = axes

    def add_box(self, left: float, bottom: float, width: float, height: float) -> Axes:
        """New axes at a place given in inches."""
        return self.figure.add_axes(
            (left / self.width, bottom / self.height, width / self.width, height / self.height)
        )

    def add_colour_box(self) -> Axes:
        """Axes for a colour scale, at the right of the panels."""
        g = self.geometry
        height = min(self._plan.rows * g.panel_height + (self._plan.rows - 1) * self._gap_down, 4.0)
        return self.add_box(self.width - g.right + 0.16, self.height - self._top - height, 0.13, height)

    def label_axes(self, x_label: str, y_label: str) -> None:
        """Tick labels and titles on the outer panels only, so that small multiples stay light."""
        for (row, column), axes in self.panels.items():
            if column == 0:
                axes.set_ylabel(with_formulas(y_label))
            else:
                axes.tick_params(labelleft=False)
            if (row + 1, column) not in self.panels:
                axes.set_xlabel(with_formulas(x_label))
            else:
                axes.tick_params(labelbottom=False)

    def _write_head(self, title: list[str], subtitle: list[str]) -> None:
        left = self.geometry.left / self.width
        down = 0.20
        for line in title:
            self.figure.text(left, 1 - down / self.height, line, fontsize=10, fontweight="bold")
            down += 0.19
        for line in subtitle:
            self.figure.text(left, 1 - down / self.height, with_formulas(line), color=FAINT)
            down += _LINE

    def _write_foot(self, notes: list[str], words: Words) -> None:
        """The notes on what is not shown, and above them the meaning of the hatching."""
        up = 0.10
        for line in reversed(notes):
            self.figure.text(
                1 - 0.12 / self.width,
                up / self.height,
                with_formulas(line),
                ha="right",
                fontsize=7,
                color=FAINT,
            )
            up += _LINE
        if words.unsolved:
            patch = Patch(
                facecolor="white",
                edgecolor=HATCH_COLOUR,
                hatch=HATCH,
                linewidth=0.7,
                label=f"blank and hatched: {words.unsolved} of {words.points} points {words.blank}",
            )
            legend = self.figure.legend(
                handles=[patch],
                loc="lower right",
                bbox_to_anchor=(1 - 0.12 / self.width, up / self.height),
                frameon=False,
                borderaxespad=0.0,
                borderpad=0.0,
                handlelength=1.8,
                handleheight=1.1,
                fontsize=7,
            )
            legend.set_gid("unsolved-legend")


def _wrap(text: str, width: float) -> list[str]:
    """Lines of at most `width` inches of 8-point type; an equals sign stays with what it stands between."""
    glued = text.replace(" = ", "\N{NO-BREAK SPACE}=\N{NO-BREAK SPACE}")
    lines = textwrap.wrap(glued, max(10, int(width / _CHARACTER)))
    return [line.replace("\N{NO-BREAK SPACE}", " ") for line in lines]


def _wrap_parts(parts: list[str], width: float) -> list[str]:
    """Parts on one line where they fit, otherwise each on its own, wrapped further if need be."""
    lines = _wrap(", ".join(parts), width)
    return lines if len(lines) <= 1 else [line for part in parts for line in _wrap(part, width)]
