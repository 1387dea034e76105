"""Solids of known volume, as bodies between a seafloor grid and a flat or tilted base."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np
import pandas as pd
import shapely
from scipy.ndimage import binary_dilation

from sms_resource.blocks.body import Body, build_body
from sms_resource.blocks.grid import BlockGrid, SurfaceGrid

NO_CONTACTS = pd.DataFrame(
    {"hole_id": [], "easting": [], "northing": [], "thickness_m": [], "kind": []}
).astype({"easting": float, "northing": float, "thickness_m": float})
X0, Y0, FLOOR = 600_000.0, 7_600_000.0, -1620.0
R, H = 20.0, 15.0


def disc(radius: float = R, sides: int = 1440) -> Any:
    """A regular polygon with the area of the circle."""
    angle = np.linspace(0, 2 * np.pi, sides, endpoint=False)
    grown = radius * math.sqrt(2 * math.pi / (sides * math.sin(2 * math.pi / sides)))
    return shapely.Polygon(np.column_stack([X0 + grown * np.cos(angle), Y0 + grown * np.sin(angle)]))


def surface(
    height: Callable[[Any, Any], Any], cell_m: float, half: float = 40.0, level: float = FLOOR
) -> SurfaceGrid:
    """A grid of ``height`` (of distances east and north of the middle) above ``level``."""
    # The middle of the solid lies between nodes, as it would in life.
    n = int(2 * half / cell_m)
    start = -half + 0.37 * cell_m
    axis = start + cell_m * np.arange(n)
    east, north = np.meshgrid(axis, axis)
    values = level + np.asarray(height(east, north)) + 0.0 * east
    return SurfaceGrid(X0 + start, Y0 + start, cell_m, cell_m, values)


def solid(height: Callable[[Any, Any], Any], outline: Any, cell_m: float = 0.5, base: Any = None) -> Body:
    """The body under ``height`` and above ``base`` (0 if not given), inside an outline."""
    floor = surface(base or (lambda east, north: 0.0), cell_m)
    return build_body(surface(height, cell_m), outline, NO_CONTACTS, base_grid=floor, cell_m=cell_m)


def cover(
    body: Body, size: tuple[float, float, float], azimuth: float, shift: tuple[float, float, float]
) -> BlockGrid:
    """A block grid over a body, turned about its middle and shifted."""
    west, south, east, north = body.outline.bounds
    reach = 0.5 * math.hypot(east - west, north - south) + 2 * max(size)
    turned = BlockGrid((0.5 * (west + east), 0.5 * (south + north), 0.0), size, (1, 1, 1), azimuth)
    corner = turned.to_world([[-reach + shift[0], -reach + shift[1], 0.0]])[0]
    inside = binary_dilation(body.thickness.values > 0, structure=np.ones((3, 3)))
    low, high = (
        np.nanmin(body.base.values[inside]) - 1.01 - size[2] + shift[2],
        np.nanmax(body.top.values[inside]) + 1,
    )
    n = math.ceil(2 * reach / min(size[:2])) + 1
    nk = math.ceil((high - low) / size[2]) + 2
    return BlockGrid((corner[0], corner[1], low), size, (n, n, nk), azimuth)


# name: height above the base, outline radius, volume; the first five are published or derived (see the test).
SOLIDS: dict[str, tuple[Callable[[Any, Any], Any], float]] = {
    "cone": (lambda e, n: H * (1 - np.hypot(e, n) / R), math.pi * R**2 * H / 3),
    "paraboloid": (lambda e, n: H * (1 - (e**2 + n**2) / R**2), math.pi * R**2 * H / 2),
    "cap": (
        lambda e, n: (
            np.sqrt(np.maximum((20.0**2 + H**2) ** 2 / (4 * H**2) - e**2 - n**2, 0))
            - ((20.0**2 + H**2) / (2 * H) - H)
        ),
        math.pi * H * (3 * R**2 + H**2) / 6,
    ),
    "mound": (
        lambda e, n: H * np.exp(-(e**2 + n**2) / (2 * 6.0**2)),
        2 * math.pi * 36 * H * (1 - math.exp(-400 / 72)),
    ),
    "cylinder": (lambda e, n: 7.5, math.pi * R**2 * 7.5),
    "wedge": (lambda e, n: 9.0 + 0.3 * e - 0.1 * n, math.pi * R**2 * 9.0),
    "saddle": (lambda e, n: 12.0 + 0.02 * (e**2 - n**2), math.pi * R**2 * 12.0),
}
