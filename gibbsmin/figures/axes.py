"""The axes of a result: which ones a figure can be drawn over, in the user's units, and at which values.

A result is a grid with the dimensions temperature, pressure and any further ones. Two questions are
answered here: what an axis looks like (unit, label, logarithmic or not), and which of its values are
shown where there is not room for all.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gibbsmin.figures.labels import number

_EVEN_STEP = 1e-6  # relative scatter below which the steps of an axis count as even
_WIDE_SPAN = 20.0  # a positive axis with a larger ratio of its ends is drawn logarithmic even when uneven


@dataclass(frozen=True)
class DisplayUnit:
    """How a value in SI units is shown: shown = (value - zero) / size."""

    symbol: str
    size: float = 1.0
    zero: float = 0.0

    def show(self, value: Any) -> Any:
        return (value - self.zero) / self.size


SI_UNITS: Mapping[str, DisplayUnit] = {"temperature": DisplayUnit("K"), "pressure": DisplayUnit("Pa")}


@dataclass(frozen=True)
class Axis:
    """One dimension of the grid as a figure shows it.

    `values` are in the display unit; `zero` is the display value of an absolute zero (for a gauge pressure
    it is negative), from which a logarithmic axis counts.
    """

    name: str
    title: str
    symbol: str
    values: NDArray[np.float64]
    logarithmic: bool
    zero: float

    def __len__(self) -> int:
        return len(self.values)

    @property
    def places(self) -> NDArray[np.float64]:
        """The values on the scale as drawn: their logarithm above absolute zero, or themselves."""
        return np.log(self.values - self.zero) if self.logarithmic else self.values

    def values_at(self, places: NDArray[np.float64]) -> NDArray[np.float64]:
        """The inverse of `places`."""
        return np.exp(places) + self.zero if self.logarithmic else places

    @property
    def label(self) -> str:
        title = self.title[:1].upper() + self.title[1:]
        return f"{title} ({self.symbol})" if self.symbol else title

    def at(self, index: int) -> str:
        """The value at an index with its unit, such as `20 bar`; a bare number comes with the axis' name."""
        if self.symbol:
            return f"{number(self.values[index])} {self.symbol}"
        return f"{self.title} = {number(self.values[index])}"


def axes_of(field: xr.DataArray, units: Mapping[str, DisplayUnit] = SI_UNITS) -> dict[str, Axis]:
    """The axes of a field, temperature and pressure first.

    Raises ValueError where a dimension carries no coordinate of its own (scattered points span no grid).
    """
    axes: dict[str, Axis] = {}
    first = [name for name in ("temperature", "pressure") if name in field.dims]
    for name in [*first, *(str(d) for d in field.dims if d not in first)]:
        if name not in field.coords or field.coords[name].dims != (name,):
            raise ValueError(f"the dimension {name!r} is no axis of a grid; scattered points have no map")
        axes[name] = _axis(name, field.coords[name], units.get(name))
    return axes


def _axis(name: str, coordinate: xr.DataArray, unit: DisplayUnit | None) -> Axis:
    stored = str(coordinate.attrs.get("units", ""))
    unit = unit or DisplayUnit("" if stored == "1" else stored)
    absolute = np.asarray(coordinate.values, dtype=float)
    logarithmic = name != "temperature" and is_logarithmic(absolute)
    # "Absolute pressure" would be wrong beside a gauge unit, and needless beside any other.
    title = name if name in SI_UNITS else str(coordinate.attrs.get("long_name", name.replace("_", " ")))
    return Axis(name, title, unit.symbol, unit.show(absolute), logarithmic, unit.show(0.0))


def is_logarithmic(values: NDArray[np.float64]) -> bool:
    """Whether an axis is better drawn logarithmic: even in its logarithm, or uneven and wide."""
    ordered = np.sort(values)
    if len(ordered) < 3 or ordered[0] <= 0:
        return False
    if _even(ordered):
        return False
    return _even(np.log(ordered)) or bool(ordered[-1] / ordered[0] >= _WIDE_SPAN)


