"""The picture that compares cases: the best value of each against every varied quantity, the leaders marked.

Where nothing was varied (a list of scenarios), the cases are ranked from top to bottom instead.
"""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, MaxNLocator

from gibbsmin.figures.axes import is_logarithmic
from gibbsmin.figures.labels import number, plain, with_formulas
from gibbsmin.figures.look import FAINT, INK, LINE_COLOURS, house_look
from gibbsmin.figures.saving import PNG_DOTS_PER_INCH
from gibbsmin.study.chunks import PHASE_VARIABLES
from gibbsmin.study.ranking import Condition, field, has

if TYPE_CHECKING:
    import pandas as pd

    from gibbsmin.study.results import StudyResults

MOST_PANELS = 9
MOST_RANKED = 24
MARKED = 3
"""Leading cases that are numbered in every panel."""

_FEW_VALUES = 12  # of a quantity: then the median of the cases at each value is drawn
_PANEL, _GAP_ACROSS, _GAP_DOWN = (2.25, 1.8), 0.3, 0.62  # inches
_LEFT, _RIGHT, _LINE = 0.8, 0.25, 0.15
_CHARACTER = 0.066  # inches, mean width of a character of 8-point type


def draw_comparison(
    results: StudyResults, ranking: pd.DataFrame, by: str, *, where: Sequence[str | Condition] = ()
) -> Figure | None:
    """A figure of a ranking (see `rank_cases`), or None where no case has a value.

    Call it within `gibbsmin.figures.look.house_look`.
    """
    ranked = ranking[ranking[by].notna()].reset_index(drop=True)
    if ranked.empty:
        return None
    words = value_words(results, by)
    quantities = [name for name in results.quantity_columns if name != by and _varies(ranked, name)]
    leaders = "; ".join(f"{i + 1}: {name}" for i, name in enumerate(ranked["case"].head(MARKED)))
    notes = [f"best cases {leaders}"] if quantities else []
    if len(quantities) > MOST_PANELS:
        notes.append(f"{MOST_PANELS} of {len(quantities)} varied quantities shown")
        quantities = quantities[:MOST_PANELS]
    missing = len(ranking) - len(ranked)
    if missing:
        why = "no point that meets the conditions" if where else "no such result"
        notes.append(f"{missing} of {len(ranking)} cases have {why} and are not shown")
    limits = "; ".join(_condition_words(each) for each in where)
    subtitle = ", ".join(filter(None, [str(results.manifest["title"]), f"where {limits}" if limits else ""]))
    head = f"{words[:1].upper()}{words[1:]}, best point of each case"
    if not quantities:
        return _ranked(ranked.head(MOST_RANKED), by, head, subtitle, words, notes)
    return _against_quantities(ranked, by, quantities, head, subtitle, words, notes)


def write_comparison(
    results: StudyResults,
    ranking: pd.DataFrame,
    by: str,
    path: Path,
    *,
    where: Sequence[str | Condition] = (),
) -> bool:
    """Draw and save the comparison; False where there is nothing to draw. The path's ending says the format."""
    with house_look():
        figure = draw_comparison(results, ranking, by, where=where)
        if figure is None:
            return False
        keyword = {"png": {"Software": None}, "svg": {"Date": None, "Creator": None}}
        figure.savefig(path, dpi=PNG_DOTS_PER_INCH, metadata=keyword.get(path.suffix[1:]))
    return True


def value_words(results: StudyResults, by: str) -> str:
    """What is compared, with its unit."""
    array = next(field(each, by) for each in results.datasets.values() if has(each, [by]))
    units = str(array.attrs.get("units", "1"))
    words = str(array.attrs.get("long_name", by))
    if array.name == "mole_fraction":
        words = f"mole fraction of {by.removeprefix('mole fraction ')}"
    elif array.name in PHASE_VARIABLES:
        words = by
    return words if units == "1" else f"{words} ({units})"


def _varies(ranked: pd.DataFrame, name: str) -> bool:
    column = ranked[name]
    return column.dtype.kind in "fiu" and column.nunique() > 1


def _condition_words(condition: str | Condition) -> str:
    if isinstance(condition, str):
        return condition
    return f"{condition.name} {condition.comparison} {condition.value:g}"


