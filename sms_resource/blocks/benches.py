"""Benches: which blocks lie in which slice of height, and what each slice holds."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from sms_resource.blocks.model import BlockModel
from sms_resource.blocks.screens import dry_tonnes
from sms_resource.units import contained_tonnes


def bench_parts(
    model: BlockModel, *, height_m: float | None = None, floor_m: float | None = None
) -> pd.DataFrame:
    """Blocks cut at the floors of benches.

    Parameters
    ----------
    model : BlockModel
    height_m : float, optional
        Height of a bench; None is that of a block. A block that straddles benches is shared between them by height.
    floor_m : float, optional
        Elevation of the floor of some bench; None is that of the lowest blocks.

    Returns
    -------
    DataFrame
        row (of the model's frame), share of that block (those of one block add to 1), floor_elevation and
        roof_elevation of the bench.

    Raises
    ------
    ValueError
        If ``height_m`` is not positive.
    """
    frame, grid = model.frame, model.grid
    height = grid.size[2] if height_m is None else float(height_m)
    if not (math.isfinite(height) and height > 0):
        raise ValueError(f"height_m must be a positive length in m, not {height_m!r}")
    floor = grid.origin[2] if floor_m is None else float(floor_m)
    low = grid.origin[2] + frame["k"].to_numpy() * grid.size[2] - floor
    first = np.floor(low / height + 1e-9).astype(np.int64)
    last = np.ceil((low + grid.size[2]) / height - 1e-9).astype(np.int64) - 1
    rows, numbers, shares = [], [], []
    for step in range(int((last - first).max()) + 1 if len(frame) else 0):
        row = np.flatnonzero(first + step <= last)
        bench = first[row] + step
        top = np.minimum(low[row] + grid.size[2], (bench + 1) * height)
        rows.append(row)
        numbers.append(bench)
        shares.append((top - np.maximum(low[row], bench * height)) / grid.size[2])
    joined = _joined(rows, np.int64), _joined(numbers, np.int64), _joined(shares, np.float64)
    # The parts of one block add to 1 to the last digit, so that no tonne is lost in rounding.
    total = np.bincount(joined[0], weights=joined[2], minlength=len(frame))
    return pd.DataFrame(
        {"row": joined[0], "share": joined[2] / total[joined[0]],
         "floor_elevation": floor + joined[1] * height, "roof_elevation": floor + (joined[1] + 1) * height}
    )  # fmt: skip


def benches(
    model: BlockModel,
    *,
    height_m: float | None = None,
    floor_m: float | None = None,
    kept_share: ArrayLike | None = None,
    metals: Sequence[str] = (),
    density_column: str = "dry_density_tpm3",
) -> pd.DataFrame:
    """Volume, tonnes and metal by bench, from the top down; the sum is that of the blocks.

    Parameters
    ----------
    model : BlockModel
    height_m, floor_m : float, optional
        As in :func:`bench_parts`.
    kept_share : array_like (n,), optional
        Share of each block that counts.
    metals : sequence of str
        Grade columns. Dry mass without a grade does not weigh in the mean grade.

    Returns
    -------
    DataFrame
        floor_elevation, roof_elevation, volume_m3, dry_tonnes and wet_tonnes (where known), and for each metal its
        grade on dry mass and its contained tonnes.

    Raises
    ------
    ValueError
        If ``height_m`` is not positive.
    """
    frame = model.frame
    parts = bench_parts(model, height_m=height_m, floor_m=floor_m)
    row = parts["row"].to_numpy()
    share = np.ones(len(frame)) if kept_share is None else np.asarray(kept_share, dtype=np.float64)
    share = parts["share"].to_numpy() * share[row]
    held = parts[["floor_elevation", "roof_elevation"]].assign(
        volume_m3=frame["volume_m3"].to_numpy(dtype=np.float64)[row] * share
    )
    tonnes = dry_tonnes(frame, density_column)
    metals = metals if tonnes is not None else ()
    if tonnes is not None:
        held["dry_tonnes"] = tonnes[row] * share
        if "wet_tonnes" in frame:
            held["wet_tonnes"] = frame["wet_tonnes"].to_numpy(dtype=np.float64)[row] * share
        for metal in metals:
            grade = frame[metal].to_numpy(dtype=np.float64)[row]
            held[f"graded {metal}"] = np.where(np.isfinite(grade), held["dry_tonnes"], 0.0)
            held[f"{metal.rpartition('_')[0]}_contained_t"] = contained_tonnes(
                held["dry_tonnes"].to_numpy(), np.nan_to_num(grade), metal
            )
    table = held.groupby(["floor_elevation", "roof_elevation"], as_index=False, sort=True).sum()
    table = table.iloc[::-1].reset_index(drop=True)
    for metal in metals:
        stem = metal.rpartition("_")[0]
        mass = table.pop(f"graded {metal}") * float(contained_tonnes(1.0, 1.0, metal))
        content = table.pop(f"{stem}_contained_t")
        table[metal] = np.where(mass > 0, content / np.where(mass > 0, mass, 1.0), np.nan)
        table[f"{stem}_contained_t"] = content
    return table


def _joined(parts: list[NDArray[np.int64]] | list[NDArray[np.float64]], kind: type) -> NDArray:
    return np.concatenate(parts) if parts else np.zeros(0, dtype=kind)
