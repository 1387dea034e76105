"""Plans of the block model: grades, proposed classes, where it is extrapolated."""

from __future__ import annotations

from typing import TYPE_CHECKING

from sms_resource.reporting import style
from sms_resource.reporting.data import Estimation, ReportData, has
from sms_resource.reporting.maps import (
    block_columns,
    column_mesh,
    draw_boundaries,
    draw_seafloor,
    plan_window,
)
from sms_resource.reporting.style import Drawing
from sms_resource.units import element_label

if TYPE_CHECKING:
    pass

MOST_CELLS = 500  # a side; a picture of 1000 pixels shows no more


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
        mesh = axis.pcolormesh(
            *column_mesh(data, columns, metal),
            cmap=style.GRADE_MAP,
            vmin=low,
            vmax=high,
            rasterized=True,
            zorder=2,
        )
        figure.colorbar(mesh, ax=axis, shrink=0.85, label=element_label(metal), extend="max")
        draw_boundaries(axis, data)
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
    return Drawing(
        "plan_grades",
        "estimate",
        "Estimated grades in plan",
        "Dry-tonnage-weighted mean of all blocks in each column, before any cut-off; dots are holes.",
        "Maps of estimated grade, one for each metal.",
        figure,
        columns,
    )


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
    draw_boundaries(axis, data)
    handles = [
        Patch(fc=style.class_colour(name), ec=style.QUIET, label=style.class_name(name)) for name in names
    ]
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
    axis.set_title(data.tally_label, fontsize=8)
    return Drawing(
        "plan_classes",
        "classes",
        f"Proposed classes in plan ({data.tally_label})",
        "The class that holds most of the dry tonnes of each column of blocks. Classes are proposed from"
        " criteria; the Competent Person decides.",
        "Map of the proposed classes with holes and outline.",
        figure,
        shares[["i", "j", "proposed_class", "dry_tonnes"]],
    )


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
    work = ReportData(estimation=Estimation(blocks=beyond, grid=data.estimation.grid))
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
    draw_boundaries(axis, data)
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
    axis.set_title(data.tally_label, fontsize=8)
    return Drawing(
        "plan_extrapolation",
        "body",
        "Where the body is extrapolated",
        "Share of each column's dry tonnes beyond the drilled part, sideways or downwards; circles are"
        " holes.",
        "Map of the extrapolated share of the body.",
        figure,
        columns.rename(columns={"extrapolated": "extrapolated_pct"}),
    )
