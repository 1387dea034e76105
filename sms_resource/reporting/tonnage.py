"""Tables of tonnes, grades and contained metal, rounded for a reader."""

from __future__ import annotations

from collections.abc import Sequence

import pandas as pd

from sms_resource.reporting.data import ReportData, cutoff_head, has
from sms_resource.reporting.elements import Table
from sms_resource.reporting.rounding import (
    contained_metal,
    is_inferred,
    mass_unit,
    metal_figures,
    metal_unit,
    significant_text,
)
from sms_resource.reporting.style import class_name, class_rank
from sms_resource.units import element_label

ROUNDING_NOTE = (
    "Estimates, rounded to the confidence; totals may not add. Grades are on dry mass, so contained metal is "
    "dry tonnes times grade, from unrounded values. The data files hold the unrounded values."
)


def rows_at_cutoff(data: ReportData, frame: pd.DataFrame | None = None) -> pd.DataFrame:
    """Rows of the grade-tonnage table at the study's cut-off, one a class, most certain first, "all" last."""
    table = data.value.grade_tonnage if frame is None else frame
    if table is None or not has(table, "cutoff", "proposed_class", "dry_tonnes"):
        return pd.DataFrame(columns=["cutoff", "proposed_class", "dry_tonnes", "wet_tonnes"])
    rows = whole_domain(table)
    cutoff = data.subject.cutoff or {}
    variable = cutoff.get("variable")
    if variable is not None and "cutoff_variable" in rows and (rows["cutoff_variable"] == variable).any():
        rows = rows[rows["cutoff_variable"] == variable]
    value = float(cutoff["value"]) if cutoff.get("value") is not None else float(rows["cutoff"].min())
    distance = (rows["cutoff"].astype(float) - value).abs()
    rows = rows[distance <= 1e-9 * max(1.0, abs(value))]
    order = rows["proposed_class"].map(class_rank)
    return (
        rows.assign(_order=order)
        .sort_values("_order", kind="stable")
        .drop(columns="_order")
        .reset_index(drop=True)
    )


def whole_domain(table: pd.DataFrame) -> pd.DataFrame:
    """Only the rows over all domains and at block support, where a table carries others too."""
    rows = table
    for name, wanted in (("domain", "all"), ("support", "block")):
        if name in rows and (rows[name] == wanted).any():
            rows = rows[rows[name] == wanted]
    return rows


def _metal_unit_of(rows: pd.DataFrame, column: str) -> tuple[str, float]:
    masses = [contained_metal(t, g, column) for t, g in zip(rows["dry_tonnes"], rows[column])]
    finite = [mass for mass in masses if mass == mass]
    return metal_unit(column, max(finite, default=0.0))


def tonnage_table(data: ReportData, rows: pd.DataFrame, title: str, *, first: Sequence[str] = ()) -> Table:
    """Dry and wet tonnes, grades and contained metal by class; ``first`` are further columns shown before them."""
    metals = [metal for metal in data.subject.metals if metal in rows]
    largest = float(rows["dry_tonnes"].max()) if len(rows) else 0.0
    unit, scale = mass_unit(largest, data.subject.significant_figures)
    contained = {metal: _metal_unit_of(rows, metal) for metal in metals}
    head = [*[str(name).replace("_", " ").capitalize() for name in first], "Proposed class"]
    head += [f"Dry tonnes ({unit} dry)", f"Wet tonnes ({unit} wet)"]
    equivalent = ["equivalent"] if "equivalent" in rows and rows["equivalent"].notna().any() else []
    head += [cutoff_head(data, "equivalent").replace(" ", "\u00a0") for _ in equivalent]
    head += [element_label(metal).replace(" ", "\u00a0") for metal in metals]
    head += [
        f"{element_label(metal).rpartition(' (')[0]} contained ({contained[metal][0]} metal)"
        for metal in metals
    ]
    names = rows["proposed_class"].astype(str).str.lower()
    unclassified = float(rows.loc[names == "unclassified", "dry_tonnes"].sum()) > 0
    body, strong = [], []
    for number, row in enumerate(rows.to_dict("records")):
        inferred = is_inferred(row["proposed_class"])
        figures = data.subject.inferred_figures if inferred else data.subject.significant_figures
        name = class_name(row["proposed_class"])
        if inferred:
            name = f"{name} (approximately)"
        if name.lower() == "all":
            name = "All blocks, classified or not" if unclassified else "All classes"
            strong.append(number)
        cells = [str(row[item]) for item in first] + [name]
        cells.append(significant_text(float(row["dry_tonnes"]) / scale, figures))
        cells.append(significant_text(float(row.get("wet_tonnes", float("nan"))) / scale, figures))
        cells += [significant_text(float(row[metal]), figures) for metal in (*equivalent, *metals)]
        supported = metal_figures(figures, figures)
        for metal in metals:
            mass = contained_metal(row["dry_tonnes"], row[metal], metal) / contained[metal][1]
            cells.append(significant_text(mass, supported))
        body.append(tuple(cells))
    numeric = tuple([False] * (len(first) + 1) + [True] * (len(head) - len(first) - 1))
    return Table(title, tuple(head), tuple(body), numeric, ROUNDING_NOTE, tuple(strong), key="tonnes")


def class_rows(rows: pd.DataFrame) -> pd.DataFrame:
    """The rows without the sum over classes."""
    return rows[rows["proposed_class"].astype(str).str.lower() != "all"]


def screens_table(data: ReportData) -> pd.DataFrame | None:
    """The waterfall with contained metal in columns that say so: ``cu_contained_t``."""
    frame = data.body.waterfall
    if frame is None:
        return None
    return frame.rename(columns={m: f"{m.rpartition('_')[0]}_contained_t" for m in data.subject.metals})
