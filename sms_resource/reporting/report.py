"""From the data of a run to the report on disk."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from sms_resource.reporting.data import ReportData
from sms_resource.reporting.elements import Document
from sms_resource.reporting.figures import all_drawings
from sms_resource.reporting.html import write_html
from sms_resource.reporting.sections import build_document
from sms_resource.reporting.style import borrowed_settings, save_drawing


@dataclass(frozen=True)
class Report:
    """A finished report: the document, the PNG of each figure by key, and the paths written."""

    document: Document
    pictures: dict[str, bytes]
    paths: list[Path]


def make_report(data: ReportData, folder: Path) -> Report:
    """Draw, build and write ``report.html`` and ``figures/`` (PNG, SVG, and ``data/*.csv``) under ``folder``."""
    folder = Path(folder)
    folder.mkdir(parents=True, exist_ok=True)
    drawings, absent = all_drawings(data)
    pictures: dict[str, bytes] = {}
    paths: list[Path] = []
    with borrowed_settings():
        for drawing in drawings:
            pictures[drawing.key], written = save_drawing(drawing, folder / "figures")
            paths += written
    document = build_document(data, drawings, absent)
    paths.insert(0, write_html(document, pictures, folder / "report.html"))
    return Report(document, pictures, paths)


def write_report(data: ReportData, folder: Path) -> list[Path]:
    """Write the report; return the paths of ``report.html`` and of every figure file.

    Parameters
    ----------
    data : ReportData
        Whatever of it is there is shown; what is absent is named at the end of the report.
    folder : Path
        Output folder; made where it does not exist.
    """
    return make_report(data, folder).paths
