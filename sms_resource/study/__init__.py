"""The study file: typed, with defaults, checked."""

from sms_resource.study.decisions import Decision, decisions
from sms_resource.study.file import Study, StudyError, load_study
from sms_resource.study.schema import StudyConfig

__all__ = ["Decision", "Study", "StudyConfig", "StudyError", "decisions", "load_study"]
