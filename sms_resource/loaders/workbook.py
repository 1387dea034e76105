"""Sheets of Excel workbooks, with the cells as they are stored."""

from __future__ import annotations

import re
import zipfile
import zlib
from pathlib import Path
from typing import Any
from xml.etree.ElementTree import ParseError

from sms_resource.findings import Findings
from sms_resource.loaders.source import TableSource

_ZEROS = re.compile(r"0{2,}")
_FORMULA_WITHOUT_VALUE = re.compile(
    rb'<c\s[^>]*?r="[A-Z]+(\d+)"[^>]*>\s*<f[^>]*?(?:/>|>[^<]*</f>)\s*(?:<v\s*/>|<v></v>)?\s*</c>'
)
_BROKEN = (
    zipfile.BadZipFile,
    zlib.error,
    NotImplementedError,
    KeyError,
    ValueError,
    ParseError,
    IndexError,
    TypeError,
    AttributeError,
    EOFError,
    OSError,
)
_MOST_EXPANDED = 1_000_000_000  # bytes of a sheet when unpacked


def read_workbook(
    source: TableSource, findings: Findings
) -> tuple[list[str], list[list[Any]], list[int]] | None:
    """Header, columns of cells, and row numbers of one sheet; None, with findings, where it cannot be read."""
    import openpyxl
    from openpyxl.utils.exceptions import InvalidFileException

    name = source.name
    if not _sound_zip(source.path, name, findings):
        return None
    try:
        book = openpyxl.load_workbook(source.path, read_only=True, data_only=True)
        try:
            sheet = _pick_sheet(book, source, findings)
            if sheet is None:
                return None
            sheet.reset_dimensions()  # written wrongly by some programs
            rows = [[_cell(cell) for cell in row] for row in sheet.iter_rows()]
        finally:
            book.close()
        _uncomputed(source.path, name, findings)
    except (InvalidFileException, *_BROKEN) as error:
        findings.error(
            "file-unreadable",
            f"The workbook cannot be read ({type(error).__name__}).",
            "Open it in a spreadsheet, save it again as .xlsx, or export the sheet as text.",
            file=name,
        )
        return None
    return _table(rows, source, findings)


def sheet_names(path: Path) -> list[str]:
    """Names of the sheets of a workbook; empty where it cannot be read."""
    import openpyxl
    from openpyxl.utils.exceptions import InvalidFileException

    if not _sound_zip(path, path.name, Findings()):
        return []
    try:
        book = openpyxl.load_workbook(path, read_only=True)
    except (InvalidFileException, *_BROKEN):
        return []
    names = [sheet.title for sheet in book.worksheets]
    book.close()
    return names


def _sound_zip(path: Path, name: str, findings: Findings) -> bool:
    with path.open("rb") as stream:
        head = stream.read(8)
    if not head:
        findings.error("file-empty", "The file has no content.", "Save the workbook again.", file=name)
        return False
    try:
        with zipfile.ZipFile(path) as archive:
            size = sum(item.file_size for item in archive.infolist())
    except (zipfile.BadZipFile, OSError, ValueError, NotImplementedError):
        findings.error(
            "file-unreadable",
            "This is not a whole .xlsx workbook.",
            "Save it again as .xlsx; if it is text, give it the ending .csv.",
            file=name,
        )
        return False
    if size > _MOST_EXPANDED:
        findings.error(
            "file-too-large",
            f"The workbook unpacks to {size / 1e6:.0f} MB.",
            "Save the sheet as .csv or .parquet.",
            file=name,
        )
        return False
    return True


def _pick_sheet(book: Any, source: TableSource, findings: Findings) -> Any:
    names = [sheet.title for sheet in book.worksheets]
    if source.sheet is not None:
        for sheet in book.worksheets:
            if sheet.title == source.sheet:
                return sheet
        findings.error(
            "sheet-unknown",
            f"There is no sheet {source.sheet!r}; the workbook has {', '.join(names)}.",
            "Correct the name of the sheet in the study.",
            file=source.name,
        )
        return None
    if not names:
        findings.error(
            "sheet-unknown", "The workbook has no sheet.", "Save the table again.", file=source.name
        )
        return None
    if len(names) > 1:
        findings.note(
            "sheet-not-named",
            f"The workbook has {len(names)} sheets and the study names none; the first, {names[0]!r}, was read.",
            "Name the sheet in the study.",
            file=source.name,
        )
    return book.worksheets[0]


def _cell(cell: Any) -> Any:
    value = cell.value
    if isinstance(value, int) and not isinstance(value, bool) and value >= 0:
        form = cell.number_format
        if form and _ZEROS.fullmatch(form):  # shown as 007
            return str(value).zfill(len(form))
    return value


def _table(
    rows: list[list[Any]], source: TableSource, findings: Findings
) -> tuple[list[str], list[list[Any]], list[int]] | None:
    at = source.header_row - 1
    header = rows[at] if len(rows) > at else []
    while header and header[-1] in (None, ""):
        header = header[:-1]
    if not header:
        findings.error(
            "header-missing",
            f"Row {source.header_row}, which should hold the column names, is empty.",
            "Put one row of column names at the top of the sheet (no merged title above it), or state header_row.",
            file=source.name,
            row=source.header_row,
        )
        return None
    width = len(header)
    names = ["" if cell is None else str(cell).strip() for cell in header]
    kept, numbers, long = [], [], []
    for number, row in enumerate(rows[at + 1 :], source.header_row + 1):
        if all(cell is None or cell == "" for cell in row):
            continue
        if any(cell not in (None, "") for cell in row[width:]):
            long.append(number)
        kept.append((row + [None] * width)[:width])
        numbers.append(number)
    if long:
        findings.warning(
            "header-empty",
            f"{len(long)} rows have cells to the right of the last column name; they were not read.",
            "Give the column a name, or clear the cells.",
            file=source.name,
            row=long[0],
        )
    columns = [list(column) for column in zip(*kept)] if kept else [[] for _ in names]
    return names, columns, numbers


def _uncomputed(path: Path, name: str, findings: Findings) -> None:
    """Formulas that were saved without their value read as blank: say so."""
    with zipfile.ZipFile(path) as archive:
        for item in archive.namelist():
            if item.startswith("xl/worksheets/") and item.endswith(".xml"):
                data = archive.read(item)
                if b"<f" not in data:
                    continue
                rows = sorted({int(match) for match in _FORMULA_WITHOUT_VALUE.findall(data)})
                if rows:
                    findings.error(
                        "formula-not-computed",
                        f"{len(rows)} rows of {Path(item).stem} hold formulas saved without their values.",
                        "Open the workbook in a spreadsheet and save it, or paste the formulas as values.",
                        file=name,
                        row=rows[0],
                    )
