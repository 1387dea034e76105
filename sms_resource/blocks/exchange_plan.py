"""The block model in plan: what stands in each column of blocks, as a table and as rasters."""

from __future__ import annotations

import math
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from sms_resource.blocks.exchange_common import (
    ExchangeError,
    check_model,
    column_unit,
    is_number,
    reading,
    trimmed,
)
from sms_resource.blocks.model import BlockModel
from sms_resource.units import column_element, unit_label

MOST_PIXELS = 100_000_000


def metals_of(frame: pd.DataFrame) -> list[str]:
    """Grade columns of a frame, in its order."""
    return [name for name in frame.columns if column_element(str(name)) and is_number(frame[name])]


def block_plan(model: BlockModel, *, metals: Sequence[str] | None = None) -> pd.DataFrame:
    """Sums and dry-mass-weighted grades of every column of blocks.

    Parameters
    ----------
    model : BlockModel
    metals : sequence of str, optional
        Grade columns; None takes all.

    Returns
    -------
    DataFrame
        One row a column of blocks: i, j, easting, northing, thickness_m (volume over the block's area in plan),
        volume_m3, dry_tonnes, wet_tonnes, dry_tonnes_per_m2 (where the model has tonnes), every metal (weighted
        by dry tonnes, or by volume where there are none), ``<metal>_x_thickness`` (grade times metres).
    """
    frame = check_model(model)
    names = metals_of(frame) if metals is None else list(metals)
    absent = [name for name in names if name not in frame]
    if absent or "volume_m3" not in frame:
        raise ExchangeError(
            "exchange-columns", f"the block table has no column {', '.join(absent) or 'volume_m3'}",
            "Name grade columns that the model has",
        )  # fmt: skip
    area = model.grid.size[0] * model.grid.size[1]
    weight = frame["dry_tonnes"] if "dry_tonnes" in frame else frame["volume_m3"]
    parts: dict[str, Any] = {"i": frame["i"], "j": frame["j"], "volume_m3": frame["volume_m3"]}
    parts |= {name: frame[name] for name in ("dry_tonnes", "wet_tonnes") if name in frame}
    for name in names:
        known = frame[name].notna()
        parts[f"{name}*"] = (frame[name] * weight).where(known, 0.0)
        parts[f"{name}+"] = weight.where(known, 0.0)
    plan = pd.DataFrame(parts).groupby(["j", "i"], as_index=False, sort=True).sum()
    centres = model.grid.centres(plan["i"], plan["j"], np.zeros(len(plan)))
    result = pd.DataFrame(
        {"i": plan["i"], "j": plan["j"], "easting": centres[:, 0], "northing": centres[:, 1]}
    )
    result["thickness_m"] = plan["volume_m3"] / area
    for name in ("volume_m3", "dry_tonnes", "wet_tonnes"):
        if name in plan:
            result[name] = plan[name]
    if "dry_tonnes" in plan:
        result["dry_tonnes_per_m2"] = plan["dry_tonnes"] / area
    for name in names:
        result[name] = (plan[f"{name}*"] / plan[f"{name}+"].where(plan[f"{name}+"] > 0)).astype(float)
        result[f"{name}_x_thickness"] = result[name] * result["thickness_m"]
    return result


def plan_unit(name: str) -> str:
    """Unit of a column of :func:`block_plan`."""
    if name.endswith("_x_thickness"):
        return f"{unit_label(name.removesuffix('_x_thickness'))} m"
    return column_unit(name)


def write_plan_rasters(
    model: BlockModel, folder: str | Path, *, metals: Sequence[str] | None = None
) -> list[Path]:
    """GeoTIFFs of thickness, dry tonnes per square metre and grade times thickness, one pixel a column of blocks.

    A rotated grid gives a rotated raster, which the format allows; pixels without a block are NaN.

    Returns
    -------
    list of Path
        ``thickness_m.tif``, ``dry_tonnes_per_m2.tif`` (where the model has tonnes), ``<metal>_x_thickness.tif``.
    """
    import rasterio
    from rasterio.errors import CRSError

    plan = block_plan(model, metals=metals)
    grid, _, (low_i, low_j, _) = trimmed(model)
    columns, rows = grid.shape[0], grid.shape[1]
    if columns * rows > MOST_PIXELS:
        raise ExchangeError(
            "exchange-too-many", f"a raster of {columns} x {rows} pixels passes the limit of {MOST_PIXELS:,}",
            "Use larger blocks",
        )  # fmt: skip
    folder = Path(folder)
    folder.mkdir(parents=True, exist_ok=True)
    names = ["thickness_m", "dry_tonnes_per_m2", *[str(n) for n in plan if str(n).endswith("_x_thickness")]]
    paths = []
    for name in (name for name in names if name in plan):
        image = np.full((rows, columns), np.nan, dtype=np.float32)
        image[rows - 1 - (plan["j"] - low_j), plan["i"] - low_i] = plan[name]
        path = folder / f"{name}.tif"
        try:
            with rasterio.open(
                path, "w", driver="GTiff", width=columns, height=rows, count=1, dtype="float32", crs=model.crs,
                transform=plan_transform(grid), nodata=float("nan"), compress="deflate", predictor=3,
            ) as target:  # fmt: skip
                target.write(image, 1)
                target.set_band_description(1, name)
                target.set_band_unit(1, plan_unit(name))
                target.update_tags(pixel="one column of blocks; an average over the whole pixel")
        except CRSError as error:
            path.unlink(missing_ok=True)
            raise ExchangeError(
                "exchange-crs",
                f"the coordinate system {model.crs!r} is not known ({error})",
                "Name one such as EPSG:32702",
            ) from error
        paths.append(path)
    return paths


def plan_transform(grid: Any) -> Any:
    """Affine transform of a raster with one pixel a column of blocks, first row the farthest along j."""
    from rasterio.transform import Affine

    corner = grid.to_world([[0.0, grid.shape[1] * grid.size[1], 0.0]])[0]
    (ax, ay), (bx, by) = grid.axes[0, :2], grid.axes[1, :2]
    dx, dy = grid.size[0], grid.size[1]
    return Affine(ax * dx, -bx * dy, corner[0], ay * dx, -by * dy, corner[1])


def read_plan_raster(path: str | Path) -> pd.DataFrame:
    """Pixels of a raster that have a value: easting, northing, value; ``attrs`` holds name, unit and crs.

    Raises
    ------
    ExchangeError
        If the file is missing, broken, or holds no value.
    """
    import rasterio

    path = Path(path)
    with reading(path, "a raster", rasterio.errors.RasterioError), rasterio.open(path) as source:
        image = source.read(1, masked=True)
        transform, name, unit, crs = source.transform, source.descriptions[0], source.units[0], source.crs
    values = np.ma.filled(image.astype(float), math.nan)
    row, column = np.nonzero(np.isfinite(values))
    if row.size == 0:
        raise ExchangeError(
            "exchange-empty", "the raster holds no value", "Write it from a model with blocks", path
        )
    u, v = column + 0.5, row + 0.5
    x = transform.a * u + transform.b * v + transform.c
    y = transform.d * u + transform.e * v + transform.f
    frame = pd.DataFrame({"easting": x, "northing": y, "value": values[row, column]})
    frame.attrs.update(name=name, unit=unit, crs=None if crs is None else crs.to_string())
    return frame
