"""What every plan is drawn on: window, shaded seafloor, boundaries, block columns."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, Surface, has

if TYPE_CHECKING:
    from matplotlib.axes import Axes

MOST_CELLS = 500  # a side; a picture of 1000 pixels shows no more


def thinned(surface: Surface) -> tuple[Any, Any, Any]:
    """Centres and values of a surface, thinned evenly to what a picture can show."""
    step = max(1, int(np.ceil(max(surface.values.shape) / MOST_CELLS)))
    return (
        np.asarray(surface.x)[::step],
        np.asarray(surface.y)[::step],
        np.asarray(surface.values)[::step, ::step],
    )


def plan_window(data: ReportData) -> tuple[float, float, float, float] | None:
    """Easting and northing limits that show the outline, the collars and a margin, inside the seafloor."""
    boxes = []
    if data.body.outline is not None and not data.body.outline.is_empty:
        boxes.append(tuple(data.body.outline.bounds))
    for frame in (data.evidence.collars, data.evidence.surface):
        if has(frame, "easting", "northing"):
            assert frame is not None
            boxes.append(
                (
                    frame["easting"].min(),
                    frame["northing"].min(),
                    frame["easting"].max(),
                    frame["northing"].max(),
                )
            )
    if not boxes and data.body.seafloor is not None:
        s = data.body.seafloor
        boxes.append((s.x[0], s.y[0], s.x[-1], s.y[-1]))
    if not boxes:
        return None
    box = np.array(boxes, dtype=float)
    x0, y0, x1, y1 = box[:, 0].min(), box[:, 1].min(), box[:, 2].max(), box[:, 3].max()
    margin = 0.12 * max(x1 - x0, y1 - y0, 10.0)
    return x0 - margin, x1 + margin, y0 - margin, y1 + margin


def draw_seafloor(
    axes: Axes, data: ReportData, window: tuple[float, float, float, float], *, faint: bool = False
) -> None:
    """Shaded relief with labelled contours of elevation, clipped to the window."""
    axes.set_xlim(window[0], window[1])
    axes.set_ylim(window[2], window[3])
    if data.body.seafloor is None:
        return
    x, y, z = thinned(data.body.seafloor)
    inside_x = (x >= window[0]) & (x <= window[1])
    inside_y = (y >= window[2]) & (y <= window[3])
    if inside_x.sum() < 3 or inside_y.sum() < 3:
        return
    x, y, z = x[inside_x], y[inside_y], z[np.ix_(inside_y, inside_x)]
    shade = np.ma.masked_invalid(style.hillshade(x, y, z))
    dx, dy = (x[1] - x[0]) / 2, (y[1] - y[0]) / 2
    low = 0.0 if faint else -0.15
    axes.imshow(
        shade,
        origin="lower",
        extent=(x[0] - dx, x[-1] + dx, y[0] - dy, y[-1] + dy),
        cmap="Greys_r",
        vmin=low - (0.9 if faint else 0.35),
        vmax=1.0,
        interpolation="none",  # a vector file holds the cells as they are, not their enlargement
        zorder=0,
    )
    axes.set_xlim(window[0], window[1])
    axes.set_ylim(window[2], window[3])
    finite = z[np.isfinite(z)]
    if finite.size == 0 or finite.max() - finite.min() < 0.5:
        return
    step = style.nice_length((finite.max() - finite.min()) * 0.5)
    levels = np.arange(np.floor(finite.min() / step) * step, finite.max() + step, step)
    lines = axes.contour(
        x,
        y,
        np.ma.masked_invalid(z),
        levels=levels,
        colors="#4a5560",
        linewidths=0.45,
        alpha=0.7,
        linestyles="solid",
        zorder=1,
    )
    if not faint:
        axes.clabel(lines, levels=levels[:: max(1, len(levels) // 6)], fmt="%.0f", fontsize=6, inline=True)


def draw_surface(axes: Axes, surface: Surface, values: Any = None, **look: Any) -> Any:
    """Cells of a surface inside the limits of the axes, which stay; ``values`` (thinned) stand in for its own.

    An image: drawn in a tenth of the time of a mesh, and a vector file holds one value a cell.
    """
    x, y, own = thinned(surface)
    values = own if values is None else values
    (x0, x1), (y0, y1) = axes.get_xlim(), axes.get_ylim()
    dx, dy = ((side[1] - side[0]) / 2 if len(side) > 1 else 0.5 for side in (x, y))
    columns, rows = (x >= x0 - dx) & (x <= x1 + dx), (y >= y0 - dy) & (y <= y1 + dy)
    if columns.any() and rows.any():
        x, y, values = x[columns], y[rows], values[np.ix_(rows, columns)]
    image = axes.imshow(
        np.ma.masked_invalid(values), origin="lower", interpolation="none", zorder=2,
        extent=(x[0] - dx, x[-1] + dx, y[0] - dy, y[-1] + dy), **look,
    )  # fmt: skip
    axes.set_xlim(x0, x1)
    axes.set_ylim(y0, y1)
    return image


def draw_boundaries(axes: Axes, data: ReportData) -> list[Any]:
    """Outline of the body, and exclusion zones hatched by status; returns the handles of a legend."""
    from matplotlib.patches import Patch, PathPatch
    from matplotlib.path import Path as Curve

    handles: list[Any] = []

    def polygons(shape: Any) -> list[Any]:
        return [
            item
            for item in getattr(shape, "geoms", [shape])
            if item.geom_type == "Polygon" and not item.is_empty
        ]

    def patch(polygon: Any, **look: Any) -> None:
        rings = [polygon.exterior, *polygon.interiors]
        path = Curve.make_compound_path(
            *[Curve(np.asarray(ring.coords)[:, :2], closed=True) for ring in rings]
        )
        axes.add_patch(PathPatch(path, **look))

    if data.body.outline is not None:
        for polygon in polygons(data.body.outline):
            patch(polygon, fill=False, ec=style.INK, lw=1.3, zorder=6)
        handles.append(Patch(fill=False, ec=style.INK, lw=1.3, label="outline of the body"))
    zones = data.body.exclusions
    if zones is not None and len(zones):
        looks = {
            "active_vent": ("#d55e00", "xx"),
            "set_aside": ("#cc79a7", "//"),
            "preservation": ("#009e73", "\\\\"),
        }
        seen = set()
        for _, zone in zones.iterrows():
            status = str(zone.get("status", "zone"))
            colour, hatch = looks.get(status, ("#5b5b5b", ".."))
            shape = zone.geometry
            buffer = float(zone.get("buffer_m", 0.0) or 0.0)
            if np.isfinite(buffer) and buffer > 0:
                shape = shape.buffer(buffer)
            for polygon in polygons(shape):
                patch(polygon, fill=False, ec=colour, lw=1.0, hatch=hatch, zorder=5)
            if status not in seen:
                seen.add(status)
                handles.append(
                    Patch(fill=False, ec=colour, hatch=hatch, label=f"{status.replace('_', ' ')} zone")
                )
    return handles


def block_columns(data: ReportData, columns: list[str]) -> pd.DataFrame:
    """One row a vertical column of blocks: i, j, dry_tonnes, tonnage-weighted means of ``columns``."""
    blocks = data.estimation.blocks
    assert blocks is not None
    names = [name for name in columns if name in blocks]
    work = pd.DataFrame({"i": blocks["i"], "j": blocks["j"], "dry_tonnes": blocks["dry_tonnes"]})
    for name in names:
        known = blocks[name].notna()
        work[f"{name}_product"] = (blocks[name] * blocks["dry_tonnes"]).where(known, 0.0)
        work[f"{name}_weight"] = blocks["dry_tonnes"].where(known, 0.0)
    sums = work.groupby(["i", "j"], sort=True).sum().reset_index()
    for name in names:
        sums[name] = sums[f"{name}_product"] / sums[f"{name}_weight"].replace(0.0, np.nan)
    return sums[["i", "j", "dry_tonnes", *names]]


def column_mesh(data: ReportData, columns: pd.DataFrame, name: str) -> tuple[Any, Any, Any]:
    """Corners (world) and values of the block columns as a mesh that may be rotated."""
    grid = data.estimation.grid
    assert grid is not None
    i0, i1 = int(columns["i"].min()), int(columns["i"].max())
    j0, j1 = int(columns["j"].min()), int(columns["j"].max())
    values = np.full((j1 - j0 + 1, i1 - i0 + 1), np.nan)
    values[columns["j"].to_numpy() - j0, columns["i"].to_numpy() - i0] = columns[name].to_numpy(dtype=float)
    u = (np.arange(i0, i1 + 2)) * float(grid["size"][0])
    v = (np.arange(j0, j1 + 2)) * float(grid["size"][1])
    a = np.radians(float(grid.get("azimuth", 0.0)))
    x = grid["origin"][0] + u[None, :] * np.cos(a) + v[:, None] * np.sin(a)
    y = grid["origin"][1] - u[None, :] * np.sin(a) + v[:, None] * np.cos(a)
    return x, y, np.ma.masked_invalid(values)
