"""What only a late stage would refuse, told before anything is run."""

from __future__ import annotations

from sms_resource.findings import Findings
from sms_resource.study import Study, StudyError


def scenario_faults(study: Study) -> Findings:
    """Scenarios of the study that cannot be run."""
    from sms_resource.workflow.scenarios import scenario_list

    try:
        scenario_list(study)
    except StudyError as error:
        return error.findings
    return Findings()


def override_faults(study: Study) -> Findings:
    """Polygons that set a class which the study's criteria do not allow, with the file and row of each.

    What is wrong with the layer itself the stage load tells.
    """
    from sms_resource.loaders.boundaries import load_overrides
    from sms_resource.workflow.load import layer_source

    findings = Findings()
    layer = study.config.data.class_overrides
    if layer is None or study.config.classes.allow_measured:
        return findings
    frame, _ = load_overrides(layer_source(study, layer, study.config.study.crs))
    if frame is None:
        return findings
    for row in frame[frame["class"].str.lower() == "measured"]["source_row"]:
        findings.error(
            "class-override-refused",
            "the polygon sets the class Measured, which the study's criteria do not name",
            "Set classes.allow_measured = true with the criteria that you own, or set another class.",
            file=layer.file, row=int(row), column=layer.columns.get("class", "class"),
        )  # fmt: skip
    return findings
