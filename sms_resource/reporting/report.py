"""From the data of a run to the report on disk."""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path

from sms_resource.reporting.data import ReportData
from sms_resource.reporting.drawing import Store, draw_all
from sms_resource.reporting.elements import Document
from sms_resource.reporting.html import write_html
from sms_resource.reporting.sections import build_document


@dataclass(frozen=True)
class Report:
    """A finished report: the document, the PNG of each figure by key, and the paths written."""

    document: Document
    pictures: dict[str, bytes]
    paths: list[Path]


def draw_report(data: ReportData, folder: Path, store: Store | None = None, code: str = "") -> Report:
    """Draw and build, and write ``figures/`` under ``folder`` but no page; see :func:`make_report`."""
    folder = Path(folder)
    folder.mkdir(parents=True, exist_ok=True)
    drawn, absent = draw_all(data, folder / "figures", store, code)
    pictures = {item.drawing.key: item.picture for item in drawn}
    document = build_document(data, [item.drawing for item in drawn], absent)
    return Report(document, pictures, [path for item in drawn for path in item.paths(folder / "figures")])


def make_report(data: ReportData, folder: Path, store: Store | None = None, code: str = "") -> Report:
    """Draw, build and write ``report.html`` and ``figures/`` (PNG, SVG, and ``data/*.csv``) under ``folder``.

    Figures whose data are what they were in a run before are taken from ``store``, where the code named by ``code``
    drew them.
    """
    made = draw_report(data, folder, store, code)
    page = write_html(made.document, made.pictures, Path(folder) / "report.html")
    return replace(made, paths=[page, *made.paths])


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
