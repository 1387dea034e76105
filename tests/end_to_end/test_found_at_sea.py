"""What a first user met, with files of his own and the written guide alone."""

from __future__ import annotations

import json
from pathlib import Path

import geopandas as gpd
import pytest
from shapely.geometry import Point

from sms_resource import load_study, run_study
from sms_resource.study import Study, StudyError
from sms_resource.workflow import Result, check_study, new_study, verify_results
from tests.end_to_end.small_study import CENTRE, CRS, SmallStudy


def chimneys(small: SmallStudy, height: float | None) -> None:
    """A chimney of 6 m width in the middle of the mound, mapped by its own column."""
    place = small.folder / "spires.gpkg"
    place.parent.mkdir(parents=True, exist_ok=True)
    shapes = gpd.GeoDataFrame({"tall": [height]}, geometry=[Point(CENTRE).buffer(3.0)], crs=CRS)
    shapes.to_file(place)
    small.toml["data"]["chimneys"] = {"file": place.name, "columns": {"height_m": "tall"}}
    small.toml["chimneys"] = {"source": "polygons"}
    domains = small.toml["domains"]
    domains["sulphide"] = ["chimney", *domains["sulphide"]]
    domains["codes"]["CH"] = "chimney"
    nearest = min(
        small.rows["collars"],
        key=lambda row: abs(row["easting"] - CENTRE[0]) + abs(row["northing"] - CENTRE[1]),
    )
    for row in small.rows["lithology"]:
        if row["hole_id"] == nearest["hole_id"] and row["from_m"] == 0:
            row["code"] = "CH"
    small.toml["density"] = {
        "method": "assigned",
        "assigned_dry_tpm3": dict.fromkeys(domains["sulphide"], 2.8),
    }


def test_polygons_of_chimneys_make_a_domain(tmp_path: Path) -> None:
    small = SmallStudy(tmp_path)
    chimneys(small, 1.5)
    result = run_study(load_study(small.write()), out=None)
    assert not result.findings.has_errors, result.findings.errors
    frame = result.block_model.frame
    volume = float((frame["volume_m3"] * frame["share_chimney"]).sum())
    # a foot of 6 m across, 1.5 m high: pi 3^2 1.5 = 42.4 m3, on cells of the surface that cut a circle roughly
    assert volume == pytest.approx(42.4, rel=0.2)


def test_a_chimney_without_a_height_is_found_by_check(tmp_path: Path) -> None:
    small = SmallStudy(tmp_path)
    chimneys(small, None)
    (said,) = [
        item for item in check_study(load_study(small.write())) if item.code == "chimney-without-height"
    ]
    assert (said.file, said.row, said.column) == ("spires.gpkg", 2, "tall")


def test_a_question_mark_of_a_new_study_is_named(tmp_path: Path) -> None:
    small = SmallStudy(tmp_path)
    small.toml["domains"]["codes"] = dict.fromkeys(small.toml["domains"]["codes"], "?")
    with pytest.raises(StudyError) as caught:
        load_study(small.write())
    (said,) = caught.value.findings.errors
    assert said.column == "domains.codes" and "no domain is named for" in said.message and said.row


def test_a_folder_is_not_called_missing(tmp_path: Path) -> None:
    small = SmallStudy(tmp_path)
    path = small.write()
    (tmp_path / "assays.csv").unlink()
    (tmp_path / "assays.csv").mkdir()
    with pytest.raises(StudyError) as caught:
        load_study(path)
    assert "a folder stands where the file of assays should be" in caught.value.findings.errors[0].message


def test_new_says_what_becomes_of_another_coordinate_system(tmp_path: Path) -> None:
    small = SmallStudy(tmp_path)
    small.write()
    outline = gpd.GeoDataFrame({"name": ["a"]}, geometry=[Point(CENTRE).buffer(20.0)], crs=CRS).to_crs(
        "EPSG:4326"
    )
    outline.to_file(tmp_path / "my_outline.geojson")
    grids = [path for path in tmp_path.iterdir() if path.suffix == ".tif"]
    made = new_study([*grids, tmp_path / "my_outline.geojson"], tmp_path / "new.toml")
    assert "# reproject = true  # DECIDE" in (tmp_path / "new.toml").read_text(encoding="utf-8")
    assert any("data.outline.reproject" in question for question in made.open_questions)


def errors_of(small: SmallStudy) -> list[tuple[str, str]]:
    """Code and text of each error of the check."""
    findings = check_study(load_study(small.path))
    return [(item.code, f"{item.message} {item.remedy}") for item in findings.errors]


def test_a_title_over_the_names_is_one_fault_with_its_remedy(tmp_path: Path) -> None:
    """A merged title used to be told as a fault a column and a fault a row."""
    import openpyxl

    small = SmallStudy(tmp_path)
    small.write()
    book = openpyxl.Workbook()
    sheet = book.active
    assert sheet is not None
    sheet["A1"] = "Assays of the cruise"
    sheet.merge_cells("A1:H1")
    for line in (tmp_path / "assays.csv").read_text(encoding="utf-8").splitlines():
        sheet.append(line.split(","))
    book.save(tmp_path / "assays.xlsx")
    header = (tmp_path / "assays.csv").read_text(encoding="utf-8").splitlines()[0].split(",")
    small.toml["data"]["assays"] |= {"file": "assays.xlsx", "columns": {name: name for name in header[:4]}}
    small.write()
    ((code, text),) = errors_of(small)
    assert code == "header-below" and "header_row = 2" in text
    small.toml["data"]["assays"]["header_row"] = 2
    small.write()
    assert errors_of(small) == []


