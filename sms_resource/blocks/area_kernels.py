"""Exact moments of a polygon inside every cell of a lattice.

Green's theorem turns the area and the first moments of (polygon and cell) into sums over the pieces of the
polygon's edges that lie in the cell or to the right of it, so no polygon is ever intersected with a cell.
"""

from __future__ import annotations

from typing import Any

import numba
import numpy as np
from numpy.typing import NDArray

Array = NDArray[Any]


@numba.njit(cache=True)
def cell_moments(edges: Array, first_row: int, area: Array, ms: Array, mt: Array, mst: Array) -> None:
    """Add up area, and the moments of s, t and s t, of a polygon in each cell.

    Parameters
    ----------
    edges : ndarray (e, 4)
        Edges u1, v1, u2, v2 in units of cells; exterior rings counter-clockwise, holes clockwise.
        Cell (row, column) spans ``column <= u <= column + 1`` and
        ``first_row + row <= v <= first_row + row + 1``.
    first_row : int
        Row of the lattice that is row 0 of the arrays.
    area, ms, mt, mst : ndarray (rows, columns + 1)
        Zero on entry. On return the integrals over polygon and cell of 1, s, t and s t, where s and t run
        from 0 to 1 across the cell. The last column is working room.
    """
    rows, columns = area.shape[0], area.shape[1] - 1
    # Full strips reach every cell left of the piece; they are kept per cell and summed from the right.
    strip = np.zeros((rows, columns + 1))
    strip_t = np.zeros((rows, columns + 1))
    for e in range(edges.shape[0]):
        u1, v1, u2, v2 = edges[e, 0], edges[e, 1], edges[e, 2], edges[e, 3]
        if v1 == v2:
            continue
        low, high = min(v1, v2), max(v1, v2)
        start = max(int(np.floor(low)), first_row)
        stop = min(int(np.ceil(high)), first_row + rows)
        for row in range(start, stop):
            a, b = max(low, float(row)), min(high, row + 1.0)
            if b <= a:
                continue
            va, vb = (a, b) if v2 > v1 else (b, a)
            ua = u1 + (u2 - u1) * ((va - v1) / (v2 - v1))
            ub = u1 + (u2 - u1) * ((vb - v1) / (v2 - v1))
            r = row - first_row
            _row_piece(ua, va - row, ub, vb - row, r, columns, area, ms, mt, mst, strip, strip_t)
    for r in range(rows):
        total, total_t = 0.0, 0.0
        for c in range(columns, -1, -1):
            area[r, c] += total
            ms[r, c] += 0.5 * total
            mt[r, c] += total_t
            mst[r, c] += 0.5 * total_t
            total += strip[r, c]
            total_t += strip_t[r, c]


@numba.njit(cache=True)
def _row_piece(
    ua: float,
    ta: float,
    ub: float,
    tb: float,
    r: int,
    columns: int,
    area: Array,
    ms: Array,
    mt: Array,
    mst: Array,
    strip: Array,
    strip_t: Array,
) -> None:
    """Share one piece of an edge, inside one row, out over the columns that it crosses."""
    step = 1 if ub >= ua else -1
    column = int(np.floor(ua))
    if step < 0 and ua == column:
        column -= 1
    last = int(np.floor(ub))
    if step > 0 and ub == last and last > column:
        last -= 1
    u0, t0 = ua, ta
    while True:
        if column == last:
            u1, t1 = ub, tb
        else:
            u1 = column + 1.0 if step > 0 else float(column)
            t1 = ta + (tb - ta) * ((u1 - ua) / (ub - ua))
        dt = t1 - t0
        if column >= columns:
            strip[r, columns] += dt
            strip_t[r, columns] += 0.5 * dt * (t0 + t1)
        elif column >= 0:
            s0, s1 = u0 - column, u1 - column
            squares = s0 * s0 + s0 * s1 + s1 * s1
            ds = s1 - s0
            area[r, column] += 0.5 * dt * (s0 + s1)
            ms[r, column] += dt * squares / 6.0
            mt[r, column] += dt * (2.0 * s0 * t0 + s0 * t1 + s1 * t0 + 2.0 * s1 * t1) / 6.0
            inner = t0 * squares / 3.0 + dt * (0.5 * s0 * s0 + 2.0 * s0 * ds / 3.0 + 0.25 * ds * ds)
            mst[r, column] += 0.5 * dt * inner
            strip[r, column] += dt
            strip_t[r, column] += 0.5 * dt * (t0 + t1)
        if column == last:
            break
        u0, t0 = u1, t1
        column += step
