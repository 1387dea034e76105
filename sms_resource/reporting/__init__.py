"""Reports: figures, cautions, the web page, and the pack that a Competent Person takes away.

Takes only frames, mappings and small types (``ReportData``), so that it serves a notebook as well as a run.
"""

from sms_resource.reporting.data import (
    BodyEvidence,
    Classes,
    Estimation,
    Evidence,
    LaboratoryEvidence,
    ReportData,
    RunRecord,
    Subject,
    ValueEvidence,
    VariogramRecord,
)
from sms_resource.reporting.pack import write_pack
from sms_resource.reporting.report import Report, make_report, write_report

__all__ = [
    "BodyEvidence",
    "Classes",
    "Estimation",
    "Evidence",
    "LaboratoryEvidence",
    "Report",
    "ReportData",
    "RunRecord",
    "Subject",
    "ValueEvidence",
    "VariogramRecord",
    "make_report",
    "write_pack",
    "write_report",
]
