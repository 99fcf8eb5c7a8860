"""The answers about reactions as text for people: tables and sentences, no files."""

from __future__ import annotations

import textwrap
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gibbsmin.reactions.against_mixture import SEPARATOR, Comparison, FullMixture, Reason
from gibbsmin.reactions.approach import Approach
from gibbsmin.reactions.best_correlation import BestFit, fewest_terms
from gibbsmin.reactions.constant_units import ConstantUnit
from gibbsmin.reactions.results import MeasuredSummary, ReactionResults, ReactionSummary, ShortcutSummary
from gibbsmin.reactions.shortcut_error import Tolerance, Window
from gibbsmin.reactions.standard import StandardFunctions, validity
from gibbsmin.reactions.third_law_analysis import REFERENCE, functions_at_mean

Array = NDArray[np.float64]

WIDTH = 100
MOST_ROWS = 9
"""Temperatures in a table for people; the files hold all."""

CAUTION = (
    "Equilibrium is a limit, not a rate. A reaction that may be trusted here for its equilibrium may still be too slow to "
    "reach it, and one that is neglected may be so for good reason."
)
MOST_NEGLECTED = 3
WORTH_TELLING = 0.1  # change, in tolerances, below which a neglected reaction is not named


@dataclass(frozen=True)
class TemperatureUnit:
    """How temperatures are shown: shown = (T - zero) / size."""

    symbol: str = "K"
    size: float = 1.0
    zero: float = 0.0

    def show(self, T: float, digits: int = 6) -> str:
        return f"{(T - self.zero) / self.size:.{digits}g}"

    def span(self, window: Window) -> str:
        return f"{self._round(window.lower)} to {self._round(window.upper)} {self.symbol}"

    def _round(self, T: float) -> str:
        return f"{(T - self.zero) / self.size:.0f}"


KELVIN = TemperatureUnit()
CELSIUS = TemperatureUnit("degC", 1.0, 273.15)
FAHRENHEIT = TemperatureUnit("degF", 5 / 9, 273.15 - 32 * 5 / 9)
TEMPERATURE_UNITS = {each.symbol: each for each in (KELVIN, CELSIUS, FAHRENHEIT)}

Place = Callable[[tuple[int, int, int]], str]


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
        blocks.append(_headed("Reactions of the mixture", str(results.coverage)))
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
    return "\n\n".join([*blocks, _wrapped(CAUTION)])


def reaction_text(summary: ReactionSummary, tolerance: Tolerance, unit: TemperatureUnit = KELVIN) -> str:
    """Table of the functions of one reaction, its direction and validity, and its best correlations."""
    lines = [_wrapped(f"{summary.direction}."), _wrapped(f"Valid: {validity(summary.reaction)}."), ""]
    lines += functions_table(summary.functions, unit)
    if summary.fits:
        lines += ["", *fits_lines(summary.fits, tolerance)]
    title = summary.reaction.name
    if title != summary.reaction.equation:
        title += f": {summary.reaction.equation}"
    return _headed(title, "\n".join(lines))


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
    return _headed(
        "Shortcuts: largest error, and where they may be used",
        "\n".join([*lines, *(_wrapped(note) for note in notes)]),
    )


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
        _wrapped(
            f"within: part of the map within {tolerance} of the full minimisation; the next columns: part lost to each "
            "reason"
        ),
        *(_wrapped(note) for note in [*notes, *_condensed_line(full, place)]),
    ]
    return _headed("One or a few reactions against the whole mixture", "\n".join(lines))


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


