"""Assays made into plain numbers: detection limits, over limits and methods, each choice counted."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.samples.censored import TooFewDetected, regression_on_order_statistics
from sms_resource.samples.intervals import counted, numbers

Floats = NDArray[np.float64]
BelowDetection = Literal["half", "zero", "as_is", "ros"]
OverLimit = Literal["at_limit", "missing"]

MEASURED, BELOW, OVER, BLANK = 0, 1, 2, 3


def resolve_assays(
    table: pd.DataFrame,
    element_columns: Sequence[str],
    *,
    below_detection: BelowDetection = "half",
    over_limit: OverLimit = "at_limit",
    allowed_methods: Sequence[str] = ("laboratory",),
    label: str = "assays",
) -> tuple[pd.DataFrame, Findings, pd.DataFrame]:
    """Turn raw assays into numbers and say what was done to which.

    Parameters
    ----------
    table : DataFrame
        Raw table: each element column ``c`` (NaN unless measured) with ``c_status`` (0 measured, 1 below
        detection, 2 over limit, 3 blank) and ``c_limit``; ``method`` where the table has it.
    element_columns : sequence of str
        Which columns to resolve; one that is absent becomes a finding and a column of NaN.
    below_detection : "half", "zero", "as_is" or "ros"
        Half the limit, zero, the limit itself, or regression on order statistics. With "ros" all results below one
        limit get the mean of their expected values, since which of them is which cannot be known.
    over_limit : "at_limit" or "missing"
        The limit (which understates), or left out.
    allowed_methods : sequence of str
        Methods whose assays are kept; "handheld" stays out unless it is named here.

    Returns
    -------
    frame : DataFrame
        The kept rows with plain numbers (NaN is not assayed); status and limit columns unchanged.
    findings : Findings
    summary : DataFrame
        One row an element: counts by status, share below detection, and the mean under each treatment.

    Raises
    ------
    ValueError
        If an option is not known.
    """
    if below_detection not in ("half", "zero", "as_is", "ros"):
        raise ValueError(f"below_detection must be 'half', 'zero', 'as_is' or 'ros', not {below_detection!r}")
    if over_limit not in ("at_limit", "missing"):
        raise ValueError(f"over_limit must be 'at_limit' or 'missing', not {over_limit!r}")
    findings = Findings()
    frame = _allowed(table, tuple(allowed_methods), label, findings)
    rows = []
    for column in element_columns:
        if column not in frame.columns:
            findings.warning(
                "element-missing",
                f"{label} have no column {column}",
                "Map the column in the study, or take the element out.",
                column=column,
            )
            frame[column] = np.nan
            continue
        values, row = _resolve(frame, column, below_detection, over_limit, label, findings)
        frame[column] = values
        rows.append(row)
    return frame, findings, pd.DataFrame(rows)


def _allowed(table: pd.DataFrame, methods: tuple[str, ...], label: str, findings: Findings) -> pd.DataFrame:
    if "method" not in table.columns:
        return table.copy()
    method = table["method"].fillna("").astype(str).str.strip()
    empty = method == ""
    if empty.any() and not empty.all():
        findings.warning(
            "method-missing",
            f"{int(empty.sum())} of {len(table)} {label} do not say their method; they are kept",
            "Give the method of each: handheld readings do not belong in an estimate.",
            column="method",
        )
    keep = empty | method.isin(list(methods))
    for name, count in method.loc[~keep].value_counts().items():
        findings.warning(
            "method-excluded",
            f"{count} of {len(table)} {label} were made by method {name!r} and are left out",
            "Name the method in the study to let them in; the report will say so.",
            column="method",
        )
    for name in methods:
        count = int((method == name).sum())
        if name != "laboratory" and count:
            findings.warning(
                "method-allowed",
                f"{count} of {len(table)} {label} were made by method {name!r} and are used",
                "The study allows it; a proposed class that rests on them is lowered.",
                column="method",
            )
    return table.loc[keep].reset_index(drop=True)


def _resolve(
    frame: pd.DataFrame,
    column: str,
    below_detection: BelowDetection,
    over_limit: OverLimit,
    label: str,
    findings: Findings,
) -> tuple[Floats, dict[str, object]]:
    raw, limit = numbers(frame, column), numbers(frame, f"{column}_limit")
    if f"{column}_status" in frame:
        status = np.array(frame[f"{column}_status"].fillna(BLANK), dtype=np.int64)
    else:
        status = np.where(np.isfinite(raw), MEASURED, BLANK)
    base = np.where(status == MEASURED, raw, np.nan)
    if over_limit == "at_limit":
        base[status == OVER] = limit[status == OVER]
    below, over = status == BELOW, status == OVER
    choices = {
        name: np.where(below, limit * factor, base)
        for name, factor in (("half", 0.5), ("zero", 0.0), ("as_is", 1.0))
    }
    choices["zero"] = np.where(below, 0.0, base)
    ros_note = ""
    try:
        choices["ros"] = _by_order_statistics(base, limit, below)
    except TooFewDetected as reason:
        ros_note = str(reason)
        choices["ros"] = np.full(len(base), np.nan)
    used: str = below_detection
    if below_detection == "ros" and ros_note and below.any():
        used = "half"
        findings.warning(
            "ros-too-few",
            f"{label}: {column}: {ros_note}; half the limit is used instead",
            "Choose half, zero or as_is, or leave the element out of the estimate.",
            column=column,
        )
    if below.any():
        findings.note(
            "assay-below-detection",
            f"{label}: {int(below.sum())} of {counted(int((status != BLANK).sum()), 'result')} of {column} below "
            f"detection, taken as {used.replace('_', ' ')}",
            column=column,
        )
    if over.any():
        findings.warning(
            "assay-over-limit",
            f"{label}: {counted(int(over.sum()), 'result')} of {column} over the upper limit, "
            + ("set to it, which understates" if over_limit == "at_limit" else "left out"),
            "Have them assayed again by a method for high grades.",
            column=column,
        )
    assayed = int((status != BLANK).sum())
    row: dict[str, object] = {
        "column": column,
        "samples": len(frame),
        "measured": int((status == MEASURED).sum()),
        "below_detection": int(below.sum()),
        "over_limit": int(over.sum()),
        "not_assayed": int((status == BLANK).sum()),
        "share_below_pct": 100.0 * below.sum() / assayed if assayed else np.nan,
        "treatment": used if below.any() else "none needed",
    }
    for name, values in choices.items():
        known = values[np.isfinite(values)]
        row[f"mean_{name}"] = float(known.mean()) if len(known) else np.nan
    return np.array(choices[used]), row


def _by_order_statistics(base: Floats, limit: Floats, below: NDArray[np.bool_]) -> Floats:
    """Values with those below detection replaced by the mean expected value of their limit."""
    result = base.copy()
    if not below.any():
        return result
    use = np.isfinite(base) | (below & np.isfinite(limit))
    values = np.where(below, limit, base)[use]
    filled = regression_on_order_statistics(values, below[use])
    full = np.full(len(base), np.nan)
    full[use] = filled
    for level in np.unique(limit[below & np.isfinite(limit)]):
        group = below & (limit == level)
        result[group] = full[group].mean()
    return result
