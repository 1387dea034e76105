"""What the outline and the relief say about the thickness before any hole is drilled."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sms_resource.blocks.grid import SurfaceGrid

Array = NDArray[Any]
FLOOR = 1e-3  # a hole on the outline still has a little room for thickness


@dataclass(frozen=True, eq=False)
class EdgeProfile:
    """Fields on the nodes of a lattice, each a SurfaceGrid of one shape.

    Attributes
    ----------
    dome : SurfaceGrid
        Height, 0 to 1, of the membrane that is fixed at the outline and pushed up evenly: the solution of
        Poisson's equation, a paraboloid on a round outline. Zero outside.
    distance : SurfaceGrid
        Distance to the outline in m inside it, zero outside.
    relief : SurfaceGrid or None
        Height in m of the seafloor above the smooth surface that is stretched over the seafloor along the
        outline; zero outside. None where the seafloor has gaps.
    inside : ndarray of bool
        Nodes inside the outline.
    """

    dome: SurfaceGrid
    distance: SurfaceGrid
    relief: SurfaceGrid | None
    inside: NDArray[np.bool_]


def edge_profile(top: SurfaceGrid, outline: Any) -> EdgeProfile:
    """Solve for the dome and the relief inside an outline, on the nodes of ``top``.

    Parameters
    ----------
    top : SurfaceGrid
        Seafloor; its outermost nodes should lie outside the outline.
    outline : shapely polygon or multipolygon
    """
    import shapely

    x, y = top.mesh()
    shapely.prepare(outline)
    inside = shapely.contains_xy(outline, x, y)
    inside[[0, -1], :] = False
    inside[:, [0, -1]] = False
    distance = np.zeros(top.shape)
    points = shapely.points(x[inside], y[inside])
    distance[inside] = shapely.distance(points, outline.boundary)
    dome = np.zeros(top.shape)
    relief: Array | None = None
    if inside.any():
        dome, relief = _membranes(top, inside)
    return EdgeProfile(
        top.with_values(dome),
        top.with_values(distance),
        None if relief is None else top.with_values(relief),
        inside,
    )


def _membranes(top: SurfaceGrid, inside: NDArray[np.bool_]) -> tuple[Array, Array | None]:
    from scipy import sparse
    from scipy.sparse.linalg import splu

    rows, cols = np.nonzero(inside)
    number = np.full(top.shape, -1)
    number[rows, cols] = np.arange(rows.size)
    stiff = {(0, 1): 1 / top.dx**2, (0, -1): 1 / top.dx**2, (1, 0): 1 / top.dy**2, (-1, 0): 1 / top.dy**2}
    rim = np.zeros(rows.size)
    entries: list[tuple[Array, Array, Array]] = []
    for (up, right), weight in stiff.items():
        other = number[rows + up, cols + right]
        linked = other >= 0
        entries.append((np.flatnonzero(linked), other[linked], np.full(int(linked.sum()), -weight)))
        rim += np.where(linked, 0.0, weight * top.values[rows + up, cols + right])
    i, j, value = (np.concatenate(part) for part in zip(*entries, strict=True))
    matrix = sparse.csc_matrix((value, (i, j)), shape=(rows.size, rows.size))
    matrix = matrix + sparse.diags(np.full(rows.size, sum(stiff.values())), format="csc")
    solve = splu(matrix.tocsc()).solve
    dome = np.zeros(top.shape)
    height = solve(np.ones(rows.size))
    dome[rows, cols] = height / height.max()
    seafloor = top.values[rows, cols]
    if not (np.isfinite(rim).all() and np.isfinite(seafloor).all()):
        return dome, None
    relief = np.zeros(top.shape)
    relief[rows, cols] = seafloor - solve(rim)
    return dome, relief
