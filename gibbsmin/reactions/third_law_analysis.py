"""Reaction enthalpy at 298.15 K from each measured K with the entropies of the species data (third law), and how the
second and third law and the species data agree.

    Delta H(298) = -R T ln K - (Delta G(T) - Delta H(298)) of the data = Delta H(298) of the data + R T (ln K_data - ln K)

Each value gives its own Delta H(298). If they rise or fall with temperature, something is systematically wrong: the
temperatures, the measured quantity, the species involved, or the entropies.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gibbsmin.constants import GAS_CONSTANT
from gibbsmin.reactions.equation import Reaction
from gibbsmin.reactions.least_squares import CONFIDENCE, fit
from gibbsmin.reactions.measured import MeasuredConstants
from gibbsmin.reactions.second_law_analysis import Estimate, SecondLaw, estimate
from gibbsmin.reactions.standard import ReactionFunctions

Array = NDArray[np.float64]

REFERENCE = 298.15  # K
NORMAL_95 = 1.959963984540054  # standard deviations in half of a 95 % interval


@dataclass(frozen=True)
class ThirdLaw:
    """Third-law analysis of one data set.

    Attributes:
        enthalpies: Delta H(298.15 K) of each value [J/mol], (n,).
        enthalpy: their weighted mean. trend: their slope against T [J/(mol K)].
        trend_probability: chance of such a slope without any cause.
        second_law_298: Delta H(298.15 K) from the slope of ln K - ln K_data over 1/T: the second law, with the
            temperature dependence of Delta H taken from the data.
        data_enthalpy: Delta H(298.15 K) of the species data [J/mol]; its standard uncertainty is NaN where a species
            has none.
        unknown_uncertainty: species without one.
    """

    data: MeasuredConstants
    enthalpies: Array
    enthalpy: Estimate
    trend: Estimate
    trend_probability: float
    second_law_298: Estimate
    data_enthalpy: Estimate
    unknown_uncertainty: tuple[str, ...]

    @property
    def has_trend(self) -> bool:
        return self.trend_probability < 1 - CONFIDENCE

    @property
    def verdict(self) -> str:
        if not self.has_trend:
            return "no trend with temperature: the values and the entropies of the data agree"
        return (
            f"a trend of {self.trend.value:.3g} J/(mol K) with temperature: a sign of a systematic error in the "
            "values, the temperatures or the species data"
        )

    def disagreement(self, estimate: Estimate) -> float:
        """Measured less data, in combined standard uncertainties (that of the measurement alone, where the data have
        none)."""
        own = self.data_enthalpy.standard_error
        combined = np.hypot(estimate.standard_error, 0.0 if np.isnan(own) else own)
        difference = estimate.value - self.data_enthalpy.value
        return float(difference / combined) if combined > 0 else float("inf") * np.sign(difference)


def third_law(data: MeasuredConstants) -> ThirdLaw:
    """Delta H(298.15 K) value by value, its trend, and the comparison with the species data.

    Raises:
        TemperatureRangeError: a value lies outside the species data.
    """
    functions = ReactionFunctions(data.reaction)
    T = data.temperature
    at_298 = ReactionFunctions(data.reaction, extrapolate=True)
    own = float(at_298.enthalpy_R(REFERENCE)[0]) * GAS_CONSTANT
    difference = functions.ln_K(T) - data.ln_K
    enthalpies = own + GAS_CONSTANT * T * difference
    # Uncertainties of ln K, alike where none are stated, become those of Delta H times R T. Dividing by T gives values
    # of which that is already true, and leaves the fit to find the scatter where none is stated.
    per_T = enthalpies / (GAS_CONSTANT * T)
    mean = fit(1 / T[:, None], per_T, data.uncertainty)
    sloped = fit(np.stack([1 / T, 1 - T.mean() / T], axis=1), per_T, data.uncertainty)
    slope = float(sloped.parameters[1]) * GAS_CONSTANT
    slope_error = float(sloped.standard_errors[1]) * GAS_CONSTANT
    x = 1 / T
    second = fit(np.stack([np.ones_like(x), x - x.mean()], axis=1), -difference, data.uncertainty)
    uncertainty, unknown = data_uncertainty(data.reaction)
    return ThirdLaw(
        data,
        enthalpies,
        estimate(
            float(mean.parameters[0]) * GAS_CONSTANT,
            float(mean.standard_errors[0]) * GAS_CONSTANT,
            mean.quantile(),
        ),
        estimate(slope, slope_error, sloped.quantile()),
        sloped.zero_probability(1),
        estimate(
            own - float(second.parameters[1]) * GAS_CONSTANT,
            float(second.standard_errors[1]) * GAS_CONSTANT,
            second.quantile(),
        ),
        estimate(own, uncertainty, NORMAL_95),
        unknown,
    )


def data_uncertainty(reaction: Reaction) -> tuple[float, tuple[str, ...]]:
    """Standard uncertainty [J/mol] of Delta H(298.15 K) from the species records, and species that have none.

    The formation enthalpies are taken as uncorrelated. NaN where a species has no uncertainty; elements in their
    reference state are exact.
    """
    variance = 0.0
    unknown = []
    for each, nu in zip(reaction.species, reaction.coefficients, strict=True):
        half = each.formation_enthalpy_uncertainty
        if half is None and each.formation_enthalpy == 0.0:
            half = 0.0
        if half is None:
            unknown.append(each.name)
        else:
            variance += (float(nu) * half / NORMAL_95) ** 2
    return (float("nan") if unknown else float(np.sqrt(variance))), tuple(unknown)


def functions_at_mean(data: MeasuredConstants, second: SecondLaw) -> tuple[float, float]:
    """Delta H [J/mol] and Delta S [J/(mol K)] of the species data at the mean temperature of the measured ones."""
    functions = ReactionFunctions(data.reaction)
    T = second.mean_temperature
    return (
        float(functions.enthalpy_R(T)[0]) * GAS_CONSTANT,
        float(functions.entropy_R(T)[0]) * GAS_CONSTANT,
    )
