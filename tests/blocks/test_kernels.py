"""The numba kernels against slow, obvious twins, compiled and as plain Python."""

from __future__ import annotations

import json

import numpy as np
import pytest
import shapely
from threadpoolctl import threadpool_limits

from sms_resource.blocks import area_kernels, model_kernels
from sms_resource.blocks.body import build_body
from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.blocks.layers import LayeredDomains
from sms_resource.blocks.model import fill_blocks
from sms_resource.blocks.polygons import CellMoments, lattice_moments, polygon_edges
from tests.blocks.mounds import invent_mound
from tests.blocks.solids import SOLIDS, cover, disc, solid


def star(rng: np.random.Generator) -> shapely.Geometry:
    """A random polygon with a hole and an island, some of it off the lattice."""
    angle = np.sort(rng.uniform(0, 2 * np.pi, 30))
    radius = rng.uniform(2, 9, 30)
    polygon = shapely.Polygon(
        np.column_stack([8 + radius * np.cos(angle), 7 + radius * np.sin(angle)])
    ).buffer(0)
    ring = polygon.difference(shapely.Point(8.3, 7.1).buffer(rng.uniform(0.1, 1.5)))
    return ring.union(shapely.box(14, 14, 17, 16.5))


def moments_twin(polygon: shapely.Geometry, rows: int, columns: int) -> CellMoments:
    """Each cell cut out by shapely; the moments from a triangulation of what is left."""
    arrays = np.zeros((4, rows, columns))
    for r in range(rows):
        for c in range(columns):
            part = shapely.intersection(polygon, shapely.box(c, r, c + 1, r + 1))
            for triangle in shapely.get_parts(shapely.constrained_delaunay_triangles(part)):
                s, t = (shapely.get_coordinates(triangle)[:3] - [c, r]).T
                # Three mid-side points integrate a quadratic over a triangle exactly.
                sm, tm = 0.5 * (s + np.roll(s, 1)), 0.5 * (t + np.roll(t, 1))
                arrays[:, r, c] += triangle.area * np.array([1.0, s.mean(), t.mean(), (sm * tm).mean()])
    return CellMoments(*arrays)


@pytest.mark.parametrize("seed", range(4))
def test_area_and_moments_of_every_cell(seed: int) -> None:
    if not hasattr(shapely, "constrained_delaunay_triangles"):
        pytest.skip("shapely below 2.1 has no constrained triangulation")
    polygon = star(np.random.default_rng(seed))
    made, twin = lattice_moments(polygon_edges(polygon), 15, 16), moments_twin(polygon, 15, 16)
    for name in ("area", "s", "t", "st"):
        np.testing.assert_allclose(getattr(made, name), getattr(twin, name), atol=1e-10, err_msg=name)


def test_area_kernel_as_plain_python_and_in_parts() -> None:
    polygon = star(np.random.default_rng(9))
    edges = polygon_edges(polygon)
    whole = lattice_moments(edges, 17, 18)
    plain = [np.zeros((17, 19)) for _ in range(4)]
    compiled = area_kernels._row_piece
    try:
        area_kernels._row_piece = compiled.py_func
        area_kernels.cell_moments.py_func(edges, 0, *plain)
    finally:
        area_kernels._row_piece = compiled
    np.testing.assert_allclose(plain[0][:, :-1], whole.area, atol=1e-12)
    np.testing.assert_allclose(plain[3][:, :-1], whole.st, atol=1e-12)
    parts = [lattice_moments(edges, rows, 18, start).area for start, rows in ((0, 5), (5, 1), (6, 11))]
    np.testing.assert_array_equal(np.vstack(parts), whole.area)


def fill_twin(body, grid, layers: LayeredDomains, split: int) -> dict[tuple[int, int, int], np.ndarray]:
    """Volume by domain of every block, one sub-column and one block at a time."""
    edges = polygon_edges(body.outline).reshape(-1, 2)
    local = grid.to_local(np.column_stack([edges, np.zeros(len(edges))]))[:, :2] / grid.size[:2] * split
    moments = lattice_moments(local.reshape(-1, 4), grid.shape[1] * split, grid.shape[0] * split)
    s, t = moments.centroid()
    depths = [body.top.with_values(values) for values in layers.depths(body.top)]
    found: dict[tuple[int, int, int], np.ndarray] = {}
    for r, c in zip(*np.nonzero(moments.area), strict=True):
        spot = [(c + s[r, c]) / split * grid.size[0], (r + t[r, c]) / split * grid.size[1], 0.0]
        x, y = grid.to_world([spot])[0, :2]
        roof, thickness = float(body.top.sample(x, y)), float(body.thickness.sample(x, y))
        if np.isnan(roof) or thickness <= 0:
            continue
        plan = moments.area[r, c] * grid.size[0] * grid.size[1] / split**2
        cuts = np.maximum.accumulate(
            [0.0, *(min(float(d.sample(x, y)), thickness) for d in depths), thickness]
        )
        for k in range(grid.shape[2]):
            low = grid.origin[2] + k * grid.size[2]
            for d in range(len(layers.names)):
                height = min(roof - cuts[d], low + grid.size[2]) - max(roof - cuts[d + 1], low)
                if height > 0:
                    key = (int(c) // split, int(r) // split, k)
                    found.setdefault(key, np.zeros(len(layers.names)))[d] += plan * height
    return found


def test_blocks_against_the_twin() -> None:
    body = solid(SOLIDS["wedge"][0], disc(12.0), cell_m=1.0)
    x, y = body.top.mesh()
    layers = LayeredDomains(
        ("cap", "massive", "stockwork"),
        (body.top.with_values(1.5 + 0.05 * (x - x.mean())), body.top.with_values(6.0 + 0.1 * (y - y.mean()))),
    )
    grid = cover(body, (4.0, 3.0, 2.0), 24.0, (0.3, 0.4, 0.1))
    frame = fill_blocks(body, grid, domains=layers, split=4).frame
    twin = fill_twin(body, grid, layers, 4)
    keys = list(zip(frame["i"], frame["j"], frame["k"], strict=True))
    assert set(keys) == set(twin)
    made = (
        frame[["share_cap", "share_massive", "share_stockwork"]].to_numpy() * frame[["volume_m3"]].to_numpy()
    )
    np.testing.assert_allclose(made, np.array([twin[key] for key in keys]), atol=1e-9)


def test_bilinear_kernel_against_the_grid() -> None:
    rng = np.random.default_rng(0)
    grid = SurfaceGrid(0, 0, 1, 1, rng.normal(size=(7, 9)))
    for u, v in rng.uniform(-0.5, 8.5, (60, 2)):
        for kernel in (model_kernels._bilinear, model_kernels._bilinear.py_func):
            np.testing.assert_allclose(kernel(grid.values, u, v), grid.sample(u, v), atol=1e-12)


def test_threads_do_not_change_a_byte() -> None:
    mound = invent_mound(8)
    bodies = []
    for threads in (1, 2):
        with threadpool_limits(limits=threads):
            bodies.append(build_body(mound.seafloor, mound.outline, mound.contacts, cell_m=2.0))
    assert bodies[0].thickness.values.tobytes() == bodies[1].thickness.values.tobytes()
    assert bodies[0].volume_sigma_m3 == bodies[1].volume_sigma_m3
    assert json.loads(json.dumps(bodies[0].record)) == bodies[0].record
