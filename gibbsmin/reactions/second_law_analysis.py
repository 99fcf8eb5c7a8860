"""Reaction enthalpy and entropy from the temperature dependence of measured K alone (second law).

    ln K = a + b (1/T - x_m),   x_m the weighted mean of 1/T:   Delta H = -R b at T_m = 1/x_m,   Delta S = R (a - b x_m)

Centring makes a and b uncorrelated: a is ln K at the middle of the data, which they know well; the intercept at
1/T = 0 is far outside, and that is why Delta S is uncertain and goes hand in hand with Delta H. Whether the data
themselves ask for curvature is tested with a constant Delta Cp as third term:

    ln K = a + b (1/T - x_m) + c (T_m/T - 1 - ln(T_m/T)),   c = Delta Cp / R
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gibbsmin.constants import GAS_CONSTANT
from gibbsmin.reactions.least_squares import CONFIDENCE, Fit, fit, improvement_probability
from gibbsmin.reactions.measured import MeasuredConstants

Array = NDArray[np.float64]

BOOTSTRAP_REPEATS = 2000
SEED = 20_260_301
OUTLIER = 0.05
"""Chance, over all values of a data set (Bonferroni), below which a residual is called an outlier."""


@dataclass(frozen=True)
class Estimate:
    """A value with its standard uncertainty and 95 % interval, all in one unit."""

    value: float
    standard_error: float
    lower: float
    upper: float

    def __str__(self) -> str:
        return f"{self.value:.5g} +- {self.standard_error:.2g} ({self.lower:.5g} to {self.upper:.5g})"


@dataclass(frozen=True)
class Curvature:
    """Whether the data ask for Delta Cp.

    Attributes:
        heat_capacity: Delta Cp [J/(mol K)].
        probability: of such an improvement by chance (F-test).
        criterion_change: AICc of the curved model less that of the straight one; negative favours the curve. NaN
            where there are too few values.
    """

    heat_capacity: Estimate
    probability: float
    criterion_change: float

    @property
    def demanded(self) -> bool:
        """Both tests speak for curvature."""
        return bool(self.probability < 1 - CONFIDENCE and self.criterion_change < 0)

    @property
    def verdict(self) -> str:
        if self.demanded:
            return "the data demand curvature: Delta H changes with temperature over their range"
        if self.probability < 1 - CONFIDENCE:
            return "the F-test speaks for curvature, AICc does not or cannot; take more values"
        return "the data do not demand curvature; a straight line is as much as they carry"


@dataclass(frozen=True)
class Residual:
    """One value against the straight line."""

    label: str
    temperature: float
    residual: float
    studentised: float
    leverage: float
    cooks_distance: float
    enthalpy_without: float
    outlier: bool
    influential: bool


@dataclass(frozen=True)
class SecondLaw:
    """Second-law analysis of one data set.

    Attributes:
        mean_temperature: T_m [K].
        enthalpy: J/mol at T_m. entropy: J/(mol K) at T_m and 1 bar. correlation: between the two.
        ln_K_mean: ln K at T_m.
        intercept: ln K at 1/T = 0, which is Delta S / R.
        distance: how far 1/T = 0 lies from the middle of the data, in widths of their range of 1/T.
        fit: the straight line, parameters a and b.
        curvature: None with fewer than four values.
        residuals: one for each value.
        bootstrap_enthalpy, bootstrap_entropy: 95 % intervals by resampling residuals.
    """

    data: MeasuredConstants
    mean_temperature: float
    enthalpy: Estimate
    entropy: Estimate
    correlation: float
    ln_K_mean: Estimate  # noqa: N815
    intercept: Estimate
    distance: float
    fit: Fit
    curvature: Curvature | None
    residuals: tuple[Residual, ...]
    bootstrap_enthalpy: tuple[float, float]
    bootstrap_entropy: tuple[float, float]

    def ln_K(self, T: Array) -> Array:  # noqa: N802
        """The fitted straight line, at 1 bar."""
        a, b = self.fit.parameters
        return np.asarray(a + b * (1 / np.asarray(T) - 1 / self.mean_temperature))

    def half_width(self, inverse_T: Array) -> Array:
        """Half of the 95 % band of the line at 1/T [1/K], 0 included."""
        u = np.asarray(inverse_T) - 1 / self.mean_temperature
        C = self.fit.covariance
        variance = C[0, 0] + 2 * u * C[0, 1] + u**2 * C[1, 1]
        return np.asarray(self.fit.quantile() * np.sqrt(variance))


def second_law(data: MeasuredConstants, *, bootstrap: int = BOOTSTRAP_REPEATS, seed: int = SEED) -> SecondLaw:
    """Delta H and Delta S at the mean temperature of the data, with all that is needed to judge them.

    Args:
        data: at least three values at two temperatures.
        bootstrap: number of resamplings, 0 for none (NaN intervals).
        seed: of the resampling; the same data then give the same intervals.
    """
    x = 1 / data.temperature
    weight = np.ones_like(x) if data.uncertainty is None else data.uncertainty**-2.0
    x_m = float((weight * x).sum() / weight.sum())
    u = x - x_m
    straight = fit(np.stack([np.ones_like(u), u], axis=1), data.ln_K, data.uncertainty)
    (a, b), C = straight.parameters, straight.covariance
    variance = float(C[0, 0] + x_m**2 * C[1, 1] - 2 * x_m * C[0, 1])
    covariance = float(x_m * C[1, 1] - C[0, 1])  # of -b and a - b x_m
    q = straight.quantile()
    intercept = estimate(float(a - b * x_m), np.sqrt(variance), q)
    low_high = _bootstrap(data, u, x_m, straight, bootstrap, seed)
    return SecondLaw(
        data=data,
        mean_temperature=1 / x_m,
        enthalpy=estimate(float(-b) * GAS_CONSTANT, np.sqrt(C[1, 1]) * GAS_CONSTANT, q),
        entropy=estimate(intercept.value * GAS_CONSTANT, np.sqrt(variance) * GAS_CONSTANT, q),
        correlation=covariance / float(np.sqrt(C[1, 1] * variance)) if C[1, 1] > 0 else float("nan"),
        ln_K_mean=estimate(float(a), np.sqrt(C[0, 0]), q),
        intercept=intercept,
        distance=x_m / float(np.ptp(x)),
        fit=straight,
        curvature=_curvature(data, u, x_m, straight),
        residuals=_residuals(data, u, straight),
        bootstrap_enthalpy=low_high[0],
        bootstrap_entropy=low_high[1],
    )


def estimate(value: float, error: float, quantile: float) -> Estimate:
    """A value with its interval of `quantile` standard errors on either side."""
    return Estimate(value, float(error), value - quantile * float(error), value + quantile * float(error))


def _curvature(data: MeasuredConstants, u: Array, x_m: float, straight: Fit) -> Curvature | None:
    if len(data) < 4 or len(np.unique(data.temperature)) < 3:
        return None
    ratio = 1 / (data.temperature * x_m)
    matrix = np.stack([np.ones_like(u), u, ratio - 1 - np.log(ratio)], axis=1)
    try:
        curved = fit(matrix, data.ln_K, data.uncertainty)
    except ValueError:  # temperatures too close together to tell a curve from a line
        return None
    c, error = float(curved.parameters[2]), float(curved.standard_errors[2])
    return Curvature(
        estimate(c * GAS_CONSTANT, error * GAS_CONSTANT, curved.quantile()),
        improvement_probability(straight, curved),
        curved.corrected_information_criterion() - straight.corrected_information_criterion(),
    )


def _residuals(data: MeasuredConstants, u: Array, straight: Fit) -> tuple[Residual, ...]:
    from scipy import stats

    n = len(data)
    studentised, cook = straight.studentised(), straight.cooks_distance()
    left = straight.degrees_of_freedom - 1
    limit = float(stats.t.isf(OUTLIER / (2 * n), left)) if left >= 1 else np.inf
    # Effect of leaving one value out, in closed form (Belsley, Kuh & Welsch, eq. 2.1).
    weight = np.ones(n) if data.uncertainty is None else 1 / data.uncertainty
    slope_part = u * weight / ((u * weight) ** 2).sum()
    with np.errstate(divide="ignore", invalid="ignore"):
        without = straight.parameters[1] - slope_part * straight.scaled / (1 - straight.leverage)
    return tuple(
        Residual(
            label=data.labels[i],
            temperature=float(data.temperature[i]),
            residual=float(straight.residuals[i]),
            studentised=float(studentised[i]),
            leverage=float(straight.leverage[i]),
            cooks_distance=float(cook[i]),
            enthalpy_without=float(-without[i]) * GAS_CONSTANT,
            outlier=bool(abs(studentised[i]) > limit),
            influential=bool(cook[i] > 4 / n),
        )
        for i in range(n)
    )


def _bootstrap(
    data: MeasuredConstants, u: Array, x_m: float, straight: Fit, repeats: int, seed: int
) -> tuple[tuple[float, float], tuple[float, float]]:
    """95 % intervals of Delta H and Delta S by resampling residuals, each freed of its leverage.

    Residuals rather than values are resampled: temperatures are chosen by the experimenter, and a resampled set of
    values may have only one of them.
    """
    nothing = (float("nan"), float("nan"))
    if repeats < 1 or straight.degrees_of_freedom < 1:
        return nothing, nothing
    n = len(data)
    spread = np.ones(n) if data.uncertainty is None else data.uncertainty
    with np.errstate(divide="ignore", invalid="ignore"):
        freed = np.where(straight.leverage < 1 - 1e-9, straight.scaled / np.sqrt(1 - straight.leverage), 0.0)
    freed = freed - freed.mean()
    chosen = np.random.default_rng(seed).integers(0, n, size=(repeats, n))
    values = data.ln_K - straight.residuals + freed[chosen] * spread
    weight = spread**-2.0
    slope = (weight * u * values).sum(axis=1) / (weight * u**2).sum()
    level = (weight * values).sum(axis=1) / weight.sum()
    tails = [100 * (1 - CONFIDENCE) / 2, 100 * (1 + CONFIDENCE) / 2]
    H = np.percentile(-slope * GAS_CONSTANT, tails)
    S = np.percentile((level - slope * x_m) * GAS_CONSTANT, tails)
    return (float(H[0]), float(H[1])), (float(S[0]), float(S[1]))
