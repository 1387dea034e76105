"""Exact joins of interval tables by depth: every table cuts the holes, every piece knows its rows.

All joins go through integer ranks of the boundaries, so that nothing is lost to rounding: two tables that name
the same depth share one boundary, and a piece is either wholly inside a row or wholly outside.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]

# Depths closer than this (m) are one depth: far below any tape, far above the noise of 0.1 + 0.2.
SAME_DEPTH_M = 1e-12


@dataclass(frozen=True)
class Pieces:
    """Holes cut at the boundaries of several interval tables.

    Attributes
    ----------
    holes : ndarray of str, shape (h,)
    hole : ndarray of int, shape (p,)
        Number of the hole of each piece.
    start, end : ndarray, shape (p,)
        Depths in m.
    rows : tuple of ndarray of int, each (p,)
        For each table, the row (by position) that covers the piece, or -1.
    overlapping : tuple of ndarray of int
        For each table, rows that share depth with another row of the same table.
    """

    holes: NDArray[np.object_]
    hole: Integers
    start: Floats
    end: Floats
    rows: tuple[Integers, ...]
    overlapping: tuple[Integers, ...]

    @property
    def length(self) -> Floats:
        """Length of each piece in m."""
        return self.end - self.start

    def __len__(self) -> int:
        return len(self.start)


def names(column: pd.Series | NDArray) -> NDArray[np.object_]:
    """Identifiers as an object array, whatever text type they came in."""
    return np.asarray(column, dtype=object)


def numbers(table: pd.DataFrame, column: str) -> Floats:
    """A column as a fresh float array; all NaN where the table has no such column."""
    if column not in table.columns:
        return np.full(len(table), np.nan)
    values = table[column]
    if values.dtype != np.float64:
        values = pd.to_numeric(values, errors="coerce")
    return np.array(values, dtype=np.float64)


def lengths(table: pd.DataFrame) -> Floats:
    """Length of each interval in m."""
    return numbers(table, "to_m") - numbers(table, "from_m")


def take(values: Floats, rows: Integers) -> Floats:
    """Values by row number; NaN where the row is -1."""
    return np.append(values, np.nan)[rows]


def counted(number: int, noun: str) -> str:
    """``counted(1, "run")`` is "1 run", ``counted(2, "run")`` "2 runs"."""
    return f"{number} {noun}" if number == 1 else f"{number} {noun}s"


def lines(table: pd.DataFrame) -> Iterator[Any]:
    """Rows of a small table, one after the other, with columns as attributes."""
    return iter(table.itertuples())


def valid_intervals(table: pd.DataFrame, what: str, findings: Findings | None = None) -> pd.DataFrame:
    """Rows whose end lies below their start, with a fresh index; the others become error findings."""
    start, end = numbers(table, "from_m"), numbers(table, "to_m")
    good = np.isfinite(start) & np.isfinite(end) & (end - start > SAME_DEPTH_M)
    if findings is not None:
        for position in np.flatnonzero(~good):
            findings.error(
                "interval-invalid",
                f"{what}: hole {table['hole_id'].iloc[position]} has an interval from {start[position]:g} m "
                f"to {end[position]:g} m",
                "Correct the depths: each interval must end below its start.",
                row=_source_row(table, int(position)),
            )
    return table.loc[good].reset_index(drop=True)


def cut_holes(tables: Sequence[pd.DataFrame]) -> Pieces:
    """Cut every hole at all boundaries of ``tables`` (columns hole_id, from_m, to_m; rows must be valid).

    Where rows of one table overlap, the piece belongs to the later row and both rows are listed in
    ``overlapping``; it is for the caller to say so.
    """
    counts = [len(table) for table in tables]
    hole_column = (
        np.concatenate([names(table["hole_id"]) for table in tables]) if tables else np.empty(0, object)
    )
    codes, holes = pd.factorize(hole_column, sort=True)
    starts = np.concatenate([numbers(table, "from_m") for table in tables])
    ends = np.concatenate([numbers(table, "to_m") for table in tables])
    rank, boundary_hole, boundary_depth = _rank_depths(
        np.concatenate([codes, codes]), np.concatenate([starts, ends])
    )
    first, last = rank[: len(codes)], rank[len(codes) :]

    is_piece = boundary_hole[1:] == boundary_hole[:-1]
    piece_of_boundary = np.cumsum(np.append(is_piece, False)) - 1
    rows, overlapping = [], []
    offset = 0
    for count in counts:
        low, high = first[offset : offset + count], last[offset : offset + count]
        span = high - low
        # boundaries of one interval lie in one hole, so its pieces are consecutive
        position = np.repeat(piece_of_boundary[low] - (np.cumsum(span) - span), span) + np.arange(span.sum())
        owner = np.repeat(np.arange(count), span)
        covering = np.full(int(is_piece.sum()), -1, dtype=np.int64)
        covering[position] = owner
        twice = np.bincount(position, minlength=len(covering)) > 1
        overlapping.append(np.unique(owner[twice[position]]))
        rows.append(covering)
        offset += count
    return Pieces(
        np.asarray(holes, dtype=object),
        boundary_hole[:-1][is_piece],
        boundary_depth[:-1][is_piece],
        boundary_depth[1:][is_piece],
        tuple(rows),
        tuple(overlapping),
    )


def report_overlaps(table: pd.DataFrame, rows: Integers, what: str, findings: Findings) -> None:
    """Add one error for each row of ``table`` that shares depth with another."""
    for position in rows:
        row = table.iloc[int(position)]
        findings.error(
            "interval-overlap",
            f"{what}: hole {row['hole_id']}, {row['from_m']:g} to {row['to_m']:g} m, overlaps another interval",
            "Correct the depths, or remove the interval that was superseded.",
            row=_source_row(table, int(position)),
        )


def overlap_means(intervals: pd.DataFrame, table: pd.DataFrame, columns: Sequence[str]) -> pd.DataFrame:
    """Mean of ``columns`` of ``table`` over each interval, weighted by the shared length; NaN where none.

    Returns a frame with the index of ``intervals``, the columns, and ``shared_m`` (length covered by ``table``).
    """
    result = pd.DataFrame(index=intervals.index, columns=[*columns, "shared_m"], dtype=np.float64)
    ours = valid_intervals(intervals.assign(_row=np.arange(len(intervals))), "intervals")
    theirs = valid_intervals(table, "table")
    result["shared_m"] = 0.0
    if ours.empty or theirs.empty:
        return result
    position = ours["_row"].to_numpy()
    # our own intervals may overlap one another (doubles, twins of one sample): join pair by pair
    left, right, shared = overlap_pairs(ours, theirs)
    target = position[left]
    count = len(intervals)
    result["shared_m"] = np.bincount(target, shared, count)
    for column in columns:
        value = numbers(theirs, column)[right]
        known = np.isfinite(value)
        weight = np.bincount(target[known], shared[known], count)
        total = np.bincount(target[known], shared[known] * value[known], count)
        result[column] = np.divide(total, weight, out=np.full(count, np.nan), where=weight > 0)
    return result


def overlap_pairs(left: pd.DataFrame, right: pd.DataFrame) -> tuple[Integers, Integers, Floats]:
    """All pairs of rows of the same hole that share depth, and the length they share in m.

    ``right`` may overlap itself; rows must be valid (see `valid_intervals`).
    """
    hole = np.concatenate([names(left["hole_id"]), names(right["hole_id"])])
    codes, _ = pd.factorize(hole, sort=True)
    mine, yours = codes[: len(left)], codes[len(left) :]
    start, end = numbers(left, "from_m"), numbers(left, "to_m")
    begin, finish = numbers(right, "from_m"), numbers(right, "to_m")
    order = np.lexsort((begin, yours))
    # the longest interval bounds how far above a start an overlapping row can begin
    reach = float((finish - begin).max()) if len(right) else 0.0
    depths = np.unique(np.concatenate([begin, start - reach, end]))
    width = len(depths) + 1
    key = yours[order] * width + np.searchsorted(depths, begin[order])
    low = np.searchsorted(key, mine * width + np.searchsorted(depths, start - reach), side="left")
    high = np.searchsorted(key, mine * width + np.searchsorted(depths, end), side="left")
    span = np.maximum(high - low, 0)
    first = np.repeat(np.arange(len(left)), span)
    second = order[np.repeat(low - (np.cumsum(span) - span), span) + np.arange(span.sum())]
    shared = np.minimum(end[first], finish[second]) - np.maximum(start[first], begin[second])
    keep = shared > SAME_DEPTH_M
    return first[keep], second[keep], shared[keep]


def _rank_depths(hole: Integers, depth: Floats) -> tuple[Integers, Integers, Floats]:
    """Number of the boundary of each (hole, depth), and hole and depth of each boundary."""
    order = np.lexsort((depth, hole))
    sorted_hole, sorted_depth = hole[order], depth[order]
    fresh = np.ones(len(order), dtype=bool)
    fresh[1:] = (np.diff(sorted_hole) != 0) | (np.diff(sorted_depth) > SAME_DEPTH_M)
    rank = np.empty(len(order), dtype=np.int64)
    rank[order] = np.cumsum(fresh) - 1
    return rank, sorted_hole[fresh].astype(np.int64), sorted_depth[fresh]


def _source_row(table: pd.DataFrame, position: int) -> int | None:
    if "source_row" not in table.columns:
        return None
    value = table["source_row"].iloc[position]
    return None if pd.isna(value) else int(value)
