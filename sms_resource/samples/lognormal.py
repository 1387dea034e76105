"""Small lognormal sets: Sichel's estimator of the mean and Land's exact limits, beside the plain mean."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from sms_resource.findings import Findings
from sms_resource.samples.intervals import names, numbers

Floats = NDArray[np.float64]


def sichel_factor(variance: float, count: int) -> float:
    """Sichel's gamma_n(V): what multiplies the geometric mean.

    Parameters
    ----------
    variance : float
        V, variance of the natural logarithms with divisor n.
    count : int
        n, at least 2.

    Notes
    -----
    1 + V/2 + sum over r >= 2 of (n-1)^(r-1) V^r / (2^r r! (n+1)(n+3)...(n+2r-3)); Sichel (1966), Symposium on
    Mathematical Statistics and Computer Applications in Ore Valuation, 95-109. For n = 2 it is cosh(sqrt V).
    """
    if count < 2 or not variance >= 0:
        raise ValueError(f"count must be at least 2 and variance not negative, not {count} and {variance}")
    term = total = 1.0
    for r in range(1, 1000):
        # each term is the one before it times V / (2 r), (n - 1) / (n + 2 r - 3) from the second on
        term *= variance / (2.0 * r) * (1.0 if r == 1 else (count - 1.0) / (count + 2.0 * r - 3.0))
        total += term
        if term < 1e-16 * total:
            break
    return total


def sichel(values: ArrayLike) -> float:
    """Sichel's t estimator of the mean of a lognormal population; NaN with fewer than 2 positive values."""
    logs = _logs(values)
    if len(logs) < 2:
        return np.nan
    return float(np.exp(logs.mean()) * sichel_factor(float(logs.var()), len(logs)))


def land_limits(values: ArrayLike, confidence: float = 0.90) -> tuple[float, float]:
    """Land's exact confidence limits of the mean of a lognormal population.

    Parameters
    ----------
    values : array-like, shape (n,)
    confidence : float
        Of the two-sided interval: 0.90 gives the one-sided 95 % limits.

    Returns
    -------
    lower, upper : float
        NaN with fewer than 3 positive values; upper may be infinite for a few scattered ones.

    Notes
    -----
    Land (1971), Annals of Mathematical Statistics 42, 1187-1205. With theta the logarithm of the mean, the logarithms
    minus theta have the natural parameter -1/2 for their sum; given the sum of their squares, the distribution of their
    mean holds no other parameter, and its tail is inverted for theta.
    """
    if not 0.0 < confidence < 1.0:
        raise ValueError(f"confidence must lie between 0 and 1, not {confidence}")
    logs = _logs(values)
    if len(logs) < 3 or np.ptp(logs) == 0:
        return np.nan, np.nan
    tail = (1.0 - confidence) / 2.0
    return (
        _limit(float(logs.mean()), float(logs.std(ddof=1)), len(logs), 1.0 - tail),
        _limit(float(logs.mean()), float(logs.std(ddof=1)), len(logs), tail),
    )


def land_factor(sd: float, count: int, probability: float) -> float:
    """Land's H for a one-sided limit at ``probability``: limit = exp(mean + sd^2/2 + sd H / sqrt(n - 1))."""
    limit = _limit(0.0, sd, count, 1.0 - probability)
    return (np.log(limit) - sd**2 / 2.0) * np.sqrt(count - 1.0) / sd


def lognormal_table(
    composites: pd.DataFrame, metals: Sequence[str], *, confidence: float = 0.90
) -> pd.DataFrame:
    """Plain mean beside Sichel's estimator and Land's limits, by domain and metal.

    Returns
    -------
    DataFrame
        domain, metal, n, mean, sichel, land_low, land_high, log_sd, left_out (values that are not positive), shapiro_p
        (Shapiro-Wilk on the logarithms: small means not lognormal, and then none of this holds).
    """
    from scipy.stats import shapiro

    rows = []
    domain = names(composites["domain"])
    for name in sorted(set(domain)):
        for metal in metals:
            values = numbers(composites, metal)[domain == name]
            values = values[np.isfinite(values)]
            logs = _logs(values)
            low, high = land_limits(values, confidence)
            fits = 3 <= len(logs) <= 5000 and np.ptp(logs) > 0
            rows.append(
                {
                    "domain": name, "metal": metal, "n": len(values),
                    "mean": float(values.mean()) if len(values) else np.nan, "sichel": sichel(values),
                    "land_low": low, "land_high": high,
                    "log_sd": float(logs.std(ddof=1)) if len(logs) > 1 else np.nan,
                    "left_out": len(values) - len(logs),
                    "shapiro_p": float(shapiro(logs).pvalue) if fits else np.nan,
                }
            )  # fmt: skip
    return pd.DataFrame(rows)


