"""Estimate mineral resources of small, high-grade seafloor massive sulphide deposits.

Public names are loaded when they are first used, so that importing the package costs little.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

__version__ = "0.1.0"

if TYPE_CHECKING:
    from sms_resource.study import Study, StudyError, load_study
    from sms_resource.workflow import Result, run_study

_HOME = {
    "Study": "sms_resource.study",
    "StudyError": "sms_resource.study",
    "load_study": "sms_resource.study",
    "Result": "sms_resource.workflow",
    "run_study": "sms_resource.workflow",
}
__all__ = ["Result", "Study", "StudyError", "__version__", "load_study", "run_study"]


def __getattr__(name: str) -> Any:
    """Load a public name from its home when it is first asked for (PEP 562)."""
    if name in _HOME:
        import importlib

        return getattr(importlib.import_module(_HOME[name]), name)
    raise AttributeError(f"module 'sms_resource' has no attribute {name!r}")