def measured_text(summary: MeasuredSummary, unit: TemperatureUnit = KELVIN) -> str:
    """Second law, intercept, curvature, residuals, third law, comparison with the species data."""
    data, second, third = summary.data, summary.second, summary.third
    low, high = float(data.temperature.min()), float(data.temperature.max())
    data_H, data_S = functions_at_mean(data, second)
    fit = second.fit
    weights = "weighted by the stated uncertainties" if fit.stated else "all values alike"
    lines = [
        f"{data.reaction.equation}; {len(data)} values from {unit.show(low)} to {unit.show(high)} {unit.symbol}, "
        f"K {data.unit.in_words(data.reaction.gas_change)}, {weights}",
        "",
        f"Second law, at the mean temperature {second.mean_temperature:.1f} K (value +- standard error, 95 % interval)",
        f"  Delta H  kJ/mol     {_kilo(second.enthalpy)}   species data {data_H / 1e3:.5g}",
        f"  Delta S  J/(mol K)  {second.entropy}   species data {data_S:.5g}",
        f"  ln K at that temperature  {second.ln_K_mean}",
        f"  bootstrap, 95 %, from the scatter of the values alone: Delta H {second.bootstrap_enthalpy[0] / 1e3:.5g} to "
        f"{second.bootstrap_enthalpy[1] / 1e3:.5g} kJ/mol, Delta S {second.bootstrap_entropy[0]:.5g} to "
        f"{second.bootstrap_entropy[1]:.5g} J/(mol K)",
    ]
    if fit.enlarged:
        lines.append(
            f"  The scatter is {fit.scatter:.2g} times what the stated uncertainties allow "
            f"(chance {fit.scatter_probability:.1g}); the intervals are enlarged by that."
        )
    lines += [
        f"Intercept: 1/T = 0 lies {second.distance:.1f} times the width of the data away from their middle. ln K "
        f"extrapolated to it, which is Delta S/R, is {second.intercept}, while in the middle ln K is known to "
        f"+- {second.ln_K_mean.standard_error:.2g}. Delta H and Delta S are correlated by {second.correlation:.4f}: "
        "an error in one is an error in the other.",
        f"Curvature: {_curvature(summary)}",
        "",
        *residuals_table(summary, unit),
        "",
        f"Third law, Delta H at {REFERENCE:g} K with the entropies of the species data, kJ/mol: {_kilo(third.enthalpy)}",
        f"  trend {third.trend.value:.3g} +- {third.trend.standard_error:.2g} J/(mol K), "
        f"chance {third.trend_probability:.2g}: {third.verdict}",
        f"  second law brought to {REFERENCE:g} K with Delta Cp of the data: {_kilo(third.second_law_298)}",
        f"  species data: {_data_enthalpy(summary)}",
        f"  measured less data: {_differences(summary)}",
    ]
    return _headed(
        f"Measured K: {data.name}", "\n".join(_wrapped(line) if len(line) > WIDTH else line for line in lines)
    )


def residuals_table(summary: MeasuredSummary, unit: TemperatureUnit = KELVIN) -> list[str]:
    """Every value against the straight line, with marks for outliers and influence."""
    rows = [
        [
            "value",
            f"T/{unit.symbol}",
            "residual ln K",
            "studentised",
            "leverage",
            "Cook",
            "Delta H without",
            "",
        ]
    ]
    for each in summary.second.residuals:
        marks = [word for word, on in (("outlier", each.outlier), ("influential", each.influential)) if on]
        rows.append(
            [
                each.label,
                unit.show(each.temperature),
                f"{each.residual:+.3g}",
                f"{each.studentised:+.2f}" if np.isfinite(each.studentised) else "-",
                f"{each.leverage:.2f}",
                f"{each.cooks_distance:.2f}" if np.isfinite(each.cooks_distance) else "-",
                f"{each.enthalpy_without / 1e3:.5g}" if np.isfinite(each.enthalpy_without) else "-",
                ", ".join(marks),
            ]
        )
    return table(rows)


