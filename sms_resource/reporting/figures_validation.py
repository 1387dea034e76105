"""Checks of the estimate as pictures: swaths, leave one hole out, change of support, estimators."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.figures_samples import panel_grid
from sms_resource.reporting.rounding import group_digits
from sms_resource.reporting.style import Drawing
from sms_resource.units import column_element, element_label

AXIS_LABELS = {
    "easting": "Easting (m)",
    "northing": "Northing (m)",
    "elevation": "Elevation (m)",
    "along": "Distance along the body (m)",
    "across": "Distance across the body (m)",
}
ESTIMATOR_NAMES = {
    "nearest": "nearest composite",
    "inverse_distance": "inverse distance",
    "moving_average": "moving average",
}


def metals_in(data: ReportData, frame: pd.DataFrame, column: str) -> list[str]:
    """Metals of the study that occur in a column of a long frame, in the study's order."""
    present = set(frame[column].astype(str))
    known = [m for m in data.subject.metals if m in present]
    return known or sorted(present)[:4]


def metal_name(metal: str) -> str:
    """Label of a metal column, or the name itself."""
    return element_label(metal) if column_element(metal) else str(metal)


def axis_start(frame: pd.DataFrame, axis: str) -> float:
    """What is taken off the centres of an axis of map coordinates, so that its numbers can be read; else zero."""
    centres = frame.loc[frame["axis"].astype(str) == axis, "centre_m"].astype(float)
    least = float(centres.min()) if len(centres) else 0.0
    return math.floor(least / 100.0) * 100.0 if least >= 1e4 else 0.0


def swaths(data: ReportData) -> Drawing | None:
    """Means of composites and blocks in slices: a row a metal, a column an axis, counts as bars."""
    frame = data.estimation.swaths
    if frame is None or not has(frame, "axis", "column", "centre_m", "block_mean"):
        return None
    metals, axes_names = metals_in(data, frame, "column"), list(dict.fromkeys(frame["axis"].astype(str)))[:3]
    figure, axes = style.new_figure(
        3.5 * len(axes_names), 2.05 * len(metals) + 0.6, len(metals), len(axes_names), sharex="col"
    )
    others = [
        c
        for c in frame.columns
        if c.endswith("_mean") and c not in ("block_mean", "sample_mean", "declustered_mean")
    ]
    for row, metal in enumerate(metals):
        for column, name in enumerate(axes_names):
            axis = axes[row, column]
            part = frame[(frame["column"] == metal) & (frame["axis"].astype(str) == name)].sort_values(
                "centre_m"
            )
            start = axis_start(frame, name)
            centre = part["centre_m"].to_numpy(float) - start
            if "sample_count" in part and len(part):
                counts = part["sample_count"].to_numpy(float)
                width = np.min(np.diff(centre)) * 0.85 if len(centre) > 1 else 1.0
                axis.bar(
                    centre,
                    0.36 * counts / max(1.0, counts.max()),
                    width=width,
                    color="#e3e6e9",
                    zorder=0,
                    label="composites (count)",
                    transform=axis.get_xaxis_transform(),
                )
                axis.text(
                    0.99,
                    0.36,
                    f"most {counts.max():.0f}",
                    transform=axis.transAxes,
                    ha="right",
                    va="bottom",
                    fontsize=6,
                    color=style.QUIET,
                )
            axis.plot(centre, part["block_mean"], "-", color=style.INK, lw=1.6, label="blocks")
            if "sample_mean" in part:
                axis.plot(
                    centre,
                    part["sample_mean"],
                    "o",
                    ms=3.4,
                    mfc="white",
                    mec=style.LINES[0],
                    label="composites",
                )
            if "declustered_mean" in part:
                axis.plot(
                    centre,
                    part["declustered_mean"],
                    "o-",
                    ms=2.6,
                    lw=0.8,
                    color=style.LINES[0],
                    label="composites, declustered",
                )
            for number, other in enumerate(others[:2]):
                stem = other.removesuffix("_mean")
                axis.plot(
                    centre,
                    part[other],
                    ls=("--", ":")[number],
                    lw=1.1,
                    color=style.LINES[1 + number],
                    label=ESTIMATOR_NAMES.get(stem, stem.replace("_", " ")),
                )
            shown = part.filter(regex="_mean$").to_numpy(float)
            axis.set_ylim(0, 1.08 * np.nanmax(shown) if np.isfinite(shown).any() else 1.0)
            if column == 0:
                axis.set_ylabel(metal_name(metal))
            if row == len(metals) - 1:
                label = AXIS_LABELS.get(name, f"{name} (m)")
                axis.set_xlabel(
                    label.replace(" (m)", f" less {group_digits(f'{start:.0f}')} m (m)") if start else label
                )
    figure.legend(*axes[0, 0].get_legend_handles_labels(), loc="outside lower center", ncols=5)
    return Drawing(
        "swaths",
        "estimate",
        "Swaths",
        "Means in slices along each axis; grey bars are the number of composites in the slice, their highest"
        " named at the right. Blocks should follow the composites where there are many and smooth them where"
        " there are few.",
        "Swath plots of block and composite means by metal and axis.",
        figure,
        frame,
    )


