"""The numbers of a run as a workbook: unrounded, with units, frozen headers, and texts that stay texts."""

from __future__ import annotations

import datetime
import math
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pandas as pd

from sms_resource.reporting.cautions import all_cautions
from sms_resource.reporting.data import ReportData, cutoff_head
from sms_resource.reporting.elements import cell_text, column_label, plain_words
from sms_resource.reporting.sections_estimate import beside_labels, value_labels
from sms_resource.reporting.sections_record import ledger_frame
from sms_resource.reporting.tonnage import ROUNDING_NOTE, rows_at_cutoff, screens_table
from sms_resource.units import column_element

if TYPE_CHECKING:
    from xlsxwriter import Workbook
    from xlsxwriter.worksheet import Worksheet

MOST_ROWS = 1_000_000  # a sheet ends at 1 048 576
LONGEST_TEXT = 32_000  # a cell ends at 32 767 characters
_FORMATS = (
    ("tonnes", "#,##0"),
    ("_oz", "#,##0"),
    ("_kg", "#,##0.0"),
    ("_t", "#,##0.0"),
    ("_m3", "#,##0.0"),
    ("easting", "0.00"),
    ("northing", "0.00"),
    ("elevation", "0.00"),
    ("_tpm3", "0.000"),
    ("p_value", "0.0000"),
    ("_m", "0.00"),
)


@dataclass(frozen=True)
class Content:
    """A workbook before it is written.

    Attributes
    ----------
    title : str
    basis : list of (name, text)
        Rows of the first sheet.
    sheets : list of (name, table, note)
    heads : dict
        Heads of columns that are not named by their column alone, by sheet and column.
    """

    title: str
    basis: list[tuple[str, str]]
    sheets: list[tuple[str, pd.DataFrame | None, str]]
    heads: dict[str, dict[str, str]]


def number_format(column: str, values: pd.Series) -> str:
    """Excel format of a numeric column, by its name, else by what it holds."""
    lead = "_".join(str(column).split("_")[:2])
    if "tonnes" not in str(column) and column_element(lead):
        return "0.0" if lead.endswith("_ppm") else "0.000"
    for part, look in _FORMATS:
        if (part in str(column)) if part == "tonnes" else str(column).endswith(part):
            return look
    known = values.dropna()
    return "0" if len(known) and (known == known.round()).all() else "0.0000"


class _Book:
    """A workbook under way, with its formats."""

    def __init__(self, path: Path, title: str) -> None:
        import xlsxwriter

        options = {"strings_to_formulas": False, "strings_to_urls": False, "strings_to_numbers": False}
        self.book: Workbook = xlsxwriter.Workbook(str(path), options)
        # No clock inside the file: the same study gives the same bytes.
        self.book.set_properties({"title": title, "created": datetime.datetime(2000, 1, 1)})
        self.title = self.book.add_format({"bold": True, "font_size": 13})
        self.quiet = self.book.add_format({"font_color": "#575e66"})
        self.head = self.book.add_format(
            {"bold": True, "text_wrap": True, "valign": "bottom", "bottom": 1, "bg_color": "#f4f3ef"}
        )
        self.text = self.book.add_format({"valign": "top"})
        self.wrapped = self.book.add_format({"valign": "top", "text_wrap": True})
        self._numbers: dict[str, Any] = {}

    def number(self, look: str) -> Any:
        """Format of numbers, made once."""
        if look not in self._numbers:
            self._numbers[look] = self.book.add_format({"num_format": look, "valign": "top"})
        return self._numbers[look]

    def sheet(
        self, name: str, frame: pd.DataFrame | None, note: str, labels: Mapping[str, str] | None = None
    ) -> None:
        """One table on a sheet of its own, its heads by ``labels`` where named there; nothing where it holds no rows."""
        if frame is None or not len(frame):
            return
        frame = frame.drop(columns=[c for c in frame.columns if c in ("source_row", "seconds", "time_s")])
        sheet: Worksheet = self.book.add_worksheet(name)
        sheet.write_string(
            0, 0, note if len(frame) <= MOST_ROWS else f"{note} The first {MOST_ROWS} rows.", self.quiet
        )
        frame = frame.head(MOST_ROWS)
        for number, column in enumerate(frame.columns):
            sheet.write_string(
                1, number, (labels or {}).get(str(column)) or column_label(str(column)), self.head
            )
            self._column(sheet, number, str(column), frame[column])
        sheet.freeze_panes(2, 1)
        sheet.autofilter(1, 0, len(frame) + 1, len(frame.columns) - 1)
        sheet.set_landscape()
        sheet.fit_to_pages(1, 0)
        sheet.repeat_rows(1)

    def _column(self, sheet: Worksheet, number: int, name: str, values: pd.Series) -> None:
        if pd.api.types.is_numeric_dtype(values) and not pd.api.types.is_bool_dtype(values):
            look = self.number(number_format(name, values))
            for row, value in enumerate(values.to_numpy(dtype=float, na_value=float("nan"))):
                if math.isfinite(value):
                    sheet.write_number(row + 2, number, value, look)
            sheet.set_column(number, number, 12)
            return
        texts = [
            "" if _missing(value) else plain_words(cell_text(value, 12))[:LONGEST_TEXT] for value in values
        ]
        longest = max((len(text) for text in texts), default=8)
        look = self.wrapped if longest > 40 else self.text
        for row, text in enumerate(texts):
            if text:
                sheet.write_string(row + 2, number, text, look)
        sheet.set_column(number, number, min(60, max(10, longest + 2)))


