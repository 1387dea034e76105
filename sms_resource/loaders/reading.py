"""Any file of a table to named columns of cells, each row with its number in the file."""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.loaders.source import TableSource
from sms_resource.loaders.text_table import TextForm, read_text_table
from sms_resource.loaders.workbook import read_workbook

TEXT_ENDINGS = frozenset({".csv", ".txt", ".tsv", ".dat", ".tab", ".asc", ".xyz", ".prn", ""})
WORKBOOK_ENDINGS = frozenset({".xlsx", ".xlsm"})
LOOK_BELOW = 5  # rows under the header row in which its names are looked for
VECTOR_ENDINGS = frozenset({".gpkg", ".shp", ".geojson", ".fgb", ".gml", ".kml", ".sqlite", ".json"})


@dataclass(frozen=True, eq=False)
class RawTable:
    """Cells of a table before anything is made of them.

    Parameters
    ----------
    headers : list of str
        Names of the columns in the file, in its order.
    cells : list of Series
        Cells of each column: text, or what the format holds.
    rows : ndarray of int64
        Row of each record in the file.
    decimal : str
        Decimal mark of numbers that are text.
    points : tuple of Series, optional
        Easting and northing of the point of each record, where the file has points.
    crs : str, optional
        Coordinate system of a vector file.
    form : TextForm, optional
        How a text table is written.
    """

    headers: list[str]
    cells: list[pd.Series]
    rows: NDArray[np.int64]
    decimal: str = "."
    points: tuple[pd.Series, pd.Series] | None = None
    crs: str | None = None
    form: TextForm | None = None

    def column(self, header: str) -> pd.Series:
        """Cells of the first column with that name."""
        return self.cells[self.headers.index(header)]


def readable(path: Path, name: str, findings: Findings) -> bool:
    """Whether ``path`` is a file that can be opened; a finding if not."""
    try:
        if path.is_file():
            with path.open("rb"):
                return True
        if path.is_dir():
            findings.error(
                "file-missing", "This is a folder, not a file.", "Name the file itself.", file=name
            )
        else:
            findings.error(
                "file-missing",
                f"There is no such file{_near_file(path)}.",
                "Paths are relative to the study file; check the name and the folder.",
                file=name,
            )
    except OSError as error:
        reason = error.strerror or str(error)
        findings.error(
            "file-unreadable", f"The file cannot be opened: {reason}.", "Check its permissions.", file=name
        )
    except ValueError as error:  # a NUL inside the name
        findings.error("file-missing", f"This is not a file name ({error}).", "Check the name.", file=name)
    return False


def _near_file(path: Path) -> str:
    from difflib import get_close_matches

    if not path.parent.is_dir():
        return f"; the folder {path.parent} does not exist"
    near = get_close_matches(path.name, [other.name for other in path.parent.iterdir()], 1, 0.6)
    return f"; near it lies {near[0]}" if near else ""


def read_table(source: TableSource) -> tuple[RawTable | None, Findings]:
    """Read the cells of a table from text, a workbook, Parquet or a vector file.

    Returns
    -------
    table : RawTable or None
        None where nothing could be read; the findings say why.
    findings : Findings
    """
    findings = Findings()
    if not readable(source.path, source.name, findings):
        return None, findings
    ending = source.path.suffix.lower()
    try:
        if ending in WORKBOOK_ENDINGS:
            table = _from_workbook(source, findings)
        elif ending in (".parquet", ".pq"):
            table = _from_parquet(source, findings)
        elif ending in VECTOR_ENDINGS:
            table = _from_vector(source, findings)
        elif ending in TEXT_ENDINGS:
            table = _from_text(source, findings)
        else:
            findings.error(
                "file-kind-unknown",
                f"Tables are not read from {ending} files.",
                "Save the table as .csv, .xlsx, .parquet or .gpkg.",
                file=source.name,
            )
            return None, findings
    except OSError as error:
        reason = error.strerror or str(error)
        findings.error(
            "file-unreadable",
            f"The file cannot be read: {reason}.",
            "Check that it is whole.",
            file=source.name,
        )
        return None, findings
    if table is not None and len(table.rows) == 0:
        findings.error("table-empty", "The table has no rows.", "Export the table again.", file=source.name)
    return table, findings