def approach_text(found: Sequence[Approach], unit: TemperatureUnit = KELVIN) -> str:
    """One row for each analysis and reaction."""
    rows = [
        ["sample", "reaction", f"T/{unit.symbol}", "Q/K", f"T at which K = Q/{unit.symbol}", "approach/K", ""]
    ]
    for each in found:
        error = each.approach_error
        with_error = np.isfinite(error) and error > 0
        rows.append(
            [
                each.analysis.name,
                each.reaction.name,
                unit.show(each.analysis.temperature),
                f"{each.ratio:.4g}" + (f" +- {each.ratio_error:.2g}" if each.ln_Q_error > 0 else ""),
                unit.show(each.equilibrium_temperature, 4)
                if np.isfinite(each.equilibrium_temperature)
                else "none",
                (f"{each.approach:+.1f}" + (f" +- {error:.1f}" if with_error else ""))
                if np.isfinite(each.approach)
                else "none",
                each.verdict,
            ]
        )
    note = (
        "The approach is positive where the reaction as written has not gone far enough: T less the temperature at which "
        "K = Q if it takes up heat, the other way round if it gives off heat."
    )
    return _headed("Approach to equilibrium", "\n".join([*table(rows, left=(0, 1, 6)), _wrapped(note)]))


def default_place(full: FullMixture, unit: TemperatureUnit = KELVIN) -> Place:
    """Words for a point of the map: temperature, pressure, and the number of the feed where there are several."""

    def words(index: tuple[int, int, int]) -> str:
        feed, T, p = index
        bar = float(np.exp(full.conditions.log_pressure[p]))
        text = f"{unit.show(float(full.conditions.temperature[T]))} {unit.symbol}, {bar:.4g} bar"
        return text if len(full.conditions.feed) == 1 else f"feed {feed + 1}, {text}"

    return words


def table(rows: Sequence[Sequence[str]], left: Sequence[int] = (0,)) -> list[str]:
    """Rows as aligned lines; columns in `left` are set to the left, the last one always."""
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
    last = len(widths) - 1
    return [
        "  ".join(
            cell.ljust(width) if i in left or (i == last and last > 6) else cell.rjust(width)
            for i, (cell, width) in enumerate(zip(row, widths, strict=True))
        ).rstrip()
        for row in rows
    ]


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


def _kilo(estimate: object) -> str:
    from gibbsmin.reactions.second_law_analysis import Estimate

    assert isinstance(estimate, Estimate)
    return str(
        Estimate(
            estimate.value / 1e3, estimate.standard_error / 1e3, estimate.lower / 1e3, estimate.upper / 1e3
        )
    )


def _curvature(summary: MeasuredSummary) -> str:
    curve = summary.second.curvature
    if curve is None:
        return "not to be tested with fewer than four values at three temperatures"
    criterion = (
        f"AICc changes by {curve.criterion_change:+.2g}"
        if np.isfinite(curve.criterion_change)
        else "too few values for AICc"
    )
    chance = f"F-test {curve.probability:.2g}" if np.isfinite(curve.probability) else "F-test not possible"
    return (
        f"{curve.verdict} (Delta Cp {curve.heat_capacity.value:.3g} +- {curve.heat_capacity.standard_error:.2g} "
        f"J/(mol K), {chance}, {criterion})"
    )


def _data_enthalpy(summary: MeasuredSummary) -> str:
    third = summary.third
    value = f"{third.data_enthalpy.value / 1e3:.5g}"
    if third.unknown_uncertainty:
        return f"{value}, of unknown uncertainty ({', '.join(third.unknown_uncertainty)} has none)"
    return f"{value} +- {third.data_enthalpy.standard_error / 1e3:.2g}"


def _differences(summary: MeasuredSummary) -> str:
    third = summary.third
    parts = []
    for name, each in (("third law", third.enthalpy), ("second law", third.second_law_298)):
        difference = (each.value - third.data_enthalpy.value) / 1e3
        parts.append(
            f"{name} {difference:+.3g} kJ/mol, {third.disagreement(each):+.1f} combined standard uncertainties"
        )
    return "; ".join(parts)


def _headed(title: str, body: str) -> str:
    return f"{title}\n{'-' * min(len(title), WIDTH)}\n{body}"


def _wrapped(text: str) -> str:
    indent = text[: len(text) - len(text.lstrip())]
    return "\n".join(textwrap.wrap(text, WIDTH, subsequent_indent=indent + "  ", break_long_words=False))
