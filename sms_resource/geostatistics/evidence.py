"""What the samples can say about continuity: spacing, lags, pairs, and whether they suffice."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from sms_resource.geostatistics.directions import Direction
from sms_resource.geostatistics.experimental import (
    ExperimentalVariogram,
    assemble,
    down_hole_axis,
    experimental_variograms,
)
from sms_resource.geostatistics.pairs import (
    PairRequest,
    PreparedSamples,
    clean_samples,
    pair_sums,
    prepare,
    transformed,
)
from sms_resource.geostatistics.transforms import RawCorrelation, weighted_skewness, weighted_variance
from sms_resource.geostatistics.variogram_settings import VariogramSettings

Array = NDArray[np.float64]
MOST_PAIR_SEPARATIONS = 4000


@dataclass(frozen=True)
class Evidence:
    """Samples of one metal in one domain and their experimental variograms.

    Attributes
    ----------
    coordinates, values, weights, hole_names : arrays of n samples with a value
    measured : (n,) float
        The values as the measure compares them: themselves, logs or normal scores.
    variance : float
        Weighted variance of the values.
    variance_of_measure : float
        Total sill in the unit of the measure: the variance of logs or scores; 1 for a correlogram.
    spacing_m : float
        Median distance of neighbouring samples in a hole; NaN where no hole has two.
    hole_spacing_m : float
        Median plan distance of a hole to its nearest; NaN with fewer than two holes.
    hole_count : int
    hole_axis : (3,) float
        Unit vector along which the samples of single holes spread.
    in_line : bool
        Whether the holes lie in one line in plan.
    line_azimuth : float
        Azimuth of that line, or of the longest side of the holes.
    roles : tuple of str
        "down_hole", "plane", "major" or "semi", in the order of requests and variograms.
    """

    coordinates: Array
    values: Array
    measured: Array
    weights: Array
    hole_names: NDArray[Any]
    variance: float
    variance_of_measure: float
    spacing_m: float
    hole_spacing_m: float
    hole_count: int
    hole_axis: Array
    in_line: bool
    line_azimuth: float
    roles: tuple[str, ...]
    requests: tuple[PairRequest, ...]
    variograms: tuple[ExperimentalVariogram, ...]
    prepared: PreparedSamples
    sums: Array
    hole_sums: Array
    settings: VariogramSettings

    @cached_property
    def raw_correlation(self) -> RawCorrelation | None:
        """Way back from the correlation of normal scores or logs; None for other measures."""
        if self.settings.measure not in ("normal_scores", "logs"):
            return None
        return RawCorrelation(self.settings.measure, self.values, self.weights)

    def of(self, role: str) -> ExperimentalVariogram | None:
        """Experimental variogram of a role; None where there is none."""
        return self.variograms[self.roles.index(role)] if role in self.roles else None

    def usable(self, role: str) -> NDArray[np.bool_]:
        """Which lags of a role are fitted: enough pairs and, in the plane, enough of the holes."""
        variogram = self.variograms[self.roles.index(role)]
        chosen = variogram.pairs >= self.settings.min_pairs
        if role != "down_hole" and variogram.holes is not None:
            chosen &= variogram.holes >= self.settings.min_hole_share * self.hole_count
        return chosen

    def enough(self, role: str) -> bool:
        """Whether a role has the lags that a fit needs."""
        return role in self.roles and int(self.usable(role).sum()) >= self.settings.min_lags

    def distances(self, role: str) -> Array:
        """Mean pair distances of the lags of a role that are fitted."""
        return self.variograms[self.roles.index(role)].distance[self.usable(role)]

    def fitted_lags(self, variograms: Sequence[ExperimentalVariogram]) -> dict[str, ExperimentalVariogram]:
        """Variograms by role with the lags that are not fitted taken out; for a jackknife without one hole."""
        return {
            role: replace(variogram, gamma=np.where(self.usable(role), variogram.gamma, np.nan))
            for role, variogram in zip(self.roles, variograms)
        }

    def without_hole(self, hole: int) -> tuple[ExperimentalVariogram, ...]:
        """Experimental variograms without the pairs of one hole, which are taken off the sums."""
        return tuple(
            assemble(
                request, self.sums[row] - self.hole_sums[hole, row], self.settings.measure, self.hole_axis
            )
            for row, request in enumerate(self.requests)
        )

    def pair_separations(self) -> Array:
        """Separations (m, 3) of a fixed draw of pairs of samples, drawn by their weights."""
        generator = np.random.default_rng(0)
        share = self.weights / self.weights.sum()
        draw = generator.choice(len(share), size=(MOST_PAIR_SEPARATIONS, 2), p=share)
        return self.coordinates[draw[:, 0]] - self.coordinates[draw[:, 1]]


def _hole_codes(names: NDArray[Any]) -> NDArray[np.intp]:
    return np.unique(names.astype(str) if names.dtype == object else names, return_inverse=True)[1]


def sample_spacing(coordinates: Array, hole_names: NDArray[Any]) -> tuple[float, float]:
    """Median distance of neighbours in a hole, and the 90th percentile of the lengths of the holes; NaN without."""
    codes = _hole_codes(hole_names)
    steps, lengths = [], []
    for code in range(int(codes.max()) + 1):
        points = coordinates[codes == code]
        if len(points) < 2:
            continue
        along = points[np.argsort(points @ down_hole_axis(points, np.zeros(len(points))), kind="stable")]
        distances = np.linalg.norm(np.diff(along, axis=0), axis=1)
        steps.append(distances[distances > 0.0])
        lengths.append(distances.sum())
    flat = np.concatenate(steps) if steps else np.empty(0)
    if flat.size == 0:
        return math.nan, math.nan
    return float(np.median(flat)), float(np.percentile(lengths, 90.0))


def hole_layout(coordinates: Array, hole_names: NDArray[Any]) -> tuple[float, bool, float, float]:
    """Median plan distance to the nearest hole, whether holes lie in one line, its azimuth, and the extent in m."""
    codes = _hole_codes(hole_names)
    counts = np.bincount(codes)
    centres = np.column_stack(
        [np.bincount(codes, weights=coordinates[:, axis]) / counts for axis in range(2)]
    )
    if len(centres) < 2:
        return math.nan, True, math.nan, 0.0
    from scipy.spatial import cKDTree

    nearest = cKDTree(centres).query(centres, k=2)[0][:, 1]
    local = centres - centres.mean(axis=0)
    _, sizes, axes = np.linalg.svd(local, full_matrices=False)
    azimuth = math.degrees(math.atan2(axes[0, 0], axes[0, 1])) % 180.0
    in_line = len(centres) < 3 or bool(sizes[1] <= 0.05 * sizes[0])
    positive = nearest[nearest > 0.0]
    spacing = float(np.median(positive)) if positive.size else math.nan
    return spacing, in_line, azimuth, float(np.linalg.norm(np.ptp(centres, axis=0)))


def _requests(
    settings: VariogramSettings, spacing: float, length: float, hole_spacing: float, extent: float
) -> tuple[tuple[str, ...], tuple[PairRequest, ...]]:
    roles, requests = [], []
    if math.isfinite(spacing):
        width = settings.down_hole_lag_m or spacing
        count = settings.down_hole_lag_count or int(np.clip(round(0.5 * length / width), 4, 30))
        edges = (width * (np.arange(count + 1) + 0.5)).astype(np.float64)
        edges[0] = 0.0 if settings.down_hole_lag_m else 0.25 * width
        roles.append("down_hole")
        requests.append(PairRequest(Direction.omnidirectional(), edges, "within"))
    if math.isfinite(hole_spacing):
        width = settings.lag_width_m or hole_spacing
        count = settings.lag_count or int(np.clip(round(0.5 * extent / width), 3, 30))
        edges = np.append(0.0, width * (np.arange(count) + 0.5)).astype(np.float64)
        band = settings.bandwidth_m or (spacing if math.isfinite(spacing) else math.inf)
        angles = {"azimuth": settings.azimuth, "plunge": settings.plunge, "tilt": settings.tilt}
        if settings.continuity == "level":
            roles.append("plane")
            plane = Direction(
                "plane", **angles, angle_tolerance=settings.angle_tolerance, bandwidth_vertical=band
            )
            requests.append(PairRequest(plane, edges, "across"))
        else:
            for role in ("major", "semi"):
                axis = Direction("plane", **angles).axes[0 if role == "major" else 1]
                roles.append(role)
                requests.append(
                    PairRequest(
                        Direction(
                            "directional",
                            azimuth=math.degrees(math.atan2(axis[0], axis[1])) % 360.0,
                            plunge=-math.degrees(math.asin(float(np.clip(axis[2], -1.0, 1.0)))),
                            tilt=_tilt_for(axis, Direction("plane", **angles).axes[2]),
                            angle_tolerance=settings.directional_tolerance,
                            bandwidth_vertical=band,
                        ),
                        edges,
                        "across",
                    )
                )
    return tuple(roles), tuple(requests)


def _tilt_for(axis: Array, normal: Array) -> float:
    """Tilt with which a direction along ``axis`` has ``normal`` as its minor axis."""
    azimuth = math.degrees(math.atan2(axis[0], axis[1]))
    plunge = -math.degrees(math.asin(float(np.clip(axis[2], -1.0, 1.0))))
    _, semi, minor = Direction("plane", azimuth=azimuth, plunge=plunge).axes
    return math.degrees(math.atan2(float(normal @ semi), float(normal @ minor)))


def gather_evidence(
    coordinates: ArrayLike,
    values: ArrayLike,
    hole_ids: Any,
    settings: VariogramSettings,
    weights: ArrayLike | None = None,
) -> Evidence:
    """Experimental variograms that the settings ask for, and the layout of the samples.

    Without ``hole_ids`` every sample is a hole of its own.

    Raises
    ------
    ValueError
        As :func:`experimental_variogram`.
    """
    names = np.arange(len(np.asarray(values))) if hole_ids is None else np.asarray(hole_ids)
    xyz, z, names, w = clean_samples(coordinates, values, names, weights)
    if settings.measure == "auto":
        skewed = weighted_skewness(z, w) > settings.skewness_for_scores
        settings = replace(settings, measure="normal_scores" if skewed else "semivariogram")
    spacing, length = sample_spacing(xyz, names)
    hole_spacing, in_line, azimuth, extent = hole_layout(xyz, names)
    roles, requests = _requests(settings, spacing, length, hole_spacing, extent)
    axis = down_hole_axis(xyz, names)
    t = transformed(z, settings.measure, w)
    prepared = prepare(xyz, t, names, w, centre=settings.measure != "pairwise_relative")
    variograms: tuple[ExperimentalVariogram, ...] = ()
    sums, by_hole = np.empty((0, 0, 0)), np.empty((0, 0, 0, 0))
    if requests:
        sums = pair_sums(prepared, requests, settings.measure)
        by_hole = pair_sums(prepared, requests, settings.measure, by_hole=True)
        variograms = tuple(
            assemble(request, sums[row], settings.measure, axis) for row, request in enumerate(requests)
        )
        if settings.estimator != "matheron":
            variograms = experimental_variograms(
                xyz, z, requests, hole_ids=names, measure=settings.measure, estimator=settings.estimator
            )
        counts = (by_hole[..., 0] > 0.0).sum(axis=0)
        variograms = tuple(
            replace(item, holes=counts[row, : len(item.pairs)]) for row, item in enumerate(variograms)
        )
    relative = settings.measure in ("correlogram", "pairwise_relative")
    return Evidence(
        coordinates=xyz,
        values=z,
        measured=t,
        weights=w,
        hole_names=names,
        variance=weighted_variance(z, w),
        variance_of_measure=1.0 if relative else weighted_variance(t, w),
        spacing_m=spacing,
        hole_spacing_m=hole_spacing,
        hole_count=len(np.unique(_hole_codes(names))),
        hole_axis=axis,
        in_line=in_line,
        line_azimuth=azimuth,
        roles=roles,
        requests=requests,
        variograms=variograms,
        prepared=prepared,
        sums=sums,
        hole_sums=by_hole,
        settings=settings,
    )