def test_a_missing_column_of_grades_is_mapped_by_its_element(tmp_path: Path) -> None:
    """The remedy writes the key as the guide does."""
    small = SmallStudy(tmp_path)
    small.toml["data"]["assays"].setdefault("columns", {})["cu"] = "Copper"
    small.write()
    ((code, text),) = errors_of(small)
    assert code == "column-missing" and 'columns = { cu = "..." }' in text


def test_a_wrong_sign_is_told_once(tmp_path: Path) -> None:
    """Elevations that the study calls depths are not then found to lie above the sea as well."""
    small = SmallStudy(tmp_path)
    small.toml["data"]["collars"]["vertical"] = "depth"
    small.write()
    assert all(
        'vertical = "elevation"' in text for code, text in errors_of(small) if code == "elevation-sign"
    )


def test_a_code_for_nothing_is_named(tmp_path: Path) -> None:
    """1e300 is no grade: what was read as blank is spelled out."""
    small = SmallStudy(tmp_path)
    small.rows["assays"][2]["cu_pct"] = "1e300"
    (said,) = [item for item in check_study(load_study(small.write())) if item.code == "missing-code"]
    assert "1e300" in said.message and said.row == 4


def test_a_broken_grid_tells_no_path_of_the_machine(tmp_path: Path) -> None:
    small = SmallStudy(tmp_path)
    small.write()
    (grid,) = [path for path in tmp_path.iterdir() if path.suffix == ".tif"]
    grid.write_bytes(b"\\x00\\x17 junk" * 500)
    ((code, text),) = [pair for pair in errors_of(small) if pair[0].startswith("grid")]
    assert code == "grid-unreadable" and str(tmp_path) not in text and grid.name in text and ".." not in text


def test_a_metal_without_any_grade_is_found_by_check(tmp_path: Path) -> None:
    """The run used to tell it, after the body was made."""
    small = SmallStudy(tmp_path)
    for row in small.rows["assays"]:
        row["ag_gpt"] = ""
    small.write()
    ((code, text),) = errors_of(small)
    assert code == "element-blank" and "take ag out of metals.estimate" in text


def test_an_outline_over_lost_seafloor_is_found_by_check(tmp_path: Path) -> None:
    import rasterio

    small = SmallStudy(tmp_path)
    study = load_study(small.write())
    assert "outline-no-depth" not in {item.code for item in check_study(study)}
    (path,) = [path for path in tmp_path.iterdir() if path.suffix == ".tif"]
    with rasterio.open(path, "r+") as grid:
        cells = grid.read(1)
        lost = [grid.index(CENTRE[0] + shift, CENTRE[1] + shift) for shift in (-10.0, 10.0)]
        (top, bottom), (left, right) = sorted(i for i, _ in lost), sorted(j for _, j in lost)
        cells[top:bottom, left:right] = grid.nodata
        grid.write(cells, 1)
    (said,) = [item for item in check_study(load_study(small.path)) if item.code == "outline-no-depth"]
    # 20 x 20 m of a circle of radius 24 m: 400 / (pi 24^2) = 22 %
    assert said.severity == "warning" and said.message.startswith("22 %")


def test_attributes_of_a_shapefile_are_inputs(tmp_path: Path) -> None:
    """A buffer stands in the .dbf: changing it alone must not bring back what was kept with the old one."""
    small = SmallStudy(tmp_path)
    small.toml["data"]["exclusions"] = {"file": "zones.shp"}
    study = load_study_with_zone(small, 1.0)
    first = run_study(study, out=tmp_path / "results")
    assert not first.findings.has_errors
    inputs = json.loads((tmp_path / "results" / "manifest.json").read_text(encoding="utf-8"))["inputs"]
    assert {"exclusions", "exclusions zones.dbf", "exclusions zones.prj"} <= set(inputs)
    study = load_study_with_zone(small, 15.0)
    second = run_study(study, out=None)
    assert kept(second) < 0.8 * kept(first)
    assert any("zones.dbf" in cause for cause in verify_results(tmp_path / "results").causes)


def load_study_with_zone(small: SmallStudy, buffer: float) -> Study:
    """The small study with a vent in its middle, in a shapefile; only the .dbf tells its buffer."""
    path = small.write()
    zone = {"name": ["v"], "status": ["active_vent"], "buffer_m": [buffer]}
    gpd.GeoDataFrame(zone, geometry=[Point(CENTRE)], crs=CRS).to_file(small.folder / "zones.shp")
    return load_study(path)


def kept(result: Result) -> float:
    """Dry tonnes that screens leave, above no cut-off."""
    table = result.grade_tonnage
    return float(table.loc[table["proposed_class"] == "all", "dry_tonnes"].max())


def test_new_says_that_surface_samples_alone_are_no_body(tmp_path: Path) -> None:
    small = SmallStudy(tmp_path)
    small.write()
    made = new_study([tmp_path / "surface_samples.csv"], tmp_path / "new.toml")
    assert any("surface samples alone" in question for question in made.open_questions)
    made = new_study([tmp_path / "surface_samples.csv", tmp_path / "assays.csv"], tmp_path / "new.toml")
    assert not any("surface samples alone" in question for question in made.open_questions)
