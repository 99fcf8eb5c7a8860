"""A compact page for a study: one row a case, sortable by eye, with what each case proves about itself."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

from gibbsmin.figures.labels import number
from gibbsmin.outcome.summary import CAUTION
from gibbsmin.report.markup import Markup, bullets, facts, joined, table, tag
from gibbsmin.report.page import CAUTIONS, mark, navigation, page, section


@dataclass(frozen=True)
class StudyCase:
    """One case of a study, as its summary knows it.

    Attributes:
        name: unique in the study.
        points, unsolved: of its grid.
        checked, differing: points of the cross-check.
        largest_gap: per mol of gas [1]; None where nothing was solved.
        results: heading with its unit -> value.
        failure: why the case did not run; "" if it did.
        report: relative path of the case's own report, or "".
    """

    name: str
    points: int
    unsolved: int
    checked: int = 0
    differing: int = 0
    largest_gap: float | None = None
    results: Mapping[str, float] = field(default_factory=dict)
    failure: str = ""
    report: str = ""

    @property
    def sound(self) -> bool:
        return not (self.failure or self.unsolved or self.differing)


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
        parts.append(("attention", "Cases that need attention", [bullets(map(_odd, odd))]))
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


def _headings(cases: Sequence[StudyCase]) -> list[str]:
    return list(dict.fromkeys(heading for case in cases for heading in case.results))


def _cases(cases: Sequence[StudyCase]) -> Markup:
    headings = _headings(cases)
    rows = [
        [
            tag("a", case.name, href=case.report) if case.report else case.name,
            f"{case.points:,}",
            "did not run" if case.failure else f"{case.unsolved:,}",
            f"{case.differing:,} of {case.checked:,}" if case.checked else "–",
            "–" if case.largest_gap is None else number(case.largest_gap, 2),
            *(number(case.results[heading]) if heading in case.results else "–" for heading in headings),
        ]
        for case in cases
    ]
    columns = ["case", "points", "unsolved", "differ in cross-check", "largest gap per mol", *headings]
    return table(f"All {len(cases):,} cases", columns, rows)


def _odd(case: StudyCase) -> Markup:
    reasons = [
        case.failure,
        f"{case.unsolved:,} points not solved" if case.unsolved else "",
        f"{case.differing:,} points differ in the cross-check" if case.differing else "",
    ]
    return joined((tag("strong", case.name), ": ", "; ".join(filter(None, reasons))))


def _spread(cases: Sequence[StudyCase]) -> Markup:
    rows = []
    for heading in _headings(cases):
        known = sorted((case.results[heading], case.name) for case in cases if heading in case.results)
        (low, least), (high, most) = known[0], known[-1]
        rows.append([heading, number(low), least, number(high), most])
    if not rows:
        return tag("p", "The study asks for no results beside the composition.")
    return table(
        "Lowest and highest value of each result over the cases",
        ["result", "lowest", "in case", "highest", "in case"],
        rows,
        words=(2, 4),
    )
