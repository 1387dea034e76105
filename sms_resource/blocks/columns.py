"""Columns of blocks in plan: their area inside the outline, their thickness, their share of a zone."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.blocks.body import Body
from sms_resource.blocks.grid import BlockGrid
from sms_resource.blocks.model import BlockModel
from sms_resource.blocks.polygons import lattice_moments, polygon_edges

Array = NDArray[Any]


@dataclass(frozen=True, eq=False)
class Columns:
    """Columns of blocks that hold any of the body, each field (c,).

    ``of_block`` (n,) is the column of each block of the model.
    """

    grid: BlockGrid
    outline: Any
    i: Array
    j: Array
    easting: Array
    northing: Array
    area_m2: Array
    volume_m3: Array
    thickness_m: Array
    slope_deg: Array
    of_block: Array

    def __len__(self) -> int:
        return len(self.i)

    def inside_share(self, geometry: Any) -> Array:
        """Share (c,) of each column's area inside the outline that a geometry covers; exact."""
        if geometry is None or geometry.is_empty or not len(self):
            return np.zeros(len(self))
        area = plan_area(geometry.intersection(self.outline), self.grid, self.i, self.j)
        return np.clip(area / np.where(self.area_m2 > 0, self.area_m2, 1.0), 0.0, 1.0)

    def to_frame(self, kept_share: Array) -> pd.DataFrame:
        """One row a column."""
        return pd.DataFrame({
            "i": self.i, "j": self.j, "easting": self.easting, "northing": self.northing,
            "area_m2": self.area_m2, "thickness_m": self.thickness_m, "slope_deg": self.slope_deg,
            "kept_share": kept_share,
        })  # fmt: skip


def plan_area(geometry: Any, grid: BlockGrid, i: Array, j: Array) -> Array:
    """Area in m2 of a geometry inside the columns (i, j) of a block grid."""
    edges = polygon_edges(geometry)
    if not len(edges) or not len(i):
        return np.zeros(len(i))
    world = np.column_stack([edges.reshape(-1, 2), np.full(2 * len(edges), grid.origin[2])])
    local = (grid.to_local(world)[:, :2] / np.asarray(grid.size[:2])).reshape(-1, 4)
    first_i, first_j = int(i.min()), int(j.min())
    rows, columns = int(j.max()) - first_j + 1, int(i.max()) - first_i + 1
    moments = lattice_moments(local - np.array([first_i, first_j] * 2), rows, columns)
    return moments.area[j - first_j, i - first_i] * grid.size[0] * grid.size[1]


def plan_columns(model: BlockModel, body: Body) -> Columns:
    """Columns of a block model, in the order of j, then i."""
    grid, frame = model.grid, model.frame
    key = frame["j"].to_numpy(dtype=np.int64) * grid.shape[0] + frame["i"].to_numpy(dtype=np.int64)
    unique, of_block = np.unique(key, return_inverse=True)
    of_block = of_block.reshape(-1)
    i, j = unique % grid.shape[0], unique // grid.shape[0]
    centre = grid.centres(i, j, np.zeros(len(i)))
    volume = np.bincount(of_block, weights=frame["volume_m3"].to_numpy(), minlength=len(i))
    area = plan_area(body.outline, grid, i, j)
    thickness = volume / np.where(area > 0, area, 1.0)
    slope = np.full(len(i), np.nan)
    return Columns(
        grid, body.outline, i, j, centre[:, 0], centre[:, 1], area, volume, thickness, slope, of_block
    )
