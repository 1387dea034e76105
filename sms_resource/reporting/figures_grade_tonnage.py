"""Grade-tonnage curves: blocks by proposed class, and beside the whole what a change of support makes of it."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, cutoff_head, has
from sms_resource.reporting.rounding import mass_unit, significant_text
from sms_resource.reporting.style import Drawing
from sms_resource.reporting.tonnage import whole_domain
from sms_resource.units import element_label

FEW = 0.01  # share of the tonnes below which a grade rests on so few blocks that it is not drawn
SUPPORT = "#7a4fa3"


def grade_tonnage(data: ReportData) -> Drawing | None:
    """Dry tonnes and grades against the cut-off, one panel a class."""
    table = data.value.grade_tonnage
    if table is None or not has(table, "cutoff", "proposed_class", "dry_tonnes"):
        return None
    rows = whole_domain(table)
    wanted = (data.subject.cutoff or {}).get("variable")
    first = rows["cutoff_variable"].iloc[0] if "cutoff_variable" in rows else "cutoff"
    variable = str(wanted if wanted is not None else first)
    if "cutoff_variable" in rows and (rows["cutoff_variable"] == variable).any():
        rows = rows[rows["cutoff_variable"] == variable]
    held = rows[rows["dry_tonnes"] > 0]
    names = sorted(held["proposed_class"].astype(str).unique(), key=style.class_rank)[:6]
    metals = [m for m in data.subject.metals if m in rows]
    if not names or not metals:
        return None
    if len(names) == 2 and "all" in names:  # one class holds everything, so the whole says the same
        names = [name for name in names if name == "all"]
    across = 2 if len(names) > 1 else 1
    down = -(-len(names) // across)
    width = 5.2 * across if across > 1 else 7.4
    figure, axes = style.new_figure(width, 3.3 * down + 0.6, down, across)
    beside = data.value.beside_support
    rights = []
    for axis, name in zip(axes.ravel(), names):
        part = rows[rows["proposed_class"].astype(str) == name].sort_values("cutoff")
        curve = beside if name == "all" and has(beside, "cutoff", "support_dry_tonnes") else None
        right = _panel(axis, part, name, metals, variable, curve)
        axis.set_xlabel(f"Cut-off, {cutoff_head(data, variable)}")
        rights.append(right)
        at = (data.subject.cutoff or {}).get("value")
        if at is not None and variable == wanted:
            axis.axvline(float(at), color="#d55e00", lw=1, ls=":", label="cut-off of the study")
    handles: dict[str, Any] = {}
    for axis in (*axes.ravel()[: len(names)], *rights):
        for handle, words in zip(*axis.get_legend_handles_labels()):
            handles.setdefault(words, handle)
    figure.legend(list(handles.values()), list(handles), loc="outside lower center", ncols=4)
    figure.suptitle(data.tally_label, x=0.01, ha="left", fontsize=8)
    for axis in axes.ravel()[len(names) :]:
        axis.set_axis_off()
    drawn_beside = has(beside, "cutoff", "support_dry_tonnes") and "all" in names
    words = (
        " Purple: the discrete Gaussian model of change of support, from the same dry tonnes at the lowest cut-off;"
        " the gap is what smoothing hides."
        if drawn_beside
        else ""
    )
    return Drawing(
        "grade_tonnage",
        "tonnes",
        f"Tonnes and grade against cut-off ({data.tally_label})",
        "Block support, no dilution. Grades are drawn as a ratio to their value at the lowest cut-off, so that all metals "
        "share an axis; the numbers over the panel are those values. A grade ends where less than "
        f"{100 * FEW:g} % of the panel's tonnes are left: it would rest on a few blocks.{words}",
        "Grade-tonnage curves, one panel for each proposed class.",
        figure,
        _table(rows, beside if drawn_beside else None),
    )


def readable(part: pd.DataFrame) -> np.ndarray:
    """Cut-offs above which enough tonnes are left for a grade to be read."""
    dry = part["dry_tonnes"].to_numpy(float)
    return np.asarray(dry >= FEW * np.nanmax(dry)) & (dry > 0)


def _table(rows: pd.DataFrame, beside: pd.DataFrame | None) -> pd.DataFrame:
    """What was drawn, with the change-of-support curve in the rows of the whole."""
    if beside is None:
        return rows
    curve = beside[["cutoff", "support_dry_tonnes", "support_grade"]].assign(proposed_class="all")
    return rows.merge(curve, on=["cutoff", "proposed_class"], how="left")


def _panel(
    axis: Any, part: pd.DataFrame, name: str, metals: list[str], variable: str, curve: pd.DataFrame | None
) -> Any:
    """Tonnes on the left, grades on the right; returns the right axis."""
    most = float(part["dry_tonnes"].max())
    unit, scale = mass_unit(most)
    whole = name.lower() == "all"
    axis.fill_between(
        part["cutoff"], part["dry_tonnes"] / scale, lw=0, alpha=0.75,
        color="#d5dae0" if whole else style.class_colour(name),
    )  # fmt: skip
    axis.plot(part["cutoff"], part["dry_tonnes"] / scale, color=style.INK, lw=1.2, label="dry tonnes (left)")
    if curve is not None:
        axis.plot(
            curve["cutoff"], curve["support_dry_tonnes"] / scale, color=SUPPORT, lw=1.3, ls=(0, (4, 2)),
            label="dry tonnes, change of support",
        )  # fmt: skip
    axis.set_ylim(0, most / scale * 1.08 or 1.0)
    axis.set_xlim(float(part["cutoff"].min()), float(part["cutoff"].max()))
    axis.set_ylabel(f"Dry tonnes above ({unit} dry)")
    right = axis.twinx()
    right.spines["right"].set_visible(True)
    enough = readable(part)
    bases: list[str] = []
    for number, metal in enumerate(metals):
        start = part[metal].dropna()
        base = float(start.iloc[0]) if len(start) else 0.0
        symbol, _, words = element_label(metal).rpartition(" (")
        colour = style.LINES[number % 7]
        relative = part[metal] / base if base else part[metal] * np.nan
        right.plot(
            part["cutoff"], relative.where(enough), color=colour, ls=("-", "--", "-.", ":")[number % 4], lw=1.4,
            label=f"{symbol} grade",
        )  # fmt: skip
        if metal == variable and curve is not None and base:
            known = curve["support_dry_tonnes"] >= FEW * curve["support_dry_tonnes"].max()
            right.plot(
                curve["cutoff"], (curve["support_grade"] / base).where(known), color=SUPPORT, lw=1.1,
                ls=(0, (1, 1.5)), label=f"{symbol} grade, change of support",
            )  # fmt: skip
        if len(start):
            bases.append(f"{significant_text(base, 3)} {words.rstrip(')')} {symbol}")
    lines = [f"Grades at cut-off {float(part['cutoff'].min()):g}, where every ratio is 1:"] if bases else []
    lines += [" · ".join(bases[row : row + 6]) for row in range(0, len(bases), 6)]
    # Above the panel: inside it they would lie on the curves, and seem to belong to the end they stand at.
    axis.annotate(
        "\n".join(lines), (0, 1), xytext=(0, 3), xycoords="axes fraction", textcoords="offset points", ha="left",
        va="bottom", fontsize=6.8, color=style.QUIET, linespacing=1.35,
    )  # fmt: skip
    axis.set_title(
        "All classes" if whole else f"{style.class_name(name)} (proposed)", pad=5 + 10.5 * len(lines)
    )
    right.set_ylabel("Grade above / grade at the lowest cut-off (ratio)")
    right.set_ylim(bottom=0)
    return right
