"""Where a finding is: rows listed in full but in few words, and the file's own name of a column."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from typing import Any

import numpy as np
import pandas as pd

from sms_resource.findings import Findings, Severity

MOST_SINGLE = 25  # findings of one kind in one column that are listed one by one; the rest share one


def spans(rows: Iterable[int]) -> str:
    """Row numbers as text with runs drawn together: ``[2, 3, 4, 9]`` is ``"2-4, 9"``."""
    numbers = sorted({int(row) for row in rows})
    parts: list[str] = []
    start = 0
    for i in range(1, len(numbers) + 1):
        if i == len(numbers) or numbers[i] != numbers[i - 1] + 1:
            first, last = numbers[start], numbers[i - 1]
            parts.append(str(first) if first == last else f"{first}-{last}")
            start = i
    return ", ".join(parts)


def in_rows(rows: Iterable[int], most: int = 20) -> str:
    """Where something is, as a phrase: "row 4" or "rows 2-3, 9", shortened beyond ``most`` spans."""
    text = spans(rows)
    parts = text.split(", ")
    if len(parts) > most:
        text = ", ".join(parts[:most]) + ", ..."
    return f"row {text}" if text.isdigit() else f"rows {text}"


def counted(number: int, noun: str) -> str:
    """Number and noun: "1 hole", "3 holes"."""
    return f"{number} {noun}" if number == 1 else f"{number} {noun}s"


def listed(names: Iterable[object], most: int = 40) -> str:
    """Names with commas between them; beyond ``most`` the rest is counted."""
    texts = [str(name) for name in names]
    if len(texts) <= most:
        return ", ".join(texts)
    return ", ".join(texts[:most]) + f" and {len(texts) - most} more"


def report_rows(
    findings: Findings,
    severity: Severity,
    code: str,
    rows: Sequence[int] | np.ndarray,
    message: str | Sequence[str] | Callable[[int], str],
    remedy: str = "",
    *,
    file: str | None = None,
    column: str | None = None,
    most: int = MOST_SINGLE,
) -> None:
    """One finding a row; beyond ``most`` the rest share one that lists their rows.

    Parameters
    ----------
    rows : sequence of int
        Rows in the file.
    message : str, sequence of str, or callable
        What is wrong: for all rows, one a row, or made from the position in ``rows``.
    """

    def text(i: int) -> str:
        if isinstance(message, str):
            return message
        return message(i) if callable(message) else message[i]

    for i, row in enumerate(rows):
        if i == most and len(rows) > most + 1:
            rest = [int(r) for r in rows[i:]]
            findings.add(
                severity,
                code,
                f"{text(i)} The same in {len(rest)} rows: {spans(rest)}.",
                remedy,
                file=file,
                row=rest[0],
                column=column,
            )
            return
        findings.add(severity, code, text(i), remedy, file=file, row=int(row), column=column)


def mark(
    frame: pd.DataFrame,
    file: str,
    headers: dict[str, str],
    reported: dict[str, list[int]] | None = None,
    crs: str | None = None,
) -> pd.DataFrame:
    """Note on a table its file, what that file calls its columns, and the cells that already have a finding.

    ``crs`` is the system of the positions, where they are the points of a vector file.
    """
    frame.attrs["file"] = file
    frame.attrs["crs"] = crs
    frame.attrs["headers"] = dict(headers)
    # as text: pandas copies attrs with every operation, and a text is not copied
    frame.attrs["reported"] = {name: " ".join(map(str, rows)) for name, rows in (reported or {}).items()}
    return frame


def not_reported(frame: pd.DataFrame, column: str) -> np.ndarray:
    """Rows whose cell in ``column`` has no finding yet, as a mask."""
    rows = frame.attrs.get("reported", {}).get(column)
    if not rows:
        return np.ones(len(frame), dtype=bool)
    return ~np.isin(frame["source_row"].to_numpy(), [int(row) for row in rows.split()])


def file_of(frame: pd.DataFrame, default: str | None = None) -> str | None:
    """File that a table was read from, as findings print it."""
    name: Any = frame.attrs.get("file", default)
    return name


def given(frame: pd.DataFrame, column: str) -> bool:
    """Whether the file has a canonical column; so taken where it is not known."""
    headers: dict[str, str] = frame.attrs.get("headers", {})
    return not headers or column in headers


def header_of(frame: pd.DataFrame, column: str) -> str:
    """What the file calls a canonical column."""
    headers: dict[str, str] = frame.attrs.get("headers", {})
    return headers.get(column, column)
