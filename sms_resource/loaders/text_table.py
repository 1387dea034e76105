"""Text tables: encoding, separator and decimal mark, and rows that keep their number in the file."""

from __future__ import annotations

import codecs
import csv
import io
import re
from dataclasses import dataclass
from pathlib import Path

from sms_resource.findings import Findings
from sms_resource.loaders.source import TableSource

LARGEST_TEXT = 400_000_000  # bytes; a table of samples is far below this
_SIGNATURES = (
    (b"PK\x03\x04", "a workbook or another zip file"),
    (b"\xd0\xcf\x11\xe0", "an old Excel workbook (.xls)"),
    (b"PAR1", "a Parquet file"),
    (b"SQLite format 3", "a GeoPackage or another database"),
    (b"%PDF", "a PDF"),
    (b"\x89HDF", "an HDF5 file"),
    (b"II*\x00", "a TIFF"),
)
_NAMED_DELIMITERS = {
    "tab": "\t", "\\t": "\t", "comma": ",", "semicolon": ";", "space": " ", "whitespace": " ", "pipe": "|",
}  # fmt: skip
DELIMITER_NAMES = {",": "commas", ";": "semicolons", "\t": "tabs", "|": "bars", " ": "spaces"}
_COMMA_NUMBER = re.compile(r"[<>]?\s*[-+]?\d+,\d+")
_POINT_NUMBER = re.compile(r"[<>]?\s*[-+]?\d*\.\d+")
_THOUSANDS = re.compile(r"[<>]?\s*[-+]?[1-9]\d{0,2}(,\d{3})+")


@dataclass(frozen=True)
class TextForm:
    """How a text table is written."""

    encoding: str
    delimiter: str
    decimal: str


def read_bytes(path: Path, name: str, findings: Findings, limit: int = LARGEST_TEXT) -> bytes | None:
    """Bytes of a file that should be text; None, with a finding, where it is not."""
    size = path.stat().st_size
    if size == 0:
        findings.error("file-empty", "The file has no content.", "Export the table again.", file=name)
        return None
    if size > limit:
        findings.error(
            "file-too-large",
            f"The file has {size / 1e6:.0f} MB; text of up to {limit / 1e6:.0f} MB is read.",
            "Save it in a binary format (.parquet for a table, .tif for a grid) or cut it to the area.",
            file=name,
        )
        return None
    data = path.read_bytes()
    for signature, what in _SIGNATURES:
        if data.startswith(signature):
            findings.error(
                "file-not-text",
                f"The file's name says text, but it is {what}.",
                "Give the file its true ending, or export it as text.",
                file=name,
            )
            return None
    return data


def decode(data: bytes, declared: str | None, name: str, findings: Findings) -> tuple[str, str] | None:
    """Text and encoding of ``data``; None, with a finding, where no encoding fits."""
    guesses = [declared] if declared else _encodings(data)
    for encoding in guesses:
        try:
            text = data.decode(encoding)
        except LookupError:
            remedy = "Use a name such as utf-8, cp1252 or utf-16."
            findings.error("encoding-unknown", f"There is no encoding named {encoding!r}.", remedy, file=name)
            return None
        except UnicodeError as error:
            at = getattr(error, "start", 0)
            row = data[:at].count(b"\n") + 1
            continue
        if "\x00" in text:
            break
        return text.replace("\r\n", "\n").replace("\r", "\n"), encoding
    else:
        if not declared and b"\x00" in data:
            _not_text(name, findings)
            return None
        findings.error(
            "encoding-wrong",
            f"The file cannot be read as {' or '.join(str(g) for g in guesses)}; it fails near row {row}.",
            "State the file's encoding in the study, or save the table again as UTF-8.",
            file=name,
            row=row,
        )
        return None
    _not_text(name, findings)
    return None


def _not_text(name: str, findings: Findings) -> None:
    findings.error(
        "file-not-text", "The file holds binary data, not text.", "Export the table as text again.", file=name
    )