def leave_one_out(data: ReportData) -> Drawing | None:
    """Truth against estimate with the sample's own hole left out."""
    frame = data.estimation.leave_one_out
    if frame is None or not has(frame, "column", "true", "estimate"):
        return None
    metals = metals_in(data, frame, "column")
    rows, columns = panel_grid(len(metals), 4)
    figure, axes = style.new_figure(2.6 * columns, 2.75 * rows, rows, columns)
    for axis, metal in zip(axes.ravel(), metals):
        part = frame[(frame["column"] == metal) & frame["estimate"].notna() & frame["true"].notna()]
        x, y = part["estimate"].to_numpy(float), part["true"].to_numpy(float)
        axis.plot(x, y, "o", ms=2.6, mew=0, alpha=0.55, color=style.LINES[0])
        if x.size > 2 and min(x.std(), y.std()) > 1e-9 * max(abs(x.mean()), abs(y.mean())):
            top = float(max(np.quantile(x, 0.995), np.quantile(y, 0.995))) * 1.05
            low = min(0.0, float(min(x.min(), y.min())))
            axis.plot([low, top], [low, top], color=style.INK, lw=0.9)
            slope, start = np.polyfit(x, y, 1)
            axis.plot([low, top], [start + slope * low, start + slope * top], color=style.LINES[1], lw=1.3)
            axis.set_xlim(low, top)
            axis.set_ylim(low, top)
            axis.set_title(
                f"slope {slope:.2f}, r {np.corrcoef(x, y)[0, 1]:.2f}, mean error {np.mean(x - y):+.2g}",
                fontsize=7,
            )
        axis.set_aspect("equal")
        axis.set_xlabel(f"Estimated {metal_name(metal)}")
        axis.set_ylabel(f"Composite {metal_name(metal)}")
    for axis in axes.ravel()[len(metals) :]:
        axis.set_axis_off()
    keep = [
        c
        for c in ("hole_id", "column", "domain", "true", "estimate", "error", "standardised_error")
        if c in frame
    ]
    return Drawing(
        "leave_one_out",
        "estimate",
        "Leave one hole out",
        "Each composite estimated without its own hole. Thin line: equal; thick line: regression of the"
        " composite on the estimate, whose slope should be near one.",
        "Scatter of composites against estimates made without their hole.",
        figure,
        frame[keep],
    )


SUPPORT_LOOKS: dict[str, tuple[str, Any]] = {
    "blocks": (style.INK, "-"),
    "block": (style.INK, "-"),
    "discrete gaussian": (style.LINES[1], "--"),
    "discrete_gaussian": (style.LINES[1], "--"),
    "affine": (style.LINES[2], ":"),
    "composites": (style.LINES[4], "-."),
    "points": (style.LINES[4], "-."),
}


