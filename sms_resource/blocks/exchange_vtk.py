"""Blocks as VTK XML files: unstructured cells (.vtu) and a regular image (.vti), in true coordinates.

Points are 64-bit: eastings and northings of millions of metres lose decimetres in 32 bits.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.blocks.exchange_common import (
    INDEX,
    boxed,
    check_model,
    column_unit,
    grid_from_text,
    grid_text,
    in_order,
    is_number,
    model_from,
    restored,
    text_codes,
    trimmed,
    unreadable,
)
from sms_resource.blocks.model import BlockModel

MOST_BLOCKS = 5_000_000
MOST_CELLS = 40_000_000
# Corners of a block in the order of VTK_HEXAHEDRON.
CORNERS = np.array([(0, 0, 0), (1, 0, 0), (1, 1, 0), (0, 1, 0), (0, 0, 1), (1, 0, 1), (1, 1, 1), (0, 1, 1)])


def to_pyvista(model: BlockModel, *, origin: tuple[float, float, float] = (0.0, 0.0, 0.0)) -> Any:
    """The blocks that touch the body as hexahedra that share their corners.

    Parameters
    ----------
    model : BlockModel
    origin : (float, float, float)
        Taken off all coordinates; the default leaves true eastings, northings and elevations.

    Returns
    -------
    pyvista.UnstructuredGrid
        Points of 64 bits in m; one array of cells a column. Text columns are numbers, and the field data
        ``legend`` says what they stand for; ``units`` and ``block_grid`` are JSON.
    """
    import pyvista as pv

    frame = check_model(model, most=MOST_BLOCKS, what="A grid of cells")
    grid, index, _ = trimmed(model)
    nodes = np.asarray(grid.shape, dtype=np.int64) + 1
    number = np.empty((len(index), 8), dtype=np.int64)
    for corner, step in enumerate(CORNERS):
        a, b, c = (index[:, axis] + step[axis] for axis in range(3))
        number[:, corner] = a + nodes[0] * (b + nodes[1] * c)
    used, cells = np.unique(number, return_inverse=True)
    lattice = np.column_stack([used % nodes[0], used // nodes[0] % nodes[1], used // (nodes[0] * nodes[1])])
    points = grid.to_world(lattice * np.asarray(grid.size)) - np.asarray(origin)
    mesh = pv.UnstructuredGrid({pv.CellType.HEXAHEDRON: cells.reshape(-1, 8)}, points.astype(np.float64))
    _fill(mesh, frame, np.arange(len(frame)), len(frame), model)
    return mesh


def to_image(model: BlockModel) -> Any:
    """The box around the body as a regular image, rotated as the grid is; cells off the body are NaN or -1.

    Returns
    -------
    pyvista.ImageData
        ``inside`` tells the cells that touch the body.
    """
    import pyvista as pv
    from vtkmodules.vtkCommonMath import vtkMatrix3x3

    frame, grid, index, _ = boxed(model, MOST_CELLS, "A .vti image")
    image = pv.ImageData(
        dimensions=tuple(count + 1 for count in grid.shape), spacing=grid.size, origin=grid.origin
    )
    direction = vtkMatrix3x3()
    for column in range(3):  # a column of the matrix is the direction of an axis
        for row in range(3):
            direction.SetElement(row, column, float(grid.axes[column, row]))
    image.SetDirectionMatrix(direction)
    where = index[:, 0] + grid.shape[0] * (index[:, 1] + grid.shape[1] * index[:, 2])
    inside = np.zeros(grid.count, dtype=np.uint8)
    inside[where] = 1
    image.cell_data["inside"] = inside
    _fill(image, frame, where, grid.count, model)
    return image


def _fill(mesh: Any, frame: pd.DataFrame, where: NDArray[np.int64], count: int, model: BlockModel) -> None:
    legend: dict[str, list[str]] = {}
    kinds: dict[str, str] = {}
    for name in frame.columns:
        if is_number(frame[name]):
            values = frame[name].to_numpy()
            kinds[name] = str(values.dtype)
            whole = not np.issubdtype(values.dtype, np.floating)
            if whole and len(frame) == count:
                cells = values.astype(np.uint8) if values.dtype == bool else values.copy()
            else:
                cells = np.full(count, -1 if whole else np.nan, dtype=np.int32 if whole else values.dtype)
                cells[where] = values
        else:
            codes, legend[name] = text_codes(frame[name])
            cells = np.full(count, -1, dtype=np.int32)
            cells[where] = codes
        mesh.cell_data[str(name)] = cells
    units = {name: column_unit(str(name)) for name in frame.columns if name not in legend}
    for key, text in (
        ("block_grid", grid_text(model)),
        ("legend", json.dumps(legend)),
        ("units", json.dumps(units)),
        ("kinds", json.dumps(kinds)),
    ):
        mesh.field_data[key] = [text]


def write_vtu(model: BlockModel, path: str | Path) -> Path:
    """Write the blocks that touch the body as VTK XML unstructured grid."""
    to_pyvista(model).save(str(path), binary=True)
    return Path(path)


def write_vti(model: BlockModel, path: str | Path) -> Path:
    """Write the box around the body as VTK XML image; a rotated grid keeps its direction."""
    to_image(model).save(str(path), binary=True)
    return Path(path)


def read_vtk(path: str | Path) -> BlockModel:
    """Read a .vtu or .vti file of this module.

    Raises
    ------
    ExchangeError
        If the file is missing, broken, empty, or says nothing of its grid.
    """
    path = Path(path)
    mesh = _read_mesh(path)
    fields = {name: _field_text(mesh, name) for name in ("block_grid", "legend", "kinds")}
    grid, crs = grid_from_text(fields["block_grid"], path)
    legend, kinds = json.loads(fields["legend"] or "{}"), json.loads(fields["kinds"] or "{}")
    data = {name: np.asarray(mesh.cell_data[name]) for name in mesh.cell_data}
    keep = data.pop("inside", np.ones(mesh.n_cells, dtype=np.uint8)).astype(bool)
    frame = pd.DataFrame(
        {name: restored(values[keep], legend.get(name), kinds.get(name)) for name, values in data.items()}
    )
    if set(INDEX) <= set(frame):  # an image has its own order
        frame = in_order(frame)
    return model_from(frame, grid, crs, path)


def _read_mesh(path: Path) -> Any:
    """Read through VTK itself."""
    import pyvista as pv
    from vtkmodules.vtkCommonCore import vtkObject
    from vtkmodules.vtkIOXML import vtkXMLImageDataReader, vtkXMLUnstructuredGridReader

    readers: dict[str, Any] = {".vtu": vtkXMLUnstructuredGridReader, ".vti": vtkXMLImageDataReader}
    if path.suffix.lower() not in readers or not path.is_file():
        raise unreadable(path, "VTK XML", "its name should end in .vtu or .vti")
    with path.open("rb") as file:
        head = file.read(400)
    if b"<VTKFile" not in head:
        raise unreadable(path, "VTK XML", "it does not begin with <VTKFile")
    reader = readers[path.suffix.lower()]()
    reader.SetFileName(str(path))
    shown = vtkObject.GetGlobalWarningDisplay()
    vtkObject.GlobalWarningDisplayOff()  # a broken file becomes our error, not lines on the screen
    try:
        reader.Update()
    finally:
        vtkObject.SetGlobalWarningDisplay(shown)
    mesh = pv.wrap(reader.GetOutput())
    if reader.GetErrorCode() or mesh.n_cells == 0:
        raise unreadable(path, "VTK XML", "it is broken, or holds no cell")
    return mesh


def _field_text(mesh: Any, name: str) -> str | None:
    if name not in mesh.field_data:
        return None
    values = mesh.field_data[name]
    return str(values[0]) if len(values) else None
