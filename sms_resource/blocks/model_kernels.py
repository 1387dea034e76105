"""Column integration: how much of the body lies in every block, layer by layer.

Each column of blocks is split in plan into n x n sub-columns that follow the block grid. In a sub-column the
surfaces are sampled at the centroid of its part inside the outline, and the layers between them are clipped
exactly against the floors and roofs of the blocks.
"""

from __future__ import annotations

from typing import Any

import numba
import numpy as np
from numpy.typing import NDArray

Array = NDArray[Any]


@numba.njit(cache=True)
def _bilinear(values: Array, u: float, v: float) -> float:
    """Bilinear value at fractional column u and row v; NaN outside the nodes."""
    ny, nx = values.shape
    if u < -1e-9 or v < -1e-9 or u > nx - 1 + 1e-9 or v > ny - 1 + 1e-9:
        return np.nan
    left = min(max(int(np.floor(u)), 0), nx - 2)
    low = min(max(int(np.floor(v)), 0), ny - 2)
    fu, fv = u - left, v - low
    a = values[low, left] * (1.0 - fu) + values[low, left + 1] * fu
    b = values[low + 1, left] * (1.0 - fu) + values[low + 1, left + 1] * fu
    return a * (1.0 - fv) + b * fv


@numba.njit(cache=True)
def column_ranges(
    area: Array,
    sub_s: Array,
    sub_t: Array,
    split: int,
    first_row: int,
    size: Array,
    axes: Array,
    origin: Array,
    lattice: Array,
    top: Array,
    thickness: Array,
    nk: int,
    lowest: Array,
    highest: Array,
) -> None:
    """Lowest and highest block of each column that the body touches; highest < lowest where it does not.

    Parameters
    ----------
    area, sub_s, sub_t : ndarray (rows * split, ni * split)
        Share of each sub-column inside the outline and the centroid of that part (0 to 1).
    split, first_row : int
        Sub-columns along a side of a block, and the row of blocks that is row 0 here.
    size, axes, origin : ndarray
        Block size (3,), unit vectors of i and j in plan (2, 2), lower corner of the grid (3,).
    lattice : ndarray (4,)
        x0, y0, dx, dy of the surfaces.
    top, thickness : ndarray (ny, nx)
    nk : int
        Blocks on top of each other.
    lowest, highest : ndarray (rows, ni) of int
    """
    rows, ni = lowest.shape
    for j in range(rows):
        for i in range(ni):
            lowest[j, i], highest[j, i] = nk, -1
            for b in range(split):
                for a in range(split):
                    r, c = j * split + b, i * split + a
                    if area[r, c] <= 0.0:
                        continue
                    p = (c + sub_s[r, c]) * size[0] / split
                    q = (first_row * split + r + sub_t[r, c]) * size[1] / split
                    x = origin[0] + p * axes[0, 0] + q * axes[1, 0]
                    y = origin[1] + p * axes[0, 1] + q * axes[1, 1]
                    u, v = (x - lattice[0]) / lattice[2], (y - lattice[1]) / lattice[3]
                    roof, depth = _bilinear(top, u, v), _bilinear(thickness, u, v)
                    if not depth > 0.0 or np.isnan(roof):
                        continue
                    high = int(np.floor((roof - origin[2]) / size[2]))
                    low = int(np.floor((roof - depth - origin[2]) / size[2]))
                    lowest[j, i] = min(lowest[j, i], max(low, 0))
                    highest[j, i] = max(highest[j, i], min(high, nk - 1))


@numba.njit(cache=True)
def fill_columns(
    area: Array,
    sub_s: Array,
    sub_t: Array,
    split: int,
    first_row: int,
    size: Array,
    axes: Array,
    origin: Array,
    lattice: Array,
    top: Array,
    thickness: Array,
    known: Array,
    distance: Array,
    reach: float,
    layers: Array,
    lowest: Array,
    start: Array,
    count: Array,
    domain_volume: Array,
    sideways: Array,
    downwards: Array,
    depth_moment: Array,
) -> float:
    """Add the body's volume to its blocks; returns the volume in m3 that fell outside the grid.

    Parameters are those of :func:`column_ranges`, and:

    known, distance : ndarray (ny, nx)
        Thickness to the last sulphide, and distance to the nearest hole, in m.
    reach : float
        Beyond this distance everything is extrapolated sideways.
    layers : ndarray (d - 1, ny, nx)
        Depth below the seafloor, in m, of the contacts between d domains, from the top down.
    start, count : ndarray (rows, ni) of int
        Place of each column's first block in the outputs, and its number of blocks.
    domain_volume : ndarray (d, n)
    sideways, downwards, depth_moment : ndarray (n,)
        Volume in m3 of both kinds of extrapolation; integral of the depth below the seafloor in m4.
    """
    rows, ni = lowest.shape
    domains = domain_volume.shape[0]
    cell = size[0] * size[1] / (split * split)
    outside = 0.0
    for j in range(rows):
        for i in range(ni):
            n, first, blocks = start[j, i], lowest[j, i], count[j, i]
            for b in range(split):
                for a in range(split):
                    r, c = j * split + b, i * split + a
                    plan = area[r, c] * cell
                    if plan <= 0.0:
                        continue
                    p = (c + sub_s[r, c]) * size[0] / split
                    q = (first_row * split + r + sub_t[r, c]) * size[1] / split
                    x = origin[0] + p * axes[0, 0] + q * axes[1, 0]
                    y = origin[1] + p * axes[0, 1] + q * axes[1, 1]
                    u, v = (x - lattice[0]) / lattice[2], (y - lattice[1]) / lattice[3]
                    roof, depth = _bilinear(top, u, v), _bilinear(thickness, u, v)
                    if not depth > 0.0 or np.isnan(roof):
                        continue
                    if blocks <= 0:
                        outside += plan * depth
                        continue
                    low_edge = origin[2] + first * size[2]
                    high_edge = low_edge + blocks * size[2]
                    inner = min(roof, high_edge) - max(roof - depth, low_edge)
                    outside += plan * (depth - max(inner, 0.0))
                    far = _bilinear(distance, u, v) > reach
                    sure = min(_bilinear(known, u, v), depth)
                    upper = 0.0
                    for d in range(domains):
                        lower = depth
                        if d < domains - 1:
                            lower = min(max(_bilinear(layers[d], u, v), upper), depth)
                        if lower <= upper:
                            continue
                        k0 = max(int(np.floor((roof - lower - low_edge) / size[2])), 0)
                        k1 = min(int(np.floor((roof - upper - low_edge) / size[2])), blocks - 1)
                        for k in range(k0, k1 + 1):
                            floor = low_edge + k * size[2]
                            # Depths at which the block begins and ends, cut to the layer.
                            d0 = max(roof - floor - size[2], upper)
                            d1 = min(roof - floor, lower)
                            if d1 <= d0:
                                continue
                            volume = plan * (d1 - d0)
                            domain_volume[d, n + k] += volume
                            depth_moment[n + k] += volume * 0.5 * (d0 + d1)
                            if far:
                                sideways[n + k] += volume
                            elif d1 > sure:
                                downwards[n + k] += plan * (d1 - max(d0, sure))
                        upper = lower
    return outside
