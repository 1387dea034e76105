"""Blocks, surfaces, holes and composites in one Open Mining Format file (version 1, through the omf library).

The format stores the box around the body as a tensor volume, cells in the order u, v, w with w fastest (the
order of a C array of shape (u, v, w)); cells off the body are NaN. Text columns are codes with a legend.
"""

from __future__ import annotations

import json
import struct
import zlib
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.blocks.exchange_common import (
    INDEX,
    PLACE,
    ExchangeError,
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
from sms_resource.blocks.exchange_plan import metals_of
from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.blocks.model import BlockModel

MOST_CELLS = 20_000_000
BLOCKS, HOLES, COMPOSITES = "blocks", "holes", "composites"


def write_omf(
    path: str | Path,
    model: BlockModel,
    *,
    seafloor: SurfaceGrid | None = None,
    base: SurfaceGrid | None = None,
    sticks: pd.DataFrame | None = None,
    composites: pd.DataFrame | None = None,
    name: str = "Estimate",
) -> Path:
    """Write blocks and, where given, surfaces, hole intervals and composites.

    Raises
    ------
    ExchangeError
        If the model has no block, or its box more than ``MOST_CELLS`` cells.
    """
    import omf

    path = Path(path)
    elements = [_blocks(model)]
    for title, surface in (("seafloor", seafloor), ("base", base)):
        if surface is not None and surface.has_values:
            elements.append(_surface(title, surface))
    if sticks is not None and len(sticks):
        elements.append(_sticks(sticks))
    if composites is not None and len(composites):
        elements.append(_points(composites))
    project = omf.Project(
        name=name, description=f"Coordinate system: {model.crs or 'not named'}. {grid_text(model)}", units="m",
        elements=elements,
    )  # fmt: skip
    path.unlink(missing_ok=True)
    omf.OMFWriter(project, str(path))
    return path


def _data(column: pd.Series, where: NDArray[np.int64] | None, count: int, location: str) -> Any:
    """One attribute: numbers, or codes with a legend."""
    import omf

    title = str(column.name)
    if is_number(column):
        cells = np.full(count, np.nan)
        cells[slice(None) if where is None else where] = column.to_numpy(dtype=float)
        about = json.dumps({"unit": column_unit(title), "dtype": str(column.dtype)})
        return omf.ScalarData(name=title, description=about, array=omf.ScalarArray(cells), location=location)
    codes, words = text_codes(column)
    numbers = np.full(count, -1, dtype=np.int64)
    numbers[slice(None) if where is None else where] = codes
    # The library refuses an empty legend.
    legend = omf.Legend(name=title, values=omf.StringArray(words or ["not stated"]))
    return omf.MappedData(
        name=title, description=json.dumps({"words": len(words)}), array=omf.ScalarArray(numbers), legends=[legend],
        location=location,
    )  # fmt: skip


def _blocks(model: BlockModel) -> Any:
    import omf

    frame, grid, index, _ = boxed(model, MOST_CELLS, "Open Mining Format")
    where = np.ravel_multi_index((index[:, 0], index[:, 1], index[:, 2]), grid.shape)
    geometry = omf.VolumeGridGeometry(
        tensor_u=np.full(grid.shape[0], grid.size[0]), tensor_v=np.full(grid.shape[1], grid.size[1]),
        tensor_w=np.full(grid.shape[2], grid.size[2]), axis_u=grid.axes[0], axis_v=grid.axes[1], axis_w=grid.axes[2],
        origin=grid.origin,
    )  # fmt: skip
    columns = [name for name in frame.columns if name not in PLACE]
    data = [_data(frame[name], where, grid.count, "cells") for name in columns]
    return omf.VolumeElement(
        name=BLOCKS, description="Blocks that touch the body", geometry=geometry, data=data
    )


def _surface(title: str, surface: SurfaceGrid) -> Any:
    """A surface on its cell centres; triangles next to a cell without a value are left out."""
    import omf

    x, y = surface.mesh()
    rows, columns = surface.shape
    known = np.isfinite(surface.values)
    number = np.full(surface.shape, -1, dtype=np.int64)
    number[known] = np.arange(int(known.sum()))
    a, b, c, d = (
        number[r : r + rows - 1, s : s + columns - 1].ravel() for r, s in ((0, 0), (0, 1), (1, 1), (1, 0))
    )
    triangles = np.concatenate([np.column_stack([a, b, c]), np.column_stack([a, c, d])])
    triangles = triangles[(triangles >= 0).all(axis=1)]
    if len(triangles) == 0:
        raise ExchangeError(
            "exchange-empty", f"the {title} has no two neighbouring cells with a value", "Leave it out"
        )
    origin = np.array([surface.x0, surface.y0, 0.0])
    vertices = np.column_stack([x[known], y[known], surface.values[known]]) - origin
    geometry = omf.SurfaceGeometry(
        vertices=omf.Vector3Array(vertices), triangles=omf.Int3Array(triangles), origin=origin
    )
    return omf.SurfaceElement(name=title, description="Elevation in m", geometry=geometry)


def _sticks(sticks: pd.DataFrame) -> Any:
    import omf

    ends = (
        sticks[["x_from", "y_from", "z_from", "x_to", "y_to", "z_to"]].to_numpy(dtype=float).reshape(-1, 2, 3)
    )
    good = np.isfinite(ends).all(axis=(1, 2))
    kept, ends = sticks[good], ends[good]
    origin = np.floor(ends.reshape(-1, 3).min(axis=0))
    geometry = omf.LineSetGeometry(
        vertices=omf.Vector3Array(ends.reshape(-1, 3) - origin),
        segments=omf.Int2Array(np.arange(2 * len(kept)).reshape(-1, 2)), origin=origin,
    )  # fmt: skip
    names = ["hole_id", "from_m", "to_m", "recovery_pct", "domain", *metals_of(kept)]
    data = [_data(kept[name], None, len(kept), "segments") for name in names if name in kept]
    return omf.LineSetElement(
        name=HOLES, description="Intervals of holes; recovery 0 is lost core", subtype="borehole", geometry=geometry,
        data=data,
    )  # fmt: skip


def _points(composites: pd.DataFrame) -> Any:
    import omf

    places = composites[list(PLACE)].to_numpy(dtype=float)
    good = np.isfinite(places).all(axis=1)
    kept, places = composites[good], places[good]
    origin = np.floor(places.min(axis=0))
    names = ["composite_id", "hole_id", "length_m", "recovery_pct", "domain", *metals_of(kept)]
    data = [_data(kept[name], None, len(kept), "vertices") for name in names if name in kept]
    return omf.PointSetElement(
        name=COMPOSITES, description="Composites at their middle", data=data,
        geometry=omf.PointSetGeometry(vertices=omf.Vector3Array(places - origin), origin=origin),
    )  # fmt: skip


def read_project(path: str | Path) -> Any:
    """The omf project of a file.

    Raises
    ------
    ExchangeError
        If the file is missing, broken, or of another version of the format.
    """
    import omf
    import properties

    path = Path(path)
    if not path.is_file():
        raise unreadable(path, "Open Mining Format 1", "it is not a file")
    errors = (OSError, ValueError, KeyError, TypeError, AttributeError, struct.error, zlib.error)
    with reading(path, "Open Mining Format 1", *errors, properties.ValidationError), path.open("rb") as file:
        return omf.OMFReader(file).get_project()


def read_omf(path: str | Path) -> BlockModel:
    """The blocks of a file of :func:`write_omf`.

    Raises
    ------
    ExchangeError
        If the file is missing or broken, or holds no blocks.
    """
    path = Path(path)
    project = read_project(path)
    volumes = [
        element
        for element in project.elements
        if element.name == BLOCKS and hasattr(element.geometry, "tensor_u")
    ]
    if not volumes:
        raise ExchangeError(
            "exchange-empty", "the file holds no volume named blocks", "Write it with write_omf", path
        )
    text = str(project.description)
    grid, crs = grid_from_text(text[text.find("{") :] if "{" in text else None, path)
    arrays: dict[str, NDArray[Any]] = {}
    words: dict[str, list[str]] = {}
    kinds: dict[str, str] = {}
    for item in volumes[0].data:
        arrays[item.name] = np.asarray(item.array.array, dtype=float)
        about = json.loads(item.description or "{}")
        if "dtype" in about:
            kinds[item.name] = about["dtype"]
        else:
            words[item.name] = [str(word) for word in item.legends[0].values.array][
                : about.get("words", None)
            ]
    if not set(INDEX) <= set(arrays):
        raise ExchangeError(
            "exchange-columns", "the blocks have no attribute i, j, k", "Write the file with write_omf", path
        )
    inside = np.isfinite(arrays["i"])
    frame = pd.DataFrame(
        {name: restored(values[inside], words.get(name), kinds.get(name)) for name, values in arrays.items()}
    )
    return model_from(placed(frame, grid), grid, crs, path)
