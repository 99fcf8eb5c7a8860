"""Reactions of the scenario: ln K with its shortcuts and measured values, errors, and the verdict on trust."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from gibbsmin.figures.labels import number
from gibbsmin.report.markup import Markup, joined, pretty_words, table, tag
from gibbsmin.report.quantity_text import state_value

if TYPE_CHECKING:
    from gibbsmin.outcome import Outcome
    from gibbsmin.reactions.results import MeasuredSummary, ReactionResults, ShortcutSummary
    from gibbsmin.scenario import Scenario

_BAND_POINTS = 60  # of the line and the confidence band of measured values


def reactions_part(outcome: Outcome) -> list[Markup | None]:
    """The section's content; call it only for an outcome with reactions."""
    from gibbsmin.outcome.reactions import reactions_text

    results = outcome.reactions
    assert results is not None
    several = len(results.temperature) > 1
    return [
        _constants(results, outcome.scenario),
        _chart(
            "ln-k",
            "ln K against 1/T: lines from the species data, dashed the shortcuts, circles measured values",
        )
        if several
        else None,
        _shortcuts(results, outcome.scenario) if results.shortcuts else None,
        _chart("shortcut-error", "Error of each shortcut in per cent of K; shaded: within the tolerance")
        if several and results.shortcuts
        else None,
        tag(
            "details",
            tag("summary", "The whole answer about reactions, as text"),
            tag("pre", tag("code", reactions_text(outcome)), tabindex="0"),
        ),
        tag(
            "p",
            "Where reactions alone may be trusted against the whole mixture: choose it on the map above, under "
            "“Trust in reactions alone”.",
            class_="note",
        )
        if results.comparisons
        else None,
    ]


def _chart(name: str, words: str) -> Markup:
    return tag(
        "figure",
        tag("figcaption", words, id=f"{name}-caption"),
        tag("div", id=name, class_="chart", role="img", aria_labelledby=f"{name}-caption"),
        class_="needs-scripts",
    )


def _constants(results: ReactionResults, scenario: Scenario) -> Markup:
    low, high = int(np.argmin(results.temperature)), int(np.argmax(results.temperature))
    headings: list[object] = ["reaction", "equation", "ln K at ", "ln K at ", "K with temperature"]
    for column, at in ((2, low), (3, high)):
        headings[column] = joined(("ln K at ", state_value(float(results.temperature[at]), "K", scenario)))
    rows = [
        [
            each.reaction.name,
            pretty_words(each.reaction.equation),
            number(float(each.functions.ln_K[low])),
            number(float(each.functions.ln_K[high])),
            each.direction,
        ]
        for each in results.reactions
    ]
    pressure = f"{results.wanted.standard_pressure / 1e5:g} bar"
    return table(f"Reactions; K at a standard pressure of {pressure}", headings, rows, words=(1, 4))


def _shortcuts(results: ReactionResults, scenario: Scenario) -> Markup:
    rows = [_shortcut_row(each, scenario) for each in results.shortcuts]
    headings = ["shortcut", "reaction", "largest error, % of K", "largest error, K", "within the tolerance"]
    caption = f"Shortcuts over the grid's temperatures; tolerance {results.wanted.tolerance}"
    return table(caption, headings, rows, words=(1, 4))


def _shortcut_row(summary: ShortcutSummary, scenario: Scenario) -> list[object]:
    windows: list[object] = []
    for window in summary.windows:
        ends = (state_value(each, "K", scenario) for each in (window.lower, window.upper))
        first, last = ends
        windows.append(joined(("; " if windows else None, first, " to ", last)))
    return [
        summary.shortcut.name,
        summary.shortcut.reaction.name,
        _largest(summary.errors.per_cent),
        _largest(summary.errors.kelvin),
        joined(windows) if windows else "nowhere",
    ]


def _largest(values: NDArray[np.float64]) -> str:
    known = values[np.isfinite(values)]
    return number(float(known[np.argmax(np.abs(known))]), 3) if known.size else "–"


def reaction_charts(results: ReactionResults) -> dict[str, Any]:
    """What the page's script draws of reactions; temperatures in K."""
    temperature = [float(T) for T in np.sort(results.temperature)]
    order = np.argsort(results.temperature)
    names = [each.reaction.name for each in results.reactions]
    return {
        "temperature": temperature,
        "constants": [
            {"name": each.reaction.name, "values": _plain(each.functions.ln_K[order])}
            for each in results.reactions
        ],
        "shortcuts": [
            {
                "name": each.shortcut.name,
                "of": names.index(each.shortcut.reaction.name)
                if each.shortcut.reaction.name in names
                else -1,
                "values": _plain(_exact_of(results, each)[order] + each.errors.ln_K[order]),
                "error": _plain(each.errors.per_cent[order]),
            }
            for each in results.shortcuts
        ],
        "measured": [_measured(each, names) for each in results.measured],
        "tolerance": results.wanted.tolerance.per_cent_of_K,
    }


def _exact_of(results: ReactionResults, summary: ShortcutSummary) -> NDArray[np.float64]:
    """ln K of the shortcut's reaction at the results' temperatures and standard pressure."""
    for each in results.reactions:
        if each.reaction.name == summary.shortcut.reaction.name:
            return each.functions.ln_K
    return np.asarray(summary.shortcut.ln_K(results.temperature)) - summary.errors.ln_K


def _measured(summary: MeasuredSummary, names: list[str]) -> dict[str, Any]:
    data, law = summary.data, summary.second
    inverse = np.linspace(1 / data.temperature.max(), 1 / data.temperature.min(), _BAND_POINTS)
    middle, width = law.ln_K(1 / inverse), law.half_width(inverse)
    return {
        "name": data.name,
        "of": names.index(data.reaction.name) if data.reaction.name in names else -1,
        "temperature": _plain(data.temperature),
        "values": _plain(data.ln_K),
        "uncertainty": None if data.uncertainty is None else _plain(data.uncertainty),
        "lineTemperature": _plain(1 / inverse),
        "line": _plain(middle),
        "low": _plain(middle - width),
        "high": _plain(middle + width),
    }


def _plain(values: NDArray[np.float64]) -> list[float | None]:
    """Six digits are more than a screen shows."""
    return [float(f"{value:.6g}") if np.isfinite(value) else None for value in values]
