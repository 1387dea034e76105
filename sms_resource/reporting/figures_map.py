"""Plans of the holes, of the collars against the seafloor, and of the thickness."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.maps import (
    draw_boundaries,
    draw_seafloor,
    draw_surface,
    plan_window,
    thinned,
)
from sms_resource.reporting.style import Drawing
from sms_resource.units import element_label

if TYPE_CHECKING:
    pass

MOST_CELLS = 500  # a side; a picture of 1000 pixels shows no more


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
    handles = draw_boundaries(axis, data)
    low, high = style.grade_limits(holes[metal])
    blank = holes[holes[metal].isna()]
    known = holes[holes[metal].notna()]
    surface = data.evidence.surface
    if has(surface, "easting", "northing"):
        assert surface is not None
        axis.scatter(
            surface["easting"],
            surface["northing"],
            marker="+",
            c=style.INK,
            s=22,
            lw=0.8,
            zorder=7,
            label="surface sample",
        )
    dredges = data.evidence.dredges
    if has(dredges, "start_easting", "end_easting", "start_northing", "end_northing"):
        assert dredges is not None
        for number, row in enumerate(dredges.itertuples()):
            ends = [row.start_easting, row.end_easting], [row.start_northing, row.end_northing]
            # the whole track is where the rock may come from: a band, with no mark that could pass for a place
            axis.plot(*ends, color=style.LINES[3], alpha=0.35, lw=8, solid_capstyle="round", zorder=6)
            axis.plot(
                *ends, ls=(0, (4, 2)), color=style.LINES[3], lw=1.4, zorder=7,
                label="dredge: anywhere on its track" if number == 0 else None,
            )  # fmt: skip
    axis.scatter(
        blank["easting"],
        blank["northing"],
        marker="o",
        s=34,
        fc="white",
        ec=style.INK,
        lw=0.8,
        zorder=8,
        label="hole without grade in the body" if len(blank) else None,
    )
    points = axis.scatter(
        known["easting"],
        known["northing"],
        c=known[metal],
        cmap=style.GRADE_MAP,
        vmin=low,
        vmax=high,
        s=44,
        ec="white",
        lw=0.7,
        zorder=9,
        label="hole, mean grade of composites",
    )
    figure.colorbar(
        points,
        ax=axis,
        shrink=0.75,
        label=f"{element_label(metal)}, length-weighted mean of the hole",
        extend="max",
    )
    figure.legend(
        handles=[*axis.get_legend_handles_labels()[0], *handles], loc="outside lower center", ncols=3
    )
    style.finish_plan(axis)
    name = element_label(metal)
    return Drawing(
        "plan_holes",
        "evidence",
        "Plan of the seafloor and the holes",
        f"Shaded seafloor (light from the north-west) with contours of elevation in metres; {len(holes)}"
        f" holes coloured by the length-weighted mean of {name} over their composites. Surface samples are"
        " drawn, never averaged with the holes.",
        f"Map of {len(holes)} holes on shaded bathymetry, coloured by {name}, with outline and exclusion"
        " zones.",
        figure,
        holes,
    )


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
        values = thinned(surface)[2]
        values = np.where(values > 0, values, np.nan)
        most = float(np.nanmax(values)) if np.isfinite(values).any() else 1.0
        image = draw_surface(axis, surface, values, cmap=style.SURFACE_MAP, vmin=0, vmax=most)
        figure.colorbar(image, ax=axis, orientation="horizontal", shrink=0.8, label=label)
        draw_boundaries(axis, data)
        if has(contacts, "easting", "northing", "kind"):
            assert contacts is not None
            for kind, marker, text in (
                ("reached", "o", "hole reached the base"),
                ("open", "v", "hole ended in sulphide"),
            ):
                part = contacts[contacts["kind"] == kind]
                if len(part):
                    axis.scatter(
                        part["easting"],
                        part["northing"],
                        marker=marker,
                        s=24,
                        fc="white" if kind == "open" else style.INK,
                        ec=style.INK if kind == "open" else "white",
                        lw=0.8,
                        zorder=9,
                        label=text,
                    )
            axis.legend(loc="upper left", facecolor="white", framealpha=0.85, frameon=True, edgecolor="none")
        style.finish_plan(axis, label=label.rpartition(" (")[0])
    x, y, values = thinned(data.body.thickness)
    rows, columns = np.nonzero(np.isfinite(values) & (values > 0))
    table = pd.DataFrame({"easting": x[columns], "northing": y[rows], "thickness_m": values[rows, columns]})
    return Drawing(
        "plan_thickness",
        "body",
        "Thickness of the body",
        "Vertical thickness between seafloor and interpolated base. Holes that ended in sulphide give only a "
        "least depth of the base.",
        "Map of the thickness of the body and of its uncertainty, with holes.",
        figure,
        table,
    )


def plan_collars(data: ReportData) -> Drawing | None:
    """Collars against the seafloor: where they float or sink, and by how much."""
    window = plan_window(data)
    collars = data.evidence.collars
    if window is None or collars is None or not has(collars, "dz_m") or not collars["dz_m"].notna().any():
        return None
    figure, axes = style.new_figure(9.6, 4.7, 1, 2, width_ratios=(1.35, 1.0))
    plan, bars = axes[0]
    draw_seafloor(plan, data, window, faint=True)
    draw_boundaries(plan, data)
    dz = collars["dz_m"].to_numpy(dtype=float)
    most = float(np.nanmax(np.abs(dz))) or 1.0
    points = plan.scatter(
        collars["easting"],
        collars["northing"],
        c=dz,
        cmap="PuOr_r",
        vmin=-most,
        vmax=most,
        s=40,
        ec=style.INK,
        lw=0.6,
        zorder=8,
    )
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
        np.round(finite, 6),
        bins=min(24, max(6, int(np.sqrt(finite.size) * 2))),
        color="#7f9bb0",
        ec="white",
        lw=0.6,
    )
    middle = float(np.median(finite))
    bars.axvline(0.0, color=style.INK, lw=0.9)
    bars.axvline(middle, color="#d55e00", lw=1.3, ls="--", label=f"median {middle:+.2f} m")
    bars.set_xlabel("Collar minus seafloor, as delivered (m)")
    bars.set_ylabel("Holes")
    bars.legend()
    columns = [
        c
        for c in (
            "hole_id",
            "easting",
            "northing",
            "position_method",
            "position_sigma_m",
            "original_elevation",
            "seafloor_elevation",
            "dz_m",
            "limit_m",
            "flagged_before",
            "elevation",
            "dz_after_m",
            "flagged",
        )
        if c in collars
    ]
    return Drawing(
        "plan_collars",
        "evidence",
        "Collars against the seafloor",
        f"Difference between each collar as delivered and the seafloor beneath it: median {middle:+.2f} m, "
        f"{finite.size} holes.",
        "Map and histogram of the differences between collars and seafloor.",
        figure,
        collars[columns],
    )
