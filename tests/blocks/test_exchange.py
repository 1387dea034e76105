"""Round trips of every format, what independent readers make of the files, and errors that name the file."""

from __future__ import annotations

import itertools
import json
import sqlite3
import xml.etree.ElementTree as ElementTree
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sms_resource.blocks import (
    exchange,
    exchange_common,
    exchange_gis,
    exchange_netcdf,
    exchange_omf,
    exchange_plan,
    exchange_style,
    exchange_tables,
    exchange_vtk,
)
from sms_resource.blocks.exchange_common import ExchangeError, bare, column_unit, header
from sms_resource.blocks.grid import BlockGrid
from sms_resource.blocks.model import BlockModel
from tests.blocks import exchange_model as make

WRITERS = {
    "blocks.parquet": (exchange_tables.write_parquet, exchange_tables.read_parquet),
    "blocks.csv": (exchange_tables.write_csv, exchange_tables.read_csv),
    "blocks.vtu": (exchange_vtk.write_vtu, exchange_vtk.read_vtk),
    "blocks.vti": (exchange_vtk.write_vti, exchange_vtk.read_vtk),
    "blocks.nc": (exchange_netcdf.write_netcdf, exchange_netcdf.read_netcdf),
    "blocks.omf": (lambda model, path: exchange_omf.write_omf(path, model), exchange_omf.read_omf),
}


def assert_same(got: BlockModel, wanted: BlockModel, name: str) -> None:
    assert got.crs == wanted.crs
    assert got.grid == wanted.grid
    assert set(got.frame) == set(wanted.frame)
    for column in wanted.frame:
        a, b = got.frame[column], wanted.frame[column]
        if exchange_common.is_number(b):
            if name.endswith(".csv"):
                np.testing.assert_allclose(a.to_numpy(float), b.to_numpy(float), rtol=1e-9, err_msg=column)
            elif column in ("easting", "northing", "elevation"):
                np.testing.assert_allclose(a, b, rtol=0, atol=1e-8, err_msg=column)
            else:
                np.testing.assert_array_equal(a.to_numpy(), b.to_numpy(), err_msg=column)
                assert a.dtype == b.dtype, column
        else:
            # An empty text comes back from a text table as missing: CSV cannot tell the two.
            assert a.astype(object).where(a.notna(), "").astype(str).tolist() == b.astype(str).tolist(), (
                column
            )


@pytest.mark.parametrize("azimuth", [0.0, 27.0, -64.0])
@pytest.mark.parametrize("name", WRITERS)
def test_round_trip(tmp_path: Path, name: str, azimuth: float) -> None:
    write, read = WRITERS[name]
    model = make.small_model(azimuth)
    write(model, tmp_path / name)
    assert_same(read(tmp_path / name), model, name)


@pytest.mark.parametrize("name", WRITERS)
def test_no_block_is_refused_with_a_remedy(tmp_path: Path, name: str) -> None:
    with pytest.raises(ExchangeError, match="no block to write") as caught:
        WRITERS[name][0](make.empty(make.small_model()), tmp_path / name)
    assert caught.value.finding.code == "exchange-empty" and caught.value.finding.remedy
    assert not (tmp_path / name).exists()


@pytest.mark.parametrize("content", [b"", b"not such a file \xff\x00" * 40])
@pytest.mark.parametrize("name", WRITERS)
def test_broken_file_is_named(
    tmp_path: Path, name: str, content: bytes, capfd: pytest.CaptureFixture[str]
) -> None:
    path = tmp_path / name
    path.write_bytes(content)
    with pytest.raises(ExchangeError, match=name) as caught:
        WRITERS[name][1](path)
    assert caught.value.finding.code in ("exchange-unreadable", "exchange-no-grid")
    assert caught.value.finding.file == str(path)
    assert capfd.readouterr().err == ""  # nothing of the library's own complaints


