"""Pairs of results: precision of duplicates and agreement of two laboratories, each statistic by its name."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]


def _both(first: ArrayLike, second: ArrayLike) -> tuple[Floats, Floats]:
    a, b = np.asarray(first, dtype=np.float64), np.asarray(second, dtype=np.float64)
    if a.shape != b.shape:
        raise ValueError(f"pairs need equal lengths, not {a.shape} and {b.shape}")
    use = np.isfinite(a) & np.isfinite(b) & (a + b > 0)
    return a[use], b[use]


def cv_average(first: ArrayLike, second: ArrayLike) -> float:
    """CVavg in percent: 100 sqrt((2/N) sum((a-b)^2 / (a+b)^2)); NaN without pairs.

    Stanley & Lawie (2007), Exploration and Mining Geology 16, 265-274.
    """
    a, b = _both(first, second)
    return 100.0 * float(np.sqrt(2.0 * np.mean(((a - b) / (a + b)) ** 2))) if len(a) else np.nan


def half_absolute_relative_difference(first: ArrayLike, second: ArrayLike) -> Floats:
    """HARD of each pair in percent: 100 |a - b| / (a + b). Pairs without two results are left out."""
    a, b = _both(first, second)
    return 100.0 * np.abs(a - b) / (a + b)


@dataclass(frozen=True)
class AxisFit:
    """Reduced major axis y = intercept + slope x, with the interval of both."""

    slope: float
    intercept: float
    slope_low: float
    slope_high: float
    intercept_low: float
    intercept_high: float
    correlation: float
    count: int
    confidence: float


def reduced_major_axis(x: ArrayLike, y: ArrayLike, *, confidence: float = 0.95) -> AxisFit:
    """Reduced major axis with its interval; both laboratories err, so neither is the truth.

    Parameters
    ----------
    x, y : array-like, shape (n,)
        Original and check results; pairs with a missing result are left out.

    Raises
    ------
    ValueError
        If fewer than 3 pairs, or no spread, are left.

    Notes
    -----
    Slope: ratio of the standard deviations with the sign of the correlation (Sokal & Rohlf 1995, box 14.12). Interval:
    Jolicoeur & Mosimann (1968), Biometrie-Praximetrie 9, 121-140, as in McArdle (1988).
    """
    from scipy.special import stdtrit

    a, b = np.asarray(x, dtype=np.float64), np.asarray(y, dtype=np.float64)
    if a.shape != b.shape:
        raise ValueError(f"x and y need equal lengths, not {a.shape} and {b.shape}")
    use = np.isfinite(a) & np.isfinite(b)
    a, b = a[use], b[use]
    n = len(a)
    if n < 3 or not (np.ptp(a) > 0 and np.ptp(b) > 0):
        raise ValueError(f"a reduced major axis needs 3 pairs that differ, not {n}")
    r = float(np.corrcoef(a, b)[0, 1])
    sign = 1.0 if r >= 0 else -1.0
    slope = sign * float(b.std(ddof=1) / a.std(ddof=1))
    width = float(stdtrit(n - 2, 0.5 + confidence / 2)) ** 2 * max(1.0 - r * r, 0.0) / (n - 2)
    ends = sorted(
        (slope * (np.sqrt(width + 1.0) - np.sqrt(width)), slope * (np.sqrt(width + 1.0) + np.sqrt(width)))
    )
    centre_x, centre_y = float(a.mean()), float(b.mean())
    crossings = sorted((centre_y - ends[0] * centre_x, centre_y - ends[1] * centre_x))
    return AxisFit(
        slope, centre_y - slope * centre_x, float(ends[0]), float(ends[1]), crossings[0], crossings[1], r, n,
        confidence,
    )  # fmt: skip
