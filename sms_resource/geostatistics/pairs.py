"""Samples, lags and sums over pairs: what an experimental variogram and its jackknife share."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from sms_resource.geostatistics.directions import KIND_CODES, Direction

Array = NDArray[np.float64]
MEASURES: tuple[str, ...] = ("semivariogram", "normal_scores", "logs", "pairwise_relative", "correlogram")
GROUPS = 64  # fixed, so that sums are added in one order on any number of threads


@dataclass(frozen=True)
class PairRequest:
    """What one experimental variogram takes: direction, edges of the lags and the rule for holes.

    Parameters
    ----------
    direction : Direction
    edges : (k + 1,) float
        Rising edges of the lags in m.
    holes : "any" | "within" | "across"
        All pairs, pairs inside one hole, or pairs between two holes.
    """

    direction: Direction
    edges: Array
    holes: Literal["any", "within", "across"] = "any"


@dataclass(frozen=True)
class PreparedSamples:
    """Samples centred and sorted for the kernels; ``order`` leads back to the rows that came in."""

    coordinates: Array
    values: Array
    weights: Array
    holes: NDArray[np.int64]
    hole_names: NDArray[Any]
    order: NDArray[np.int64]
    axis_order: tuple[int, int, int]


def edges_of_lags(
    coordinates: Array,
    lag_width: float | None = None,
    lag_count: int | None = None,
    edges: ArrayLike | None = None,
) -> Array:
    """Edges of the lags, from a width and a count or as they are given.

    Without a width, the lags reach half the diagonal of the samples; without a count there are 15 of them
    or as many as the width fits into that reach. (Half the extent and 15 lags are common practice.)

    Raises
    ------
    ValueError
        If the width or the count is not positive or the edges do not rise.
    """
    if edges is not None:
        result = np.array(edges, dtype=float)
        if result.ndim != 1 or result.size < 2 or not np.all(np.isfinite(result)):
            raise ValueError("lag_edges must be a list of at least 2 finite numbers")
        if result[0] < 0.0 or np.any(np.diff(result) <= 0.0):
            raise ValueError("lag_edges must rise and start at zero or above")
        return result
    if lag_count is not None and (int(lag_count) != lag_count or lag_count < 1):
        raise ValueError(f"lag_count must be a whole number above zero, got {lag_count}")
    if lag_width is not None and not (math.isfinite(lag_width) and lag_width > 0.0):
        raise ValueError(f"lag_width must be a number of m above zero, got {lag_width}")
    reach = 0.5 * float(np.linalg.norm(np.ptp(coordinates, axis=0)))
    if lag_width is None:
        if not reach > 0.0:
            raise ValueError("all samples lie at one place: give lag_width")
        lag_width = reach / (lag_count or 15)
    if lag_count is None:
        lag_count = int(np.clip(math.floor(reach / lag_width), 1, 500))
    return lag_width * np.arange(int(lag_count) + 1, dtype=float)


def clean_samples(
    coordinates: ArrayLike, values: ArrayLike, hole_ids: Any = None, weights: ArrayLike | None = None
) -> tuple[Array, Array, NDArray[Any], Array]:
    """Samples with a value, checked: coordinates (n, 3), values, hole names and weights with mean 1.

    Raises
    ------
    ValueError
        If shapes do not agree, a coordinate is not finite, a weight is negative, or fewer than 2 samples
        have a value.
    """
    xyz = np.array(coordinates, dtype=float)
    z = np.array(values, dtype=float)
    if xyz.ndim != 2 or xyz.shape[1] != 3:
        raise ValueError(f"coordinates must have the shape (n, 3), got {xyz.shape}")
    if z.shape != (len(xyz),):
        raise ValueError(f"values must have the shape ({len(xyz)},) of the coordinates, got {z.shape}")
    if hole_ids is None:
        names: NDArray[Any] = np.zeros(len(z), dtype=np.int64)
    else:
        names = np.asarray(hole_ids)
        if names.shape != z.shape:
            raise ValueError(f"hole_ids must have the shape {z.shape} of the values, got {names.shape}")
    w = np.ones(len(z)) if weights is None else np.array(weights, dtype=float)
    if w.shape != z.shape:
        raise ValueError(f"weights must have the shape {z.shape} of the values, got {w.shape}")
    if np.any(np.isinf(z)):
        raise ValueError("values must be finite or NaN (missing)")
    keep = ~np.isnan(z)
    if keep.sum() < 2:
        raise ValueError(f"values: at least 2 samples with a value are needed, got {int(keep.sum())}")
    xyz, z, names, w = xyz[keep], z[keep], names[keep], w[keep]
    if not np.all(np.isfinite(xyz)):
        bad = int(np.flatnonzero(~np.isfinite(xyz).all(axis=1))[0])
        raise ValueError(f"coordinates must be finite: sample {bad} of those with a value is not")
    if not np.all(np.isfinite(w)) or np.any(w < 0.0) or w.sum() <= 0.0:
        raise ValueError("weights must be finite, not negative, and not all zero")
    return xyz, z, names, w / w.mean()


def transformed(values: Array, measure: str, weights: Array) -> Array:
    """Values as the measure compares them: as they are, logs or normal scores.

    Raises
    ------
    ValueError
        If the measure is not known or needs values above zero.
    """
    if measure not in MEASURES:
        raise ValueError(f"measure must be one of {', '.join(MEASURES)}, got {measure!r}")
    if measure in ("logs", "pairwise_relative") and np.any(values <= 0.0):
        raise ValueError(
            f"measure {measure!r} needs values above zero, but {int((values <= 0).sum())} of {len(values)} are not"
        )
    if measure == "logs":
        return np.log(values)
    if measure == "normal_scores":
        from sms_resource.geostatistics.transforms import NormalScores

        return NormalScores.fit(values, weights).forward(values)
    return values


def prepare(xyz: Array, values: Array, names: NDArray[Any], weights: Array, centre: bool) -> PreparedSamples:
    """Centre the samples, sort them along their longest side and number the holes."""
    local = xyz - xyz.mean(axis=0)
    longest = int(np.argmax(np.ptp(local, axis=0)))
    axis_order = (longest, (longest + 1) % 3, (longest + 2) % 3)
    order = np.argsort(local[:, longest], kind="stable")
    unique, holes = np.unique(names.astype(str) if names.dtype == object else names, return_inverse=True)
    return PreparedSamples(
        coordinates=np.ascontiguousarray(local[order][:, axis_order]),
        values=np.ascontiguousarray((values - values.mean() if centre else values)[order]),
        weights=np.ascontiguousarray(weights[order]),
        holes=np.ascontiguousarray(holes[order].astype(np.int64)),
        hole_names=unique,
        order=order,
        axis_order=axis_order,
    )


def kernel_arguments(samples: PreparedSamples, requests: Sequence[PairRequest]) -> tuple[Any, ...]:
    """Arrays of the requests, in the order in which the kernels take them after the samples."""
    count = len(requests)
    most = max(len(request.edges) for request in requests)
    edges = np.full((count, most), np.inf)
    reach = max(float(request.edges[-1]) for request in requests)
    slack = 1e-9 * reach  # regular spacings fall on edges; rounding must not move them from lag to lag
    for row, request in enumerate(requests):
        edges[row, : len(request.edges)] = request.edges + slack
    frames = np.array([request.direction.axes[:, samples.axis_order] for request in requests])
    modes = {"any": 0, "within": 1, "across": 2}
    return (
        np.array([KIND_CODES[request.direction.kind] for request in requests], dtype=np.int64),
        np.ascontiguousarray(frames),
        np.array([request.direction.cosine for request in requests]),
        np.array([(r.direction.bandwidth_horizontal, r.direction.bandwidth_vertical) for r in requests]),
        np.array([modes[request.holes] for request in requests], dtype=np.int64),
        edges,
        np.array([len(request.edges) - 1 for request in requests], dtype=np.int64),
        reach + slack,
        slack,
    )


def pair_sums(
    samples: PreparedSamples, requests: Sequence[PairRequest], measure: str, by_hole: bool = False
) -> Array:
    """Sums of the kernels: (d, k, columns), or (holes, d, k, columns) of the pairs each hole takes part in."""
    from sms_resource.geostatistics import experimental_kernels as kernels

    code = {"pairwise_relative": kernels.RELATIVE_DIFFERENCE, "correlogram": kernels.CORRELATION}.get(
        measure, kernels.SQUARED_DIFFERENCE
    )
    arguments = kernel_arguments(samples, requests)
    shape = (len(requests), arguments[5].shape[1] - 1, kernels.COLUMNS)
    x, y, z = (np.ascontiguousarray(column) for column in samples.coordinates.T)
    head = (x, y, z, samples.values, samples.weights, samples.holes)
    if by_hole:
        out = np.zeros((len(samples.hole_names), *shape))
        by_hole_kernel: Any = kernels.sum_pairs_by_hole
        by_hole_kernel(*head, *arguments, code, out)
        return out
    out = np.zeros((GROUPS, *shape))
    kernel: Any = kernels.sum_pairs
    kernel(*head, *arguments, code, out)
    return out.sum(axis=0)


def gamma_of_sums(sums: Array, measure: str) -> Array:
    """The measure per lag from the sums of its pairs (..., columns)."""
    from sms_resource.geostatistics import experimental_kernels as kernels

    weight = sums[..., kernels.WEIGHT]
    with np.errstate(divide="ignore", invalid="ignore"):
        if measure == "correlogram":
            mean = sums[..., kernels.MEAN] / weight
            spread = sums[..., kernels.SQUARE] / weight - mean**2
            return 1.0 - (sums[..., kernels.PRODUCT] / weight - mean**2) / spread
        return sums[..., kernels.VALUE] / (2.0 * weight)
