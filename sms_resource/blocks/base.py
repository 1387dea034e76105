"""Thickness of the body on a lattice, from contacts, by kriging, a thin-plate spline or linearly."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.blocks.profile import FLOOR, EdgeProfile, edge_profile
from sms_resource.blocks.thickness_draws import Quadrature, fit_thickness
from sms_resource.blocks.thickness_fit import ThicknessFit
from sms_resource.blocks.thickness_model import Sites, ThicknessSettings, parameter_sets
from sms_resource.blocks.threads import on_one_thread

Array = NDArray[Any]
METHODS = ("kriging", "spline", "linear")
KERNEL_BUDGET = (
    60_000_000  # covariances evaluated; beyond it the smooth surface is interpolated between nodes
)
LEAST_RELIEF_M = 0.3  # relief flatter than this says nothing of the thickness
QUADRATURE_NODES = 400


@dataclass(frozen=True, eq=False)
class ThicknessData:
    """Data of the base, as thickness below the seafloor.

    ``x``, ``y``, ``thickness`` (n,) in m; ``is_open`` where thickness is a lower bound; ``sigma`` is zero for
    contacts in holes and the error in m of other data.
    """

    x: Array
    y: Array
    thickness: Array
    is_open: NDArray[np.bool_]
    sigma: Array

    def __len__(self) -> int:
        return len(self.x)

    def select(self, index: Any) -> ThicknessData:
        """Part of the data."""
        return ThicknessData(
            self.x[index], self.y[index], self.thickness[index], self.is_open[index], self.sigma[index]
        )


@dataclass(frozen=True, eq=False)
class Interpolation:
    """Thickness on the nodes of a lattice, all SurfaceGrids of one shape.

    ``thickness``; ``known``, the same with open holes held at their ends; ``sigma`` (NaN where the method
    gives none); ``volume_sigma_m3``; ``record``, what was fitted.
    """

    thickness: SurfaceGrid
    known: SurfaceGrid
    sigma: SurfaceGrid
    volume_sigma_m3: float
    record: dict[str, Any] = field(default_factory=dict)


@on_one_thread
def interpolate_thickness(
    top: SurfaceGrid,
    outline: Any,
    data: ThicknessData,
    *,
    method: str = "kriging",
    settings: ThicknessSettings | None = None,
    edge_thickness_m: float | None = 0.0,
    drift: SurfaceGrid | None = None,
    spacing_m: float | None = None,
) -> Interpolation:
    """Interpolate thickness over an outline.

    Parameters
    ----------
    top : SurfaceGrid
        Seafloor on the lattice.
    outline : shapely polygon or multipolygon
    data : ThicknessData
        Thickness in m at holes and other points.
    method : "kriging" | "spline" | "linear"
    settings : ThicknessSettings, optional
        What is fixed in the kriging.
    edge_thickness_m : float or None
        Thickness at the outline; None where the outline cuts through the body and says nothing.
    drift : SurfaceGrid, optional
        A thickness to start from, on the lattice, such as one from geophysics; contacts then correct it.
    spacing_m : float, optional
        Spacing of the holes, for the range of the short-scale field.
    """
    if method not in METHODS:
        raise ValueError(f"method must be one of {', '.join(METHODS)}, not {method!r}")
    settings = settings or ThicknessSettings()
    profile = edge_profile(top, outline)
    if method != "kriging":
        return _plain(top, outline, profile, data, method, edge_thickness_m, drift)
    # Round a thickness from the user, or where the outline only cuts, the field does not die out at the edge.
    edge = edge_thickness_m is not None and drift is None
    offset = drift if drift is not None else top.with_values(np.full(top.shape, edge_thickness_m or 0.0))
    sites = Siting(top, outline, profile, edge, spacing_m)
    size = math.sqrt(outline.area / math.pi)
    relief = edge and sites.relief_scale_m > 0
    shifted = data.thickness - offset.sample(data.x, data.y)
    positive = drift is None and bool(np.all(shifted >= 0))
    candidates = list(parameter_sets(settings, size, sites.short_range_m, relief, edge, positive))
    places = sites.quadrature(offset)
    holes = sites.at(data.x, data.y)
    fit = fit_thickness(
        holes, shifted, data.is_open, data.sigma, candidates, places, settings, positive=positive
    )
    mean, known, sigma = sites.estimate(fit.likeliest())
    mean, known = np.maximum(mean + offset.values, 0.0), np.maximum(known + offset.values, 0.0)
    if edge and not edge_thickness_m:
        mean[~profile.inside] = known[~profile.inside] = 0.0
    record = {"method": "kriging", "edge_thickness_m": edge_thickness_m, "short_range_m": sites.short_range_m}
    return Interpolation(
        top.with_values(mean),
        top.with_values(np.minimum(known, mean)),
        top.with_values(sigma),
        fit.volume_sigma_m3,
        record | fit.record(),
    )


class Siting:
    """Places on a lattice, described as the thickness model wants them.

    Parameters
    ----------
    top : SurfaceGrid
    outline : shapely geometry
    profile : EdgeProfile
    edge : bool
        Whether thickness is known at the outline.
    spacing_m : float or None
        Spacing of the holes.
    """

    def __init__(
        self, top: SurfaceGrid, outline: Any, profile: EdgeProfile, edge: bool, spacing_m: float | None
    ) -> None:
        from scipy.ndimage import binary_dilation

        self.top, self.outline, self.profile, self.edge = top, outline, profile, edge
        self.near = binary_dilation(profile.inside, iterations=2)
        cell = max(top.dx, top.dy)
        self.short_range_m = max(2.5 * cell, 0.35 * spacing_m if spacing_m else 0.0)
        self.relief_scale_m = 0.0
        if profile.relief is not None and profile.inside.any():
            heights = profile.relief.values[profile.inside]
            if np.std(heights) > LEAST_RELIEF_M:
                self.relief_scale_m = float(np.abs(heights).max())

    def at(self, x: Array, y: Array) -> Sites:
        """Sites at points (n,)."""
        xy = np.column_stack([np.asarray(x, dtype=np.float64), np.asarray(y, dtype=np.float64)])
        if not self.edge:
            ones = np.ones(len(xy))
            return Sites(xy, ones, ones, np.zeros(len(xy)))
        dome = np.nan_to_num(self.profile.dome.sample(x, y))
        distance = np.nan_to_num(self.profile.distance.sample(x, y))
        relief = np.zeros(len(xy))
        if self.relief_scale_m > 0 and self.profile.relief is not None:
            relief = np.nan_to_num(self.profile.relief.sample(x, y)) / self.relief_scale_m
        taper = np.sqrt(np.minimum(distance / self.short_range_m, 1.0))
        return Sites(xy, np.maximum(dome, FLOOR), np.maximum(taper, 0.05), relief)

    def _lattice(self, nodes: int, mask: NDArray[np.bool_]) -> tuple[int, Sites]:
        """A step, and the sites of every step-th node (in both directions) under a mask."""
        step = max(1, math.ceil(math.sqrt(max(int(mask.sum()), 1) / nodes)))
        x, y = self.top.mesh()
        part = mask[::step, ::step]
        return step, self.at(x[::step, ::step][part], y[::step, ::step][part])

    def quadrature(self, offset: SurfaceGrid) -> Quadrature:
        """Points inside the outline, the area in m2 that each stands for, and the offset there."""
        sites = self._lattice(QUADRATURE_NODES, self.profile.inside)[1]
        if len(sites) < 20:
            sites = self._lattice(10 * QUADRATURE_NODES, self.profile.inside)[1]
        areas = np.full(len(sites), self.outline.area / max(len(sites), 1))
        return Quadrature(sites, areas, offset.sample(sites.xy[:, 0], sites.xy[:, 1]))

    def _spread(self, step: int, mask: NDArray[np.bool_], values: Array) -> Array:
        """Values of every step-th node under a mask, interpolated to all nodes; zero elsewhere."""
        coarse = np.zeros(mask[::step, ::step].shape)
        coarse[mask[::step, ::step]] = values
        if step == 1:
            return coarse
        grid = SurfaceGrid(self.top.x0, self.top.y0, self.top.dx * step, self.top.dy * step, coarse)
        x, y = self.top.mesh()
        return grid.sample(np.minimum(x, grid.x[-1]), np.minimum(y, grid.y[-1]))

    def estimate(self, fit: ThicknessFit) -> tuple[Array, Array, Array]:
        """Expected thickness, the same with open holes held at their ends, and sigma, on all nodes."""
        data = len(fit.sets[0].holes)
        nodes = max(2_000, KERNEL_BUDGET // max(1, data * (data + 20) * len(fit.sets)))
        step, sites = self._lattice(nodes, self.near)
        mean, known, sigma = (self._spread(step, self.near, part) for part in fit.estimate(sites))
        return mean, known, sigma


def _plain(
    top: SurfaceGrid,
    outline: Any,
    profile: EdgeProfile,
    data: ThicknessData,
    method: str,
    edge_thickness_m: float | None,
    drift: SurfaceGrid | None,
) -> Interpolation:
    """Thin-plate spline or linear interpolation, for comparison; open holes by active constraints."""
    offset = drift if drift is not None else top.with_values(np.zeros(top.shape))
    x, y = top.mesh()
    points = np.column_stack([data.x, data.y])
    shifted = data.thickness - offset.sample(data.x, data.y)
    rim = _rim_points(outline, max(top.dx, 0.1 * math.sqrt(outline.area)))
    rim_values = np.zeros(len(rim)) if drift is not None else np.full(len(rim), edge_thickness_m or 0.0)
    if edge_thickness_m is None and drift is None:
        rim, rim_values = rim[:0], rim_values[:0]
    nodes = np.column_stack([x.ravel(), y.ravel()])

    def surface(active: NDArray[np.bool_], at: Array) -> Array:
        known_points = np.vstack([points[active], rim])
        known_values = np.concatenate([shifted[active], rim_values])
        return _interpolate(known_points, known_values, at, method)

    active = ~data.is_open
    for _ in range(len(data) + 1):
        short = ~active & (surface(active, points) < shifted)
        if not short.any():
            break
        active |= short
    mean = np.maximum(surface(active, nodes).reshape(top.shape) + offset.values, 0.0)
    known = np.maximum(surface(np.ones(len(data), dtype=bool), nodes).reshape(top.shape) + offset.values, 0.0)
    if edge_thickness_m == 0.0 and drift is None:
        mean[~profile.inside] = known[~profile.inside] = 0.0
    empty = top.with_values(np.full(top.shape, np.nan))
    record = {"method": method, "edge_thickness_m": edge_thickness_m}
    return Interpolation(
        top.with_values(mean), top.with_values(np.minimum(known, mean)), empty, math.nan, record
    )


def _rim_points(outline: Any, step_m: float) -> Array:
    """Points (n, 2) along every ring of the outline."""
    import shapely

    lines = shapely.get_parts(shapely.segmentize(outline.boundary, step_m))
    return np.unique(np.vstack([shapely.get_coordinates(line) for line in lines]), axis=0)


def _interpolate(points: Array, values: Array, at: Array, method: str) -> Array:
    """Thin-plate spline or triangulated plane through points; coincident points are averaged."""
    unique, inverse = np.unique(np.round(points, 6), axis=0, return_inverse=True)
    inverse = inverse.reshape(-1)
    mean = np.bincount(inverse, weights=values) / np.bincount(inverse)
    flat = len(unique) < 3 or np.linalg.matrix_rank(unique - unique.mean(axis=0), tol=1e-9) < 2
    if flat:  # one point, or points on a line, carry no surface
        return np.full(len(at), float(mean.mean()) if len(mean) else 0.0)
    if method == "spline":
        from scipy.interpolate import RBFInterpolator

        neighbours = 60 if len(unique) > 400 else None
        return np.asarray(RBFInterpolator(unique, mean, neighbors=neighbours, kernel="thin_plate_spline")(at))
    from scipy.interpolate import LinearNDInterpolator, NearestNDInterpolator

    out = np.asarray(LinearNDInterpolator(unique, mean)(at))
    outside = np.isnan(out)
    if outside.any():
        out[outside] = NearestNDInterpolator(unique, mean)(at[outside])
    return out