def _even(values: NDArray[np.float64]) -> bool:
    steps = np.diff(values)
    return bool(np.ptp(steps) <= _EVEN_STEP * np.abs(steps).max())


def spread(count: int, most: int) -> list[int]:
    """At most `most` indices out of `count`, the ends included, as evenly spaced as they can be."""
    if count <= most:
        return list(range(count))
    if most == 1:
        return [count // 2]
    return [int(i) for i in np.round(np.linspace(0, count - 1, most))]


@dataclass(frozen=True)
class Panel:
    """One panel of a figure: its place and the indices at which the other axes are held."""

    row: int
    column: int
    held: Mapping[str, int]


@dataclass(frozen=True)
class PanelPlan:
    """How the axes that a panel does not span are dealt with.

    `column_axis` and `row_axis` change from panel to panel, `fixed` are held at one value in all of
    them; `notes` says in words what is left out.
    """

    panels: tuple[Panel, ...]
    column_axis: Axis | None
    row_axis: Axis | None
    fixed: tuple[tuple[Axis, int], ...]
    notes: tuple[str, ...]

    @property
    def rows(self) -> int:
        return 1 + max(panel.row for panel in self.panels)

    @property
    def columns(self) -> int:
        return 1 + max(panel.column for panel in self.panels)

    def title(self, panel: Panel) -> list[str]:
        """What tells a panel from the others: the value on each axis that changes from panel to panel."""
        varied = [axis for axis in (self.column_axis, self.row_axis) if axis is not None]
        return [axis.at(panel.held[axis.name]) for axis in varied]

    @property
    def fixed_words(self) -> str:
        return ", ".join(axis.at(index) for axis, index in self.fixed)


MOST_COLUMNS = 3
MOST_ROWS = 3


def plan_panels(axes: Iterable[Axis], *, most_in_line: int = 6) -> PanelPlan:
    """Lay out panels over the axes that a panel does not span itself.

    One axis with several values is wrapped in rows of three, with up to `most_in_line` panels; of two, the
    first goes across and the second down, three values of each; any further one is held in the middle.
    """
    axes = list(axes)
    varied = [axis for axis in axes if len(axis) > 1]
    single = [axis for axis in axes if len(axis) == 1]
    held = {axis.name: 0 for axis in single} | {axis.name: len(axis) // 2 for axis in varied[2:]}
    fixed = tuple((axis, held[axis.name]) for axis in [*single, *varied[2:]])
    if not varied:
        return PanelPlan((Panel(0, 0, held),), None, None, fixed, ())
    if len(varied) == 1:
        across = varied[0]
        chosen = spread(len(across), most_in_line)
        columns = _columns(len(chosen))
        panels = tuple(
            Panel(i // columns, i % columns, {**held, across.name: index}) for i, index in enumerate(chosen)
        )
        return PanelPlan(panels, across, None, fixed, _notes([(across, chosen)]))
    across, down = varied[:2]
    across_chosen, down_chosen = spread(len(across), MOST_COLUMNS), spread(len(down), MOST_ROWS)
    panels = tuple(
        Panel(r, c, {**held, across.name: i, down.name: j})
        for r, j in enumerate(down_chosen)
        for c, i in enumerate(across_chosen)
    )
    return PanelPlan(panels, across, down, fixed, _notes([(across, across_chosen), (down, down_chosen)]))


def _columns(count: int) -> int:
    return 2 if count == 4 else min(count, MOST_COLUMNS)


def _notes(choices: Sequence[tuple[Axis, list[int]]]) -> tuple[str, ...]:
    return tuple(
        f"{len(chosen)} of {len(axis)} values of {axis.title} shown"
        for axis, chosen in choices
        if len(chosen) < len(axis)
    )
