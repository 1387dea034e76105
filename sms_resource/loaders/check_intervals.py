"""Intervals down a hole: whole, forwards, inside the hole, apart from each other."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings, Severity
from sms_resource.loaders.headers import canonical_text
from sms_resource.loaders.places import counted, file_of, given, header_of, in_rows, not_reported, report_rows
from sms_resource.loaders.settings import CheckSettings
from sms_resource.loaders.tables import LoadedData

TOUCH_M = 1e-3  # depths are logged to the centimetre; a millimetre is rounding
INTERVAL_ROLES = ("runs", "lithology", "assays", "densities")


def check_intervals(data: LoadedData, settings: CheckSettings, findings: Findings) -> None:
    """All tables of intervals against themselves and against their collars."""
    collars = data.drill.collars
    lengths = collars.drop_duplicates("hole_id").set_index("hole_id")["length_m"]
    for role in ("surveys", *INTERVAL_ROLES):
        frame = getattr(data.drill, role)
        if frame.empty:
            continue
        file = file_of(frame, data.files.get(role))
        _without_collar(frame, collars, file, findings)
        if role == "surveys":
            continue
        _single_intervals(frame, lengths, file, findings)
        if role != "densities":  # several plugs may share an interval
            _neighbours(frame, role, file, findings)


def _without_collar(frame: pd.DataFrame, collars: pd.DataFrame, file: str | None, findings: Findings) -> None:
    """Rows of holes that the collars do not have: one finding a hole."""
    known = set(collars["hole_id"])
    lost = frame[~frame["hole_id"].isin(known) & (frame["hole_id"] != "")]
    if lost.empty:
        return
    alike = {canonical_text(name).replace("_", "").lstrip("0"): name for name in known}
    groups = list(lost.groupby("hole_id", sort=False))
    messages = []
    for hole, rows in groups:
        near = alike.get(canonical_text(str(hole)).replace("_", "").lstrip("0"))
        hint = f" The collars have “{near}”." if near else ""
        messages.append(f"Hole “{hole}” has {counted(len(rows), 'row')} here and no collar.{hint}")
    report_rows(
        findings, "error", "collar-missing", [int(rows["source_row"].iloc[0]) for _, rows in groups], messages,
        "Add the collar, or write the hole's name as the collars do.", file=file, column=header_of(frame, "hole_id"),
    )  # fmt: skip


def _single_intervals(frame: pd.DataFrame, lengths: pd.Series, file: str | None, findings: Findings) -> None:
    rows = frame["source_row"].to_numpy()
    start, end = frame["from_m"].to_numpy(dtype=np.float64), frame["to_m"].to_numpy(dtype=np.float64)
    for name, values in (("from_m", start), ("to_m", end)):
        blank = np.isnan(values) & not_reported(frame, name) & given(frame, name)
        report_rows(
            findings, "error", "interval-incomplete", rows[blank], f"The interval has no {name}.",
            "Complete the row, or remove it.", file=file, column=header_of(frame, name),
        )  # fmt: skip
    back = end < start
    report_rows(
        findings, "error", "interval-backwards", rows[back],
        [f"The interval runs backwards, from {a:g} to {b:g} m." for a, b in zip(start[back], end[back])],
        "Exchange or correct the depths.", file=file, column=header_of(frame, "to_m"),
    )  # fmt: skip
    none = end == start
    report_rows(
        findings, "error", "interval-zero", rows[none], [f"The interval at {a:g} m has no length." for a in start[none]],
        "Correct the depths, or remove the row.", file=file, column=header_of(frame, "to_m"),
    )  # fmt: skip
    above = start < 0
    report_rows(
        findings, "error", "interval-negative", rows[above], [f"The interval starts at {a:g} m." for a in start[above]],
        "Depths are measured down from the collar and are not negative.", file=file, column=header_of(frame, "from_m"),
    )  # fmt: skip
    ends = frame["hole_id"].map(lengths).to_numpy(dtype=np.float64)
    past = (end > ends + TOUCH_M) & (ends > 0)  # a hole of no length has its own finding
    holes = frame["hole_id"].to_numpy(dtype=object)
    report_rows(
        findings, "error", "interval-past-end", rows[past],
        [
            f"The interval ends at {a:g} m, but hole {hole} is {b:g} m long."
            for a, b, hole in zip(end[past], ends[past], holes[past])
        ],
        "Correct the depth, or the length in the collars.", file=file, column=header_of(frame, "to_m"),
    )  # fmt: skip


def _neighbours(frame: pd.DataFrame, role: str, file: str | None, findings: Findings) -> None:
    """Overlaps, repeated intervals and gaps, hole by hole (assays: method by method)."""
    good = (frame["to_m"] > frame["from_m"]).to_numpy() & (frame["hole_id"] != "").to_numpy()
    table = frame[good]
    if table.empty:
        return
    key = table["hole_id"].astype(object)
    if role == "assays":
        key = key + "\x00" + table["method"].astype(object)
    group = pd.factorize(key)[0]
    start, end = table["from_m"].to_numpy(dtype=np.float64), table["to_m"].to_numpy(dtype=np.float64)
    order = np.lexsort((table["source_row"].to_numpy(), end, start, group))
    group, start, end = group[order], start[order], end[order]
    rows = table["source_row"].to_numpy()[order]
    holes = table["hole_id"].to_numpy(dtype=object)[order]
    reach, before = _reach(group, end)
    first = np.r_[True, group[1:] != group[:-1]]
    same = ~first & (start == np.r_[np.nan, start[:-1]]) & (end == np.r_[np.nan, end[:-1]])
    report_rows(
        findings, "error", "interval-duplicate", rows[same],
        [
            f"The interval {a:g} to {b:g} m of hole {hole} is there twice; also in row {other}."
            for a, b, hole, other in zip(start[same], end[same], holes[same], np.r_[0, rows[:-1]][same])
        ],
        "Keep one; a repeat assay belongs to the laboratory table.", file=file, column=header_of(frame, "from_m"),
    )  # fmt: skip
    over = ~first & ~same & (start < reach - TOUCH_M)
    report_rows(
        findings, "error", "interval-overlap", rows[over],
        [
            f"The interval {a:g} to {b:g} m of hole {hole} starts above {c:g} m, where row {rows[i]} ends."
            for a, b, hole, c, i in zip(start[over], end[over], holes[over], reach[over], before[over])
        ],
        "Correct the depths so that intervals follow each other.", file=file, column=header_of(frame, "from_m"),
    )  # fmt: skip
    top = np.where(first, 0.0, reach)
    gap = start > top + TOUCH_M
    if gap.any():
        _report_gaps(frame, role, file, rows[gap], holes[gap], top[gap], start[gap], findings)


def _reach(
    group: NDArray[np.int64], end: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    """Deepest end above each interval in its group, and where that interval stands."""
    offset = group * (2.0 * np.abs(end).max() + 1.0)
    level = np.maximum.accumulate(end + offset)
    deepest = np.where(end + offset >= level, np.arange(len(end)), 0)
    deepest = np.maximum.accumulate(deepest)
    reach = np.r_[0.0, (level - offset)[:-1]]
    # the offset costs digits: take the end itself
    before = np.r_[0, deepest[:-1]]
    inside = np.r_[False, group[1:] == group[:-1]]
    return np.where(inside, end[before], reach), before


def _report_gaps(
    frame: pd.DataFrame, role: str, file: str | None, rows: NDArray[np.int64], holes: NDArray[np.object_],
    top: NDArray[np.float64], start: NDArray[np.float64], findings: Findings,
) -> None:  # fmt: skip
    column = header_of(frame, "from_m")
    if role == "runs":
        report_rows(
            findings, "warning", "interval-gap", rows,
            [f"Nothing is logged of hole {h} from {a:g} to {b:g} m." for h, a, b in zip(holes, top, start)],
            "Log every run, also those without recovery (0 %).", file=file, column=column,
        )  # fmt: skip
        return
    severity: Severity = "note"
    widest = int(np.argmax(start - top))
    findings.add(
        severity,
        "interval-gap",
        f"{counted(len(rows), 'gap')} in {counted(len(set(holes)), 'hole')}, "
        f"{float((start - top).sum()):.2f} m in all; the longest is "
        f"{start[widest] - top[widest]:.2f} m in hole {holes[widest]}, above row {rows[widest]} ({in_rows(rows)}).",
        "Lost core leaves gaps; check that nothing else does.",
        file=file,
        row=int(rows[0]),
        column=column,
    )
