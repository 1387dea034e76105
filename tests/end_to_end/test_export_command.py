"""`sms-resource export` of a run with turned blocks, each file opened again by a reader that is not ours."""

from __future__ import annotations

import json
import sqlite3
import xml.etree.ElementTree as ET
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from typer.testing import CliRunner

from sms_resource import load_study, run_study
from sms_resource.cli import app
from tests.end_to_end.small_study import CRS, SmallStudy

AZIMUTH = 25.0
OGC = "{http://www.opengis.net/ogc}"


@pytest.fixture(scope="module")
def results(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("turned")
    study = SmallStudy(folder / "study")
    study.toml["blocks"] = {"size_m": [5.0, 4.0, 2.0], "azimuth_deg": AZIMUTH}
    result = run_study(load_study(study.write()), folder / "results", threads=1)
    assert not result.findings.has_errors
    return folder / "results"


@pytest.fixture(scope="module")
def exported(results: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    out = tmp_path_factory.mktemp("exchange") / "here"
    done = CliRunner().invoke(app, ["export", str(results), "--out", str(out)])
    assert done.exit_code == 0, done.output
    return out


@pytest.fixture(scope="module")
def blocks(results: Path) -> pd.DataFrame:
    """The block table, with centres worked out here from i, j, k and the turn clockwise from north."""
    frame = pd.read_parquet(results / "block_model.parquet")
    record = json.loads((results / "layers" / "block_grid.json").read_text())
    u, v, w = ((frame[["i", "j", "k"]].to_numpy() + 0.5) * record["size"]).T
    angle = np.radians(AZIMUTH)
    x0, y0, z0 = record["origin"]
    return frame.assign(
        x=x0 + u * np.cos(angle) + v * np.sin(angle), y=y0 - u * np.sin(angle) + v * np.cos(angle), z=z0 + w
    )


def at_blocks(blocks: pd.DataFrame, points: np.ndarray, tonnes: np.ndarray) -> None:
    """Every block stands once at its place with its dry tonnes."""
    from scipy.spatial import cKDTree

    distance, row = cKDTree(blocks[["x", "y", "z"]].to_numpy()).query(points)
    assert len(points) == len(blocks) == len(np.unique(row))
    assert distance.max() < 1e-6
    np.testing.assert_allclose(tonnes, blocks["dry_tonnes"].to_numpy()[row], rtol=1e-12)


def test_vtk_reads_true_coordinates(exported: Path, blocks: pd.DataFrame) -> None:
    vtk = pytest.importorskip("vtk")
    from vtkmodules.util.numpy_support import vtk_to_numpy

    for name, make in (("vtu", vtk.vtkXMLUnstructuredGridReader), ("vti", vtk.vtkXMLImageDataReader)):
        reader = make()
        reader.SetFileName(str(exported / f"blocks.{name}"))
        reader.Update()
        centres = vtk.vtkCellCenters()
        centres.SetInputData(reader.GetOutput())
        centres.Update()
        points = vtk_to_numpy(centres.GetOutput().GetPoints().GetData())
        tonnes = vtk_to_numpy(reader.GetOutput().GetCellData().GetArray("dry_tonnes"))
        held = np.isfinite(tonnes) & (tonnes > 0)
        at_blocks(blocks, points[held], tonnes[held])


def test_omf_library_reads_the_model_and_its_layers(
    exported: Path, results: Path, blocks: pd.DataFrame
) -> None:
    omf = pytest.importorskip("omf")
    project = omf.OMFReader(str(exported / "estimate.omf")).get_project()
    parts = {element.name: element for element in project.elements}
    shape = parts["blocks"].geometry
    u, v, w = (np.cumsum(t) - 0.5 * np.asarray(t) for t in (shape.tensor_u, shape.tensor_v, shape.tensor_w))
    data = {item.name: item for item in parts["blocks"].data}
    tonnes = np.array(data["dry_tonnes"].array.array).reshape(len(u), len(v), len(w))
    i, j, k = np.nonzero(np.isfinite(tonnes) & (tonnes > 0))
    axes = (np.asarray(axis, dtype=float) for axis in (shape.axis_u, shape.axis_v, shape.axis_w))
    points = np.asarray(shape.origin) + sum(
        np.outer(c, a) for c, a in zip((u[i], v[j], w[k]), axes, strict=True)
    )
    at_blocks(blocks, points, tonnes[i, j, k])
    composites = pd.read_csv(results / "composites.csv")
    places = np.asarray(parts["composites"].geometry.origin) + np.array(
        parts["composites"].geometry.vertices.array
    )
    np.testing.assert_allclose(places, composites[["easting", "northing", "elevation"]], atol=1e-6)
    rasterio = pytest.importorskip("rasterio")
    for name in ("seafloor", "base"):
        surface = parts[name].geometry
        nodes = np.asarray(surface.origin) + np.array(surface.vertices.array)
        with rasterio.open(results / "layers" / f"{name}.tif") as raster:
            heights = np.array([value[0] for value in raster.sample(nodes[:, :2])])
        np.testing.assert_allclose(nodes[:, 2], heights, atol=2e-3)


def test_netcdf_keeps_the_climate_and_forecast_conventions(exported: Path, blocks: pd.DataFrame) -> None:
    """Read by h5py, by hand after CF 1.10 (sections 2.6, 3.1, 3.5, 4, 5.6); the checker of IOOS, strict, agrees."""
    h5py = pytest.importorskip("h5py")
    with h5py.File(exported / "blocks.nc") as data:

        def text(item, name):  # type: ignore[no-untyped-def]
            value = item.attrs[name]
            return value.decode() if isinstance(value, bytes) else str(value)

        assert text(data, "Conventions").startswith("CF-1.")
        assert text(data["easting"], "standard_name") == "projection_x_coordinate"
        assert text(data["northing"], "standard_name") == "projection_y_coordinate"
        assert text(data["elevation"], "positive") == "up" and text(data["elevation"], "units") == "m"
        mapping = data[text(data["dry_tonnes"], "grid_mapping")]
        assert text(mapping, "grid_mapping_name") == "transverse_mercator"
        assert {"easting", "northing"} <= set(text(data["dry_tonnes"], "coordinates").split())
        assert len(text(data["domain"], "flag_meanings").split()) == len(data["domain"].attrs["flag_values"])
        for name in ("dry_tonnes", "volume_m3", "cu_pct"):
            assert text(data[name], "units") and text(data[name], "long_name")
        tonnes = data["dry_tonnes"][:]
        k, j, i = np.nonzero(np.isfinite(tonnes) & (tonnes > 0))
        points = np.column_stack(
            [data["easting"][:][j, i], data["northing"][:][j, i], data["elevation"][:][k]]
        )
        at_blocks(blocks, points, tonnes[k, j, i])


def test_rasters_of_a_turned_model_lie_where_the_blocks_lie(exported: Path, blocks: pd.DataFrame) -> None:
    rasterio = pytest.importorskip("rasterio")
    whole = blocks.groupby(["i", "j"]).agg(x=("x", "first"), y=("y", "first"), t=("dry_tonnes", "sum"),
                                           v=("volume_m3", "sum")).reset_index()  # fmt: skip
    for name, column, total in (("dry_tonnes_per_m2", "t", "dry_tonnes"), ("thickness_m", "v", "volume_m3")):
        with rasterio.open(exported / "plan" / f"{name}.tif") as raster:
            assert raster.crs.to_string() == CRS and np.isnan(raster.nodata)
            values = np.array([value[0] for value in raster.sample(whole[["x", "y"]].to_numpy())])
            np.testing.assert_allclose(values, whole[column] / 20.0, rtol=1e-5)
            image = raster.read(1, masked=True)
            assert image.count() == len(whole)
            pixel = abs(raster.transform.determinant)
            assert pixel == pytest.approx(20.0)
            assert float(image.sum()) * pixel == pytest.approx(blocks[total].sum(), rel=1e-6)
            # A pixel's diagonal runs along the turned axes: a north-up raster would have zeros here.
            assert raster.transform.b == pytest.approx(-np.sin(np.radians(AZIMUTH)) * 4.0)


def test_geopackage_is_one_and_its_styles_fit_its_layers(exported: Path, blocks: pd.DataFrame) -> None:
    """OGC 12-128r15: header, contents, reference systems, extents; QML and SLD name columns that there are."""
    gpd = pytest.importorskip("geopandas")
    path = exported / "layers.gpkg"
    with sqlite3.connect(f"file:{path}?mode=ro", uri=True) as base:
        assert base.execute("PRAGMA application_id").fetchone()[0] == 0x47504B47  # "GPKG"
        assert base.execute("PRAGMA user_version").fetchone()[0] >= 10200
        assert base.execute("PRAGMA integrity_check").fetchone() == ("ok",)
        assert base.execute("PRAGMA foreign_key_check").fetchall() == []
        systems = {row[0] for row in base.execute("SELECT srs_id FROM gpkg_spatial_ref_sys")}
        assert {-1, 0, 4326, 32702} <= systems
        rows = base.execute(
            "SELECT table_name, data_type, min_x, min_y, max_x, max_y, srs_id FROM gpkg_contents"
        ).fetchall()
        layers = {row[0]: row for row in rows}
        assert set(layers) == {
            "block_plan",
            "outline",
            "exclusions",
            "holes",
            "collars",
            "composites",
            "layer_styles",
        }
        assert layers["layer_styles"][1] == "attributes"
        styles = base.execute(
            "SELECT f_table_name, f_geometry_column, styleQML, styleSLD FROM layer_styles"
        ).fetchall()
        assert {row[0] for row in styles} == set(layers) - {"layer_styles"}
        for name, geometry, qml, sld in styles:
            columns = {row[1] for row in base.execute(f'PRAGMA table_info("{name}")')}
            assert geometry in columns
            renderer = ET.fromstring(qml.partition(">")[2]).find("renderer-v2")
            named = {renderer.get("attr")} - {None} | {
                item.text for item in ET.fromstring(sld).iter(f"{OGC}PropertyName")
            }
            assert named <= columns
            ranges, symbols = renderer.findall(".//range"), renderer.findall(".//symbol")
            assert {item.get("symbol") for item in ranges} <= {item.get("name") for item in symbols}
            if ranges:  # the classes cover every value
                low, high = float(ranges[0].get("lower")), float(ranges[-1].get("upper"))
                column = renderer.get("attr")
                outside = f'SELECT count(*) FROM "{name}" WHERE "{column}" NOT BETWEEN ? AND ?'
                assert base.execute(outside, (low - 1e-9, high + 1e-9)).fetchone() == (0,)
    for name in set(layers) - {"layer_styles"}:
        frame = gpd.read_file(path, layer=name)
        assert frame.crs.to_string() == CRS and layers[name][6] == 32702
        np.testing.assert_allclose(frame.total_bounds, layers[name][2:6])
    plan = gpd.read_file(path, layer="block_plan")
    assert plan["dry_tonnes"].sum() == pytest.approx(blocks["dry_tonnes"].sum(), rel=1e-9)
    np.testing.assert_allclose(plan.area, 20.0)
    corner = np.array(plan.geometry.iloc[0].exterior.coords)
    along = corner[1] - corner[0]
    assert np.degrees(np.arctan2(along[0], along[1])) == pytest.approx(
        90.0 + AZIMUTH
    )  # i runs east, turned clockwise
    assert len(gpd.read_file(path, layer="collars")) == 15
    assert gpd.read_file(path, layer="exclusions")["status"].tolist() == ["active_vent"]


def test_tables_say_their_units(exported: Path, blocks: pd.DataFrame) -> None:
    pq = pytest.importorskip("pyarrow.parquet")
    table = pq.read_table(exported / "blocks.parquet")
    units = {field.name: (field.metadata or {}).get(b"unit") for field in table.schema}
    assert units["dry_tonnes"] == b"t dry" and units["au_gpt"] == b"g/t" and units["easting"] == b"m"
    assert np.asarray(table["dry_tonnes"]).sum() == pytest.approx(blocks["dry_tonnes"].sum(), rel=1e-12)
    with (exported / "blocks.csv").open(encoding="utf-8", newline="") as stream:
        import csv

        rows = list(csv.reader(stream))
    assert "dry_tonnes [t dry]" in rows[0] and "au_gpt [g/t]" in rows[0]
    column = rows[0].index("dry_tonnes [t dry]")
    assert sum(float(row[column]) for row in rows[1:]) == pytest.approx(blocks["dry_tonnes"].sum(), rel=1e-9)


def test_formats_and_folders_that_are_not(results: Path, tmp_path: Path) -> None:
    one = CliRunner().invoke(app, ["export", str(results), "--out", str(tmp_path / "a"), "--format", "vti"])
    assert one.exit_code == 0 and [path.name for path in (tmp_path / "a").iterdir()] == ["blocks.vti"]
    for arguments in ((str(tmp_path / "none"),), (str(results), "--format", "fish")):
        done = CliRunner().invoke(app, ["export", *arguments, "--out", str(tmp_path / "b")])
        assert done.exit_code != 0 and "Traceback" not in done.output
