"""Classes as connected volumes on the lattice of the blocks."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.classification.criteria import CLASS_NAMES, Smoothing

Codes = NDArray[np.int8]


@dataclass(frozen=True)
class Lattice:
    """Where each row of a block frame sits in a dense (i, j, k) array with one block of margin."""

    index: tuple[NDArray[np.intp], NDArray[np.intp], NDArray[np.intp]]
    shape: tuple[int, int, int]
    lowest: tuple[int, int, int]

    @classmethod
    def of(cls, frame: pd.DataFrame) -> Lattice:
        """Lattice of a frame with the integer columns i, j, k; two rows may not share a place."""
        columns = [frame[axis].to_numpy(dtype=np.intp) for axis in ("i", "j", "k")]
        lowest = tuple(int(c.min()) - 1 if len(c) else 0 for c in columns)
        shape = tuple(int(c.max()) - low + 2 if len(c) else 1 for c, low in zip(columns, lowest))
        index = tuple(c - low for c, low in zip(columns, lowest))
        places = np.zeros(shape, dtype=bool)
        places[index] = True
        if np.count_nonzero(places) != len(frame):
            raise ValueError("two blocks share the same i, j, k")
        return cls(index, shape, lowest)  # type: ignore[arg-type]

    def dense(self, values: NDArray, fill: float) -> NDArray:
        """Values of the rows in their places; ``fill`` elsewhere."""
        out = np.full(self.shape, fill, dtype=values.dtype)
        out[self.index] = values
        return out


def smooth_classes(
    frame: pd.DataFrame,
    classes: Codes,
    allowed: Codes,
    settings: Smoothing,
    *,
    dry_tonnes: str = "dry_tonnes",
    holes: str = "hole_count",
    hole_cells: pd.DataFrame | None = None,
) -> Codes:
    """Smooth classes to connected volumes: a majority among neighbours, then small volumes and islands go.

    Parameters
    ----------
    frame : DataFrame
        One row a block with i, j, k.
    classes, allowed : int8 arrays
        Class of each block, and the highest class that the rules allow it, which is never below its class.
    hole_cells : DataFrame, optional
        hole_id, i, j: the columns of blocks that each hole pierces. Without it the holes of a volume are
        taken as the most that inform any one of its blocks (column ``holes``).

    Returns
    -------
    int8 array
    """
    if len(frame) == 0:
        return classes.copy()
    lattice = Lattice.of(frame)
    body = lattice.dense(np.ones(len(frame), dtype=np.int32), 0)
    out = classes.copy()
    for _ in range(settings.passes):
        new = np.minimum(_majority(lattice, body, out, settings.window), allowed)
        if np.array_equal(new, out):
            break
        out = new
    dry = frame[dry_tonnes].to_numpy(dtype=np.float64)
    informed = frame[holes].to_numpy(dtype=np.float64)
    out = _fill_islands(lattice, body > 0, out, allowed, settings.island_blocks)
    for level in range(len(CLASS_NAMES) - 1, 0, -1):
        out = _drop_small(lattice, out, level, dry, informed, settings, hole_cells)
    return out


def connected_volumes(frame: pd.DataFrame, classes: Codes, *, dry_tonnes: str = "dry_tonnes") -> pd.DataFrame:
    """Connected volumes of each class (or better): how many, and how large the largest and smallest are.

    Returns
    -------
    DataFrame
        proposed_class, volumes, blocks, largest_blocks, smallest_blocks, largest_share of dry tonnes.
    """
    from scipy import ndimage

    rows = []
    lattice = Lattice.of(frame)
    dry = frame[dry_tonnes].to_numpy(dtype=np.float64)
    for level in range(1, len(CLASS_NAMES)):
        inside = classes >= level
        if not inside.any():
            continue
        labels, count = ndimage.label(lattice.dense(inside, False), np.ones((3, 3, 3)))
        mine = labels[lattice.index]
        blocks = np.bincount(mine, minlength=count + 1)[1:]
        tonnes = np.bincount(mine, weights=dry, minlength=count + 1)[1:]
        rows.append(
            {
                "proposed_class": CLASS_NAMES[level],
                "volumes": count,
                "blocks": int(blocks.sum()),
                "largest_blocks": int(blocks.max()),
                "smallest_blocks": int(blocks.min()),
                "largest_share": float(tonnes.max() / tonnes.sum()) if tonnes.sum() > 0 else np.nan,
            }
        )
    columns = ["proposed_class", "volumes", "blocks", "largest_blocks", "smallest_blocks", "largest_share"]
    return pd.DataFrame(rows, columns=columns)


def _majority(lattice: Lattice, body: NDArray, classes: Codes, window: tuple[int, int, int]) -> Codes:
    """Class of the majority of the body's blocks in the window; a tie keeps what the block had."""
    voters = _box_sum(body, window)[lattice.index]
    out = np.zeros_like(classes)
    for level in range(1, len(CLASS_NAMES)):
        inside = classes >= level
        if not inside.any():
            break
        votes = _box_sum(lattice.dense(inside.astype(np.int32), 0), window)[lattice.index]
        out[(2 * votes > voters) | ((2 * votes == voters) & inside)] = level
    return out