class _Sheet:
    """A figure of panels in rows, with a head and a foot; lengths in inches."""

    def __init__(
        self,
        rows: int,
        columns: int,
        panel: tuple[float, float],
        head: str,
        subtitle: str,
        notes: Sequence[str],
        left: float = _LEFT,
    ) -> None:
        self.width = left + columns * panel[0] + (columns - 1) * _GAP_ACROSS + _RIGHT
        heads = textwrap.wrap(head, int((self.width - left) / _CHARACTER / 1.35))
        below = [
            line for text in [subtitle] for line in textwrap.wrap(text, int((self.width - left) / _CHARACTER))
        ]
        feet = textwrap.wrap("; ".join(notes), int((self.width - 0.4) / _CHARACTER * 1.1))
        top = 0.2 + 0.19 * len(heads) + _LINE * len(below) + 0.14
        bottom = 0.52 + _LINE * len(feet)
        self.height = top + rows * panel[1] + (rows - 1) * _GAP_DOWN + bottom
        self.figure = Figure(figsize=(self.width, self.height))
        FigureCanvasAgg(self.figure)
        self._left, self._top, self._panel, self._columns = left, top, panel, columns
        down = 0.2
        for line in heads:
            self._write(line, down, fontsize=10, fontweight="bold")
            down += 0.19
        for line in below:
            self._write(line, down, color=FAINT)
            down += _LINE
        for k, line in enumerate(feet):
            self._write(line, self.height - 0.1 - _LINE * (len(feet) - 1 - k), color=FAINT, fontsize=7)

    def _write(self, text: str, down: float, **look: Any) -> None:
        place = (self._left / self.width, 1 - down / self.height)
        self.figure.text(*place, with_formulas(text), **look)

    def panel(self, k: int) -> Axes:
        row, column = divmod(k, self._columns)
        wide, high = self._panel
        left = self._left + column * (wide + _GAP_ACROSS)
        bottom = self.height - self._top - (row + 1) * high - row * _GAP_DOWN
        axes = self.figure.add_axes(
            (left / self.width, bottom / self.height, wide / self.width, high / self.height)
        )
        axes.spines[["top", "right"]].set_visible(False)
        return axes


def _against_quantities(
    ranked: pd.DataFrame,
    by: str,
    quantities: Sequence[str],
    head: str,
    subtitle: str,
    words: str,
    notes: list[str],
) -> Figure:
    columns = min(3, len(quantities)) if len(quantities) != 4 else 2
    rows = -(-len(quantities) // columns)
    few = [name for name in quantities if ranked[name].nunique() <= _FEW_VALUES]
    if few:
        notes = [*notes, "bars: median of the cases at one value"]
    panel = _PANEL if columns > 1 else (3.6, 2.4)
    sheet = _Sheet(rows, columns, panel, head, subtitle, notes)
    values = ranked[by].to_numpy(dtype=float)
    for k, name in enumerate(quantities):
        axes = sheet.panel(k)
        _scatter(axes, ranked[name].to_numpy(dtype=float), values, few=name in few)
        axes.set_xlabel(with_formulas(name.replace("[", "(").replace("]", ")")))
        axes.margins(y=0.08)
        if k % columns == 0:
            axes.set_ylabel(with_formulas("\n".join(textwrap.wrap(words, 32))))
        else:
            axes.tick_params(labelleft=False)
    return sheet.figure


def _scatter(axes: Axes, x: Any, y: Any, *, few: bool) -> None:
    axes.scatter(x[MARKED:], y[MARKED:], s=9, color=LINE_COLOURS[0], alpha=0.45, linewidths=0)
    distinct = np.unique(x)
    if is_logarithmic(distinct):
        axes.set_xscale("log")
        axes.xaxis.set_major_formatter(FuncFormatter(lambda value, _: number(value)))
    else:
        axes.xaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 2.5, 5, 10]))
        axes.margins(x=0.08)
    if few:
        if len(distinct) <= 6:
            axes.set_xticks(distinct, [number(value) for value in distinct])
            axes.minorticks_off()
        # As wide as the distance of values allows, but never too narrow to be seen.
        widest = max(0.35 * float(np.diff(distinct).min()), 0.015 * float(np.ptp(distinct)))
        half = 0.0 if is_logarithmic(distinct) else widest
        for value in distinct:
            median = float(np.median(y[x == value]))
            low, high = (value - half, value + half) if half else (value * 0.93, value / 0.93)
            axes.plot([low, high], [median, median], color=INK, linewidth=1.2, zorder=3)
    axes.scatter(x[:MARKED], y[:MARKED], s=17, color=LINE_COLOURS[1], linewidths=0, zorder=4)
    _number_leaders(axes, x[:MARKED], y[:MARKED])


def _number_leaders(axes: Axes, x: Any, y: Any) -> None:
    """Numbers beside the leading points; those of one place share a label."""
    labels: dict[float, list[str]] = {}
    for i, place in enumerate(x):
        labels.setdefault(float(place), []).append(str(i + 1))
    for place, names in labels.items():
        height = float(y[[int(name) - 1 for name in names]].max())
        axes.annotate(
            ", ".join(names),
            (place, height),
            xytext=(0, 4),
            textcoords="offset points",
            ha="center",
            fontsize=7,
            color=LINE_COLOURS[1],
        )


def _ranked(
    ranked: pd.DataFrame, by: str, head: str, subtitle: str, words: str, notes: Sequence[str]
) -> Figure:
    names = [str(name) for name in ranked["case"]]
    left = 0.3 + _CHARACTER * max(map(len, names))
    sheet = _Sheet(1, 1, (4.0, 0.22 * len(names) + 0.1), head, subtitle, notes, left=left)
    axes = sheet.panel(0)
    values = ranked[by].to_numpy(dtype=float)
    places = np.arange(len(names))
    axes.hlines(places, values.min(), values, color=LINE_COLOURS[0], linewidth=0.8)
    axes.scatter(values, places, s=22, color=LINE_COLOURS[0], zorder=3)
    axes.set_yticks(places, [plain(name) for name in names])
    axes.set_ylim(len(names) - 0.5, -0.5)
    axes.tick_params(axis="y", length=0)
    axes.xaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 2.5, 5, 10]))
    axes.margins(x=0.06)
    axes.set_xlabel(with_formulas(words))
    return sheet.figure
