"""The pack that a Competent Person takes away: pages, workbook, checklist, method statement."""

from __future__ import annotations

from pathlib import Path

from sms_resource.reporting.checklist import write_checklist
from sms_resource.reporting.data import ReportData
from sms_resource.reporting.method import write_method
from sms_resource.reporting.pdf import write_pdf
from sms_resource.reporting.report import Report, make_report
from sms_resource.reporting.workbook import write_workbook


def write_pack(data: ReportData, folder: Path, report: Report | None = None) -> list[Path]:
    """Write ``report.pdf``, ``workbook.xlsx``, ``checklist.md``, ``checklist.docx`` and ``method.md``.

    Parameters
    ----------
    data : ReportData
    folder : Path
        Output folder, made where it does not exist.
    report : Report, optional
        A report already made of the same data, so that nothing is drawn twice; made (and written) if not given.

    Returns
    -------
    list of Path
        The files of the pack, without those of the report.
    """
    folder = Path(folder)
    folder.mkdir(parents=True, exist_ok=True)
    made = report if report is not None else make_report(data, folder)
    forms = [write_workbook(data, folder / "workbook.xlsx"), *write_texts(data, folder)]
    return [write_pdf(made.document, made.pictures, folder / "report.pdf"), *forms]


def write_texts(data: ReportData, folder: Path) -> list[Path]:
    """Write what of the pack is text: checklist and method statement; return their paths."""
    return [*write_checklist(data, folder), write_method(data, folder / "method.md")]
