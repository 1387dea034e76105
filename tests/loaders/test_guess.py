"""What files are is guessed from their names, headers and values, and each guess has its reason."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from sms_resource.loaders.drilling import load_drilling
from sms_resource.loaders.guess import GuessedStudy, guess_study
from sms_resource.loaders.source import TableSource
from tests.loaders.small_study import ELEMENTS, Study
from tests.loaders.test_grids import geotiff, text_grid

USUAL = {
    "collars": {"hole_id": "BHID", "easting": "UTM_E", "northing": "UTM_N", "elevation": "Water Depth (m)",
                "length_m": "EOH", "ended_in": "Ended in"},
    "surveys": {"hole_id": "Hole", "depth_m": "At", "azimuth": "Azi", "dip": "Dip (deg)"},
    "runs": {"hole_id": "HOLE-ID", "from_m": "Depth From", "to_m": "Depth To", "recovered_length_m": "Core recovered [m]"},
    "lithology": {"hole_id": "hole", "from_m": "Top", "to_m": "Bottom", "code": "Rock type"},
    "assays": {"hole_id": "HoleID", "sample_id": "Sample No", "from_m": "From", "to_m": "To", "cu_pct": "Cu %",
               "zn_pct": "Zn", "au_gpt": "Au_ppb", "ag_gpt": "Silver g/t"},
    "densities": {"hole_id": "HoleID", "wet_density_tpm3": "Wet bulk density (t/m3)", "dry_density_tpm3": "Dry density"},
    "surface_samples": {"sample_id": "Sample", "sample_type": "Type", "easting": "X", "northing": "Y", "elevation": "Z"},
    "dredges": {"dredge_id": "Dredge", "start_easting": "Start_E", "start_northing": "Start_N", "end_easting": "End_E",
                "end_northing": "End_N"},
    "laboratory": {"kind": "QC type", "value": "Result", "original_sample_id": "Duplicate of", "element": "Analyte"},
}  # fmt: skip


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    study = Study(tmp_path)
    study.rename = USUAL
    for row in study.rows["collars"]:
        row["elevation"] = -row["elevation"]
    study.write()
    study._write_space()
    (tmp_path / "base_points.csv").rename(tmp_path / "base_picks.csv")
    return tmp_path


def test_roles_columns_and_units(folder: Path) -> None:
    study = guess_study([folder])
    roles = study.by_role()
    assert set(roles) == set(USUAL) | {"bathymetry", "outline", "exclusions", "base_points"}
    for role, columns in USUAL.items():
        found = roles[role].column_map
        for name, header in columns.items():
            key = name.split("_")[0] if name in ("cu_pct", "zn_pct", "au_gpt", "ag_gpt") else name
            assert found[key] == header, (role, name)
        assert roles[role].missing == ()
    assert roles["assays"].unit_map == {"cu": "%", "zn": "%", "au": "ppb", "ag": "g/t"}
    assert study.elements == ("cu", "zn", "au", "ag")
    assert study.others == ()


def test_how_sure_each_guess_is(folder: Path) -> None:
    assays = guess_study([folder]).by_role()["assays"]
    sure = {guess.key: guess.confidence for guess in assays.units}
    assert sure == {"cu": "sure", "zn": "doubtful", "au": "sure", "ag": "sure"}


def test_depths_are_told_from_elevations(folder: Path) -> None:
    roles = guess_study([folder]).by_role()
    assert roles["collars"].form_map == {"vertical": "depth"}
    assert (
        "vertical" not in roles["surface_samples"].form_map and "vertical" not in roles["bathymetry"].form_map
    )


def test_the_system_comes_from_the_files(folder: Path) -> None:
    crs = guess_study([folder]).crs
    assert crs is not None and (crs.value, crs.confidence) == ("EPSG:32702", "sure")


def test_every_guess_has_a_sentence(folder: Path) -> None:
    sentences = guess_study([folder]).sentences()
    assert len(sentences) > 60
    assert all("guessed because" in sentence for sentence in sentences)


def test_a_guessed_source_can_be_read(folder: Path) -> None:
    roles = guess_study([folder]).by_role()
    sources = {
        role: TableSource(roles[role].path, columns=roles[role].column_map, units=roles[role].unit_map,
                          vertical=roles[role].form_map.get("vertical", "elevation"))  # type: ignore[arg-type]
        for role in ("collars", "surveys", "runs", "lithology", "assays", "densities")
    }  # fmt: skip
    drill, found = load_drilling(**sources, elements=ELEMENTS)
    assert not found.has_errors
    assert (drill.collars["elevation"] < 0).all()
    assert drill.assays["au_gpt"].median() == pytest.approx(1.75 / 1000)


def test_two_grids_and_a_base(tmp_path: Path) -> None:
    geotiff(tmp_path / "wide.tif")
    text_grid(tmp_path / "fine.asc", True)
    geotiff(tmp_path / "geophysical_base.tif")
    study = guess_study([tmp_path])
    roles = study.by_role()
    assert (
        roles["bathymetry"].path.name == "wide.tif" and roles["base_grid"].path.name == "geophysical_base.tif"
    )
    assert [(path.name, "fits better" in why) for path, why in study.others] == [("fine.asc", True)]


def test_a_grid_in_degrees_suggests_its_zone(tmp_path: Path) -> None:
    from rasterio.transform import from_origin

    geotiff(tmp_path / "g.tif", crs="EPSG:4326", transform=from_origin(-171.0, -18.0, 1e-5, 1e-5))
    crs = guess_study([tmp_path / "g.tif"]).crs
    assert crs is not None and (crs.value, crs.confidence) == ("EPSG:32702", "doubtful")


def test_a_grid_of_depths(tmp_path: Path) -> None:
    geotiff(tmp_path / "g.tif", np.full((20, 30), 1600.0))
    assert guess_study([tmp_path]).by_role()["bathymetry"].form_map["vertical"] == "depth"


def test_text_forms_and_sheets(tmp_path: Path) -> None:
    import openpyxl

    (tmp_path / "surveys.csv").write_bytes(
        "Hole;Depth;Azimuth;Dip\nH1;0,5;10,5;-89,5\nH1;5,5;10,5;-89\n".encode("utf-16")
    )
    book = openpyxl.Workbook()
    first = book.active
    assert first is not None
    first.append(["notes"])
    sheet = book.create_sheet("Logs")
    sheet.append(["Hole", "From", "To", "Lithology"])
    sheet.append(["H1", 0, 1, "MS"])
    book.save(tmp_path / "logs.xlsx")
    roles = guess_study([tmp_path]).by_role()
    assert roles["surveys"].form_map == {"delimiter": ";", "decimal": ",", "encoding": "utf-16"}
    assert roles["lithology"].form_map == {"sheet": "Logs"}


def test_a_title_above_the_header(tmp_path: Path) -> None:
    (tmp_path / "surveys.csv").write_text("Surveys of nobody\n\nHole,Depth,Azimuth,Dip\nH1,0,10,-89\n")
    assert guess_study([tmp_path]).by_role()["surveys"].form_map == {"header_row": "3"}


@pytest.mark.parametrize(
    ("name", "data", "why"),
    [
        ("broken.csv", b"\x00\x01\x02" * 50, "binary"),
        ("empty.csv", b"", "no content"),
        ("prices.csv", b"year,price\n2026,4\n", "fit no role"),
        ("broken.tif", b"II*\x00 nothing", "cannot be read"),
        ("broken.gpkg", b"SQLite format 3\x00 nothing", "no layer"),
        ("broken.xlsx", b"PK\x03\x04 nothing", "fits a role"),
        ("notes.md", b"# notes", "not looked at"),
    ],
)
def test_what_has_no_role_is_named(tmp_path: Path, name: str, data: bytes, why: str) -> None:
    (tmp_path / name).write_bytes(data)
    study = guess_study([tmp_path])
    assert study.files == () and study.crs is None
    assert [(path.name, why in reason) for path, reason in study.others] == [(name, True)]
    assert study.sentences()


def test_nothing_gives_nothing(tmp_path: Path) -> None:
    assert guess_study([]) == GuessedStudy() == guess_study([tmp_path])
    study = guess_study([tmp_path / "nowhere.csv"])
    assert "no such file" in study.others[0][1]


def test_names_that_nearly_fit_are_doubtful(tmp_path: Path) -> None:
    (tmp_path / "surveys.csv").write_text("hole_id,depth_m,azimut,dip\nH1,0,10,-89\n")
    guess = next(g for g in guess_study([tmp_path]).by_role()["surveys"].columns if g.key == "azimuth")
    assert (guess.value, guess.confidence) == ("azimut", "doubtful")


def test_chimneys_are_told_from_an_outline(tmp_path: Path) -> None:
    from shapely.geometry import box

    from tests.loaders.test_boundaries import save

    save(tmp_path / "outline.gpkg", [box(0, 0, 100, 100)])
    save(tmp_path / "chimneys.gpkg", [box(10, 10, 14, 14)], name=["a"], height=[7.0])
    study = guess_study([tmp_path])
    chimneys = study.by_role()["chimneys"]
    assert chimneys.column_map == {"name": "name", "height_m": "height"} and chimneys.missing == ()
    assert study.by_role()["outline"].path.name == "outline.gpkg" and study.others == ()


def test_a_band_of_uncertainty_is_found_by_its_name(tmp_path: Path) -> None:
    import rasterio

    cells = np.full((2, 20, 30), -1600.0)
    cells[1] = 0.2
    geotiff(tmp_path / "g.tif", cells)
    assert "uncertainty_band" not in guess_study([tmp_path]).by_role()["bathymetry"].form_map
    with rasterio.open(tmp_path / "g.tif", "r+") as grid:
        grid.descriptions = ("elevation", "Uncertainty")
    assert guess_study([tmp_path]).by_role()["bathymetry"].form_map["uncertainty_band"] == "2"


@pytest.mark.parametrize(("depth", "length"), [("12.5", "Depth"), ("1650", None)])
def test_depth_beside_an_elevation_may_be_a_length(tmp_path: Path, depth: str, length: str | None) -> None:
    text = f"HoleID,East,North,RL,Depth\nH1,1,2,-1650,{depth}\nH2,1,2,-1650,{depth}\n"
    (tmp_path / "collars.csv").write_text(text)
    columns = guess_study([tmp_path]).by_role()["collars"].columns
    found = {guess.key: (guess.value, guess.confidence) for guess in columns}
    assert found["elevation"] == ("RL", "likely")
    assert found.get("length_m") == ((length, "doubtful") if length else None)
