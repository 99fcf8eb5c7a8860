"""A compact page for a study: one row a case, with what each case proves about itself."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from gibbsmin.figures.labels import number
from gibbsmin.outcome.summary import CAUTION
from gibbsmin.report.markup import Markup, bullets, facts, joined, pretty_words, table, tag
from gibbsmin.report.page import CAUTIONS, mark, navigation, page, section
from gibbsmin.report.quantities import unit_shown

if TYPE_CHECKING:
    from gibbsmin.study.results import StudyResults

_LOWEST, _HIGHEST = " lowest", " highest"
_LONG = 30  # cases above which their table gets a box of its own to scroll in
_MOST_LISTED = 2_000  # cases listed one by one, so that the page stays light
_MOST_ODD = 200


@dataclass(frozen=True)
class StudyCase:
    """One case of a study, as its summary knows it.

    Attributes:
        name: unique in the study.
        points, unsolved: of its grid.
        checked, differing: points of the cross-check.
        largest_gap: per mol of gas [1]; None where nothing was solved.
        varied: what tells this case from the others, heading with its unit -> value.
        results: heading with its unit -> lowest and highest value over the case's grid.
        failure: why the case did not run; "" if it did.
        report: relative path of the case's own report, or "".
    """

    name: str
    points: int
    unsolved: int
    checked: int = 0
    differing: int = 0
    largest_gap: float | None = None
    varied: Mapping[str, object] = field(default_factory=dict)
    results: Mapping[str, tuple[float, float]] = field(default_factory=dict)
    failure: str = ""
    report: str = ""

    @property
    def sound(self) -> bool:
        return not (self.failure or self.unsolved or self.differing)


def study_results_html(results: StudyResults) -> str:
    """The report of a finished study, from what `gibbsmin.open_study` gives."""
    summary, manifest = results.summary, results.manifest
    units = {str(name): each for data in results.datasets.values() for name, each in data.data_vars.items()}
    spans = [
        column.removesuffix(_LOWEST)
        for column in map(str, summary.columns)
        if column.endswith(_LOWEST) and column.removesuffix(_LOWEST) + _HIGHEST in summary.columns
    ]
    cases = []
    for row in summary.to_dict("records"):
        shown = {}
        for name in spans:
            unit, factor = unit_shown(units[name]) if name in units else ("", 1.0)
            low, high = row[name + _LOWEST], row[name + _HIGHEST]
            heading = f"{name.replace('_', ' ')}, {unit}" if unit else name.replace("_", " ")
            if low is not None and high is not None:
                shown[heading] = (float(low) * factor, float(high) * factor)
        gap = row["largest gap per mol of gas"]
        cases.append(
            StudyCase(
                name=str(row["case"]),
                points=int(row["points"]),
                unsolved=int(row["unsolved points"]),
                checked=int(row["checked points"]),
                differing=int(row["differing"]),
                largest_gap=None if gap is None or math.isnan(gap) else float(gap),
                varied={name: row[name] for name in results.quantity_columns},
                results=shown,
                failure=str(row["failure"] or ""),
            )
        )
    settings = {
        "program": f"{manifest['program']} {manifest['version']}",
        **{
            f"species data, SHA-256 ({name})": each for name, each in manifest["species data SHA-256"].items()
        },
        **{str(name): value for name, value in manifest["settings"].items()},
    }
    return study_report_html(str(manifest["title"]), cases, settings=settings)


def study_report_html(
    title: str, cases: Sequence[StudyCase], *, settings: Mapping[str, object] | None = None
) -> str:
    """The report of a study as one self-contained HTML page without scripts.

    Args:
        title: of the study.
        cases: in the order of the study.
        settings: what else decided the numbers (version, digests), for the record.
    """
    failed = [case for case in cases if case.failure]
    points = sum(case.points for case in cases)
    solved = sum(case.points - case.unsolved for case in cases if not case.failure)
    checked, differing = sum(case.checked for case in cases), sum(case.differing for case in cases)
    marks = [
        mark(not failed, f"{len(cases) - len(failed):,} of {len(cases):,} cases ran"),
        mark(solved == points, f"{solved:,} of {points:,} points solved and proved"),
        mark(
            None if not checked else differing == 0,
            f"{checked - differing:,} of {checked:,} checked points do not differ"
            if checked
            else "no cross-check",
        ),
    ]
    header = tag(
        "header",
        tag("p", "Equilibrium study", class_="kicker"),
        tag("h1", title),
        tag("ul", marks, class_="marks"),
    )
    parts: list[tuple[str, str, list[Markup | None]]] = [("cases", "Cases", [_cases(cases)])]
    odd = [case for case in cases if not case.sound]
    if odd:
        more = [f"and {len(odd) - _MOST_ODD:,} more"] if len(odd) > _MOST_ODD else []
        listed = bullets([*map(_odd, odd[:_MOST_ODD]), *more])
        parts.append(("attention", "Cases that need attention", [listed]))
    parts.append(("spread", "Spread of the results", [_spread(cases)]))
    parts.append(("cautions", "Cautions", [bullets(CAUTIONS)]))
    if settings:
        parts.append(("record", "Record", [facts(settings.items())]))
    body = [
        header,
        navigation([(name, heading) for name, heading, _ in parts]),
        tag("main", [section(*part) for part in parts], id="content"),
        tag("footer", tag("p", CAUTION)),
    ]
    return page(title, body)


def _cases(cases: Sequence[StudyCase]) -> Markup:
    varied = list(dict.fromkeys(heading for case in cases for heading in case.varied))
    headings = list(dict.fromkeys(heading for case in cases for heading in case.results))
    rows = [
        [
            tag("a", case.name, href=case.report) if case.report else case.name,
            *(_value(case.varied.get(heading)) for heading in varied),
            f"{case.points:,}",
            "did not run" if case.failure else f"{case.unsolved:,}",
            f"{case.differing:,} of {case.checked:,}" if case.checked else "–",
            "–" if case.largest_gap is None else number(case.largest_gap, 2),
            *(_span(case.results.get(heading)) for heading in headings),
        ]
        for case in cases[:_MOST_LISTED]
    ]
    evidence = ["points", "unsolved", "differ in cross-check", "largest gap per mol"]
    columns = ["case", *varied, *evidence, *map(pretty_words, headings)]
    if len(cases) > _MOST_LISTED:
        caption = f"The first {_MOST_LISTED:,} of {len(cases):,} cases; summary.parquet holds all"
    else:
        caption = f"All {len(cases):,} cases"
    return table(caption, columns, rows, class_="long" if len(cases) > _LONG else "")


def _value(value: object) -> str:
    if value is None:
        return "–"
    return number(value, 6) if isinstance(value, float | int) else str(value)


def _span(ends: tuple[float, float] | None) -> str:
    if ends is None or not all(map(math.isfinite, ends)):
        return "–"
    low, high = map(number, ends)
    return low if low == high else f"{low} to {high}"


def _odd(case: StudyCase) -> Markup:
    reasons = [
        case.failure,
        f"{case.unsolved:,} points not solved" if case.unsolved else "",
        f"{case.differing:,} points differ in the cross-check" if case.differing else "",
    ]
    return joined((tag("strong", case.name), ": ", "; ".join(filter(None, reasons))))


def _spread(cases: Sequence[StudyCase]) -> Markup:
    rows = []
    for heading in dict.fromkeys(heading for case in cases for heading in case.results):
        known = [(*case.results[heading], case.name) for case in cases if heading in case.results]
        known = [each for each in known if math.isfinite(each[0]) and math.isfinite(each[1])]
        if known:
            low, _, least = min(known)
            _, high, most = max(known, key=lambda each: each[1])
            strip = _strip([each[:2] for each in known], low, high, f"{heading} over {len(known)} cases")
            rows.append([pretty_words(heading), number(low), least, number(high), most, strip])
    if not rows:
        return tag("p", "No case has results beside its composition.")
    return table(
        "Lowest and highest value of each result over the cases; a line for each case spans its own grid",
        ["result", "lowest", "in case", "highest", "in case", "cases, in their order"],
        rows,
        words=(2, 4, 5),
    )


def _strip(ends: Sequence[tuple[float, float]], low: float, high: float, words: str) -> Markup:
    """A small picture: for each case, from left to right, an upright line from its lowest to its highest value."""
    width, height, edge = 260, 34, 2
    step = (width - 2 * edge) / len(ends)
    scale = (height - 2 * edge) / ((high - low) or 1.0)
    lines = []
    for position, (first, last) in enumerate(ends):
        x = edge + (position + 0.5) * step
        top, bottom = height - edge - (last - low) * scale, height - edge - (first - low) * scale
        lines.append(f"M{x:.1f} {bottom + 0.6:.1f}V{top - 0.6:.1f}")
    path = tag("path", d="".join(lines), stroke_width=f"{max(0.7, min(6.0, 0.7 * step)):.1f}")
    return tag("svg", tag("title", words), path, viewBox=f"0 0 {width} {height}", role="img", class_="strip")
