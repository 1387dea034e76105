"""Layers of a run for the viewer and for a desktop GIS."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pandas as pd

from sms_resource.study import Study


def write_layers(folder: Path, study: Study, done: dict[str, Any]) -> None:
    """Surfaces, holes, outline and the geometry of the blocks."""
    folder.mkdir(parents=True, exist_ok=True)
    body, blocks = done["body"], done["blocks"]
    crs = study.config.study.crs
    for name, surface in (
        ("seafloor", body.seafloor), ("base", body.body.base), ("thickness", body.body.thickness),
        ("thickness_sigma", body.body.thickness_sigma),
    ):  # fmt: skip
        write_surface(folder / f"{name}.tif", surface, crs)
    sticks: pd.DataFrame = done["composite"].sticks
    sticks.to_parquet(folder / "holes.parquet", index=False)
    record = {**blocks.model.grid.record(), "crs": crs}
    (folder / "block_grid.json").write_text(json.dumps(record, indent=1), encoding="utf-8")
    write_shapes(folder / "outline.gpkg", "outline", outline_frame(body.body.outline, crs))
    zones = done["load"].exclusions
    if zones is not None and len(zones):
        write_shapes(
            folder / "exclusions.gpkg", "exclusions", zones[["name", "status", "buffer_m", "geometry"]]
        )


def write_surface(path: Path, surface: Any, crs: str) -> None:
    """A surface as GeoTIFF, north up, NaN where there is none."""
    import numpy as np
    import rasterio
    from rasterio.transform import from_origin

    rows, columns = surface.values.shape
    transform = from_origin(
        surface.x0 - 0.5 * surface.dx, surface.y0 + (rows - 0.5) * surface.dy, surface.dx, surface.dy
    )
    with rasterio.open(
        path, "w", driver="GTiff", width=columns, height=rows, count=1, dtype="float32", crs=crs, transform=transform,
        nodata=float("nan"), compress="deflate", predictor=3,
    ) as target:  # fmt: skip
        target.write(np.flipud(surface.values).astype("float32"), 1)


def outline_frame(outline: Any, crs: str) -> Any:
    """The outline as a layer of one row."""
    import geopandas as gpd

    return gpd.GeoDataFrame({"name": ["body"]}, geometry=[outline], crs=crs)


def write_shapes(path: Path, layer: str, frame: Any) -> None:
    """A layer as GeoPackage, with a fixed time of change so that the same run gives the same bytes."""
    import sqlite3

    frame.to_file(path, layer=layer, driver="GPKG")
    with sqlite3.connect(path) as connection:
        connection.execute("UPDATE gpkg_contents SET last_change = '2000-01-01T00:00:00.000Z'")
    connection.close()
