"""Draft of the checklist in the form of Table 1, "if not, why not".

Each line is answered from the study with its figure, not applicable with a reason, or left for the Competent
Person with what is needed. Headings follow the three sections that reporting codes of the CRIRSCO family share.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from sms_resource.reporting import checklist_estimate, checklist_samples
from sms_resource.reporting.data import ReportData
from sms_resource.reporting.elements import plain_words
from sms_resource.reporting.markdown import escape_markdown, markdown_table

Status = Literal["answered", "not applicable", "for the Competent Person"]
Answer = tuple[Status, str]
PERSON: Status = "for the Competent Person"


@dataclass(frozen=True)
class Line:
    """One line of the checklist."""

    section: str
    criterion: str
    status: Status
    text: str


def _left(what: str) -> Callable[[ReportData], Answer]:
    """A line that no study file can answer; ``what`` says what is needed."""
    return lambda data: (PERSON, f"Needed: {what}")


def _drilled(answer: Callable[[ReportData], Answer]) -> Callable[[ReportData], Answer]:
    """A line on holes: not applicable where there are none."""

    def asked(data: ReportData) -> Answer:
        collars = data.evidence.collars
        if collars is None or not len(collars):
            return "not applicable", "The study holds no drill holes."
        return answer(data)

    return asked


SECTIONS: tuple[tuple[str, tuple[tuple[str, Callable[[ReportData], Answer]], ...]], ...] = (
    (
        "Sampling techniques and data",
        (
            ("Sampling techniques", checklist_samples.sampling),
            ("Drilling techniques", _drilled(_left("rig, core diameter, barrel, fluid, and how the rig stands."))),
            ("Drill sample recovery", _drilled(checklist_samples.recovery)),
            ("Logging", checklist_samples.logging),
            ("Sub-sampling and sample preparation", checklist_samples.preparation),
            ("Quality of assay data and laboratory tests", checklist_samples.quality),
            ("Verification of sampling and assaying", checklist_samples.verification),
            ("Location of data points", checklist_samples.location),
            ("Data spacing and distribution", checklist_samples.spacing),
            ("Orientation of data in relation to geological structure", _drilled(checklist_samples.orientation)),
            ("Sample security", _left("chain of custody from the seafloor to the laboratory.")),
            ("Audits or reviews", _left("audits or reviews of the samples, or that there were none.")),
        ),
    ),
    (
        "Exploration results",
        (
            ("Tenure and status", checklist_samples.tenure),
            ("Exploration by other parties", _left("acknowledgement and appraisal of work by others.")),
            ("Geology", _left("deposit type, setting and style of mineralisation.")),
            ("Drill hole information", _drilled(checklist_samples.holes)),
            ("Data aggregation methods", checklist_samples.aggregation),
            ("Relationship between widths and intercept lengths", _drilled(checklist_samples.widths)),
            ("Diagrams", checklist_samples.diagrams),
            ("Balanced reporting", checklist_samples.balance),
            ("Other substantive exploration data", checklist_samples.other),
            ("Further work", _left("planned work, and diagrams of where extensions may lie.")),
        ),
    ),
    (
        "Estimation and reporting of mineral resources",
        (
            ("Database integrity", checklist_estimate.database),
            ("Site visits", checklist_estimate.visits),
            ("Geological interpretation", checklist_estimate.interpretation),
            ("Dimensions", checklist_estimate.dimensions),
            ("Estimation and modelling techniques", checklist_estimate.estimation),
            ("Moisture", checklist_estimate.moisture),
            ("Cut-off parameters", checklist_estimate.cutoff),
            ("Mining factors or assumptions", checklist_estimate.mining),
            ("Metallurgical factors or assumptions", checklist_estimate.metallurgy),
            ("Environmental factors or assumptions", checklist_estimate.environment),
            ("Bulk density", checklist_estimate.density),
            ("Classification", checklist_estimate.classification),
            ("Audits or reviews", _left("audits or reviews of the estimate, or that there were none.")),
            ("Discussion of relative accuracy and confidence", checklist_estimate.confidence),
        ),
    ),
)  # fmt: skip


def checklist(data: ReportData) -> list[Line]:
    """All lines in their order."""
    lines = []
    for section, criteria in SECTIONS:
        for criterion, answer in criteria:
            status, text = answer(data)
            lines.append(Line(section, criterion, status, plain_words(text)))
    return lines


def checklist_counts(lines: list[Line]) -> str:
    """How many lines are answered, not applicable, or left."""
    said = ("answered", "not applicable", PERSON)
    return ", ".join(f"{sum(line.status == status for line in lines)} {status}" for status in said)


def introduction(data: ReportData, lines: list[Line]) -> str:
    """The sentence above the tables."""
    return (
        f'Draft for the Competent Person, in the form of Table 1, "if not, why not" '
        f"({data.subject.reporting_standard or 'reporting standard not stated'}). {len(lines)} lines:"
        f" {checklist_counts(lines)}. "
        f"Label of the tonnes: {data.tally_label}."
    )


def write_checklist(data: ReportData, folder: Path) -> list[Path]:
    """Write ``checklist.md`` and ``checklist.docx``; return both paths."""
    from sms_resource.reporting.word import write_word

    lines = checklist(data)
    title = f"Checklist: {plain_words(data.subject.title)}"
    text = [f"# {escape_markdown(title)}", "", escape_markdown(introduction(data, lines)), ""]
    tables = []
    for section, _ in SECTIONS:
        rows = [(line.criterion, line.status, line.text) for line in lines if line.section == section]
        columns = ("Criterion", "Status", "Answer")
        text += [f"## {section}", "", *markdown_table(columns, rows), ""]
        tables.append((section, columns, rows))
    path = folder / "checklist.md"
    path.write_text("\n".join(text), encoding="utf-8", newline="\n")
    return [path, write_word(folder / "checklist.docx", title, introduction(data, lines), tables)]
