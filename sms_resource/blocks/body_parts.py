"""Volume, categories and audit of a body; contacts honoured on its lattice."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.blocks.base import ThicknessData
from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.blocks.honour import honour, stencils
from sms_resource.blocks.polygons import CellMoments, lattice_moments, polygon_edges
from sms_resource.findings import Findings

Array = NDArray[Any]
CATEGORIES = ("drilled", "sideways", "downwards")


def outline_moments(grid: SurfaceGrid, outline: Any) -> CellMoments:
    """Exact shares of the cells between nodes inside an outline; cells next to a node without a value hold none."""
    edges = polygon_edges(outline)
    scaled = (edges - np.array([grid.x0, grid.y0] * 2)) / np.array([grid.dx, grid.dy] * 2)
    ny, nx = grid.shape
    moments = lattice_moments(scaled, ny - 1, nx - 1)
    good = np.isfinite(grid.values)
    whole = good[:-1, :-1] & good[1:, :-1] & good[:-1, 1:] & good[1:, 1:]
    return CellMoments(
        *(np.where(whole, part, 0.0) for part in (moments.area, moments.s, moments.t, moments.st))
    )


def cell_volumes(values: Array, moments: CellMoments, cell_area: float) -> Array:
    """Exact integral of a bilinear surface over outline and cell (ny - 1, nx - 1)."""
    nodes = np.nan_to_num(values)
    a = nodes[:-1, :-1]
    b = nodes[:-1, 1:] - a
    c = nodes[1:, :-1] - a
    d = nodes[1:, 1:] - nodes[1:, :-1] - b
    return (a * moments.area + b * moments.s + c * moments.t + d * moments.st) * cell_area


def measure(
    top: SurfaceGrid,
    thickness: SurfaceGrid,
    known: SurfaceGrid,
    distance: SurfaceGrid,
    outline: Any,
    drilled_within_m: float,
) -> tuple[float, pd.DataFrame]:
    """Volume in m3, and its split into drilled, extrapolated sideways and extrapolated downwards."""
    moments = outline_moments(top, outline)
    area = top.dx * top.dy
    whole = cell_volumes(thickness.values, moments, area)
    above = np.minimum(cell_volumes(np.minimum(known.values, thickness.values), moments, area), whole)
    s, t = moments.centroid()
    rows, columns = np.indices(s.shape)
    far = distance.sample(top.x0 + (columns + s) * top.dx, top.y0 + (rows + t) * top.dy) > drilled_within_m
    volume = float(whole.sum())
    parts = [float(above[~far].sum()), float(whole[far].sum()), float((whole - above)[~far].sum())]
    share = [part / volume if volume > 0 else 0.0 for part in parts]
    return volume, pd.DataFrame({"category": CATEGORIES, "volume_m3": parts, "share": share})


def hole_distance(top: SurfaceGrid, contacts: pd.DataFrame) -> SurfaceGrid:
    """Distance in plan from every node to the nearest hole, in m; infinite where there is no hole."""
    if len(contacts) == 0:
        return top.with_values(np.full(top.shape, 1e9))
    from scipy.spatial import cKDTree

    x, y = top.mesh()
    tree = cKDTree(contacts[["easting", "northing"]].to_numpy(dtype=np.float64))
    return top.with_values(tree.query(np.column_stack([x.ravel(), y.ravel()]))[0].reshape(top.shape))


def honour_holes(
    thickness: SurfaceGrid,
    known: SurfaceGrid,
    limit_m: float,
    holes: ThicknessData,
    findings: Findings,
) -> tuple[SurfaceGrid, SurfaceGrid, float]:
    """Make thickness and known thickness honour the holes, and hold the one to so much below the other.

    Returns
    -------
    (thickness, known, cut_m3)
        ``cut_m3`` is the volume that the limit takes away.
    """
    x, y, target, at_least = holes.x, holes.y, holes.thickness, holes.is_open
    held = honour(known, x, y, target, np.zeros(len(x), dtype=bool)).values
    limited = np.minimum(thickness.values, held + limit_m)
    cut = float(np.sum(thickness.values - limited) * thickness.dx * thickness.dy)
    if at_least.any():  # so that clearing the ends of open holes moves no node beyond the limit
        nodes = np.unique(stencils(thickness, x[at_least], y[at_least])[0])
        limited.ravel()[nodes] = np.maximum(limited.ravel()[nodes], held.ravel()[nodes])
    done = honour(thickness.with_values(limited), x, y, target, at_least)
    if done.pins is not None:
        findings.note(
            "contacts-crowded",
            f"{len(done.pins)} holes stand so close to others that a cell of {thickness.dx:g} m cannot meet them all; "
            "the base meets them in a cone of less than half a cell round each",
            "check the positions of twin holes if their thickness differs much",
        )
    return done, known.with_values(np.minimum(held, done.values)), cut


def one_a_place(holes: ThicknessData, names: list[str], findings: Findings) -> ThicknessData:
    """Join holes at one and the same place: contacts by their mean, lower bounds by the greatest.

    Those that contradict each other are reported.
    """
    x, y, target, at_least = holes.x, holes.y, holes.thickness, holes.is_open
    place = np.round(np.column_stack([x, y]), 3)
    unique, group = np.unique(place, axis=0, return_inverse=True)
    group = group.reshape(-1)
    if len(unique) == len(x):
        return holes
    keep: list[int] = []
    target = target.copy()
    for n in range(len(unique)):
        members = np.flatnonzero(group == n)
        reached = members[~at_least[members]]
        chosen = int(reached[0]) if reached.size else int(members[np.argmax(target[members])])
        if reached.size:
            values = target[members]
            target[chosen] = float(target[reached].mean())
            clash = (
                np.abs(target[reached] - target[chosen]).max() > 1e-6 or values.max() > target[chosen] + 1e-6
            )
            if clash:
                findings.warning(
                    "contacts-joined",
                    f"holes {', '.join(names[m] for m in members)} stand at one place and disagree on the thickness "
                    f"({values.min():.2f} to {values.max():.2f} m); the mean of those that reached the base, "
                    f"{target[chosen]:.2f} m, is taken",
                    "check their positions",
                )
        keep.append(chosen)
    index = np.array(sorted(keep))
    return replace(holes, thickness=target).select(index)


def audit_contacts(contacts: pd.DataFrame, thickness: SurfaceGrid, top: SurfaceGrid) -> pd.DataFrame:
    """What each contact asks and what the body has there, in m."""
    x, y = (contacts[name].to_numpy(dtype=np.float64) for name in ("easting", "northing"))
    got = thickness.sample(x, y) if len(contacts) else np.zeros(0)
    asked = contacts["thickness_m"].to_numpy(dtype=np.float64)
    is_open = (contacts["kind"] == "open").to_numpy()
    off = got - asked
    return pd.DataFrame({
        "hole_id": contacts["hole_id"].to_numpy(), "easting": x, "northing": y, "kind": contacts["kind"].to_numpy(),
        "thickness_m": asked, "body_thickness_m": got,
        "base_elevation": (top.sample(x, y) if len(contacts) else got) - got,
        "extrapolated_m": np.where(is_open, off, 0.0),
        "missed_m": np.where(is_open, np.maximum(-off, 0.0), np.abs(off)),
        "honoured": np.where(is_open, off >= 0.0, np.abs(off) <= 1e-6),
    })  # fmt: skip


def report_gaps(top: SurfaceGrid, outline: Any, findings: Findings) -> None:
    """Say how much of the outline has no seafloor."""
    moments = outline_moments(top, outline)
    covered = float(moments.area.sum()) * top.dx * top.dy
    gap = outline.area - covered
    if covered <= 0:
        findings.error("outline-no-seafloor", "no cell inside the outline has a seafloor",
                       "check the grid's nodata value, or mend it")  # fmt: skip
    elif gap > 1e-6 * outline.area:
        findings.warning(
            "outline-no-seafloor",
            f"{gap:.0f} m2 of the outline ({100 * gap / outline.area:.2g} %) has no seafloor and holds no volume",
            "mend the grid",
        )
