"""Outlines, zones and class overrides."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import geopandas as gpd
import pyproj
import pytest
from shapely.geometry import LineString, MultiPolygon, Point, Polygon

from sms_resource.loaders.boundaries import (
    LayerSource,
    load_chimneys,
    load_exclusions,
    load_outline,
    load_overrides,
)

CRS = "EPSG:32702"
SQUARE = Polygon([(500000, 8000000), (500100, 8000000), (500100, 8000100), (500000, 8000100)])


def save(
    path: Path, shapes: list[Any], crs: str | None = CRS, layer: str | None = None, **columns: Any
) -> Path:
    frame = gpd.GeoDataFrame(columns, geometry=shapes, crs=crs)
    frame.to_file(path, **({"layer": layer} if layer else {}))
    return path


def test_the_name_of_an_outline_may_be_mapped_and_an_unknown_column_is_an_error(tmp_path: Path) -> None:
    path = save(tmp_path / "o.gpkg", [SQUARE], label=["A"])
    outline, found = load_outline(LayerSource(path, crs=CRS, columns={"name": "label"}))
    assert outline is not None and list(outline["name"]) == ["A"] and not found.errors
    _, found = load_outline(LayerSource(path, crs=CRS, columns={"name": "lable"}))
    assert [(item.code, item.column) for item in found.errors] == [("column-missing", "lable")]
    _, found = load_outline(LayerSource(path, crs=CRS, columns={"colour": "label"}))
    assert [item.code for item in found.errors] == ["mapping-unknown"]


@pytest.mark.parametrize("suffix", [".gpkg", ".shp", ".geojson", ".fgb"])
def test_an_outline_in_every_format(tmp_path: Path, suffix: str) -> None:
    path = save(tmp_path / f"o{suffix}", [SQUARE], name=["mound"])
    outline, found = load_outline(LayerSource(path, crs=CRS))
    assert outline is not None, list(found)
    assert len(found) == 0
    assert outline.geometry.area.sum() == pytest.approx(10_000.0)
    assert list(outline["name"]) == ["mound"] and list(outline["source_row"]) == [2]
    assert outline.crs == CRS


def test_heights_are_left_out(tmp_path: Path) -> None:
    solid = Polygon([(x, y, -1600.0) for x, y in SQUARE.exterior.coords])
    outline, _ = load_outline(LayerSource(save(tmp_path / "o.gpkg", [solid]), crs=CRS))
    assert outline is not None and not outline.geometry.iloc[0].has_z


def test_several_parts_and_layers(tmp_path: Path) -> None:
    path = save(tmp_path / "o.gpkg", [SQUARE], layer="a")
    far = Polygon([(x + 500, y) for x, y in SQUARE.exterior.coords])
    save(path, [MultiPolygon([SQUARE, far])], layer="b")
    outline, found = load_outline(LayerSource(path, crs=CRS))
    assert outline is None and [item.code for item in found] == ["layer-not-named"]
    outline, found = load_outline(LayerSource(path, crs=CRS, layer="b"))
    assert outline is not None and outline.geometry.area.sum() == pytest.approx(20_000.0)
    outline, found = load_outline(LayerSource(path, crs=CRS, layer="c"))
    assert outline is None and [item.code for item in found] == ["layer-unknown"]


def test_reprojection_on_request(tmp_path: Path) -> None:
    to_degrees = pyproj.Transformer.from_crs(CRS, "EPSG:4326", always_xy=True)
    degrees = Polygon([to_degrees.transform(x, y) for x, y in SQUARE.exterior.coords])
    path = save(tmp_path / "o.gpkg", [degrees], "EPSG:4326")
    outline, found = load_outline(LayerSource(path, crs=CRS))
    assert outline is None and [item.code for item in found] == ["crs-different"]
    outline, found = load_outline(LayerSource(path, crs=CRS, reproject=True))
    assert outline is not None and [item.code for item in found] == ["layer-reprojected"]
    assert outline.geometry.iloc[0].symmetric_difference(SQUARE).area < 0.01


def test_the_system_on_the_word_of_the_study(tmp_path: Path) -> None:
    path = save(tmp_path / "o.gpkg", [SQUARE], None)
    outline, found = load_outline(LayerSource(path, crs=CRS))
    assert outline is None and [item.code for item in found] == ["crs-missing"]
    outline, found = load_outline(LayerSource(path, crs=CRS, declared_crs=CRS))
    assert outline is not None and len(found) == 0


def test_zones_of_all_shapes(tmp_path: Path) -> None:
    path = save(
        tmp_path / "z.gpkg",
        [SQUARE, Point(500010, 8000010), LineString([(500000, 8000000), (500050, 8000000)])],
        zone=["a", "b", None],
        state=["Set-aside", "Active Vent", "cable"],
        wide=[None, 50.0, 25.0],
    )
    columns = {"name": "zone", "status": "state", "buffer_m": "wide"}
    zones, found = load_exclusions(LayerSource(path, crs=CRS, columns=columns))
    assert zones is not None and len(found) == 0
    assert list(zones["status"]) == ["set_aside", "active_vent", "cable"]
    assert list(zones["buffer_m"]) == [0.0, 50.0, 25.0]
    assert list(zones["name"]) == ["a", "b", ""]


def test_a_mapping_of_no_column(tmp_path: Path) -> None:
    path = save(tmp_path / "z.gpkg", [SQUARE], status=["tenure"])
    _, found = load_exclusions(LayerSource(path, crs=CRS, columns={"colour": "status"}))
    assert [item.code for item in found] == ["mapping-unknown"]


def test_overrides_must_be_owned(tmp_path: Path) -> None:
    columns = {
        "class": ["Inferred", "Indicated"],
        "reason": ["few holes", ""],
        "by": ["A. Person", "A. Person"],
    }
    path = save(tmp_path / "c.gpkg", [SQUARE, SQUARE], **columns)
    frame, found = load_overrides(LayerSource(path, crs=CRS))
    assert frame is not None and list(frame["class"]) == ["Inferred", "Indicated"]
    assert [(item.code, item.row, item.column) for item in found] == [("override-incomplete", 3, "reason")]
    _, found = load_overrides(
        LayerSource(save(tmp_path / "d.gpkg", [SQUARE], reason=["x"], by=["y"]), crs=CRS)
    )
    assert [(item.code, item.column) for item in found] == [("column-missing", "class")]


def test_an_empty_layer(tmp_path: Path) -> None:
    path = tmp_path / "o.gpkg"
    save(path, [SQUARE])
    gpd.read_file(path).iloc[:0].to_file(path)
    outline, found = load_outline(LayerSource(path, crs=CRS))
    assert outline is None and [item.code for item in found] == ["layer-empty"]


def test_a_table_is_no_layer(tmp_path: Path) -> None:
    (tmp_path / "o.csv").write_text("a,b\n1,2\n")
    outline, found = load_outline(LayerSource(tmp_path / "o.csv", crs=CRS))
    assert outline is None and [item.code for item in found] == ["layer-empty"]


def test_chimneys_keep_their_height(tmp_path: Path) -> None:
    far = Polygon([(x + 500, y) for x, y in SQUARE.exterior.coords])
    path = save(tmp_path / "c.gpkg", [SQUARE, far], name=["a", None], height=[7.5, 12.0])
    chimneys, found = load_chimneys(LayerSource(path, crs=CRS, columns={"height_m": "height"}))
    assert chimneys is not None and not len(found)
    assert list(chimneys["height_m"]) == [7.5, 12.0] and list(chimneys["name"]) == ["a", ""]


@pytest.mark.parametrize(
    ("heights", "code", "row"),
    [
        ([7.5, None], "chimney-without-height", 3),
        ([0.0, 2.0], "chimney-without-height", 2),
        ([7.5, 1e6], "chimney-too-high", 3),
        ([61.0, 7.5], "chimney-high", 2),
        (["7.5", "tall"], "not-a-number", 3),
    ],
)
def test_a_chimney_without_a_height_is_named(tmp_path: Path, heights: list[Any], code: str, row: int) -> None:
    path = save(tmp_path / "c.gpkg", [SQUARE, SQUARE], height_m=heights)
    _, found = load_chimneys(LayerSource(path, crs=CRS))
    assert (code, row, "height_m") in [(item.code, item.row, item.column) for item in found]
    assert bool(found.errors) == (code != "chimney-high")


def test_chimneys_that_are_no_polygons_or_have_no_column(tmp_path: Path) -> None:
    points = save(tmp_path / "p.gpkg", [Point(500010, 8000010)], height_m=[3.0])
    chimneys, found = load_chimneys(LayerSource(points, crs=CRS))
    assert chimneys is None and [item.code for item in found] == ["chimney-not-polygon"]
    chimneys, found = load_chimneys(LayerSource(save(tmp_path / "n.gpkg", [SQUARE], high=[3.0]), crs=CRS))
    assert chimneys is None and [item.code for item in found] == ["column-missing"]


def test_an_override_to_a_class_that_there_is_not(tmp_path: Path) -> None:
    path = save(
        tmp_path / "k.gpkg", [SQUARE] * 2, **{"class": ["Indicated", "sure"], "reason": "r", "by": "A"}
    )
    _, found = load_overrides(LayerSource(path, crs=CRS))
    assert [(item.code, item.row) for item in found] == [("override-class", 3)]