def _box_sum(values: NDArray, window: tuple[int, int, int]) -> NDArray:
    from scipy import ndimage

    for axis, width in enumerate(window):
        if width > 1:
            ones = np.ones(width, dtype=np.int32)
            values = ndimage.correlate1d(values, ones, axis=axis, mode="constant", cval=0)
    return values


def _fill_islands(lattice: Lattice, body: NDArray, classes: Codes, allowed: Codes, most: int) -> Codes:
    """Raise small islands of a lower class that touch nothing of the body but better blocks."""
    from scipy import ndimage

    out = classes.copy()
    for level in range(1, len(CLASS_NAMES)):
        better = out >= level
        if not better.any():
            break
        lower = ~better
        labels, count = ndimage.label(lattice.dense(lower, False), np.ones((3, 3, 3)))
        if count == 0:
            continue
        mine = labels[lattice.index]
        sizes = np.bincount(mine, minlength=count + 1)
        # An island at the skin of the body is not enclosed: it must have a face to nothing but blocks.
        outside = ndimage.binary_dilation(~body, ndimage.generate_binary_structure(3, 1))
        touches_skin = np.bincount(mine, weights=outside[lattice.index], minlength=count + 1) > 0
        forbidden = np.bincount(mine, weights=allowed < level, minlength=count + 1) > 0
        gap = np.bincount(mine, weights=out < level - 1, minlength=count + 1) > 0
        fill = (sizes <= most) & ~touches_skin & ~forbidden & ~gap
        fill[0] = False
        out[fill[mine]] = level
    return out


def _drop_small(
    lattice: Lattice,
    classes: Codes,
    level: int,
    dry: NDArray[np.float64],
    informed: NDArray[np.float64],
    settings: Smoothing,
    hole_cells: pd.DataFrame | None,
) -> Codes:
    from scipy import ndimage

    inside = classes >= level
    if not inside.any():
        return classes
    labels, count = ndimage.label(lattice.dense(inside, False), np.ones((3, 3, 3)))
    mine = labels[lattice.index]
    blocks = np.bincount(mine, minlength=count + 1)
    tonnes = np.bincount(mine, weights=dry, minlength=count + 1)
    if hole_cells is None:
        holes = np.zeros(count + 1)
        np.maximum.at(holes, mine, np.nan_to_num(informed))
    else:
        holes = _holes_in(labels, count, lattice, hole_cells)
    small = (
        (blocks < settings.least_blocks)
        | (tonnes < settings.least_dry_tonnes)
        | (holes < settings.least_holes)
    )
    small[0] = False
    out = classes.copy()
    out[small[mine] & inside] = level - 1
    return out


def _holes_in(labels: NDArray, count: int, lattice: Lattice, hole_cells: pd.DataFrame) -> NDArray[np.float64]:
    """Distinct holes whose column of blocks meets each labelled volume."""
    pierced: list[set[str]] = [set() for _ in range(count + 1)]
    cells = zip(
        hole_cells["hole_id"].astype(str),
        hole_cells["i"].to_numpy(dtype=np.intp) - lattice.lowest[0],
        hole_cells["j"].to_numpy(dtype=np.intp) - lattice.lowest[1],
    )
    for hole, i, j in cells:
        if 0 <= i < lattice.shape[0] and 0 <= j < lattice.shape[1]:
            for label in np.unique(labels[i, j]):
                pierced[int(label)].add(hole)
    return np.array([len(names) for names in pierced], dtype=np.float64)
