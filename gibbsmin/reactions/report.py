"""All answers about reactions as one plain text for people; here the parts on K(T) and on shortcuts."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from gibbsmin.reactions.best_correlation import BestFit, fewest_terms
from gibbsmin.reactions.constant_units import ConstantUnit
from gibbsmin.reactions.measured_text import approach_text, measured_text
from gibbsmin.reactions.results import ReactionResults, ReactionSummary, ShortcutSummary
from gibbsmin.reactions.shortcut_error import Tolerance
from gibbsmin.reactions.standard import StandardFunctions, validity
from gibbsmin.reactions.text import KELVIN, TemperatureUnit, headed, table, wrapped
from gibbsmin.reactions.verdict import Place, default_place, verdict_text

MOST_ROWS = 9
"""Temperatures in a table for people; the files hold all."""

CAUTION = (
    "Equilibrium is a limit, not a rate. A reaction that may be trusted here for its equilibrium may still be too slow to "
    "reach it, and one that is neglected may be so for good reason."
)


def report_text(
    results: ReactionResults, *, unit: TemperatureUnit = KELVIN, place: Place | None = None
) -> str:
    """All answers as plain text, 100 columns wide.

    Args:
        unit: in which temperatures are shown.
        place: words for a point (feed, temperature, pressure) of the map; default its temperature and pressure.
    """
    blocks: list[str] = []
    if results.coverage is not None:
        blocks.append(headed("Reactions of the mixture", str(results.coverage)))
    for each in results.reactions:
        blocks.append(reaction_text(each, results.wanted.tolerance, unit))
    if results.shortcuts:
        blocks.append(shortcuts_text(results.shortcuts, results.wanted.tolerance, unit))
    if results.comparisons and results.full is not None:
        where = place or default_place(results.full, unit)
        tolerance = str(results.wanted.mixture_tolerance)
        blocks.append(verdict_text(results.comparisons, results.full, tolerance, unit, where))
    blocks += [measured_text(each, unit) for each in results.measured]
    if results.approaches:
        blocks.append(approach_text(results.approaches, unit))
    return "\n\n".join([*blocks, wrapped(CAUTION)])


def reaction_text(summary: ReactionSummary, tolerance: Tolerance, unit: TemperatureUnit = KELVIN) -> str:
    """Table of the functions of one reaction, its direction and validity, and its best correlations."""
    lines = [wrapped(f"{summary.direction}."), wrapped(f"Valid: {validity(summary.reaction)}."), ""]
    lines += functions_table(summary.functions, unit)
    if summary.fits:
        lines += ["", *fits_lines(summary.fits, tolerance)]
    title = summary.reaction.name
    if title != summary.reaction.equation:
        title += f": {summary.reaction.equation}"
    return headed(title, "\n".join(lines))


def functions_table(functions: StandardFunctions, unit: TemperatureUnit = KELVIN) -> list[str]:
    """Rows of T, ln K, Kp, Delta G, H, S, Cp; at most nine, evenly chosen."""
    reaction = functions.reaction
    nu = reaction.gas_change
    at = sorted({int(i) for i in np.linspace(0, len(functions.temperature) - 1, MOST_ROWS).round()})
    shown = ["K"] if not nu else [f"Kp/{ConstantUnit(base).symbol(nu)}" for base in ("bar", "atm")]
    columns = [np.exp(functions.ln_K)] if not nu else [functions.Kp("bar"), functions.Kp("atm")]
    head = [
        f"T/{unit.symbol}",
        "ln K",
        *shown,
        "Delta G kJ/mol",
        "Delta H kJ/mol",
        "Delta S J/(mol K)",
        "Delta Cp J/(mol K)",
    ]
    rows = [
        [
            unit.show(functions.temperature[i]),
            f"{functions.ln_K[i]:.5g}",
            *(f"{column[i]:.4g}" for column in columns),
            f"{functions.gibbs[i] / 1e3:.5g}",
            f"{functions.enthalpy[i] / 1e3:.5g}",
            f"{functions.entropy[i]:.5g}",
            f"{functions.heat_capacity[i]:.4g}",
        ]
        for i in at
    ]
    lines = table([head, *rows])
    pressure = functions.standard_pressure
    standard = "1 bar" if pressure == 1e5 else f"{pressure:.6g} Pa"
    more = " Some temperatures lie beyond the data." if functions.extrapolated.any() else ""
    return [*lines, f"ln K, Delta G and Delta S at a standard pressure of {standard}.{more}"]


def fits_lines(fits: Sequence[BestFit], tolerance: Tolerance) -> list[str]:
    """The best correlations, and which of them is enough."""
    lines = ["best short correlations:"]
    for each in fits:
        lines += str(each).splitlines()
    enough = fewest_terms(fits, tolerance)
    if enough is None:
        lines.append(f"None of these is within {tolerance}; narrow the window.")
    else:
        count = len(enough.correlation.coefficients)
        lines.append(f"{count} terms are enough for {tolerance}.")
    return lines


def shortcuts_text(
    shortcuts: Sequence[ShortcutSummary], tolerance: Tolerance, unit: TemperatureUnit = KELVIN
) -> str:
    """One row for each shortcut: its largest error in three measures, and the window within the tolerance."""
    rows = [
        ["shortcut", "reaction", "in ln K", "of K", "at", "in kelvin", f"within {tolerance}"],
    ]
    notes = []
    for each in shortcuts:
        errors = each.errors
        worst = int(np.nanargmax(np.abs(errors.ln_K)))
        kelvin = errors.kelvin[np.isfinite(errors.kelvin)]
        largest = f"{kelvin[np.argmax(np.abs(kelvin))]:+.2g} K" if kelvin.size else "none"
        rows.append(
            [
                each.shortcut.name,
                each.shortcut.reaction.name,
                f"{errors.ln_K[worst]:+.3f}",
                f"{errors.per_cent[worst]:+.3g} %",
                f"{unit.show(errors.temperature[worst])} {unit.symbol}",
                largest,
                "; ".join(map(unit.span, each.windows)) or "nowhere",
            ]
        )
        notes.append(f"{each.shortcut.name}: {each.shortcut.describe()}")
    lines = table(rows, left=(0, 1))
    return headed(
        "Shortcuts: largest error, and where they may be used",
        "\n".join([*lines, *(wrapped(note) for note in notes)]),
    )
