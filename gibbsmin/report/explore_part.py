"""The part of the page that is explored: controls, map, composition of a point, lines.

Only the frame is made here; the page's script fills it. Every control is a plain form element, so that the
keyboard and assistive programs reach all of it.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from gibbsmin.report.markup import Markup, joined, pretty_words, tag

if TYPE_CHECKING:
    from gibbsmin.outcome import Outcome
    from gibbsmin.report.chart_data import ChartData


def explore_part(outcome: Outcome, data: ChartData) -> list[Markup | None]:
    spanned = sum(len(axis) > 1 for axis in outcome.scenario.axes)
    without_scripts = tag(
        "noscript",
        tag(
            "p",
            "The charts need scripts, which this viewer does not run. All tables below are complete without them.",
            class_="note",
        ),
    )
    return [
        without_scripts,
        _thinned_words(data),
        tag(
            "div",
            _settings(spanned),
            _sliders(outcome) if spanned else None,
            tag(
                "div",
                _map() if spanned > 1 else None,
                _point(),
                class_="map-and-point" if spanned > 1 else None,
            ),
            _cut() if spanned else None,
            tag("p", id="spoken", class_="only-spoken", aria_live="polite"),
            tag("div", id="hover-card", aria_hidden="true", hidden=True),
            id="explorer",
            hidden=True,
        ),
    ]


def _thinned_words(data: ChartData) -> Markup | None:
    thinned = data.thinned
    if thinned.is_whole:
        return None
    shown = 1
    for kept in thinned.kept:
        shown *= len(kept)
    total = 1
    for size in thinned.shape:
        total *= size
    return tag(
        "p",
        f"The map has {total:,} points. The charts show {shown:,} of them, evenly spread; tables, evidence and "
        "results.nc use all.",
        class_="note",
        id="thinned",
    )


def _settings(spanned: int) -> Markup:
    several = spanned > 1
    return tag(
        "fieldset",
        tag("legend", "Chart settings"),
        _choice("quantity", "Quantity on the map") if several else None,
        _choice("scale", "Colours", [("linear", "linear"), ("log", "logarithmic")]) if several else None,
        _choice("across", "Across") if spanned > 2 else None,
        _choice("up", "Up") if spanned > 2 else None,
        _choice("temperature-unit", "Temperature in"),
        _choice("pressure-unit", "Pressure in"),
        class_="controls",
    )


def _choice(name: str, label: str, options: list[tuple[str, str]] | None = None) -> Markup:
    entries = [tag("option", text, value=value) for value, text in options or []]
    return tag("label", tag("span", label), tag("select", entries, id=name), class_="choice")


def _sliders(outcome: Outcome) -> Markup:
    rows = []
    for axis in outcome.scenario.axes:
        if len(axis) > 1:
            name = f"slider-{axis.name}"
            title = pretty_words(axis.title[:1].upper() + axis.title[1:])
            rows.append(
                tag(
                    "div",
                    tag("label", title, for_=name),
                    tag("input", type="range", id=name, min=0, value=0, data_axis=axis.name),
                    tag("output", id=f"{name}-value", for_=name),
                    class_="slider",
                )
            )
    return tag("fieldset", tag("legend", "Marked point"), rows, class_="sliders")


def _map() -> Markup:
    buttons = [
        tag(
            "label",
            tag("input", type="checkbox", id="show-checked"),
            " cross-checked points",
            id="checked-choice",
        ),
        *_buttons("map"),
    ]
    return tag(
        "figure",
        tag("figcaption", id="map-caption"),
        tag("div", id="map", class_="chart", role="img", aria_labelledby="map-caption"),
        tag("div", buttons, class_="chart-buttons"),
        id="map-figure",
    )


def _buttons(chart: str) -> list[Markup]:
    return [
        tag("button", "Whole range", type="button", data_chart=chart, data_do="reset"),
        tag("button", "Save picture", type="button", data_chart=chart, data_do="save"),
    ]


def _point() -> Markup:
    headings = [
        tag("th", "species", scope="col"),
        tag("th", "mole fraction", scope="col", class_="number"),
        tag("th", "dry", scope="col", class_="number dry"),
    ]
    table = tag(
        "table",
        tag("caption", "All species at this point, the most abundant first", class_="only-spoken"),
        tag("thead", tag("tr", headings)),
        tag("tbody", id="point-species"),
    )
    return tag(
        "section",
        tag("h3", tag("span", "Marked point", id="point-kind")),
        tag("p", id="point-place", class_="place"),
        tag(
            "div",
            table,
            class_="point-box",
            tabindex="0",
            role="region",
            aria_label="Composition at the point",
        ),
        tag(
            "div",
            tag("dl", id="point-results", class_="facts compact"),
            class_="point-results-box",
            tabindex="0",
            role="region",
            aria_label="Results at the point",
        ),
        id="point",
        aria_label="Composition at the point",
    )


def _cut() -> Markup:
    settings = tag(
        "fieldset",
        tag("legend", "Lines through the marked point"),
        _choice("lines-show", "Show"),
        _choice("along", "Along"),
        _choice("basis", "Basis", [("wet", "all gas"), ("dry", "dry gas")]),
        _choice("line-scale", "Scale", [("log", "logarithmic"), ("linear", "linear")]),
        class_="controls",
    )
    species = tag(
        "fieldset",
        tag("legend", "Species shown"),
        tag("div", id="species-key", class_="species-choice"),
        tag(
            "details", tag("summary", "More species"), tag("div", id="species-more", class_="species-choice")
        ),
        id="species-fieldset",
    )
    return joined(
        (
            settings,
            species,
            tag(
                "figure",
                tag("figcaption", id="cut-caption"),
                tag("div", id="cut", class_="chart", role="img", aria_labelledby="cut-caption"),
                tag("div", _buttons("cut"), class_="chart-buttons"),
                id="cut-figure",
            ),
        )
    )
