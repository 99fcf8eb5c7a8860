"""An outcome in a few lines, as text and as HTML."""

from __future__ import annotations

import html
import itertools
import textwrap
from collections.abc import Iterator, Sequence
from typing import TYPE_CHECKING

import numpy as np

from gibbsmin.outcome.composition import amount_at_equilibrium
from gibbsmin.reactions.text import TEMPERATURE_UNITS
from gibbsmin.species import ThermoTable

if TYPE_CHECKING:
    import xarray as xr

    from gibbsmin.comparison import CheckedPoint
    from gibbsmin.outcome import Outcome
    from gibbsmin.scenario import Scenario
    from gibbsmin.scenario.model import Axis
    from gibbsmin.species import Species

_SPECIES_SHOWN = 6  # in lists of names, and of key species when the scenario names none
_MOST_ROWS = 20  # key results shown; the files hold all
_WIDTH = 100  # of the text, in columns
SHOWN_UNITS = {"1": ("", 1.0), "J mol-1": ("kJ/mol", 1e-3), "J": ("kJ", 1e-3), "W": ("kW", 1e-3)}
_MOST_POINTS = 5  # differing or unanswered points spelled out; crosscheck.csv lists all
CAUTION = (
    "Equilibrium is a limit, not a rate. It sizes no relief device, proves no atmosphere non-flammable, "
    "and says nothing of toxic traces below the accuracy of its data. Local codes and licensed practice "
    "come first."
)

# Inherits colours and type from the notebook, light or dark; only lines and space are its own.
_STYLE = (
    "<style>.gibbsmin-outcome{max-width:62em;line-height:1.45;font-variant-numeric:tabular-nums}"
    ".gibbsmin-outcome h3{margin:.2em 0 .3em}"
    ".gibbsmin-outcome .verdict span{display:inline-block;border:1px solid #8888;border-radius:1em;"
    "padding:0 .8em;margin:0 .5em .4em 0}"
    ".gibbsmin-outcome .verdict .warning{font-weight:bold;border:2px solid #d55e00}"
    ".gibbsmin-outcome table{border-collapse:collapse;margin:.4em 0}"
    ".gibbsmin-outcome td,.gibbsmin-outcome th{padding:.15em .9em .15em 0;text-align:right;"
    "border-bottom:1px solid #8884;background:none}"
    ".gibbsmin-outcome td:last-child,.gibbsmin-outcome th:last-child{text-align:left}"
    ".gibbsmin-outcome td:first-child,.gibbsmin-outcome th:first-child{text-align:left}"
    ".gibbsmin-outcome ul{margin:.3em 0;padding-left:1.3em}</style>"
)


def summary_text(outcome: Outcome) -> str:
    """Plain text for a terminal; only a wide table of results exceeds 100 columns."""
    lines = [outcome.scenario.title, "", *_filled(facts(outcome))]
    heading, rows = key_table(outcome)
    widths = [max(len(row[i]) for row in (heading, *rows)) for i in range(len(heading))]
    lines.append("")
    for row in (heading, *rows):
        cells = [
            row[0].ljust(widths[0]),
            *(cell.rjust(width) for cell, width in zip(row[1:], widths[1:], strict=True)),
        ]
        lines.append("  ".join(cells).rstrip())
    if outcome.boundaries:
        lines += ["", *_filled(_boundary_lines(outcome))]
    if outcome.reactions is not None:
        from gibbsmin.outcome.reactions import summary_lines

        lines += ["", *summary_lines(outcome)]
    lines += ["", *_filled(evidence_lines(outcome)), "", *_filled([CAUTION])]
    return "\n".join(lines)


def summary_html(outcome: Outcome) -> str:
    """The same, compact, for a notebook; every text from outside is escaped."""
    heading, rows = key_table(outcome)
    head = "".join(f"<th>{html.escape(cell)}</th>" for cell in heading)
    body = "".join(
        "<tr>" + "".join(f"<td>{html.escape(cell)}</td>" for cell in row) + "</tr>" for row in rows
    )
    shown = "" if outcome.all_solved and outcome.all_confirmed else " open"
    return (
        f'{_STYLE}<div class="gibbsmin-outcome"><h3>{html.escape(outcome.scenario.title)}</h3>'
        + f'<div class="verdict">{"".join(_verdicts(outcome))}</div>'
        + f"<table><thead><tr>{head}</tr></thead><tbody>{body}</tbody></table>"
        + (_list(_boundary_lines(outcome)) if outcome.boundaries else "")
        + f"<details><summary>What was asked</summary>{_list(facts(outcome))}</details>"
        + f"<details{shown}><summary>Evidence</summary>{_list(evidence_lines(outcome))}</details>"
        + f"<p><small>{html.escape(CAUTION)}</small></p></div>"
    )


