"""Samples before they are searched: coincident ones, and those that a domain may see."""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .model import COINCIDENT_M

FloatArray = NDArray[np.float64]
CoincidentPolicy = Literal["error", "average", "keep_first"]


def find_coincident(coordinates: ArrayLike, tolerance_m: float = COINCIDENT_M) -> NDArray[np.int64]:
    """Pairs of samples that lie at one place.

    Parameters
    ----------
    coordinates : (n, 3) array, metres
    tolerance_m : float
        Two samples no farther apart than this are one place.

    Returns
    -------
    (k, 2) array of row numbers, the lower first, sorted.
    """
    from scipy.spatial import cKDTree

    points = np.asarray(coordinates, dtype=float)
    if len(points) < 2:
        return np.empty((0, 2), dtype=np.int64)
    local = points - 0.5 * (points.min(axis=0) + points.max(axis=0))
    pairs = cKDTree(local).query_pairs(tolerance_m, output_type="ndarray").astype(np.int64).reshape(-1, 2)
    pairs.sort(axis=1)
    return pairs[np.lexsort((pairs[:, 1], pairs[:, 0]))]


def settle_coincident(
    points: FloatArray, values: FloatArray, holes: NDArray[np.int32], policy: CoincidentPolicy
) -> tuple[FloatArray, FloatArray, NDArray[np.int32], NDArray[np.int64]]:
    """Samples of which no two lie at one place, after ``policy``.

    Such a pair makes the kriging system singular even with a nugget, for the nugget is zero at zero distance.
    "average" takes the mean of what is present in each column, "keep_first" the first that is present; the
    place and the hole are those of the first. Pairs that never hold values in one column are merged under any
    policy, for there they do not meet. The last array returned holds the rows that were kept.

    Raises
    ------
    ValueError
        Under "error", if two samples at one place both hold a value in some column; names the pairs.
    """
    pairs = find_coincident(points)
    if not len(pairs):
        return points, values, holes, np.arange(len(points))
    both = (np.isfinite(values[pairs[:, 0]]) & np.isfinite(values[pairs[:, 1]])).any(axis=1)
    if policy == "error" and both.any():
        named = ", ".join(f"{a} and {b}" for a, b in pairs[both][:5])
        more = f" and {both.sum() - 5} more pairs" if both.sum() > 5 else ""
        raise ValueError(
            f"coordinates: {int(both.sum())} pairs of samples lie at one place (rows {named}{more}); "
            'correct the positions, or choose coincident="average" or "keep_first"'
        )
    from scipy.sparse import coo_matrix
    from scipy.sparse.csgraph import connected_components

    n = len(points)
    links = coo_matrix((np.ones(len(pairs)), (pairs[:, 0], pairs[:, 1])), shape=(n, n))
    label = connected_components(links, directed=False)[1]
    first = np.unique(label, return_index=True)[1]
    order = np.argsort(first)  # keep the order of the samples
    kept = first[order]
    merged = values[kept].copy()
    for place in np.flatnonzero(np.bincount(label)[label[kept]] > 1):
        rows = np.flatnonzero(label == label[kept[place]])
        for column in range(values.shape[1]):
            present = values[rows, column][np.isfinite(values[rows, column])]
            if len(present):
                merged[place, column] = present.mean() if policy == "average" else present[0]
    return points[kept], merged, holes[kept], kept


def select_for_domain(
    coordinates: ArrayLike,
    sample_domain: ArrayLike,
    target_domain: str,
    targets: ArrayLike,
    *,
    soft_with: dict[str, float] | None = None,
) -> NDArray[np.bool_]:
    """Samples that the blocks of one domain may see, across hard and soft boundaries.

    Parameters
    ----------
    coordinates : (n, 3) array, metres
    sample_domain : (n,) domain of each sample
    target_domain : str
        Domain of the blocks.
    targets : (b, 3) centres of the blocks of that domain, metres
    soft_with : dict of domain -> distance in metres
        Neighbouring domains whose boundary is soft: their samples count within this distance of the nearest
        block. Any other boundary is hard.

    Returns
    -------
    (n,) boolean array.

    Raises
    ------
    ValueError
        If lengths do not match, or a distance is negative.
    """
    from scipy.spatial import cKDTree

    points = np.asarray(coordinates, dtype=float)
    domains = np.asarray(sample_domain).astype(str)
    if len(domains) != len(points):
        raise ValueError(f"sample_domain has {len(domains)} entries; wanted {len(points)}, one per sample")
    chosen = domains == target_domain
    blocks = np.asarray(targets, dtype=float)
    for other, distance in (soft_with or {}).items():
        if not distance >= 0.0:
            raise ValueError(f"soft_with[{other!r}] is {distance!r}; wanted metres, zero or more")
        rows = np.flatnonzero((domains == other) & ~chosen)
        if len(rows) and len(blocks):
            nearest, _ = cKDTree(blocks).query(points[rows])
            chosen[rows[nearest <= distance]] = True
    return chosen
