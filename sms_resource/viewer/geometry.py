"""Shapes of the scene, in a local origin and exaggerated, ready to draw."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.blocks.grid import BlockGrid, SurfaceGrid

Array = NDArray[np.float64]
LEAST_M = 1.0  # thinner than that, the body is not stretched to the mean thickness
SINK = 0.1  # m under the seafloor at which cut blocks end, so that the two skins do not flicker
# Corners of the six faces of a block, outward, as steps along i, j, k.
FACES = (
    ((1, 0, 0), ((1, 0, 0), (1, 1, 0), (1, 1, 1), (1, 0, 1))),
    ((-1, 0, 0), ((0, 0, 0), (0, 0, 1), (0, 1, 1), (0, 1, 0))),
    ((0, 1, 0), ((0, 1, 0), (0, 1, 1), (1, 1, 1), (1, 1, 0))),
    ((0, -1, 0), ((0, 0, 0), (1, 0, 0), (1, 0, 1), (0, 0, 1))),
    ((0, 0, 1), ((0, 0, 1), (1, 0, 1), (1, 1, 1), (0, 1, 1))),
    ((0, 0, -1), ((0, 0, 0), (0, 1, 0), (1, 1, 0), (1, 0, 0))),
)


@dataclass(frozen=True, eq=False)
class View:
    """From true coordinates to those of the scene, and back.

    Parameters
    ----------
    origin : (float, float, float)
        True position of the scene's zero; keeps the numbers small, because graphics cards use 32 bits.
    exaggeration : float
        Factor on heights.
    flat : SurfaceGrid, optional
        Seafloor that is laid flat: heights are then minus the depth below it.
    thickness : SurfaceGrid, optional
        Thickness of the body under ``flat``: the base is laid flat too, at minus the mean thickness, and heights
        between the two are in proportion. Below the base they go on in metres; where the body is thinner than
        ``LEAST_M`` nothing below it has a place.
    """

    origin: tuple[float, float, float]
    exaggeration: float = 1.0
    flat: SurfaceGrid | None = None
    thickness: SurfaceGrid | None = None

    @property
    def mean_m(self) -> float:
        """Mean thickness of the body: how far apart the flat surfaces lie; as in the frame of the estimate."""
        if self.thickness is None:
            return math.nan
        body = self.thickness.values[self.thickness.values > 1e-6]
        return max(float(body.mean()) if body.size else 0.0, LEAST_M)

    def place(self, points: Any) -> Array:
        """Scene coordinates (n, 3) of true ones; NaN where a point has no place."""
        points = np.array(points, dtype=float).reshape(-1, 3)
        if self.flat is not None:
            floor = self.flat.sample(points[:, 0], points[:, 1])
            points[:, 2] = np.where(np.isfinite(floor), points[:, 2] - floor, np.nan)
            if self.thickness is not None:
                thick = np.nan_to_num(self.thickness.sample(points[:, 0], points[:, 1]))
                points[:, 2] = _in_proportion(points[:, 2], thick, self.mean_m)
        points = points - np.array(
            [self.origin[0], self.origin[1], 0.0 if self.flat is not None else self.origin[2]]
        )
        points[:, 2] *= self.exaggeration
        return points

    def true_ranges(self, bounds: tuple[float, ...]) -> list[float]:
        """What the axes say at the bounds (xmin, xmax, ymin, ymax, zmin, zmax) of the scene."""
        base = 0.0 if self.flat is not None else self.origin[2]
        low, high = (value / self.exaggeration + base for value in bounds[4:6])
        return [bounds[0] + self.origin[0], bounds[1] + self.origin[0], bounds[2] + self.origin[1],
                bounds[3] + self.origin[1], low, high]  # fmt: skip

    def scene_bounds(self, low: list[float], high: list[float]) -> tuple[float, ...]:
        """Bounds of the scene whose axes say ``low`` and ``high``: the inverse of :meth:`true_ranges`."""
        base = 0.0 if self.flat is not None else self.origin[2]
        x, y = self.origin[:2]
        f = self.exaggeration
        return (low[0] - x, high[0] - x, low[1] - y, high[1] - y, (low[2] - base) * f, (high[2] - base) * f)


def _in_proportion(height: Array, thick: Array, mean_m: float) -> Array:
    """Heights against the seafloor (m, negative down) with the base at minus the mean thickness."""
    inside = np.maximum(height, -np.maximum(thick, LEAST_M))
    below = np.where(thick < LEAST_M, np.where(height < inside, np.nan, 0.0), height - inside)
    return np.asarray(inside / np.maximum(thick, LEAST_M) * mean_m + below)


def block_skin(
    grid: BlockGrid,
    index: NDArray[np.int64],
    view: View,
    top: SurfaceGrid | None = None,
    base: SurfaceGrid | None = None,
) -> tuple[Any, NDArray[np.int64]]:
    """Outer faces of a set of blocks.

    Parameters
    ----------
    grid : BlockGrid
    index : ndarray (n, 3)
        i, j, k of the blocks that show. In a view with the seafloor alone laid flat, k counts layers below it, from
        -1 downward.
    view : View
    top, base : SurfaceGrid, optional
        Corners are held between them, so that a block cut by the seafloor shows the part inside the body.

    Returns
    -------
    pyvista.PolyData
        Quads.
    ndarray
        Row of ``index`` that each quad belongs to.
    """
    import pyvista as pv

    if len(index) == 0:
        return pv.PolyData(), np.zeros(0, dtype=np.int64)
    low = index.min(axis=0)
    shape = index.max(axis=0) - low + 3  # one empty block all round
    owner = np.full(tuple(shape), -1, dtype=np.int64)
    a, b, c = (index - low + 1).T
    owner[a, b, c] = np.arange(len(index))
    rows, corners = [], []
    for step, face in FACES:
        open_side = owner[a + step[0], b + step[1], c + step[2]] < 0
        found = np.flatnonzero(open_side)
        rows.append(found)
        corners.append(index[found][:, None, :] + np.array(face)[None, :, :])
    row = np.concatenate(rows)
    nodes = np.concatenate(corners).reshape(-1, 3)
    flat = view.flat is not None and view.thickness is None
    origin_z = 0.0 if flat else grid.origin[2]
    local = nodes * np.asarray(grid.size)
    world = grid.to_world(local)
    world[:, 2] = origin_z + local[:, 2]
    if not flat:
        world[:, 2] = _between(world, top, base)
    if flat:
        placed = View(view.origin, view.exaggeration).place(world)
        placed[:, 2] = local[:, 2] * view.exaggeration
    else:
        placed = view.place(world)
        whole = np.isfinite(placed[:, 2]).reshape(-1, 4).all(axis=1)
        placed, row = placed.reshape(-1, 4, 3)[whole].reshape(-1, 3), row[whole]
    quads = np.column_stack([np.full(len(row), 4), np.arange(4 * len(row)).reshape(-1, 4)])
    return pv.PolyData(placed.astype(np.float32), quads.ravel()), row


def _between(world: Array, top: SurfaceGrid | None, base: SurfaceGrid | None) -> Array:
    """Heights held under the top and over the base, where these are known."""
    z = world[:, 2]
    roof = np.full(len(z), np.inf) if top is None else top.sample(world[:, 0], world[:, 1]) - SINK
    if base is not None:
        z = np.fmax(z, np.fmin(base.sample(world[:, 0], world[:, 1]), roof))
    z = np.fmin(z, roof)
    return z


def cropped(surface: SurfaceGrid, bounds: tuple[float, float, float, float]) -> SurfaceGrid:
    """The part of a surface inside west, south, east, north; the whole where nothing of it is inside."""
    west, south, east, north = bounds
    i = np.flatnonzero((surface.x >= west) & (surface.x <= east))
    j = np.flatnonzero((surface.y >= south) & (surface.y <= north))
    if len(i) < 2 or len(j) < 2:
        return surface
    part = surface.values[j[0] : j[-1] + 1, i[0] : i[-1] + 1]
    return SurfaceGrid(
        float(surface.x[i[0]]), float(surface.y[j[0]]), surface.dx, surface.dy, part, surface.crs
    )


def flat_index(grid: BlockGrid, index: NDArray[np.int64], depth_m: Array) -> NDArray[np.int64]:
    """Index of blocks laid flat: k is the layer below the seafloor in which the centroid lies, from -1 down."""
    layer = -1 - np.floor(np.maximum(depth_m, 0.0) / grid.size[2]).astype(np.int64)
    return np.column_stack([index[:, :2], layer])


def surface_mesh(surface: SurfaceGrid, view: View, *, most: int = 400_000) -> Any:
    """A surface as quads between its nodes; quads next to a node without a value are left out.

    Every n-th node is drawn where there are more than ``most``.
    """
    import pyvista as pv

    step = max(1, int(np.ceil(np.sqrt(surface.values.size / most))))
    values = surface.values[::step, ::step]
    x, y = np.meshgrid(surface.x[::step], surface.y[::step])
    return _quads(x, y, values, np.isfinite(values), view, pv)


def _quads(x: Array, y: Array, z: Array, known: NDArray[np.bool_], view: View, pv: Any) -> Any:
    placed = view.place(np.column_stack([x.ravel(), y.ravel(), np.where(known, z, 0.0).ravel()]))
    known = known.ravel() & np.isfinite(placed[:, 2])
    numbers = np.full(x.size, -1, dtype=np.int64)
    numbers[known] = np.arange(int(known.sum()))
    number = numbers.reshape(x.shape)
    cells = np.column_stack(
        [n.ravel() for n in (number[:-1, :-1], number[:-1, 1:], number[1:, 1:], number[1:, :-1])]
    )
    cells = cells[(cells >= 0).all(axis=1)]
    if len(cells) == 0:
        return pv.PolyData()
    faces = np.column_stack([np.full(len(cells), 4), cells])
    return pv.PolyData(placed[known].astype(np.float32), faces.ravel())


def body_solid(top: SurfaceGrid, thickness: SurfaceGrid, view: View, *, thinnest: float = 0.05) -> Any:
    """The body between its surfaces as one closed skin: roof, floor and sides where it is thick enough."""
    import pyvista as pv

    x, y = thickness.mesh()
    roof = top.sample(x, y)
    thick = np.nan_to_num(thickness.values)
    known = np.isfinite(roof) & (thick > thinnest)
    upper = _quads(x, y, roof, known, view, pv)
    lower = _quads(x, y, roof - thick, known, view, pv)
    if upper.n_cells == 0:
        return pv.PolyData()
    edges = upper.extract_feature_edges(
        boundary_edges=True, feature_edges=False, manifold_edges=False, non_manifold_edges=False
    )
    parts = [upper, lower]
    if edges.n_cells:
        # The floor has the same nodes as the roof, so an edge of one names an edge of the other.
        from scipy.spatial import cKDTree

        number = cKDTree(upper.points).query(edges.points)[1]
        lines = edges.lines.reshape(-1, 3)[:, 1:]
        a, b = number[lines[:, 0]], number[lines[:, 1]]
        wall = np.column_stack([np.full(len(a), 4), a, b, b + upper.n_points, a + upper.n_points])
        parts.append(pv.PolyData(np.vstack([upper.points, lower.points]), wall.ravel()))
    skin = parts[0].append_polydata(*parts[1:]).clean()
    return skin.compute_normals(point_normals=False, consistent_normals=True, auto_orient_normals=True)


def tubes(sticks: pd.DataFrame, view: View, column: str | None, radius: float) -> dict[str, Any]:
    """Intervals of holes as tubes.

    Returns
    -------
    dict
        ``graded``: recovered and assayed, with the grade as cell data ``grade``; ``plain``: recovered without
        an assay; ``trace``: a thin line along every hole, so that a gap of lost core still shows its way.
        Missing where there is none.
    """
    import pyvista as pv

    ends = sticks[["x_from", "y_from", "z_from", "x_to", "y_to", "z_to"]].to_numpy(dtype=float).reshape(-1, 3)
    placed = view.place(ends).reshape(-1, 2, 3)
    visible = np.isfinite(placed).all(axis=(1, 2))
    recovery = (
        sticks["recovery_pct"].to_numpy(dtype=float)
        if "recovery_pct" in sticks
        else np.full(len(sticks), 100.0)
    )
    grade = (
        sticks[column].to_numpy(dtype=float) if column and column in sticks else np.full(len(sticks), np.nan)
    )
    core = visible & ~(recovery <= 0)
    made: dict[str, Any] = {}
    for name, keep in (
        ("graded", core & np.isfinite(grade)),
        ("plain", core & ~np.isfinite(grade)),
        ("trace", visible),
    ):
        if not keep.any():
            continue
        count = int(keep.sum())
        lines = np.column_stack([np.full(count, 2), np.arange(2 * count).reshape(-1, 2)])
        mesh = pv.PolyData(placed[keep].reshape(-1, 3).astype(np.float32), lines=lines.ravel())
        if name == "trace":
            made[name] = mesh
            continue
        mesh.cell_data["grade"] = grade[keep]
        made[name] = mesh.tube(radius=radius, n_sides=10, capping=True)
    return made


def collar_points(sticks: pd.DataFrame, view: View) -> tuple[Array, list[str]]:
    """Top of every hole in the scene, and its name."""
    first = sticks.sort_values(["hole_id", "from_m"] if "from_m" in sticks else ["hole_id"], kind="stable")
    first = first.drop_duplicates("hole_id")
    return view.place(first[["x_from", "y_from", "z_from"]].to_numpy(dtype=float)), first["hole_id"].astype(
        str
    ).tolist()
