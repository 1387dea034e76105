"""Reports: figures, cautions, the web page, and the pack that a Competent Person takes away.

Takes only frames, mappings and small types (``ReportData``), so that it serves a notebook as well as a run. Names are
imported when they are first used: what sets the pages needs none of them.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
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
_HOME = {"write_pack": "pack", "Report": "report", "make_report": "report", "write_report": "report"}


def __getattr__(name: str) -> Any:
    """Load a public name from its home when it is first asked for (PEP 562)."""
    if name not in __all__:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f"{__name__}.{_HOME.get(name, 'data')}"), name)
