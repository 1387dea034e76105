"""Change of support: what blocks of a size would hold above a cut-off, from the distribution of points."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray

from sms_resource.geostatistics.transforms import NormalScores

if TYPE_CHECKING:
    import pandas as pd

Array = NDArray[np.float64]
HERMITE_ORDER = 200
REACH = 9.0  # Gaussian scores beyond it have no share that a double shows
MOST_STEPS = 1500  # more distinct values than that are joined into steps of equal share


@dataclass(frozen=True)
class ChangeOfSupport:
    """Curves of points and of blocks above cut-offs.

    Attributes
    ----------
    curves : DataFrame
        ``method`` ("points", "discrete_gaussian", "affine"), ``cutoff``, ``proportion`` (share of the tonnage at
        or above the cut-off), ``metal`` (proportion times grade, in the unit of the grade), ``grade`` (mean above
        the cut-off; NaN where nothing is left).
    mean, point_variance, block_variance : float
    variance_factor : float
        Block variance over point variance.
    change_of_support : float
        The coefficient r of the discrete Gaussian model, 1 for points, 0 for blocks that are all alike.
    """

    curves: pd.DataFrame
    mean: float
    point_variance: float
    block_variance: float
    variance_factor: float
    change_of_support: float

    def curve(self, method: str) -> pd.DataFrame:
        """Rows of one method."""
        return self.curves[self.curves["method"] == method].reset_index(drop=True)


def change_of_support(
    values: ArrayLike,
    variance_factor: float,
    cutoffs: ArrayLike,
    *,
    weights: ArrayLike | None = None,
    methods: Sequence[str] = ("points", "discrete_gaussian", "affine"),
) -> ChangeOfSupport:
    """Proportion, metal and grade of blocks above cut-offs, from declustered samples.

    Parameters
    ----------
    values : (n,) array_like
        Grades of points (composites); NaN is left out.
    variance_factor : float
        Variance of blocks over variance of points: C(V,V) of the variogram model over its total sill, 0 to 1.
    cutoffs : array_like
        In the unit of the values.
    weights : (n,) array_like, optional
        Declustering weights.
    methods : sequence of str
        Of "points", "discrete_gaussian" and "affine".

    Returns
    -------
    ChangeOfSupport

    Raises
    ------
    ValueError
        If no value is left, the factor lies outside 0 to 1 or a method is not known.

    Notes
    -----
    The discrete Gaussian model gives a block of Gaussian score y the mean of the points whose score is normal
    about r y with variance 1 - r^2. Points are steps, so that mean is a sum of normal integrals and needs no
    series; only r comes from the Hermite polynomials, sum phi_p^2 r^(2p) = block variance. The affine correction
    shrinks the points toward their mean, so it keeps their shape.

    References
    ----------
    Matheron, G. (1976). Forecasting block grade distributions: the transfer functions. In: Advanced
    Geostatistics in the Mining Industry, 237-251. Journel, A. G., & Huijbregts, C. J. (1978). Mining
    Geostatistics, chapter 6. Isaaks, E. H., & Srivastava, R. M. (1989), chapter 19 (affine).
    """
    import pandas as pd

    if not 0.0 <= variance_factor <= 1.0:
        raise ValueError(f"variance_factor must lie between 0 and 1, got {variance_factor}")
    unknown = set(methods) - {"points", "discrete_gaussian", "affine"}
    if unknown:
        raise ValueError(f"methods: {', '.join(sorted(unknown))} is not points, discrete_gaussian or affine")
    steps = NormalScores.fit(values, weights)
    levels = np.atleast_1d(np.array(cutoffs, dtype=float))
    r = gaussian_support_coefficient(steps, variance_factor)
    parts = []
    for method in methods:
        if method == "points":
            proportion, metal = _above(steps.values, steps.probabilities, levels)
        elif method == "affine":
            blocks = steps.mean + math.sqrt(variance_factor) * (steps.values - steps.mean)
            proportion, metal = _above(blocks, steps.probabilities, levels)
        else:
            proportion, metal = _gaussian_blocks(_joined(steps), r, levels)
        parts.append(_curve(method, levels, proportion, metal))
    return ChangeOfSupport(
        curves=pd.concat(parts, ignore_index=True),
        mean=steps.mean,
        point_variance=steps.variance,
        block_variance=variance_factor * steps.variance,
        variance_factor=float(variance_factor),
        change_of_support=r,
    )


def lognormal_support(mean: float, cv: float, variance_factor: float, cutoffs: ArrayLike) -> ChangeOfSupport:
    """Change of support where points are lognormal, in closed form.

    Parameters
    ----------
    mean, cv : float
        Mean and coefficient of variation of the points.
    variance_factor : float
        Variance of blocks over variance of points.
    cutoffs : array_like
        In the unit of the mean.

    Notes
    -----
    Lognormal points stay lognormal on blocks in the discrete Gaussian model: the variance of the logs is
    ln(1 + f cv^2) and r its root over that of the points (Journel & Huijbregts 1978, chapter 6).
    """
    import pandas as pd
    from scipy.special import ndtr

    if not (mean > 0.0 and cv > 0.0 and 0.0 <= variance_factor <= 1.0):
        raise ValueError("mean and cv must be above zero and variance_factor between 0 and 1")
    levels = np.atleast_1d(np.array(cutoffs, dtype=float))
    point = math.sqrt(math.log1p(cv**2))
    block = math.sqrt(math.log1p(variance_factor * cv**2))

    def above(sigma: float, at: Array) -> tuple[Array, Array]:
        if sigma == 0.0:
            return np.where(at <= mean, 1.0, 0.0), np.where(at <= mean, mean, 0.0)
        with np.errstate(divide="ignore"):
            score = (np.log(np.maximum(at, 0.0) / mean) + 0.5 * sigma**2) / sigma
        return ndtr(-score), mean * ndtr(sigma - score)

    shrink = math.sqrt(variance_factor)
    equivalent = (
        mean + (levels - mean) / shrink if shrink > 0.0 else np.where(levels <= mean, -np.inf, np.inf)
    )
    proportion, metal = above(point, equivalent)
    parts = [
        _curve("points", levels, *above(point, levels)),
        _curve("discrete_gaussian", levels, *above(block, levels)),
        _curve("affine", levels, proportion, mean * proportion + shrink * (metal - mean * proportion)),
    ]
    variance = (mean * cv) ** 2
    return ChangeOfSupport(
        pd.concat(parts, ignore_index=True),
        mean,
        variance,
        variance_factor * variance,
        variance_factor,
        block / point,
    )


def gaussian_support_coefficient(steps: NormalScores, variance_factor: float) -> float:
    """Coefficient r of the discrete Gaussian model for a ratio of block to point variance.

    Solved by halving on sum phi_p^2 r^(2p); what lies above the highest polynomial counts as one more term.
    """
    if variance_factor >= 1.0 or not steps.variance > 0.0:
        return 1.0
    squares = steps.hermite(HERMITE_ORDER)[1:] ** 2 / steps.variance
    squares = np.append(squares, max(0.0, 1.0 - squares.sum()))
    powers = 2.0 * np.arange(1, len(squares) + 1)
    low, high = 0.0, 1.0
    for _ in range(60):
        middle = 0.5 * (low + high)
        if squares @ middle**powers > variance_factor:
            high = middle
        else:
            low = middle
    return 0.5 * (low + high)


def _joined(steps: NormalScores) -> NormalScores:
    """The same distribution with at most MOST_STEPS steps; each joined step keeps its mean."""
    if len(steps.values) <= MOST_STEPS:
        return steps
    middle = np.cumsum(steps.probabilities) - 0.5 * steps.probabilities
    group = np.minimum((middle * MOST_STEPS).astype(int), MOST_STEPS - 1)
    share = np.bincount(group, weights=steps.probabilities, minlength=MOST_STEPS).astype(float)
    total = np.bincount(group, weights=steps.probabilities * steps.values, minlength=MOST_STEPS)
    return NormalScores(total[share > 0.0] / share[share > 0.0], share[share > 0.0])


def _above(values: Array, probabilities: Array, cutoffs: Array) -> tuple[Array, Array]:
    """Share and metal of steps at or above each cut-off."""
    order = np.argsort(values, kind="stable")
    share = np.append(np.cumsum(probabilities[order][::-1])[::-1], 0.0)
    metal = np.append(np.cumsum((probabilities * values)[order][::-1])[::-1], 0.0)
    first = np.searchsorted(values[order], cutoffs, side="left")
    return np.minimum(share[first], 1.0), metal[first]


def _block_means(steps: NormalScores, r: float, scores: Array) -> Array:
    """Mean of a block for each of its Gaussian scores; it rises with the score."""
    from scipy.special import ndtr

    width = math.sqrt(max(1.0 - r * r, 1e-300))
    result = np.empty_like(scores)
    tops = steps.upper_scores[:-1]
    jumps = np.diff(steps.values)
    for start in range(0, len(scores), 512):  # in slices, so that scores x steps stays small
        part = scores[start : start + 512]
        result[start : start + 512] = steps.values[0] + ndtr((r * part[:, None] - tops) / width) @ jumps
    return result


def _gaussian_blocks(steps: NormalScores, r: float, cutoffs: Array) -> tuple[Array, Array]:
    """Share and metal of blocks at or above each cut-off in the discrete Gaussian model."""
    from scipy.special import ndtr

    if r >= 1.0 or len(steps.values) < 2:
        return _above(steps.values, steps.probabilities, cutoffs)
    if r <= 0.0:
        return _above(np.array([steps.mean]), np.ones(1), cutoffs)
    grid = np.linspace(-REACH, REACH, 1201)
    bracket = np.searchsorted(_block_means(steps, r, grid), cutoffs)
    low, high = grid[np.maximum(bracket - 1, 0)], grid[np.minimum(bracket, len(grid) - 1)]
    for _ in range(24):
        middle = 0.5 * (low + high)
        over = _block_means(steps, r, middle) >= cutoffs
        low, high = np.where(over, low, middle), np.where(over, middle, high)
    score = 0.5 * (low + high)
    proportion = ndtr(-score)
    metal = _metal_above(steps, r, score)
    none, everything = score > REACH - 0.1, score < 0.1 - REACH
    return (
        np.where(none, 0.0, np.where(everything, 1.0, proportion)),
        np.where(none, 0.0, np.where(everything, steps.mean, metal)),
    )


def _metal_above(steps: NormalScores, r: float, scores: Array) -> Array:
    """Integral of the block mean above each Gaussian score, in pieces no wider than a step is blurred."""
    width = min(0.25, max(0.02, math.sqrt(1.0 - r * r) / r))
    edges = np.unique(
        np.concatenate([np.arange(-REACH, REACH, width), [REACH], np.clip(scores, -REACH, REACH)])
    )
    nodes, node_weights = np.polynomial.legendre.leggauss(8)
    half = 0.5 * np.diff(edges)
    at = edges[:-1, None] + half[:, None] * (nodes + 1.0)
    density = np.exp(-0.5 * at**2) / math.sqrt(2.0 * math.pi)
    means = _block_means(steps, r, at.ravel()).reshape(at.shape)
    pieces = half * ((density * means) @ node_weights)
    above = np.append(np.cumsum(pieces[::-1])[::-1], 0.0)
    return above[np.searchsorted(edges, np.clip(scores, -REACH, REACH))]


def _curve(method: str, cutoffs: Array, proportion: Array, metal: Array) -> pd.DataFrame:
    import pandas as pd

    with np.errstate(divide="ignore", invalid="ignore"):
        grade = np.where(proportion > 0.0, metal / proportion, np.nan)
    return pd.DataFrame(
        {"method": method, "cutoff": cutoffs, "proportion": proportion, "metal": metal, "grade": grade}
    )
