"""Make a thickness grid pass through contacts exactly, and stay above what open holes demand."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from sms_resource.blocks.grid import SurfaceGrid

Array = NDArray[Any]
EXACT_M = 1e-7  # contacts are promised to a micrometre
MARGIN_M = 1e-6  # open holes are cleared by this much, so that rounding cannot break them


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
) -> tuple[SurfaceGrid, Array]:
    """Change the nodes round holes by the least sum of squares so that the surface honours the holes.

    Parameters
    ----------
    thickness : SurfaceGrid
        Without NaN and not negative.
    x, y, target : ndarray (n,)
        Position of each hole and its thickness in m.
    at_least : ndarray of bool (n,)
        True where the target is a lower bound.

    Returns
    -------
    (SurfaceGrid, ndarray)
        The changed grid, nowhere negative; and by how many metres each hole is missed (0 where honoured).
        Holes that share nodes and contradict each other cannot all be honoured on this grid.
    """
    values = thickness.values.ravel().copy()
    if target.size == 0:
        return thickness, np.zeros(0)
    index, weight = stencils(thickness, x, y)
    goal = target + np.where(at_least, MARGIN_M, 0.0)
    for members in _clusters(index, weight):
        nodes, inverse = np.unique(index[members], return_inverse=True)
        matrix = np.zeros((members.size, nodes.size))
        np.add.at(matrix, (np.arange(members.size)[:, None], inverse.reshape(-1, 4)), weight[members])
        values[nodes] = _project(values[nodes], matrix, goal[members], at_least[members])
    changed = thickness.with_values(values.reshape(thickness.shape))
    got = changed.sample(x, y)
    miss = np.where(at_least, np.maximum(target - got, 0.0), np.abs(got - target))
    return changed, np.where(miss <= EXACT_M, 0.0, miss)


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


def _project(start: Array, matrix: Array, goal: Array, at_least: NDArray[np.bool_]) -> Array:
    """Nearest non-negative node values with matrix @ values = goal, or >= goal where ``at_least``."""
    from scipy.optimize import nnls

    gap = goal - matrix @ start
    if np.all(np.where(at_least, gap <= 0, np.abs(gap) <= 1e-12)):
        return start
    heavy = 1e4  # a constraint weighs so much more than staying where the kriging put the node
    slack = np.zeros((goal.size, int(at_least.sum())))
    slack[np.flatnonzero(at_least), np.arange(slack.shape[1])] = -1.0
    scale = max(1.0, float(np.max(np.abs(goal))))
    left = np.vstack([
        np.hstack([heavy * matrix, heavy * slack]),
        np.hstack([np.eye(start.size), np.zeros((start.size, slack.shape[1]))]),
    ])  # fmt: skip
    solution, _ = nnls(left, np.concatenate([heavy * goal, start]) / scale, maxiter=100 * left.shape[1])
    values = solution[: start.size] * scale
    for _ in range(20):  # polish: the weighted solution misses by about 1e-8
        gap = goal - matrix @ values
        active = np.where(at_least, gap > 0, np.abs(gap) > 1e-13)
        if not active.any():
            break
        free = values > 0
        free_matrix = matrix[active][:, free]
        if free_matrix.size == 0:
            break
        step = np.linalg.lstsq(free_matrix, gap[active], rcond=1e-10)[0]
        values[free] = np.maximum(values[free] + step, 0.0)
    return values
