"""Sections on the record: decisions, findings, truth, sources, manifest."""

from __future__ import annotations

import pandas as pd

from sms_resource.reporting.data import ReportData
from sms_resource.reporting.elements import (
    Block,
    Bullets,
    Facts,
    Paragraph,
    Table,
    cell_text,
    frame_table,
    plain_words,
    with_table,
)
from sms_resource.reporting.rounding import NO_VALUE
from sms_resource.reporting.words import SOURCES

LEDGER_COLUMNS = ("key", "value", "origin", "reason", "by", "alternatives", "effect")
LEDGER_LABELS = {
    "key": "Decision",
    "origin": "Default or chosen",
    "by": "Who",
    "effect": "Effect of the alternatives",
}


def ledger_frame(data: ReportData) -> pd.DataFrame | None:
    """The ledger with the columns that the report shows; None where there is none."""
    ledger = data.record.ledger
    if ledger is None or not len(ledger):
        return None
    frame = ledger.rename(columns={"who": "by"})
    for column in ("reason", "by", "alternatives", "effect"):
        if column not in frame:
            frame = frame.assign(**{column: ""})
    effect = (
        frame["effect"]
        .astype(object)
        .where(frame["effect"].notna() & (frame["effect"].astype(str) != ""), "not run")
    )
    return frame.assign(effect=effect)


def decisions(data: ReportData) -> list[Block]:
    frame = ledger_frame(data)
    if frame is None:
        return []
    size = (
        pd.to_numeric(frame["effect_pct"], errors="coerce").abs().fillna(0.0)
        if "effect_pct" in frame
        else pd.Series(0.0, index=frame.index)
    )
    chosen = (
        (frame["origin"].astype(str) != "default").astype(int)
        if "origin" in frame
        else pd.Series(0, index=frame.index)
    )
    order = (
        pd.DataFrame({"size": size, "chosen": chosen})
        .sort_values(["size", "chosen"], ascending=False, kind="stable")
        .index
    )
    counts = (
        frame["origin"].astype(str).value_counts().sort_index() if "origin" in frame else pd.Series(dtype=int)
    )
    words = ", ".join(f"{count} {name}" for name, count in counts.items())
    return [
        frame_table(
            frame.loc[order].head(8),
            "Decisions with most effect, or chosen",
            columns=LEDGER_COLUMNS,
            labels=LEDGER_LABELS,
        ),
        Paragraph(f"{len(frame)} decisions in all: {words}. The full ledger stands further on.", "note"),
    ]


def ledger(data: ReportData) -> list[Block]:
    frame = ledger_frame(data)
    if frame is None:
        return []
    columns = ("key", "value", "origin", "meaning", *LEDGER_COLUMNS[3:])
    blocks: list[Block] = [
        frame_table(frame, "All decisions", columns=columns, labels=LEDGER_LABELS, most=400)
    ]
    with_table(blocks, data.record.changes, f"What changed since {data.record.against or 'the other run'}")
    return blocks


def findings(data: ReportData) -> list[Block]:
    findings = data.record.findings
    counts = findings.counts()
    blocks: list[Block] = [
        Paragraph(f"{counts['error']} errors, {counts['warning']} warnings, {counts['note']} notes.")
    ]
    if len(findings):
        rows = [
            (f.severity, f.code, f.where or NO_VALUE, plain_words(f.message), plain_words(f.remedy))
            for f in findings
        ]
        order = sorted(range(len(rows)), key=lambda n: ("error", "warning", "note").index(rows[n][0]))
        shown = tuple(rows[n] for n in order[:200])
        note = f"The first 200 of {len(rows)}; findings.json holds all." if len(rows) > 200 else ""
        blocks.append(
            Table("Findings", ("Severity", "Code", "Where", "What", "Remedy"), shown, (False,) * 5, note)
        )
    return blocks


def truth(data: ReportData) -> list[Block]:
    truth = data.record.truth
    if not truth:
        return []
    blocks: list[Block] = [Paragraph(f"Truth from {truth.get('file', 'a file named in the study')}.")]
    with_table(blocks, truth.get("table"), "Estimate against truth, with what causes the difference")
    if truth.get("notes"):
        blocks.append(Bullets(tuple(str(n) for n in truth["notes"])))
    return blocks


def sources(data: ReportData) -> list[Block]:
    return [Bullets(tuple(dict.fromkeys((*data.record.sources, *SOURCES))))]


def manifest(data: ReportData) -> list[Block]:
    manifest = data.record.manifest
    if not manifest:
        return []
    blocks: list[Block] = []
    inputs = [i for i in manifest.get("inputs") or () if isinstance(i, dict)]
    if inputs:
        rows = tuple(
            (str(i.get("path", "")), str(i.get("sha256", ""))[:16], cell_text(i.get("bytes"))) for i in inputs
        )
        blocks.append(
            Table(
                "Input files",
                ("File", "SHA-256 (first 16)", "Bytes"),
                rows,
                (False, False, True),
                "Full hashes are in manifest.json.",
            )
        )
    pairs = [("Seed", str(manifest.get("seed", "not stated")))]
    pairs += [(str(name), str(version)) for name, version in sorted((manifest.get("versions") or {}).items())]
    blocks.append(Facts(tuple(pairs)))
    return blocks
