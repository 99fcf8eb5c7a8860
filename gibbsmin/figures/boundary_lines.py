"""Boundaries drawn over a map: the traced positions joined to lines, with ticks towards the side that is exceeded.

A boundary is a variable with the attribute `boundary_along`: positions along that axis over the other axes and,
last, over several roots; its directions are in a variable beside it (see `gibbsmin.boundaries`).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.patheffects import Normal, TickedStroke
from numpy.typing import NDArray

from gibbsmin.boundaries.results import ALONG, DIRECTION, ROOT
from gibbsmin.figures.axes import Axis, DisplayUnit

_STYLES: tuple[tuple[str, Any], ...] = (
    ("solid line", "solid"),
    ("dashed line", (0, (6, 2))),
    ("dotted line", (0, (1.2, 1.6))),
    ("dash-dotted line", (0, (6, 1.6, 1.2, 1.6))),
)
_WIDTH, _EDGE = 1.7, 3.4
_TICK_LENGTH, _TICK_SPACING = 0.9, 7.0


@dataclass(frozen=True)
class BoundaryLines:
    """One boundary as a map needs it.

    Attributes:
        label: its name. along: name of its axis.
        positions: (..., root), SI. direction: same shape, +1 where exceeded above, -1 where below, 0 for none.
        dims: of the positions, the last one being the root.
    """

    label: str
    along: str
    dims: tuple[str, ...]
    positions: NDArray[np.float64]
    direction: NDArray[np.int8]


def boundaries_of(dataset: xr.Dataset) -> list[BoundaryLines]:
    """The boundaries that a data set holds."""
    found = []
    for name, array in dataset.data_vars.items():
        if ALONG in array.attrs and f"{name}{DIRECTION}" in dataset:
            positions = array.transpose(..., ROOT)
            direction = dataset[f"{name}{DIRECTION}"].transpose(..., ROOT)
            found.append(
                BoundaryLines(
                    str(array.attrs["long_name"]),
                    str(array.attrs[ALONG]),
                    tuple(map(str, positions.dims)),
                    positions.values,
                    direction.values,
                )
            )
    return found


def legend(boundaries: Sequence[BoundaryLines], across: Axis, up: Axis) -> list[str]:
    """What the foot of a map says of the boundaries along its axes; nothing where there are none."""
    words = [
        f"{_STYLES[number % len(_STYLES)][0]}: {boundary.label}"
        for number, boundary in enumerate(boundaries)
        if boundary.along in (across.name, up.name) and boundary.direction.any()
    ]
    return [*words, "ticks point to where it forms or is exceeded"] if words else []


def draw_boundaries(
    axes: Axes,
    across: Axis,
    up: Axis,
    held: Mapping[str, int],
    boundaries: Sequence[BoundaryLines],
    units: Mapping[str, DisplayUnit],
) -> None:
    """Draw those boundaries that lie along one of a panel's axes; `held` is the index of every other axis."""
    limits = axes.get_xlim(), axes.get_ylim()
    for number, boundary in enumerate(boundaries):
        if boundary.along not in (across.name, up.name):
            continue
        other = up if boundary.along == across.name else across
        at = _at(boundary, other, held)
        unit = units.get(boundary.along) or DisplayUnit("")
        for line in joined(other.values, unit.show(boundary.positions[at]), boundary.direction[at]):
            along_up = boundary.along == up.name
            x, y = (line.over, line.along) if along_up else (line.along, line.over)
            # Seen while walking along the line, which side is exceeded: left is +90 degrees.
            left = (line.direction > 0) == along_up
            _draw(axes, x, y, _STYLES[number % len(_STYLES)][1], 90.0 if left else -90.0)
    axes.set_xlim(limits[0])
    axes.set_ylim(limits[1])


def _at(boundary: BoundaryLines, other: Axis, held: Mapping[str, int]) -> tuple[Any, ...]:
    return tuple(
        slice(None) if dim in (other.name, boundary.dims[-1]) else held[dim] for dim in boundary.dims
    )


