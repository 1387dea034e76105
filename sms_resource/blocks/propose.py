"""Size, rotation and origin of blocks, proposed from the holes and the shape of the body."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from sms_resource.blocks.body import Body
from sms_resource.blocks.body_inputs import hole_spacing
from sms_resource.blocks.grid import BlockGrid
from sms_resource.blocks.polygons import lattice_moments, polygon_edges

Array = NDArray[Any]
NICE_M = (0.5, 1.0, 2.0, 2.5, 4.0, 5.0, 10.0, 12.5, 20.0, 25.0, 50.0, 100.0)
ROUND_BELOW = 1.25  # a body less elongated than this has no axis worth turning the blocks to


def propose_grid(
    body: Body,
    hole_xy: ArrayLike,
    *,
    size: tuple[float, float, float] | None = None,
    azimuth: float | None = None,
    origin: tuple[float, float, float] | None = None,
) -> tuple[BlockGrid, pd.DataFrame]:
    """Propose a block grid that covers the body; what is given is kept.

    Rules (common practice, no source): edges in plan of a third to a half of the hole spacing, a bench of 1 to
    4 m and some eight blocks in the mean thickness, the j axis along the body's long axis, the origin on whole
    multiples of the block.

    Parameters
    ----------
    body : Body
    hole_xy : array_like (n, 2)
        Easting and northing of the holes.
    size, azimuth, origin : optional
        Decisions of the study.

    Returns
    -------
    (BlockGrid, DataFrame)
        The grid; and what, value, decided_by ("study" | "proposed"), why.

    Raises
    ------
    ValueError
        If the body has no volume and an edge must be proposed.
    """
    rows: list[dict[str, Any]] = []
    xy = np.asarray(hole_xy, dtype=np.float64).reshape(-1, 2)
    if size is None:
        size = _size(body, xy, rows)
    else:
        rows.append(_row("size", _text(size), "study", "given"))
    if azimuth is None:
        azimuth = _azimuth(body, rows)
    else:
        rows.append(_row("azimuth", f"{azimuth:g}", "study", "given"))
    grid = _cover(body, size, azimuth, origin, rows)
    return grid, pd.DataFrame(rows, columns=["what", "value", "decided_by", "why"])


def body_axis(body: Body) -> tuple[float, float]:
    """Azimuth of the body's long axis in degrees (-90 to 90), and its elongation, from second moments.

    The moments weigh the area of the outline by thickness, so a thin tongue turns the axis little.
    """
    top = body.top
    edges = (polygon_edges(body.outline) - np.array([top.x0, top.y0] * 2)) / np.array([top.dx, top.dy] * 2)
    ny, nx = top.shape
    moments = lattice_moments(edges, ny - 1, nx - 1)
    s, t = moments.centroid()
    rows, columns = np.indices(s.shape)
    x, y = top.x0 + (columns + s) * top.dx, top.y0 + (rows + t) * top.dy
    weight = moments.area * np.nan_to_num(body.thickness.sample(x, y))
    total = weight.sum()
    if total <= 0:
        return 0.0, 1.0
    x, y = x - (weight * x).sum() / total, y - (weight * y).sum() / total
    xx, yy, xy = ((weight * a).sum() / total for a in (x * x, y * y, x * y))
    values, vectors = np.linalg.eigh(np.array([[xx, xy], [xy, yy]]))
    long = vectors[:, 1]
    azimuth = math.degrees(math.atan2(long[0], long[1]))
    azimuth = (azimuth + 90.0) % 180.0 - 90.0
    return azimuth, math.sqrt(max(values[1], 0.0) / max(values[0], 1e-12))


def _size(body: Body, xy: Array, rows: list[dict[str, Any]]) -> tuple[float, float, float]:
    if body.volume_m3 <= 0:
        raise ValueError("size cannot be proposed for a body without volume; give size")
    spacing = hole_spacing(pd.DataFrame({"easting": xy[:, 0], "northing": xy[:, 1]}), body.outline)
    across = math.sqrt(body.area_m2)
    edge = _nice(min(spacing / 2.5, across / 10))
    bench = min(max(_nice(body.mean_thickness_m / 8), 1.0), 4.0)
    bench = max(b for b in (1.0, 2.0, 4.0) if b <= bench)
    rows.append(
        _row(
            "size",
            _text((edge, edge, bench)),
            "proposed",
            f"holes stand {spacing:.1f} m apart (median): a third to a half of that in plan, and at least ten blocks "
            f"across; bench of 1 to 4 m for a mean thickness of {body.mean_thickness_m:.1f} m",
        )
    )
    return edge, edge, bench


def _azimuth(body: Body, rows: list[dict[str, Any]]) -> float:
    axis, elongation = body_axis(body)
    if elongation < ROUND_BELOW:
        why = f"the body is nearly round in plan (elongation {elongation:.2f}), so blocks stay north up"
        rows.append(_row("azimuth", "0", "proposed", why))
        return 0.0
    azimuth = float(round(axis))
    why = f"long axis of the body, weighted by thickness (elongation {elongation:.2f})"
    rows.append(_row("azimuth", f"{azimuth:g}", "proposed", why))
    return azimuth


def _cover(
    body: Body,
    size: tuple[float, float, float],
    azimuth: float,
    origin: tuple[float, float, float] | None,
    rows: list[dict[str, Any]],
) -> BlockGrid:
    """The smallest grid on whole multiples of the block that covers the body."""
    from scipy.ndimage import binary_dilation

    turned = BlockGrid((0.0, 0.0, 0.0) if origin is None else origin, size, (1, 1, 1), azimuth)
    edges = polygon_edges(body.outline).reshape(-1, 2)
    # Between a node with thickness and one without, the body thins out: both ends count.
    inside = binary_dilation(body.thickness.values > 0, structure=np.ones((3, 3)))
    tops, bases = body.top.values[inside], body.base.values[inside]
    if not len(edges) or not inside.any():
        raise ValueError("body has no volume, so no grid can cover it")
    level = turned.origin[2]
    local = turned.to_local(np.column_stack([edges, np.full(len(edges), level)]))
    low = np.array([*local[:, :2].min(axis=0), np.nanmin(bases) - level]) / np.asarray(size)
    high = np.array([*local[:, :2].max(axis=0), np.nanmax(tops) - level]) / np.asarray(size)
    first = np.zeros(3) if origin is not None else np.floor(low + 1e-9)
    count = np.maximum(np.ceil(high - 1e-9) - first, 1).astype(int)
    corner = turned.to_world(first * np.asarray(size))[0]
    decided = "proposed" if origin is None else "study"
    why = "whole multiples of the block, and the body inside" if origin is None else "given"
    rows.append(_row("origin", _text(tuple(corner)), decided, why))
    shape = (int(count[0]), int(count[1]), int(count[2]))
    rows.append(_row("shape", _text(shape), "proposed", "as many blocks as cover the body from the origin"))
    return BlockGrid((float(corner[0]), float(corner[1]), float(corner[2])), size, shape, azimuth)


def _nice(edge: float) -> float:
    """The round length nearest below an edge, or the smallest there is."""
    return max([n for n in NICE_M if n <= edge * 1.05], default=NICE_M[0])


def _text(values: tuple[float, ...]) -> str:
    return " x ".join(f"{value:.10g}" for value in values)


def _row(what: str, value: str, decided_by: str, why: str) -> dict[str, Any]:
    return {"what": what, "value": value, "decided_by": decided_by, "why": why}