def _encodings(data: bytes) -> list[str]:
    if data.startswith(codecs.BOM_UTF8):
        return ["utf-8-sig"]
    if data.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)):
        return ["utf-16"]
    head = data[:2000]
    if len(head) >= 4 and len(data) % 2 == 0:
        if head[1::2].count(0) > 0.4 * len(head) and head[0::2].count(0) == 0:
            return ["utf-16-le"]
        if head[0::2].count(0) > 0.4 * len(head) and head[1::2].count(0) == 0:
            return ["utf-16-be"]
    return ["utf-8", "cp1252"]


def find_delimiter(text: str, header_row: int = 1) -> str:
    """The separator that cuts the header into most fields and the rows below into as many."""
    lines = [line for line in text[:200_000].split("\n")[header_row - 1 : header_row + 60] if line.strip()]
    if not lines:
        return ","
    best, best_score = ",", (0.0, 0)
    for delimiter in (",", ";", "\t", "|", " "):
        try:
            counts = [len(row) for row in _reader(lines, delimiter)]
        except csv.Error:
            continue
        if not counts or counts[0] < 2:
            continue
        same = sum(count == counts[0] for count in counts) / len(counts)
        # a space also stands inside names and never wins over a real separator
        score = (round(same, 1) if delimiter != " " else 0.05 * same, counts[0])
        if score > best_score:
            best, best_score = delimiter, score
    return best


def _reader(lines: list[str], delimiter: str, strict: bool = False) -> list[list[str]]:
    if delimiter == " ":
        lines = [line.strip().replace("\t", " ") for line in lines]
    source = io.StringIO("\n".join(lines), newline="\n")
    return list(csv.reader(source, delimiter=delimiter, skipinitialspace=True, strict=strict))


def find_decimal(rows: list[list[str]], delimiter: str) -> str | None:
    """The decimal mark of the numbers in ``rows``: "." or ","; None where it cannot be told."""
    commas = points = thousands = 0
    for row in rows[:500]:
        for cell in row:
            cell = cell.strip()
            if _COMMA_NUMBER.fullmatch(cell):
                commas += 1
                thousands += bool(_THOUSANDS.fullmatch(cell))
            elif _POINT_NUMBER.fullmatch(cell):
                points += 1
    if commas == 0 or points > 0 or delimiter == ",":
        return "."
    return None if thousands == commas else ","


def read_text_table(
    source: TableSource, findings: Findings
) -> tuple[list[str], list[list[str]], list[int], TextForm] | None:
    """Header, rows, row numbers and form of a text table; None, with findings, where it cannot be read."""
    name = source.name
    data = read_bytes(source.path, name, findings)
    decoded = decode(data, source.encoding, name, findings) if data is not None else None
    if decoded is None:
        return None
    text, encoding = decoded
    delimiter = _NAMED_DELIMITERS.get(source.delimiter or "", source.delimiter or "")
    delimiter = delimiter or find_delimiter(text, source.header_row)
    if len(delimiter) != 1 or delimiter in '"\n':
        findings.error(
            "delimiter-wrong",
            f"The delimiter {source.delimiter!r} is not one character.",
            'Write one character, such as ";" or "\\t", or leave it out.',
            file=name,
        )
        return None
    rows = _records(text, delimiter, name, findings)
    if len(rows) < source.header_row or not any(cell.strip() for cell in rows[source.header_row - 1]):
        findings.error(
            "header-missing",
            f"Row {source.header_row}, which should hold the column names, is empty.",
            "Put one row of column names at the top of the table, or state header_row.",
            file=name,
            row=source.header_row,
        )
        return None
    header = [cell.strip() for cell in rows[source.header_row - 1]]
    body = rows[source.header_row :]
    if len(header) == 1 and source.delimiter and find_delimiter(text, source.header_row) != delimiter:
        findings.error(
            "delimiter-wrong",
            f"With {DELIMITER_NAMES.get(delimiter, repr(delimiter))} between columns the table has only one.",
            f"The file seems to use {DELIMITER_NAMES[find_delimiter(text, source.header_row)]}; "
            "change the delimiter in the study or leave it out.",
            file=name,
            row=source.header_row,
        )
        return None
    decimal = source.decimal or find_decimal(body, delimiter)
    if decimal is None or decimal not in (".", ",") or decimal == delimiter:
        findings.error(
            "decimal-unclear",
            "Numbers such as 1,234 may be read with a decimal comma or with thousands."
            if decimal is None
            else f"The decimal mark {decimal!r} does not go with {DELIMITER_NAMES.get(delimiter, delimiter)} "
            "between columns.",
            'State decimal = "," or "." in the study, and write numbers without thousands separators.',
            file=name,
        )
        decimal = "."
    form = TextForm(encoding, delimiter, decimal)
    _note_form(source, form, findings)
    kept, numbers = _even_rows(body, len(header), source.header_row, delimiter, name, findings)
    return header, kept, numbers, form


