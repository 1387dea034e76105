"""Blocks as tables: Parquet with units in its schema, and CSV with units in its header."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd

from sms_resource.blocks.exchange_common import (
    PLACE,
    ExchangeError,
    bare,
    check_model,
    column_unit,
    grid_from_text,
    grid_text,
    header,
    is_number,
    model_from,
    reading,
)
from sms_resource.blocks.grid import BlockGrid
from sms_resource.blocks.model import BlockModel

GRID_KEY = b"block_grid"


def write_parquet(model: BlockModel, path: str | Path) -> Path:
    """Write one row a block; each field carries its unit, the file its grid and coordinate system.

    Parameters
    ----------
    model : BlockModel
    path : path

    Raises
    ------
    ExchangeError
        If the model has no block or a broken index.
    """
    import pyarrow as pa
    import pyarrow.parquet as pq

    frame = check_model(model)
    table = pa.Table.from_pandas(frame, preserve_index=False)
    fields = []
    for field in table.schema:
        unit = column_unit(field.name) if is_number(frame[field.name]) else ""
        fields.append(field.with_metadata({"unit": unit}) if unit else field)
    metadata = {**(table.schema.metadata or {}), GRID_KEY: grid_text(model).encode()}
    table = table.cast(pa.schema(fields, metadata=metadata))
    pq.write_table(table, str(path), compression="zstd")
    return Path(path)


def read_parquet(path: str | Path, *, grid: BlockGrid | None = None, crs: str | None = None) -> BlockModel:
    """Read what :func:`write_parquet` wrote, or any table of blocks whose ``grid`` is given.

    Without a grid in the file, ``layers/block_grid.json`` beside it (as a run leaves it) is used.

    Raises
    ------
    ExchangeError
        If the file is missing, broken, empty, or says nothing of its grid.
    """
    import pyarrow as pa
    import pyarrow.parquet as pq

    path = Path(path)
    with reading(path, "Parquet", OSError, pa.ArrowInvalid, pa.ArrowTypeError):
        table = pq.read_table(str(path))
    if grid is None:
        text = (table.schema.metadata or {}).get(GRID_KEY)
        beside = path.parent / "layers" / "block_grid.json"
        if text is None and beside.is_file():
            text = beside.read_bytes()
        grid, crs = grid_from_text(text, path)
    return model_from(table.to_pandas(), grid, crs, path)


def grid_file(path: Path) -> Path:
    """Where the grid of a CSV file stands: ``blocks.csv`` has ``blocks.grid.json`` beside it."""
    return path.with_suffix(".grid.json")


def write_csv(model: BlockModel, path: str | Path, *, digits: int = 10) -> list[Path]:
    """Write one row a block with titles such as ``easting [m]``, and the grid as JSON beside it.

    Parameters
    ----------
    model : BlockModel
    path : path
    digits : int
        Significant figures of numbers; 17 keeps every bit.

    Returns
    -------
    list of Path
        The table and its grid.
    """
    path = Path(path)
    frame = check_model(model)
    frame.rename(columns={name: header(str(name), frame[name]) for name in frame}).to_csv(
        path, index=False, lineterminator="\n", float_format=f"%.{digits}g"
    )
    grid_file(path).write_text(grid_text(model) + "\n", encoding="utf-8")
    return [path, grid_file(path)]


def read_csv(path: str | Path, *, grid: BlockGrid | None = None, crs: str | None = None) -> BlockModel:
    """Read what :func:`write_csv` wrote.

    Raises
    ------
    ExchangeError
        If the file is missing, broken, empty, or says nothing of its grid.
    """
    path = Path(path)
    with reading(path, "a table of blocks", OSError, ValueError):
        frame = pd.read_csv(path, encoding="utf-8")
    frame.columns = pd.Index([bare(title) for title in frame.columns])
    if grid is None:
        beside = grid_file(path)
        grid, crs = grid_from_text(beside.read_bytes() if beside.is_file() else None, path)
    odd = [
        name
        for name in ("easting", "northing", "elevation", "volume_m3")
        if name in frame and not is_number(frame[name])
    ]
    if odd:
        raise ExchangeError(
            "exchange-columns", f"column {odd[0]} holds text", "Mend the column, or write it again", path
        )
    model = model_from(frame, grid, crs, path)
    check_places(model, path)
    return model


def check_places(model: BlockModel, path: Path, tolerance: float = 1e-3) -> None:
    """Refuse a table whose coordinates do not belong to its grid.

    Raises
    ------
    ExchangeError
        If a centre lies more than ``tolerance`` block sizes from where the index puts it.
    """
    frame = model.frame
    if not set(PLACE) <= set(frame):
        return
    centres = model.grid.centres(frame["i"], frame["j"], frame["k"])
    off = np.abs(centres - frame[list(PLACE)].to_numpy(dtype=float)).max()
    if not off <= tolerance * max(model.grid.size):
        raise ExchangeError(
            "exchange-no-grid", f"coordinates and block grid disagree by up to {off:.3g} m",
            "Give the grid that the blocks were made with", path,
        )  # fmt: skip
