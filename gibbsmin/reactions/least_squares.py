"""Weighted linear least squares with what a careful reading of a small data set needs.

The problem is min sum ((y - X b)/s)^2, solved by a QR factorisation of the scaled matrix. Covariances, leverages,
studentised residuals and Cook's distances: Belsley, Kuh & Welsch, *Regression Diagnostics* (1980), ch. 2; small-sample
information criterion: Hurvich & Tsai, Biometrika 76 (1989) 297; distributions from scipy.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

CONFIDENCE = 0.95
SCATTER_DOUBTED = 0.05
"""Probability of a larger chi squared below which stated uncertainties are taken to be too small."""


@dataclass(frozen=True)
class Fit:
    """A weighted least-squares fit of n values by m parameters.

    Attributes:
        parameters: (m,). covariance: (m, m).
        residuals: (n,) y - X b. scaled: (n,) the same over the stated or equal uncertainties.
        leverage: (n,) diagonal of the hat matrix.
        degrees_of_freedom: n - m.
        chi_squared: sum of the squared scaled residuals.
        stated: whether the uncertainties were given.
        scatter: factor on the uncertainties that the covariance holds: the residual standard deviation where none
            were given; 1 where they were and the scatter agrees; the Birge ratio where it is larger.
    """

    parameters: Array
    covariance: Array
    residuals: Array
    scaled: Array
    leverage: Array
    degrees_of_freedom: int
    chi_squared: float
    stated: bool
    scatter: float

    @property
    def standard_errors(self) -> Array:
        """(m,) standard uncertainties of the parameters."""
        return np.sqrt(np.diag(self.covariance))

    @property
    def residual_deviation(self) -> float:
        """sqrt(chi squared / degrees of freedom); NaN without degrees of freedom."""
        return (
            float(np.sqrt(self.chi_squared / self.degrees_of_freedom)) if self.degrees_of_freedom else np.nan
        )

    @property
    def scatter_probability(self) -> float:
        """Chance of a larger chi squared if the stated uncertainties are right; NaN where none were."""
        if not self.stated or not self.degrees_of_freedom:
            return float("nan")
        from scipy import stats

        return float(stats.chi2.sf(self.chi_squared, self.degrees_of_freedom))

    @property
    def enlarged(self) -> bool:
        """Whether stated uncertainties were enlarged to agree with the scatter."""
        return self.stated and self.scatter > 1

    def quantile(self, confidence: float = CONFIDENCE) -> float:
        """Standard errors in half an interval: of the normal distribution where the uncertainties were stated and
        agree with the scatter, else of Student's."""
        from scipy import stats

        tail = (1 + confidence) / 2
        if self.stated and not self.enlarged:
            return float(stats.norm.ppf(tail))
        return float(stats.t.ppf(tail, self.degrees_of_freedom))

    def zero_probability(self, parameter: int) -> float:
        """Chance of an estimate this far from zero if the parameter is zero (two-sided)."""
        from scipy import stats

        error = float(self.standard_errors[parameter])
        if error == 0.0:
            return float(self.parameters[parameter] == 0.0)
        ratio = abs(float(self.parameters[parameter])) / error
        if self.stated and not self.enlarged:
            return float(2 * stats.norm.sf(ratio))
        return float(2 * stats.t.sf(ratio, self.degrees_of_freedom))

    def studentised(self) -> Array:
        """(n,) externally studentised residuals; NaN where a point is fitted by itself alone or too few remain."""
        left = self.degrees_of_freedom - 1
        if left < 1:
            return np.full(len(self.scaled), np.nan)
        with np.errstate(divide="ignore", invalid="ignore"):
            own = self.scaled**2 / (1 - self.leverage)
            without = np.sqrt(np.maximum(self.chi_squared - own, 0.0) / left)
            return np.where(
                self.leverage < 1 - 1e-12, self.scaled / (without * np.sqrt(1 - self.leverage)), np.nan
            )

    def cooks_distance(self) -> Array:
        """(n,) Cook's distances."""
        m = len(self.parameters)
        variance = self.chi_squared / max(self.degrees_of_freedom, 1)
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(self.scaled**2 / (m * variance) * self.leverage / (1 - self.leverage) ** 2)

    def corrected_information_criterion(self) -> float:
        """AICc up to a constant that models of the same values share; NaN where too few values carry it."""
        n, k = len(self.residuals), len(self.parameters) + 1  # the variance counts as a parameter
        if n - k - 1 <= 0 or self.chi_squared <= 0:
            return float("nan")
        return float(n * np.log(self.chi_squared / n) + 2 * k + 2 * k * (k + 1) / (n - k - 1))


def fit(matrix: Array, values: Array, uncertainty: Array | None = None) -> Fit:
    """Fit `values` (n,) by `matrix` (n, m) @ parameters.

    Args:
        uncertainty: (n,) standard uncertainties; without them all values count alike and the covariance comes from the
            scatter, which takes at least m + 1 values.

    Raises:
        ValueError: fewer values than parameters, or columns that depend on each other.
    """
    n, m = matrix.shape
    stated = uncertainty is not None
    if n < m + (0 if stated else 1):
        raise ValueError(f"{n} values are too few for {m} parameters")
    weight = 1 / uncertainty if uncertainty is not None else np.ones(n)
    scaled_matrix = matrix * weight[:, None]
    size = np.sqrt((scaled_matrix**2).sum(axis=0))
    if not (size > 0).all():
        raise ValueError("a column of the matrix is zero")
    q, r = np.linalg.qr(scaled_matrix / size)
    if np.abs(np.diag(r)).min() < 1e-13:
        raise ValueError("the columns of the matrix depend on each other")
    target = values * weight
    parameters = np.linalg.solve(r, q.T @ target)
    # One step of refinement: the residual of an ill-conditioned problem is known better than its solution.
    parameters = parameters + np.linalg.solve(r, q.T @ (target - (scaled_matrix / size) @ parameters))
    parameters = parameters / size
    inverse = np.linalg.inv(r) / size[:, None]
    scaled = target - scaled_matrix @ parameters
    chi_squared = float(scaled @ scaled)
    freedom = n - m
    scatter = _scatter(chi_squared, freedom, stated)
    return Fit(
        parameters,
        np.asarray(inverse @ inverse.T * scatter**2),
        values - matrix @ parameters,
        scaled,
        np.asarray((q**2).sum(axis=1)),
        freedom,
        chi_squared,
        stated,
        scatter,
    )


def improvement_probability(simple: Fit, larger: Fit) -> float:
    """F-test of nested models: chance of such an improvement if the simple one is right; NaN if untestable."""
    from scipy import stats

    extra = simple.degrees_of_freedom - larger.degrees_of_freedom
    if larger.degrees_of_freedom < 1 or larger.chi_squared <= 0:
        return float("nan")
    ratio = (
        (simple.chi_squared - larger.chi_squared) / extra / (larger.chi_squared / larger.degrees_of_freedom)
    )
    return float(stats.f.sf(ratio, extra, larger.degrees_of_freedom))


def _scatter(chi_squared: float, freedom: int, stated: bool) -> float:
    if freedom == 0:
        return 1.0
    ratio = float(np.sqrt(chi_squared / freedom))
    if not stated:
        return ratio
    from scipy import stats

    return max(ratio, 1.0) if stats.chi2.sf(chi_squared, freedom) < SCATTER_DOUBTED else 1.0