def _boundary_lines(outcome: Outcome) -> list[str]:
    from gibbsmin.boundaries.results import summary_lines

    return summary_lines(outcome.boundaries)


def _verdicts(outcome: Outcome) -> Iterator[str]:
    check = outcome.crosscheck
    solved = outcome.points - outcome.unsolved
    yield _verdict(outcome.all_solved, f"{solved} of {outcome.points} points solved and proved")
    if check.points:
        yield _verdict(
            check.all_confirmed, f"{check.confirmed} of {len(check.points)} checked points confirmed"
        )


def _verdict(good: bool, text: str) -> str:
    sign = "\N{CHECK MARK}" if good else "!"
    kind = "" if good else ' class="warning"'
    return f"<span{kind}>{sign} {html.escape(text)}</span>"


def facts(outcome: Outcome) -> list[str]:
    """What was asked: the axes, the species, and remarks."""
    scenario, dataset = outcome.scenario, outcome.dataset
    told = []
    for axis in scenario.axes:
        low, high = min(axis.display_values), max(axis.display_values)
        unit = "" if axis.display_unit == "1" else f" {axis.display_unit}"
        span = f"{low:g}{unit}" if low == high else f"{low:g} to {high:g}{unit}, {len(axis)} points"
        told.append(f"{axis.title}: {span}")
    names = ", ".join(str(name) for name in dataset["species"].values[:_SPECIES_SHOWN])
    more = dataset.sizes["species"] - _SPECIES_SHOWN
    told.append(f"{dataset.sizes['species']} gases: {names}" + (f" and {more} more" if more > 0 else ""))
    told += _phase_facts(scenario)
    told += list(scenario.remarks)
    return told


def _phase_facts(scenario: Scenario) -> list[str]:
    """Which condensed phases may form and which are held back; all of them are named, for each may matter."""
    told = []
    for words, phases in (
        ("condensed phases that may form", scenario.choice.condensed),
        ("condensed phases held back", scenario.choice.held_back),
    ):
        if phases:
            told.append(f"{words}: {', '.join(each.name for each in phases)}")
            told += [text for each in phases if (text := _forms(each, scenario.temperature))]
    return told


def _forms(phase: Species, temperature: Axis) -> str:
    """Where on the grid a phase changes its form, or "" if it does not."""
    table = ThermoTable((phase,))
    low, high = min(temperature.values), max(temperature.values)
    inside = [form.lower for form in phase.forms[1:] if low < form.lower < high]
    if not inside:
        return ""
    edges = [low, *inside, high]
    middles = [(a + b) / 2 for a, b in itertools.pairwise(edges)]
    words = [form.description for T in middles if (form := table.form_at(T, 0)) is not None]
    changes = [f"{word} from {T:g} K" for word, T in zip(words[1:], inside, strict=False)]
    return f"{phase.name} changes its form: {', '.join([words[0], *changes])}" if changes else ""


def key_table(outcome: Outcome) -> tuple[list[str], list[list[str]]]:
    """Heading and rows: smallest and largest value over the grid, and where the largest is."""
    dataset = outcome.dataset
    rows = [_row(name, array, outcome) for name, array in key_results(outcome)]
    heading = ["result", "unit", "lowest", "highest", "highest at"]
    return heading, rows[:_MOST_ROWS] if dataset["status"].size else []


def key_results(outcome: Outcome) -> Iterator[tuple[str, xr.DataArray]]:
    """Name and values of what a reader looks for first: key species, wanted results, heat duty."""
    dataset, wanted = outcome.dataset, outcome.scenario.results
    for name in wanted.key_species or _most_abundant(dataset):
        yield f"{name}, mole fraction", dataset["mole_fraction"].sel(species=name)
    if "phase" in dataset.coords:
        yield from _phase_results(dataset)
    for result, array in dataset.data_vars.items():
        if "description" in array.attrs:  # what the scenario asks for by name has one
            yield str(result), array
    if "heat_duty" in dataset:
        yield "heat duty per mol of feed", dataset["heat_duty_per_feed"]
        yield "heat duty", dataset["heat_duty"]


def _phase_results(dataset: xr.Dataset) -> Iterator[tuple[str, xr.DataArray]]:
    """Amounts of the phases that form anywhere; activities of those that nowhere do."""
    for number, name in enumerate(dataset["phase"].values):
        amount = dataset["phase_amount_per_feed"].isel(phase=number, drop=True)
        if bool((amount > 0).any()):
            yield f"{name}, amount per mol of feed", amount
        else:
            activity = dataset["phase_activity"].isel(phase=number, drop=True)
            if bool((activity > 0).any()):
                yield f"{name}, activity", activity


