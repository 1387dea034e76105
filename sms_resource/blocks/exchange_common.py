"""What all exchange formats share: checks at the door, units of columns, text columns as numbers, errors."""

from __future__ import annotations

import json
import re
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.blocks.grid import BlockGrid
from sms_resource.blocks.model import BlockModel
from sms_resource.findings import Finding
from sms_resource.units import LABELS, column_element, unit_label

INDEX = ("i", "j", "k")
PLACE = ("easting", "northing", "elevation")

CODES: dict[str, str] = {
    "exchange-empty": "there is no block, row or cell to write or to read",
    "exchange-too-many": "a format that stores every cell, or one polygon a block, would grow past its limit",
    "exchange-columns": "a table of blocks lacks its index, or a column cannot be stored",
    "exchange-index": "blocks lie outside the grid, or two rows name the same block",
    "exchange-unreadable": "a file cannot be read as the format that its name promises",
    "exchange-no-grid": "a file of blocks does not say where its grid stands",
    "exchange-crs": "layers of one file are in different coordinate systems, or one names none",
}


class ExchangeError(ValueError):
    """A model that cannot be written, or a file that cannot be read; ``finding`` says what and where."""

    def __init__(self, code: str, message: str, remedy: str, file: str | Path | None = None) -> None:
        self.finding = Finding("error", code, message, remedy, file=None if file is None else str(file))
        where = f"{file}: " if file is not None else ""
        super().__init__(f"{where}{message}. {remedy}")


def column_unit(name: str) -> str:
    """Unit of a column from its name, as a person reads it; "" for text and "1" for a pure number.

    Examples
    --------
    >>> column_unit("cu_pct"), column_unit("dry_tonnes"), column_unit("cu_pct_variance")
    ('%', 't dry', '(%)^2')
    """
    if column_element(name):
        return unit_label(name)
    base, _, tail = name.rpartition("_")
    if tail == "variance" and column_element(base):
        return f"({unit_label(base)})^2"
    for ending, unit in (
        ("dry_tonnes_per_m2", "t dry/m2"), ("wet_tonnes_per_m2", "t wet/m2"), ("dry_tonnes", "t dry"),
        ("wet_tonnes", "t wet"), ("dry_density_tpm3", "t dry/m3"), ("wet_density_tpm3", "t wet/m3"),
        ("_tpm3", "t/m3"), ("_m3", "m3"), ("_m2", "m2"), ("_m", "m"), ("_pct", LABELS["pct"]), ("_deg", "degree"),
    ):  # fmt: skip
        if name.endswith(ending):
            return unit
    return "m" if name in PLACE else "1"


def header(name: str, values: pd.Series) -> str:
    """Column title with its unit: ``easting [m]``; text columns have none."""
    return f"{name} [{column_unit(name)}]" if is_number(values) else name


def bare(title: str) -> str:
    """Column name of a title that :func:`header` made."""
    return re.sub(r"\s*\[[^\]]*\]$", "", str(title)).strip()


def is_number(values: pd.Series) -> bool:
    """Whether a column holds numbers or truth values."""
    return bool(pd.api.types.is_numeric_dtype(values.dtype) or pd.api.types.is_bool_dtype(values.dtype))


def text_codes(values: pd.Series) -> tuple[NDArray[np.int32], list[str]]:
    """A text column as numbers from 0 (-1 is missing) and the words that they stand for."""
    if isinstance(values.dtype, pd.CategoricalDtype):
        return np.asarray(values.cat.codes, dtype=np.int32), [str(word) for word in values.cat.categories]
    words = values.astype(object).where(values.notna(), None)
    codes, found = pd.factorize(
        pd.Series([None if w is None else str(w) for w in words], dtype=object), sort=True
    )
    return np.asarray(codes, dtype=np.int32), [str(word) for word in found]


def coded_text(codes: Any, words: list[str]) -> pd.Categorical:
    """The column that :func:`text_codes` took apart."""
    return pd.Categorical.from_codes(
        np.asarray(codes, dtype=np.int64), categories=pd.Index(words, dtype=object)
    )


def restored(values: Any, words: list[str] | None = None, kind: str | None = None) -> Any:
    """A column as the table had it: text where ``words`` are given, else numbers of the dtype ``kind``."""
    if words is not None:
        return coded_text(values, words)
    return values if kind is None or kind == str(values.dtype) else values.astype(kind)


def check_model(model: BlockModel, *, most: int | None = None, what: str = "This format") -> pd.DataFrame:
    """The frame of a model that can be written.

    Raises
    ------
    ExchangeError
        If there is no block, an index is missing, outside the grid or double, or there are more than ``most``.
    """
    frame = model.frame
    missing = [name for name in INDEX if name not in frame]
    if missing:
        raise ExchangeError(
            "exchange-columns",
            f"the block table has no column {', '.join(missing)}",
            "Keep i, j and k in the frame",
        )
    if frame.empty:
        raise ExchangeError(
            "exchange-empty",
            "there is no block to write",
            "Check outline, base and block grid: none touches the body",
        )
    if most is not None and len(frame) > most:
        raise ExchangeError(
            "exchange-too-many", f"{what} takes at most {most:,} blocks and the model has {len(frame):,}",
            "Write Parquet, or use larger blocks",
        )  # fmt: skip
    index = frame[list(INDEX)].to_numpy()
    if not np.isfinite(index.astype(float)).all() or (index < 0).any() or (index >= model.grid.shape).any():
        raise ExchangeError(
            "exchange-index", f"blocks lie outside the grid of {model.grid.shape} blocks",
            "Use the grid that the blocks were made with",
        )  # fmt: skip
    if len(np.unique(flat_index(model))) != len(frame):
        raise ExchangeError(
            "exchange-index", "two rows of the block table name the same block", "Remove the double rows"
        )
    return frame


