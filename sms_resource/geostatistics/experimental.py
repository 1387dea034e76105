"""Experimental variograms of scattered samples in three dimensions."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from sms_resource.geostatistics.directions import Direction
from sms_resource.geostatistics.pairs import (
    PairRequest,
    PreparedSamples,
    clean_samples,
    edges_of_lags,
    gamma_of_sums,
    kernel_arguments,
    pair_sums,
    prepare,
    transformed,
)

if TYPE_CHECKING:
    import pandas as pd

Array = NDArray[np.float64]
Measure = Literal["semivariogram", "normal_scores", "logs", "pairwise_relative", "correlogram"]
ESTIMATORS: tuple[str, ...] = ("matheron", "cressie", "dowd", "genton", "minmax", "percentile", "entropy")
MOST_PAIRS_FOR_GENTON = 3000  # it compares every pair difference with every other one


@dataclass(frozen=True)
class ExperimentalVariogram:
    """Experimental variogram of one direction; arrays have one entry per lag.

    Attributes
    ----------
    label : str
        Name for tables and figures.
    azimuth, plunge : float
        Direction in degrees; NaN where it has none.
    kind : "omnidirectional" | "directional" | "down_hole" | "horizontal" | "vertical" | "plane"
    measure, estimator : str
    lag_from, lag_to : (k,) float
        Edges of each lag in m: above ``lag_from``, up to and with ``lag_to``.
    distance : (k,) float
        Mean distance of the pairs in m; NaN where there are none.
    gamma : (k,) float
        The measure; NaN where there are no pairs.
    pairs : (k,) int
        Number of pairs.
    separations : (k, 3) float
        Mean separation of the pairs as east, north, up in m, in the quadrant of the axes of the direction.
    holes : (k,) int or None
        Number of holes that have a part in the pairs, where it was counted.
    """

    label: str
    azimuth: float
    plunge: float
    kind: str
    measure: str
    lag_from: Array
    lag_to: Array
    distance: Array
    gamma: Array
    pairs: NDArray[np.int64]
    separations: Array
    estimator: str = "matheron"
    holes: NDArray[np.int64] | None = None

    def to_frame(self) -> pd.DataFrame:
        """One row a lag: label, kind, azimuth, plunge, measure, lag_from_m, lag_to_m, distance_m, gamma, pairs."""
        import pandas as pd

        return pd.DataFrame(
            {
                "label": self.label,
                "kind": self.kind,
                "azimuth": self.azimuth,
                "plunge": self.plunge,
                "measure": self.measure,
                "estimator": self.estimator,
                "lag_from_m": self.lag_from,
                "lag_to_m": self.lag_to,
                "distance_m": self.distance,
                "gamma": self.gamma,
                "pairs": self.pairs,
            }
        )

    def __repr__(self) -> str:
        return (
            f"ExperimentalVariogram({self.label!r}, {self.measure}, {len(self.pairs)} lags to "
            f"{self.lag_to[-1]:g} m, {int(self.pairs.sum())} pairs)"
        )


def down_hole_axis(xyz: Array, names: NDArray[Any]) -> Array:
    """Unit vector along which the samples of single holes spread most; straight down where none does."""
    _, codes = np.unique(names.astype(str) if names.dtype == object else names, return_inverse=True)
    counts = np.bincount(codes)
    means = np.column_stack([np.bincount(codes, weights=xyz[:, axis]) / counts for axis in range(3)])
    local = xyz - means[codes]
    spread = local.T @ local
    if not np.trace(spread) > 0.0:
        return np.array([0.0, 0.0, -1.0])
    axis = np.linalg.eigh(spread)[1][:, -1]
    return axis if axis[2] <= 0.0 else -axis


def assemble(
    request: PairRequest, sums: Array, measure: str, hole_axis: Array, estimator: str = "matheron"
) -> ExperimentalVariogram:
    """The experimental variogram of one request from its sums (k, columns)."""
    from sms_resource.geostatistics import experimental_kernels as kernels

    direction = request.direction
    sums = sums[: len(request.edges) - 1]
    with np.errstate(divide="ignore", invalid="ignore"):
        means = sums / sums[:, kernels.WEIGHT][:, None]
    distance = means[:, kernels.DISTANCE]
    label, kind = direction.label, str(direction.kind)
    azimuth = direction.azimuth if direction.kind == "directional" else math.nan
    plunge = direction.plunge if direction.kind == "directional" else math.nan
    if direction.kind == "omnidirectional":
        axis = hole_axis if request.holes == "within" else np.array([0.0, 1.0, 0.0])
        separations = distance[:, None] * axis
        if request.holes == "within":
            label, kind = "down-hole", "down_hole"
            plunge = -math.degrees(math.asin(float(np.clip(axis[2], -1.0, 1.0))))
            azimuth = math.degrees(math.atan2(axis[0], axis[1])) % 360.0
    else:
        axes = direction.axes
        separations = (
            means[:, [kernels.ALONG]] * axes[0]
            + means[:, [kernels.SIDE]] * axes[1]
            + means[:, [kernels.NORMAL]] * axes[2]
        )
        if label in ("horizontal", "vertical"):
            kind = label
    return ExperimentalVariogram(
        label=label,
        azimuth=azimuth,
        plunge=plunge,
        kind=kind,
        measure=measure,
        lag_from=request.edges[:-1].copy(),
        lag_to=request.edges[1:].copy(),
        distance=distance,
        gamma=gamma_of_sums(sums, measure),
        pairs=sums[:, kernels.PAIRS].astype(np.int64),
        separations=separations,
        estimator=estimator,
    )


def pair_estimator(name: str | Callable[[Array], float]) -> Callable[[Array], float]:
    """Function from the absolute differences of one lag to its value, from scikit-gstat where it is named.

    Raises
    ------
    ValueError
        If the name is not known.
    """
    if callable(name):
        return name
    if name not in ESTIMATORS:
        raise ValueError(f"estimator must be one of {', '.join(ESTIMATORS)} or a function, got {name!r}")
    from skgstat import estimators

    return getattr(estimators, name)


def robust_gamma(
    samples: PreparedSamples,
    request: PairRequest,
    pairs: NDArray[np.int64],
    estimator: str | Callable[[Array], float],
) -> Array:
    """Value of each lag by an estimator that needs every pair difference.

    Raises
    ------
    ValueError
        If the estimator is not known, or it is Genton's and a lag holds too many pairs for it.
    """
    from sms_resource.geostatistics import experimental_kernels as kernels

    function = pair_estimator(estimator)
    if estimator == "genton" and pairs.max(initial=0) > MOST_PAIRS_FOR_GENTON:
        raise ValueError(
            f"estimator 'genton' compares all pairs with each other: {int(pairs.max())} pairs in a lag are more "
            f"than {MOST_PAIRS_FOR_GENTON}; use shorter lags, 'dowd' or 'cressie'"
        )
    kinds, frames, cosines, bands, modes, edges, lags, reach, slack = kernel_arguments(samples, [request])
    starts = np.concatenate([[0], np.cumsum(pairs)[:-1]]).astype(np.int64)
    filled = np.zeros(len(pairs), dtype=np.int64)
    differences = np.empty(int(pairs.sum()))
    x, y, z = (np.ascontiguousarray(column) for column in samples.coordinates.T)
    kernels.list_differences(
        x, y, z, samples.values, samples.holes, kinds[0], frames[0], cosines[0], bands[0], modes[0], edges[0],
        lags[0], reach, slack, starts, filled, differences,
    )  # fmt: skip
    return np.array(
        [
            float(function(differences[start : start + size])) if size else math.nan
            for start, size in zip(starts, filled)
        ]
    )


def experimental_variograms(
    coordinates: ArrayLike,
    values: ArrayLike,
    requests: Sequence[PairRequest],
    *,
    hole_ids: Any = None,
    measure: Measure | str = "semivariogram",
    estimator: str | Callable[[Array], float] = "matheron",
    weights: ArrayLike | None = None,
) -> tuple[ExperimentalVariogram, ...]:
    """Experimental variograms of several directions in one pass over the pairs.

    Parameters are those of :func:`experimental_variogram`; each request has its own direction and lags.

    Raises
    ------
    ValueError
        As :func:`experimental_variogram`.
    """
    xyz, z, names, w = clean_samples(coordinates, values, hole_ids, weights)
    if any(request.holes != "any" for request in requests) and hole_ids is None:
        raise ValueError("hole_ids are needed for pairs within or across holes")
    robust = callable(estimator) or estimator != "matheron"
    if robust and (weights is not None or measure in ("pairwise_relative", "correlogram")):
        raise ValueError("an estimator other than 'matheron' takes no weights and no relative measure")
    prepared = prepare(xyz, transformed(z, measure, w), names, w, centre=measure != "pairwise_relative")
    sums = pair_sums(prepared, requests, measure)
    axis = down_hole_axis(xyz, names)
    name = estimator if isinstance(estimator, str) else getattr(estimator, "__name__", "function")
    results = [assemble(request, sums[row], measure, axis, name) for row, request in enumerate(requests)]
    if robust:
        from dataclasses import replace

        results = [
            replace(result, gamma=robust_gamma(prepared, request, result.pairs, estimator))
            for result, request in zip(results, requests)
        ]
    return tuple(results)


def experimental_variogram(
    coordinates: ArrayLike,
    values: ArrayLike,
    *,
    lag_width: float | None = None,
    lag_count: int | None = None,
    lag_edges: ArrayLike | None = None,
    direction: Direction | None = None,
    hole_ids: Any = None,
    within_holes: bool = False,
    across_holes: bool = False,
    measure: Measure | str = "semivariogram",
    estimator: str | Callable[[Array], float] = "matheron",
    weights: ArrayLike | None = None,
) -> ExperimentalVariogram:
    """Experimental variogram of samples in three dimensions.

    Parameters
    ----------
    coordinates : (n, 3) array_like
        Easting, northing, elevation in m.
    values : (n,) array_like
        NaN is missing: that sample is left out.
    lag_width : float, optional
        Width of each lag in m, from zero.
    lag_count : int, optional
        Number of lags.
    lag_edges : array_like, optional
        Edges of the lags in m, instead of width and count.
    direction : Direction, optional
        Which pairs are taken by their direction; all by default.
    hole_ids : (n,) array_like, optional
        Hole of each sample, for pairs within or across holes.
    within_holes, across_holes : bool
        Take only pairs inside one hole (down-hole variogram), or only pairs between two holes.
    measure : str
        "semivariogram"; "normal_scores" or "logs" (semivariogram of the transformed values);
        "pairwise_relative" (Isaaks & Srivastava 1989, chapter 7); "correlogram" (one minus the correlation of
        the pairs, with the mean and variance of each lag, heads and tails taken together).
    estimator : str or function
        "matheron", or a robust estimator of scikit-gstat by name ("cressie", "dowd", "genton", "minmax",
        "percentile", "entropy"), or a function of the absolute differences of one lag.
    weights : (n,) array_like, optional
        Declustering weights; a pair weighs the product of its two.

    Returns
    -------
    ExperimentalVariogram

    Raises
    ------
    ValueError
        If shapes, weights, lags or names are wrong, a coordinate is not finite, fewer than 2 samples have a
        value, or a measure needs values above zero.

    Notes
    -----
    Coincident samples (distance zero) make no pair. A distance on an edge belongs to the lower lag.

    References
    ----------
    Matheron, G. (1963). Principles of geostatistics. Economic Geology 58, 1246-1266.
    """
    if within_holes and across_holes:
        raise ValueError("within_holes and across_holes exclude each other")
    xyz, _, _, _ = clean_samples(coordinates, values, hole_ids, weights)
    request = PairRequest(
        direction=direction or Direction.omnidirectional(),
        edges=edges_of_lags(xyz, lag_width, lag_count, lag_edges),
        holes="within" if within_holes else "across" if across_holes else "any",
    )
    return experimental_variograms(
        coordinates,
        values,
        [request],
        hole_ids=hole_ids,
        measure=measure,
        estimator=estimator,
        weights=weights,
    )[0]
