"""The verdict on one or a few reactions in place of the whole mixture, as text: one table a person can read."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray

from gibbsmin.reactions.against_mixture import SEPARATOR, Comparison, FullMixture, Reason
from gibbsmin.reactions.shortcut_error import Window
from gibbsmin.reactions.text import KELVIN, TemperatureUnit, headed, table, wrapped

Array = NDArray[np.float64]

MOST_NEGLECTED = 3
WORTH_TELLING = 0.1  # change, in tolerances, below which a neglected reaction is not named

Place = Callable[[tuple[int, int, int]], str]


def verdict_text(
    comparisons: Sequence[Comparison],
    full: FullMixture,
    tolerance: str,
    unit: TemperatureUnit,
    place: Place,
) -> str:
    """The verdict table: may the reactions alone stand for the mixture, where, and why not elsewhere."""
    why = (Reason.K_ERROR, Reason.NEGLECTED_REACTIONS, Reason.CONDENSED_PHASE, Reason.NOT_SOLVED)
    shown = [each for each in why if any(one.share(each) for one in comparisons)]
    rows = [
        ["reactions alone", "K", "within", *(each.words for each in shown), "verdict", "largest error", "at"]
    ]
    notes: list[str] = []
    told: set[str] = set()
    for each in comparisons:
        label = _label(each, comparisons)
        if label.startswith(_SEVERAL) and (note := f"{label}: {each.K}") not in notes:
            notes.append(note)
        rows.append(
            [
                each.subset.name,
                label,
                _per_cent(each.trusted),
                *(_per_cent(each.share(reason)) for reason in shown),
                verdict(each, full, unit),
                str(each.largest),
                place(each.largest.place),
            ]
        )
    for each in comparisons:
        if each.subset.name not in told:
            told.add(each.subset.name)
            notes += _neglected_lines(each, place)
    last = len(rows[0]) - 1
    lines = [
        *table(rows, left=(0, 1, last - 2, last - 1, last)),
        wrapped(
            f"within: part of the map within {tolerance} of the full minimisation; the next columns: part lost to each "
            "reason"
        ),
        *(wrapped(note) for note in [*notes, *_condensed_line(full, place)]),
    ]
    return headed("One or a few reactions against the whole mixture", "\n".join(lines))


_SEVERAL = "shortcuts "


def _label(comparison: Comparison, among: Sequence[Comparison]) -> str:
    """`exact`, the shortcut's name, or `shortcuts 1` where several go together."""
    if SEPARATOR not in comparison.K:
        return comparison.K
    several = list(dict.fromkeys(each.K for each in among if SEPARATOR in each.K))
    return f"{_SEVERAL}{several.index(comparison.K) + 1}"


def _per_cent(share: float) -> str:
    if 0 < share < 0.005:
        return "<1 %"
    return ">99 %" if 0.995 <= share < 1 else f"{100 * share:.0f} %"


def verdict(comparison: Comparison, full: FullMixture, unit: TemperatureUnit = KELVIN) -> str:
    """`use`, `use from ... to ...`, `depends on feed and pressure`, or `do not use`."""
    within = comparison.temperatures_within()
    T = full.conditions.temperature
    if within.all():
        return "use"
    if not (comparison.reason == Reason.WITHIN).any():
        return "do not use"
    spans = _spans(T, within)
    if not spans:
        return "depends on feed and pressure: see the map"
    return "use from " + " and ".join(unit.span(each) for each in spans)


def default_place(full: FullMixture, unit: TemperatureUnit = KELVIN) -> Place:
    """Words for a point of the map: temperature, pressure, and the number of the feed where there are several."""

    def words(index: tuple[int, int, int]) -> str:
        feed, T, p = index
        bar = float(np.exp(full.conditions.log_pressure[p]))
        text = f"{unit.show(float(full.conditions.temperature[T]))} {unit.symbol}, {bar:.4g} bar"
        return text if len(full.conditions.feed) == 1 else f"feed {feed + 1}, {text}"

    return words


# --- inner ---------------------------------------------------------------------------------------------------


def _neglected_lines(comparison: Comparison, place: Place) -> list[str]:
    worth = [each for each in comparison.neglected if each.largest.ratio >= WORTH_TELLING][:MOST_NEGLECTED]
    return [
        f"{comparison.subset.name} neglects {_named(each.reaction.name, each.reaction.equation)}: with it as well, "
        f"{each.largest.quantity} would change by {each.largest.value:+.3f} ({place(each.largest.place)})"
        for each in worth
    ]


def _named(name: str, equation: str) -> str:
    return name if name == equation else f"{name} ({equation})"


def _condensed_line(full: FullMixture, place: Place) -> list[str]:
    condensing = full.condensing
    if not full.condensed or not condensing.any():
        return []
    index = np.unravel_index(int(np.argmax(np.where(condensing, full.activity, 0.0))), condensing.shape)
    which = full.condensed[int(full.most_active[index])].name
    at = place((int(index[0]), int(index[1]), int(index[2])))
    if full.formed is not None and full.formed.any():
        how = f"is there or would form; the most active one is {which} (at {at})"
    else:
        how = (
            f"would form; by the potentials of the gas the activity of {which} reaches {full.activity[index]:.3g} "
            f"(at {at})"
        )
    return [f"Condensed phase: on {_per_cent(float(condensing.mean()))} of the map one {how}"]


def _spans(T: Array, within: NDArray[np.bool_]) -> list[Window]:
    spans: list[Window] = []
    start: float | None = None
    for t, inside in zip(T.tolist(), within.tolist(), strict=True):
        if inside and start is None:
            start = t
        if inside:
            end = t
        elif start is not None:
            spans.append(Window(start, end))
            start = None
    if start is not None:
        spans.append(Window(start, end))
    return spans
