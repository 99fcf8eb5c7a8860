"""Boundaries as results: one object each, variables of the data set, rows of a table."""

from __future__ import annotations

import csv
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
import xarray as xr
from numpy.typing import NDArray

if TYPE_CHECKING:
    from gibbsmin.scenario.model import Axis, WantedBoundary

FloatArray = NDArray[np.float64]

ROOT = "root"
ALONG = "boundary_along"  # attribute by which figures and reports know a boundary
DIRECTION = ", direction"
_UDUNITS = {"mol/h": "mol h-1"}


@dataclass(frozen=True, eq=False)
class Boundary:
    """One boundary at all values of the axes other than its own.

    Attributes:
        wanted: what was asked. along: its axis. others: the other axes, in the order of the grid.
        positions: in the axis' own unit (K, Pa, mol, 1), dimensions (*others, root); ascending, NaN beyond the
            last.
        direction: +1 where the phase (or value) is exceeded above the position, -1 where below it, 0 beyond the
            last; same shape.
        residual: what was to be zero (ln activity, ln x/value, conversion less value), at the position.
        first_sign: whether it is exceeded (+1) or not (-1) at the lowest position of the axis; 0 if unknown.
        unsettled: crossings that were seen on the grid but could not be closed in on.
    """

    wanted: WantedBoundary
    along: Axis
    others: tuple[Axis, ...]
    positions: FloatArray
    direction: NDArray[np.int8]
    residual: FloatArray
    first_sign: NDArray[np.int8]
    unsettled: int

    @property
    def title(self) -> str:
        """What it is, in words."""
        wanted = self.wanted
        if wanted.kind == "phase":
            return f"{wanted.species} begins to form"
        return f"{wanted.kind} of {wanted.species} = {wanted.value:g}"

    @property
    def crossings(self) -> int:
        return int((self.direction != 0).sum())

    @property
    def never(self) -> int:
        """Number of lines without a crossing where it is nowhere exceeded."""
        return int((self._without & (self.first_sign < 0)).sum())

    @property
    def always(self) -> int:
        """Number of lines without a crossing where it is exceeded all along."""
        return int((self._without & (self.first_sign > 0)).sum())

    @property
    def _without(self) -> NDArray[np.bool_]:
        without: NDArray[np.bool_] = (self.direction == 0).all(axis=-1)
        return without


def display(axis: Axis, values: FloatArray) -> FloatArray:
    """Positions along an axis in the unit in which the scenario gives it; all our units are linear in SI."""
    own, shown = axis.array, axis.display_array
    if len(own) < 2:
        return np.asarray(values + (shown[0] - own[0]))
    slope = (shown[-1] - shown[0]) / (own[-1] - own[0])
    result: FloatArray = shown[0] + slope * (values - own[0])
    return result


def rows(boundary: Boundary) -> Iterator[tuple[list[float], float, str]]:
    """For every crossing: values of the other axes, and the position, in the scenario's units; what happens above."""
    shown = display(boundary.along, boundary.positions)
    exceeded = ("forms", "dissolves") if boundary.wanted.kind == "phase" else ("exceeded", "not reached")
    for index in zip(*np.nonzero(boundary.direction != 0), strict=True):
        places = [axis.display_values[i] for axis, i in zip(boundary.others, index[:-1], strict=True)]
        word = exceeded[0] if boundary.direction[index] > 0 else exceeded[1]
        yield places, float(shown[index]), f"{word} above"


def boundary_table(boundaries: Sequence[Boundary], path: Path) -> None:
    """Write one row a crossing as CSV, in the units of the scenario."""
    axes = {axis.name: axis for each in boundaries for axis in (*each.others, each.along)}
    with path.open("w", encoding="utf-8", newline="") as stream:
        writer = csv.writer(stream, lineterminator="\n")
        headings = [f"{axis.title} [{axis.display_unit}]" for axis in axes.values()]
        writer.writerow(["boundary", "what", "along", *headings, "above it"])
        for each in boundaries:
            for places, position, word in rows(each):
                at = dict(zip((axis.name for axis in each.others), places, strict=True))
                at[each.along.name] = position
                values = [repr(float(at[name])) for name in axes]
                writer.writerow([each.wanted.name, each.title, each.along.title, *values, word])


def add_boundaries(dataset: xr.Dataset, boundaries: Sequence[Boundary]) -> xr.Dataset:
    """The data set with two variables for each boundary: its positions and their directions, over (..., root)."""
    if not boundaries:
        return dataset
    width = max(1, *(each.positions.shape[-1] for each in boundaries))
    for each in boundaries:
        dims = (*(axis.name for axis in each.others), ROOT)
        name = variable_name(each)
        units = _UDUNITS.get(each.along.unit, each.along.unit)
        positions = _padded(each.positions, width, np.nan)
        dataset = dataset.assign(
            {
                name: xr.Variable(
                    dims,
                    positions,
                    {
                        "units": units,
                        "long_name": each.wanted.name,
                        "comment": f"{each.title}; every crossing along {each.along.title}, ascending",
                        ALONG: each.along.name,
                    },
                ),
                name + DIRECTION: xr.Variable(
                    dims,
                    _padded(each.direction, width, 0).astype(np.int8),
                    {
                        "units": "1",
                        "long_name": f"{each.wanted.name}: what lies above the crossing",
                        "flag_values": np.array([-1, 0, 1], dtype=np.int8),
                        "flag_meanings": "no_longer_above no_crossing begins_above",
                    },
                ),
            }
        )
    return dataset


def variable_name(boundary: Boundary) -> str:
    """Name of the variable that holds the positions."""
    return f"boundary {' '.join(boundary.wanted.name.replace('/', ' to ').split())}"


def summary_lines(boundaries: Sequence[Boundary]) -> list[str]:
    """A line for each boundary: where it lies over the whole grid, and how often it is not there."""
    lines = []
    for each in boundaries:
        unit = "" if each.along.display_unit == "1" else f" {each.along.display_unit}"
        found = display(each.along, each.positions[each.direction != 0])
        text = f"{each.wanted.name} ({each.title}, along {each.along.title}): "
        if found.size:
            low, high = float(found.min()), float(found.max())
            where = f"{low:.6g}{unit}" if found.size == 1 else f"{low:.6g} to {high:.6g}{unit}"
            text += f"{found.size} crossing{'s' if found.size > 1 else ''}, {where}"
            text += f", at most {each.positions.shape[-1]} on a line" if each.positions.shape[-1] > 1 else ""
        else:
            text += "no crossing"
        words = ("forms", "forms") if each.wanted.kind == "phase" else ("exceeded", "reached")
        lines_in_all = each.first_sign.size
        if each.never:
            text += f"; nowhere {words[1]} on {each.never} of {lines_in_all} lines"
        if each.always:
            text += f"; {words[0]} all along {each.always} of {lines_in_all} lines"
        if each.unsettled:
            text += f"; {each.unsettled} crossings could not be closed in on"
        lines.append(text)
    return lines


def _padded(values: NDArray[np.generic], width: int, fill: float) -> NDArray[np.generic]:
    missing = width - values.shape[-1]
    return np.pad(values, [(0, 0)] * (values.ndim - 1) + [(0, missing)], constant_values=fill)
