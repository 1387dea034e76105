"""Text tables in every encoding, with every separator and decimal mark."""

from __future__ import annotations

from pathlib import Path

import pytest

from sms_resource.findings import Findings
from sms_resource.loaders.reading import read_table
from sms_resource.loaders.source import TableSource
from sms_resource.loaders.table import load_table

ROWS = [
    ["hole_id", "from_m", "to_m", "code"],
    ["001", "0", "1.5", "Mässig"],
    ["1E5", "0.25", "2", "b c"],
    ["NA", "1", "3", "d"],
]


def text(delimiter: str = ",", decimal: str = ".", newline: str = "\n") -> str:
    return "".join(delimiter.join(row).replace(".", decimal) + newline for row in ROWS)


def lithology(folder: Path, data: bytes, **options: object) -> tuple[object, Findings]:
    path = folder / "lithology.csv"
    path.write_bytes(data)
    return load_table(TableSource(path, **options), "lithology")  # type: ignore[arg-type]


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "cp1252", "utf-16", "utf-16-le", "utf-16-be"])
@pytest.mark.parametrize("delimiter", [",", ";", "\t", "|"])
def test_encodings_and_separators(tmp_path: Path, encoding: str, delimiter: str) -> None:
    frame, found = lithology(tmp_path, text(delimiter).encode(encoding))
    assert list(frame["hole_id"]) == ["001", "1E5", "NA"]
    assert list(frame["code"]) == ["Mässig", "b c", "d"]
    assert list(frame["to_m"]) == [1.5, 2.0, 3.0]
    assert not found.has_errors
    assert [item.code for item in found] == (
        [] if delimiter == "," and encoding.startswith("utf-8") else ["text-form-found"]
    )


@pytest.mark.parametrize("newline", ["\n", "\r\n", "\r"])
@pytest.mark.parametrize("decimal", [".", ","])
def test_line_ends_and_decimals(tmp_path: Path, newline: str, decimal: str) -> None:
    frame, found = lithology(tmp_path, text(";", decimal, newline).encode())
    assert list(frame["from_m"]) == [0.0, 0.25, 1.0] and not found.has_errors
    assert any(f'decimal = "{decimal}"' in item.message for item in found) == (decimal == ",")


def test_spaces_between_columns(tmp_path: Path) -> None:
    frame, found = lithology(tmp_path, b"hole_id  from_m   to_m code\n001   0  1.5  MS\n1E5 0.25 2   FR \n")
    assert list(frame["to_m"]) == [1.5, 2.0] and list(frame["code"]) == ["MS", "FR"]
    assert not found.has_errors


def test_what_the_study_states_is_not_noted(tmp_path: Path) -> None:
    _, found = lithology(
        tmp_path, text(";", ",").encode("cp1252"), delimiter=";", decimal=",", encoding="cp1252"
    )
    assert len(found) == 0


@pytest.mark.parametrize("name", ["semicolon", ";"])
def test_separators_have_names(tmp_path: Path, name: str) -> None:
    frame, _ = lithology(tmp_path, text(";").encode(), delimiter=name)
    assert len(frame) == 3


def test_rows_keep_their_number_when_some_are_blank(tmp_path: Path) -> None:
    data = b"hole_id,from_m,to_m,code\n\nH1,0,1,a\n,,,\nH1,1,2,b\n\n\n"
    frame, found = lithology(tmp_path, data)
    assert list(frame["source_row"]) == [3, 5]
    assert [item.code for item in found] == ["rows-blank"]


def test_the_header_may_stand_lower(tmp_path: Path) -> None:
    frame, found = lithology(
        tmp_path, b"Logged by nobody\n\nhole_id,from_m,to_m,code\nH1,0,1,a\n", header_row=3
    )
    assert list(frame["source_row"]) == [4] and not found.has_errors


def test_quoted_values_may_hold_the_separator_and_line_ends(tmp_path: Path) -> None:
    frame, found = lithology(
        tmp_path, b'hole_id,from_m,to_m,code\nH1,0,1,"massive, fine\nand banded"\nH1,1,2,"5"" core"\n'
    )
    assert list(frame["code"]) == ["massive, fine\nand banded", '5" core'] and not found.has_errors


def test_a_stray_quotation_mark_is_told(tmp_path: Path) -> None:
    frame, found = lithology(tmp_path, b'hole_id,from_m,to_m,code\nH1,0,1,a\nH1,1,2,"b"c\n')
    assert len(frame) == 2
    assert [(item.code, item.row) for item in found] == [("quote-stray", 3)]


def test_a_row_of_units_under_the_header_is_recognised(tmp_path: Path) -> None:
    _, found = lithology(tmp_path, b"hole_id,from_m,to_m,code\n-,(m),(m),-\nH1,0,1,a\nH1,1,2,a\nH1,2,3,a\n")
    assert {(item.code, item.row) for item in found} == {("not-a-number", 2)}
    assert "row of units" in found[0].remedy


def test_headers_are_found_whatever_their_case(tmp_path: Path) -> None:
    frame, found = lithology(tmp_path, b"Hole ID,FROM_M,To-m,CODE\nH1,0,1,a\n")
    assert len(frame) == 1 and len(found) == 0


def test_an_unread_column_is_named(tmp_path: Path) -> None:
    _, found = lithology(tmp_path, b"hole_id,from_m,to_m,code,remark\nH1,0,1,a,x\n")
    assert [(item.code, "remark" in item.message) for item in found] == [("columns-unused", True)]


def test_the_raw_table_keeps_text(tmp_path: Path) -> None:
    path = tmp_path / "t.csv"
    path.write_text("a,b\n001,<0.5\n")
    raw, _ = read_table(TableSource(path))
    assert raw is not None and raw.column("a")[0] == "001" and raw.column("b")[0] == "<0.5"