def _most_abundant(dataset: xr.Dataset) -> list[str]:
    points = [dim for dim in dataset["mole_fraction"].dims if dim != "species"]
    largest = dataset["mole_fraction"].max(points, skipna=True).fillna(0.0).values
    order = np.argsort(-largest, kind="stable")[:_SPECIES_SHOWN]
    return [str(name) for name in dataset["species"].values[order]]


def _row(name: str, array: xr.DataArray, outcome: Outcome) -> list[str]:
    units = array.attrs.get("units", "1")
    values = array.values
    if not np.isfinite(values).any():
        return [name, units, "-", "-", "-"]
    shown, factor = SHOWN_UNITS.get(units, (units, 1.0))
    low, high = np.nanmin(values) * factor, np.nanmax(values) * factor
    if units == "K":  # a temperature, not a difference: no result that can be asked for is one
        unit = TEMPERATURE_UNITS[outcome.scenario.temperature.display_unit]
        shown, low, high = unit.symbol, (low - unit.zero) / unit.size, (high - unit.zero) / unit.size
    place = np.unravel_index(int(np.nanargmax(values)), values.shape)
    return [
        name,
        shown,
        f"{low:.4g}",
        f"{high:.4g}",
        in_words([int(position) for position in place], outcome.scenario),
    ]


def evidence_lines(outcome: Outcome) -> list[str]:
    """How far the results can be trusted: proofs, unsolved points, cross-check."""
    dataset, check, scenario = outcome.dataset, outcome.crosscheck, outcome.scenario
    solved = outcome.points - outcome.unsolved
    lines = [f"solved {solved} of {outcome.points} points"]
    if solved:
        gap = float((dataset["gap"] / amount_at_equilibrium(dataset)).max())
        balance = float(dataset["balance_residual"].max())
        lines[0] += f"; largest gap {gap:.1e} per mol of gas, largest balance error {balance:.1e}"
    lines += _unsolved(outcome)
    if "extrapolated" in dataset and bool((dataset["extrapolated"] != 0).any()):
        lines.append("data were used outside their temperature range: see the variable 'extrapolated'")
    if check.extent == "none":
        return [*lines, "cross-check: none, as asked"]
    text = f"cross-check by {check.library}, {len(check.points)} points: {check.confirmed} confirmed"
    text += f", {check.differing} differ, {check.unanswered} without an independent answer"
    if (worst := check.worst) is not None:
        text += f"; largest relative difference {worst.relative:.1e}"
        text += f" ({', '.join(filter(None, (worst.species, in_words(worst.index, scenario))))})"
    lines.append(text)
    lines += _spelled_out("differs", check.having("differs"), scenario)
    lines += _spelled_out("no independent answer", check.having("no independent answer"), scenario)
    return lines


def _unsolved(outcome: Outcome) -> list[str]:
    from gibbsmin.minimiser import Status

    codes, counts = np.unique(outcome.dataset["status"].values, return_counts=True)
    return [
        f"{count} points unsolved: {Status(int(code)).explanation}; {Status(int(code)).remedy}"
        for code, count in zip(codes, counts, strict=True)
        if code != 0
    ]


def _spelled_out(what: str, points: Sequence[CheckedPoint], scenario: Scenario) -> list[str]:
    lines = []
    for point in points[:_MOST_POINTS]:
        words = in_words(point.index, scenario)
        place = f" at {words}" if words else ""
        difference = f" by {point.relative:.1e} ({point.species})" if np.isfinite(point.relative) else ""
        lines.append(f"{what}{difference}{place}: {point.reason}")
    if len(points) > _MOST_POINTS:
        lines.append(f"and {len(points) - _MOST_POINTS} more; crosscheck.csv lists all")
    return lines


def in_words(index: Sequence[int], scenario: Scenario) -> str:
    """A point of the grid in the units of the scenario; axes of one value are left out."""
    places = []
    for axis, position in zip(scenario.axes, index, strict=True):
        if len(axis) > 1:
            value = f"{axis.display_values[position]:g}"
            bare = axis.display_unit == "1"  # a ratio needs its name, a temperature only its unit
            places.append(f"{axis.title} {value}" if bare else f"{value} {axis.display_unit}")
    return ", ".join(places)


def _filled(lines: Sequence[str]) -> list[str]:
    return [part for line in lines for part in textwrap.wrap(line, _WIDTH, subsequent_indent="  ")]


def _list(lines: Sequence[str]) -> str:
    return "<ul>" + "".join(f"<li>{html.escape(line.strip())}</li>" for line in lines) + "</ul>"