def change_of_support(data: ReportData) -> Drawing | None:
    """Proportion and grade above cut-off for blocks against the theory, so that smoothing shows."""
    frame = data.estimation.change_of_support
    if frame is None or not has(frame, "metal", "cutoff", "support", "proportion", "grade"):
        return None
    metals = metals_in(data, frame, "metal")
    figure, axes = style.new_figure(2.6 * max(2, len(metals)), 4.6, 2, len(metals), sharex="col")
    for column, metal in enumerate(metals):
        part = frame[frame["metal"] == metal]
        for support, group in part.groupby("support", sort=False):
            colour, line = SUPPORT_LOOKS.get(str(support), (style.LINES[3], "-"))
            group = group.sort_values("cutoff")
            axes[0, column].plot(
                group["cutoff"],
                group["proportion"] * 100,
                color=colour,
                ls=line,
                label=str(support).replace("_", " "),
            )
            axes[1, column].plot(group["cutoff"], group["grade"], color=colour, ls=line)
        axes[0, column].set_title(metal_name(metal).rpartition(" (")[0] or metal)
        axes[1, column].set_xlabel(f"Cut-off, {metal_name(metal)}")
        axes[1, column].set_ylabel(f"Mean {metal_name(metal)} above")
        axes[0, column].set_ylim(0, 102)
    axes[0, 0].set_ylabel("Share of volume above (%)")
    figure.legend(*axes[0, 0].get_legend_handles_labels(), loc="outside lower center", ncols=4)
    return Drawing(
        "change_of_support",
        "estimate",
        "Change of support",
        "What blocks of this size should show by theory against what the estimate shows. An estimate that"
        " falls below the theoretical share at high cut-offs is smooth.",
        "Curves of volume and grade above cut-off by support.",
        figure,
        frame,
    )


def estimators(data: ReportData) -> Drawing | None:
    """Mean grade by estimator, relative to the one in use."""
    frame = data.estimation.estimators
    if frame is None or not has(frame, "metal"):
        return None
    rows = (
        frame[frame["domain"] == "all"] if "domain" in frame and (frame["domain"] == "all").any() else frame
    )
    rows = rows.drop_duplicates("metal")
    names = [
        c for c in rows.columns if c not in ("metal", "domain") and pd.api.types.is_numeric_dtype(rows[c])
    ]
    if len(names) < 2:
        return None
    reference = "ordinary_kriging" if "ordinary_kriging" in names else names[0]
    figure, axes = style.new_figure(6.8, 0.5 * len(rows) + 1.5)
    axis = axes[0, 0]
    axis.axvline(0, color=style.INK, lw=0.9)
    axis.axvspan(-5, 5, color="#eef2f5", zorder=0)
    for number, name in enumerate(n for n in names if n != reference):
        change = 100 * (rows[name].to_numpy(float) / rows[reference].to_numpy(float) - 1)
        axis.plot(
            change,
            np.arange(len(rows))[::-1] + 0.12 * (number - (len(names) - 2) / 2),
            style.MARKERS[number % 7],
            ms=5,
            color=style.LINES[number % 7],
            label=ESTIMATOR_NAMES.get(name, name.replace("_", " ")),
        )
    axis.set_yticks(np.arange(len(rows))[::-1], [metal_name(m) for m in rows["metal"]])
    axis.set_ylim(-0.6, len(rows) - 0.4)
    axis.set_xlabel(f"Mean grade relative to {reference.replace('_', ' ')} (%)")
    figure.legend(*axis.get_legend_handles_labels(), loc="outside lower center", ncols=4)
    return Drawing(
        "estimators",
        "estimate",
        "Other estimators of the same mean",
        "Grey band: 5 %.",
        "Dot plot of mean grades by estimator.",
        figure,
        rows,
    )