def _from_text(source: TableSource, findings: Findings) -> RawTable | None:
    read = read_text_table(source, findings)
    if read is None:
        return None
    headers, rows, numbers, form = read
    columns: list[Any] = [list(cells) for cells in zip(*rows)] if rows else [[] for _ in headers]
    cells = [pd.Series(column, dtype=object) for column in columns]
    return RawTable(headers, cells, np.array(numbers, dtype=np.int64), form.decimal, form=form)


def _from_workbook(source: TableSource, findings: Findings) -> RawTable | None:
    read = read_workbook(source, findings)
    if read is None:
        return None
    headers, columns, numbers = read
    cells = [pd.Series(column, dtype=object) for column in columns]
    return RawTable(headers, cells, np.array(numbers, dtype=np.int64), source.decimal or ".")


def _from_parquet(source: TableSource, findings: Findings) -> RawTable | None:
    import pyarrow as pa
    import pyarrow.parquet as pq

    try:
        # one thread: results must not depend on it, and tables are small
        table = pq.ParquetFile(source.path).read(use_threads=False)
        names = [name for name in table.column_names if not name.startswith("__index_level_")]
        # texts become Python's own here, where what is wrong with them can be caught
        cells = [
            column.to_pandas()
            if pa.types.is_primitive(column.type)
            else pd.Series(column.to_pylist(), dtype=object)
            for column in (table.column(name) for name in names)
        ]
    except (pa.ArrowException, ValueError, OSError, KeyError, TypeError) as error:
        reason = str(error).splitlines()[0][:160] if str(error) else type(error).__name__
        findings.error(
            "file-unreadable",
            f"This is not a whole Parquet file: {reason}.",
            "Export the table again.",
            file=source.name,
        )
        return None
    headers = [name.strip() for name in names]
    return RawTable(headers, cells, np.arange(2, table.num_rows + 2, dtype=np.int64), source.decimal or ".")


def _from_frame(frame: pd.DataFrame, source: TableSource) -> RawTable:
    headers = [str(name).strip() for name in frame.columns]
    cells = [frame.iloc[:, i].reset_index(drop=True) for i in range(frame.shape[1])]
    rows = np.arange(2, len(frame) + 2, dtype=np.int64)
    return RawTable(headers, cells, rows, source.decimal or ".")


def _from_vector(source: TableSource, findings: Findings) -> RawTable | None:
    from sms_resource.loaders.vectors import read_layer

    frame = read_layer(source.path, source.name, source.layer, findings)
    if frame is None:
        return None
    geometry = getattr(frame, "geometry", None) if hasattr(frame, "geom_type") else None
    if geometry is None:
        return _from_frame(pd.DataFrame(frame), source)
    table = _from_frame(pd.DataFrame(frame.drop(columns=geometry.name)), source)
    points = None
    kinds = set(geometry.geom_type.dropna())
    if kinds == {"Point"}:
        points = (geometry.x.reset_index(drop=True), geometry.y.reset_index(drop=True))
    crs = None if frame.crs is None else frame.crs.to_string()
    return RawTable(table.headers, table.cells, table.rows, table.decimal, points, crs)


def names_below(source: TableSource, raw: RawTable) -> int | None:
    """Row of a table that holds the columns which the study maps, where its header row holds none of them.

    A title above the names is the usual cause, in a workbook most often a merged cell.
    """
    from sms_resource.loaders.headers import find_header

    mapped = list(source.columns.values())
    if len(mapped) < 2 or any(find_header(name, raw.headers) for name in mapped):
        return None
    for row in range(source.header_row + 1, source.header_row + LOOK_BELOW + 1):
        below, _ = read_table(replace(source, header_row=row))
        if (
            below is not None
            and sum(bool(find_header(name, below.headers)) for name in mapped) > len(mapped) / 2
        ):
            return row
    return None
