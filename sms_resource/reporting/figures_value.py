"""Tonnes and value as pictures: grade-tonnage, waterfalls, geometry, tornado, heat map."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.figures_grade_tonnage import grade_tonnage
from sms_resource.reporting.figures_scenarios import heat_map, tornado
from sms_resource.reporting.rounding import mass_unit, significant_text
from sms_resource.reporting.style import Drawing
from sms_resource.units import element_label

__all__ = ["changes", "geometry", "grade_tonnage", "heat_map", "tornado", "waterfall"]


def _waterfall(
    data: ReportData, frame: pd.DataFrame, key: str, section: str, title: str, caption: str, total: str
) -> Drawing:
    values = frame["dry_tonnes"].to_numpy(float)
    kinds = (
        frame["kind"].astype(str).to_numpy()
        if "kind" in frame
        else np.array([total if i in (0, len(frame) - 1) else "step" for i in range(len(frame))])
    )
    unit, scale = mass_unit(float(np.nanmax(np.abs(values))) if len(values) else 1.0)
    metals = [metal for metal in data.subject.metals if metal in frame]
    panels = 2 if metals else 1
    figure, axes = style.new_figure(
        8.6, 0.42 * len(frame) + (1.6 if metals else 1.3), 1, panels, sharey=True,
        gridspec_kw={"width_ratios": [2.2, 1.0][:panels]},
    )  # fmt: skip
    axis = axes[0, 0]
    level = 0.0
    for number, (value, kind, _step) in enumerate(zip(values, kinds, frame["step"].astype(str))):
        y = len(frame) - 1 - number
        if kind == total:
            axis.barh(y, value / scale, color="#4f6d7a", height=0.62)
            level = value
            axis.text(value / scale, y, f" {significant_text(value / scale, 3)}", va="center", fontsize=7.5)
        else:
            axis.barh(
                y, value / scale, left=level / scale, color="#d9915b" if value < 0 else "#6fa58f", height=0.62
            )
            right = max(level, level + value) / scale
            axis.text(right, y, f" {signed(value / scale)}", va="center", fontsize=7.5)
            level += value
        (
            axis.plot([level / scale, level / scale], [y - 1 + 0.31, y - 0.31], color=style.QUIET, lw=0.6)
            if number < len(frame) - 1
            else None
        )
    axis.set_yticks(range(len(frame)), [style.short(step) for step in frame["step"]][::-1])
    axis.set_ylim(-0.6, len(frame) - 0.4)
    axis.set_xlabel(f"Dry tonnes ({unit} dry), {data.tally_label}")
    axis.margins(x=0.12)
    axis.set_xlim(left=0)
    if metals:
        _metal_left(axes[0, 1], frame, kinds == total, metals)
        figure.legend(*axes[0, 1].get_legend_handles_labels(), loc="outside lower center", ncols=6)
    return Drawing(key, section, title, caption, f"Waterfall of dry tonnes: {title.lower()}.", figure, frame)


def _metal_left(axis: Any, frame: pd.DataFrame, total: NDArray[np.bool_], metals: list[str]) -> None:
    """Contained metal that is left after each step, in percent of that of the first row."""
    place = np.arange(len(frame))[::-1]
    for number, metal in enumerate(metals):
        values = frame[metal].to_numpy(float)
        left = np.empty(len(values))
        for row, value in enumerate(values):
            left[row] = value if total[row] or row == 0 else left[row - 1] + value
        if not left[0] > 0:
            continue
        axis.plot(
            100.0 * left / left[0], place, color=style.LINES[number % len(style.LINES)], lw=1.0,
            marker="osD^v"[number % 5], ms=4.0, label=f"{element_label(metal).rpartition(' (')[0]} metal",
        )  # fmt: skip
    axis.set_xlabel("Contained metal left\n(% of the body)")
    axis.margins(x=0.15)
    axis.grid(axis="x", color="#e4e4e0", lw=0.6)
    axis.tick_params(axis="y", length=0)


def case_words(frame: pd.DataFrame) -> list[str]:
    """What each case of the geometry moves, in words where the table has them."""
    words = frame["what"] if "what" in frame else frame["case"].astype(str).str.replace("_", " ")
    return [style.short(str(word), 62) for word in words]


def signed(value: float) -> str:
    """A change with its sign and two significant figures."""
    return ("+" if value > 0 else "") + significant_text(value, 2)


def waterfall(data: ReportData) -> Drawing | None:
    """What each screen takes, from the body to what remains."""
    frame = data.body.waterfall
    if frame is None or not has(frame, "step", "dry_tonnes"):
        return None
    return _waterfall(
        data,
        frame,
        "waterfall",
        "tonnes",
        "From the body to what the screens leave",
        "Each bar is what a screen takes in dry tonnes; nothing is dropped in silence. Where the study asks for them,"
        " the cut-off, under-cut loss and over-cut dilution follow the screens.",
        "total",
    )


def changes(data: ReportData) -> Drawing | None:
    """What changed since another run, and which decision caused it."""
    frame = data.record.changes
    if frame is None or not has(frame, "step", "dry_tonnes"):
        return None
    return _waterfall(
        data,
        frame,
        "changes",
        "ledger",
        "What changed since the other run",
        f"Compared with {data.record.against or 'another run'}.",
        "total",
    )


def geometry(data: ReportData) -> Drawing | None:
    """Change of dry tonnes with base, seafloor and outline."""
    frame = data.body.geometry_uncertainty
    if frame is None or not has(frame, "case", "change_pct"):
        return None
    frame = frame[frame["change_pct"].abs() > 1e-9]
    if not len(frame):
        return None
    figure, axes = style.new_figure(7.4, 0.36 * len(frame) + 1.1)
    axis = axes[0, 0]
    place = np.arange(len(frame))[::-1]
    change = frame["change_pct"].to_numpy(float)
    axis.barh(place, change, color=np.where(change < 0, "#d9915b", "#6fa58f"), height=0.6)
    for y, value in zip(place, change):
        axis.annotate(
            f"{value:+.1f} %",
            (value, y),
            xytext=(4 if value >= 0 else -4, 0),
            textcoords="offset points",
            va="center",
            ha="left" if value >= 0 else "right",
            fontsize=7,
        )
    axis.axvline(0, color=style.INK, lw=0.9)
    axis.set_yticks(place, case_words(frame))
    axis.set_xlabel(f"Change of dry tonnes of the body (%), {data.tally_label}")
    axis.margins(x=0.26)
    return Drawing(
        "geometry",
        "body",
        "What the geometry is worth",
        "Dry tonnes of the body when one surface or the outline moves by the stated amount.",
        "Bars of change in dry tonnes by case.",
        figure,
        frame,
    )
