"""What goes into a body, checked and brought onto its lattice."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.blocks.base import ThicknessData
from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.findings import Findings

Array = NDArray[Any]
FINE_CELL_M = 1.0
MOST_POINTS = 400


def check_contacts(
    contacts: pd.DataFrame, outline: Any, seafloor: SurfaceGrid
) -> tuple[pd.DataFrame, Findings]:
    """Contacts that can be used, and findings on the others.

    Parameters
    ----------
    contacts : DataFrame
        hole_id, easting, northing, thickness_m, kind.
    outline : shapely geometry or None
        None leaves the places unchecked.
    seafloor : SurfaceGrid

    Raises
    ------
    ValueError
        If a column is missing or ``kind`` holds another word than "reached" or "open".
    """
    import shapely

    findings = Findings()
    missing = [c for c in ("hole_id", "easting", "northing", "thickness_m", "kind") if c not in contacts]
    if missing:
        raise ValueError(f"contacts lacks the columns {', '.join(missing)}")
    strange = set(contacts["kind"]) - {"reached", "open"}
    if strange:
        raise ValueError(
            f"contacts column kind must hold 'reached' or 'open', not {sorted(map(str, strange))}"
        )
    frame = contacts.reset_index(drop=True)
    x, y = frame["easting"].to_numpy(dtype=np.float64), frame["northing"].to_numpy(dtype=np.float64)
    thickness = frame["thickness_m"].to_numpy(dtype=np.float64)
    finite = np.isfinite(x) & np.isfinite(y) & np.isfinite(thickness)
    inside = finite.copy()
    if outline is not None:
        shapely.prepare(outline)
        inside &= shapely.covers(outline, shapely.points(np.nan_to_num(x), np.nan_to_num(y)))
    floor = np.isfinite(seafloor.sample(np.nan_to_num(x), np.nan_to_num(y)))
    rows = frame["source_row"] if "source_row" in frame else pd.Series([None] * len(frame))
    keep = inside & floor & (thickness >= 0)
    for n in np.flatnonzero(~keep):
        hole, row = frame["hole_id"].iloc[n], rows.iloc[n]
        row = None if row is None or pd.isna(row) else int(row)
        if not finite[n]:
            findings.warning("contacts-not-finite", f"hole {hole}: its contact has no position or no thickness",
                             "it is left out of the base", row=row)  # fmt: skip
        elif not inside[n] and thickness[n] > 0:
            findings.warning(
                "contact-outside-outline",
                f"hole {hole} met {thickness[n]:.1f} m of body outside the outline",
                "widen the outline, or leave the hole out on purpose",
                row=row,
            )
        elif inside[n] and not floor[n]:
            findings.warning("contact-no-seafloor", f"hole {hole}: the grid has no seafloor there",
                             "mend the grid or check the position", row=row)  # fmt: skip
        elif inside[n]:
            findings.warning(
                "contact-above-seafloor",
                f"hole {hole}: its base lies {-thickness[n]:.2f} m above the seafloor and is left out",
                "match the collars to the seafloor first",
                row=row,
            )
    return frame[keep].reset_index(drop=True), findings


def crop_lattice(seafloor: SurfaceGrid, outline: Any, cell_m: float | None) -> SurfaceGrid:
    """The seafloor on the body's lattice: around the outline, refined or coarsened to ``cell_m``.

    Refining is exact: a bilinear surface sampled on a finer lattice with the same nodes is the same surface.
    """
    wanted = cell_m if cell_m is not None else min(max(seafloor.dx, seafloor.dy), FINE_CELL_M)
    west, south, east, north = outline.bounds
    margin = 2
    first_col = max(0, math.floor((west - seafloor.x0) / seafloor.dx) - margin)
    first_row = max(0, math.floor((south - seafloor.y0) / seafloor.dy) - margin)
    last_col = min(seafloor.shape[1] - 1, math.ceil((east - seafloor.x0) / seafloor.dx) + margin)
    last_row = min(seafloor.shape[0] - 1, math.ceil((north - seafloor.y0) / seafloor.dy) + margin)
    columns, rows = slice(first_col, last_col + 1), slice(first_row, last_row + 1)
    sigma = None if seafloor.uncertainty is None else seafloor.uncertainty[rows, columns]
    part = SurfaceGrid(
        seafloor.x0 + first_col * seafloor.dx, seafloor.y0 + first_row * seafloor.dy, seafloor.dx, seafloor.dy,
        seafloor.values[rows, columns], seafloor.crs, sigma,
    )  # fmt: skip
    if wanted > 1.001 * max(seafloor.dx, seafloor.dy):
        nx = math.ceil((part.x[-1] - part.x0) / wanted) + 1
        ny = math.ceil((part.y[-1] - part.y0) / wanted) + 1
        return _resampled(part, wanted, wanted, ny, nx)
    factor_x, factor_y = (max(1, math.ceil(d / wanted - 1e-6)) for d in (part.dx, part.dy))
    return refine(part, factor_x, factor_y)


def refine(grid: SurfaceGrid, factor_x: int, factor_y: int) -> SurfaceGrid:
    """The same bilinear surface on cells split into ``factor_x`` by ``factor_y``."""
    if factor_x == 1 and factor_y == 1:
        return grid
    ny, nx = grid.shape
    return _resampled(
        grid, grid.dx / factor_x, grid.dy / factor_y, (ny - 1) * factor_y + 1, (nx - 1) * factor_x + 1
    )


def _resampled(grid: SurfaceGrid, dx: float, dy: float, ny: int, nx: int) -> SurfaceGrid:
    x, y = np.meshgrid(grid.x0 + dx * np.arange(nx), grid.y0 + dy * np.arange(ny))
    x, y = np.minimum(x, grid.x[-1]), np.minimum(y, grid.y[-1])
    sigma = None if grid.uncertainty is None else grid.sample_uncertainty(x, y)
    return SurfaceGrid(grid.x0, grid.y0, dx, dy, grid.sample(x, y), grid.crs, sigma)


def hole_spacing(contacts: pd.DataFrame, outline: Any) -> float:
    """Spacing of the holes in m: the median distance to the nearest other site.

    Holes closer together than a quarter of an even spread over the outline are twins of one site. One hole
    alone is as good as the radius of the outline.
    """
    even = math.sqrt(outline.area / max(1, len(contacts)))
    if len(contacts) < 2:
        return math.sqrt(outline.area / math.pi)
    from scipy.spatial import cKDTree

    xy = contacts[["easting", "northing"]].to_numpy(dtype=np.float64)
    tree = cKDTree(xy)
    site = np.arange(len(xy))
    for first, second in sorted(tree.query_pairs(0.25 * even)):
        site[second] = min(site[first], site[second])
    sites = xy[np.unique(site)]
    if len(sites) < 2:
        return math.sqrt(outline.area / math.pi)
    nearest = cKDTree(sites).query(sites, k=2)[0][:, 1]
    return float(np.median(nearest))


def drift_from_base_grid(
    base_grid: SurfaceGrid, top: SurfaceGrid, outline: Any, findings: Findings
) -> SurfaceGrid:
    """Thickness between the seafloor and a base of the user's, never negative."""
    import shapely

    x, y = top.mesh()
    thickness = top.values - base_grid.sample(x, y)
    shapely.prepare(outline)
    inside = shapely.contains_xy(outline, x, y) & np.isfinite(top.values)
    gap = int((inside & np.isnan(thickness)).sum())
    if gap:
        findings.error("base-grid-gap", f"the base grid leaves {gap * top.dx * top.dy:.0f} m2 of the outline open",
                       "extend it over the whole outline")  # fmt: skip
    above = inside & (thickness < 0)
    if above.any():
        findings.warning(
            "base-above-seafloor",
            f"the base grid lies above the seafloor over {int(above.sum()) * top.dx * top.dy:.0f} m2 "
            f"(by {-np.nanmin(thickness[inside]):.2f} m at most); it was set to the seafloor there",
            "check that both grids use one vertical datum",
        )
    return top.with_values(np.maximum(np.nan_to_num(thickness), 0.0))


