"""How good are the estimates that a neighbourhood, a block size and a discretisation can give?"""

from __future__ import annotations

import time
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike

from .inputs import points_array
from .kriging import ordinary_kriging
from .model import VariogramModel, as_models
from .neighbourhood import Neighbourhood
from .support_variance import block_variance

Triple = tuple[float, float, float]
Counts = tuple[int, int, int]

SLOPE_GOOD, SLOPE_FAIR = 0.85, 0.60  # practitioners' bands: necessary, never sufficient
SLOPE_PLATEAU = 0.01  # a gain in slope below this is not worth more smoothing
SUPPORT_TOLERANCE = 0.02  # of the block variance of a fine discretisation
_FINE: Counts = (12, 12, 12)


@dataclass(frozen=True)
class NeighbourhoodStudy:
    """What was tried, and what follows from it.

    Attributes
    ----------
    table : DataFrame
        One row per trial and column of values: ``varied`` ("samples", "block_size" or "discretisation"),
        ``max_samples``, ``block_x_m``, ``block_y_m``, ``block_z_m``, ``points_x``, ``points_y``, ``points_z``,
        ``column``, ``targets``, ``estimated_share``, ``mean_slope``, ``slope_p10``, ``mean_efficiency``,
        ``negative_weight_share`` (targets with a negative sum below -0.05), ``mean_negative_weight``,
        ``mean_variance``, ``block_variance``, ``mean_samples``, ``operations_per_target`` (see :func:`operations`),
        ``microseconds_per_target`` (of this machine, this time).
    max_samples, block_size, discretisation :
        The recommended settings; None where that was not varied.
    recommendation : str
        The same in words, with the reasons.
    """

    table: pd.DataFrame
    max_samples: int | None
    block_size: Triple | None
    discretisation: Counts | None
    recommendation: str

    def __repr__(self) -> str:
        return f"NeighbourhoodStudy({len(self.table)} rows: {self.recommendation})"


def _thinned(targets: ArrayLike, most: int) -> np.ndarray:
    """At most ``most`` targets, evenly spread over their order."""
    places = points_array("targets", targets)
    if len(places) <= most:
        return places
    return places[np.linspace(0, len(places) - 1, most).round().astype(int)]


def operation_parts(samples: ArrayLike, points: int, shared: float = 1.0) -> dict[str, np.ndarray]:
    """Floating-point operations of an estimate with one spherical structure, counted and not measured.

    Parameters
    ----------
    samples : array_like (targets,)
        Samples that each target found.
    points : int
        Points that stand for a block.
    shared : float
        Targets that share one factorisation, because they see the same samples.

    Returns
    -------
    dict of ndarray (targets,)
        Covariances between samples (differences, scaling, squares, root and polynomial: 17 each) and with the points (14
        each, which are scaled before), factorisation, weights, estimate. A square root counts as one.
    """
    n = np.asarray(samples, dtype=float)
    return {
        "sample covariances": n * (n - 1.0) / 2.0 * 17.0 / shared,
        "factorisation": (n**3 / 3.0 + n**2) / shared,
        "block covariances": n * points * 14.0,
        "weights": 2.0 * n**2 + 6.0 * n,
        "estimate": 4.0 * n,
    }


def operations(samples: ArrayLike, points: int) -> float:
    """Mean of all :func:`operation_parts` over targets that share nothing; NaN where there are none."""
    n = np.asarray(samples, dtype=float)
    return float(np.mean(sum(operation_parts(n, points).values()))) if len(n) else float("nan")


