"""Laboratory inserts: what each kind needs to be of use."""

from __future__ import annotations

import numpy as np

from sms_resource.findings import Findings
from sms_resource.loaders.places import file_of, header_of, not_reported, report_rows
from sms_resource.loaders.settings import CheckSettings
from sms_resource.loaders.tables import BLANK, LoadedData

FAR_OFF = 5.0  # factor between a result and its expected value that only another unit explains


def check_laboratory(data: LoadedData, settings: CheckSettings, findings: Findings) -> None:
    """References with their expected value, duplicates with their original, results that can be."""
    frame = data.laboratory
    if frame.empty:
        findings.warning(
            "laboratory-missing",
            "There are no reference materials, blanks or duplicates: the quality of the assays is not shown.",
            "Add the laboratory inserts.",
            file=data.files.get("laboratory"),
        )
        return
    file = file_of(frame, data.files.get("laboratory"))
    rows, kind = frame["source_row"].to_numpy(), frame["kind"]
    value, expected = (frame[name].to_numpy(dtype=np.float64) for name in ("value", "expected"))
    spread = frame["expected_sd"].to_numpy(dtype=np.float64)
    report_rows(
        findings, "error", "grade-negative", rows[value < 0], [f"A result of {v:g} is negative." for v in value[value < 0]],
        "Some laboratories write -0.01 for below detection: write <0.01.", file=file, column=header_of(frame, "value"),
    )  # fmt: skip
    blank = (frame["value_status"] == BLANK).to_numpy() & not_reported(frame, "value")
    report_rows(
        findings, "warning", "result-missing", rows[blank], "The insert has no result.",
        "Complete the row, or remove it.", file=file, column=header_of(frame, "value"),
    )  # fmt: skip
    reference = (kind == "reference").to_numpy()
    none = reference & ~(expected > 0) & not_reported(frame, "expected")
    report_rows(
        findings, "error", "reference-without-expected", rows[none], "The reference material has no expected value.",
        "Write the certified value, in the same unit.", file=file, column=header_of(frame, "expected"),
    )  # fmt: skip
    no_spread = reference & ~none & ~(spread > 0) & not_reported(frame, "expected_sd")
    report_rows(
        findings, "warning", "reference-without-sd", rows[no_spread],
        "The reference material has no standard deviation.", "Write the certified standard deviation.",
        file=file, column=header_of(frame, "expected_sd"), most=3,
    )  # fmt: skip
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = value / expected
    off = reference & ((ratio > FAR_OFF) | (ratio < 1 / FAR_OFF)) & (value > 0)
    report_rows(
        findings, "warning", "reference-far-off", rows[off],
        [f"The result {a:g} is far from the expected {b:g}." for a, b in zip(value[off], expected[off])],
        "Check the unit of both, and that samples were not exchanged.", file=file, column=header_of(frame, "value"),
    )  # fmt: skip
    _originals(data, file, findings)


def _originals(data: LoadedData, file: str | None, findings: Findings) -> None:
    frame = data.laboratory
    rows = frame["source_row"].to_numpy()
    pair = frame["kind"].isin(["duplicate", "check"]).to_numpy()
    name = frame["original_sample_id"].to_numpy(dtype=object)
    column = header_of(frame, "original_sample_id")
    none = pair & (name == "")
    report_rows(
        findings, "error", "duplicate-without-original", rows[none], "The insert does not say of which sample it is.",
        "Write the original's name into original_sample_id.", file=file, column=column,
    )  # fmt: skip
    known = set(data.drill.assays["sample_id"]) | set(data.surface["sample_id"]) | set(frame["sample_id"])
    unknown = ~np.isin(name.astype(str), np.array(sorted(known), dtype=str))
    lost, before = pair & ~none & unknown, (frame["kind"] == "blank").to_numpy() & (name != "") & unknown
    report_rows(
        findings, "warning", "original-missing", rows[before],
        [f"The sample before the blank, “{n}”, is not among the samples." for n in name[before]],
        "Correct the name; without its grade carry-over is not judged from this blank.", file=file, column=column,
    )  # fmt: skip
    report_rows(
        findings, "warning", "original-missing", rows[lost],
        [f"The original “{n}” is not among the samples." for n in name[lost]],
        "Correct the name; without its original a duplicate says nothing.", file=file, column=column,
    )  # fmt: skip
