"""The seafloor grid: sampling, mending, resampling, projection, slope and shading."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.interpolate import RegularGridInterpolator

from sms_resource.blocks.grid import BlockGrid, SurfaceGrid
from sms_resource.blocks.relief import hillshade, roughness, slope
from sms_resource.blocks.seafloor import prepare_seafloor, reproject, resample

CRS = "EPSG:32756"


def plane(dip_deg: float, toward_deg: float, cell: float = 1.0, n: int = 41) -> SurfaceGrid:
    """A plane that falls ``dip_deg`` toward an azimuth."""
    rise = math.tan(math.radians(dip_deg))
    x, y = np.meshgrid(cell * np.arange(n), cell * np.arange(n))
    along = x * math.sin(math.radians(toward_deg)) + y * math.cos(math.radians(toward_deg))
    return SurfaceGrid(500_000.0, 7_000_000.0, cell, cell, -1600.0 - rise * along, CRS)


def test_bilinear_against_scipy() -> None:
    rng = np.random.default_rng(3)
    grid = SurfaceGrid(100.0, -50.0, 2.0, 3.0, rng.normal(size=(13, 17)))
    x, y = rng.uniform(100, 132, 400), rng.uniform(-50, -14, 400)
    other = RegularGridInterpolator((grid.y, grid.x), grid.values)(np.column_stack([y, x]))
    np.testing.assert_allclose(grid.sample(x, y), other, rtol=0, atol=1e-12)
    assert np.isnan(grid.sample([99.0, 133.0], [-20.0, -20.0])).all()
    np.testing.assert_allclose(grid.sample(*grid.mesh()), grid.values)


def test_a_cell_without_value_harms_only_its_neighbours() -> None:
    values = np.zeros((5, 5))
    values[2, 2] = np.nan
    grid = SurfaceGrid(0, 0, 1, 1, values)
    assert np.isnan(grid.sample(1.5, 1.5))
    assert grid.sample(1.0, 1.7) == 0.0
    assert np.isnan(grid.sample(2.0, 2.0))


@pytest.mark.parametrize("dip", [0.0, 5.0, 15.0, 25.0, 40.0])
@pytest.mark.parametrize("toward", [0.0, 37.0, 200.0])
def test_slope_of_a_plane(dip: float, toward: float) -> None:
    found = slope(plane(dip, toward), 5.0).values
    np.testing.assert_allclose(found, dip, atol=1e-6)
    np.testing.assert_allclose(roughness(plane(dip, toward), 5.0).values, 0.0, atol=1e-4)


def test_slope_is_that_of_the_footprint_not_of_the_cell() -> None:
    x, _ = np.meshgrid(np.arange(60.0), np.arange(60.0))
    steps = SurfaceGrid(
        0, 0, 1, 1, -1600 - 0.2 * x + 0.4 * (x % 2), CRS
    )  # a washboard on an 11.3 degree slope
    inner = (slice(10, 50), slice(10, 50))
    wide = slope(steps, 9.0).values[inner]
    assert abs(wide.mean() - math.degrees(math.atan(0.2))) < 0.2
    assert np.abs(wide - wide.mean()).max() < 2.0
    assert np.allclose(roughness(steps, 9.0).values[inner], 0.2, atol=0.02)


def test_hillshade_of_a_plane_follows_lambert() -> None:
    dip, toward = 25.0, 315.0
    shade = hillshade(plane(dip, toward), azimuth=315.0, altitude=45.0)[5:-5, 5:-5]
    # The angle between the plane's normal and the light is 45 - 25 = 20 degrees.
    np.testing.assert_allclose(shade, math.cos(math.radians(20.0)), atol=1e-6)
    away = hillshade(plane(dip, 135.0))[5:-5, 5:-5]
    np.testing.assert_allclose(away, math.cos(math.radians(70.0)), atol=1e-6)


def test_mending_stays_within_the_stated_distance() -> None:
    grid = plane(10.0, 90.0)
    values = grid.values.copy()
    values[10:13, 10:13] = np.nan  # reaches 2 m from its rim
    values[20:31, 20:31] = np.nan  # reaches 6 m
    values[0:2, 5:8] = np.nan  # on the edge
    mended, findings, info = prepare_seafloor(grid.with_values(values), mend_within_m=3.0)
    assert np.isfinite(mended.values[10:13, 10:13]).all()
    np.testing.assert_allclose(mended.values[10:13, 10:13], grid.values[10:13, 10:13], atol=1e-9)
    assert np.isnan(mended.values[20:31, 20:31]).all()
    assert np.isnan(mended.values[0:2, 5:8]).all()
    assert info["mended_cells"] == 9 and info["holes_left"] == 1 and info["empty_cells"] == 9 + 121 + 6
    assert {"seafloor-mended", "seafloor-holes"} <= {finding.code for finding in findings}
    assert not findings.has_errors
    untouched, _, none = prepare_seafloor(grid.with_values(values), mend_within_m=0.0)
    assert none["mended_cells"] == 0 and np.array_equal(untouched.values, values, equal_nan=True)


def test_uncertainty_of_the_file_or_of_the_study() -> None:
    grid = plane(5.0, 0.0)
    stated = prepare_seafloor(grid, sigma_m=0.4)
    assert (stated[0].uncertainty == 0.4).all() and stated[2]["sigma_from"] == "study"
    band = np.full(grid.shape, 0.7)
    band[3, 3] = np.nan
    own = prepare_seafloor(grid.with_values(grid.values, band), sigma_m=0.4)
    assert own[2]["sigma_from"] == "file" and (own[0].uncertainty == 0.7).all()


@pytest.mark.parametrize(
    ("crs", "code"),
    [
        (None, "seafloor-crs-missing"),
        ("EPSG:4326", "seafloor-crs-geographic"),
        ("nowhere", "seafloor-crs-missing"),
    ],
)
def test_grids_without_a_projection_are_refused(crs: str | None, code: str) -> None:
    grid = plane(5.0, 0.0)
    _, findings, _ = prepare_seafloor(SurfaceGrid(0, 0, 1, 1, grid.values, crs), file="seafloor.tif")
    assert [finding.code for finding in findings.errors] == [code]
    assert findings.errors[0].file == "seafloor.tif" and findings.errors[0].remedy


def test_nodata_only_positive_and_coarse_grids_are_named() -> None:
    empty = prepare_seafloor(SurfaceGrid(0, 0, 1, 1, np.full((4, 4), np.nan), CRS))[1]
    assert [finding.code for finding in empty.errors] == ["seafloor-empty"]
    turned = prepare_seafloor(SurfaceGrid(0, 0, 1, 1, np.full((4, 4), 1600.0), CRS))[1]
    assert "seafloor-above-sea-level" in {finding.code for finding in turned}
    coarse = prepare_seafloor(SurfaceGrid(0, 0, 25, 25, np.full((4, 4), -1600.0), CRS))[1]
    assert "seafloor-coarse" in {finding.code for finding in coarse}


def test_resampling_keeps_a_plane() -> None:
    grid = plane(12.0, 60.0)
    finer, coarser = resample(grid, 0.5), resample(grid, 4.0, kind="average")
    for made in (finer, coarser):
        x, y = made.mesh()
        inner = (x > grid.x[1]) & (x < grid.x[-2]) & (y > grid.y[1]) & (y < grid.y[-2])
        np.testing.assert_allclose(made.values[inner], grid.sample(x[inner], y[inner]), atol=1e-8)
    assert finer.bounds == pytest.approx(grid.bounds)
    assert np.mean(coarser.values) == pytest.approx(np.mean(grid.values[:40, :40]), abs=1e-9)


def test_a_geographic_grid_is_projected() -> None:
    """A plane in metres, sampled on degrees with pyproj, comes back as the plane."""
    from pyproj import Transformer

    forward = Transformer.from_crs("EPSG:4326", CRS, always_xy=True)
    lon, lat = np.meshgrid(152.0 + 2e-5 * np.arange(120), -27.0 + 2e-5 * np.arange(100))
    x, y = forward.transform(lon, lat)
    height = -1600 + 0.1 * (x - x.mean()) - 0.2 * (y - y.mean())
    degrees = SurfaceGrid(152.0, -27.0, 2e-5, 2e-5, height, "EPSG:4326")
    metres = reproject(degrees, CRS, cell_m=2.0)
    assert metres.dx == metres.dy == 2.0 and metres.crs == CRS
    east, north = metres.mesh()
    error = metres.values - (-1600 + 0.1 * (east - x.mean()) - 0.2 * (north - y.mean()))
    assert np.isfinite(error).mean() > 0.9
    assert (
        np.nanmax(np.abs(error[4:-4, 4:-4])) < 1e-3
    )  # metres; beyond the outer cell centres GDAL extrapolates
    with pytest.raises(ValueError, match="no coordinate system"):
        reproject(SurfaceGrid(0, 0, 1, 1, np.zeros((3, 3))), CRS)


def test_block_grid_turns_and_returns() -> None:
    grid = BlockGrid((500_000.0, 7_000_000.0, -1650.0), (5.0, 4.0, 2.0), (30, 40, 20), 37.0)
    i, j, k = (a.ravel() for a in np.indices(grid.shape)[:, ::7, ::9, ::5])
    centres = grid.centres(i, j, k)
    assert np.array_equal(grid.index(centres), np.column_stack([i, j, k]))
    np.testing.assert_allclose(grid.to_world(grid.to_local(centres)), centres, atol=1e-6)
    assert BlockGrid.from_record(grid.record()) == grid
    # The j axis points along the azimuth, clockwise from north.
    step = grid.centres([0], [1], [0]) - grid.centres([0], [0], [0])
    assert math.degrees(math.atan2(step[0, 0], step[0, 1])) == pytest.approx(37.0)
    for wrong in (
        {"size": (0, 1, 1)},
        {"shape": (0, 1, 1)},
        {"azimuth": math.nan},
        {"origin": (math.inf, 0, 0)},
    ):
        values = {"origin": (0, 0, 0), "size": (1, 1, 1), "shape": (1, 1, 1), "azimuth": 0.0} | wrong
        with pytest.raises(ValueError, match=next(iter(wrong))):
            BlockGrid(**values)  # type: ignore[arg-type]
