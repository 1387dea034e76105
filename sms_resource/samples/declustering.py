"""Weights that undo the clustering of samples: cells over a scan of sizes."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

if TYPE_CHECKING:
    import pandas as pd

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Declustering:
    """Declustering weights and the scan that they were chosen from.

    Attributes
    ----------
    weights : (n,) float
        One weight a sample, mean 1 over the samples with a value; NaN where the value is missing.
    cell_size : (3,) float
        Size of the chosen cell in m along easting, northing and elevation.
    scan : DataFrame
        Per size: ``size_x_m size_y_m size_z_m cells mean`` (occupied cells and mean, averaged over origins)
        and ``chosen``.
    mean, variance : float
        Declustered mean and variance of the values.
    plain_mean : float
        Mean without weights.
    choice : str
        Why that size: "least mean", "greatest mean" or "given size".
    """

    weights: Array
    cell_size: tuple[float, float, float]
    scan: pd.DataFrame
    mean: float
    variance: float
    plain_mean: float
    choice: str

    def __repr__(self) -> str:
        size = " x ".join(f"{side:g}" for side in self.cell_size)
        return f"Declustering({size} m, {self.choice}: mean {self.mean:.6g}, without weights {self.plain_mean:.6g})"


def cell_weights(coordinates: Array, size: ArrayLike, origin: ArrayLike) -> tuple[Array, int]:
    """Weights (n,) with sum one, equal for each occupied cell, and the number of occupied cells.

    Parameters
    ----------
    coordinates : (n, 3) float
        m.
    size, origin : (3,) array_like
        Sides of the cell and one of its corners, in m; an infinite side makes one cell along that axis.

    References
    ----------
    Journel, A. G. (1983). Nonparametric estimation of spatial distributions. Mathematical Geology 15, 445-468.
    Deutsch, C. V. (1989). DECLUS. Computers & Geosciences 15, 325-332.
    """
    cells = np.floor((coordinates - np.asarray(origin)) / np.asarray(size) + 1e-9).astype(np.int64)
    _, inverse, counts = np.unique(cells, axis=0, return_inverse=True, return_counts=True)
    return 1.0 / (len(counts) * counts[inverse.ravel()]), len(counts)


def default_sizes(coordinates: Array, anisotropy: Array) -> Array:
    """Twenty sizes (k,) from the median distance to the nearest neighbour to a third of the extent, in m."""
    from scipy.spatial import cKDTree

    scaled = np.unique(coordinates / anisotropy, axis=0)
    extent = float(np.ptp(scaled, axis=0).max())
    if len(scaled) < 2 or not extent > 0.0:
        return np.array([1.0])
    nearest = float(np.median(cKDTree(scaled).query(scaled, k=2)[0][:, 1]))
    high = max(extent / 3.0, nearest)
    return np.geomspace(max(nearest, high / 200.0), high, 20)


def cell_declustering(
    coordinates: ArrayLike,
    values: ArrayLike,
    *,
    sizes: ArrayLike | None = None,
    anisotropy: tuple[float, float, float] = (1.0, 1.0, 1.0),
    origins: int = 4,
    origin: ArrayLike | None = None,
    direction: Literal["min", "max"] = "min",
) -> Declustering:
    """Cell declustering over a scan of sizes, averaged over shifted origins.

    Parameters
    ----------
    coordinates : (n, 3) array_like
        Easting, northing, elevation in m.
    values : (n,) array_like
        NaN is missing: such a sample has no weight.
    sizes : (k,) or (k, 3) array_like, optional
        Sizes of the cell in m, multiplied by ``anisotropy``; or the three sides themselves. One size is used as
        it is given. By default twenty, from the spacing of the samples to a third of their extent.
    anisotropy : (3,) floats
        Sides of the cell relative to its size; a flat cell has a small third number.
    origins : int
        Number of shifted grids that are averaged: 1 uses ``origin`` alone.
    origin : (3,) array_like, optional
        Corner of the first grid; by default the least coordinates.
    direction : "min" | "max"
        Take the size with the least mean (rich places were sampled more) or the greatest (poor places were).

    Returns
    -------
    Declustering

    Raises
    ------
    ValueError
        If shapes do not agree, a coordinate is not finite, no sample has a value, or a size is not positive.
    """
    import pandas as pd

    xyz = np.array(coordinates, dtype=float)
    z = np.array(values, dtype=float)
    if xyz.ndim != 2 or xyz.shape[1] != 3 or z.shape != (len(xyz),):
        raise ValueError(f"coordinates (n, 3) and values (n,) are needed, got {xyz.shape} and {z.shape}")
    if direction not in ("min", "max"):
        raise ValueError(f"direction must be 'min' or 'max', got {direction!r}")
    if origins < 1:
        raise ValueError(f"origins must be 1 or more, got {origins}")
    keep = np.isfinite(z)
    if not keep.any():
        raise ValueError("values: no sample has a value")
    points, data = xyz[keep], z[keep]
    if not np.all(np.isfinite(points)):
        raise ValueError("coordinates must be finite where there is a value")
    ratios = np.array(anisotropy, dtype=float)
    table = default_sizes(points, ratios) if sizes is None else np.atleast_1d(np.array(sizes, dtype=float))
    cells = table[:, None] * ratios if table.ndim == 1 else table
    if cells.ndim != 2 or cells.shape[1] != 3 or not np.all(cells > 0.0):
        raise ValueError("sizes and anisotropy must give three sides above zero m for each cell")
    corner = points.min(axis=0) if origin is None else np.array(origin, dtype=float)

    rows, kept = [], []
    for sides in cells:
        weights = np.zeros(len(data))
        occupied = 0.0
        for step in range(origins):
            shift = np.where(np.isfinite(sides), sides, 0.0) * step / origins
            part, count = cell_weights(points, sides, corner - shift)
            weights += part / origins
            occupied += count / origins
        kept.append(weights)
        rows.append((*sides, occupied, float(weights @ data)))
    scan = pd.DataFrame(rows, columns=["size_x_m", "size_y_m", "size_z_m", "cells", "mean"])
    means = scan["mean"].to_numpy()
    best = int(np.argmin(means) if direction == "min" else np.argmax(means))
    scan["chosen"] = np.arange(len(scan)) == best
    weights = kept[best] / kept[best].sum()
    mean = float(weights @ data)
    full = np.full(len(z), np.nan)
    full[keep] = weights * len(data)
    choice = "given size" if len(scan) == 1 else "least mean" if direction == "min" else "greatest mean"
    return Declustering(
        weights=full,
        cell_size=(float(cells[best, 0]), float(cells[best, 1]), float(cells[best, 2])),
        scan=scan,
        mean=mean,
        variance=float(weights @ (data - mean) ** 2),
        plain_mean=float(data.mean()),
        choice=choice,
    )
