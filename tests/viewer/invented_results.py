"""A small folder of results: a paraboloid of sulphide under a sloping seafloor, with two holes."""

from __future__ import annotations

import json
from pathlib import Path

import geopandas as gpd
import numpy as np
import pandas as pd
import rasterio
import shapely
from rasterio.transform import from_origin

from sms_resource.blocks.grid import BlockGrid

CRS = "EPSG:32702"
CENTRE = (512150.0, 8200120.0)
RADIUS, THICKNESS = 40.0, 15.0


def seafloor_at(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    """Elevation of the sloping seafloor."""
    return -1650.0 + 0.1 * (x - CENTRE[0]) - 0.05 * (y - CENTRE[1])


def thickness_at(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    """Thickness of the paraboloid."""
    return THICKNESS * np.clip(1 - ((x - CENTRE[0]) ** 2 + (y - CENTRE[1]) ** 2) / RADIUS**2, 0, None)


def write_results(folder: Path, azimuth: float = 0.0) -> pd.DataFrame:
    """Write the folder; the frame of its blocks."""
    layers = folder / "layers"
    layers.mkdir(parents=True)
    grid = BlockGrid((CENTRE[0] - 60, CENTRE[1] - 60, -1680.0), (4.0, 4.0, 2.0), (30, 30, 25), azimuth)
    i, j, k = (a.ravel() for a in np.meshgrid(np.arange(30), np.arange(30), np.arange(25), indexing="ij"))
    x, y, z = grid.centres(i, j, k).T
    top, thick = seafloor_at(x, y), thickness_at(x, y)
    part = np.clip(np.minimum(top, z + 1) - np.maximum(top - thick, z - 1), 0, 2) / 2
    keep = part > 0
    i, j, k, x, y, z, part, top = (a[keep] for a in (i, j, k, x, y, z, part, top))
    depth = np.maximum(top - z, 0.1)
    frame = pd.DataFrame(
        {
            "i": i.astype("int32"), "j": j.astype("int32"), "k": k.astype("int32"), "easting": x, "northing": y,
            "elevation": z, "volume_m3": 32.0 * part, "domain": np.where(depth < 3, "cap", "massive"),
            "dry_tonnes": 32.0 * part * 3.2, "wet_tonnes": 32.0 * part * 3.4,
            "cu_pct": 2.0 + 0.3 * depth, "au_gpt": 6.0 - 0.3 * depth, "depth_below_seafloor_m": depth,
            "proposed_class": "inferred", "kept_share": np.where(x < CENTRE[0] - 20, 0.0, np.where(y > CENTRE[1], 0.5, 1.0)),
        }
    )  # fmt: skip
    frame.loc[3, "au_gpt"] = np.nan
    frame.to_parquet(folder / "block_model.parquet", index=False)
    (layers / "block_grid.json").write_text(json.dumps({**grid.record(), "crs": CRS}))
    manifest = {"metals": ["cu_pct", "au_gpt"], "cutoff": {"variable": "cu_pct", "value": 3.0},
                "tally_label": "Block-model tally", "summary": {"title": "Invented mound: tally"}}  # fmt: skip
    (folder / "manifest.json").write_text(json.dumps(manifest))
    gx, gy = np.meshgrid(CENTRE[0] - 99 + 2 * np.arange(100), CENTRE[1] + 99 - 2 * np.arange(100))
    roof, thick = seafloor_at(gx, gy), thickness_at(gx, gy)
    for name, values in (("seafloor", roof), ("base", roof - thick), ("thickness", thick)):
        values = values.astype("float32")
        if name == "seafloor":
            values[:2, :2] = np.nan
        with rasterio.open(layers / f"{name}.tif", "w", driver="GTiff", width=100, height=100, count=1,
                           dtype="float32", crs=CRS, nodata=float("nan"),
                           transform=from_origin(CENTRE[0] - 100, CENTRE[1] + 100, 2, 2)) as target:  # fmt: skip
            target.write(values, 1)
    sticks().to_parquet(layers / "holes.parquet", index=False)
    circle = shapely.Point(*CENTRE).buffer(RADIUS)
    gpd.GeoDataFrame({"name": ["body"]}, geometry=[circle], crs=CRS).to_file(
        layers / "outline.gpkg", layer="outline"
    )
    return frame


def sticks() -> pd.DataFrame:
    """Two vertical holes; 4 m of the first was lost, 3 m of the second was not assayed."""
    rows = []
    for hole, x, spans in (
        ("001", CENTRE[0], [(0, 5, 80.0, 2.5), (5, 9, 0.0, np.nan), (9, 15, 60.0, 5.0)]),
        ("002", CENTRE[0] + 12, [(0, 3, 50.0, np.nan), (3, 8, 70.0, 3.5)]),
    ):
        top = float(seafloor_at(np.array(x), np.array(CENTRE[1])))
        for low, high, recovery, grade in spans:
            rows.append({"hole_id": hole, "from_m": float(low), "to_m": float(high), "recovery_pct": recovery,
                         "domain": "massive", "cu_pct": grade, "x_from": x, "y_from": CENTRE[1], "z_from": top - low,
                         "x_to": x, "y_to": CENTRE[1], "z_to": top - high})  # fmt: skip
    return pd.DataFrame(rows)
