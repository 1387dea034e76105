"""Sections on the record: decisions, findings, truth, sources, manifest."""

from __future__ import annotations

import json
from typing import Any

import pandas as pd

from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.elements import (
    Block,
    Bullets,
    Facts,
    Paragraph,
    Table,
    cell_text,
    element_words,
    frame_table,
    plain_words,
    setting_text,
    with_table,
)
from sms_resource.reporting.method import method_statement
from sms_resource.reporting.rounding import NO_VALUE, round_significant
from sms_resource.reporting.words import SOURCES

MOST_TEXT = 300
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
    if ledger is None or not has(ledger, "key", "value"):
        return None
    frame = ledger.rename(columns={"who": "by"})
    for column in ("origin", "reason", "by", "alternatives", "effect"):
        texts = frame[column].map(cell_text) if column in frame else pd.Series("", index=frame.index)
        frame = frame.assign(**{column: texts.replace(NO_VALUE, "")})
    return frame.assign(
        value=frame["value"].map(plain_value),
        alternatives=frame["alternatives"].str.replace('"', ""),
        effect=frame["effect"].where(frame["effect"] != "", "not run"),
    )


def plain_value(value: Any) -> str:
    """A value of the study without the marks of its file format: ``"half"`` becomes half, true becomes yes."""
    if isinstance(value, str):
        try:
            value = json.loads(value)
        except ValueError:
            return value
    if isinstance(value, dict):
        said = ", ".join(f"{key} {text}" for key, text in _set_parts("", value))
        return (
            said if len(said) <= MOST_TEXT else f"{said[:MOST_TEXT]} … (in full in the data files)"
        ) or "none"
    if isinstance(value, (list, tuple)):
        return ", ".join(plain_value(item) for item in value) or "none"
    return "not set" if value is None else setting_text(value)


def _set_parts(name: str, value: Any) -> list[tuple[str, str]]:
    """Dotted names and texts of what is set inside a nested value."""
    if isinstance(value, dict):
        return [part for key, item in value.items() for part in _set_parts(f"{name}.{key}".strip("."), item)]
    return [] if value is None else [(name, plain_value(value))]


def decisions(data: ReportData) -> list[Block]:
    """The decisions with most effect, or chosen with a reason; where files lie comes last."""
    frame = ledger_frame(data)
    if frame is None:
        return []
    size = pd.to_numeric(frame["effect_pct"], errors="coerce") if "effect_pct" in frame else 0.0
    rank = pd.DataFrame(
        {
            "size": pd.Series(size, index=frame.index).abs().fillna(0.0),
            "reason": (frame["reason"] != "").astype(int),
            "chosen": (frame["origin"] != "default").astype(int),
            "judged": (~frame["key"].astype(str).str.startswith(("data.", "study."))).astype(int),
        }
    )
    order = rank.sort_values(["size", "reason", "judged", "chosen"], ascending=False, kind="stable").index
    counts = frame["origin"].value_counts().sort_index()
    words = ", ".join(f"{count} {name}" for name, count in counts.items())
    title = "Decisions with most effect, or chosen"
    return [
        Paragraph(f"{len(frame)} decisions in all: {words}. The full ledger stands further on."),
        frame_table(frame.loc[order].head(8), title, columns=LEDGER_COLUMNS, labels=LEDGER_LABELS),
    ]


def ledger(data: ReportData) -> list[Block]:
    """Every decision of the study."""
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
    """What the checks found, errors first."""
    findings = data.record.findings
    counts = findings.counts()
    blocks: list[Block] = [
        Paragraph(f"{counts['error']} errors, {counts['warning']} warnings, {counts['note']} notes.")
    ]
    if len(findings):
        rows = [
            (
                f.severity,
                f.code,
                *(element_words(plain_words(t)) for t in (f.where or NO_VALUE, f.message, f.remedy)),
            )
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
    """The estimate against a known truth, where a study names one."""
    truth = data.record.truth
    if not truth:
        return []
    blocks: list[Block] = [Paragraph(f"Truth from {truth.get('file', 'a file named in the study')}.")]
    table = truth.get("table")
    note = ""
    if table is not None and has(table, "unit", "truth", "estimate"):
        large = ~table["unit"].isin(("%", "g/t", "ppm"))
        table = table.copy()
        for name in ("truth", "estimate"):
            table.loc[large, name] = [round_significant(float(v), 3) for v in table.loc[large, name]]
        note = "Tonnes and volumes to 3 significant figures; differences from unrounded values."
    with_table(blocks, table, "Estimate against truth, with what causes the difference", note=note)
    if truth.get("notes"):
        blocks.append(Bullets(tuple(str(n) for n in truth["notes"])))
    return blocks


def method(data: ReportData) -> list[Block]:
    """The method statement, a paragraph a part."""
    return [Paragraph(f"{title}. {text}") for title, text in method_statement(data)]


def sources(data: ReportData) -> list[Block]:
    """Sources of the study and of the methods."""
    return [Bullets(tuple(dict.fromkeys((*data.record.sources, *SOURCES))))]


def input_rows(inputs: list[dict[str, Any]]) -> tuple[tuple[str, str, str, str], ...]:
    """One row a file, with all that the study takes from it; the same path with other bytes is another row."""
    roles: dict[tuple[str, str, str], list[str]] = {}
    for item in inputs:
        file = (str(item.get("path", "")), str(item.get("sha256", ""))[:16], cell_text(item.get("bytes")))
        role = str(item.get("role") or "").replace("_", " ")
        roles.setdefault(file, []).extend([role] if role and role not in roles.get(file, ()) else [])
    return tuple((path, ", ".join(used), sha, size) for (path, sha, size), used in roles.items())


def manifest(data: ReportData) -> list[Block]:
    """Inputs with their hashes, seed and versions; no times, so that the same study gives the same page."""
    manifest = data.record.manifest
    if not manifest:
        return []
    blocks: list[Block] = []
    inputs = [i for i in manifest.get("inputs") or () if isinstance(i, dict)]
    if inputs:
        blocks.append(
            Table(
                "Input files",
                ("File", "Used as", "SHA-256 (first 16)", "Bytes"),
                input_rows(inputs),
                (False, False, False, True),
                "Full hashes are in manifest.json.",
            )
        )
    pairs = [("Seed", str(manifest.get("seed", "not stated")))]
    pairs += [(str(name), str(version)) for name, version in sorted((manifest.get("versions") or {}).items())]
    blocks.append(Facts(tuple(pairs)))
    return blocks
