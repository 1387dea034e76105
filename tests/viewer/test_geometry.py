"""Shapes of the scene against analytic solids and against what VTK measures."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

from sms_resource.blocks.grid import BlockGrid, SurfaceGrid
from sms_resource.viewer.axes import round_ranges
from sms_resource.viewer.geometry import (
    LEAST_M,
    SINK,
    View,
    block_skin,
    body_solid,
    collar_points,
    cropped,
    flat_index,
    surface_mesh,
    tubes,
)
from tests.viewer.invented_results import CENTRE, RADIUS, THICKNESS, seafloor_at, sticks, thickness_at

ORIGIN = (512150.0, 8200120.0, -1680.0)


def surface(of: str, cell: float = 1.0, half: float = 60.0) -> SurfaceGrid:
    n = int(2 * half / cell) + 1
    x, y = np.meshgrid(CENTRE[0] - half + cell * np.arange(n), CENTRE[1] - half + cell * np.arange(n))
    values = {"top": seafloor_at(x, y), "thickness": thickness_at(x, y)}[of]
    return SurfaceGrid(CENTRE[0] - half, CENTRE[1] - half, cell, cell, values)


@pytest.mark.parametrize("azimuth", [0.0, 30.0])
def test_skin_of_a_box_is_closed_and_has_its_volume(azimuth: float) -> None:
    grid = BlockGrid((512100.0, 8200100.0, -1700.0), (4.0, 5.0, 2.0), (20, 20, 20), azimuth)
    index = np.array([(i, j, k) for i in range(3, 7) for j in range(2, 5) for k in range(1, 6)])
    skin, row = block_skin(grid, index, View(ORIGIN))
    assert skin.n_cells == 2 * (4 * 3 + 4 * 5 + 3 * 5) == len(row)
    assert skin.area == pytest.approx(2 * (16 * 15 + 16 * 10 + 15 * 10), rel=1e-5)
    assert skin.clean().triangulate().volume == pytest.approx(16 * 15 * 10, rel=1e-5)
    assert set(row) < set(range(len(index)))  # blocks inside have no face


def test_skin_of_scattered_blocks_against_vtk_extraction() -> None:
    """As many quads as VTK's own outer surface of the same cells."""
    import pyvista as pv

    rng = np.random.default_rng(5)
    index = np.unique(rng.integers(0, 9, (200, 3)), axis=0)
    grid = BlockGrid((0, 0, 0), (1, 1, 1), (9, 9, 9))
    skin, _ = block_skin(grid, index, View((0, 0, 0)))
    image = pv.ImageData(dimensions=(10, 10, 10))
    full = np.zeros(729)
    full[index[:, 0] + 9 * (index[:, 1] + 9 * index[:, 2])] = 1
    image.cell_data["full"] = full
    outer = image.threshold(0.5, scalars="full").extract_surface(algorithm="dataset_surface")
    assert skin.n_cells == outer.n_cells
    assert skin.area == pytest.approx(outer.area)


def test_no_block_gives_an_empty_skin() -> None:
    skin, row = block_skin(
        BlockGrid((0, 0, 0), (1, 1, 1), (2, 2, 2)), np.zeros((0, 3), dtype=np.int64), View((0, 0, 0))
    )
    assert skin.n_cells == 0 and len(row) == 0


def test_cut_blocks_end_at_seafloor_and_base() -> None:
    """Blocks that reach past the body are drawn as the part inside: volume of a slab under a plane."""
    grid = BlockGrid((512120.0, 8200090.0, -1700.0), (5.0, 5.0, 10.0), (12, 12, 10))
    index = np.array([(i, j, k) for i in range(12) for j in range(12) for k in range(10)])
    top = surface("top")
    base = top.with_values(top.values - 8.0)
    skin, _ = block_skin(grid, index, View(ORIGIN), top, base)
    solid = skin.clean(tolerance=1e-6).triangulate()
    assert solid.volume == pytest.approx(60 * 60 * (8.0 - SINK), rel=1e-3)


