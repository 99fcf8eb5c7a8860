"""The report of a run as one HTML page."""

from __future__ import annotations

import hashlib
from importlib.resources import files
from pathlib import Path
from typing import TYPE_CHECKING, Any

from gibbsmin.figures.labels import number
from gibbsmin.outcome.saving import record
from gibbsmin.outcome.summary import CAUTION
from gibbsmin.report.asked_part import asked_part, species_part
from gibbsmin.report.chart_data import LEAST_SHOWN, ChartData
from gibbsmin.report.evidence_part import evidence_part, method_part
from gibbsmin.report.explore_part import explore_part
from gibbsmin.report.markup import Markup, bullets, embedded_json, facts, pretty_name, tag
from gibbsmin.report.reactions_part import reactions_part
from gibbsmin.report.results_part import boundaries_part, results_part
from gibbsmin.report.thinning import MOST_POINTS

if TYPE_CHECKING:
    from collections.abc import Sequence

    from gibbsmin.outcome import Outcome

REPORT_FILE = "report.html"
LIBRARY_FILE = "plotly-cartesian.min.js"
LIBRARY_LICENSE = "plotly-LICENSE.txt"
SCRIPTS = (
    "numbers.js",
    "units.js",
    "store.js",
    "drawing.js",
    "map.js",
    "cut.js",
    "point.js",
    "reactions.js",
    "explore.js",
)
# The browser itself refuses whatever would leave the page.
POLICY = (
    "default-src 'none'; script-src 'unsafe-inline'; style-src 'unsafe-inline'; img-src data: blob:; "
    "base-uri 'none'; form-action 'none'"
)
CAUTIONS = (
    "Equilibrium is a limit, not a rate. Nothing here says how fast a state is reached, over which catalyst, or "
    "whether it is reached at all.",
    "Not for the sizing of relief devices, nor for explosion limits, ignition, or the claim that an atmosphere is "
    "non-flammable.",
    "Not for exposure limits or emissions of toxic traces: below the accuracy of the species data a small mole "
    "fraction is an estimate, and kinetics usually decide it.",
    "Gases are ideal and only the listed species take part. Soot, liquids and solids that are not listed do not "
    "appear, however stable they would be; at high pressure real-gas effects are missing.",
    "Local codes, standards and the judgement of licensed engineers come first.",
)


def report_html(outcome: Outcome, *, most_points: int = MOST_POINTS) -> str:
    """The report of a run as one self-contained HTML page.

    Args:
        outcome: what `gibbsmin.run` returned.
        most_points: points of the grid that the charts show; a larger map is thinned evenly for them, and the page
            says so. Tables and evidence always use all points.

    Returns:
        The page. It needs no network and opens from disk; the same outcome gives the same text. Without scripts
        the tables remain.
    """
    data = ChartData(outcome, most_points)
    title = outcome.scenario.title
    sections: list[tuple[str, str, list[Markup | None]]] = [
        ("explore", "Explore", explore_part(outcome, data)),
        ("results", "Results", results_part(outcome)),
        *([("boundaries", "Boundaries", boundaries_part(outcome))] if outcome.boundaries else []),
        *([("reactions", "Reactions", reactions_part(outcome))] if outcome.reactions is not None else []),
        ("scenario", "Scenario as understood", asked_part(outcome.scenario)),
        ("species", "Species", species_part(outcome.scenario)),
        ("method", "Method", method_part(outcome)),
        ("evidence", "Evidence", evidence_part(outcome)),
        ("cautions", "Cautions", [bullets(CAUTIONS)]),
        ("record", "Record", _record_part(outcome, data)),
    ]
    body = [
        tag("a", "Skip to the charts", href="#explore", class_="skip"),
        _header(outcome),
        navigation([(name, heading) for name, heading, _ in sections]),
        tag("main", [section(*each) for each in sections], id="content"),
        tag("footer", tag("p", CAUTION)),
    ]
    return page(title, body, chart_data=data.as_json())


def write_report(outcome: Outcome, path: Path, *, most_points: int = MOST_POINTS) -> Path:
    """Write `report_html` to a file, in UTF-8 with the same bytes on every system."""
    path.write_text(report_html(outcome, most_points=most_points), encoding="utf-8", newline="")
    return path


def page(title: str, body: Sequence[Markup], *, chart_data: dict[str, Any] | None = None) -> str:
    """A whole page around its body; the plotting library and the scripts come only with `chart_data`."""
    import gibbsmin

    head = [
        tag("meta", charset="utf-8"),
        tag("meta", http_equiv="Content-Security-Policy", content=POLICY),
        tag("meta", name="viewport", content="width=device-width, initial-scale=1"),
        tag("meta", name="generator", content=f"gibbsmin {gibbsmin.__version__}"),
        tag("meta", name="color-scheme", content="light dark"),
        tag("title", title),
        tag("style", Markup(page_file("report.css"))),
    ]
    scripts: list[Markup] = []
    if chart_data is not None:
        scripts = [
            tag("script", embedded_json(chart_data), type="application/json", id="chart-data"),
            tag("script", Markup(page_file(LIBRARY_FILE))),
            tag("script", Markup(_program())),
        ]
    content = tag("html", tag("head", head), tag("body", [*body, *scripts]), lang="en")
    return f"<!DOCTYPE html>\n{content}\n"


