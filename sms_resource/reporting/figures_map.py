"""Plans: the seafloor with holes, thickness, collars against the seafloor, block grades, classes."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, Surface, has
from sms_resource.reporting.style import Drawing
from sms_resource.units import element_label

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
    axes.imshow(shade, origin="lower", extent=(x[0] - dx, x[-1] + dx, y[0] - dy, y[-1] + dy), cmap="Greys_r",
                vmin=low - (0.9 if faint else 0.35), vmax=1.0, interpolation="nearest", zorder=0)  # fmt: skip
    axes.set_xlim(window[0], window[1])
    axes.set_ylim(window[2], window[3])
    finite = z[np.isfinite(z)]
    if finite.size == 0 or finite.max() - finite.min() < 0.5:
        return
    step = style.nice_length((finite.max() - finite.min()) * 0.5)
    levels = np.arange(np.floor(finite.min() / step) * step, finite.max() + step, step)
    lines = axes.contour(x, y, np.ma.masked_invalid(z), levels=levels, colors="#4a5560", linewidths=0.45, alpha=0.7,
                         linestyles="solid", zorder=1)  # fmt: skip
    if not faint:
        axes.clabel(
            lines, levels=lines.levels[:: max(1, len(lines.levels) // 6)], fmt="%.0f", fontsize=6, inline=True
        )


def draw_boundaries(axes: Axes, data: ReportData, *, legend: bool = True) -> None:
    """Outline of the body, and exclusion zones hatched by status."""
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
                    Patch(
                        fill=False, ec=colour, hatch=hatch, label=f"{status.replace('_', ' ')} (with buffer)"
                    )
                )
    if legend and handles:
        axes.legend(handles=handles, loc="upper center", bbox_to_anchor=(0.5, -0.12), ncols=3)


def hole_means(data: ReportData, metal: str) -> pd.DataFrame:
    """Length-weighted mean grade of each hole at its collar: hole_id, easting, northing, metal, length_m."""
    composites, collars = data.evidence.composites, data.evidence.collars
    if composites is None or collars is None or not has(composites, "hole_id", metal):
        return pd.DataFrame(columns=["hole_id", "easting", "northing", metal, "length_m"])
    frame = composites[composites[metal].notna()]
    length = frame["length_m"] if "length_m" in frame else pd.Series(1.0, index=frame.index)
    sums = pd.DataFrame({"hole_id": frame["hole_id"], "length_m": length, "product": length * frame[metal]})
    sums = sums.groupby("hole_id", sort=True)[["length_m", "product"]].sum().reset_index()
    sums[metal] = sums["product"] / sums["length_m"]
    return collars[["hole_id", "easting", "northing"]].merge(
        sums[["hole_id", metal, "length_m"]], on="hole_id", how="left"
    )


def plan_holes(data: ReportData) -> Drawing | None:
    """Plan of the seafloor with the holes coloured by grade, surface samples, outline and zones."""
    window = plan_window(data)
    if window is None or not data.subject.metals or not has(data.evidence.collars, "easting", "northing"):
        return None
    metal = data.subject.metals[0]
    holes = hole_means(data, metal)
    figure, axes = style.new_figure(7.4, 6.6)
    axis = axes[0, 0]
    draw_seafloor(axis, data, window)
    draw_boundaries(axis, data)
    low, high = style.grade_limits(holes[metal])
    blank = holes[holes[metal].isna()]
    known = holes[holes[metal].notna()]
    surface = data.evidence.surface
    if has(surface, "easting", "northing"):
        assert surface is not None
        axis.scatter(surface["easting"], surface["northing"], marker="+", c=style.INK, s=22, lw=0.8, zorder=7,
                     label="surface sample")  # fmt: skip
    dredges = data.evidence.dredges
    if has(dredges, "start_easting", "end_easting", "start_northing", "end_northing"):
        assert dredges is not None
        for number, row in enumerate(dredges.itertuples()):
            axis.plot([row.start_easting, row.end_easting], [row.start_northing, row.end_northing], ls=(0, (4, 2)),
                      color=style.LINES[3], lw=1.4, zorder=7, label="dredge track" if number == 0 else None)  # fmt: skip
    axis.scatter(blank["easting"], blank["northing"], marker="o", s=34, fc="white", ec=style.INK, lw=0.8, zorder=8,
                 label="hole without grade in the body" if len(blank) else None)  # fmt: skip
    points = axis.scatter(known["easting"], known["northing"], c=known[metal], cmap=style.GRADE_MAP, vmin=low,
                          vmax=high, s=44, ec="white", lw=0.7, zorder=9, label="hole, mean grade of composites")  # fmt: skip
    figure.colorbar(
        points,
        ax=axis,
        shrink=0.75,
        label=f"{element_label(metal)}, length-weighted mean of the hole",
        extend="max",
    )
    first = axis.get_legend()
    axis.legend(loc="upper left", facecolor="white", framealpha=0.85, frameon=True, edgecolor="none")
    if first is not None:
        axis.add_artist(first)
    style.finish_plan(axis)
    name = element_label(metal)
    return Drawing("plan_holes", "evidence", "Plan of the seafloor and the holes",
                   f"Shaded seafloor (light from the north-west) with contours of elevation in metres; {len(holes)} holes "
                   f"coloured by the length-weighted mean of {name} over their composites. Surface samples are drawn, "
                   "never averaged with the holes.",
                   f"Map of {len(holes)} holes on shaded bathymetry, coloured by {name}, with outline and exclusion zones.",
                   figure, holes)  # fmt: skip


def plan_thickness(data: ReportData) -> Drawing | None:
    """Thickness of the body, and its one sigma where known, with the holes that reached the base and those that did not."""
    window = plan_window(data)
    surfaces = [
        (data.body.thickness, "Thickness (m)"),
        (data.body.thickness_sigma, "One sigma of thickness (m)"),
    ]
    shown = [
        (surface, label)
        for surface, label in surfaces
        if surface is not None and np.isfinite(surface.values).any()
    ]
    if window is None or not shown or data.body.thickness is None:
        return None
    figure, axes = style.new_figure(4.9 * len(shown) + 0.4, 5.4, 1, len(shown))
    contacts = data.body.contacts
    for axis, (surface, label) in zip(axes[0], shown):
        draw_seafloor(axis, data, window, faint=True)
        x, y, values = thinned(surface)
        values = np.where(values > 0, values, np.nan)
        image = axis.pcolormesh(x, y, np.ma.masked_invalid(values), cmap=style.SURFACE_MAP, vmin=0, shading="nearest",
                                rasterized=True, zorder=2)  # fmt: skip
        figure.colorbar(image, ax=axis, orientation="horizontal", shrink=0.8, label=label)
        draw_boundaries(axis, data, legend=False)
        if has(contacts, "easting", "northing", "kind"):
            assert contacts is not None
            for kind, marker, text in (
                ("reached", "o", "hole reached the base"),
                ("open", "v", "hole ended in sulphide"),
            ):
                part = contacts[contacts["kind"] == kind]
                if len(part):
                    axis.scatter(part["easting"], part["northing"], marker=marker, s=24, fc="white" if kind == "open" else style.INK,
                                 ec=style.INK if kind == "open" else "white", lw=0.8, zorder=9, label=text)  # fmt: skip
            axis.legend(loc="upper left", facecolor="white", framealpha=0.85, frameon=True, edgecolor="none")
        style.finish_plan(axis, label=label.rpartition(" (")[0])
    x, y, values = thinned(data.body.thickness)
    rows, columns = np.nonzero(np.isfinite(values) & (values > 0))
    table = pd.DataFrame({"easting": x[columns], "northing": y[rows], "thickness_m": values[rows, columns]})
    return Drawing("plan_thickness", "body", "Thickness of the body",
                   "Vertical thickness between seafloor and interpolated base. Holes that ended in sulphide give only a "
                   "least depth of the base.",
                   "Map of the thickness of the body and of its uncertainty, with holes.", figure, table)  # fmt: skip


def plan_collars(data: ReportData) -> Drawing | None:
    """Collars against the seafloor: where they float or sink, and by how much."""
    window = plan_window(data)
    collars = data.evidence.collars
    if window is None or collars is None or not has(collars, "dz_m") or not collars["dz_m"].notna().any():
        return None
    figure, axes = style.new_figure(9.6, 4.7, 1, 2, width_ratios=(1.35, 1.0))
    plan, bars = axes[0]
    draw_seafloor(plan, data, window, faint=True)
    draw_boundaries(plan, data, legend=False)
    dz = collars["dz_m"].to_numpy(dtype=float)
    most = float(np.nanmax(np.abs(dz))) or 1.0
    points = plan.scatter(collars["easting"], collars["northing"], c=dz, cmap="PuOr_r", vmin=-most, vmax=most, s=40,
                          ec=style.INK, lw=0.6, zorder=8)  # fmt: skip
    if "flagged" in collars and collars["flagged"].any():
        bad = collars[collars["flagged"].astype(bool)]
        plan.scatter(
            bad["easting"], bad["northing"], s=120, fc="none", ec="#d55e00", lw=1.3, zorder=9, label="flagged"
        )
        plan.legend(loc="upper left", facecolor="white", framealpha=0.85, frameon=True, edgecolor="none")
    figure.colorbar(points, ax=plan, shrink=0.8, label="collar above (+) or below (−) the seafloor (m)")
    style.finish_plan(plan)
    finite = dz[np.isfinite(dz)]
    bars.hist(
        finite, bins=min(24, max(6, int(np.sqrt(finite.size) * 2))), color="#7f9bb0", ec="white", lw=0.6
    )
    middle = float(np.median(finite))
    bars.axvline(0.0, color=style.INK, lw=0.9)
    bars.axvline(middle, color="#d55e00", lw=1.3, ls="--", label=f"median {middle:+.2f} m")
    bars.set_xlabel("Collar minus seafloor, as delivered (m)")
    bars.set_ylabel("Holes")
    bars.legend()
    columns = [
        c
        for c in ("hole_id", "easting", "northing", "elevation", "original_elevation", "dz_m", "flagged")
        if c in collars
    ]
    return Drawing("plan_collars", "evidence", "Collars against the seafloor",
                   f"Difference between each collar as delivered and the seafloor beneath it: median {middle:+.2f} m, "
                   f"{finite.size} holes.",
                   "Map and histogram of the differences between collars and seafloor.", figure, collars[columns])  # fmt: skip


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


def plan_grades(data: ReportData) -> Drawing | None:
    """Tonnage-weighted mean grade of each column of blocks, one panel a metal."""
    window = plan_window(data)
    metals = [
        m for m in data.subject.metals if data.estimation.blocks is not None and m in data.estimation.blocks
    ]
    if (
        window is None
        or not metals
        or data.estimation.grid is None
        or not has(data.estimation.blocks, "i", "j", "dry_tonnes")
    ):
        return None
    columns = block_columns(data, metals)
    across = 2 if len(metals) > 1 else 1
    down = -(-len(metals) // across)
    figure, axes = style.new_figure(4.8 * across, 4.3 * down, down, across)
    for number, axis in enumerate(axes.ravel()):
        if number >= len(metals):
            axis.set_axis_off()
            continue
        metal = metals[number]
        draw_seafloor(axis, data, window, faint=True)
        low, high = style.grade_limits(columns[metal])
        mesh = axis.pcolormesh(*column_mesh(data, columns, metal), cmap=style.GRADE_MAP, vmin=low, vmax=high,
                               rasterized=True, zorder=2)  # fmt: skip
        figure.colorbar(mesh, ax=axis, shrink=0.85, label=element_label(metal), extend="max")
        draw_boundaries(axis, data, legend=False)
        if data.evidence.collars is not None:
            axis.scatter(
                data.evidence.collars["easting"],
                data.evidence.collars["northing"],
                s=5,
                c=style.INK,
                zorder=8,
                lw=0,
            )
        style.finish_plan(axis, label=element_label(metal).rpartition(" (")[0])
    return Drawing("plan_grades", "estimate", "Estimated grades in plan",
                   "Dry-tonnage-weighted mean of all blocks in each column, before any cut-off; dots are holes.",
                   "Maps of estimated grade, one for each metal.", figure, columns)  # fmt: skip


def plan_classes(data: ReportData) -> Drawing | None:
    """Proposed class of each column of blocks: the class that holds most of its dry tonnes."""
    from matplotlib.colors import ListedColormap
    from matplotlib.patches import Patch

    window = plan_window(data)
    blocks = data.estimation.blocks
    if (
        window is None
        or blocks is None
        or data.estimation.grid is None
        or not has(blocks, "i", "j", "dry_tonnes", "proposed_class")
    ):
        return None
    sums = blocks.assign(proposed_class=blocks["proposed_class"].astype(str)).groupby(
        ["i", "j", "proposed_class"], sort=True
    )
    shares = sums["dry_tonnes"].sum().reset_index()
    shares = shares.sort_values(
        ["i", "j", "dry_tonnes"], ascending=[True, True, False], kind="stable"
    ).drop_duplicates(["i", "j"])
    names = sorted(shares["proposed_class"].unique(), key=style.class_rank)
    shares["code"] = shares["proposed_class"].map({name: number for number, name in enumerate(names)})
    figure, axes = style.new_figure(7.0, 6.2)
    axis = axes[0, 0]
    draw_seafloor(axis, data, window, faint=True)
    colours = ListedColormap([style.class_colour(name) for name in names])
    axis.pcolormesh(
        *column_mesh(data, shares, "code"),
        cmap=colours,
        vmin=-0.5,
        vmax=len(names) - 0.5,
        rasterized=True,
        zorder=2,
    )
    draw_boundaries(axis, data, legend=False)
    handles = [Patch(fc=style.class_colour(name), ec=style.QUIET, label=name) for name in names]
    if data.evidence.collars is not None:
        holes = data.evidence.collars
        handles.append(
            axis.scatter(
                holes["easting"],
                holes["northing"],
                s=9,
                c="white",
                ec=style.INK,
                lw=0.6,
                zorder=8,
                label="hole",
            )
        )
    axis.legend(
        handles=handles,
        loc="upper left",
        facecolor="white",
        framealpha=0.9,
        frameon=True,
        edgecolor="none",
        title="Proposed class",
    )
    style.finish_plan(axis)
    return Drawing("plan_classes", "classes", f"Proposed classes in plan ({data.tally_label})",
                   "The class that holds most of the dry tonnes of each column of blocks. Classes are proposed from criteria; "
                   "the Competent Person decides.",
                   "Map of the proposed classes with holes and outline.", figure,
                   shares[["i", "j", "proposed_class", "dry_tonnes"]])  # fmt: skip


def plan_extrapolation(data: ReportData) -> Drawing | None:
    """Share of each column's dry tonnes that is extrapolated, sideways or downwards."""
    window = plan_window(data)
    blocks = data.estimation.blocks
    if (
        window is None
        or blocks is None
        or data.estimation.grid is None
        or not has(blocks, "i", "j", "dry_tonnes", "extrapolation")
    ):
        return None
    beyond = blocks.assign(extrapolated=(blocks["extrapolation"].astype(str) != "drilled").astype(float))
    work = ReportData(estimation=type(data.estimation)(blocks=beyond, grid=data.estimation.grid))
    columns = block_columns(work, ["extrapolated"])
    columns["extrapolated"] = columns["extrapolated"] * 100.0
    figure, axes = style.new_figure(7.0, 5.8)
    axis = axes[0, 0]
    draw_seafloor(axis, data, window, faint=True)
    mesh = axis.pcolormesh(
        *column_mesh(data, columns, "extrapolated"),
        cmap=style.SURFACE_MAP,
        vmin=0,
        vmax=100,
        rasterized=True,
        zorder=2,
    )
    figure.colorbar(mesh, ax=axis, shrink=0.8, label="Share of the column's dry tonnes extrapolated (%)")
    draw_boundaries(axis, data, legend=False)
    if data.evidence.collars is not None:
        axis.scatter(
            data.evidence.collars["easting"],
            data.evidence.collars["northing"],
            s=9,
            c="white",
            ec=style.INK,
            lw=0.6,
            zorder=8,
        )
    style.finish_plan(axis)
    return Drawing("plan_extrapolation", "body", "Where the body is extrapolated",
                   "Share of each column's dry tonnes beyond the drilled part, sideways or downwards; circles are holes.",
                   "Map of the extrapolated share of the body.", figure, columns.rename(columns={"extrapolated": "extrapolated_pct"}))  # fmt: skip
