"""Blocks as xarray and NetCDF, after the CF conventions 1.10 (Eaton et al. 2022).

The file holds the box around the body: dimensions k, j, i; cells off the body are missing. Text columns are
flags. A rotated grid has its eastings and northings as two-dimensional auxiliary coordinates.
"""

from __future__ import annotations

import json
import re
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.blocks.exchange_common import (
    PLACE,
    boxed,
    column_unit,
    grid_from_text,
    grid_text,
    is_number,
    model_from,
    placed,
    reading,
    restored,
    text_codes,
    unreadable,
)
from sms_resource.blocks.grid import BlockGrid
from sms_resource.blocks.model import BlockModel

MOST_CELLS = 40_000_000
# What UDUNITS understands, for the units that people read.
UDUNITS = {"%": "percent", "g/t": "1e-6", "ppm": "1e-6", "t dry": "t", "t wet": "t", "t dry/m3": "t m-3",
           "t wet/m3": "t m-3", "t/m3": "t m-3", "m3": "m3", "m2": "m2", "m": "m", "degree": "degree", "1": "1"}  # fmt: skip
MOST_WORDS = 30_000  # of 16-bit codes
MOST_FLAGS = 100


def udunit(name: str) -> str:
    """Unit of a column in the spelling of UDUNITS."""
    unit = column_unit(name)
    if unit.startswith("("):
        return {"(%)^2": "percent2"}.get(unit, "1e-12")
    return UDUNITS.get(unit, "1")


def to_xarray(model: BlockModel) -> Any:
    """The box around the body as a dataset on k, j, i.

    Raises
    ------
    ExchangeError
        If there is no block, or the box holds more than ``MOST_CELLS`` cells.
    """
    import xarray as xr

    frame, grid, index, low = boxed(model, MOST_CELLS, "NetCDF")
    shape = grid.shape[::-1]
    where = (index[:, 2], index[:, 1], index[:, 0])
    dataset = xr.Dataset(coords=_coordinates(grid, low))
    mapping = _grid_mapping(model.crs)
    if mapping is not None:
        dataset["crs"] = xr.DataArray(np.int32(0), attrs=mapping)
    places = "elevation easting northing" if grid.azimuth else ""
    for name in frame.columns:
        if name in ("i", "j", "k", *PLACE):
            continue
        values, attributes = _cells(frame[name], str(name), shape, where)
        if mapping is not None:
            attributes["grid_mapping"] = "crs"
        array = xr.DataArray(values, dims=("k", "j", "i"), attrs=attributes)
        dataset[str(name)] = array
        if places:
            dataset[str(name)].encoding["coordinates"] = "easting northing"
    dataset.attrs = {
        "Conventions": "CF-1.10",
        "title": "Estimated block model",
        "comment": "Regular blocks; cells that do not touch the body are missing. Tonnes are dry or wet as their "
        "names say; grades are on dry mass.",
        "history": "written by sms_resource",  # without a date, so that the same run gives the same bytes
        "block_grid": grid_text(model),
    }
    return dataset


def _coordinates(grid: BlockGrid, low: tuple[int, int, int]) -> dict[str, Any]:
    counts = dict(zip("ijk", grid.shape, strict=True))
    long = {
        "i": "block index along the i axis",
        "j": "block index along the j axis",
        "k": "block index upward",
    }
    coordinates: dict[str, Any] = {
        axis: (axis, np.arange(counts[axis], dtype=np.int32) + first, {"long_name": long[axis], "units": "1"})
        for axis, first in zip("ijk", low, strict=True)
    }
    edges = grid.elevations
    coordinates["elevation"] = ("k", 0.5 * (edges[:-1] + edges[1:]), {
        "standard_name": "height_above_mean_sea_level", "long_name": "elevation of block centres", "units": "m",
        "positive": "up", "axis": "Z"})  # fmt: skip
    easting = {
        "standard_name": "projection_x_coordinate",
        "long_name": "easting of block centres",
        "units": "m",
    }
    northing = {
        "standard_name": "projection_y_coordinate",
        "long_name": "northing of block centres",
        "units": "m",
    }
    j, i = np.meshgrid(np.arange(counts["j"]), np.arange(counts["i"]), indexing="ij")
    centres = grid.centres(i, j, np.zeros(i.shape))
    x, y = (centres[:, axis].reshape(i.shape) for axis in (0, 1))
    if grid.azimuth == 0.0:
        coordinates["easting"] = ("i", x[0], {**easting, "axis": "X"})
        coordinates["northing"] = ("j", y[:, 0], {**northing, "axis": "Y"})
    else:
        coordinates["easting"] = (("j", "i"), x, easting)
        coordinates["northing"] = (("j", "i"), y, northing)
    return coordinates


