"""Chimneys as a domain of their own: lighter than the mound, and badly seen by a grid."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.blocks.layers import LayeredDomains

Array = NDArray[Any]


def chimneys_from_polygons(top: SurfaceGrid, polygons: Any) -> SurfaceGrid:
    """Depth in m from the seafloor to the foot of the chimneys, inside polygons with a height.

    Parameters
    ----------
    top : SurfaceGrid
        Seafloor that already holds the chimneys; the lattice of the result.
    polygons : GeoDataFrame
        geometry and height_m.

    Returns
    -------
    SurfaceGrid
        Zero outside the polygons; the greatest height where they overlap.

    Raises
    ------
    ValueError
        If ``height_m`` is missing or not positive.
    """
    import shapely

    if "height_m" not in polygons:
        raise ValueError("polygons lacks the column height_m")
    x, y = top.mesh()
    depth = np.zeros(top.shape)
    for geometry, height in zip(
        polygons.geometry, polygons["height_m"].to_numpy(dtype=np.float64), strict=True
    ):
        if not (math.isfinite(height) and height > 0):
            raise ValueError(f"polygons column height_m must be positive, not {height!r}")
        if geometry is None or geometry.is_empty:
            continue
        shapely.prepare(geometry)
        depth = np.where(shapely.contains_xy(geometry, x, y), np.maximum(depth, height), depth)
    return top.with_values(depth)


def chimneys_from_relief(
    top: SurfaceGrid, *, width_m: float = 15.0, least_height_m: float = 2.0
) -> SurfaceGrid:
    """Depth in m from the seafloor to the foot of the chimneys, from the grid minus a smoothed seafloor.

    The smoothed seafloor is a morphological opening (the highest surface that a flat disc of ``width_m`` can
    touch from below), itself smoothed by a mean: it passes under whatever is narrower than the disc and keeps
    the slope of the mound.

    Parameters
    ----------
    top : SurfaceGrid
    width_m : float
        Chimneys and chimney clusters are narrower than this.
    least_height_m : float
        What stands out less is roughness.

    Returns
    -------
    SurfaceGrid
        Zero where there is no chimney.

    Raises
    ------
    ValueError
        If a length is not positive.
    """
    from scipy.ndimage import grey_opening, uniform_filter

    for name, value in (("width_m", width_m), ("least_height_m", least_height_m)):
        if not (math.isfinite(value) and value > 0):
            raise ValueError(f"{name} must be a positive length in m, not {value!r}")
    good = np.isfinite(top.values)
    if not good.any():
        return top.with_values(np.zeros(top.shape))
    values = np.where(good, top.values, np.nanmin(top.values))
    # On a slope a flat disc rests on its low side, so the plane of the slope is taken out first.
    x, y = top.mesh()
    plane = np.column_stack([np.ones(int(good.sum())), x[good] - top.x0, y[good] - top.y0])
    fit = np.linalg.lstsq(plane, values[good], rcond=None)[0]
    trend = fit[0] + fit[1] * (x - top.x0) + fit[2] * (y - top.y0)
    half_x, half_y = max(1, round(0.5 * width_m / top.dx)), max(1, round(0.5 * width_m / top.dy))
    rows, columns = np.mgrid[-half_y : half_y + 1, -half_x : half_x + 1]
    disc = (rows / half_y) ** 2 + (columns / half_x) ** 2 <= 1.0
    opened = grey_opening(values - trend, footprint=disc, mode="nearest")
    smooth = uniform_filter(opened, size=(half_y, half_x), mode="nearest") + trend
    height = values - smooth
    return top.with_values(np.where(good & (height >= least_height_m), height, 0.0))


def with_chimneys(domains: LayeredDomains, depth: SurfaceGrid, name: str = "chimney") -> LayeredDomains:
    """Domains with chimneys on top of them.

    Parameters
    ----------
    domains : LayeredDomains
    depth : SurfaceGrid
        Depth in m from the seafloor to the foot of the chimneys, on the lattice of the body.
    name : str
        Name of the new domain.
    """
    below = domains.depths(depth)
    contacts = [depth, *(depth.with_values(np.maximum(contact, depth.values)) for contact in below)]
    return LayeredDomains((name, *domains.names), tuple(contacts))
