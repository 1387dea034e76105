"""Laboratory quality: control charts of reference materials, scatter of duplicates."""

from __future__ import annotations

from typing import Any

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


def duplicates(data: ReportData) -> Drawing | None:
    """Original against repeat on log scales: duplicates above, check laboratory with its reduced major axis below."""
    lab = data.evidence.laboratory
    wanted = [m.partition("_")[0] for m in data.subject.metals]
    given = (
        ("duplicates", _positive(lab.pairs, wanted)),
        ("check laboratory", _positive(lab.check_pairs, wanted)),
    )
    kinds = {kind: frame for kind, frame in given if frame is not None}
    if not kinds:
        return None
    across = [e for e in wanted if any((frame["element"] == e).any() for frame in kinds.values())]
    panels = [
        (kind, e)
        for kind, frame in kinds.items()
        for e in across[:MOST_PANELS]
        if (frame["element"] == e).any()
    ]
    rows, columns = panel_grid(len(panels), min(4, len(across)))
    figure, axes = style.new_figure(2.65 * columns, 2.75 * rows + 0.2, rows, columns)
    stages = sorted(kinds["duplicates"]["stage"].astype(str).unique()) if "duplicates" in kinds else []
    marks = {("duplicates", stage): number for number, stage in enumerate(stages)}
    marks["check laboratory", ""] = len(stages)
    handles: dict[str, Any] = {}
    for axis, (kind, element) in zip(axes.ravel(), panels):
        part = kinds[kind][kinds[kind]["element"] == element]
        both = part[["original", "repeat"]].to_numpy(float)
        ends = np.array([both.min() / 1.3, both.max() * 1.3])
        handles["equal"] = axis.plot(ends, ends, color=style.INK, lw=0.8)[0]
        if kind == "duplicates":
            for factor, line in ((0.10, "--"), (0.20, ":")):
                for side in (1 + factor, 1 / (1 + factor)):
                    axis.plot(ends, ends * side, color=style.QUIET, lw=0.6, ls=line)
        else:
            handles.update(_reduced_major_axis(axis, lab.checks, element, ends))
        for stage in stages if kind == "duplicates" else [""]:
            mine = part[part["stage"].astype(str) == stage] if kind == "duplicates" else part
            number = marks[kind, stage] % 7
            handles[stage or kind] = axis.plot(
                mine["original"], mine["repeat"], style.MARKERS[number], ms=3, mew=0, alpha=0.75,
                color=style.LINES[number],
            )[0]  # fmt: skip
        axis.set_xscale("log")
        axis.set_yscale("log")
        axis.set_xlim(*ends)
        axis.set_ylim(*ends)
        style.log_axis(axis.xaxis)
        style.log_axis(axis.yaxis)
        axis.set_aspect("equal")
        axis.set_xlabel(f"Original, {element_name(element)}")
        axis.set_ylabel(f"{'Repeat' if kind == 'duplicates' else 'Check'}, {element_name(element)}")
    for axis in axes.ravel()[len(panels) :]:
        axis.set_axis_off()
    figure.legend(list(handles.values()), list(handles), loc="outside lower center", ncols=6)
    table = pd.concat([frame.assign(kind=kind) for kind, frame in kinds.items()], ignore_index=True)
    return Drawing(
        "duplicates",
        "evidence",
        "Duplicates and check laboratory",
        "Duplicates: dashed lines are 10 % apart, dotted 20 %. Check laboratory: reduced major axis with the interval of "
        "its slope (band).",
        "Scatter of duplicate pairs and of check assays by element.",
        figure,
        table,
    )


def _positive(pairs: pd.DataFrame | None, wanted: list[str]) -> pd.DataFrame | None:
    """Pairs of the wanted elements that a log scale can show; None where there are none."""
    if pairs is None or not has(pairs, "element", "original", "repeat"):
        return None
    frame = pairs[(pairs["original"] > 0) & (pairs["repeat"] > 0) & pairs["element"].isin(wanted)]
    return frame if len(frame) else None


def _reduced_major_axis(
    axis: Any, checks: pd.DataFrame | None, element: str, ends: np.ndarray
) -> dict[str, Any]:
    """Draw the line and the band of its slope; returns what the legend shows."""
    if checks is None or not has(checks, "element", "slope", "intercept", "slope_low", "slope_high"):
        return {}
    row = checks[checks["element"] == element]
    if not len(row) or not np.isfinite(float(row["slope"].iloc[0])):
        return {}
    found = row.iloc[0]
    x = np.geomspace(float(ends[0]), float(ends[1]), 40)
    # the limits of the slope turn about the means, so the least slope goes with the greatest intercept
    sides = [found[f"intercept_{b}"] + found[f"slope_{a}"] * x for a, b in (("low", "high"), ("high", "low"))]
    band = axis.fill_between(
        x, *(np.maximum(side, 1e-12) for side in sides), color=style.LINES[1], alpha=0.25, lw=0
    )
    y = found["intercept"] + found["slope"] * x
    line = axis.plot(x[y > 0], y[y > 0], color=style.LINES[1], lw=1.2)[0]
    axis.set_title(
        f"slope {found['slope']:.3f} ({found['slope_low']:.3f} to {found['slope_high']:.3f})", fontsize=7
    )
    return {"reduced major axis": line, "interval of its slope": band}
