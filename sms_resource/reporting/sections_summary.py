"""The first screen: the estimate and its basis."""

from __future__ import annotations

from collections.abc import Sequence

from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.elements import (
    Block,
    Caution,
    Facts,
    Paragraph,
    cell_text,
    number_text,
    plain_words,
)
from sms_resource.reporting.rounding import significant_text
from sms_resource.reporting.tonnage import rows_at_cutoff, tonnage_table


def summary(data: ReportData, cautions: Sequence[Caution]) -> list[Block]:
    """Table of tonnes, label, basis, and the cautions that this study sets off."""
    rows = rows_at_cutoff(data)
    blocks: list[Block] = []
    label = data.tally_label
    if len(rows):
        blocks.append(tonnage_table(data, rows, f"{label[0].upper()}{label[1:]} at {data.cutoff_text}"))
    else:
        blocks.append(Paragraph("No table of tonnes came with this run.", "lead"))
    if not data.prospects_judged:
        blocks.append(
            Paragraph(
                "Block-model tally: the study does not say who judged the reasonable prospects for eventual"
                " economic extraction, and on what. It is not a statement of a resource.",
                "note",
            )
        )
    blocks.append(Facts(tuple(basis(data))))
    triggered = list(dict.fromkeys(c.title for c in cautions if not c.always))
    blocks.append(
        Paragraph(
            f"Read with the {len(cautions)} cautions of this report; set off by this study:"
            f" {'; '.join(triggered) or 'none'}.",
            "note",
        )
    )
    return blocks


def basis(data: ReportData) -> list[tuple[str, str]]:
    """What the estimate stands on, as labels and values."""
    subject, evidence = data.subject, data.evidence
    cutoff = subject.cutoff or {}
    pairs = [
        ("Effective date", subject.effective_date or "not stated"),
        ("Prepared by", subject.author or "not stated"),
        ("Competent Person", subject.competent_person or "not named; this draft is for one to judge"),
        ("Reporting standard", subject.reporting_standard or "not stated"),
    ]
    pairs.append(
        (
            "Cut-off",
            f"{data.cutoff_text}; basis: {cutoff.get('basis') or 'not stated'}"
            + (f"; {cutoff['currency']}" if cutoff.get("basis") and cutoff.get("currency") else "")
            + (f", {cutoff['date']}" if cutoff.get("date") else ""),
        )
    )
    if data.prospects_judged and subject.prospects:
        pairs.append(
            (
                "Reasonable prospects",
                f"judged by {subject.prospects['judged_by']} on: {subject.prospects['basis']}",
            )
        )
    else:
        pairs.append(("Reasonable prospects", "not judged"))
    surface = len(evidence.surface) if evidence.surface is not None else 0
    holes = len(evidence.collars) if evidence.collars is not None else 0
    count = len(evidence.composites) if evidence.composites is not None else 0
    pairs.append(
        (
            "Samples",
            (
                f"{holes} holes, {count} composites; "
                + (
                    f"{surface} surface samples ({evidence.surface_use.rstrip('. ') or 'kept out of the estimate'})"
                    if surface
                    else "no surface samples"
                )
            ),
        )
    )
    if evidence.density_by_domain is not None and has(evidence.density_by_domain, "domain", "dry_base"):
        pairs.append(
            (
                "Density (dry; wet)",
                "; ".join(
                    f"{r['domain']} {number_text(r['dry_base'])};"
                    f" {number_text(r.get('wet_base', float('nan')))} t/m³"
                    for r in evidence.density_by_domain.to_dict("records")
                ),
            )
        )
    if data.body.volumes:
        volume = data.body.volumes
        whole = float(volume.get("volume_m3", float("nan")))
        beyond = float(volume.get("sideways_m3", 0.0)) + float(volume.get("downwards_m3", 0.0))
        pairs.append(
            (
                "Body",
                f"{significant_text(whole, 3)} m³ in place, {100 * beyond / whole:.0f} % of it extrapolated;"
                f" {data.body.method.rstrip('. ')}".rstrip("; "),
            )
        )
    if data.estimation.settings:
        pairs.append(
            (
                "Method",
                "; ".join(
                    f"{k.lower()}: {cell_text(v)}" for k, v in list(data.estimation.settings.items())[:3]
                ),
            )
        )
    pairs.append(("Lost core", f"{evidence.lost_core_default.replace('_', ' ')} (see the bracket)"))
    pairs.append(
        (
            "Coordinates",
            f"{subject.crs or 'not stated'}; vertical datum: {subject.vertical_datum or 'not stated'}",
        )
    )
    return [(name, plain_words(text)) for name, text in pairs]
