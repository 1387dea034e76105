"""One table through every format is one table; what is peculiar to workbooks and layers."""

from __future__ import annotations

import datetime
from pathlib import Path
from typing import Any

import geopandas as gpd
import openpyxl
import pandas as pd
import pytest
from shapely.geometry import Point

from sms_resource.loaders.drilling import load_drilling
from sms_resource.loaders.source import TableSource
from sms_resource.loaders.table import load_table

COLLARS = pd.DataFrame(
    {
        "hole_id": ["001", "1E5", "N-3"],
        "easting": [500000.5, 500010.25, 500020.0],
        "northing": [8000000.0, 8000010.0, 8000020.5],
        "elevation": [-1600.0, -1601.5, -1602.0],
        "length_m": [10.0, 12.5, None],
        "ended_in": ["sulphide", "host", None],
    }
)


def workbook(path: Path, rows: list[list[Any]], **more: list[list[Any]]) -> None:
    book = openpyxl.Workbook()
    sheet = book.active
    assert sheet is not None
    sheet.title = "Table"
    for row in rows:
        sheet.append(row)
    for name, content in more.items():
        other = book.create_sheet(name)
        for row in content:
            other.append(row)
    book.save(path)


def write(path: Path) -> None:
    if path.suffix == ".csv":
        COLLARS.to_csv(path, index=False)
    elif path.suffix == ".xlsx":
        COLLARS.to_excel(path, index=False)
    elif path.suffix == ".parquet":
        COLLARS.to_parquet(path, index=False)
    elif path.suffix == ".gpkg":
        points = [Point(x, y) for x, y in zip(COLLARS["easting"], COLLARS["northing"])]
        table = COLLARS.drop(columns=["easting", "northing"])
        gpd.GeoDataFrame(table, geometry=points, crs="EPSG:32702").to_file(path, driver="GPKG")