def _draw(axes: Axes, x: NDArray[np.float64], y: NDArray[np.float64], style: Any, angle: float) -> None:
    if len(x) == 1:  # one crossing alone makes no line
        axes.plot(x, y, marker="o", markersize=4, color="black", markeredgecolor="white", zorder=5)
        return
    axes.plot(x, y, color="white", linewidth=_EDGE, solid_capstyle="butt", alpha=0.75, zorder=4)
    ticks = TickedStroke(spacing=_TICK_SPACING, angle=angle, length=_TICK_LENGTH, linewidth=0.7)
    axes.plot(x, y, color="black", linewidth=0.7, zorder=5, path_effects=[ticks])
    axes.plot(
        x,
        y,
        color="black",
        linewidth=_WIDTH,
        linestyle=style,
        zorder=5,
        path_effects=[Normal()],
        gid="boundary",
    )


@dataclass
class Line:
    """A run of crossings: values of the other axis, positions along the boundary's own, direction of the first."""

    over: NDArray[np.float64]
    along: NDArray[np.float64]
    direction: int


@dataclass
class _Run:
    first: int
    direction: int
    places: list[float]
    born_beside: _Run | None = None
    ended_beside: _Run | None = None

    @property
    def last(self) -> int:
        return self.first + len(self.places) - 1


def joined(over: NDArray[np.float64], places: NDArray[np.float64], direction: NDArray[np.int8]) -> list[Line]:
    """Crossings (n, R) at the values `over` (n,) of the other axis, joined to lines.

    Neighbours of the same direction belong together, the nearest first. Where two neighbouring crossings of opposite
    direction end (or begin) together, the boundary turns round there, and the two runs are one line.
    """
    runs: list[_Run] = []
    open_runs: list[_Run] = []
    for j in range(len(over)):
        here = [(float(p), int(d)) for p, d in zip(places[j], direction[j], strict=True) if d]
        matched = _match(open_runs, here)
        for run, k in matched.items():
            open_runs[run].places.append(here[k][0])
        _pair_up([open_runs[i] for i in range(len(open_runs)) if i not in matched], "ended_beside")
        new = [_Run(j, d, [p]) for k, (p, d) in enumerate(here) if k not in matched.values()]
        if j > 0:
            _pair_up(new, "born_beside")
        runs += new
        open_runs = sorted([open_runs[i] for i in matched] + new, key=lambda run: run.places[-1])
    return _as_lines(runs, over)


def _match(open_runs: Sequence[_Run], here: Sequence[tuple[float, int]]) -> dict[int, int]:
    pairs = sorted(
        (abs(run.places[-1] - p), i, k)
        for i, run in enumerate(open_runs)
        for k, (p, d) in enumerate(here)
        if run.direction == d
    )
    matched: dict[int, int] = {}
    for _, i, k in pairs:
        if i not in matched and k not in matched.values():
            matched[i] = k
    return matched


def _pair_up(runs: Sequence[_Run], side: str) -> None:
    """Neighbours of opposite direction that end, or begin, at the same place turn into each other."""
    ordered = sorted(runs, key=lambda run: run.places[-1])
    for lower, upper in pairwise(ordered):
        if lower.direction == -upper.direction and getattr(lower, side) is None:
            setattr(lower, side, upper)
            setattr(upper, side, lower)


def _as_lines(runs: Sequence[_Run], over: NDArray[np.float64]) -> list[Line]:
    lines, done = [], set()
    # Those with a loose end first, so that a line starts at an end and not in its middle.
    for run in sorted(runs, key=lambda each: each.born_beside is not None and each.ended_beside is not None):
        if id(run) in done:
            continue
        forward = run.born_beside is None or run.ended_beside is not None
        start, direction = run, run.direction if forward else -run.direction
        x: list[float] = []
        y: list[float] = []
        following: _Run | None = run
        while following is not None and id(following) not in done:
            done.add(id(following))
            own_x, own_y = over[following.first : following.last + 1].tolist(), following.places
            x += own_x if forward else own_x[::-1]
            y += own_y if forward else own_y[::-1]
            following = following.ended_beside if forward else following.born_beside
            forward = not forward
        if following is start and len(x) > 2:  # round and round: an island
            x.append(x[0])
            y.append(y[0])
        lines.append(Line(np.array(x), np.array(y), direction))
    return lines
