"""Make a thickness grid pass through contacts exactly, and stay above what open holes demand.

The nodes round each hole are moved by the least sum of squares. Holes that share nodes can contradict each other
there, or tear the nodes far from what was kriged; such holes are met half way by the nodes and the rest of the way by
a small cone round the hole (a pin), whose volume is counted in litres.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sms_resource.blocks.grid import SurfaceGrid

Array = NDArray[Any]
CLOSE_M = 1e-10  # contacts are promised to a micrometre
MARGIN_M = 1e-7  # open holes are cleared by this much, so that rounding cannot break them
EXACT, SOFT = 1e4, 2.0
STEEP = 3.0  # nodes round a hole may be moved by this many times what the hole was missed by, and 0.5 m


def stencils(grid: SurfaceGrid, x: Array, y: Array) -> tuple[NDArray[np.int64], Array]:
    """Flat index and bilinear weight of the four nodes round each point, both (n, 4)."""
    ny, nx = grid.shape
    u, v = (np.asarray(x) - grid.x0) / grid.dx, (np.asarray(y) - grid.y0) / grid.dy
    left = np.clip(np.floor(u).astype(np.int64), 0, nx - 2)
    low = np.clip(np.floor(v).astype(np.int64), 0, ny - 2)
    fu, fv = u - left, v - low
    index = np.stack(
        [low * nx + left, low * nx + left + 1, (low + 1) * nx + left, (low + 1) * nx + left + 1], 1
    )
    return index, np.stack([(1 - fu) * (1 - fv), fu * (1 - fv), (1 - fu) * fv, fu * fv], 1)


def honour(
    thickness: SurfaceGrid, x: Array, y: Array, target: Array, at_least: NDArray[np.bool_]
) -> SurfaceGrid:
    """Change a thickness grid so that it honours the holes.

    Parameters
    ----------
    thickness : SurfaceGrid
        Without NaN and not negative.
    x, y, target : ndarray (n,)
        Position of each hole, no two at one place, and its thickness in m, not negative.
    at_least : ndarray of bool (n,)
        True where the target is a lower bound.

    Returns
    -------
    SurfaceGrid
        Nowhere negative; with pins where nodes alone cannot honour all holes.
    """
    values = thickness.values.ravel().copy()
    if target.size == 0:
        return thickness
    index, weight = stencils(thickness, x, y)
    goal = target + np.where(at_least, MARGIN_M, 0.0)
    for members in _clusters(index, weight):
        if members.size == 1:
            nodes, matrix = index[members[0]], weight[members]
        else:
            nodes, inverse = np.unique(index[members], return_inverse=True)
            matrix = np.zeros((members.size, nodes.size))
            np.add.at(matrix, (np.arange(members.size)[:, None], inverse.reshape(-1, 4)), weight[members])
        start, wanted, bound = values[nodes], goal[members], at_least[members]
        gap = wanted - matrix @ start
        gap = np.where(bound, np.maximum(gap, 0.0), np.abs(gap))
        moved = _project(start, matrix, wanted, bound, EXACT)
        missed = wanted - matrix @ moved
        missed = np.where(bound, np.maximum(missed, 0.0), np.abs(missed))
        if missed.max() > CLOSE_M or np.abs(moved - start).max() > STEEP * gap.max() + 0.5:
            moved = _project(start, matrix, wanted, bound, SOFT)
        values[nodes] = moved
    changed = thickness.with_values(values.reshape(thickness.shape))
    return replace(changed, pins=_pins(changed, x, y, goal, at_least))


def _pins(grid: SurfaceGrid, x: Array, y: Array, goal: Array, at_least: NDArray[np.bool_]) -> Array | None:
    """Cones that close what is still missing at holes, each too small to reach another hole."""
    from scipy.spatial import cKDTree

    missing = goal - grid.sample(x, y)
    missing = np.where(at_least, np.maximum(missing, 0.0), missing)
    chosen = np.flatnonzero(np.abs(missing) > CLOSE_M)
    if chosen.size == 0:
        return None
    xy = np.column_stack([x, y])
    nearest = cKDTree(xy).query(xy[chosen], k=min(2, len(xy)))[0].reshape(chosen.size, -1)[:, -1]
    radius = np.where(nearest > 0, 0.45 * nearest, np.inf)
    radius = np.minimum(radius, 0.5 * min(grid.dx, grid.dy))
    # A cone that points up must be steeper than the surface, or the base would rise above the seafloor beside it.
    index, _ = stencils(grid, x[chosen], y[chosen])
    corners = grid.values.ravel()[index]
    steepest = 2.0 * (corners.max(axis=1) - corners.min(axis=1)) / min(grid.dx, grid.dy)
    radius = np.minimum(radius, np.abs(missing[chosen]) / np.maximum(steepest, 1e-9))
    return np.column_stack([xy[chosen], radius, missing[chosen]])


def _clusters(index: NDArray[np.int64], weight: Array) -> list[NDArray[np.int64]]:
    """Holes that share nodes, directly or through others."""
    owner: dict[int, int] = {}
    parent = list(range(len(index)))

    def root(i: int) -> int:
        while parent[i] != i:
            parent[i] = parent[parent[i]]
            i = parent[i]
        return i

    for hole, (nodes, weights) in enumerate(zip(index, weight, strict=True)):
        for node in nodes[weights > 0]:
            if int(node) in owner:
                parent[root(hole)] = root(owner[int(node)])
            else:
                owner[int(node)] = hole
    groups: dict[int, list[int]] = {}
    for hole in range(len(index)):
        groups.setdefault(root(hole), []).append(hole)
    return [np.array(group) for group in groups.values()]


def _project(start: Array, matrix: Array, goal: Array, at_least: NDArray[np.bool_], weight: float) -> Array:
    """Nearest non-negative node values with matrix @ values = goal, or >= goal where ``at_least``.

    A hole weighs ``weight`` times as much as staying where the kriging put a node; EXACT adds a last step that
    closes what such a weight leaves.
    """
    from scipy.optimize import nnls

    gap = goal - matrix @ start
    if np.all(np.where(at_least, gap <= 0, np.abs(gap) <= CLOSE_M)):
        return start
    if goal.size == 1 and weight == EXACT:
        step = start + matrix[0] * (gap[0] / float(matrix[0] @ matrix[0]))
        if step.min() >= 0:
            return step
    slack = np.zeros((goal.size, int(at_least.sum())))
    slack[np.flatnonzero(at_least), np.arange(slack.shape[1])] = -1.0
    scale = max(1.0, float(np.max(np.abs(goal))))
    left = np.vstack([
        np.hstack([weight * matrix, weight * slack]),
        np.hstack([np.eye(start.size), np.zeros((start.size, slack.shape[1]))]),
    ])  # fmt: skip
    solution, _ = nnls(left, np.concatenate([weight * goal, start]) / scale, maxiter=100 * left.shape[1])
    values = solution[: start.size] * scale
    for _ in range(20 if weight == EXACT else 0):
        gap = goal - matrix @ values
        active = np.where(at_least, gap > 0, np.abs(gap) > 1e-13)
        free = values > 0
        if not active.any() or not free.any():
            break
        step = np.linalg.lstsq(matrix[active][:, free], gap[active], rcond=1e-10)[0]
        values[free] = np.maximum(values[free] + step, 0.0)
    return values
