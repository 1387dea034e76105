"""Cells to identifiers, numbers and results below detection or over limit.

Nothing is guessed: what is not plainly a number, a limit or a blank comes back as a problem with its reason.
"""

from __future__ import annotations

import datetime
import math
import numbers as abstract_numbers
import re
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.loaders.tables import BELOW_DETECTION, BLANK, MEASURED, OVER_LIMIT

BLANKS = frozenset({"", "na", "n/a", "nan", "-", "--", "none", "null", ".", "n.a.", "#n/a", "<na>"})
_BELOW_WORDS = frozenset(
    {"bdl", "b.d.l.", "bd", "b.d.", "<dl", "<lod", "<d.l.", "<", "below detection", "lld", "<lld"}
)
_UNCLEAR_WORDS = frozenset({"nd", "n.d.", "tr", "trace", "ns", "n.s.", "is", "i.s.", "lnr", "nss"})
_NUMBER = re.compile(r"[-+]?(\d+\.?\d*|\.\d+)([eE][-+]?\d+)?")
_LIMIT = re.compile(r"(<=|>=|<|>|≤|≥|⩽|⩾)\s*([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?)")
_DIGIT = re.compile(r"\d")
_SPACES = str.maketrans(dict.fromkeys("\u00a0\u2009\u202f\ufeff", " "))
_MINUS = str.maketrans({"−": "-", "–": "-"} | dict.fromkeys("\u00a0\u2009\u202f\ufeff", " "))
_WITH_UNIT = re.compile(r"[-+]?[\d.,]+\s*(%|m|cm|mm|g/t|ppm|ppb|g|kg|t/m3|g/cm3|°|deg)", re.I)
_GROUPED = re.compile(r"[-+]?\d{1,3}([, '’]\d{3})+([.]\d+)?")
_COMMA = re.compile(r"[-+]?\d+,\d+")
FORMULA_ERRORS = frozenset({"#REF!", "#DIV/0!", "#VALUE!", "#NAME?", "#NUM!", "#NULL!", "#SPILL!", "#CALC!"})

MISSING_CODES = np.array(
    [-99.0, -99.9, -99.99, -999.0, -999.25, -999.9, -999.99, -9999.0, -9999.99, -99999.0]
)
COORDINATE_CODES = np.array([-9999.0, -9999.99, -99999.0, -999999.0])
_HUGE = 1e29  # fill values such as 1e30 and 9.97e36


@dataclass
class Parsed:
    """Numbers of one column.

    Parameters
    ----------
    values : ndarray (n,)
        NaN where the cell is not a plain number.
    status : ndarray (n,) int8
        0 a number, 1 below detection, 2 over limit, 3 blank, a code for missing, or a problem.
    limit : ndarray (n,)
        The limit of status 1 and 2; NaN where it is not given.
    coded : ndarray (n,) bool
        Cells that hold a code for missing, such as -999.
    problems : dict
        Position to (code of the finding, what is wrong, remedy).
    """

    values: NDArray[np.float64]
    status: NDArray[np.int8]
    limit: NDArray[np.float64]
    coded: NDArray[np.bool_]
    problems: dict[int, tuple[str, str, str]] = field(default_factory=dict)


def parse_numbers(
    cells: Any, *, decimal: str = ".", codes: NDArray[np.float64] = MISSING_CODES, limits: bool = False
) -> Parsed:
    """Numbers of a column of cells.

    Parameters
    ----------
    cells : sequence
        Text, numbers, dates, None; what a reader found.
    decimal : "." | ","
        Decimal mark of numbers that are text.
    codes : ndarray
        Values that stand for missing.
    limits : bool
        Whether "<0.01" and ">50" are results; if not, they are problems.
    """
    series = cells if isinstance(cells, pd.Series) else pd.Series(cells, dtype=object)
    n = len(series)
    limit = np.full(n, np.nan)
    status = np.zeros(n, dtype=np.int8)
    problems: dict[int, tuple[str, str, str]] = {}
    if pd.api.types.is_numeric_dtype(series.dtype) and not pd.api.types.is_bool_dtype(series.dtype):
        values = series.to_numpy(dtype=np.float64, na_value=np.nan).copy()
        for i in np.flatnonzero(np.isinf(values)):
            problems[int(i)] = _problem("inf", decimal)
        status[np.isnan(values)] = BLANK
    else:
        raw = _objects(series)
        texts = [_as_text(cell, decimal) for cell in raw]
        values = _to_float(texts)
        known: dict[str, tuple[int, float, tuple[str, str, str] | None]] = {}
        for i in np.flatnonzero(~np.isfinite(values)):
            text = texts[i]
            if text not in known:
                known[text] = _classify(text, decimal, limits)
            status[i], number, problem = known[text]
            if status[i] == MEASURED:
                values[i] = number
            else:
                values[i], limit[i] = np.nan, number
            if problem is not None:
                problems[int(i)] = problem
    coded = np.isin(values, codes) | (np.abs(values) > _HUGE)
    bad = np.zeros(n, dtype=bool)
    bad[list(problems)] = True
    coded &= ~bad
    values[coded | bad] = np.nan
    limit[bad] = np.nan
    status[coded] = BLANK
    status[bad & (status == MEASURED)] = BLANK
    return Parsed(values, status, limit, coded, problems)


