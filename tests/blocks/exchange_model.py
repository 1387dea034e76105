"""A small rotated block model with every kind of column, and surfaces, holes and composites beside it."""

from __future__ import annotations

import numpy as np
import pandas as pd
import shapely

from sms_resource.blocks.grid import BlockGrid, SurfaceGrid
from sms_resource.blocks.model import BlockModel

CRS = "EPSG:32702"


def small_model(azimuth: float = 27.0, crs: str | None = CRS, seed: int = 3) -> BlockModel:
    """About 500 blocks of 4 x 5 x 2 m in the lower half of an ellipsoid, far from the origin of coordinates."""
    rng = np.random.default_rng(seed)
    grid = BlockGrid((512150.25, 8200090.75, -1700.0), (4.0, 5.0, 2.0), (18, 15, 12), azimuth)
    i, j, k = (a.ravel() for a in np.meshgrid(np.arange(18), np.arange(15), np.arange(12), indexing="ij"))
    keep = ((i - 9) / 7) ** 2 + ((j - 8) / 5) ** 2 + ((k - 9) / 8) ** 2 < 1
    i, j, k = i[keep], j[keep], k[keep]
    order = np.lexsort((k, i, j))
    i, j, k = (a[order].astype(np.int32) for a in (i, j, k))
    centres, n = grid.centres(i, j, k), len(i)
    fraction = rng.uniform(0.05, 1.0, n)
    volume = fraction * grid.block_volume_m3
    dry = rng.uniform(2.0, 3.6, n)
    frame = pd.DataFrame(
        {
            "i": i, "j": j, "k": k, "easting": centres[:, 0], "northing": centres[:, 1], "elevation": centres[:, 2],
            "volume_m3": volume, "body_fraction": fraction,
            "domain": pd.Categorical.from_codes((k < 6).astype(int), ["cap", "massive"]),
            "dry_density_tpm3": dry, "dry_tonnes": dry * volume, "wet_tonnes": 1.06 * dry * volume,
            "cu_pct": rng.lognormal(1.0, 0.5, n), "au_gpt": rng.lognormal(0.5, 0.7, n),
            "cu_pct_variance": rng.uniform(0, 2, n), "sample_count": rng.integers(4, 16, n),
            "kept": rng.uniform(size=n) > 0.2, "proposed_class": rng.choice(["Indicated", "Inferred"], n),
            "class_reasons": rng.choice(["nearest hole beyond the range; few densities", "", "Zürich & <co>"], n),
        }
    )  # fmt: skip
    frame.loc[[2, 11], ["cu_pct", "cu_pct_variance"]] = np.nan
    return BlockModel(grid, frame, crs)


def seafloor(shape: tuple[int, int] = (30, 40)) -> SurfaceGrid:
    """A sloping plane with a few empty cells."""
    y, x = np.mgrid[0 : shape[0], 0 : shape[1]]
    values = -1660.0 + 0.2 * x - 0.1 * y
    values[3:5, 7] = np.nan
    return SurfaceGrid(512140.0, 8200080.0, 2.5, 2.5, values, CRS)


def sticks() -> pd.DataFrame:
    """Three intervals of two holes; the second was lost."""
    return pd.DataFrame(
        {
            "hole_id": ["001", "001", "1E5"], "from_m": [0.0, 1.0, 0.0], "to_m": [1.0, 2.5, 3.0],
            "recovery_pct": [80.0, 0.0, 55.0], "domain": ["cap", "cap", "massive"], "cu_pct": [3.1, np.nan, 6.2],
            "x_from": [512170.1, 512170.1, 512190.0], "y_from": [8200120.0, 8200120.0, 8200140.0],
            "z_from": [-1650.0, -1651.0, -1655.0], "x_to": [512170.1, 512170.1, 512190.4],
            "y_to": [8200120.0, 8200120.0, 8200140.0], "z_to": [-1651.0, -1652.5, -1658.0],
        }
    )  # fmt: skip


def composites() -> pd.DataFrame:
    """Two composites."""
    return pd.DataFrame(
        {
            "composite_id": ["001/1", "1E5/1"], "hole_id": ["001", "1E5"], "from_m": [0.0, 0.0], "to_m": [1.0, 1.0],
            "length_m": [1.0, 1.0], "recovery_pct": [80.0, 55.0], "domain": pd.Categorical(["cap", "massive"]),
            "easting": [512170.1, 512190.0], "northing": [8200120.0, 8200140.0], "elevation": [-1650.5, -1655.5],
            "cu_pct": [3.1, 6.2],
        }
    )  # fmt: skip


def outline() -> shapely.Polygon:
    """A square around the blocks."""
    return shapely.box(512140, 8200070, 512260, 8200190)


def empty(model: BlockModel) -> BlockModel:
    """The same model without a block."""
    return model.with_frame(model.frame.iloc[:0])
