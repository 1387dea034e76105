"""How many holes lie within the variogram range of a block: all of them, not only those that kriging used."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray


def holes_in_reach(
    targets: ArrayLike,
    coordinates: ArrayLike,
    hole_ids: ArrayLike,
    ranges: tuple[float, float, float],
    *,
    axes: ArrayLike | None = None,
) -> pd.DataFrame:
    """Holes within range of each target, in the anisotropic distance of a variogram.

    A search takes the nearest samples and a few of each hole, so its count of holes says what informed the
    estimate. The rule "fewer than 3 holes within the range" asks what there is.

    Parameters
    ----------
    targets : (b, 3) array
        Block centres (m), in the frame in which the variogram holds.
    coordinates : (n, 3) array
        Samples (m) in the same frame.
    hole_ids : (n,) array
        Hole of each sample.
    ranges : (major, semi-major, minor)
        Practical ranges (m).
    axes : (3, 3) array, optional
        Unit vectors of the major, semi-major and minor axis, one a row; north, east and up if not given.

    Returns
    -------
    DataFrame
        ``holes_in_range`` (int) and ``nearest_hole_m``: the distance to the nearest sample, stretched so that it
        compares with the major range. Infinite where there is no sample.

    Raises
    ------
    ValueError
        If shapes do not agree or a range is not above zero.
    """
    centres = np.asarray(targets, dtype=np.float64).reshape(-1, 3)
    samples = np.asarray(coordinates, dtype=np.float64).reshape(-1, 3)
    names = np.asarray(hole_ids, dtype=object).astype(str)
    scale = np.asarray(ranges, dtype=np.float64)
    if scale.shape != (3,) or not (scale > 0).all():
        raise ValueError(f"ranges is {ranges}; three lengths above zero were wanted")
    if len(names) != len(samples):
        raise ValueError(f"{len(samples)} coordinates but {len(names)} hole_ids")
    turn = (
        np.array([[0.0, 1.0, 0.0], [1.0, 0.0, 0.0], [0.0, 0.0, 1.0]])
        if axes is None
        else np.asarray(axes, float)
    )
    if turn.shape != (3, 3):
        raise ValueError(f"axes has shape {turn.shape}; (3, 3) was wanted")
    count = np.zeros(len(centres), dtype=np.int64)
    nearest = np.full(len(centres), np.inf)
    if len(samples) and len(centres):
        _count(centres @ turn.T / scale, samples @ turn.T / scale, names, count, nearest)
    return pd.DataFrame({"holes_in_range": count, "nearest_hole_m": nearest * scale[0]})


def _count(
    centres: NDArray[np.float64],
    samples: NDArray[np.float64],
    names: NDArray[np.str_],
    count: NDArray[np.int64],
    nearest: NDArray[np.float64],
) -> None:
    from sms_resource.classification.reach_kernels import holes_within

    order = np.argsort(names, kind="stable")
    ordered, held = names[order], np.ascontiguousarray(samples[order])
    starts = np.append(np.flatnonzero(np.append(True, ordered[1:] != ordered[:-1])), len(ordered))
    lower = np.minimum.reduceat(held, starts[:-1], axis=0)
    upper = np.maximum.reduceat(held, starts[:-1], axis=0)
    holes_within(np.ascontiguousarray(centres), held, starts, lower, upper, count, nearest)
