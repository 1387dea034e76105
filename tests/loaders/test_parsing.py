"""Cells to numbers, limits, blanks and names."""

from __future__ import annotations

import datetime
import math

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sms_resource.loaders.parsing import COORDINATE_CODES, parse_identifiers, parse_numbers
from sms_resource.loaders.tables import BELOW_DETECTION, BLANK, MEASURED, OVER_LIMIT

NAN = math.nan


@pytest.mark.parametrize(
    ("cell", "value"),
    [
        ("1", 1.0),
        (" 2.50 ", 2.5),
        ("-3", -3.0),
        ("+4", 4.0),
        ("1e-3", 1e-3),
        (".5", 0.5),
        ("5.", 5.0),
        ("\u22121.5", -1.5),  # a typeset minus
        ("\u00a07\u00a0", 7.0),  # no-break spaces
        (8, 8.0),
        (8.25, 8.25),
        (np.float32(0.5), 0.5),
        ("007", 7.0),
    ],
)
def test_plain_numbers(cell: object, value: float) -> None:
    parsed = parse_numbers([cell])
    assert parsed.values[0] == value and parsed.status[0] == MEASURED and not parsed.problems


@pytest.mark.parametrize(
    "cell", ["", "  ", "NA", "n/a", "NaN", "-", "--", "None", "null", None, NAN, pd.NA, pd.NaT, "N.A."]
)
def test_blanks(cell: object) -> None:
    parsed = parse_numbers([cell], limits=True)
    assert np.isnan(parsed.values[0]) and parsed.status[0] == BLANK and not parsed.problems


@pytest.mark.parametrize(
    ("cell", "status", "limit"),
    [
        ("<0.01", BELOW_DETECTION, 0.01),
        ("< 0.01", BELOW_DETECTION, 0.01),
        ("<=5", BELOW_DETECTION, 5.0),
        ("\u22645", BELOW_DETECTION, 5.0),
        (">50", OVER_LIMIT, 50.0),
        (">=50.5", OVER_LIMIT, 50.5),
        ("<1e-3", BELOW_DETECTION, 1e-3),
        ("BDL", BELOW_DETECTION, NAN),
        ("<LOD", BELOW_DETECTION, NAN),
    ],
)
def test_limits(cell: str, status: int, limit: float) -> None:
    parsed = parse_numbers([cell], limits=True)
    assert np.isnan(parsed.values[0]) and parsed.status[0] == status and not parsed.problems
    assert parsed.limit[0] == limit or (np.isnan(limit) and np.isnan(parsed.limit[0]))


@pytest.mark.parametrize(
    "cell",
    [
        "abc",
        "1,5",
        "1 000",
        "1_000",
        "0x10",
        "1.2.3",
        "inf",
        "-inf",
        "1e999",
        "5 %",
        "2 m",
        "<",
        "<x",
        "<-1",
        "1e",
        True,
    ],
)
def test_what_is_no_number_is_a_problem_and_no_value(cell: object) -> None:
    parsed = parse_numbers([cell, "1"])
    assert list(parsed.problems) == [0] and np.isnan(parsed.values[0]) and parsed.status[0] == BLANK
    assert parsed.values[1] == 1.0


@pytest.mark.parametrize(
    ("cell", "code"),
    [
        ("#REF!", "formula-error"),
        ("#DIV/0!", "formula-error"),
        (datetime.datetime(2026, 1, 2), "date-in-number"),
        (datetime.time(1, 2), "date-in-number"),
        ("x", "not-a-number"),
    ],
)
def test_problems_have_their_code(cell: object, code: str) -> None:
    assert parse_numbers([cell]).problems[0][0] == code


@pytest.mark.parametrize(
    ("cell", "value"),
    [("1,5", 1.5), ("-0,25", -0.25), ("12", 12.0), ("1,5e3", 1500.0), ("1.5", NAN), ("1.234,5", NAN)],
)
def test_decimal_commas(cell: str, value: float) -> None:
    parsed = parse_numbers([cell], decimal=",")
    assert parsed.values[0] == value or (np.isnan(value) and 0 in parsed.problems)


def test_limits_with_decimal_commas() -> None:
    parsed = parse_numbers(["<0,05", ">1,5", "n.a."], decimal=",", limits=True)
    assert list(parsed.status) == [BELOW_DETECTION, OVER_LIMIT, BLANK]
    assert parsed.limit[:2] == pytest.approx([0.05, 1.5])


def test_codes_for_missing_are_blank_and_marked() -> None:
    parsed = parse_numbers(["-99", "-999", -9999.0, "-999.25", "1e31", "-98"])
    assert list(parsed.coded) == [True] * 5 + [False]
    assert list(parsed.status) == [BLANK] * 5 + [MEASURED]
    assert np.isnan(parsed.values[:5]).all() and parsed.values[5] == -98


def test_small_negative_coordinates_are_positions() -> None:
    parsed = parse_numbers(["-99", "-999", "-9999"], codes=COORDINATE_CODES)
    assert list(parsed.coded) == [False, False, True]


def test_numbers_of_a_typed_column_pass_through() -> None:
    parsed = parse_numbers(pd.Series([1.0, np.nan, np.inf, 3.0]))
    assert list(parsed.status) == [MEASURED, BLANK, BLANK, MEASURED] and list(parsed.problems) == [2]
    assert list(parse_numbers(pd.Series([1, None, 3], dtype="Int64")).status) == [MEASURED, BLANK, MEASURED]


def test_names_stay_what_they_are() -> None:
    cells = ["001", "1E5", "NA", " H 1 ", "A\u20131", "", None, 7, 7.0, 7.5, datetime.date(2026, 3, 1)]
    texts, numeric, dates = parse_identifiers(cells)
    assert texts == ["001", "1E5", "NA", "H 1", "A\u20131", "", "", "7", "7", "7.5", "2026-03-01"]
    assert numeric == [7, 8, 9] and dates == [10]


@given(st.floats(allow_nan=False, allow_infinity=False, width=64))
def test_any_number_that_is_written_is_read(value: float) -> None:
    parsed = parse_numbers([repr(value)], codes=np.array([]))
    expected = value if abs(value) <= 1e29 else NAN
    assert parsed.values[0] == expected or (np.isnan(expected) and parsed.coded[0])


ANY_CELL = st.one_of(st.text(max_size=12), st.floats(), st.integers(), st.booleans(), st.none(), st.dates())


@given(st.lists(ANY_CELL, max_size=6), st.sampled_from([".", ","]), st.booleans())
@settings(max_examples=300, deadline=None, derandomize=True)
def test_any_cell_is_a_number_a_limit_a_blank_or_a_problem(
    cells: list[object], decimal: str, limits: bool
) -> None:
    parsed = parse_numbers(cells, decimal=decimal, limits=limits)
    assert len(parsed.values) == len(parsed.status) == len(parsed.limit) == len(cells)
    for i in range(len(cells)):
        assert np.isfinite(parsed.values[i]) == (parsed.status[i] == MEASURED)
        if i in parsed.problems:
            code, message, remedy = parsed.problems[i]
            assert parsed.status[i] == BLANK and code and message.endswith(".") and remedy
    parse_identifiers(cells)
