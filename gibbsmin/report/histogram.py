"""Small histograms of evidence as inline SVG: drawn without scripts, so that they print and travel."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from gibbsmin.figures.labels import number
from gibbsmin.report.markup import Markup, tag

_WIDTH, _HEIGHT, _LEFT, _RIGHT, _BELOW, _ABOVE = 420, 150, 34, 14, 34, 16
_FEWEST_DECADES = 4
_SMALLEST = 1e-20  # what lies below, zeros included, is counted in the first bar


def decade_histogram(values: NDArray[np.float64], title: str, limit: float | None = None) -> Markup:
    """How many values lie in each decade; `limit` is marked with a line and in words.

    NaN is left out. The number of values at or below 1e-20 stands in a bar of its own.
    """
    known = values[np.isfinite(values)]
    if not known.size:
        return tag("p", f"{title}: nothing to show, no point is solved.")
    positive = known[known > _SMALLEST]
    low = math.floor(math.log10(positive.min())) if positive.size else -16
    high = math.floor(math.log10(positive.max())) + 1 if positive.size else -12
    if limit is not None:
        high = max(high, math.ceil(math.log10(limit)) + 1)
    low = min(low, high - _FEWEST_DECADES)
    edges = np.arange(low, high + 1)
    counts = np.histogram(np.log10(positive), bins=edges)[0]
    bars = [int(known.size - positive.size), *map(int, counts)]
    return _drawn(bars, low, title, limit, _in_words(known, limit))


def _in_words(known: NDArray[np.float64], limit: float | None) -> str:
    told = f"{known.size:,} points; median {_figure(np.median(known))}, largest {_figure(known.max())}"
    return told + (f"; accepted up to {_figure(limit)}" if limit is not None else "")


def _figure(value: float) -> str:
    return number(float(value), 2)


def _drawn(bars: list[int], low: int, title: str, limit: float | None, words: str) -> Markup:
    step = (_WIDTH - _LEFT - _RIGHT) / len(bars)
    tallest = max(bars)
    room = _HEIGHT - _ABOVE - _BELOW
    floor = _HEIGHT - _BELOW
    pieces: list[Markup] = []
    for position, count in enumerate(bars):
        height = 0.0 if not count else max(1.5, room * count / tallest)
        x = _LEFT + position * step
        if count:
            pieces.append(
                tag(
                    "rect",
                    class_="bar",
                    x=f"{x + 1:.1f}",
                    y=f"{floor - height:.1f}",
                    width=f"{step - 2:.1f}",
                    height=f"{height:.1f}",
                )
            )
            pieces.append(_text(f"{count:,}", x + step / 2, floor - height - 3, "count"))
        if position == 0:
            pieces.append(_text("0", x + step / 2, floor + 14))
        elif _is_labelled(position, len(bars)):
            pieces.append(_text(number(10.0 ** (low + position - 1)), x, floor + 14))
    pieces.append(tag("line", class_="axis", x1=_LEFT, x2=_WIDTH - _RIGHT, y1=floor, y2=floor))
    if limit is not None:
        x = _LEFT + step * (1 + math.log10(limit) - low)
        pieces.append(tag("line", class_="limit", x1=f"{x:.1f}", x2=f"{x:.1f}", y1=_ABOVE - 8, y2=floor))
        pieces.append(_text("accepted", x - 3, _ABOVE - 2, "limit-text"))
    pieces.append(_text(words, _LEFT, _HEIGHT - 4, "words"))
    drawing = tag(
        "svg",
        tag("title", f"{title}: {words}"),
        *pieces,
        viewBox=f"0 0 {_WIDTH} {_HEIGHT}",
        role="img",
        class_="histogram",
    )
    return tag("figure", tag("figcaption", title), drawing, class_="small-figure")


def _is_labelled(position: int, bars: int) -> bool:
    every = 1 + (bars - 1) // 7
    return (position - 1) % every == 0


def _text(text: str, x: float, y: float, class_: str | None = None) -> Markup:
    return tag("text", text, x=f"{x:.1f}", y=f"{y:.1f}", class_=class_)