@pytest.mark.parametrize("exaggeration", [1.0, 3.0])
def test_view_places_and_tells_true_ranges(exaggeration: float) -> None:
    view = View(ORIGIN, exaggeration)
    points = np.array([[512155.5, 8200100.0, -1650.0], [512100.0, 8200180.0, -1675.0]])
    placed = view.place(points)
    assert np.abs(placed).max() < 200  # small enough for 32 bits
    low, high = placed.min(axis=0), placed.max(axis=0)
    bounds = tuple(v for pair in zip(low, high, strict=True) for v in pair)
    ranges = view.true_ranges(bounds)
    assert ranges == pytest.approx([512100.0, 512155.5, 8200100.0, 8200180.0, -1675.0, -1650.0], abs=1e-6)
    assert view.scene_bounds(ranges[::2], ranges[1::2]) == pytest.approx(bounds, abs=1e-6)


def test_flat_view_turns_heights_into_depths() -> None:
    view = View(ORIGIN, 2.0, surface("top"))
    x, y = CENTRE[0] + 20.0, CENTRE[1] + 8.0
    top = float(seafloor_at(np.array(x), np.array(y)))
    placed = view.place([[x, y, top], [x, y, top - 6.0], [0.0, 0.0, 0.0]])
    assert placed[:2, 2] == pytest.approx([0.0, -12.0], abs=1e-6) and math.isnan(placed[2, 2])
    grid = BlockGrid((512100.0, 8200070.0, -1700.0), (4.0, 4.0, 2.0), (30, 30, 30))
    index = flat_index(grid, np.array([[3, 4, 20], [3, 4, 21]]), np.array([3.1, 0.4]))
    assert index.tolist() == [[3, 4, -2], [3, 4, -1]]
    skin, _ = block_skin(grid, index, view)
    assert skin.bounds[4:] == pytest.approx((-8.0, 0.0))


def test_surface_leaves_out_cells_without_a_value_and_thins_large_ones() -> None:
    top = surface("top")
    values = top.values.copy()
    values[10, 10] = np.nan
    mesh = surface_mesh(top.with_values(values), View(ORIGIN))
    assert mesh.n_cells == 120 * 120 - 4
    assert surface_mesh(top, View(ORIGIN), most=4000).n_cells < 4000
    part = cropped(top, (CENTRE[0] - 10, CENTRE[1] - 10, CENTRE[0] + 10, CENTRE[1] + 10))
    assert part.shape == (21, 21)
    assert float(part.sample(CENTRE[0], CENTRE[1])) == pytest.approx(float(top.sample(CENTRE[0], CENTRE[1])))


def test_body_solid_is_closed_with_the_volume_of_the_paraboloid() -> None:
    """pi R^2 H / 2, in the analytic form that the volume checks of the project use."""
    body = body_solid(surface("top", 0.5), surface("thickness", 0.5), View(ORIGIN))
    edges = body.extract_feature_edges(feature_edges=False, manifold_edges=False)
    assert edges.n_cells == 0
    assert body.triangulate().volume == pytest.approx(math.pi * RADIUS**2 * THICKNESS / 2, rel=0.01)
    nothing = surface("thickness").with_values(np.zeros((121, 121)))
    assert body_solid(surface("top"), nothing, View(ORIGIN)).n_cells == 0


def test_tubes_leave_lost_core_open() -> None:
    """5 + 6 + 5 m were recovered and assayed, 3 m recovered only, 4 m lost."""
    made = tubes(sticks(), View(ORIGIN), "cu_pct", radius=0.5)
    ring = 2 * 10 * 0.5 * math.sin(math.pi / 10)  # circumference of the ten-sided tube
    sides = {"graded": (16.0, 3), "plain": (3.0, 1)}
    caps = 0.5 * 10 * 0.25 * math.sin(2 * math.pi / 10)
    for name, (length, count) in sides.items():
        assert made[name].area == pytest.approx(length * ring + 2 * count * caps, rel=1e-3)
    assert set(np.unique(made["graded"]["grade"])) == {2.5, 3.5, 5.0}
    assert made["trace"].length > 0 and made["trace"].n_lines == 5
    points, names = collar_points(sticks(), View(ORIGIN))
    assert names == ["001", "002"]
    assert points[0] == pytest.approx([0.0, 0.0, 30.0])
    assert "graded" not in tubes(sticks(), View(ORIGIN), "zn_pct", radius=0.5)


