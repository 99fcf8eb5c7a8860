"""The scenario as it was understood: feed by stream, grid, species with their data."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from gibbsmin.figures.labels import number
from gibbsmin.report.markup import (
    Markup,
    bullets,
    facts,
    joined,
    paragraphs,
    pretty_name,
    pretty_words,
    table,
    tag,
)
from gibbsmin.report.quantity_text import axis_value, state_value

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from gibbsmin.scenario.model import Axis, Scenario
    from gibbsmin.species import Species


def asked_part(scenario: Scenario) -> list[Markup | None]:
    return [
        tag("h3", "Feed"),
        _feed(scenario),
        tag("h3", "Grid"),
        _grid(scenario),
        tag("h3", "Wanted"),
        _wanted(scenario),
        joined((tag("h3", "Remarks"), bullets(scenario.remarks))) if scenario.remarks else None,
        joined((tag("h3", "Notes of the scenario"), paragraphs(scenario.notes))) if scenario.notes else None,
    ]


def _feed(scenario: Scenario) -> Markup:
    unit, factor = ("kmol/h", 1e-3) if scenario.rate else ("mol", 1.0)
    by_stream = scenario.stream_amounts()
    total = scenario.feed_amounts()
    rows: list[list[object]] = []
    for name in scenario.feed_species:
        cells = [_span(s[name] * factor) if name in s else "–" for s in by_stream.values()]
        rows.append([pretty_name(name), *cells, _span(total[name] * factor)])
    sums = [np.asarray(sum(s.values())) for s in (*by_stream.values(), total)]
    rows.append(["total", *(_span(each * factor) for each in sums)])
    streams = scenario.streams.values()
    rows.append(["temperature", *(state_value(s.temperature, "K", scenario) for s in streams), "–"])
    rows.append(["pressure", *(state_value(s.pressure, "Pa", scenario) for s in streams), "–"])
    note = [
        tag(
            "p",
            f"The amount of the stream {axis.stream} follows the axis {pretty_words(axis.title)}; its composition stays.",
        )
        for axis in scenario.further_axes
    ]
    return joined(
        [
            table(f"Feed by stream, amounts in {unit}", ["species", *by_stream, "whole feed"], rows),
            *note,
        ]
    )


def _span(values: NDArray[np.float64]) -> str:
    low, high = number(float(values.min()), 6), number(float(values.max()), 6)
    return low if low == high else f"{low} to {high}"


def _grid(scenario: Scenario) -> Markup:
    rows = [
        [
            pretty_words(axis.title),
            f"{len(axis):,}",
            axis_value(axis, 0),
            axis_value(axis, len(axis) - 1),
            _spacing(axis),
        ]
        for axis in scenario.axes
    ]
    caption = f"Axes of the grid, {scenario.points:,} points in all"
    return table(caption, ["axis", "values", "first", "last", "spacing"], rows, words=(4,))


def _spacing(axis: Axis) -> str:
    if len(axis) == 1:
        return "one value"
    return {"list": "as listed", "linear": "even", "logarithmic": "even in the logarithm"}[axis.spacing]


def _wanted(scenario: Scenario) -> Markup:
    wanted = scenario.results
    pairs: list[tuple[object, object]] = []
    if wanted.key_species:
        pairs.append(("key species", ", ".join(map(pretty_name, wanted.key_species))))
    for conversion in wanted.conversions:
        pairs.append(
            (
                pretty_words(conversion.name),
                f"1 − amount out / amount in of {pretty_name(conversion.species)}",
            )
        )
    for each in wanted.yields:
        base = pretty_name(each.reactant) if each.reactant else "the whole feed"
        of = (
            f"atoms of {each.element} in {pretty_name(each.product)} formed"
            if each.element
            else (f"{pretty_name(each.product)} formed")
        )
        pairs.append(
            (pretty_words(each.name), f"{of} per {'those in ' if each.element else ''}{base} fed, mol/mol")
        )
    for choice in wanted.selectivities:
        told = f"atoms of {choice.element} in {pretty_name(choice.product)} per those in converted "
        pairs.append((pretty_words(choice.name), told + pretty_name(choice.reactant)))
    for ratio in wanted.ratios:
        sides = (" + ".join(map(pretty_name, names)) for names in (ratio.numerator, ratio.denominator))
        pairs.append((pretty_words(ratio.name), " over ".join(sides) + ", mol/mol"))
    return facts(pairs) if pairs else tag("p", "Nothing beyond the composition.")


def species_part(scenario: Scenario) -> list[Markup | None]:
    """The species that take part, the range of their data and where these come from."""
    temperature = scenario.temperature.values
    low, high = min(temperature), max(temperature)
    outside = {s.name for s in _asked(scenario) if s.lower > low or s.upper < high}
    told = f"{_counted(scenario)}: {scenario.choice.rule}."
    verdict = (
        f"The data of all of them cover the grid's temperatures, {low:g} to {high:g} K."
        if not outside
        else f"The data of {len(outside)} of them do not cover all temperatures of the grid, {low:g} to {high:g} K; "
        "they are marked in the table."
    )
    sources = list(dict.fromkeys(_collection(each) for each in _all(scenario)))
    numbers = {source: position for position, source in enumerate(sources, start=1)}
    rows = [_species_row(each, numbers, each.name in outside, "") for each in scenario.species]
    choice = scenario.choice
    rows += [
        _species_row(each, numbers, each.name in outside, "condensed phase") for each in choice.condensed
    ]
    rows += [_species_row(each, numbers, each.name in outside, "held back") for each in choice.held_back]
    asked = {each.name for each in _asked(scenario)}
    fed_only = [each for each in scenario.feed_species.values() if each.name not in asked]
    rows += [_species_row(each, numbers, False, "feed only") for each in fed_only]
    headings = [
        "species",
        "from, K",
        "to, K",
        "ΔfH°(298.15 K), kJ/mol",
        "± 95 %, kJ/mol",
        "source of the record",
    ]
    listing = table("Species and their data", headings, rows, words=(5,), class_="long")
    left_out = scenario.choice.left_out
    return [
        tag("p", told, " ", verdict),
        tag(
            "details", tag("summary", f"All {len(rows)} species with range, uncertainty and source"), listing
        ),
        tag("h3", "Collections of data"),
        tag("ol", [tag("li", source) for source in sources], class_="sources"),
        joined(
            (
                tag("h3", "Left out by the scenario's rule"),
                bullets(f"{pretty_name(name)}: {reason}" for name, reason in left_out.items()),
            )
        )
        if left_out
        else None,
    ]


def _asked(scenario: Scenario) -> tuple[Species, ...]:
    """Gases, condensed phases, and those of which only the activity is wanted."""
    return (*scenario.species, *scenario.choice.condensed, *scenario.choice.held_back)


def _counted(scenario: Scenario) -> str:
    choice = scenario.choice
    told = f"{len(scenario.species)} gases take part"
    if choice.condensed:
        several = len(choice.condensed) > 1
        told += f", {len(choice.condensed)} pure condensed {'phases' if several else 'phase'} may form beside them"
    if choice.held_back:
        told += f"; of {len(choice.held_back)} held back only the activity is told"
    return told


def _all(scenario: Scenario) -> list[Species]:
    known = {each.name: each for each in (*_asked(scenario), *scenario.feed_species.values())}
    return list(known.values())


def _collection(species: Species) -> str:
    """The publication, without the note on the single record that some sources carry in square brackets."""
    head, bracket, _ = species.source.partition(" [")
    return head if bracket else species.source


def _species_row(species: Species, numbers: dict[str, int], outside: bool, note: str) -> list[object]:
    half_width = species.formation_enthalpy_uncertainty
    notes = ", ".join(filter(None, (note, "extrapolated or outside range" if outside else "")))
    records = "; ".join(dict.fromkeys(form.source for form in species.forms))
    return [
        joined((pretty_name(species.name), tag("small", f" ({notes})") if notes else None)),
        f"{species.lower:g}",
        f"{species.upper:g}",
        f"{species.formation_enthalpy / 1e3:.3f}".replace("-", "\N{MINUS SIGN}"),
        "–" if half_width is None else f"{half_width / 1e3:.3g}",
        f"[{numbers[_collection(species)]}] {records}",
    ]
