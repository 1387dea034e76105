"""What a study without drilling leaves in its folder: ranges with their caution, and no table of tonnes."""

from __future__ import annotations

import time
from pathlib import Path
from typing import Any

import pandas as pd

from sms_resource.classification.exploration import CAUTION
from sms_resource.findings import Findings
from sms_resource.reporting.elements import Bullets, Caution, Document, Facts, Paragraph, Section, Table
from sms_resource.reporting.html import write_html
from sms_resource.reporting.rounding import NO_VALUE, mass_text, significant_text
from sms_resource.study import Study
from sms_resource.units import element_label
from sms_resource.workflow.manifest import write_manifest
from sms_resource.workflow.publish import ledger_table, write_json
from sms_resource.workflow.stage import Outcome, StageRecord
from sms_resource.workflow.summary import Summary

LABEL = "Exploration target in ranges; no estimate of a resource"
SECTIONS = ("study.", "data.", "metals.", "assays.", "density.assigned", "exploration.", "checks.")
_NAMES = {
    "volume_m3": "Volume (m³)",
    "thickness_m": "Upright thickness (m)",
    "dry_density_tpm3": "Dry density (t/m³)",
    "dry_tonnes": "Dry tonnes",
}


def write_target(folder: Path, study: Study, outcome: Outcome, inputs: dict[str, dict[str, Any]]) -> Summary:
    """Write exploration_target.csv, findings, decisions, the report and the manifest; return what is printed."""
    begun = time.perf_counter()
    table: pd.DataFrame = outcome.done["target"]
    table.assign(caution=CAUTION).to_csv(folder / "exploration_target.csv", index=False)
    write_json(folder / "findings.json", outcome.findings.to_records())
    ledger = ledger_table(study)
    ledger = ledger[ledger["key"].str.startswith(SECTIONS)].reset_index(drop=True)
    ledger.to_csv(folder / "decisions.csv", index=False)
    shown = Summary(
        title=f"{study.config.study.name}: exploration target, no estimate",
        columns=["Quantity", "Low", "High"],
        rows=[list(row[:3]) for row in range_rows(table)],
        caption=f"Draft for a Competent Person. {CAUTION}",
    )
    write_html(document(study, table, outcome.findings, ledger, inputs), {}, folder / "report.html")
    record = StageRecord("report", time.perf_counter() - begun, "a short page", False, "")
    outcome.records.append(record)
    facts = {"kind": "exploration target", "summary": shown.record(), "scenarios": False}
    write_manifest(folder, study, inputs, outcome.records, facts)
    return shown


def range_rows(table: pd.DataFrame) -> list[tuple[str, str, str, str]]:
    """Quantity, low, high and basis as texts of two figures; a low end that is left to a person says so."""
    rows = []
    for row in table.to_dict("records"):
        name = str(row["quantity"])
        low, high = (
            mass_text(row[end], "dry") if name == "dry_tonnes" else significant_text(row[end], 2)
            for end in ("low", "high")
        )
        label = _NAMES.get(name) or element_label(name)
        rows.append((label, "left to the CP" if low == NO_VALUE else low, high, str(row["basis"])))
    return rows


def document(
    study: Study,
    table: pd.DataFrame,
    findings: Findings,
    ledger: pd.DataFrame,
    inputs: dict[str, dict[str, Any]],
) -> Document:
    """A short page: what it is not, the ranges with their caution, what they rest on, what was found."""
    about = study.config.study
    ranges = Table(
        "Exploration target: ranges, rounded to two figures", ("Quantity", "Low", "High", "Basis"),
        tuple(range_rows(table)), (False, True, True, False), note=CAUTION,
    )  # fmt: skip
    caution = Caution(
        "exploration-target", "Exploration target", CAUTION, "No hole was drilled.", always=True
    )
    richer = Caution(
        "surface-alone", "Surface samples alone",
        "Surface samples are taken where sulphide stands out, and are as a rule richer than the body below. No ratio is "
        "assumed here: a low end stands only where the study states what the samples are divided by.",
        f"Stated divisors: {divisors(study)}.",
    )  # fmt: skip
    chosen = tuple(
        f"{row['key']} = {row['value']}" + (f": {row['reason']} ({row['by']})" if row["reason"] else "")
        for row in ledger[ledger["origin"] == "chosen"].to_dict("records")
    )
    found = tuple(
        f"{item.severity}: {f'{item.where}: ' if item.where else ''}{item.message.rstrip('.')}. {item.remedy}"
        for item in findings
    )
    files = tuple(
        (role, f"{entry['file']}, SHA-256 {entry['sha256'][:16]}…") for role, entry in inputs.items()
    )
    return Document(
        title=about.name,
        subtitle=f"Effective {about.effective_date}; {about.crs}; prepared by: {about.prepared_by}",
        label=LABEL,
        summary=(
            Paragraph(
                "No hole was drilled, so there is no block model, no class and no table of tonnes. What surface samples and "
                "an outline support is an exploration target in ranges, which stand below with what they rest on.",
                "lead",
            ),
            caution,
        ),
        sections=(
            Section("target", "Exploration target", (ranges, richer)),
            Section("decisions", "What was stated", (Bullets(chosen),)),
            Section("findings", "What was found", (Bullets(found),) if found else (Paragraph("Nothing."),)),
            Section("record", "Record", (Facts((*files, ("Reporting standard", about.reporting_standard))),)),
        ),
        facts={
            "footer": "Draft for a Competent Person; ranges are rounded. Unrounded values: exploration_target.csv."
        },
    )


def divisors(study: Study) -> str:
    """The divisors of the study in words."""
    given = study.config.exploration.surface_divisor
    return ", ".join(f"{name} {value:g}" for name, value in given.items()) or "none"
