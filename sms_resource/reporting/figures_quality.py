"""Laboratory quality: control charts of reference materials, blanks, scatter of duplicates."""

from __future__ import annotations

import numpy as np
import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.figures_samples import panel_grid
from sms_resource.reporting.style import Drawing
from sms_resource.units import element_column, element_label

MOST_PANELS = 8


def element_name(element: str) -> str:
    """Label of a laboratory element such as ``cu``: ``Cu (%)``."""
    try:
        return element_label(element_column(str(element)))
    except ValueError:
        return str(element)


def control_charts(data: ReportData) -> Drawing | None:
    """Reference materials in the order of analysis, in standard deviations from the expected value."""
    table = data.evidence.laboratory.table
    if table is None or not has(table, "kind", "element", "value", "expected", "expected_sd"):
        return None
    frame = table[(table["kind"] == "reference") & table["value"].notna() & (table["expected_sd"] > 0)]
    wanted = {metal.partition("_")[0] for metal in data.subject.metals}
    frame = frame[frame["element"].isin(wanted)] if wanted and frame["element"].isin(wanted).any() else frame
    if not len(frame):
        return None
    frame = frame.assign(score=(frame["value"] - frame["expected"]) / frame["expected_sd"])
    elements = sorted(
        frame["element"].unique(),
        key=lambda e: [m.partition("_")[0] for m in data.subject.metals].index(e) if e in wanted else 99,
    )[:MOST_PANELS]
    rows, columns = panel_grid(len(elements))
    figure, axes = style.new_figure(4.9 * columns, 2.4 * rows + 0.3, rows, columns)
    materials = sorted(frame["material"].astype(str).unique()) if "material" in frame else ["reference"]
    order = [c for c in ("batch", "sequence") if c in frame]
    for axis, element in zip(axes.ravel(), elements):
        part = (
            frame[frame["element"] == element].sort_values(order, kind="stable")
            if order
            else frame[frame["element"] == element]
        )
        place = np.arange(1, len(part) + 1)
        axis.axhspan(-2, 2, color="#eef2f5", zorder=0)
        for level, line in ((3, "-"), (-3, "-"), (2, ":"), (-2, ":"), (0, "-")):
            axis.axhline(level, color=style.QUIET, lw=0.6, ls=line, zorder=1)
        score = part["score"].to_numpy(float)
        for number, material in enumerate(materials):
            mine = (
                (part["material"].astype(str) == material).to_numpy()
                if "material" in part
                else np.ones(len(part), bool)
            )
            axis.plot(
                place[mine],
                np.clip(score[mine], -6, 6),
                style.MARKERS[number % 7],
                ms=3.4,
                mew=0,
                color=style.LINES[number % 7],
                label=material,
            )
        failed = np.abs(score) > 3
        axis.plot(place[failed], np.clip(score[failed], -6, 6), "o", ms=8, mfc="none", mec="#d55e00")
        if "batch" in part:
            change = (
                np.nonzero(
                    part["batch"].astype(str).to_numpy()[1:] != part["batch"].astype(str).to_numpy()[:-1]
                )[0]
                + 1.5
            )
            for edge in change if len(change) <= 40 else []:
                axis.axvline(edge, color=style.RULE, lw=0.5, zorder=0)
        axis.set_ylim(-6.5, 6.5)
        axis.set_ylabel("(value − expected) / SD")
        axis.set_xlabel("Order of analysis (count)")
        axis.set_title(f"{element_name(element)}: {int(failed.sum())} of {len(part)} beyond 3 SD", fontsize=8)
    for axis in axes.ravel()[len(elements) :]:
        axis.set_axis_off()
    figure.legend(*axes[0, 0].get_legend_handles_labels(), loc="outside lower center", ncols=6)
    keep = [
        c
        for c in ("batch", "sequence", "material", "element", "value", "expected", "expected_sd", "score")
        if c in frame
    ]
    return Drawing(
        "control_charts",
        "evidence",
        "Reference materials: control charts",
        "Grey band: 2 SD; solid lines: 3 SD; circled: beyond 3 SD; thin vertical lines part the batches."
        " Points beyond 6 SD are drawn at 6.",
        "Control charts of reference materials by element.",
        figure,
        frame[keep],
    )


