"""Mean, standard deviation, lag-1 autocorrelation and a straight line, safe for large values with a small scatter.

Strategy: everything is formed from differences to the first value. The one-pass formula 'sum of squares minus
n times the mean squared' loses all digits on this trade's numbers (metre-sized geocentric coordinates with
millimetre scatter; NIST's NumAcc4 is the model of that case), so it is never used.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Summary:
    """Summary of a series: `sd` with n - 1; `lag1` None for fewer than two values or a constant series."""

    n: int
    mean: float
    sd: float | None
    lag1: float | None

    @property
    def sd_of_independent_mean(self) -> float | None:
        """s/sqrt(n), right for independent readings only (GUM 4.2.3); never used for epochs."""
        return None if self.sd is None else self.sd / math.sqrt(self.n)


def summarise(values: ArrayLike) -> Summary:
    """Mean, standard deviation (n - 1) and lag-1 autocorrelation of a series, shape (n,), n >= 1.

    lag1 = sum of products of neighbouring deviations / full sum of squares (the definition of the NIST StRD).

    Raises:
        ValueError: the series is empty or not finite.
    """
    series = np.asarray(values, dtype=np.float64)
    if series.ndim != 1 or series.size == 0 or not np.all(np.isfinite(series)):
        raise ValueError("a summary needs a series of at least one finite value")
    first = float(series[0])
    shifted = series - first
    offset = math.fsum(shifted) / series.size
    deviations = shifted - offset
    squares = math.fsum(deviations * deviations)
    lag1 = math.fsum(deviations[:-1] * deviations[1:]) / squares if squares > 0 and series.size > 1 else None
    sd = math.sqrt(squares / (series.size - 1)) if series.size > 1 else None
    return Summary(series.size, first + offset, sd, lag1)


def correlation(first: ArrayLike, second: ArrayLike) -> float:
    """Correlation coefficient of paired readings, shape (n,) each (GUM 5.2.3 and eq. (14))."""
    left, right = np.asarray(first, dtype=np.float64), np.asarray(second, dtype=np.float64)
    left, right = left - left[0], right - right[0]
    left, right = left - left.mean(), right - right.mean()
    return float(left @ right / math.sqrt(float(left @ left) * float(right @ right)))


def variance_of_mean_ar1(rho: float, n: int) -> float:
    """Variance of the mean of n values of a first-order autoregressive series of unit variance.

    [n - 2 rho - n rho^2 + 2 rho^(n+1)] / [n^2 (1 - rho)^2], the closed form of the double sum over rho^|i-j|.
    1 divided by it is the number of independent values the series is worth.
    """
    return (n - 2 * rho - n * rho**2 + 2 * rho ** (n + 1)) / (n**2 * (1 - rho) ** 2)


@dataclass(frozen=True)
class Line:
    """y = intercept + slope x with the covariance of both; `s` is the residual standard deviation."""

    intercept: float
    slope: float
    covariance: Floats  # 2 x 2, intercept first
    s: float
    dof: int

    def at(self, x: float) -> tuple[float, float]:
        """The line at x and its standard uncertainty."""
        row = np.array([1.0, x])
        return self.intercept + self.slope * x, math.sqrt(float(row @ self.covariance @ row))


def fit_line(x: ArrayLike, y: ArrayLike, correlation_matrix: ArrayLike | None = None) -> Line:
    """Straight line by (generalised) least squares, n >= 3 points.

    `correlation_matrix`, shape (n, n), is the known shape of the errors' covariance; without it the errors are
    independent. Ordinary regression of a correlated series finds a drift that is not there in 78 to 98 % of cases,
    so a drift of positions is only ever tested with the fitted matrix.
    """
    abscissa, ordinate = np.asarray(x, dtype=np.float64), np.asarray(y, dtype=np.float64)
    if abscissa.size < 3 or abscissa.size != ordinate.size:
        raise ValueError("a line with an uncertainty needs at least three pairs")
    design = np.column_stack([np.ones_like(abscissa), abscissa])
    shape = np.eye(abscissa.size) if correlation_matrix is None else np.asarray(correlation_matrix, np.float64)
    lower = np.linalg.cholesky(shape)
    white_design, white_y = np.linalg.solve(lower, design), np.linalg.solve(lower, ordinate)
    normal_inverse = np.linalg.inv(white_design.T @ white_design)
    estimate = normal_inverse @ white_design.T @ white_y
    residuals = white_y - white_design @ estimate
    dof = abscissa.size - 2
    s = math.sqrt(float(residuals @ residuals) / dof)
    return Line(float(estimate[0]), float(estimate[1]), s**2 * normal_inverse, s, dof)