@pytest.mark.parametrize("suffix", [".csv", ".xlsx", ".parquet", ".gpkg"])
def test_one_table_in_every_format(tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"collars{suffix}"
    write(path)
    frame, found = load_table(TableSource(path), "collars")
    assert [item for item in found if item.severity != "note"] == []
    assert list(frame["hole_id"]) == ["001", "1E5", "N-3"]
    assert list(frame["easting"]) == [500000.5, 500010.25, 500020.0]
    assert list(frame["northing"]) == [8000000.0, 8000010.0, 8000020.5]
    assert list(frame["length_m"].fillna(-1)) == [10.0, 12.5, -1.0]
    assert list(frame["ended_in"]) == ["sulphide", "host", "unknown"]
    assert list(frame["source_row"]) == [2, 3, 4]


HEAD = ["hole_id", "from_m", "to_m", "code"]


def codes(path: Path, role: str = "lithology", **options: Any) -> list[tuple[str, int | None, str | None]]:
    _, found = load_table(TableSource(path, **options), role)
    return [(item.code, item.row, item.column) for item in found]


def test_names_shown_with_leading_zeros_keep_them(tmp_path: Path) -> None:
    path = tmp_path / "t.xlsx"
    book = openpyxl.Workbook()
    sheet = book.active
    assert sheet is not None
    sheet.append(HEAD)
    sheet.append([7, 0, 1, "a"])
    sheet["A2"].number_format = "000"
    book.save(path)
    frame, found = load_table(TableSource(path), "lithology")
    assert list(frame["hole_id"]) == ["007"] and len(found) == 0


def test_names_stored_as_numbers_are_noted(tmp_path: Path) -> None:
    path = tmp_path / "t.xlsx"
    workbook(path, [HEAD, [7, 0, 1, "a"]])
    assert codes(path) == [("identifier-number", 2, "hole_id")]


def test_numbers_stored_as_text_are_numbers(tmp_path: Path) -> None:
    path = tmp_path / "t.xlsx"
    workbook(path, [HEAD, ["H1", "0", "1.5", "a"]])
    frame, found = load_table(TableSource(path), "lithology")
    assert frame["to_m"][0] == 1.5 and len(found) == 0


def test_dates_where_numbers_or_names_should_be(tmp_path: Path) -> None:
    path = tmp_path / "t.xlsx"
    workbook(
        path,
        [HEAD, ["H1", 0, datetime.datetime(2026, 5, 1), "a"], [datetime.datetime(2026, 3, 1), 0, 1, "a"]],
    )
    assert codes(path) == [("date-in-identifier", 3, "hole_id"), ("date-in-number", 2, "to_m")]


def test_errors_of_formulas(tmp_path: Path) -> None:
    path = tmp_path / "t.xlsx"
    workbook(path, [HEAD, ["H1", 0, "#REF!", "a"]])
    assert codes(path) == [("formula-error", 2, "to_m")]


def test_formulas_without_their_values(tmp_path: Path) -> None:
    path = tmp_path / "t.xlsx"
    workbook(path, [HEAD, ["H1", 0, "=B2+1", "a"]])
    assert ("formula-not-computed", 2, None) in codes(path)


def test_cells_beside_the_header(tmp_path: Path) -> None:
    path = tmp_path / "t.xlsx"
    workbook(path, [HEAD, ["H1", 0, 1, "a", None, "stray"]])
    assert codes(path) == [("header-empty", 2, None)]


def test_a_merged_title_above_the_table(tmp_path: Path) -> None:
    path = tmp_path / "t.xlsx"
    workbook(path, [["Lithology"], HEAD, ["H1", 0, 1, "a"]])
    assert "column-missing" in {code for code, _, _ in codes(path)}
    frame, found = load_table(TableSource(path, header_row=2), "lithology")
    assert list(frame["source_row"]) == [3] and len(found) == 0


def test_blank_rows_of_a_sheet_do_not_move_the_others(tmp_path: Path) -> None:
    path = tmp_path / "t.xlsx"
    workbook(path, [HEAD, ["H1", 0, 1, "a"], [], ["H1", 1, 2, "b"]])
    frame, _ = load_table(TableSource(path), "lithology")
    assert list(frame["source_row"]) == [2, 4]


def test_sheets(tmp_path: Path) -> None:
    path = tmp_path / "t.xlsx"
    workbook(path, [HEAD, ["H1", 0, 1, "a"]], Other=[HEAD, ["H2", 0, 1, "b"]])
    assert codes(path) == [("sheet-not-named", None, None)]
    assert codes(path, sheet="Nowhere") == [("sheet-unknown", None, None)]
    frame, found = load_table(TableSource(path, sheet="Other"), "lithology")
    assert list(frame["hole_id"]) == ["H2"] and len(found) == 0


def test_an_empty_sheet(tmp_path: Path) -> None:
    path = tmp_path / "t.xlsx"
    workbook(path, [])
    assert codes(path) == [("header-missing", 1, None)]


def test_layers_of_a_table(tmp_path: Path) -> None:
    path = tmp_path / "t.gpkg"
    for name in ("a", "b"):
        frame = gpd.GeoDataFrame(
            {"hole_id": [name], "elevation": [-1.0]}, geometry=[Point(1, 2)], crs="EPSG:32702"
        )
        frame.to_file(path, driver="GPKG", layer=name)
    assert codes(path, "collars") == [("layer-not-named", None, None)]
    assert codes(path, "collars", layer="c") == [("layer-unknown", None, None)]
    table, _ = load_table(TableSource(path, layer="b"), "collars")
    assert (
        list(table["hole_id"]) == ["b"]
        and list(table["easting"]) == [1.0]
        and list(table["northing"]) == [2.0]
    )


def test_a_file_that_is_missing_says_what_lies_near(tmp_path: Path) -> None:
    (tmp_path / "collars.csv").write_text("hole_id\n")
    _, found = load_drilling(TableSource(tmp_path / "colars.csv"))
    assert found[0].code == "file-missing" and "collars.csv" in found[0].message


def test_dates_as_a_typed_column(tmp_path: Path) -> None:
    path = tmp_path / "t.parquet"
    pd.DataFrame(
        {"hole_id": ["H1"], "from_m": [0.0], "to_m": pd.to_datetime(["2026-01-01"]), "code": ["a"]}
    ).to_parquet(path)
    assert codes(path) == [("date-in-number", 2, "to_m")]