def blanks(data: ReportData) -> Drawing | None:
    """Blanks in the order of analysis against their limit."""
    table = data.evidence.laboratory.table
    if table is None or not has(table, "kind", "element", "value"):
        return None
    frame = table[table["kind"] == "blank"]
    wanted = [m.partition("_")[0] for m in data.subject.metals]
    frame = frame[frame["element"].isin(wanted)]
    limit = frame["value_limit"] if "value_limit" in frame else pd.Series(np.nan, index=frame.index)
    frame = frame.assign(
        shown=frame["value"].where(frame["value"].notna(), limit / 2), below=frame["value"].isna()
    )
    frame = frame[frame["shown"].notna()]
    elements = [e for e in wanted if (frame["element"] == e).any()][:MOST_PANELS]
    if not elements:
        return None
    rows, columns = panel_grid(len(elements))
    figure, axes = style.new_figure(4.9 * columns, 2.1 * rows, rows, columns)
    for axis, element in zip(axes.ravel(), elements):
        part = frame[frame["element"] == element]
        place = np.arange(1, len(part) + 1)
        below = part["below"].to_numpy(bool)
        axis.plot(
            place[~below],
            part["shown"].to_numpy(float)[~below],
            "o",
            ms=3.6,
            mew=0,
            color=style.LINES[0],
            label="measured",
        )
        axis.plot(
            place[below],
            part["shown"].to_numpy(float)[below],
            "o",
            ms=3.6,
            mfc="none",
            mec=style.QUIET,
            label="below detection, drawn at half",
        )
        if part.get("value_limit") is not None and part["value_limit"].notna().any():
            axis.axhline(
                5 * float(part["value_limit"].max()),
                color="#d55e00",
                lw=1,
                ls="--",
                label="5 detection limits",
            )
        axis.set_xlabel("Order of analysis (count)")
        axis.set_ylabel(element_name(element))
        axis.set_ylim(bottom=0)
    for axis in axes.ravel()[len(elements) :]:
        axis.set_axis_off()
    figure.legend(*axes[0, 0].get_legend_handles_labels(), loc="outside lower center", ncols=3)
    return Drawing(
        "blanks",
        "evidence",
        "Blanks",
        "Material without metal, in the order of analysis.",
        "Charts of blanks by element.",
        figure,
        frame[[c for c in ("batch", "sequence", "element", "value", "value_limit", "shown") if c in frame]],
    )


def duplicates(data: ReportData) -> Drawing | None:
    """Original against repeat for each element, on log scales, with lines of 10 and 20 % difference."""
    pairs = data.evidence.laboratory.pairs
    if pairs is None or not has(pairs, "element", "original", "repeat"):
        return None
    frame = pairs[(pairs["original"] > 0) & (pairs["repeat"] > 0)]
    wanted = [m.partition("_")[0] for m in data.subject.metals]
    elements = [e for e in wanted if (frame["element"] == e).any()][:MOST_PANELS]
    if not elements:
        return None
    rows, columns = panel_grid(len(elements), 4)
    figure, axes = style.new_figure(2.65 * columns, 2.75 * rows + 0.2, rows, columns)
    stages = sorted(frame["stage"].astype(str).unique()) if "stage" in frame else ["pairs"]
    for axis, element in zip(axes.ravel(), elements):
        part = frame[frame["element"] == element]
        low, high = (
            part[["original", "repeat"]].min().min() / 1.3,
            part[["original", "repeat"]].max().max() * 1.3,
        )
        ends = np.array([low, high])
        axis.plot(ends, ends, color=style.INK, lw=0.8)
        for factor, line in ((0.10, "--"), (0.20, ":")):
            for side in (1 + factor, 1 / (1 + factor)):
                axis.plot(ends, ends * side, color=style.QUIET, lw=0.6, ls=line)
        for number, stage in enumerate(stages):
            mine = part[part["stage"].astype(str) == stage] if "stage" in part else part
            axis.plot(
                mine["original"],
                mine["repeat"],
                style.MARKERS[number % 7],
                ms=3,
                mew=0,
                alpha=0.75,
                color=style.LINES[number % 7],
                label=f"{stage}",
            )
        axis.set_xscale("log")
        axis.set_yscale("log")
        axis.set_xlim(low, high)
        axis.set_ylim(low, high)
        style.log_axis(axis.xaxis)
        style.log_axis(axis.yaxis)
        axis.set_aspect("equal")
        axis.set_xlabel(f"Original, {element_name(element)}")
        axis.set_ylabel(f"Repeat, {element_name(element)}")
    for axis in axes.ravel()[len(elements) :]:
        axis.set_axis_off()
    figure.legend(*axes[0, 0].get_legend_handles_labels(), loc="outside lower center", ncols=5)
    return Drawing(
        "duplicates",
        "evidence",
        "Duplicates",
        "Dashed lines: 10 % apart; dotted: 20 %.",
        "Scatter of duplicate pairs by element.",
        figure,
        frame,
    )