def neighbourhood_study(
    coordinates: ArrayLike,
    values: ArrayLike,
    targets: ArrayLike,
    model: VariogramModel | Sequence[VariogramModel],
    neighbourhood: Neighbourhood,
    *,
    block_size: Sequence[float],
    discretisation: Sequence[int] = (3, 3, 3),
    hole_ids: ArrayLike | None = None,
    sample_numbers: Sequence[int] = (4, 6, 8, 12, 16, 20, 24, 32, 40),
    block_sizes: Sequence[Sequence[float]] | None = None,
    discretisations: Sequence[Sequence[int]] = ((1, 1, 1), (2, 2, 2), (3, 3, 3), (4, 4, 4), (5, 5, 5)),
    most_targets: int = 2000,
    threads: int | None = None,
    coincident: str = "error",
) -> NeighbourhoodStudy:
    """Quantitative kriging neighbourhood analysis: vary one setting at a time and look at the quality.

    Parameters
    ----------
    coordinates, values, targets, model, hole_ids, threads, coincident : as in ``ordinary_kriging``
    neighbourhood, block_size (m), discretisation :
        The settings to start from.
    sample_numbers : most samples to try; those below ``min_samples`` lower it
    block_sizes : sizes to try, in metres; by default half, one and two times ``block_size``
    discretisations : numbers of points to try
    most_targets : int
        Targets are thinned evenly to this number.

    Returns
    -------
    NeighbourhoodStudy

    Notes
    -----
    Slope of regression and efficiency after Krige (1997); varying them with the number of samples follows
    Vann, Jackson & Bertoli (2003), Quantitative kriging neighbourhood analysis for the mining geologist.
    The slope recommends no more samples than the plateau needs, for more samples smooth more.
    """
    places = _thinned(targets, most_targets)
    columns = list(values.columns) if isinstance(values, pd.DataFrame) else None
    models = as_models(model, 1 if np.ndim(values) == 1 else np.shape(values)[1])
    size = (float(block_size[0]), float(block_size[1]), float(block_size[2]))
    counts = (int(discretisation[0]), int(discretisation[1]), int(discretisation[2]))
    rows: list[dict[str, object]] = []

    def trial(varied: str, item: Neighbourhood, block: Triple, points: Counts) -> None:
        started = time.perf_counter()
        result = ordinary_kriging(
            coordinates,
            values,
            places,
            models if np.ndim(values) > 1 else models[0],
            item,
            hole_ids=hole_ids,
            block_size=block,
            discretisation=points,
            threads=threads,
            coincident=coincident,
        )
        taken = time.perf_counter() - started
        for column, one in enumerate(models):

            def of(array: np.ndarray, column: int = column) -> np.ndarray:
                whole = array if array.ndim == 1 else array[:, column]
                return whole[(result.status if array.ndim == 1 else result.status[:, column]) == 0]

            slope, negative = of(result.slope_of_regression), of(result.negative_weight_sum)
            slope = slope[np.isfinite(slope)]
            some = len(negative) > 0
            counted = of(result.sample_count).astype(float)
            rows.append(
                {
                    "varied": varied,
                    "max_samples": item.max_samples,
                    **dict(zip(("block_x_m", "block_y_m", "block_z_m"), block)),
                    **dict(zip(("points_x", "points_y", "points_z"), points)),
                    "column": columns[column] if columns is not None else column,
                    "targets": len(places),
                    "estimated_share": len(negative) / max(len(places), 1),
                    "mean_slope": slope.mean() if len(slope) else np.nan,
                    "slope_p10": np.quantile(slope, 0.1) if len(slope) else np.nan,
                    "mean_efficiency": of(result.kriging_efficiency).mean() if some else np.nan,
                    "negative_weight_share": (negative < -0.05).mean() if some else np.nan,
                    "mean_negative_weight": negative.mean() if some else np.nan,
                    "mean_variance": of(result.variance).mean() if some else np.nan,
                    "block_variance": block_variance(one, block, points),
                    "mean_samples": float(counted.mean()) if some else np.nan,
                    "operations_per_target": operations(counted, points[0] * points[1] * points[2]),
                    "microseconds_per_target": taken / max(len(places), 1) * 1e6,
                }
            )

    trial("warm-up", neighbourhood, size, counts)  # compiles, so that no row's time holds it
    rows.clear()
    for number in sample_numbers:
        least = min(neighbourhood.min_samples, int(number))
        holes = min(neighbourhood.min_holes, int(number))
        item = replace(neighbourhood, max_samples=int(number), min_samples=least, min_holes=holes)
        trial("samples", item, size, counts)
    if block_sizes is None:
        block_sizes = [[side * factor for side in size] for factor in (0.5, 1.0, 2.0)]
    for given in block_sizes:
        block = (float(given[0]), float(given[1]), float(given[2]))
        trial("block_size", neighbourhood, block, counts)
    for numbers in discretisations:
        points = (int(numbers[0]), int(numbers[1]), int(numbers[2]))
        trial("discretisation", neighbourhood, size, points)
    table = pd.DataFrame(rows)
    most, why_samples = _choose_samples(table)
    best_block, why_block = _choose_block(table)
    best_points, why_points = _choose_points(table, [block_variance(one, size, _FINE) for one in models])
    words = " ".join(text for text in (why_samples, why_block, why_points) if text)
    return NeighbourhoodStudy(table, most, best_block, best_points, words)


