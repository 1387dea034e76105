"""Blocks as grids of points: their midpoints and the variance that a block keeps."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .model import VariogramModel

FloatArray = NDArray[np.float64]


def discretisation_offsets(
    block_size: ArrayLike, discretisation: ArrayLike, block_azimuth: float = 0.0
) -> FloatArray:
    """Midpoints of the cells of a block, relative to its centre.

    Parameters
    ----------
    block_size : (3,) sides in metres: along easting, northing and elevation of an unrotated block.
    discretisation : (3,) number of points along each side.
    block_azimuth : float
        Degrees by which the northing side is turned clockwise from north, in plan.

    Returns
    -------
    (p, 3) array in metres; easting runs slowest.
    """
    sides = [
        (np.arange(int(n)) + 0.5) / int(n) * float(size) - 0.5 * float(size)
        for size, n in zip(np.asarray(block_size, dtype=float), np.asarray(discretisation))
    ]
    x, y, z = (axis.ravel() for axis in np.meshgrid(*sides, indexing="ij"))
    if block_azimuth:
        c, s = math.cos(math.radians(block_azimuth)), math.sin(math.radians(block_azimuth))
        x, y = x * c + y * s, y * c - x * s
    return np.column_stack([x, y, z])


def block_variance(
    model: VariogramModel, block_size: ArrayLike, discretisation: ArrayLike, block_azimuth: float = 0.0
) -> float:
    """Mean covariance C(V, V) inside a block: the variance of block means, without the nugget.

    The mean runs over all pairs of discretisation points, a point with itself included, so it is a little
    above the exact integral; the auxiliary functions F of Journel & Huijbregts (1978) and Clark (1979) are
    what it tends to: ``total_sill - block_variance = F`` for a model of sill 1 without nugget.

    Parameters
    ----------
    model : VariogramModel
    block_size : (3,) sides in metres
    discretisation : (3,) points along each side
    block_azimuth : float
        Rotation of the block in plan, degrees clockwise.

    Returns
    -------
    float, in squared units of the value.
    """
    from .inputs import checked_block

    size, counts = checked_block(block_size, discretisation)
    if size is None:
        return model.total_sill
    nx, ny, nz = counts
    # On a regular grid the separations repeat: each appears as often as it fits, so p points need
    # (2nx-1)(2ny-1)(2nz-1) distances and not p squared.
    steps = [np.arange(1 - n, n) for n in counts]
    times = [n - np.abs(step) for n, step in zip(counts, steps)]
    i, j, k = (axis.ravel() for axis in np.meshgrid(*steps, indexing="ij"))
    weights = (times[0][i + nx - 1] * times[1][j + ny - 1] * times[2][k + nz - 1]).astype(float)
    x, y, z = i * size[0] / nx, j * size[1] / ny, k * size[2] / nz
    if block_azimuth:
        c, s = math.cos(math.radians(block_azimuth)), math.sin(math.radians(block_azimuth))
        x, y = x * c + y * s, y * c - x * s
    covariances = model.structured_covariance(np.column_stack([x, y, z]))
    return float(weights @ covariances / float(nx * ny * nz) ** 2)
