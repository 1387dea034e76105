"""Map of the variogram in one plane, for choosing directions."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from sms_resource.geostatistics.directions import cached_axes
from sms_resource.geostatistics.pairs import clean_samples, transformed

if TYPE_CHECKING:
    import pandas as pd

Array = NDArray[np.float64]


@dataclass(frozen=True)
class VariogramMap:
    """Variogram by the two components of a separation in a plane.

    Attributes
    ----------
    along, across : (k,) float
        Middle of each cell in m along the major and the semi-major axis of the plane; with three zero angles
        along is north and across is east.
    gamma : (k, k) float
        Rows follow ``along``; NaN below the least number of pairs. The map is symmetric about its middle.
    pairs : (k, k) int
    azimuth, plunge, tilt : float
    measure : str
    """

    along: Array
    across: Array
    gamma: Array
    pairs: NDArray[np.int64]
    azimuth: float
    plunge: float
    tilt: float
    measure: str

    def to_frame(self) -> pd.DataFrame:
        """One row a cell: along_m, across_m, gamma, pairs."""
        import pandas as pd

        along, across = np.meshgrid(self.along, self.across, indexing="ij")
        return pd.DataFrame(
            {
                "along_m": along.ravel(),
                "across_m": across.ravel(),
                "gamma": self.gamma.ravel(),
                "pairs": self.pairs.ravel(),
            }
        )

    def longest_direction(self, radius_m: float) -> float:
        """Angle in degrees from the major axis toward the semi-major one in which gamma within a radius is least.

        From the second moments of the cells, weighted by how far gamma lies below the mean of the circle. NaN
        where fewer than 5 cells have pairs.
        """
        along, across = np.meshgrid(self.along, self.across, indexing="ij")
        distance = np.hypot(along, across)
        inside = np.isfinite(self.gamma) & (distance <= radius_m) & (distance > 0.0)
        if inside.sum() < 5:
            return math.nan
        gamma, x, y = self.gamma[inside], along[inside], across[inside]
        twice = 2.0 * np.arctan2(y, x)
        low = (gamma.mean() - gamma) * self.pairs[inside]
        return math.degrees(0.5 * math.atan2(float(low @ np.sin(twice)), float(low @ np.cos(twice)))) % 180.0


def variogram_map(
    coordinates: ArrayLike,
    values: ArrayLike,
    *,
    cell_m: float,
    cells: int = 10,
    azimuth: float = 0.0,
    plunge: float = 0.0,
    tilt: float = 0.0,
    bandwidth_m: float = math.inf,
    measure: str = "semivariogram",
    weights: ArrayLike | None = None,
    min_pairs: int = 1,
    hole_ids: Any = None,
    across_holes: bool = False,
) -> VariogramMap:
    """Variogram map in the plane of the major and semi-major axis.

    Parameters
    ----------
    coordinates : (n, 3) array_like
        m.
    values : (n,) array_like
        NaN is missing.
    cell_m : float
        Side of a cell.
    cells : int
        Cells on each side of the middle one.
    azimuth, plunge, tilt : float
        Degrees of the plane.
    bandwidth_m : float
        Greatest distance of a pair from the plane.
    measure : "semivariogram" | "normal_scores" | "logs"
    weights : (n,) array_like, optional
        Declustering weights.
    min_pairs : int
        Cells with fewer pairs are NaN.
    hole_ids, across_holes : optional
        With both, only pairs between two holes.

    Returns
    -------
    VariogramMap

    Raises
    ------
    ValueError
        As :func:`experimental_variogram`, or for a cell that is not above zero.
    """
    if not (math.isfinite(cell_m) and cell_m > 0.0):
        raise ValueError(f"cell_m must be a number of m above zero, got {cell_m}")
    if cells < 1:
        raise ValueError(f"cells must be 1 or more, got {cells}")
    if measure not in ("semivariogram", "normal_scores", "logs"):
        raise ValueError(f"measure must be semivariogram, normal_scores or logs, got {measure!r}")
    if across_holes and hole_ids is None:
        raise ValueError("hole_ids are needed for pairs across holes")
    xyz, z, names, w = clean_samples(coordinates, values, hole_ids, weights)
    t = transformed(z, measure, w)
    t = t - t.mean()
    local = (xyz - xyz.mean(axis=0)) @ cached_axes(azimuth, plunge, tilt).T
    holes = np.unique(names.astype(str), return_inverse=True)[1]
    size = 2 * cells + 1
    count, weight, total = np.zeros(size * size), np.zeros(size * size), np.zeros(size * size)
    reach = (cells + 0.5) * cell_m
    for i in range(len(t) - 1):  # one sample against the rest at a time: n numbers, never n squared
        step = local[i + 1 :] - local[i]
        keep = (
            (np.abs(step[:, 0]) < reach) & (np.abs(step[:, 1]) < reach) & (np.abs(step[:, 2]) <= bandwidth_m)
        )
        keep &= np.einsum("ij,ij->i", step, step) > 0.0
        if across_holes:
            keep &= holes[i + 1 :] != holes[i]
        if not keep.any():
            continue
        cell = np.floor(step[keep, :2] / cell_m + 0.5).astype(np.int64) + cells
        number = cell[:, 0] * size + cell[:, 1]
        pair_weight = w[i] * w[i + 1 :][keep]
        count += np.bincount(number, minlength=size * size)
        weight += np.bincount(number, weights=pair_weight, minlength=size * size)
        total += np.bincount(
            number, weights=pair_weight * (t[i + 1 :][keep] - t[i]) ** 2, minlength=size * size
        )
    count, weight, total = (part + part[::-1] for part in (count, weight, total))
    pairs = count.astype(np.int64)
    pairs[size * size // 2] //= 2  # the middle cell is its own reverse
    with np.errstate(divide="ignore", invalid="ignore"):
        gamma = np.where((pairs >= min_pairs) & (weight > 0.0), total / (2.0 * weight), np.nan)
    middles = cell_m * np.arange(-cells, cells + 1, dtype=float)
    return VariogramMap(
        along=middles,
        across=middles.copy(),
        gamma=gamma.reshape(size, size),
        pairs=pairs.reshape(size, size),
        azimuth=azimuth,
        plunge=plunge,
        tilt=tilt,
        measure=measure,
    )
