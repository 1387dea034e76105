"""The sections of the report in their order."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

from sms_resource.reporting import (
    sections_estimate,
    sections_evidence,
    sections_record,
    sections_samples,
)
from sms_resource.reporting.cautions import all_cautions
from sms_resource.reporting.data import ReportData
from sms_resource.reporting.elements import (
    Block,
    Caution,
    Document,
    Paragraph,
    Picture,
    Section,
    Slot,
    drop_empty_headings,
    plain_words,
)
from sms_resource.reporting.sections_summary import summary
from sms_resource.reporting.style import Drawing
from sms_resource.reporting.words import SECTION_INTRODUCTIONS

TITLES: dict[str, str] = {
    "decisions": "The decisions behind it",
    "evidence": "The evidence",
    "body": "The body",
    "continuity": "Continuity",
    "estimate": "The estimate and its checks",
    "classes": "Proposed classes",
    "tonnes": "Tonnes and grade",
    "scenarios": "Scenarios and value",
    "ledger": "Decision ledger",
    "cautions": "Cautions",
    "findings": "Findings",
    "truth": "The estimate against the truth",
    "method": "Method statement",
    "sources": "Sources",
    "manifest": "Manifest",
}


def build_document(data: ReportData, drawings: Sequence[Drawing], absent: Sequence[str] = ()) -> Document:
    """Put tables, figures and words together; sections without anything to say are left out."""
    cautions = all_cautions(data)
    pictures: dict[str, list[Drawing]] = {}
    for drawing in drawings:
        pictures.setdefault(drawing.section, []).append(drawing)
    makers: dict[str, Callable[[ReportData], list[Block]]] = {
        "decisions": sections_record.decisions,
        "evidence": sections_samples.evidence,
        "body": sections_evidence.body,
        "continuity": sections_evidence.continuity,
        "estimate": sections_estimate.estimate,
        "classes": sections_estimate.classes,
        "tonnes": sections_estimate.tonnes,
        "scenarios": sections_estimate.scenarios,
        "ledger": sections_record.ledger,
        "findings": sections_record.findings,
        "truth": sections_record.truth,
        "method": sections_record.method,
        "sources": sections_record.sources,
        "manifest": sections_record.manifest,
    }
    sections = []
    for key, title in TITLES.items():
        blocks: list[Block] = _cautions(cautions) if key == "cautions" else makers[key](data)
        blocks = _place_pictures(blocks, pictures.get(key, []))
        if key == "manifest" and absent:
            blocks.append(
                Paragraph(
                    f"Figures without data in this study, and so not drawn: {', '.join(absent)}.", "note"
                )
            )
        if blocks:
            sections.append(Section(key, title, (Paragraph(SECTION_INTRODUCTIONS[key], "lead"), *blocks)))
    subject = data.subject
    label = data.tally_label
    subtitle = " · ".join(
        part
        for part in (
            subject.deposit,
            f"effective {subject.effective_date}" if subject.effective_date else "",
            subject.crs,
        )
        if part
    )
    return Document(
        plain_words(subject.title),
        plain_words(subtitle),
        label[0].upper() + label[1:],
        tuple(summary(data, cautions)),
        tuple(sections),
    )


def _place_pictures(blocks: list[Block], drawings: list[Drawing]) -> list[Block]:
    """Put each figure after the heading that names it (a ``Heading`` ending in its keys), others at the end."""
    left = {drawing.key: drawing for drawing in drawings}
    placed: list[Block] = []
    for block in blocks:
        if isinstance(block, Slot):
            for key in [k for k in left if any(_wanted(k, want) for want in block.keys)]:
                placed.append(Picture(left.pop(key)))
        else:
            placed.append(block)
    return drop_empty_headings(placed + [Picture(drawing) for drawing in left.values()])


def _wanted(key: str, want: str) -> bool:
    return key.startswith(want[:-1]) if want.endswith("*") else key == want


def _cautions(cautions: Sequence[Caution]) -> list[Block]:
    return [replace(c, text=plain_words(c.text), figures=plain_words(c.figures)) for c in cautions]
