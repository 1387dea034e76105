"""Grids of every format hold one surface at one place, and broken ones have a finding.

The surface is a plane whose value at a place is known, so that a shift by half a cell shows. The place of
reprojected cells is checked against pyproj.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any, Literal

import numpy as np
import pyproj
import pytest
import rasterio
import rasterio.shutil
import xarray as xr
from rasterio.transform import Affine, from_origin

from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.findings import Findings
from sms_resource.loaders import raster
from sms_resource.loaders.bathymetry import load_grid

CRS = "EPSG:32702"
X0, Y0, NX, NY, STEP = 500000.0, 8000000.0, 30, 20, 2.0
X = X0 + STEP * (np.arange(NX) + 0.5)
Y = Y0 + STEP * (np.arange(NY) + 0.5)


def plane(x: Any, y: Any) -> Any:
    return -1600.0 + 0.25 * (x - X0) + 0.5 * (y - Y0)


SOUTH_UP = plane(*np.meshgrid(X, Y))
NORTH_UP = SOUTH_UP[::-1]


def geotiff(path: Path, values: np.ndarray = NORTH_UP, **changes: Any) -> None:
    tags = changes.pop("tags", {})
    bands = values if values.ndim == 3 else values[None]
    profile = {
        "driver": "GTiff",
        "height": bands.shape[1],
        "width": bands.shape[2],
        "count": len(bands),
        "dtype": "float32",
        "crs": CRS,
        "transform": from_origin(X0, Y0 + NY * STEP, STEP, STEP),
        "nodata": -9999.0,
    } | changes
    with rasterio.open(path, "w", **profile) as data:
        data.write(bands.astype(profile["dtype"]))
        data.update_tags(**tags)


def text_grid(path: Path, corner: bool) -> None:
    word, shift = ("corner", 0.0) if corner else ("center", STEP / 2)
    head = f"ncols {NX}\nnrows {NY}\nxll{word} {X0 + shift}\nyll{word} {Y0 + shift}\ncellsize {STEP}\nNODATA_value -9999\n"
    path.write_text(head + "\n".join(" ".join(f"{v:.3f}" for v in row) for row in NORTH_UP) + "\n")


def netcdf(
    path: Path,
    form: Literal["NETCDF4", "NETCDF3_CLASSIC"] = "NETCDF4",
    cf: bool = False,
    descending: bool = False,
    names: tuple[str, ...] = ("z",),
    x: np.ndarray = X,
    mapping: dict[str, Any] | None = None,
    **attributes: Any,
) -> None:
    values = (NORTH_UP if descending else SOUTH_UP).astype("float32")
    told = {"standard_name": "projection_x_coordinate", "units": "m"} if cf else {}
    told_y = {"standard_name": "projection_y_coordinate", "units": "m"} if cf else {}
    data = xr.Dataset(
        {name: (("y", "x"), values if i == 0 else np.full_like(values, 3.0)) for i, name in enumerate(names)},
        coords={"x": ("x", x, told), "y": ("y", Y[::-1] if descending else Y, told_y)},
        attrs=attributes,
    )
    if mapping:
        data["crs"] = ((), 0, mapping)
        data["z"].attrs["grid_mapping"] = "crs"
    data.to_netcdf(path, format=form, engine="h5netcdf" if form == "NETCDF4" else "scipy")


def xyz(path: Path, delimiter: str = " ", header: str = "", order: int = 1) -> None:
    xx, yy = np.meshgrid(X, Y)
    rows = np.c_[xx.ravel(), yy.ravel(), SOUTH_UP.ravel()][::order]
    np.savetxt(path, rows, fmt="%.3f", delimiter=delimiter, header=header, comments="")


WRITERS: dict[str, tuple[str, Callable[[Path], None]]] = {
    "GeoTIFF of areas": ("g.tif", geotiff),
    "GeoTIFF of points": ("g.tif", lambda p: geotiff(p, tags={"AREA_OR_POINT": "Point"})),
    "GeoTIFF south up": ("g.tif", lambda p: geotiff(p, SOUTH_UP, transform=Affine(STEP, 0, X0, 0, STEP, Y0))),
    "GeoTIFF of doubles": ("g.tif", lambda p: geotiff(p, dtype="float64")),
    "text grid by corner": ("g.asc", lambda p: text_grid(p, True)),
    "text grid by centre": ("g.txt", lambda p: text_grid(p, False)),
    "NetCDF 4": ("g.nc", netcdf),
    "NetCDF 3": ("g.nc", lambda p: netcdf(p, "NETCDF3_CLASSIC")),
    "NetCDF by CF": ("g.nc", lambda p: netcdf(p, cf=True)),
    "NetCDF by CF, north first": ("g.nc", lambda p: netcdf(p, cf=True, descending=True)),
    "NetCDF, north first": ("g.nc", lambda p: netcdf(p, descending=True)),
    "NetCDF of nodes": ("g.grd", lambda p: netcdf(p, node_offset=0)),
    "NetCDF of pixels": ("g.grd", lambda p: netcdf(p, node_offset=1)),
    "XYZ": ("g.xyz", xyz),
    "XYZ with a header and commas": ("g.csv", lambda p: xyz(p, ",", "x,y,z")),
    "XYZ from the north": ("g.dat", lambda p: xyz(p, "\t", "", -1)),
    "XYZ with a comment": ("g.xyz", lambda p: xyz(p, " ", "# x y z")),
}


@pytest.mark.parametrize("kind", list(WRITERS))
def test_every_format_holds_one_surface_at_one_place(tmp_path: Path, kind: str) -> None:
    name, write = WRITERS[kind]
    write(tmp_path / name)
    grid, found = load_grid(tmp_path / name, crs=CRS, declared_crs=CRS)
    assert grid is not None, list(found)
    assert len(found) == 0
    assert (grid.x0, grid.y0, grid.dx, grid.dy) == pytest.approx((X[0], Y[0], STEP, STEP))
    np.testing.assert_allclose(grid.values, SOUTH_UP, atol=6e-4)
    assert grid.crs == CRS


@pytest.mark.parametrize("driver", ["BAG", "GS7BG"])
def test_formats_of_surveyors(tmp_path: Path, driver: str) -> None:
    geotiff(
        tmp_path / "g.tif", np.stack([NORTH_UP, np.full_like(NORTH_UP, 0.4)])
    ) if driver == "BAG" else geotiff(tmp_path / "g.tif")
    path = tmp_path / ("g.bag" if driver == "BAG" else "g.grd")
    with rasterio.open(tmp_path / "g.tif") as source:
        rasterio.shutil.copy(source, path, driver=driver)
    grid, found = load_grid(path, crs=CRS, declared_crs=None if driver == "BAG" else CRS)
    assert grid is not None, list(found)
    np.testing.assert_allclose(grid.values, SOUTH_UP, atol=1e-3)
    assert (grid.x0, grid.y0) == pytest.approx((X[0], Y[0]))
    if driver == "BAG":  # the second band of the format is its uncertainty
        assert grid.uncertainty is not None
        np.testing.assert_allclose(grid.uncertainty, 0.4, atol=1e-6)


def load(path: Path, **options: Any) -> tuple[SurfaceGrid | None, Findings]:
    return load_grid(path, **({"crs": CRS, "declared_crs": CRS} | options))


def only(found: Findings) -> str:
    assert len(found) == 1, list(found)
    assert found[0].message.endswith(".")
    return found[0].code


def test_no_data_becomes_nan(tmp_path: Path) -> None:
    values = NORTH_UP.copy()
    values[3, 4] = -9999.0
    geotiff(tmp_path / "g.tif", values)
    grid, found = load(tmp_path / "g.tif")
    assert grid is not None and len(found) == 0
    assert np.isnan(grid.values[NY - 4, 4]) and np.isnan(grid.values).sum() == 1


@pytest.mark.parametrize("fill", [1e6, -32767.0, 3.4e38, -99999.0])
def test_fill_values_that_are_not_declared(tmp_path: Path, fill: float) -> None:
    values = NORTH_UP.copy()
    values[3, 4] = fill
    geotiff(tmp_path / "g.tif", values, nodata=None)
    grid, found = load(tmp_path / "g.tif")
    assert grid is not None and np.isnan(grid.values).sum() == 1
    assert only(found) == "grid-fill-undeclared"


def test_depths_become_elevations_once(tmp_path: Path) -> None:
    geotiff(tmp_path / "g.tif", -NORTH_UP)
    grid, found = load(tmp_path / "g.tif", vertical="depth")
    assert grid is not None and len(found) == 0
    np.testing.assert_allclose(grid.values, SOUTH_UP, atol=1e-3)


def test_packed_cells_are_unpacked(tmp_path: Path) -> None:
    geotiff(tmp_path / "g.tif", np.round(NORTH_UP * 100), dtype="int32", nodata=None)
    with rasterio.open(tmp_path / "g.tif", "r+") as data:
        data.scales = (0.01,)
    grid, _ = load(tmp_path / "g.tif")
    assert grid is not None
    np.testing.assert_allclose(grid.values, SOUTH_UP, atol=0.006)


def test_the_band_of_uncertainty(tmp_path: Path) -> None:
    geotiff(tmp_path / "g.tif", np.stack([np.full_like(NORTH_UP, 0.5), NORTH_UP]))
    grid, found = load(tmp_path / "g.tif", band=2, uncertainty_band=1)
    assert grid is not None and grid.uncertainty is not None and len(found) == 0
    np.testing.assert_allclose(grid.uncertainty, 0.5)


def test_a_grid_in_degrees_is_brought_into_the_system_of_the_study(tmp_path: Path) -> None:
    to_degrees = pyproj.Transformer.from_crs(CRS, "EPSG:4326", always_xy=True)
    lon0, lat0 = to_degrees.transform(X0, Y0)
    step = 1.5e-5
    lon = lon0 + step * (np.arange(60) + 0.5)
    lat = lat0 + step * (np.arange(50) + 0.5)
    back = pyproj.Transformer.from_crs("EPSG:4326", CRS, always_xy=True)
    values = plane(*back.transform(*np.meshgrid(lon, lat)))[::-1]
    geotiff(
        tmp_path / "g.tif",
        values,
        crs="EPSG:4326",
        transform=from_origin(lon0, lat0 + 50 * step, step, step),
        dtype="float64",
    )
    grid, found = load_grid(tmp_path / "g.tif", crs=CRS)
    assert grid is not None and only(found) == "grid-reprojected"
    assert grid.dx == pytest.approx(grid.dy) and grid.crs == CRS
    assert 1.5 < grid.dx < 1.8
    inner = grid.values[5:-5, 5:-5]
    exact = plane(*np.meshgrid(grid.x[5:-5], grid.y[5:-5]))
    np.testing.assert_allclose(inner, exact, atol=0.02)  # a fiftieth of the rise across one cell


def test_xyz_in_degrees_too(tmp_path: Path) -> None:
    lon, lat = np.meshgrid(-171.0 + 1e-5 * np.arange(20), -18.0 + 1e-5 * np.arange(15))
    np.savetxt(tmp_path / "g.xyz", np.c_[lon.ravel(), lat.ravel(), -1600 + 0 * lon.ravel()], fmt="%.6f")
    grid, found = load_grid(tmp_path / "g.xyz", crs=CRS, declared_crs="EPSG:4326")
    assert grid is not None and only(found) == "grid-reprojected"
    assert np.nanmax(np.abs(grid.values + 1600)) < 1e-6


@pytest.mark.parametrize("rotated", [False, True])
def test_other_projected_and_rotated_grids_are_resampled_only_on_request(
    tmp_path: Path, rotated: bool
) -> None:
    turn = Affine.translation(X0, Y0 + 40) @ Affine.rotation(10) @ Affine.scale(2, -2)
    geotiff(tmp_path / "g.tif", **({"transform": turn} if rotated else {"crs": "EPSG:32703"}))
    grid, found = load_grid(tmp_path / "g.tif", crs=CRS)
    assert grid is None and only(found) == ("grid-rotated" if rotated else "crs-different")
    grid, found = load_grid(tmp_path / "g.tif", crs=CRS, reproject=True)
    assert grid is not None and only(found) == "grid-reprojected"


def test_metres_said_to_be_degrees(tmp_path: Path) -> None:
    geotiff(tmp_path / "g.tif", crs="EPSG:4326")
    grid, found = load_grid(tmp_path / "g.tif", crs=CRS)
    assert grid is None and only(found) in ("grid-not-reprojected", "grid-empty", "grid-too-large")


def test_degrees_without_a_system_of_the_study_are_refused(tmp_path: Path) -> None:
    geotiff(tmp_path / "g.tif", crs="EPSG:4326", transform=from_origin(-171, -18, 1e-5, 1e-5))
    grid, found = load_grid(tmp_path / "g.tif")
    assert grid is None and only(found) == "crs-geographic"


def test_the_system_of_the_file_serves_where_the_study_has_none(tmp_path: Path) -> None:
    geotiff(tmp_path / "g.tif")
    grid, found = load_grid(tmp_path / "g.tif")
    assert grid is not None and grid.crs == CRS and len(found) == 0


def test_a_projection_file_beside_a_text_grid_is_read(tmp_path: Path) -> None:
    text_grid(tmp_path / "g.asc", True)
    (tmp_path / "g.prj").write_text(pyproj.CRS(CRS).to_wkt("WKT1_ESRI"))
    grid, found = load_grid(tmp_path / "g.asc", crs=CRS)
    assert grid is not None and len(found) == 0


@pytest.mark.parametrize("form", ["NETCDF4", "NETCDF3_CLASSIC"])
def test_the_grid_mapping_of_a_netcdf_is_its_system(tmp_path: Path, form: Any) -> None:
    netcdf(tmp_path / "g.nc", form, cf=True, mapping=pyproj.CRS(CRS).to_cf())
    grid, found = load_grid(tmp_path / "g.nc", crs=CRS)
    assert grid is not None and len(found) == 0, list(found)
    _, found = load_grid(tmp_path / "g.nc", crs="EPSG:32703")
    assert only(found) == "crs-different"


def test_a_huge_grid_is_refused_before_it_is_read(tmp_path: Path) -> None:
    path = tmp_path / "g.tif"
    profile = {
        "driver": "GTiff",
        "width": 200_000,
        "height": 100_000,
        "count": 1,
        "dtype": "float32",
        "SPARSE_OK": "YES",
    }
    with rasterio.open(
        path, "w", crs=CRS, transform=from_origin(X0, Y0, 1, 1), tiled=True, BIGTIFF="YES", **profile
    ):
        pass
    grid, found = load(path)
    assert grid is None and only(found) == "grid-too-large"
    assert "20000 million" in found[0].message


def test_a_huge_text_is_refused_before_it_is_read(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    xyz(tmp_path / "g.xyz")
    monkeypatch.setattr("sms_resource.loaders.xyz.LARGEST_XYZ", 1000)
    assert only(load(tmp_path / "g.xyz")[1]) == "file-too-large"
    monkeypatch.undo()
    monkeypatch.setattr(raster, "MOST_CELLS", 100)
    assert only(load(tmp_path / "g.xyz")[1]) == "grid-too-large"


def test_a_grid_in_feet_is_refused(tmp_path: Path) -> None:
    geotiff(tmp_path / "g.tif")
    with rasterio.open(tmp_path / "g.tif", "r+") as data:
        data.units = ("US survey foot",)
    assert only(load(tmp_path / "g.tif")[1]) == "grid-unit"


@pytest.mark.parametrize("names", [("z", "count"), ("depth_a", "depth_b")])
@pytest.mark.parametrize(("form", "cf"), [("NETCDF4", True), ("NETCDF3_CLASSIC", False)])
def test_files_of_several_grids(tmp_path: Path, names: tuple[str, str], form: Any, cf: bool) -> None:
    path = tmp_path / "g.nc"
    netcdf(path, form, cf=cf, names=names)
    grid, found = load(path)
    if names[0] == "z":
        assert grid is not None and only(found) == "grid-variable-chosen"
    else:
        assert grid is None and only(found) == "grid-variable-unclear"
        grid, found = load(path, variable="depth_a")
        assert len(found) == 0
    assert grid is not None
    np.testing.assert_allclose(grid.values, SOUTH_UP, atol=1e-3)


def test_uneven_coordinates(tmp_path: Path) -> None:
    x = X.copy()
    x[5] += 1.0
    netcdf(tmp_path / "g.nc", x=x)
    assert only(load(tmp_path / "g.nc")[1]) == "grid-uneven"


def xyz_text(folder: Path, text: str) -> tuple[SurfaceGrid | None, Findings]:
    (folder / "g.xyz").write_text(text)
    return load(folder / "g.xyz")


NODES = [(x, y, -5.0) for y in range(6) for x in range(6)]


def rows(points: list[tuple[float, float, float]]) -> str:
    return "".join(f"{x:.3f} {y:.3f} {z:.3f}\n" for x, y, z in points)


def test_xyz_with_missing_nodes(tmp_path: Path) -> None:
    grid, found = xyz_text(tmp_path, rows(NODES[:7] + NODES[8:]))
    assert grid is not None and len(found) == 0
    assert grid.shape == (6, 6) and np.isnan(grid.values[1, 1])


def test_xyz_of_soundings(tmp_path: Path) -> None:
    rng = np.random.default_rng(3)
    points = [(float(x), float(y), -5.0) for x, y in rng.uniform(0, 100, (200, 2))]
    assert only(xyz_text(tmp_path, rows(points))[1]) == "xyz-irregular"


def test_xyz_along_one_line(tmp_path: Path) -> None:
    assert only(xyz_text(tmp_path, rows([(float(i), 2.0, -5.0) for i in range(20)]))[1]) == "xyz-irregular"


def test_xyz_with_two_values_at_a_node(tmp_path: Path) -> None:
    assert only(xyz_text(tmp_path, rows([*NODES, (2, 2, -9.0)]))[1]) == "xyz-duplicate-node"
    grid, found = xyz_text(tmp_path, rows([*NODES, NODES[3]]))
    assert grid is not None and len(found) == 0


def test_xyz_of_few_points(tmp_path: Path) -> None:
    assert only(xyz_text(tmp_path, rows(NODES[:3]))[1]) == "xyz-too-few"


def test_xyz_with_few_nodes_filled(tmp_path: Path) -> None:
    lines = [
        (x, y, z) for x, y, z in [(i, j, -5.0) for i in range(20) for j in range(20)] if x == 0 or y == 0
    ]
    grid, found = xyz_text(tmp_path, rows(lines))
    assert grid is not None and only(found) == "xyz-sparse"


def test_xyz_with_two_columns(tmp_path: Path) -> None:
    assert only(xyz_text(tmp_path, "1 2\n3 4\n5 6\n")[1]) == "xyz-columns"


def test_xyz_with_a_word(tmp_path: Path) -> None:
    _, found = xyz_text(tmp_path, rows(NODES[:10]) + "5 1 deep\n" + rows(NODES[10:]))
    assert [(item.code, item.row, item.column) for item in found] == [("not-a-number", 11, "z")]


@pytest.mark.parametrize("kind", ["GeoTIFF of areas", "text grid by corner", "NetCDF 4", "NetCDF 3", "XYZ"])
def test_files_cut_at_any_place_have_a_finding_or_a_grid(tmp_path: Path, kind: str) -> None:
    name, write = WRITERS[kind]
    write(tmp_path / name)
    data = (tmp_path / name).read_bytes()
    for share in np.linspace(0.0, 0.97, 25):
        (tmp_path / name).write_bytes(data[: int(len(data) * share)])
        grid, found = load(tmp_path / name)
        assert grid is not None or found.has_errors, share


def test_a_band_below_zero_is_no_uncertainty(tmp_path: Path) -> None:
    geotiff(tmp_path / "g.tif", np.stack([NORTH_UP, NORTH_UP]))
    _, found = load_grid(tmp_path / "g.tif", crs=CRS, uncertainty_band=2)
    (said,) = found.errors
    assert (said.code, said.column) == ("grid-uncertainty-negative", "band 2")
