"""Swaths: means of samples and of blocks in slices along an axis."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Literal

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    import pandas as pd

Array = NDArray[np.float64]
Axis = Literal["easting", "northing", "elevation", "along", "across"]
AXES: tuple[str, ...] = ("easting", "northing", "elevation", "along", "across")


def axis_vector(axis: str, azimuth: float = 0.0) -> Array:
    """Unit vector (east, north, up) of an axis; "along" points to the azimuth, "across" 90 degrees right of it.

    Raises
    ------
    ValueError
        If the axis is not known.
    """
    angle = math.radians(azimuth)
    vectors = {
        "easting": (1.0, 0.0, 0.0),
        "northing": (0.0, 1.0, 0.0),
        "elevation": (0.0, 0.0, 1.0),
        "along": (math.sin(angle), math.cos(angle), 0.0),
        "across": (math.cos(angle), -math.sin(angle), 0.0),
    }
    if axis not in vectors:
        raise ValueError(f"axis must be one of {', '.join(AXES)}, got {axis!r}")
    return np.array(vectors[axis])


def slice_means(
    positions: Array, values: Array, weights: Array, edges: Array
) -> tuple[NDArray[np.intp], Array, Array]:
    """Count, weight and weighted mean (NaN where empty) in each slice; the last slice holds its upper edge."""
    count = len(edges) - 1
    keep = np.isfinite(values) & np.isfinite(weights) & (weights > 0.0)
    number = np.clip(np.searchsorted(edges, positions[keep], side="right") - 1, 0, count - 1)
    counts = np.bincount(number, minlength=count)
    weight = np.bincount(number, weights=weights[keep], minlength=count).astype(float)
    total = np.bincount(number, weights=weights[keep] * values[keep], minlength=count)
    with np.errstate(divide="ignore", invalid="ignore"):
        return counts, weight, np.where(weight > 0.0, total / weight, np.nan)


def swath(
    frame_samples: pd.DataFrame,
    frame_blocks: pd.DataFrame,
    column: str,
    *,
    axis: Axis | str = "easting",
    azimuth: float = 0.0,
    width_m: float | None = None,
    edges: Sequence[float] | None = None,
    block_columns: Mapping[str, str] | None = None,
    sample_weight: str | None = None,
    decluster_weight: str | None = None,
    block_weight: str | None = None,
    coordinates: tuple[str, str, str] = ("easting", "northing", "elevation"),
) -> pd.DataFrame:
    """Means of one metal in slices across one axis.

    Parameters
    ----------
    frame_samples, frame_blocks : DataFrame
        With the three coordinates in m and the columns named below.
    column : str
        Metal in both frames.
    axis : "easting" | "northing" | "elevation" | "along" | "across"
        "along" runs toward ``azimuth`` (degrees clockwise from north), "across" 90 degrees right of it; both
        level.
    width_m : float, optional
        Width of a slice; by default a twelfth of the extent. Slices start at a multiple of it.
    edges : sequence of float, optional
        Edges of the slices in m, instead of a width. What lies outside counts in the end slices.
    block_columns : mapping, optional
        More estimates in ``frame_blocks``: name in the result to column, such as {"nearest": "cu_pct_nearest"}.
    sample_weight, decluster_weight : str, optional
        Columns of weights of samples (such as length), and of weights that undo clustering.
    block_weight : str, optional
        Column such as dry tonnes or volume.

    Returns
    -------
    DataFrame
        One row a slice: ``axis column from_m to_m centre_m sample_count sample_mean declustered_mean block_count
        block_weight block_mean <name>_mean ... difference_pct``; the difference is that of the block mean from
        the declustered mean.

    Raises
    ------
    ValueError
        If a column is missing, the width is not positive or the edges do not rise.
    """
    import pandas as pd

    extra = dict(block_columns or {})
    needed = [*coordinates, column, *(name for name in (sample_weight, decluster_weight) if name)]
    _require(frame_samples, needed, "frame_samples")
    _require(
        frame_blocks,
        [*coordinates, column, *extra.values(), *([block_weight] if block_weight else [])],
        "frame_blocks",
    )
    vector = axis_vector(axis, azimuth)
    names = list(coordinates)
    at_samples = frame_samples[names].to_numpy(dtype=float) @ vector
    at_blocks = frame_blocks[names].to_numpy(dtype=float) @ vector
    limits = _edges(np.concatenate([at_samples, at_blocks]), width_m, edges)

    grade = frame_samples[column].to_numpy(dtype=float)
    plain = _weights(frame_samples, sample_weight)
    counts, _, sample_mean = slice_means(at_samples, grade, plain, limits)
    _, _, declustered = slice_means(
        at_samples, grade, plain * _weights(frame_samples, decluster_weight), limits
    )
    mass = _weights(frame_blocks, block_weight)
    block_counts, block_mass, block_mean = slice_means(
        at_blocks, frame_blocks[column].to_numpy(dtype=float), mass, limits
    )
    table: dict[str, object] = {
        "axis": axis,
        "column": column,
        "from_m": limits[:-1],
        "to_m": limits[1:],
        "centre_m": 0.5 * (limits[:-1] + limits[1:]),
        "sample_count": counts,
        "sample_mean": sample_mean,
        "declustered_mean": declustered,
        "block_count": block_counts,
        "block_weight": block_mass,
        "block_mean": block_mean,
    }
    for name, source in extra.items():
        table[f"{name}_mean"] = slice_means(
            at_blocks, frame_blocks[source].to_numpy(dtype=float), mass, limits
        )[2]
    with np.errstate(divide="ignore", invalid="ignore"):
        table["difference_pct"] = np.where(
            declustered != 0.0, 100.0 * (block_mean / declustered - 1.0), np.nan
        )
    return pd.DataFrame(table)


def swath_table(
    frame_samples: pd.DataFrame,
    frame_blocks: pd.DataFrame,
    columns: Sequence[str],
    *,
    axes: Sequence[str] | None = None,
    azimuth: float = 0.0,
    width_m: float | Mapping[str, float] | None = None,
    companions: Mapping[str, Mapping[str, str]] | None = None,
    sample_weight: str | None = None,
    decluster_weights: Mapping[str, str] | str | None = None,
    block_weight: str | None = None,
) -> pd.DataFrame:
    """Swaths of several metals along three axes in one table; see :func:`swath`.

    Parameters
    ----------
    axes : sequence, optional
        By default easting, northing and elevation; with an azimuth along, across and elevation.
    width_m : float or mapping, optional
        One width, or one for each axis.
    companions : mapping, optional
        For each metal its ``block_columns``.
    decluster_weights : mapping or str, optional
        Column of weights, for all metals or for each.
    """
    import pandas as pd

    if axes is None:
        axes = ("along", "across", "elevation") if azimuth else ("easting", "northing", "elevation")
    parts = []
    for column in columns:
        weight = (
            decluster_weights if isinstance(decluster_weights, str) else (decluster_weights or {}).get(column)
        )
        for axis in axes:
            parts.append(
                swath(
                    frame_samples,
                    frame_blocks,
                    column,
                    axis=axis,
                    azimuth=azimuth,
                    width_m=width_m.get(axis) if isinstance(width_m, Mapping) else width_m,
                    block_columns=(companions or {}).get(column),
                    sample_weight=sample_weight,
                    decluster_weight=weight,
                    block_weight=block_weight,
                )
            )
    return pd.concat(parts, ignore_index=True) if parts else pd.DataFrame()


def _require(frame: pd.DataFrame, names: Sequence[str], argument: str) -> None:
    missing = [name for name in names if name not in frame.columns]
    if missing:
        raise ValueError(f"{argument} has no column {', '.join(missing)}")


def _weights(frame: pd.DataFrame, column: str | None) -> Array:
    return np.ones(len(frame)) if column is None else frame[column].to_numpy(dtype=float)


def _edges(positions: Array, width_m: float | None, edges: Sequence[float] | None) -> Array:
    if edges is not None:
        given = np.asarray(edges, dtype=float)
        if given.ndim != 1 or given.size < 2 or not np.all(np.diff(given) > 0.0):
            raise ValueError("edges must be at least 2 rising numbers")
        return given
    finite = positions[np.isfinite(positions)]
    if finite.size == 0:
        raise ValueError("no sample and no block has a finite coordinate")
    extent = float(np.ptp(finite))
    if width_m is None:
        width_m = extent / 12.0 if extent > 0.0 else 1.0
    if not (math.isfinite(width_m) and width_m > 0.0):
        raise ValueError(f"width_m must be a number of m above zero, got {width_m}")
    first = math.floor(finite.min() / width_m)
    last = max(math.ceil(finite.max() / width_m), first + 1)
    return width_m * np.arange(first, last + 1, dtype=float)