def flat_index(model: BlockModel) -> NDArray[np.int64]:
    """Number of every block in its whole grid, i fastest, then j, then k."""
    i, j, k = (model.frame[name].to_numpy(dtype=np.int64) for name in INDEX)
    ni, nj, _ = model.grid.shape
    return i + ni * (j + nj * k)


def trimmed(model: BlockModel) -> tuple[BlockGrid, NDArray[np.int64], tuple[int, int, int]]:
    """The smallest part of the grid that holds all blocks, the index (n, 3) in it, and where it begins."""
    index = model.frame[list(INDEX)].to_numpy(dtype=np.int64)
    low = index.min(axis=0)
    shape = index.max(axis=0) - low + 1
    origin = model.grid.to_world([low * np.asarray(model.grid.size)])[0]
    grid = BlockGrid(
        (float(origin[0]), float(origin[1]), float(origin[2])), model.grid.size,
        (int(shape[0]), int(shape[1]), int(shape[2])), model.grid.azimuth,
    )  # fmt: skip
    return grid, index - low, (int(low[0]), int(low[1]), int(low[2]))


def boxed(
    model: BlockModel, most: int, what: str
) -> tuple[pd.DataFrame, BlockGrid, NDArray[np.int64], tuple[int, int, int]]:
    """What a dense format stores: the frame of a model, and its :func:`trimmed` box, index and beginning.

    Raises
    ------
    ExchangeError
        If the model cannot be written, or the box holds more than ``most`` cells.
    """
    frame = check_model(model)
    grid, index, low = trimmed(model)
    if grid.count > most:
        raise ExchangeError(
            "exchange-too-many",
            f"{what} stores every cell of the box around the body: {grid.count:,} cells, the limit is {most:,}",
            "Write Parquet or .vtu, which store only the blocks that touch the body, or use larger blocks",
        )
    return frame, grid, index, low


def in_order(frame: pd.DataFrame) -> pd.DataFrame:
    """The rows in the order of a model: by j, then i, then k."""
    return frame.sort_values(["j", "i", "k"], ignore_index=True)


def placed(frame: pd.DataFrame, grid: BlockGrid) -> pd.DataFrame:
    """Rows of a dense format, which stores no coordinates, :func:`in_order` and with the centres after i, j and k."""
    frame = in_order(frame)
    centres = grid.centres(frame["i"], frame["j"], frame["k"])
    for axis, name in enumerate(PLACE):
        frame.insert(len(INDEX) + axis, name, centres[:, axis])
    return frame


def grid_text(model: BlockModel) -> str:
    """The grid and the coordinate system as one line of JSON."""
    return json.dumps({**model.grid.record(), "crs": model.crs}, sort_keys=True)


def grid_from_text(text: str | bytes | None, file: Path) -> tuple[BlockGrid, str | None]:
    """Grid and coordinate system from :func:`grid_text`.

    Raises
    ------
    ExchangeError
        If there is none, or it is not one.
    """
    remedy = "Give the grid with grid=, or write the file again with this package"
    if not text:
        raise ExchangeError(
            "exchange-no-grid", "the file does not say where its block grid stands", remedy, file
        )
    try:
        record = json.loads(text)
        return BlockGrid.from_record(record), record.get("crs")
    except (ValueError, KeyError, TypeError) as error:
        raise ExchangeError(
            "exchange-no-grid", f"the block grid in the file is broken ({error})", remedy, file
        ) from error


def model_from(frame: pd.DataFrame, grid: BlockGrid, crs: str | None, file: Path) -> BlockModel:
    """A model of a table that was read, with its index checked."""
    for name in INDEX:
        if name in frame:
            try:
                frame[name] = frame[name].astype(np.int32)
            except (ValueError, TypeError) as error:
                raise ExchangeError(
                    "exchange-index", f"column {name} is not made of whole numbers", "Mend the column", file
                ) from error
    model = BlockModel(grid, frame.reset_index(drop=True), crs)
    try:
        check_model(model)
    except ExchangeError as error:
        found = error.finding
        raise ExchangeError(found.code, found.message, found.remedy, file) from error
    return model


def unreadable(file: Path, kind: str, error: object) -> ExchangeError:
    """The error of a file that is missing, broken or of another kind."""
    if not Path(file).exists():
        return ExchangeError("exchange-unreadable", "there is no such file", "Check the path", file)
    reason = str(error).strip().splitlines()[0] if str(error).strip() else type(error).__name__
    return ExchangeError(
        "exchange-unreadable", f"the file cannot be read as {kind} ({reason})",
        "Write it again, or choose the reader of its true format", file,
    )  # fmt: skip


@contextmanager
def reading(file: Path, kind: str, *errors: type[Exception]) -> Iterator[None]:
    """While a library reads a file, turn the ``errors`` that it raises into :func:`unreadable`."""
    try:
        yield
    except errors as error:
        raise unreadable(file, kind, error) from error
