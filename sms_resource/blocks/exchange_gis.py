"""Layers for a desktop GIS: one GeoPackage with outlines, zones, holes, composites and the blocks in plan."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from sms_resource.blocks.exchange_common import ExchangeError, check_model, is_number, reading
from sms_resource.blocks.exchange_plan import block_plan, metals_of, plan_unit
from sms_resource.blocks.exchange_style import Style, class_limits, embed_styles
from sms_resource.blocks.grid import BlockGrid
from sms_resource.blocks.model import BlockModel
from sms_resource.units import element_label

MOST_POLYGONS = 2_000_000


def squares(grid: BlockGrid, i: Any, j: Any) -> Any:
    """Outlines in plan of columns of blocks: an array of shapely polygons."""
    import shapely

    i, j = np.asarray(i, dtype=float), np.asarray(j, dtype=float)
    ring = np.zeros((len(i), 5, 3))
    for corner, (a, b) in enumerate(((0, 0), (1, 0), (1, 1), (0, 1), (0, 0))):
        ring[:, corner, 0], ring[:, corner, 1] = (i + a) * grid.size[0], (j + b) * grid.size[1]
    world = grid.to_world(ring.reshape(-1, 3))[:, :2].reshape(len(i), 5, 2)
    return shapely.polygons(world)


def to_geodataframe(model: BlockModel) -> Any:
    """One row a block, with the block's outline in plan as its geometry.

    Raises
    ------
    ExchangeError
        If there is no block, or more than ``MOST_POLYGONS``.
    """
    import geopandas as gpd

    frame = check_model(model, most=MOST_POLYGONS, what="A frame of polygons")
    return gpd.GeoDataFrame(frame.copy(), geometry=squares(model.grid, frame["i"], frame["j"]), crs=model.crs)


def plan_layer(model: BlockModel) -> Any:
    """:func:`block_plan` with polygons: one row a column of blocks."""
    import geopandas as gpd

    plan = block_plan(model)
    if len(plan) > MOST_POLYGONS:
        raise ExchangeError(
            "exchange-too-many", f"{len(plan):,} columns of blocks pass the limit of {MOST_POLYGONS:,} polygons",
            "Write GeoTIFFs, or use larger blocks",
        )  # fmt: skip
    return gpd.GeoDataFrame(plan, geometry=squares(model.grid, plan["i"], plan["j"]), crs=model.crs)


def stick_layer(sticks: pd.DataFrame, crs: str | None) -> Any:
    """Intervals of holes as lines in three dimensions."""
    import geopandas as gpd
    import shapely

    ends = (
        sticks[["x_from", "y_from", "z_from", "x_to", "y_to", "z_to"]].to_numpy(dtype=float).reshape(-1, 2, 3)
    )
    good = np.isfinite(ends).all(axis=(1, 2))
    return gpd.GeoDataFrame(sticks[good].copy(), geometry=shapely.linestrings(ends[good]), crs=crs)


def point_layer(table: pd.DataFrame, crs: str | None) -> Any:
    """Rows with easting, northing and, where there is one, elevation, as points."""
    import geopandas as gpd
    import shapely

    names = [name for name in ("easting", "northing", "elevation") if name in table]
    places = table[names].to_numpy(dtype=float)
    good = np.isfinite(places).all(axis=1)
    return gpd.GeoDataFrame(table[good].copy(), geometry=shapely.points(places[good]), crs=crs)


def write_geopackage(
    path: str | Path,
    *,
    model: BlockModel | None = None,
    outline: Any = None,
    exclusions: Any = None,
    collars: pd.DataFrame | None = None,
    sticks: pd.DataFrame | None = None,
    composites: pd.DataFrame | None = None,
    surface: pd.DataFrame | None = None,
    crs: str | None = None,
    variable: str | None = None,
) -> list[str]:
    """Write every layer that is given into one GeoPackage, with a style for each.

    Parameters
    ----------
    path : path
        Replaced where it exists.
    model : BlockModel, optional
        Layer ``block_plan``.
    outline : shapely geometry or GeoDataFrame, optional
        Layer ``outline``.
    exclusions : GeoDataFrame, optional
        Layer ``exclusions``.
    collars, composites, surface : DataFrame, optional
        With easting and northing; layers of points.
    sticks : DataFrame, optional
        Intervals with x_from ... z_to; layer ``holes``.
    crs : str, optional
        Of the tables; None takes the model's.
    variable : str, optional
        Grade column that colours holes, composites and plan; None takes the first there is.

    Returns
    -------
    list of str
        Names of the layers.

    Raises
    ------
    ExchangeError
        If nothing is given, no coordinate system is named, or layers are in different ones.
    """
    import geopandas as gpd

    path = Path(path)
    crs = crs or (model.crs if model is not None else None)
    layers: dict[str, Any] = {}
    if model is not None:
        layers["block_plan"] = plan_layer(model)
    for name, shapes in (("outline", outline), ("exclusions", exclusions)):
        if isinstance(shapes, gpd.GeoDataFrame):
            layers[name] = shapes
        elif shapes is not None:
            layers[name] = gpd.GeoDataFrame({"name": [name]}, geometry=[shapes], crs=crs)
    if sticks is not None:
        layers["holes"] = stick_layer(sticks, crs)
    for name, table in (("collars", collars), ("composites", composites), ("surface_samples", surface)):
        if table is not None:
            layers[name] = point_layer(table, crs)
    layers = {name: layer for name, layer in layers.items() if len(layer)}
    if not layers:
        raise ExchangeError(
            "exchange-empty", "there is no row for any layer", "Give at least one layer that has rows", path
        )
    _one_crs(layers, path)
    path.unlink(missing_ok=True)
    styles = []
    for name, layer in layers.items():
        writable(layer).to_file(path, layer=name, driver="GPKG", engine="pyogrio")
        styles.append(style_of(name, layer, variable))
    embed_styles(path, styles)
    return list(layers)


def _one_crs(layers: dict[str, Any], path: Path) -> None:
    found = {name: layer.crs for name, layer in layers.items()}
    nameless = [name for name, crs in found.items() if crs is None]
    if nameless:
        raise ExchangeError(
            "exchange-crs",
            f"layer {nameless[0]} names no coordinate system",
            "Give crs=, such as EPSG:32702",
            path,
        )
    first = next(iter(found.values()))
    for name, crs in found.items():
        if crs != first:
            raise ExchangeError(
                "exchange-crs", f"layer {name} is in {crs.to_string()}, the others in {first.to_string()}",
                "Reproject it before it is written", path,
            )  # fmt: skip


def writable(layer: Any) -> Any:
    """The layer with text instead of categories and lists, which the format does not know."""
    changed = layer.copy()
    for name in changed.columns:
        if name == changed.geometry.name or is_number(changed[name]):
            continue
        text = changed[name].astype(object)
        changed[name] = [
            None if missing else str(word) for word, missing in zip(text, text.isna(), strict=True)
        ]
    return changed


def style_of(name: str, layer: Any, variable: str | None) -> Style:
    """A sober style: classes of the grade, or one colour where a layer has no grade."""
    kind = str(layer.geometry.iloc[0].geom_type).lower()
    shape = "polygon" if "polygon" in kind else ("line" if "line" in kind else "point")
    if name in ("outline", "exclusions"):
        return Style(name, shape, colour="#1f2328" if name == "outline" else "#d55e00", outline_only=True)
    metals = metals_of(layer)
    column = variable if variable in metals else (metals[0] if metals else None)
    if name == "block_plan" and column and f"{column}_x_thickness" in layer:
        graded = f"{column}_x_thickness"
        label = f"{element_label(column).split(' (')[0]} x thickness ({plan_unit(graded)})"
        return Style(name, shape, graded, class_limits(layer[graded].to_numpy()), label=label)
    if column is None:
        return Style(name, shape, names="hole_id" if shape == "point" and "hole_id" in layer else None)
    return Style(name, shape, column, class_limits(layer[column].to_numpy()), label=element_label(column))


def read_layer(path: str | Path, layer: str) -> Any:
    """One layer of a GeoPackage.

    Raises
    ------
    ExchangeError
        If the file or the layer is missing, broken or empty.
    """
    import geopandas as gpd
    import pyogrio

    path = Path(path)
    errors = (pyogrio.errors.DataSourceError, pyogrio.errors.DataLayerError, OSError)
    with reading(path, f"a GeoPackage with a layer {layer}", *errors):
        frame = gpd.read_file(path, layer=layer, engine="pyogrio")
    if frame.empty:
        raise ExchangeError(
            "exchange-empty", f"layer {layer} has no row", "Write it from tables with rows", path
        )
    return frame
