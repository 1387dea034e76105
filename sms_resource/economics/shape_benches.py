"""Whole benches, in connected parts, from the seafloor down."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.economics.closure import greatest_closure, needed_by

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
Mask = NDArray[np.bool_]


def full_benches(
    frame: pd.DataFrame, weight: Floats, free: Mask, cell_m2: float, *, levels: int, least_area_m2: float
) -> tuple[Mask, Integers, list[tuple[int, float, bool]]]:
    """Blocks inside the parts of benches that are taken, the part of each block, and a list of all parts.

    Parameters
    ----------
    frame : DataFrame
        i, j, k of each block; k rises upward. Bench 0 holds the lowest ``levels`` levels.
    weight, free : (n,) arrays
        Gain of taking each block, and whether it may be touched.

    Returns
    -------
    inside : (n,) bool array
    number : (n,) int array
        1, 2, ... for the parts; 0 for blocks that may not be touched.
    parts : list of (bench, area m2, whether it is taken)
    """
    from scipy import ndimage

    count = len(frame)
    number = np.zeros(count, dtype=np.int64)
    if count == 0:
        return np.zeros(0, dtype=bool), number, []
    i, j, k = (frame[axis].to_numpy(dtype=np.int64) for axis in ("i", "j", "k"))
    i, j, bench = i - i.min() + 1, j - j.min() + 1, (k - k.min()) // levels
    shape = (int(bench.max()) + 1, int(i.max()) + 2, int(j.max()) + 2)
    parts = np.zeros(shape, dtype=np.int64)
    parts[bench[free], i[free], j[free]] = 1
    total = 0
    for level in range(shape[0]):
        labels, found = ndimage.label(parts[level], np.ones((3, 3)))
        parts[level] = np.where(labels > 0, labels + total, 0)
        total += found
    number[free] = parts[bench[free], i[free], j[free]]
    worth = np.bincount(number, weights=weight, minlength=total + 1).astype(np.float64)
    areas = np.bincount(parts.ravel(), minlength=total + 1) * cell_m2
    level_of = np.zeros(total + 1, dtype=np.int64)
    level_of[parts.ravel()] = np.repeat(np.arange(shape[0]), shape[1] * shape[2])

    occupied, shut = np.zeros(shape, dtype=bool), np.zeros(shape, dtype=bool)
    occupied[bench, i, j] = True
    shut[bench[~free], i[~free], j[~free]] = True
    pairs, barred = _precedence(parts, occupied, shut, total)
    small = areas < least_area_m2
    # The top of a mound is small by nature: a small part stands where a larger one below needs it.
    chosen = greatest_closure(worth, pairs, barred | (small & ~needed_by(pairs, ~small & ~barred)))
    chosen &= ~small | needed_by(pairs, chosen & ~small)
    inside = chosen[number] & (number > 0)
    listed = [(int(level_of[n]), float(areas[n]), bool(chosen[n])) for n in range(1, total + 1)]
    return inside, number, listed


def _precedence(parts: Integers, occupied: Mask, shut: Mask, total: int) -> tuple[Integers, Mask]:
    """Which part needs which other above it, and which lie in or under a block that may not be touched."""
    barred = np.zeros(total + 1, dtype=bool)
    barred[parts[shut]] = True
    above = np.zeros(parts.shape[1:], dtype=np.int64)
    closed = np.zeros(parts.shape[1:], dtype=bool)
    found = [np.empty((0, 2), dtype=np.int64)]
    for level in range(len(parts) - 1, -1, -1):
        here = parts[level]
        both = (here > 0) & (above > 0)
        coded = np.unique(here[both] * (total + 1) + above[both])
        found.append(np.stack(np.divmod(coded, total + 1), axis=1))
        barred[here[closed]] = True
        closed |= shut[level]
        above = np.where(occupied[level], here, above)
    barred[0] = True
    return np.concatenate(found), barred
