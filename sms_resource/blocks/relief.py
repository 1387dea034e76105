"""Slope, roughness and shading of a surface."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sms_resource.blocks.grid import SurfaceGrid

Array = NDArray[Any]


def slope(grid: SurfaceGrid, footprint_m: float = 5.0) -> SurfaceGrid:
    """Slope in degrees of the plane that fits the surface best over a machine's footprint.

    A machine feels the plane under its tracks, not the facet of one cell, so the plane is fitted by least
    squares to all cells of a square window.

    Parameters
    ----------
    grid : SurfaceGrid
    footprint_m : float
        Edge of the square in m; at least 3 cells are taken on each side.

    Returns
    -------
    SurfaceGrid
        Degrees; NaN where less than a quarter of the window has values.
    """
    east, north, _ = _planes(grid, footprint_m)
    return grid.with_values(np.degrees(np.arctan(np.hypot(east, north))))


def roughness(grid: SurfaceGrid, footprint_m: float = 5.0) -> SurfaceGrid:
    """Root mean square distance in m, along the vertical, of the cells from that plane."""
    return grid.with_values(_planes(grid, footprint_m)[2])


def gradient(grid: SurfaceGrid, footprint_m: float) -> tuple[Array, Array]:
    """Rise per metre toward east and toward north of that plane, each (ny, nx)."""
    east, north, _ = _planes(grid, footprint_m)
    return east, north


def hillshade(
    grid: SurfaceGrid, azimuth: float = 315.0, altitude: float = 45.0, exaggeration: float = 1.0
) -> Array:
    """Brightness 0 to 1 of a surface that scatters light evenly (Lambert), with Horn's (1981) gradient.

    Parameters
    ----------
    grid : SurfaceGrid
    azimuth, altitude : float
        Direction of the light, degrees clockwise from north, and its height over the horizon in degrees.
    exaggeration : float
        Vertical exaggeration of the relief.

    Returns
    -------
    ndarray (ny, nx)
        NaN where the surface has no value.

    References
    ----------
    Horn, B.K.P. (1981). Hill shading and the reflectance map. Proceedings of the IEEE 69, 14-47.
    """
    from scipy.ndimage import convolve

    if min(grid.shape) < 2:
        return np.where(np.isfinite(grid.values), math.sin(math.radians(altitude)), np.nan)
    empty = np.isnan(grid.values)
    level = 0.0 if empty.all() else float(np.nanmean(grid.values))
    values = np.where(empty, level, grid.values)
    weights = np.array([[-1.0, 0.0, 1.0], [-2.0, 0.0, 2.0], [-1.0, 0.0, 1.0]])
    # scipy convolves, which turns the weights round: hence the sign.
    east = -convolve(values, weights, mode="nearest") / (8 * grid.dx) * exaggeration
    north = -convolve(values, weights.T, mode="nearest") / (8 * grid.dy) * exaggeration
    light, height = math.radians(azimuth), math.radians(altitude)
    toward = np.array(
        [math.sin(light) * math.cos(height), math.cos(light) * math.cos(height), math.sin(height)]
    )
    shade = (toward[2] - toward[0] * east - toward[1] * north) / np.sqrt(1.0 + east**2 + north**2)
    return np.where(empty, np.nan, np.clip(shade, 0.0, 1.0))


def _planes(grid: SurfaceGrid, footprint_m: float) -> tuple[Array, Array, Array]:
    """Least-squares plane in the window round each cell: slope east, slope north, rms misfit."""
    if not math.isfinite(footprint_m) or footprint_m <= 0:
        raise ValueError(f"footprint_m must be a positive length in m, not {footprint_m!r}")
    half_x = max(1, round(0.5 * (footprint_m / grid.dx - 1)))
    half_y = max(1, round(0.5 * (footprint_m / grid.dy - 1)))
    x = grid.dx * np.arange(-half_x, half_x + 1.0)
    y = grid.dy * np.arange(-half_y, half_y + 1.0)
    good = np.isfinite(grid.values)
    level = float(np.mean(grid.values[good])) if good.any() else 0.0
    z = np.where(good, grid.values - level, 0.0)  # small numbers keep the sums of squares exact
    m = good.astype(np.float64)
    ones_x, ones_y = np.ones(x.size), np.ones(y.size)

    def window(field: Array, along_x: Array, along_y: Array) -> Array:
        from scipy.ndimage import correlate1d

        rows = correlate1d(field, along_x, axis=1, mode="constant")
        return correlate1d(rows, along_y, axis=0, mode="constant")

    n = window(m, ones_x, ones_y)
    enough = good & (n >= max(3.0, 0.25 * x.size * y.size))
    safe = np.where(n > 0, n, 1.0)
    mx, my, mz = (window(f, a, b) / safe for f, a, b in ((m, x, ones_y), (m, ones_x, y), (z, ones_x, ones_y)))
    xx = window(m, x * x, ones_y) / safe - mx * mx
    yy = window(m, ones_x, y * y) / safe - my * my
    xy = window(m, x, y) / safe - mx * my
    xz = window(z, x, ones_y) / safe - mx * mz
    yz = window(z, ones_x, y) / safe - my * mz
    zz = window(z * z, ones_x, ones_y) / safe - mz * mz
    determinant = xx * yy - xy * xy
    enough &= determinant > 1e-9 * (grid.dx * grid.dy) ** 2
    determinant = np.where(enough, determinant, 1.0)
    east = (xz * yy - yz * xy) / determinant
    north = (yz * xx - xz * xy) / determinant
    misfit = np.sqrt(np.maximum(zz - east * xz - north * yz, 0.0))
    return tuple(np.where(enough, field, np.nan) for field in (east, north, misfit))  # type: ignore[return-value]