def _missing(value: Any) -> bool:
    return value is None or (isinstance(value, float) and math.isnan(value)) or value is pd.NA


def _basis(data: ReportData) -> list[tuple[str, str]]:
    subject = data.subject
    return [
        ("Label of the tonnes", data.tally_label),
        ("Cut-off", f"{data.cutoff_text}; basis: {(subject.cutoff or {}).get('basis') or 'not stated'}"),
        ("Effective date", subject.effective_date or "not stated"),
        (
            "Coordinates",
            f"{subject.crs or 'not stated'}; vertical datum: {subject.vertical_datum or 'not stated'}",
        ),
        ("Standard", subject.reporting_standard or "not stated"),
        ("Masses", "Every tonnage says dry or wet. Grades are on dry mass; metal is dry tonnes times grade."),
        ("Rounding", "Numbers on these sheets are not rounded; the report rounds them to their confidence."),
        ("Status", "Draft for a Competent Person. Classes are proposed."),
        ("Note", ROUNDING_NOTE),
    ]


def workbook_sheets(data: ReportData) -> list[tuple[str, pd.DataFrame | None, str]]:
    """Name, table and note of every sheet in its order."""
    label = data.tally_label
    e, s, v = data.evidence, data.estimation, data.value
    cautions = pd.DataFrame(
        [{"caution": c.title, "text": c.text, "figures": c.figures} for c in all_cautions(data)]
    )
    return [
        ("Estimate", rows_at_cutoff(data), f"At {data.cutoff_text}, unrounded; {label}."),
        ("Grade-tonnage", v.grade_tonnage, f"Above each cut-off, unrounded; {label}."),
        (
            "Mineable shape",
            v.mineable_shape,
            f"Connected shapes with their must-take material, unrounded; {label}.",
        ),
        (
            "Change of support",
            v.beside_support,
            f"Blocks beside the discrete Gaussian model, all classes; {label}.",
        ),
        (
            "By value",
            v.by_value,
            "The same dry tonnes chosen by grade and by value: mean net value per dry tonne.",
        ),
        ("Classes", data.classes.before_after, f"By criteria, after rules, smoothed and final; {label}."),
        ("Scenarios", v.scenarios, f"One row a scenario; {label}."),
        ("Tornado", v.tornado, f"Low, base and high of each decision; {label}."),
        ("Screens", screens_table(data), f"What each screen takes; {label}."),
        ("Geometry", data.body.geometry_uncertainty, "Base, seafloor and outline moved."),
        ("Ledger", ledger_frame(data), "Every decision of the study."),
        ("Checks", s.checks, "Checks of the estimate and their verdicts."),
        ("Means", s.means, "Composite, declustered and block means."),
        ("Leave one hole out", s.leave_one_out_summary, "Each composite estimated without its own hole."),
        ("Swaths", s.swaths, "Means in slices along each axis."),
        ("Composites", e.composites, "Composites as estimated from."),
        ("Density", e.density_by_domain, "Densities by domain."),
        ("Lost core", e.lost_core, "Treatments of lost core."),
        ("Cautions", cautions, "Cautions with the figures that set them off."),
        ("Findings", data.record.findings.to_frame(), "What the checks of the data found."),
    ]


def workbook_heads(data: ReportData) -> dict[str, dict[str, str]]:
    """Heads of the sheets whose columns carry the unit of the cut-off or of value, by sheet and column."""
    cut = {
        "cutoff": f"Cut-off, {cutoff_head(data)}", "equivalent": f"Mean {cutoff_head(data, 'equivalent')}",
    }  # fmt: skip
    several = data.value.grade_tonnage is not None and (
        "cutoff_variable" in data.value.grade_tonnage
        and data.value.grade_tonnage["cutoff_variable"].nunique() > 1
    )
    return {
        "Estimate": cut,
        "Grade-tonnage": {"equivalent": cut["equivalent"]} if several else cut,
        "Change of support": beside_labels(data),
        "By value": value_labels(data),
    }


def workbook_content(data: ReportData) -> Content:
    """What the workbook says, as plain tables."""
    sheets = [sheet for sheet in workbook_sheets(data) if sheet[1] is not None and len(sheet[1])]
    return Content(plain_words(data.subject.title), _basis(data), sheets, workbook_heads(data))


def save_workbook(content: Content, path: Path) -> Path:
    """Write a workbook and return its path."""
    book = _Book(path, content.title[:200])
    first = book.book.add_worksheet("Read me")
    first.set_column(0, 0, 22)
    first.set_column(1, 1, 100)
    first.write_string(0, 0, content.title, book.title)
    for row, (name, text) in enumerate(content.basis, 2):
        first.write_string(row, 0, name, book.text)
        first.write_string(row, 1, plain_words(text), book.wrapped)
    for name, frame, note in content.sheets:
        book.sheet(name, frame, note, content.heads.get(name))
    book.book.close()
    return path


def write_workbook(data: ReportData, path: Path) -> Path:
    """Write the workbook and return its path; sheets without rows are left out."""
    return save_workbook(workbook_content(data), path)
