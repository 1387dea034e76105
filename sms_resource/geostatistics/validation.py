"""Checks of an estimate: leave one out by metal and domain, means, block variance, other estimators."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

if TYPE_CHECKING:
    import pandas as pd

Array = NDArray[np.float64]
TABLE_COLUMNS = (
    "check",
    "domain",
    "metal",
    "value",
    "reference",
    "difference_pct",
    "limit",
    "verdict",
    "figures",
)


@dataclass(frozen=True)
class ValidationLimits:
    """Where a check is flagged. None of them stands in a code; each is practice and a setting.

    Parameters
    ----------
    mean_pct : float
        Greatest difference of a block mean from the declustered mean, in % (10; 5 where drilling is close).
    swath_pct : float
        Greatest difference in a slice with enough samples, in %.
    swath_samples : int
        Slices with fewer samples are shown and not judged.
    swath_share : float
        Share of the judged slices that may pass the limit.
    mean_error_pct : float
        Greatest mean error of leave one out, in % of the mean.
    slope_low, slope_high : float
        Limits of the slope of the regression of true on estimated values.
    standardised_variance_low, standardised_variance_high : float
        Limits of the variance of standardised errors.
    block_variance_low, block_variance_high : float
        Limits of realised over theoretical variance of block estimates.
    estimator_pct : float
        Greatest difference of the mean of another estimator, in %.
    """

    mean_pct: float = 10.0
    swath_pct: float = 15.0
    swath_samples: int = 10
    swath_share: float = 0.2
    mean_error_pct: float = 5.0
    slope_low: float = 0.85
    slope_high: float = 1.15
    standardised_variance_low: float = 0.6
    standardised_variance_high: float = 1.4
    block_variance_low: float = 0.7
    block_variance_high: float = 1.3
    estimator_pct: float = 10.0


def cross_validation_summary(
    frame: pd.DataFrame, domains: ArrayLike | None = None, *, names: Mapping[Any, str] | None = None
) -> pd.DataFrame:
    """Figures of a leave-one-out table by domain and metal.

    Parameters
    ----------
    frame : DataFrame
        From :func:`leave_one_out`: index, column, true, estimate, variance, error, standardised_error.
    domains : (n,) array_like, optional
        Domain of each sample, by ``index``. All domains together come first, as "all".
    names : mapping, optional
        Name of the metal for each ``column``.

    Returns
    -------
    DataFrame
        ``domain metal count missing mean_true mean_estimate mean_error mean_error_pct mse rmse mean_standardised_error
        variance_standardised_error slope intercept correlation``. The slope is that of the regression of true on
        estimated values: 1 where estimates are free of conditional bias. ``missing`` counts samples that were not
        estimated. NaN where too few are left.
    """
    import pandas as pd

    needed = ["index", "column", "true", "estimate", "error", "standardised_error"]
    absent = [name for name in needed if name not in frame.columns]
    if absent:
        raise ValueError(f"frame has no column {', '.join(absent)}")
    labels = None if domains is None else np.asarray(domains, dtype=object)
    rows = []
    for column in frame["column"].drop_duplicates():
        part = frame[frame["column"] == column]
        metal = str((names or {}).get(column, column))
        rows.append({"domain": "all", "metal": metal, **leave_one_out_figures(part)})
        if labels is None:
            continue
        own = labels[part["index"].to_numpy()]
        for domain in sorted({str(label) for label in own}):
            chosen = part[[str(label) == domain for label in own]]
            rows.append({"domain": domain, "metal": metal, **leave_one_out_figures(chosen)})
    return pd.DataFrame(rows)


def leave_one_out_figures(part: pd.DataFrame) -> dict[str, float]:
    """Figures of one group of left-out samples; see :func:`cross_validation_summary`."""
    true = part["true"].to_numpy(dtype=float)
    estimate = part["estimate"].to_numpy(dtype=float)
    done = np.isfinite(estimate) & np.isfinite(true)
    standardised = part["standardised_error"].to_numpy(dtype=float)[done]
    standardised = standardised[np.isfinite(standardised)]
    true, estimate = true[done], estimate[done]
    error = estimate - true
    slope, intercept, correlation = regression(estimate, true)
    mean = _mean(true)
    return {
        "count": int(done.sum()),
        "missing": int((~done).sum()),
        "mean_true": mean,
        "mean_estimate": _mean(estimate),
        "mean_error": _mean(error),
        "mean_error_pct": 100.0 * _mean(error) / mean if mean else math.nan,
        "mse": _mean(error**2),
        "rmse": math.sqrt(_mean(error**2)),
        "mean_standardised_error": _mean(standardised),
        "variance_standardised_error": float(standardised.var()) if standardised.size else math.nan,
        "slope": slope,
        "intercept": intercept,
        "correlation": correlation,
    }


def regression(x: Array, y: Array) -> tuple[float, float, float]:
    """Slope and intercept of y on x, and their correlation; NaN with fewer than 3 or equal values."""
    if len(x) < 3:
        return math.nan, math.nan, math.nan
    dx, dy = x - x.mean(), y - y.mean()
    sxx, syy, sxy = (float(np.sum(a * b)) for a, b in ((dx, dx), (dy, dy), (dx, dy)))
    tiny = 1e-24 * len(x)
    if sxx <= tiny * float(np.max(np.abs(x))) ** 2:
        return math.nan, math.nan, math.nan
    slope = sxy / sxx
    correlation = sxy / math.sqrt(sxx * syy) if syy > tiny * float(np.max(np.abs(y))) ** 2 else math.nan
    return slope, float(y.mean() - slope * x.mean()), correlation


def weighted_moments(values: ArrayLike, weights: ArrayLike | None = None) -> tuple[float, float]:
    """Mean and variance with weights, over entries where both are finite; NaN where nothing is left."""
    z = np.asarray(values, dtype=float)
    w = np.ones_like(z) if weights is None else np.asarray(weights, dtype=float)
    keep = np.isfinite(z) & np.isfinite(w) & (w > 0.0)
    if not keep.any():
        return math.nan, math.nan
    mean = float(np.average(z[keep], weights=w[keep]))
    return mean, float(np.average((z[keep] - mean) ** 2, weights=w[keep]))


def block_variance_check(
    estimates: ArrayLike,
    kriging_variances: ArrayLike,
    block_covariance: float,
    total_sill: float,
    *,
    weights: ArrayLike | None = None,
    deposit_covariance: float = 0.0,
    lagrange: ArrayLike | None = None,
) -> dict[str, float]:
    """Realised variance of block estimates against what the model says.

    Parameters
    ----------
    estimates, kriging_variances : (b,) array_like
    block_covariance : float
        C(V,V) of the variogram model, the nugget left out.
    total_sill : float
        Variance of points.
    weights : (b,) array_like, optional
        Such as dry tonnes.
    deposit_covariance : float
        Mean covariance over the whole deposit, C(D,D): what blocks of one small deposit share.
    lagrange : (b,) array_like, optional
        Lagrange multipliers with the sign of C w + mu = c. The variance of an ordinary kriging estimate is C(V,V) -
        kriging variance - 2 mu; without them the last term is left out and the theory stands too low.

    Returns
    -------
    dict
        ``realised`` variance of the estimates; ``theoretical_blocks``, the variance of true blocks, C(V,V) -
        C(D,D) (Krige's relation); ``theoretical_estimates``, the same less the mean kriging variance and twice
        the mean Lagrange multiplier, which is what smooth estimates can show; ``ratio`` realised over theoretical
        estimates; ``smoothing``, 1 less realised over theoretical blocks; ``variance_factor``, C(V,V) over the
        total sill.
    """
    realised = weighted_moments(estimates, weights)[1]
    mean_kriging = weighted_moments(kriging_variances, weights)[0]
    blocks = block_covariance - deposit_covariance
    expected = blocks - mean_kriging
    if lagrange is not None:
        expected -= 2.0 * weighted_moments(lagrange, weights)[0]
    return {
        "realised": realised,
        "theoretical_blocks": blocks,
        "mean_kriging_variance": mean_kriging,
        "theoretical_estimates": max(expected, 0.0),
        "ratio": realised / expected if expected > 0.0 else math.nan,
        "smoothing": 1.0 - realised / blocks if blocks > 0.0 else math.nan,
        "variance_factor": block_covariance / total_sill if total_sill > 0.0 else math.nan,
    }


def mean_covariance(model: Any, points: ArrayLike, *, most: int = 600) -> float:
    """Mean covariance C(D,D) over all pairs of a body's block centres, from an even choice of them.

    The nugget is left out. ``model`` is a VariogramModel, ``points`` (b, 3) in m.
    """
    xyz = np.asarray(points, dtype=float)
    if len(xyz) == 0:
        return math.nan
    chosen = xyz[np.unique(np.linspace(0, len(xyz) - 1, min(most, len(xyz))).astype(int))]
    total = 0.0
    for point in chosen:
        total += float(model.structured_covariance(chosen - point).mean())
    return total / len(chosen)


def compare_estimators(
    frame_blocks: pd.DataFrame,
    metals: Sequence[str],
    companions: Mapping[str, Mapping[str, str]],
    *,
    weight: str | None = None,
    domain: str | None = "domain",
    reference: Mapping[tuple[str, str], float] | None = None,
) -> pd.DataFrame:
    """Mean, spread and extremes of each estimator by domain and metal.

    Parameters
    ----------
    frame_blocks : DataFrame
        One row a block, with each metal and its companions.
    metals : sequence of str
    companions : mapping
        For each metal a mapping from the estimator's name to its column; the metal itself is "kriging".
    weight : str, optional
        Column such as dry tonnes.
    domain : str, optional
        Column of the domain; "all" comes first.
    reference : mapping, optional
        Declustered mean for (domain, metal).

    Returns
    -------
    DataFrame
        ``domain metal estimator blocks mean cv minimum maximum difference_pct correlation`` against kriging, and
        ``reference_pct`` against the declustered mean.
    """
    import pandas as pd

    groups: list[tuple[str, pd.DataFrame]] = [("all", frame_blocks)]
    if domain is not None and domain in frame_blocks.columns:
        groups += [(str(name), part) for name, part in frame_blocks.groupby(domain, sort=True)]
    rows = []
    for name, part in groups:
        weights = part[weight].to_numpy(dtype=float) if weight else None
        for metal in metals:
            kriged = part[metal].to_numpy(dtype=float)
            base = weighted_moments(kriged, weights)[0]
            declustered = (reference or {}).get((name, metal), math.nan)
            for estimator, column in {"kriging": metal, **companions.get(metal, {})}.items():
                values = part[column].to_numpy(dtype=float)
                mean, variance = weighted_moments(values, weights)
                both = np.isfinite(values) & np.isfinite(kriged)
                rows.append(
                    {
                        "domain": name,
                        "metal": metal,
                        "estimator": estimator,
                        "blocks": int(np.isfinite(values).sum()),
                        "mean": mean,
                        "cv": math.sqrt(variance) / mean if mean > 0.0 else math.nan,
                        "minimum": float(np.nanmin(values)) if np.isfinite(values).any() else math.nan,
                        "maximum": float(np.nanmax(values)) if np.isfinite(values).any() else math.nan,
                        "difference_pct": percent(mean, base),
                        "reference_pct": percent(mean, declustered),
                        "correlation": regression(values[both], kriged[both])[2],
                    }
                )
    return pd.DataFrame(rows)


def percent(value: float, reference: float) -> float:
    """Difference of a value from a reference in %; NaN where the reference is zero or missing."""
    if not math.isfinite(value) or not math.isfinite(reference) or reference == 0.0:
        return math.nan
    return 100.0 * (value / reference - 1.0)


def _mean(values: Array) -> float:
    return float(values.mean()) if values.size else math.nan