def _records(text: str, delimiter: str, name: str, findings: Findings) -> list[list[str]]:
    lines = text.split("\n")
    if lines and lines[-1] == "":
        lines.pop()
    try:
        return _reader(lines, delimiter, strict=True)
    except csv.Error as error:
        reason = str(error)
    csv.field_size_limit(max(csv.field_size_limit(), len(text) + 1))
    rows = _reader(lines, delimiter)
    if "end of data" in reason:
        widest = [max((cell.count("\n") for cell in row), default=0) for row in rows]
        at = max(range(len(rows)), key=lambda i: (widest[i], i))
        findings.error(
            "quote-open",
            f'A quotation mark (") is opened here and never closed, so {widest[at]} rows run together.',
            "Close or remove the quotation mark.",
            file=name,
            row=at + 1,
        )
    else:
        findings.warning(
            "quote-stray",
            f"A quotation mark stands inside a value ({reason}); the row was read as it stands.",
            "Remove the quotation mark.",
            file=name,
            row=next((i + 1 for i, line in enumerate(lines) if line.count('"') % 2 or '"' in line), None),
        )
    return rows


def _note_form(source: TableSource, form: TextForm, findings: Findings) -> None:
    found = []
    if not source.encoding and form.encoding not in ("utf-8", "utf-8-sig"):
        found.append(f'encoding = "{form.encoding}"')
    if not source.delimiter and form.delimiter != ",":
        found.append("delimiter = " + repr(form.delimiter).replace("'", '"'))
    if not source.decimal and form.decimal != ".":
        found.append(f'decimal = "{form.decimal}"')
    if found:
        findings.note(
            "text-form-found",
            f"The study does not say how this text is written; found {', '.join(found)}.",
            "Write it in the study if it is right.",
            file=source.name,
        )


def _even_rows(
    rows: list[list[str]], width: int, header_row: int, delimiter: str, name: str, findings: Findings
) -> tuple[list[list[str]], list[int]]:
    """Rows of one width, blank ones left out, each with its number in the file."""
    kept: list[list[str]] = []
    numbers: list[int] = []
    long: list[int] = []
    short: list[int] = []
    blank: list[int] = []
    for number, row in enumerate(rows, header_row + 1):
        if len(row) != width:
            if not any(cell.strip() for cell in row):
                blank.append(number)
                continue
            if len(row) > width:
                if any(cell.strip() for cell in row[width:]):
                    long.append(number)
                row = row[:width]
            else:
                short.append(number)
                row = row + [""] * (width - len(row))
        elif not any(row) or not any(cell.strip() for cell in row):
            blank.append(number)
            continue
        kept.append(row)
        numbers.append(number)
    comma = " A decimal comma in a table separated by commas does this." if delimiter == "," else ""
    from sms_resource.loaders.places import counted, report_rows

    report_rows(
        findings, "error", "row-ragged", long, f"The row has more fields than the header's {width}.",
        f"Put quotation marks round values that hold the separator.{comma}", file=name,
    )  # fmt: skip
    report_rows(
        findings, "warning", "row-short", short, f"The row has fewer fields than the header's {width}; the rest is blank.",
        "Complete the row.", file=name,
    )  # fmt: skip
    inner = [number for number in blank if numbers and number < numbers[-1]]
    if inner:
        findings.note(
            "rows-blank",
            f"{counted(len(inner), 'blank row')} inside the table skipped.",
            file=name,
            row=inner[0],
        )
    return kept, numbers