def data_from_base_points(
    points: pd.DataFrame | None, top: SurfaceGrid, outline: Any, sigma_m: float, findings: Findings
) -> ThicknessData:
    """Thickness at the user's points of the base; dense points are averaged to at most some 400.

    Raises
    ------
    ValueError
        If a column is missing.
    """
    import shapely

    nothing = np.zeros(0)
    if points is None or len(points) == 0:
        return ThicknessData(nothing, nothing, nothing, np.zeros(0, dtype=bool), nothing)
    missing = [c for c in ("easting", "northing", "elevation") if c not in points]
    if missing:
        raise ValueError(f"base_points lacks the columns {', '.join(missing)}")
    x, y, z = (points[c].to_numpy(dtype=np.float64, copy=True) for c in ("easting", "northing", "elevation"))
    shapely.prepare(outline)
    thickness = top.sample(np.nan_to_num(x), np.nan_to_num(y)) - z
    keep = np.isfinite(thickness) & shapely.contains_xy(outline, np.nan_to_num(x), np.nan_to_num(y))
    above = keep & (thickness < 0)
    if above.any():
        findings.warning("base-above-seafloor", f"{int(above.sum())} base points lie above the seafloor and were set to it",
                         "check their vertical datum")  # fmt: skip
    x, y, thickness = x[keep], y[keep], np.maximum(thickness[keep], 0.0)
    if len(x) > MOST_POINTS:
        cell = math.sqrt(outline.area / MOST_POINTS)
        column, row = (np.floor(v / cell).astype(np.int64) for v in (x, y))
        _, group = np.unique(np.column_stack([row, column]), axis=0, return_inverse=True)
        group = group.reshape(-1)
        count = np.bincount(group)
        x, y, thickness = (np.bincount(group, weights=v) / count for v in (x, y, thickness))
    return ThicknessData(x, y, thickness, np.zeros(len(x), dtype=bool), np.full(len(x), max(sigma_m, 1e-3)))


def join_data(holes: ThicknessData, others: ThicknessData) -> ThicknessData:
    """Holes first, then the other data."""
    return ThicknessData(
        *(np.concatenate([getattr(holes, name), getattr(others, name)])
          for name in ("x", "y", "thickness", "is_open", "sigma"))
    )  # fmt: skip
