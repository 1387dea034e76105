"""Invented mounds with a known thickness, and holes drilled into them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
import shapely
from scipy.ndimage import gaussian_filter

from sms_resource.blocks.body_parts import cell_volumes, outline_moments
from sms_resource.blocks.grid import SurfaceGrid

SHAPES = ("paraboloid", "cone", "ellipsoid", "bell", "plateau", "two_heads")


@dataclass(frozen=True, eq=False)
class Mound:
    """A mound: seafloor, true thickness, outline, contacts of its holes, and its true volume in m3."""

    seafloor: SurfaceGrid
    thickness: SurfaceGrid
    outline: Any
    contacts: pd.DataFrame
    volume_m3: float
    shape: str


def invent_mound(
    seed: int,
    *,
    holes: int | None = None,
    cell_m: float = 2.0,
    open_holes: bool = True,
    roughness: str = "product",
) -> Mound:
    """A mound of 70 to 180 m across and 6 to 30 m high, drilled by 20 to 60 holes.

    Outline, shape, lopsidedness, roughness of the base, relief of the seafloor and length of the holes are all
    drawn; the thickness is rough at every scale from 10 to 60 m. Holes stand at random or on a shaken grid.
    """
    rng = np.random.default_rng([20240501, seed])
    radius, aspect = rng.uniform(35, 90), rng.uniform(0.5, 1.0)
    angle = np.linspace(0, 2 * np.pi, 241)[:-1]
    waves = sum(rng.normal(0, 0.12 / k) * np.cos(k * angle + rng.uniform(0, 2 * np.pi)) for k in range(2, 6))
    edge = radius * (1 + waves)
    x0, y0 = 1000.0, 2000.0
    outline = shapely.Polygon(
        np.column_stack([x0 + edge * np.cos(angle), y0 + aspect * edge * np.sin(angle)])
    )
    half = 1.6 * radius + 12
    n = int(2 * half / cell_m)
    flat = SurfaceGrid(x0 - half, y0 - half, cell_m, cell_m, np.zeros((n, n)))
    x, y = flat.mesh()
    bearing = np.arctan2((y - y0) / aspect, x - x0) % (2 * np.pi)
    r = np.hypot(x - x0, (y - y0) / aspect) / np.interp(bearing, angle, edge, period=2 * np.pi)
    inner = np.clip(1 - r**2, 0, None)
    shape = SHAPES[int(rng.integers(len(SHAPES)))]
    off = 0.35 * edge.mean()
    heads = [
        np.exp(-(((x - x0 - s * off) ** 2 + (y - y0) ** 2) / (2 * (0.4 * radius) ** 2))) for s in (-1, 1)
    ]
    form = {
        "paraboloid": inner,
        "cone": np.clip(1 - r, 0, None),
        "ellipsoid": np.sqrt(inner),
        "bell": np.clip((np.exp(-3 * r**2) - np.exp(-3)) / (1 - np.exp(-3)), 0, None),
        "plateau": np.clip(1 - r**6, 0, None),
        "two_heads": np.clip(heads[0] + 0.7 * heads[1], 0, None) * np.minimum(4 * inner, 1.0),
    }[shape]
    form = form / form.max()
    lean = rng.normal(0, 0.25, 2)
    form = form * np.clip(1 + (lean[0] * (x - x0) + lean[1] * (y - y0)) / radius, 0.2, None)

    def rough(scale_m: float) -> np.ndarray:
        field = gaussian_filter(rng.normal(size=form.shape), scale_m / cell_m, mode="wrap")
        return field / field.std()

    height = rng.uniform(6, 30)
    spread = rng.uniform(0.1, 0.45)
    noise = 0.7 * rough(rng.uniform(10, 25)) + 0.7 * rough(rng.uniform(4, 10))
    if roughness == "product":  # thick parts are rougher than thin ones
        thickness = height * form * np.exp(spread * noise - 0.5 * spread**2)
    elif roughness == "sum":  # a base as rough everywhere, but for the outermost rim
        thickness = np.maximum(height * form + 0.35 * spread * height * noise * np.minimum(4 * inner, 1), 0)
    else:
        thickness = height * form
    thickness[~shapely.contains_xy(outline, x, y)] = 0.0
    relief = rng.uniform(0.0, 0.9) * gaussian_filter(thickness, 4 / cell_m) * np.exp(0.4 * rough(12) - 0.08)
    seafloor = -1600 + relief + (x - x0) * np.tan(np.radians(rng.uniform(0, 20))) + 0.4 * rough(6)
    count = holes or int(rng.integers(20, 61))
    xy = _places(outline, count, rng)
    true = flat.with_values(thickness)
    depth = true.sample(xy[:, 0], xy[:, 1])
    length = rng.uniform(0.6, 1.3) * depth.max() * rng.uniform(0.5, 1.0, count)
    is_open = (depth > length) & open_holes
    contacts = pd.DataFrame({
        "hole_id": [f"H{k:03d}" for k in range(count)], "easting": xy[:, 0], "northing": xy[:, 1],
        "thickness_m": np.where(is_open, length, depth), "kind": np.where(is_open, "open", "reached"),
    })  # fmt: skip
    volume = float(cell_volumes(thickness, outline_moments(true, outline), cell_m**2).sum())
    return Mound(flat.with_values(seafloor), true, outline, contacts, volume, shape)


def _places(outline: Any, count: int, rng: np.random.Generator) -> np.ndarray:
    """Holes at random, or one in each cell of a shaken grid."""
    west, south, east, north = outline.bounds
    points: list[np.ndarray] = []
    if rng.random() < 0.5:
        step = np.sqrt(outline.area / count)
        x, y = np.meshgrid(np.arange(west, east, step), np.arange(south, north, step))
        shaken = np.column_stack([x.ravel(), y.ravel()]) + rng.uniform(0, step, (x.size, 2))
        inside = shaken[shapely.contains_xy(outline, shaken)]
        points = list(rng.permutation(inside)[:count])
    while len(points) < count:
        point = rng.uniform((west, south), (east, north))
        if outline.contains(shapely.Point(point)):
            points.append(point)
    return np.array(points)