def _grid_mapping(crs: str | None) -> dict[str, Any] | None:
    """CF attributes of the coordinate system; None where there is none, or its name is not known."""
    if not crs:
        return None
    import pyproj

    try:
        return dict(pyproj.CRS.from_user_input(crs).to_cf())
    except pyproj.exceptions.CRSError:
        return None


def _cells(
    values: pd.Series, name: str, shape: tuple[int, ...], where: tuple[NDArray[np.int64], ...]
) -> tuple[NDArray[Any], dict[str, Any]]:
    attributes: dict[str, Any] = {"long_name": name.replace("_", " ")}
    if is_number(values):
        cells = np.full(shape, np.nan)
        cells[where] = values.to_numpy(dtype=float)
        attributes["units"] = udunit(name)
        attributes["unit_as_read"] = column_unit(name)
        attributes["table_dtype"] = str(values.dtype)
        return cells, attributes
    codes, words = text_codes(values)
    kind = np.int16 if len(words) <= MOST_WORDS else np.int32
    cells = np.full(shape, -2, dtype=kind)
    cells[where] = codes
    attributes["table_words"] = json.dumps(words, ensure_ascii=True)
    attributes["comment"] = "-2: no block; -1: not stated; others as in table_words"
    if 0 < len(words) <= MOST_FLAGS:
        meanings = [
            "no_block",
            "not_stated",
            *[re.sub(r"[^A-Za-z0-9._+@-]+", "_", word) or "blank" for word in words],
        ]
        attributes["flag_values"] = np.arange(-2, len(words), dtype=kind)
        attributes["flag_meanings"] = " ".join(meanings)
    return cells, attributes


def write_netcdf(model: BlockModel, path: str | Path) -> Path:
    """Write :func:`to_xarray` as NetCDF 4, compressed."""
    dataset = to_xarray(model)
    encoding: dict[str, dict[str, Any]] = {}
    for name, array in dataset.data_vars.items():
        if array.dims:
            encoding[str(name)] = {"zlib": True, "complevel": 4, "shuffle": True}
            if array.dtype.kind == "f":
                encoding[str(name)]["_FillValue"] = np.nan
    for name in dataset.coords:
        encoding[str(name)] = {"_FillValue": None}
    Path(path).unlink(missing_ok=True)
    dataset.to_netcdf(path, engine="h5netcdf", encoding=encoding)
    return Path(path)


def read_netcdf(path: str | Path) -> BlockModel:
    """Read a file of :func:`write_netcdf`.

    Raises
    ------
    ExchangeError
        If the file is missing, broken, empty, or says nothing of its grid.
    """
    import xarray as xr

    path = Path(path)
    errors = (OSError, ValueError, KeyError, RuntimeError)  # HDF5 answers to some damage with the last
    with reading(path, "NetCDF 4", *errors), xr.open_dataset(path, engine="h5netcdf") as source:
        dataset = source.load()
    grid, crs = grid_from_text(dataset.attrs.get("block_grid"), path)
    if not {"i", "j", "k", "volume_m3"} <= set(dataset.variables):
        raise unreadable(path, "a block model in NetCDF", "it lacks i, j, k or volume_m3")
    k, j, i = np.nonzero(np.isfinite(dataset["volume_m3"].to_numpy()))
    columns: dict[str, Any] = {
        axis: dataset[axis].to_numpy()[rows].astype(np.int32) for axis, rows in (("i", i), ("j", j), ("k", k))
    }
    for name, array in dataset.data_vars.items():
        if array.dims == ("k", "j", "i"):
            words = json.loads(array.attrs.get("table_words", "null"))
            columns[str(name)] = restored(array.to_numpy()[k, j, i], words, array.attrs.get("table_dtype"))
    return model_from(placed(pd.DataFrame(columns), grid), grid, crs, path)
