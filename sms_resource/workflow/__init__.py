"""The stages of a study in order: the corridor that joins the rooms."""

from sms_resource.workflow.export import export_results
from sms_resource.workflow.folder import NotResultsError, ResultFolder
from sms_resource.workflow.new import new_study
from sms_resource.workflow.reproduce import Verification, verify_results
from sms_resource.workflow.run import Result, check_study, run_study
from sms_resource.workflow.view import view_results

__all__ = [
    "NotResultsError",
    "Result",
    "ResultFolder",
    "Verification",
    "check_study",
    "export_results",
    "new_study",
    "run_study",
    "verify_results",
    "view_results",
]