def test_axes_end_on_round_numbers() -> None:
    low, high, counts = round_ranges([512107.3, 512293.9, 8200041.0, 8200359.0, -1676.4, -1627.2])
    assert (low, high) == ([512100.0, 8200000.0, -1680.0], [512300.0, 8200400.0, -1620.0])
    steps = [(b - a) / (n - 1) for a, b, n in zip(low, high, counts, strict=True)]
    assert steps == [50.0, 100.0, 10.0] or steps == [50.0, 100.0, 20.0]


def test_module_needs_no_display(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    monkeypatch.delenv("DISPLAY", raising=False)
    assert surface_mesh(surface("top"), View(ORIGIN)).n_cells > 0


def test_seafloor_and_base_laid_flat() -> None:
    """Roof at 0, base at minus the mean thickness, half-way at half of it; below the base metres go on."""
    top, thick = surface("top"), surface("thickness")
    view = View(ORIGIN, 2.0, top, thick)
    inside = thick.values[thick.values > 1e-6]
    mean = float(inside.mean())
    assert (
        view.mean_m == pytest.approx(mean) == pytest.approx(THICKNESS / 2, rel=0.01)
    )  # of a paraboloid: its half
    rng = np.random.default_rng(3)
    angle, r = rng.uniform(0, 2 * math.pi, 300), RADIUS * np.sqrt(rng.uniform(0, 0.85, 300))
    x, y = CENTRE[0] + r * np.cos(angle), CENTRE[1] + r * np.sin(angle)
    roof, depth = top.sample(x, y), thick.sample(x, y)
    assert depth.min() > LEAST_M
    for share in (0.0, 0.25, 1.0):
        placed = view.place(np.column_stack([x, y, roof - share * depth]))
        np.testing.assert_allclose(placed[:, 2], -2.0 * share * mean, atol=1e-6)
    deeper = view.place(np.column_stack([x, y, roof - depth - 3.0]))
    np.testing.assert_allclose(deeper[:, 2], -2.0 * (mean + 3.0), atol=1e-6)
    away = [[CENTRE[0] + 50, CENTRE[1], float(seafloor_at(np.array(CENTRE[0] + 50), np.array(CENTRE[1]))) - d]
            for d in (0.0, 5.0)]  # fmt: skip
    placed = view.place(away)
    assert placed[0, 2] == pytest.approx(0.0, abs=1e-6) and np.isnan(placed[1, 2])
    assert math.isnan(View(ORIGIN, 2.0, top).mean_m)


def test_blocks_fill_the_room_between_flat_surfaces() -> None:
    """All blocks of the body, laid flat, hold the area of the body times its mean thickness but for the edge."""
    top, thick = surface("top"), surface("thickness")
    base = top.with_values(top.values - thick.values)
    grid = BlockGrid((CENTRE[0] - 60, CENTRE[1] - 60, -1680.0), (4.0, 4.0, 2.0), (30, 30, 25))
    i, j, k = (a.ravel() for a in np.meshgrid(np.arange(30), np.arange(30), np.arange(25), indexing="ij"))
    x, y, z = grid.centres(i, j, k).T
    depth = seafloor_at(x, y) - z
    keep = (depth > -3) & (depth < thickness_at(x, y) + 3) & (thickness_at(x, y) > 2.0)
    view = View(ORIGIN, 1.0, top, thick)
    skin, row = block_skin(grid, np.column_stack([i, j, k])[keep], view, top, base)
    z = skin.points[:, 2]
    assert len(row) == skin.n_cells and np.isfinite(z).all()
    assert z.max() <= 0.0 and z.min() >= -view.mean_m - 1e-4
    columns = len(np.unique(np.column_stack([i, j])[keep], axis=0))
    volume = skin.clean().triangulate().volume
    roof = SINK / thickness_at(x[keep], y[keep]).clip(2.0).mean() * view.mean_m
    assert volume == pytest.approx(columns * 16.0 * (view.mean_m - roof), rel=0.03)
