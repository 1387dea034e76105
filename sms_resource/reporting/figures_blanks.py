"""Blanks: in the order of analysis against their limit, and against the grade of the sample before them."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.figures_quality import MOST_PANELS, element_name
from sms_resource.reporting.figures_samples import panel_grid
from sms_resource.reporting.style import Drawing


def blanks(data: ReportData) -> Drawing | None:
    """Blanks in the order of analysis; beside each panel, where it is known, against the grade before."""
    frame = blank_frame(data)
    wanted = [m.partition("_")[0] for m in data.subject.metals]
    elements = [e for e in wanted if frame is not None and (frame["element"] == e).any()][:MOST_PANELS]
    if frame is None or not elements:
        return None
    carried = bool(frame.loc[frame["element"].isin(elements), "grade_before"].notna().any())
    rows, columns = panel_grid(len(elements))
    ratios = {"gridspec_kw": {"width_ratios": [3.0, 2.0] * columns}} if carried else {}
    figure, axes = style.new_figure(4.9 * columns, 2.1 * rows, rows, columns * (1 + carried), **ratios)
    cells = axes.reshape(rows * columns, 1 + carried)
    for cell, element in zip(cells, elements):
        part = frame[frame["element"] == element]
        spot(cell[0], np.arange(1, len(part) + 1), part)
        cell[0].set_xlabel("Order of analysis (count)")
        cell[0].set_ylabel(f"Blank, {element_name(element)}")
        if carried:
            known = part[part["grade_before"].notna()]
            spot(cell[1], known["grade_before"].to_numpy(float), known)
            cell[1].set_xlabel(f"Before it, {element_name(element)}")
            cell[1].set_xlim(left=0)
            cell[1].set_ylim(cell[0].get_ylim())
            cell[1].set_yticklabels([])
    for cell in cells[len(elements) :]:
        for axis in cell:
            axis.set_axis_off()
    figure.legend(*cells[0][0].get_legend_handles_labels(), loc="outside lower center", ncols=3)
    beside = (
        "; beside it against the grade of the sample before, which carry-over would raise" if carried else ""
    )
    shown = ("batch", "sequence", "element", "value", "value_limit", "shown", "limit", "grade_before")
    return Drawing(
        "blanks", "evidence", "Blanks", f"Material without metal, in the order of analysis{beside}.",
        "Charts of blanks by element.", figure, frame[[c for c in shown if c in frame]],
    )  # fmt: skip


def blank_frame(data: ReportData) -> pd.DataFrame | None:
    """Results of blanks with what is drawn of them (half the detection limit where below it), limit and grade before."""
    lab = data.evidence.laboratory
    table = lab.table
    if table is None or not has(table, "kind", "element", "value"):
        return None
    frame = table[table["kind"] == "blank"].copy()
    detection = frame["value_limit"] if "value_limit" in frame else pd.Series(np.nan, index=frame.index)
    below = frame["value"].isna()
    frame = frame.assign(shown=frame["value"].where(~below, detection / 2), below=below)
    frame = frame.assign(limit=np.nan, detection_limit=np.nan, grade_before=np.nan)
    if lab.blanks is not None and has(lab.blanks, "element", "sample_id", "limit", "grade_before"):
        judged = lab.blanks.set_index(["element", "sample_id"])
        judged = judged[~judged.index.duplicated()]
        place = pd.MultiIndex.from_frame(frame[["element", "sample_id"]])
        for name in ("limit", "detection_limit", "grade_before"):
            frame[name] = judged[name].reindex(place).to_numpy(dtype=np.float64)
    return frame[frame["shown"].notna()]


def spot(axis: Any, x: Any, part: pd.DataFrame) -> None:
    """Blanks as dots, open where below detection, and the limit that they fail over."""
    below, value = part["below"].to_numpy(bool), part["shown"].to_numpy(float)
    axis.plot(x[~below], value[~below], "o", ms=3.6, mew=0, color=style.LINES[0], label="measured")
    axis.plot(
        x[below],
        value[below],
        "o",
        ms=3.6,
        mfc="none",
        mec=style.QUIET,
        label="below detection, drawn at half",
    )
    if part["limit"].notna().any():
        limit, detection = float(part["limit"].max()), float(part["detection_limit"].max())
        axis.axhline(limit, color="#d55e00", lw=1, ls="--", label=f"{limit / detection:g} detection limits")
    axis.set_ylim(bottom=0)
