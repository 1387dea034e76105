"""The stages of a study in order: the corridor that joins the rooms."""

from sms_resource.workflow.folder import NotResultsError, ResultFolder
from sms_resource.workflow.run import Result, check_study, run_study

__all__ = ["NotResultsError", "Result", "ResultFolder", "check_study", "run_study"]
