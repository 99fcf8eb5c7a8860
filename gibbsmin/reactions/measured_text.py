"""Measured K and approaches to equilibrium as text."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from gibbsmin.reactions.approach import Approach
from gibbsmin.reactions.results import MeasuredSummary
from gibbsmin.reactions.second_law_analysis import Estimate
from gibbsmin.reactions.text import KELVIN, WIDTH, TemperatureUnit, headed, table, wrapped
from gibbsmin.reactions.third_law_analysis import REFERENCE, functions_at_mean


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
    return headed(
        f"Measured K: {data.name}", "\n".join(wrapped(line) if len(line) > WIDTH else line for line in lines)
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
    return headed("Approach to equilibrium", "\n".join([*table(rows, left=(0, 1, 6)), wrapped(note)]))


# --- inner ---------------------------------------------------------------------------------------------------


def _kilo(estimate: Estimate) -> str:
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
