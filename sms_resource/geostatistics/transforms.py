"""Normal scores and logs, and the way back from a variogram model of transformed values."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True)
class NormalScores:
    """Step-wise transformation between values and normal scores.

    Attributes
    ----------
    values : (k,) float
        Distinct values, rising.
    probabilities : (k,) float
        Declustered share of each value; they sum to one.

    Notes
    -----
    The score of a value is the normal quantile of its middle cumulated share, so that equal values share one
    score and no sample is sent to infinity.
    """

    values: Array
    probabilities: Array

    @classmethod
    def fit(cls, values: ArrayLike, weights: ArrayLike | None = None) -> NormalScores:
        """Transformation of a weighted sample; NaN values are left out.

        Raises
        ------
        ValueError
            If no value is left, or weights are negative or all zero.
        """
        z = np.asarray(values, dtype=float)
        w = np.ones_like(z) if weights is None else np.asarray(weights, dtype=float)
        keep = ~np.isnan(z) & ~np.isnan(w)
        z, w = z[keep], w[keep]
        if z.size == 0:
            raise ValueError("values: none is left to transform")
        if np.any(w < 0.0) or not w.sum() > 0.0:
            raise ValueError("weights must not be negative, and not all zero")
        distinct, inverse = np.unique(z, return_inverse=True)
        share = np.bincount(inverse, weights=w)
        return cls(distinct[share > 0.0], share[share > 0.0] / w.sum())

    @property
    def upper_scores(self) -> Array:
        """Normal quantile of the cumulated share at the top of each step; the last is infinite."""
        from scipy.special import ndtri

        return np.append(ndtri(np.cumsum(self.probabilities)[:-1]), np.inf)

    @property
    def scores(self) -> Array:
        """Normal score of each distinct value."""
        from scipy.special import ndtri

        return ndtri(np.cumsum(self.probabilities) - 0.5 * self.probabilities)

    @property
    def mean(self) -> float:
        """Weighted mean of the values."""
        return float(self.values @ self.probabilities)

    @property
    def variance(self) -> float:
        """Weighted variance of the values."""
        return float((self.values - self.mean) ** 2 @ self.probabilities)

    def forward(self, values: ArrayLike) -> Array:
        """Scores of values, straight between the known ones; NaN stays NaN."""
        z = np.asarray(values, dtype=float)
        return np.where(np.isnan(z), np.nan, np.interp(z, self.values, self.scores))

    def backward(self, scores: ArrayLike) -> Array:
        """Values of scores, straight between the known ones and flat beyond them."""
        y = np.asarray(scores, dtype=float)
        return np.where(np.isnan(y), np.nan, np.interp(y, self.scores, self.values))

    def hermite(self, order: int = 60) -> Array:
        """Coefficients of the normalised Hermite polynomials, from 0 (the mean) to ``order``.

        They are exact for the steps: phi_p = sum over the steps of (z_i - z_(i+1)) H_(p-1)(y_i) g(y_i) / sqrt(p),
        with the sign of H_1(y) = y, so that phi_1 is above zero.

        References
        ----------
        Journel, A. G., & Huijbregts, C. J. (1978). Mining Geostatistics, chapter 6.
        """
        coefficients = np.zeros(order + 1)
        coefficients[0] = self.mean
        if len(self.values) < 2:
            return coefficients
        y = self.upper_scores[:-1]
        jumps = np.diff(self.values) * np.exp(-0.5 * y**2) / np.sqrt(2.0 * np.pi)
        before, now = np.zeros_like(y), np.ones_like(y)
        for p in range(1, order + 1):
            coefficients[p] = jumps @ now / np.sqrt(p)
            before, now = now, (y * now - np.sqrt(p - 1.0) * before) / np.sqrt(float(p))
        return coefficients


def log_covariance_ratio(log_variance: float, correlation: ArrayLike) -> Array:
    """Correlation of lognormal values where their logs have a given correlation and variance.

    Notes
    -----
    Cov Z / Var Z = (exp(s2 rho) - 1) / (exp(s2) - 1) (Journel & Huijbregts 1978).
    """
    rho = np.asarray(correlation, dtype=float)
    if log_variance <= 0.0:
        return rho
    return np.expm1(log_variance * rho) / np.expm1(log_variance)


class RawCorrelation:
    """Correlation of the values where their normal scores or logs have a given correlation.

    Parameters
    ----------
    measure : "normal_scores" | "logs"
    values, weights : (n,) float
        The samples that were transformed, without NaN.
    """

    def __init__(self, measure: str, values: Array, weights: Array) -> None:
        self._log_variance = weighted_variance(np.log(values), weights) if measure == "logs" else 0.0
        self._squares = None
        if measure == "normal_scores":
            self._squares = hermite_shares(NormalScores.fit(values, weights))

    def __call__(self, correlation: ArrayLike) -> Array:
        """Correlation of the values, of the shape of ``correlation``."""
        if self._squares is None:
            return log_covariance_ratio(self._log_variance, correlation)
        rho = np.clip(np.asarray(correlation, dtype=float), -1.0, 1.0)
        return rho[..., None] ** np.arange(1, len(self._squares) + 1) @ self._squares


def hermite_shares(scores: NormalScores, order: int = 60) -> Array:
    """Share of the variance that each Hermite polynomial carries, from 1 up; the rest counts as one more.

    Cov Z = sum phi_p^2 rho^p for scores that are normal in pairs (Matheron 1976; Journel & Huijbregts 1978).
    """
    if not scores.variance > 0.0:
        return np.array([1.0])
    squares = scores.hermite(order)[1:] ** 2 / scores.variance
    return np.append(squares, max(0.0, 1.0 - float(squares.sum())))


def weighted_variance(values: Array, weights: Array) -> float:
    """Variance about the weighted mean; rounding of equal values counts as zero."""
    mean = float(np.average(values, weights=weights))
    variance = float(np.average((values - mean) ** 2, weights=weights))
    return variance if variance > 1e-24 * max(1e-300, float(np.max(np.abs(values))) ** 2) else 0.0


def weighted_skewness(values: Array, weights: Array) -> float:
    """Coefficient of skewness with weights; zero where the values do not vary."""
    variance = weighted_variance(values, weights)
    if variance == 0.0:
        return 0.0
    mean = float(np.average(values, weights=weights))
    return float(np.average((values - mean) ** 3, weights=weights)) / variance**1.5
