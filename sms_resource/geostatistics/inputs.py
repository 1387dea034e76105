"""The checks at the door of search and kriging: arrays in, plain local arrays out."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import cast

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from .search import CoincidentPolicy, settle_coincident

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int32]
POLICIES = ("error", "average", "keep_first")


@dataclass(frozen=True)
class Samples:
    """Checked samples in local coordinates.

    ``origin`` is taken off all coordinates before a distance is formed, so that eastings of 10^7 m lose no
    digits. ``holes`` numbers the holes from 0; without hole ids each sample is a hole of its own.
    ``rows`` are the rows of the caller that were kept (all, but for coincident ones that were merged);
    ``single`` tells that the caller gave one column as a plain vector.
    """

    origin: FloatArray
    points: FloatArray
    values: FloatArray
    holes: IntArray
    rows: NDArray[np.int64]
    single: bool

    def patterns(self) -> dict[bytes, list[int]]:
        """Columns that are present in the same samples, keyed by their pattern of presence."""
        groups: dict[bytes, list[int]] = {}
        for column in range(self.values.shape[1]):
            groups.setdefault(np.isfinite(self.values[:, column]).tobytes(), []).append(column)
        return groups

    def shaped(self, array: NDArray) -> NDArray:
        """``array`` (b, m) as the caller wants it: (b,) for a single column."""
        return array[:, 0] if self.single else array


def cross(rows: NDArray[np.integer], columns: Sequence[int]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Index of the block of ``rows`` and ``columns`` of an array."""
    return np.asarray(rows, dtype=np.int64)[:, None], np.asarray(columns, dtype=np.int64)[None, :]


def _rows(flags: ArrayLike, limit: int = 5) -> str:
    found = np.flatnonzero(flags)
    more = f" and {len(found) - limit} more" if len(found) > limit else ""
    return ", ".join(str(row) for row in found[:limit]) + more


def points_array(name: str, given: ArrayLike) -> FloatArray:
    """(n, 3) float array of coordinates, or a ValueError that names the argument."""
    try:
        array = np.asarray(given, dtype=float)
    except (TypeError, ValueError) as reason:
        raise ValueError(f"{name}: wanted numbers, (n, 3): easting, northing, elevation ({reason})") from None
    if array.ndim != 2 or array.shape[1] != 3:
        raise ValueError(f"{name} has shape {array.shape}; wanted (n, 3): easting, northing, elevation")
    return array


def checked_samples(
    coordinates: ArrayLike,
    values: ArrayLike,
    hole_ids: ArrayLike | None,
    coincident: str = "error",
) -> Samples:
    """Samples ready for a kernel.

    Raises
    ------
    ValueError
        If shapes do not match, a coordinate is not finite, a value is infinite, a hole id is missing, or two
        samples with values in one column lie at one place and the policy is "error".
    """
    points = points_array("coordinates", coordinates)
    if not len(points):
        raise ValueError("coordinates is empty; wanted at least one sample")
    bad = ~np.isfinite(points).all(axis=1)
    if bad.any():
        raise ValueError(
            f"coordinates: not finite in rows {_rows(bad)}; leave these samples out or locate them"
        )
    try:
        table = np.array(values, dtype=float)
    except (TypeError, ValueError) as reason:
        raise ValueError(f"values: wanted numbers, NaN where missing ({reason})") from None
    single = table.ndim == 1
    table = table[:, None] if single else table
    if table.ndim != 2 or len(table) != len(points) or not table.shape[1]:
        raise ValueError(
            f"values has shape {np.shape(values)}; wanted ({len(points)},) or ({len(points)}, m)"
        )
    bad = np.isinf(table).any(axis=1)
    if bad.any():
        raise ValueError(f"values: infinite in rows {_rows(bad)}; wanted numbers, NaN where missing")
    if hole_ids is None:
        holes = np.arange(len(points), dtype=np.int32)
    else:
        labels = pd.Series(np.asarray(hole_ids))
        if len(labels) != len(points):
            raise ValueError(f"hole_ids has {len(labels)} entries; wanted {len(points)}, one per sample")
        missing = labels.isna().to_numpy(dtype=bool)
        if missing.any():
            raise ValueError(f"hole_ids: missing in rows {_rows(missing)}")
        holes = pd.factorize(labels)[0].astype(np.int32)
    if coincident not in POLICIES:
        raise ValueError(f"coincident {coincident!r} is not one of {', '.join(POLICIES)}")
    points, table, holes, rows = settle_coincident(points, table, holes, cast(CoincidentPolicy, coincident))
    origin = 0.5 * (points.min(axis=0) + points.max(axis=0))
    return Samples(origin, np.ascontiguousarray(points - origin), table, holes, rows, single)


def checked_block(
    block_size: ArrayLike | None, discretisation: ArrayLike
) -> tuple[FloatArray | None, tuple[int, int, int]]:
    """Block size (3,) or None for points, and the number of points along each side.

    Raises
    ------
    ValueError
        If a side is not above zero, or a number of points is not a whole number of one or more.
    """
    counts = np.asarray(discretisation)
    if counts.shape != (3,) or (counts != np.floor(counts)).any() or (counts < 1).any():
        raise ValueError(f"discretisation {discretisation!r}: wanted three whole numbers of one or more")
    numbers = (int(counts[0]), int(counts[1]), int(counts[2]))
    if block_size is None:
        if max(numbers) > 1:
            raise ValueError("discretisation is given without block_size; wanted both, or neither for points")
        return None, numbers
    size = np.asarray(block_size, dtype=float)
    if size.shape != (3,) or not np.isfinite(size).all() or (size <= 0.0).any():
        raise ValueError(f"block_size {block_size!r}: wanted three lengths in metres above zero")
    return size, numbers


def checked_threads(threads: int | None) -> int:
    """Number of threads to use, from 1 to what the machine offers.

    Raises
    ------
    ValueError
        If ``threads`` is not a whole number of one or more.
    """
    from numba import config

    available = int(config.NUMBA_NUM_THREADS)  # type: ignore[attr-defined]
    if threads is None:
        return available
    if isinstance(threads, bool) or int(threads) != threads or threads < 1:
        raise ValueError(f"threads is {threads!r}; wanted a whole number of one or more")
    return min(int(threads), available)
