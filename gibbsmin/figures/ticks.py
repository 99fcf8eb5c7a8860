"""Scales and ticks of a panel's axes; logarithmic ones are counted from absolute zero."""

from __future__ import annotations

import math
from typing import Literal

import numpy as np
from matplotlib.axes import Axes
from matplotlib.ticker import FixedFormatter, FixedLocator, MaxNLocator, NullLocator
from numpy.typing import NDArray

from gibbsmin.figures.axes import Axis
from gibbsmin.figures.labels import number

_SERIES = ((1, 2, 5), (1, 3), (1,))  # the tick mantissas, densest first


def set_scale(axes: Axes, which: Literal["x", "y"], axis: Axis, most_ticks: int = 6) -> None:
    """Give an axis of a panel the scale, limits and ticks of a grid axis."""
    low, high = float(axis.values.min()), float(axis.values.max())
    target = axes.xaxis if which == "x" else axes.yaxis
    set_limits = axes.set_xlim if which == "x" else axes.set_ylim
    if axis.logarithmic:
        set_scale_of = axes.set_xscale if which == "x" else axes.set_yscale
        if axis.zero == 0:
            set_scale_of("log")
        else:
            # A gauge pressure may be zero or below: its logarithm is that of the absolute pressure.
            zero = axis.zero
            set_scale_of("function", functions=(lambda v: np.log(v - zero), lambda u: np.exp(u) + zero))
        places = log_ticks(low, high, most_ticks)
        target.set_major_locator(FixedLocator(places))
        target.set_major_formatter(FixedFormatter([number(place) for place in places]))
        target.set_minor_locator(NullLocator())
    else:
        target.set_major_locator(MaxNLocator(most_ticks - 1, steps=[1, 2, 2.5, 5, 10]))
    if high > low:
        set_limits(low, high)


def log_ticks(low: float, high: float, most: int) -> list[float]:
    """Round values within [low, high] for a logarithmic axis, at most `most` of them.

    Values at or below zero (gauge pressures) are stood in for by the ends of the range.
    """
    positive = low if low > 0 else min(0.1, high / 100)
    exponents = range(math.floor(math.log10(positive)), math.ceil(math.log10(high)) + 1)
    places: list[float] = []
    for series in _SERIES:
        places = [float(f"{m}e{e}") for e in exponents for m in series]
        places = [place for place in places if low * (1 - 1e-9) <= place <= high * (1 + 1e-9) or low == place]
        if len(places) <= most:
            break
    if len(places) > most:
        places = places[:: math.ceil(len(places) / most)]
    if len(places) < 2:
        places = [low, high]
    return places


def cell_edges(axis: Axis) -> NDArray[np.float64]:
    """The n + 1 limits of the cells around n values, half way between neighbours on the axis' own scale."""
    places = axis.places
    middle = (places[1:] + places[:-1]) / 2
    return axis.values_at(np.concatenate([places[:1], middle, places[-1:]]))