def lognormal_findings(table: pd.DataFrame) -> Findings:
    """Name the sets from which values had to be left out because they are not positive."""
    findings = Findings()
    for row in table.loc[table["left_out"] > 0].to_dict("records"):
        findings.note(
            "lognormal-not-positive",
            f"{row['left_out']} of {row['n']} values of {row['metal']} in {row['domain']} are not positive and are left "
            "out of the lognormal statistics",
        )
    return findings


@cache
def _quadrature() -> tuple[Floats, Floats]:
    """Gauss-Legendre nodes and weights; the integrand is smooth, so 300 leave no error that counts."""
    return np.polynomial.legendre.leggauss(300)


@dataclass(frozen=True)
class _Conditional:
    """Distribution of the mean z of n logarithms less theta, given the sum of their squares: density in z."""

    count: int
    squares: float

    def tail_below(self, z: float) -> float:
        """Probability that the mean is at most ``z``, by quadrature in the angle t, z = r sin t."""
        n = self.count
        r = np.sqrt(self.squares / n)
        nodes, weights = _quadrature()

        def log_area(low: float, high: float) -> float:
            t = 0.5 * (high - low) * nodes + 0.5 * (high + low)
            with np.errstate(divide="ignore"):
                logs = (n - 2.0) * np.log(np.cos(t)) - 0.5 * n * r * np.sin(t)
            peak = logs.max()
            return float(peak + np.log(0.5 * (high - low) * (weights @ np.exp(logs - peak))))

        # with many samples the density is a spike: look only as far as it reaches
        top = float(np.arcsin(_peak_sine(n, r)))
        start, end = max(-np.pi / 2, top - 30.0 / np.sqrt(n)), min(np.pi / 2, top + 30.0 / np.sqrt(n))
        at = float(np.arcsin(np.clip(z / r, -1.0, 1.0)))
        if at <= start + 1e-12:
            return 0.0
        if at >= end - 1e-12:
            return 1.0
        below, above = log_area(start, at), log_area(at, end)
        return float(1.0 / (1.0 + np.exp(np.clip(above - below, -700, 700))))


def _peak_sine(count: int, r: float) -> float:
    """Sine of the angle at which (n - 2) ln cos t - n r sin t / 2 is greatest: a root of a quadratic."""
    b = (count - 2.0) / (0.5 * count * r)
    # (n - 2) sin t + (n r / 2) (1 - sin^2 t) = 0
    return (b - np.sqrt(b * b + 4.0)) / 2.0


def _limit(mean: float, sd: float, count: int, probability: float) -> float:
    """exp(theta) at which a mean as low as the observed one has ``probability``."""
    from scipy.optimize import brentq

    spread = (count - 1.0) * sd**2

    def excess(theta: float) -> float:
        z = mean - theta
        return _Conditional(count, spread + count * z * z).tail_below(z) - probability

    centre = mean + sd**2 / 2.0
    step = sd * (1.0 + sd) / np.sqrt(count) + 1e-12
    low = high = centre
    for _ in range(200):
        if excess(low) > 0:
            break
        low -= step
        step *= 1.5
    step = sd * (1.0 + sd) / np.sqrt(count) + 1e-12
    for _ in range(200):
        if excess(high) < 0:
            break
        high += step
        step *= 1.5
        if high > 700:
            return float("inf")
    if high > 700:
        return float("inf")
    return float(np.exp(brentq(excess, low, high, xtol=1e-12, rtol=1e-12)))


def _logs(values: ArrayLike) -> Floats:
    value = np.asarray(values, dtype=np.float64)
    return np.log(value[np.isfinite(value) & (value > 0)])