def _band(slope: float) -> str:
    return "good" if slope > SLOPE_GOOD else "fair" if slope >= SLOPE_FAIR else "poor"


def _choose_samples(table: pd.DataFrame) -> tuple[int | None, str]:
    """The fewest samples whose slope is on the plateau, for the worst column."""
    part = table[table["varied"] == "samples"].dropna(subset=["mean_slope"])
    if part.empty:
        return None, ""
    worst = part.groupby("max_samples")["mean_slope"].min()
    best = float(worst.max())
    chosen = int(worst.index[worst >= best - SLOPE_PLATEAU].min())
    slope = float(worst.loc[chosen])
    negative = float(part.loc[part["max_samples"] == chosen, "mean_negative_weight"].min())
    gain = f"and gains no more than {max(best - slope, 0.0):.3f} with any larger number tried"
    if chosen == worst.index.max() and len(worst) > 1:
        gain = "and was still rising at this largest number tried: try more, or accept less"
    text = (
        f"{chosen} samples at most: the mean slope of regression is {slope:.2f} ({_band(slope)}) there {gain}; "
        f"the negative weights sum to {negative:.3f} on average."
    )
    return chosen, text


def _choose_block(table: pd.DataFrame) -> tuple[Triple | None, str]:
    """The smallest block whose slope is good; else the one with the best slope, with its band."""
    part = table[table["varied"] == "block_size"].dropna(subset=["mean_slope"])
    if part.empty:
        return None, ""
    sides = ["block_x_m", "block_y_m", "block_z_m"]
    worst = part.groupby(sides)["mean_slope"].min().reset_index()
    worst = worst.assign(volume=worst[sides[0]] * worst[sides[1]] * worst[sides[2]])
    worst = worst.sort_values(["volume", *sides]).reset_index(drop=True)
    good = worst[worst["mean_slope"] > SLOPE_GOOD]
    row = good.iloc[0] if len(good) else worst.iloc[int(worst["mean_slope"].to_numpy().argmax())]
    block = (float(row[sides[0]]), float(row[sides[1]]), float(row[sides[2]]))
    slope = float(row["mean_slope"])
    named = " x ".join(f"{side:g}" for side in block)
    if len(good):
        reason = f"the smallest size tried whose mean slope is good ({slope:.2f})"
    else:
        reason = f"no size tried has a good slope; this one has the best, {slope:.2f} ({_band(slope)})"
    return block, f"Blocks of {named} m: {reason}."


def _choose_points(table: pd.DataFrame, fine: Sequence[float]) -> tuple[Counts | None, str]:
    """The fewest points whose block variance comes near ``fine``, that of each column for very many points."""
    part = table[table["varied"] == "discretisation"]
    if part.empty:
        return None, ""
    counts = ["points_x", "points_y", "points_z"]
    wanted = np.resize(np.asarray(fine, dtype=float), len(part))  # rows of a trial run over the columns
    off = np.abs(part["block_variance"] - wanted) / np.where(wanted > 0.0, wanted, 1.0)
    part = part.assign(off=off, points=part[counts].prod(axis=1))
    worst = part.groupby(["points", *counts], as_index=False)["off"].max()
    near = worst[worst["off"] <= SUPPORT_TOLERANCE]
    row = near.iloc[0] if len(near) else worst.iloc[int(worst["off"].to_numpy().argmin())]
    points = (int(row[counts[0]]), int(row[counts[1]]), int(row[counts[2]]))
    named = " x ".join(str(number) for number in points)
    short = "" if len(near) else "no number tried comes near enough; with these "
    reason = f"{short}the block variance is within {row['off'] * 100.0:.1f} % of its limit for many points"
    return points, f"{named} discretisation points: {reason}."