@pytest.mark.parametrize("name", WRITERS)
def test_cut_file_is_named(tmp_path: Path, name: str) -> None:
    write, read = WRITERS[name]
    write(make.small_model(), tmp_path / name)
    whole = (tmp_path / name).read_bytes()
    (tmp_path / name).write_bytes(whole[: len(whole) // 2])
    if name.endswith(".csv"):  # half a table of text is a table, with a last row that is cut
        (tmp_path / name).write_bytes(whole[: whole.rfind(b"\n", 0, len(whole) // 2) + 3])
    with pytest.raises(ExchangeError, match=name):
        read(tmp_path / name)


@pytest.mark.parametrize("name", WRITERS)
def test_missing_file(tmp_path: Path, name: str) -> None:
    with pytest.raises(ExchangeError, match="no such file"):
        WRITERS[name][1](tmp_path / name)


def test_index_outside_grid_and_double_rows_are_refused(tmp_path: Path) -> None:
    model = make.small_model()
    outside = model.frame.copy()
    outside.loc[0, "i"] = 99
    with pytest.raises(ExchangeError, match="outside the grid"):
        exchange_tables.write_parquet(model.with_frame(outside), tmp_path / "a.parquet")
    double = pd.concat([model.frame, model.frame.iloc[:1]])
    with pytest.raises(ExchangeError, match="same block"):
        exchange_vtk.to_pyvista(model.with_frame(double))
    with pytest.raises(ExchangeError, match="no column k"):
        exchange_gis.to_geodataframe(model.with_frame(model.frame.drop(columns="k")))


def test_huge_boxes_are_refused_before_memory_is_taken(tmp_path: Path) -> None:
    grid = BlockGrid((0, 0, 0), (1, 1, 1), (9000, 9000, 900))
    frame = make.small_model().frame.iloc[:2].assign(i=[0, 8999], j=[0, 8999], k=[0, 899])
    model = BlockModel(grid, frame, make.CRS)
    for write in (exchange_vtk.to_image, exchange_netcdf.to_xarray):
        with pytest.raises(ExchangeError, match="72,900,000,000 cells"):
            write(model)
    with pytest.raises(ExchangeError, match="every cell"):
        exchange_omf.write_omf(tmp_path / "a.omf", model)
    assert exchange_vtk.to_pyvista(model).n_cells == 2  # the sparse form does not care


def test_csv_titles_carry_units(tmp_path: Path) -> None:
    exchange_tables.write_csv(make.small_model(), tmp_path / "b.csv")
    titles = (tmp_path / "b.csv").read_text(encoding="utf-8").splitlines()[0].split(",")
    assert {"easting [m]", "cu_pct [%]", "au_gpt [g/t]", "dry_tonnes [t dry]", "wet_tonnes [t wet]", "domain",
            "dry_density_tpm3 [t dry/m3]", "cu_pct_variance [(%)^2]", "i [1]"} <= set(titles)  # fmt: skip
    assert bare(header("volume_m3", pd.Series([1.0]))) == "volume_m3"


def test_csv_that_disagrees_with_its_grid(tmp_path: Path) -> None:
    exchange_tables.write_csv(make.small_model(), tmp_path / "b.csv")
    record = json.loads((tmp_path / "b.grid.json").read_text())
    record["azimuth"] += 90
    (tmp_path / "b.grid.json").write_text(json.dumps(record))
    with pytest.raises(ExchangeError, match="disagree"):
        exchange_tables.read_csv(tmp_path / "b.csv")
    (tmp_path / "b.grid.json").unlink()
    with pytest.raises(ExchangeError, match="where its block grid stands"):
        exchange_tables.read_csv(tmp_path / "b.csv")


def test_parquet_schema_carries_units_and_a_run_folder_needs_no_metadata(tmp_path: Path) -> None:
    import pyarrow.parquet as pq

    model = make.small_model()
    exchange_tables.write_parquet(model, tmp_path / "b.parquet")
    schema = pq.read_schema(tmp_path / "b.parquet")
    assert schema.field("wet_tonnes").metadata[b"unit"] == b"t wet"
    model.frame.to_parquet(tmp_path / "block_model.parquet", index=False)  # as a run writes it
    (tmp_path / "layers").mkdir()
    record = {**model.grid.record(), "crs": model.crs}
    (tmp_path / "layers" / "block_grid.json").write_text(json.dumps(record))
    assert exchange_tables.read_parquet(tmp_path / "block_model.parquet").grid == model.grid


@pytest.mark.parametrize("azimuth", [0.0, 27.0])
def test_vtk_geometry_against_vtk_itself(azimuth: float) -> None:
    """Volumes, centres and locations are those that VTK computes from the cells."""
    model = make.small_model(azimuth)
    mesh = exchange_vtk.to_pyvista(model)
    assert mesh.points.dtype == np.float64
    sizes = mesh.compute_cell_sizes(length=False, area=False)["Volume"]
    np.testing.assert_allclose(sizes, model.grid.block_volume_m3, rtol=1e-6)
    places = model.frame[["easting", "northing", "elevation"]].to_numpy()
    np.testing.assert_allclose(mesh.cell_centers().points, places, atol=1e-6)
    image = exchange_vtk.to_image(model)
    cells = [image.find_containing_cell(place) for place in places]
    np.testing.assert_array_equal(np.asarray(image["volume_m3"])[cells], model.frame["volume_m3"])
    assert int(np.asarray(image["inside"]).sum()) == len(model)
    local = exchange_vtk.to_pyvista(model, origin=model.grid.origin)
    np.testing.assert_allclose(local.points + model.grid.origin, mesh.points, atol=1e-6)


def test_vtu_is_read_by_another_library(tmp_path: Path) -> None:
    """The file as plain pyvista reads it, without this module."""
    import pyvista as pv

    model = make.small_model()
    exchange_vtk.write_vtu(model, tmp_path / "b.vtu")
    mesh = pv.read(tmp_path / "b.vtu")
    assert mesh.n_cells == len(model) and mesh.points.dtype == np.float64
    np.testing.assert_allclose(mesh["cu_pct"], model.frame["cu_pct"])
    assert json.loads(str(mesh.field_data["units"][0]))["dry_tonnes"] == "t dry"


@pytest.mark.parametrize("azimuth", [0.0, 27.0])
def test_netcdf_follows_cf(tmp_path: Path, azimuth: float) -> None:
    """xarray and pyproj, which know the CF conventions, find axes, projection and missing cells."""
    import pyproj
    import xarray as xr

    model = make.small_model(azimuth)
    exchange_netcdf.write_netcdf(model, tmp_path / "b.nc")
    with xr.open_dataset(tmp_path / "b.nc", engine="h5netcdf", decode_coords="all") as source:
        assert pyproj.CRS.from_cf(source["crs"].attrs).to_epsg() == 32702
        assert source["elevation"].attrs["positive"] == "up"
        assert source["easting"].dims == (("i",) if azimuth == 0 else ("j", "i"))
        assert source["cu_pct"].attrs["units"] == "percent"
        tonnes = float(source["dry_tonnes"].sum())
        meanings = source["domain"].attrs["flag_meanings"].split()
        assert meanings[2:] == ["cap", "massive"] and list(source["domain"].attrs["flag_values"]) == [
            -2,
            -1,
            0,
            1,
        ]
    assert tonnes == pytest.approx(model.frame["dry_tonnes"].sum(), rel=1e-12)
    dataset = model.to_xarray()
    assert dataset["volume_m3"].dims == ("k", "j", "i")


@pytest.mark.parametrize("azimuth", [0.0, 27.0])
def test_plan_keeps_volume_tonnes_and_metal(azimuth: float) -> None:
    model = make.small_model(azimuth)
    plan = exchange_plan.block_plan(model)
    frame = model.frame
    assert plan["volume_m3"].sum() == pytest.approx(frame["volume_m3"].sum(), rel=1e-12)
    assert (plan["thickness_m"] * 20.0).sum() == pytest.approx(frame["volume_m3"].sum(), rel=1e-12)
    assert (plan["dry_tonnes"] * plan["au_gpt"]).sum() == pytest.approx(
        (frame["dry_tonnes"] * frame["au_gpt"]).sum()
    )
    one = frame[(frame["i"] == 9) & (frame["j"] == 8)]
    row = plan[(plan["i"] == 9) & (plan["j"] == 8)].iloc[0]
    assert row["cu_pct"] == pytest.approx(np.average(one["cu_pct"], weights=one["dry_tonnes"]))
    assert row["cu_pct_x_thickness"] == pytest.approx(row["cu_pct"] * row["thickness_m"])


@pytest.mark.parametrize("azimuth", [0.0, 27.0, 200.0])
def test_rasters_round_trip_and_stand_where_rasterio_says(tmp_path: Path, azimuth: float) -> None:
    import rasterio

    model = make.small_model(azimuth)
    plan = exchange_plan.block_plan(model)
    paths = exchange_plan.write_plan_rasters(model, tmp_path, metals=["cu_pct"])
    assert [path.name for path in paths] == [
        "thickness_m.tif",
        "dry_tonnes_per_m2.tif",
        "cu_pct_x_thickness.tif",
    ]
    with rasterio.open(paths[1]) as source:
        assert source.crs.to_epsg() == 32702 and source.units[0] == "t dry/m2"
        values = np.array([v[0] for v in source.sample(plan[["easting", "northing"]].to_numpy())])
        area = abs(source.transform.determinant)
    np.testing.assert_allclose(values, plan["dry_tonnes_per_m2"], rtol=1e-6)
    assert area * values.sum() == pytest.approx(model.frame["dry_tonnes"].sum(), rel=1e-6)
    back = exchange_plan.read_plan_raster(paths[2])
    assert back.attrs["unit"] == "% m" and len(back) == plan["cu_pct"].notna().sum()


def test_raster_of_nothing_and_unknown_crs(tmp_path: Path) -> None:
    import rasterio

    with rasterio.open(tmp_path / "n.tif", "w", driver="GTiff", width=3, height=2, count=1, dtype="float32",
                       nodata=-9999.0, transform=rasterio.transform.from_origin(0, 2, 1, 1)) as target:  # fmt: skip
        target.write(np.full((2, 3), -9999.0, dtype="float32"), 1)
    with pytest.raises(ExchangeError, match="holds no value"):
        exchange_plan.read_plan_raster(tmp_path / "n.tif")
    (tmp_path / "x.tif").write_bytes(b"II*")
    with pytest.raises(ExchangeError, match=r"x\.tif"):
        exchange_plan.read_plan_raster(tmp_path / "x.tif")
    with pytest.raises(ExchangeError, match="not known"):
        exchange_plan.write_plan_rasters(make.small_model(crs="EPSG:999999"), tmp_path)
    with pytest.raises(ExchangeError, match="zn_pct"):
        exchange_plan.block_plan(make.small_model(), metals=["zn_pct"])


def test_geopackage_layers_and_styles(tmp_path: Path) -> None:
    model, path = make.small_model(), tmp_path / "layers.gpkg"
    names = exchange_gis.write_geopackage(
        path, model=model, outline=make.outline(), sticks=make.sticks(), composites=make.composites()
    )
    assert names == ["block_plan", "outline", "holes", "composites"]
    plan = exchange_gis.read_layer(path, "block_plan")
    assert plan.crs.to_epsg() == 32702
    assert plan.geometry.area.to_numpy() == pytest.approx(20.0)
    assert plan["dry_tonnes"].sum() == pytest.approx(model.frame["dry_tonnes"].sum())
    holes = exchange_gis.read_layer(path, "holes")
    assert holes["hole_id"].tolist() == ["001", "001", "1E5"] and holes.geometry.has_z.all()
    assert exchange_gis.read_layer(path, "composites").geometry.iloc[0].z == -1650.5
    with sqlite3.connect(path) as base:
        styles = {
            row[0]: row[1:]
            for row in base.execute("SELECT f_table_name, styleQML, styleSLD, useAsDefault FROM layer_styles")
        }
        changed = {row[0] for row in base.execute("SELECT last_change FROM gpkg_contents")}
        assert base.execute("PRAGMA integrity_check").fetchone() == ("ok",)
    base.close()
    assert set(styles) == set(names) and changed == {exchange_style.STAMP}
    for qml, sld, default in styles.values():
        assert ElementTree.fromstring(qml).tag == "qgis" and default == 1
        assert ElementTree.fromstring(sld).tag.endswith("StyledLayerDescriptor")
    classes = ElementTree.fromstring(styles["block_plan"][0]).find("renderer-v2")
    assert classes is not None and classes.get("attr") == "cu_pct_x_thickness"
    edges = [(float(r.get("lower")), float(r.get("upper"))) for r in classes.iter("range")]  # type: ignore[arg-type]
    values = plan["cu_pct_x_thickness"]
    assert edges[0][0] == pytest.approx(values.min()) and edges[-1][1] == pytest.approx(values.max())
    assert all(a[1] == b[0] for a, b in itertools.pairwise(edges))
    words = [
        str(r.get("label")) for r in classes.iter("range")
    ]  # least and most are no round numbers: open ends
    assert len(words) < 2 or (words[0].startswith("under ") and words[-1].endswith(" and over"))


def test_geopackage_is_the_same_bytes_twice(tmp_path: Path) -> None:
    contents = []
    for name in ("a", "b"):
        (tmp_path / name).mkdir()
        exchange_gis.write_geopackage(
            tmp_path / name / "l.gpkg", model=make.small_model(), outline=make.outline()
        )
        contents.append((tmp_path / name / "l.gpkg").read_bytes())
    assert contents[0] == contents[1]


def test_geopackage_refuses_two_coordinate_systems_or_none(tmp_path: Path) -> None:
    import geopandas as gpd

    other = gpd.GeoDataFrame({"name": ["zone"]}, geometry=[make.outline()], crs="EPSG:32701")
    with pytest.raises(ExchangeError, match="exclusions is in EPSG:32701"):
        exchange_gis.write_geopackage(tmp_path / "l.gpkg", model=make.small_model(), exclusions=other)
    with pytest.raises(ExchangeError, match="names no coordinate system"):
        exchange_gis.write_geopackage(tmp_path / "l.gpkg", sticks=make.sticks())
    with pytest.raises(ExchangeError, match="no row for any layer"):
        exchange_gis.write_geopackage(tmp_path / "l.gpkg", sticks=make.sticks().iloc[:0], crs=make.CRS)
    assert not (tmp_path / "l.gpkg").exists()
    (tmp_path / "x.gpkg").write_bytes(b"SQLite format 3\x00 and no more")
    for path in ("x.gpkg", "none.gpkg"):
        with pytest.raises(ExchangeError, match=path):
            exchange_gis.read_layer(tmp_path / path, "block_plan")


def test_geodataframe_blocks_stand_on_their_centres() -> None:
    model = make.small_model(33.0)
    frame = model.to_geodataframe()
    centres = frame.geometry.centroid
    np.testing.assert_allclose(centres.x, model.frame["easting"], atol=1e-6)
    np.testing.assert_allclose(centres.y, model.frame["northing"], atol=1e-6)
    assert frame.crs.to_epsg() == 32702


def test_omf_holds_everything_in_true_places(tmp_path: Path) -> None:
    """The file as the omf library reads it: the order of cells, surfaces without their empty cells, holes."""
    model = make.small_model(27.0)
    exchange_omf.write_omf(
        tmp_path / "e.omf",
        model,
        seafloor=make.seafloor(),
        sticks=make.sticks(),
        composites=make.composites(),
    )
    project = exchange_omf.read_project(tmp_path / "e.omf")
    assert [element.name for element in project.elements] == ["blocks", "seafloor", "holes", "composites"]
    volume = project.elements[0]
    g = volume.geometry
    shape = (len(g.tensor_u), len(g.tensor_v), len(g.tensor_w))
    data = {item.name: np.asarray(item.array.array).reshape(shape) for item in volume.data}
    u, v, w = np.nonzero(np.isfinite(data["volume_m3"]))
    axes = np.array([g.axis_u, g.axis_v, g.axis_w])
    places = np.array(g.origin) + (np.column_stack([u, v, w]) + 0.5) * model.grid.size @ axes
    table = model.frame.set_index(["i", "j", "k"])
    index = list(zip(*(data[axis][u, v, w].astype(int) for axis in "ijk"), strict=True))
    np.testing.assert_allclose(places, table.loc[index, ["easting", "northing", "elevation"]], atol=1e-6)
    np.testing.assert_array_equal(data["dry_tonnes"][u, v, w], table.loc[index, "dry_tonnes"])
    surface = project.elements[1].geometry
    points = np.asarray(surface.vertices.array) + np.array(surface.origin)
    assert len(points) == np.isfinite(make.seafloor().values).sum()
    np.testing.assert_allclose(make.seafloor().sample(points[:, 0], points[:, 1]), points[:, 2])
    holes = project.elements[2].geometry
    ends = np.asarray(holes.vertices.array) + np.array(holes.origin)
    np.testing.assert_allclose(ends[-1], [512190.4, 8200140.0, -1658.0])


def test_all_formats_in_one_folder(tmp_path: Path) -> None:
    paths, findings = exchange.write_exchange(
        tmp_path, make.small_model(), outline=make.outline(), sticks=make.sticks(), composites=make.composites(),
        seafloor=make.seafloor(),
    )  # fmt: skip
    assert len(findings) == 0 and all(path.stat().st_size > 0 for path in paths)
    assert {path.suffix for path in paths} == {
        ".parquet",
        ".csv",
        ".json",
        ".vtu",
        ".vti",
        ".gpkg",
        ".tif",
        ".nc",
        ".omf",
    }
    with pytest.raises(ValueError, match="format 'shp'"):
        exchange.write_exchange(tmp_path, make.small_model(), formats=["shp"])


def test_one_format_that_fails_is_a_finding(tmp_path: Path) -> None:
    paths, findings = exchange.write_exchange(
        tmp_path, make.small_model(crs=None), formats=["gpkg", "parquet"]
    )
    assert [path.name for path in paths] == ["blocks.parquet"]
    assert [item.code for item in findings] == ["exchange-crs"]
    assert {item.code for item in findings} <= set(exchange_common.CODES)


def test_units_of_columns() -> None:
    wanted = {"easting": "m", "dry_tonnes_per_m2": "t dry/m2", "recovery_pct": "%", "nearest_distance_m": "m",
              "as_ppm": "ppm", "domain_share": "1", "au_gpt_variance": "(g/t)^2"}  # fmt: skip
    assert {name: column_unit(name) for name in wanted} == wanted


def test_omf_cells_stand_where_another_reader_puts_them(tmp_path: Path) -> None:
    """omfvista, an independent reader, agrees on the order of cells (it turns rotated grids about zero: not used)."""
    omfvista = pytest.importorskip("omfvista")
    model = make.small_model(0.0)
    exchange_omf.write_omf(tmp_path / "e.omf", model)
    blocks = omfvista.load_project(str(tmp_path / "e.omf"))["blocks"]
    keep = np.isfinite(blocks["volume_m3"])
    index = list(zip(*(np.asarray(blocks[a])[keep].astype(int) for a in "ijk"), strict=True))
    places = model.frame.set_index(["i", "j", "k"]).loc[index, ["easting", "northing", "elevation"]]
    np.testing.assert_allclose(blocks.cell_centers().points[keep], places, atol=1e-6)
