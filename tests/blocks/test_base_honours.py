"""The base honours contacts exactly and bounds always, in any set of holes."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import shapely

from sms_resource.blocks.body import build_body
from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.blocks.thickness_model import ThicknessSettings

QUICK = ThicknessSettings(
    range_m=60.0, shape="exponential", short_share=0.15, edge_power=0.7, root=1, draws=50
)
OUTLINES = [
    shapely.Point(50, 50).buffer(40),
    shapely.Polygon([(12, 12), (88, 12), (88, 40), (45, 40), (45, 88), (12, 88)]),
    shapely.MultiPolygon([shapely.Point(30, 50).buffer(18), shapely.Point(75, 50).buffer(14)]),
    shapely.Point(50, 50).buffer(40).difference(shapely.Point(55, 45).buffer(9)),
]


def seafloor(rng: np.random.Generator, cell: float) -> SurfaceGrid:
    n = int(100 / cell) + 1
    x, y = np.meshgrid(cell * np.arange(n), cell * np.arange(n))
    wave = 2 * np.sin(x / rng.uniform(5, 30)) * np.cos(y / rng.uniform(5, 30))
    return SurfaceGrid(0.0, 0.0, cell, cell, -1600 + 0.2 * x + wave)


def random_holes(rng: np.random.Generator, outline: shapely.Geometry) -> pd.DataFrame:
    """1 to 60 holes: spread, in clusters down to centimetres apart, thick beside thin, some open, some barren."""
    count = int(rng.integers(1, 61))
    points: list[np.ndarray] = []
    while len(points) < count:
        if points and rng.random() < 0.2:
            point = points[int(rng.integers(len(points)))] + rng.normal(0, 10 ** rng.uniform(-1.3, 1), 2)
        else:
            point = rng.uniform(0, 100, 2)
        if outline.contains(shapely.Point(point)):
            points.append(point)
    xy = np.array(points)
    thickness = rng.lognormal(1.5, rng.uniform(0.1, 1.2), count) * (rng.random(count) > 0.08)
    open_hole = (rng.random(count) < rng.uniform(0, 0.9)) & (thickness > 0)
    return pd.DataFrame({
        "hole_id": [f"H{n}" for n in range(count)], "easting": xy[:, 0], "northing": xy[:, 1],
        "thickness_m": thickness, "kind": np.where(open_hole, "open", "reached"),
    })  # fmt: skip


def check(body, holes: pd.DataFrame) -> None:
    """Contacts within a micrometre, bounds never broken, thickness never negative, base never above the seafloor."""
    x, y = holes["easting"].to_numpy(), holes["northing"].to_numpy()
    asked, is_open = holes["thickness_m"].to_numpy(), (holes["kind"] == "open").to_numpy()
    got = body.thickness.sample(x, y)
    if not is_open.all():
        assert np.abs(got - asked)[~is_open].max() < 1e-6
    if is_open.any():
        assert (got - asked)[is_open].min() >= 0.0
    from_surfaces = body.top.sample(x, y) - body.base.sample(x, y)
    assert np.abs(from_surfaces - got).max() < 1e-9
    assert np.nanmin(body.thickness.values) >= 0.0
    assert (body.base.values <= body.top.values + 1e-12).all()
    assert body.audit["honoured"].all()
    assert (body.known.values <= body.thickness.values + 1e-12).all()
    assert body.categories["volume_m3"].sum() == pytest.approx(body.volume_m3, rel=1e-9)
    assert (body.categories["volume_m3"] >= -1e-9).all()


@pytest.mark.slow
def test_five_hundred_random_hole_sets() -> None:
    for seed in range(500):
        rng = np.random.default_rng(seed)
        outline = OUTLINES[seed % len(OUTLINES)]
        holes = random_holes(rng, outline)
        method = ("kriging", "kriging", "kriging", "spline", "linear")[seed % 5]
        edge = (0.0, 0.0, 2.0, None)[seed // 5 % 4]
        body = build_body(
            seafloor(rng, (2.0, 4.0)[seed % 2]), outline, holes, method=method, settings=QUICK, cell_m=2.0,
            edge_thickness_m=edge,
        )  # fmt: skip
        try:
            check(body, holes)
        except AssertionError as error:
            raise AssertionError(f"hole set {seed}, {method}, edge {edge}: {error}") from error


@pytest.mark.parametrize("seed", range(900, 912))
def test_with_every_default(seed: int) -> None:
    rng = np.random.default_rng(seed)
    outline = OUTLINES[seed % len(OUTLINES)]
    holes = random_holes(rng, outline)
    check(build_body(seafloor(rng, 2.0), outline, holes, cell_m=2.0), holes)