def page_file(name: str) -> str:
    """A file that is shipped for the page."""
    return files("gibbsmin.report").joinpath("page_files", name).read_text(encoding="utf-8")


def _program() -> str:
    """The page's own scripts as one, with a scope of their own."""
    return "(() => {\n'use strict';\n" + "\n".join(page_file(name) for name in SCRIPTS) + "})();\n"


def navigation(sections: Sequence[tuple[str, str]]) -> Markup:
    links = [tag("li", tag("a", heading, href=f"#{name}")) for name, heading in sections]
    return tag("nav", tag("ul", links), aria_label="Parts of this report")


def section(name: str, heading: str, content: Sequence[object]) -> Markup:
    return tag(
        "section",
        tag("h2", heading, id=f"{name}-heading"),
        content,
        id=name,
        aria_labelledby=f"{name}-heading",
    )


def _header(outcome: Outcome) -> Markup:
    scenario, check = outcome.scenario, outcome.crosscheck
    solved = outcome.points - outcome.unsolved
    marks = [
        mark(
            outcome.all_solved,
            f"{solved:,} of {outcome.points:,} points solved and proved",
        )
    ]
    if check.points:
        marks.append(
            mark(
                check.all_confirmed, f"{check.confirmed:,} of {len(check.points):,} checked points confirmed"
            )
        )
    else:
        marks.append(mark(None, "no independent cross-check"))
    if "extrapolated" in outcome.dataset and bool((outcome.dataset["extrapolated"] != 0).any()):
        marks.append(mark(False, "species data extrapolated"))
    names = [pretty_name(name) for name in scenario.feed_species]
    return tag(
        "header",
        tag("p", "Equilibrium report", class_="kicker"),
        tag("h1", scenario.title),
        tag("p", f"Feed of {_listed(names)}; {_taking_part(outcome)} at equilibrium.", class_="lead"),
        tag("ul", marks, class_="marks"),
    )


def _taking_part(outcome: Outcome) -> str:
    gases = f"{len(outcome.scenario.species)} gases"
    if "phase_takes_part" not in outcome.dataset.coords:
        return gases
    phases = int(outcome.dataset["phase_takes_part"].sum())
    return f"{gases} and {phases} condensed {'phase' if phases == 1 else 'phases'}" if phases else gases


def mark(good: bool | None, text: str) -> Markup:
    """A verdict in words with a sign before it; colour only repeats what both say."""
    sign, kind = {True: ("✓", "good"), False: ("!", "bad"), None: ("–", "neutral")}[good]
    return tag("li", tag("span", sign, class_="sign", aria_hidden="true"), text, class_=kind)


def _listed(names: Sequence[str], most: int = 8) -> str:
    shown = list(names[:most])
    return ", ".join(shown) + (f" and {len(names) - most} more" if len(names) > most else "")


def _record_part(outcome: Outcome, data: ChartData) -> list[Markup | None]:
    known = record(outcome)
    settings = [(key, _setting(value)) for key, value in known["settings"].items()]
    return [
        facts(
            [
                ("program", f"gibbsmin {known['version']}"),
                ("scenario, SHA-256", tag("code", known["scenario SHA-256"])),
                ("species data, SHA-256", tag("code", known["species data SHA-256"])),
                ("cross-check by", outcome.crosscheck.library or "none"),
                *settings,
                ("charts", f"plotly.js (MIT licence), file SHA-256 {library_digest()[:16]}…"),
            ]
        ),
        tag(
            "p",
            "The same scenario, data and version give the same numbers and the same bytes of this page. All results "
            "with all digits are in results.nc beside it; record.json lists the digest of every file.",
        ),
        tag(
            "details",
            tag("summary", "The scenario file"),
            tag("pre", tag("code", outcome.scenario.text), tabindex="0"),
        ),
        _species_left_out(data),
    ]


def _setting(value: object) -> str:
    if isinstance(value, bool):
        return "yes" if value else "no"
    return number(value) if isinstance(value, float) else str(value)


def _species_left_out(data: ChartData) -> Markup | None:
    if not data.left_out:
        return None
    return tag(
        "p",
        f"Not in the charts, because none of them exceeds a mole fraction of {max(data.least, LEAST_SHOWN):.1g} "
        f"anywhere: {', '.join(map(pretty_name, data.left_out))}.",
        class_="note",
    )


def library_digest() -> str:
    """SHA-256 of the plotting library as shipped."""
    return hashlib.sha256(page_file(LIBRARY_FILE).encode("utf-8")).hexdigest()
