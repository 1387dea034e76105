"""Columns taken from the seafloor down to their best depth, joined to patches."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
Mask = NDArray[np.bool_]


def column_patches(
    frame: pd.DataFrame, weight: Floats, free: Mask, cell_m2: float, *, least_area_m2: float, fill_gaps: bool
) -> tuple[Mask, Integers]:
    """Blocks inside patches, and the number of the patch of each (0 outside).

    Parameters
    ----------
    frame : DataFrame
        i, j, k of each block; k rises upward.
    weight : (n,) array
        Gain of taking each block, below zero where it costs.
    free : (n,) bool array
        Blocks that may be touched.
    """
    from scipy import ndimage

    count = len(frame)
    taken, number = np.zeros(count, dtype=bool), np.zeros(count, dtype=np.int64)
    if count == 0:
        return taken, number
    order, column, place = _columns(frame)
    shape = (int(column.max()) + 1, int(place.max()) + 1)
    running = np.zeros(shape)
    running[column, place] = weight[order]
    running = np.cumsum(running, axis=1)
    # What lies below a block that may not be touched is out of reach.
    reach = np.zeros(shape, dtype=bool)
    reach[column, place] = free[order]
    reach = np.logical_and.accumulate(reach, axis=1)
    running[~reach] = -np.inf
    best = running.max(axis=1)
    levels = np.where(best > 0, running.argmax(axis=1) + 1, 0)  # the shallowest depth with the best sum

    first = order[place == 0]
    i, j = (frame[axis].to_numpy(dtype=np.int64)[first] for axis in ("i", "j"))
    i, j = i - i.min() + 1, j - j.min() + 1
    plan = np.zeros((int(i.max()) + 2, int(j.max()) + 2), dtype=np.int64)
    plan[i, j] = levels
    labels, total = ndimage.label(plan > 0, np.ones((3, 3)))
    if fill_gaps:
        worth = np.bincount(
            labels[i, j], weights=np.where(levels > 0, best, 0.0), minlength=total + 1
        ).astype(np.float64)
        _fill(plan, labels, worth, (i, j), running, reach.sum(axis=1))
    area = np.bincount(labels.ravel(), minlength=total + 1) * cell_m2
    keep = area >= least_area_m2
    keep[0] = False
    mine = (np.cumsum(keep) * keep)[labels[i, j]]
    inside = (place < plan[i, j][column]) & (mine[column] > 0)
    taken[order] = inside
    number[order] = np.where(inside, mine[column], 0)
    return taken, number


def _columns(frame: pd.DataFrame) -> tuple[Integers, Integers, Integers]:
    """Rows sorted by column and from the top down; the column of each, and its place below the top."""
    i, j, k = (frame[axis].to_numpy(dtype=np.int64) for axis in ("i", "j", "k"))
    order = np.lexsort((-k, j, i))
    fresh = np.ones(len(order), dtype=bool)
    fresh[1:] = (np.diff(i[order]) != 0) | (np.diff(j[order]) != 0)
    column = np.cumsum(fresh) - 1
    place = np.arange(len(order)) - np.flatnonzero(fresh)[column]
    return order, column, place


def _fill(
    plan: Integers,
    labels: NDArray[np.int32],
    worth: Floats,
    columns: tuple[Integers, Integers],
    running: Floats,
    reached: Integers,
) -> None:
    """Take enclosed columns with their patch, to the shallowest depth around them, while the patch still gains."""
    from scipy import ndimage

    gaps = ndimage.binary_fill_holes(plan > 0) & (plan == 0)
    index = np.full(plan.shape, -1, dtype=np.int64)
    index[columns] = np.arange(len(columns[0]))
    holes, _ = ndimage.label(gaps)
    for hole, box in enumerate(ndimage.find_objects(holes), start=1):
        near = tuple(slice(side.start - 1, side.stop + 1) for side in box)  # a gap never lies on the border
        inside = holes[near] == hole
        ring = ndimage.binary_dilation(inside, np.ones((3, 3))) & (plan[near] > 0)
        cells = index[near][inside]
        if not ring.any() or (cells < 0).any() or (reached[cells] == 0).any():
            continue  # rock outside the body, or a zone that may not be touched: nothing to take
        wanted = np.minimum(int(plan[near][ring].min()), reached[cells])
        owner = int(labels[near][ring][0])
        gain = float(running[cells, wanted - 1].sum())
        if worth[owner] + gain > 0:
            worth[owner] += gain
            plan[near][inside] = wanted
            labels[near][inside] = owner