def _objects(series: pd.Series) -> NDArray[np.object_]:
    """Cells as Python objects, None where there is none."""
    cells = np.array(series.astype(object), dtype=object)
    cells[series.isna().to_numpy(dtype=bool)] = None
    return cells


def _to_float(texts: list[str]) -> NDArray[np.float64]:
    numbers = pd.to_numeric(pd.Series(texts, dtype=object), errors="coerce")
    return np.array(numbers.to_numpy(dtype=np.float64, na_value=np.nan))


def _as_text(cell: Any, decimal: str) -> str:
    """Cell as text with a decimal point; cells that cannot be numbers get a form that is none."""
    if isinstance(cell, str):
        text = cell.strip()
        if decimal == "," and ("," in text or "." in text) and _DIGIT.search(text):
            plain = text.replace(",", ".").translate(_MINUS)
            good = "." not in text and (_NUMBER.fullmatch(plain) or _LIMIT.fullmatch(plain))
            return plain if good else f"\x01{text}"
        return text
    if cell is None or cell is pd.NA or cell is pd.NaT:
        return ""
    if isinstance(cell, bool | np.bool_):
        return f"\x02{cell}"
    if isinstance(cell, abstract_numbers.Real):
        return "" if math.isnan(cell) else repr(float(cell))
    if isinstance(cell, datetime.date | datetime.time | datetime.timedelta | np.datetime64):
        return f"\x03{cell}"
    return f"\x02{cell}"


def _classify(text: str, decimal: str, limits: bool) -> tuple[int, float, tuple[str, str, str] | None]:
    """Status, number or limit, and problem of a text that is not a plain number."""
    clean = text.translate(_MINUS).strip()
    lower = clean.lower()
    if lower in BLANKS:
        return BLANK, math.nan, None
    if _NUMBER.fullmatch(clean) and math.isfinite(float(clean)):
        return MEASURED, float(clean), None
    match = _LIMIT.fullmatch(clean)
    if match and limits:
        value = float(match.group(2))
        if not math.isfinite(value) or value < 0:
            return BLANK, math.nan, _problem(text, decimal)
        return (OVER_LIMIT if match.group(1) in ">=≥⩾" else BELOW_DETECTION), value, None
    if limits and lower in _BELOW_WORDS:
        return BELOW_DETECTION, math.nan, None
    if limits and lower in _UNCLEAR_WORDS:
        return BLANK, math.nan, (
            "result-unclear",
            f"“{text}” may mean not determined or not detected.",
            "Write the limit, such as <0.01, or leave the cell empty.",
        )  # fmt: skip
    return BLANK, math.nan, _problem(text, decimal)


def _problem(text: str, decimal: str) -> tuple[str, str, str]:
    kind, shown = text[:1], text.lstrip("\x01\x02\x03")[:60]
    if shown.upper() in FORMULA_ERRORS:
        return (
            "formula-error",
            f"The cell holds the error {shown}.",
            "Mend the formula and save the workbook.",
        )
    if kind == "\x03":
        return (
            "date-in-number",
            f"The cell holds a date ({shown}).",
            "The spreadsheet has turned a number into a date: format the column as number and enter it again.",
        )
    remedy = "Write a plain number, or leave the cell empty."
    if kind == "\x01":
        remedy = (
            f"The decimal mark of this table is “{decimal}”: use it throughout and no thousands separator."
        )
    elif _GROUPED.fullmatch(shown) or _COMMA.fullmatch(shown):
        remedy = 'Remove thousands separators; for decimal commas state decimal = "," in the study.'
    elif _WITH_UNIT.fullmatch(shown):
        remedy = "Take the unit out of the cell; it belongs in the header or the study."
    elif _LIMIT.fullmatch(shown):
        remedy = "A limit has no meaning in this column: write a plain number."
    return "not-a-number", f"“{shown}” is not a number.", remedy


def parse_identifiers(cells: Any) -> tuple[list[str], list[int], list[int]]:
    """Identifiers as text, the positions that were stored as numbers, and those that were dates.

    Text stays what it is: "001", "1E5" and "NA" are names.
    """
    series = cells if isinstance(cells, pd.Series) else pd.Series(cells, dtype=object)
    texts: list[str] = []
    numeric: list[int] = []
    dates: list[int] = []
    for i, cell in enumerate(_objects(series)):
        if isinstance(cell, str):
            texts.append(cell.translate(_SPACES).strip() if not cell.isascii() else cell.strip())
        elif cell is None:
            texts.append("")
        elif isinstance(cell, datetime.date | datetime.time | np.datetime64):
            texts.append(str(cell))
            dates.append(i)
        elif isinstance(cell, abstract_numbers.Real) and not isinstance(cell, bool):
            value = float(cell)
            whole = value.is_integer() and abs(value) < 1e15
            texts.append(str(int(value)) if whole else ("" if math.isnan(value) else repr(value)))
            numeric.append(i)
        else:
            texts.append(str(cell))
    return texts, numeric, dates
