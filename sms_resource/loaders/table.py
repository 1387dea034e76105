"""A file and its mapping to a canonical table: the one place where cells become values."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from sms_resource.findings import Findings
from sms_resource.loaders.dimensions import stated_unit, units_of
from sms_resource.loaders.grades import grade_columns
from sms_resource.loaders.headers import element_of_header, find_header, nearest
from sms_resource.loaders.parsing import (
    COORDINATE_CODES,
    MISSING_CODES,
    Parsed,
    parse_identifiers,
    parse_numbers,
)
from sms_resource.loaders.places import counted, in_rows, mark, report_rows
from sms_resource.loaders.reading import RawTable, names_below, read_table
from sms_resource.loaders.source import TableSource
from sms_resource.loaders.tables import (
    BLANK,
    GRADE_ROLES,
    SCHEMAS,
    Column,
    empty_table,
)
from sms_resource.loaders.words import METHOD_WORDS, WORDS, allowed, plain_word
from sms_resource.units import ELEMENTS, column_element, element_column, known_unit


def load_table(
    source: TableSource, role: str, elements: tuple[str, ...] = (), optional_elements: tuple[str, ...] = ()
) -> tuple[pd.DataFrame, Findings]:
    """Read a file into the canonical table of ``role``.

    Parameters
    ----------
    source : TableSource
    role : str
        A key of ``SCHEMAS``.
    elements : tuple of str
        Elements that a table of grades must have.
    optional_elements : tuple of str
        Elements that are read where the file has them, and noted where it has not.

    Returns
    -------
    frame : DataFrame
        All columns of the role; as many rows as the file has records, none where it could not be read.
    findings : Findings
    """
    raw, findings = read_table(source)
    wanted = tuple(dict.fromkeys((*elements, *optional_elements))) if role in GRADE_ROLES else ()
    if raw is None:
        return mark(empty_table(role, wanted), source.name, {}), findings
    below = names_below(source, raw)
    if below is not None:
        findings.error(
            "header-below",
            f"Row {source.header_row} does not hold the names of the columns that the study maps; row {below} does.",
            f"Write header_row = {below} beside the file in the study.",
            file=source.name,
            row=source.header_row,
        )
        return mark(empty_table(role, wanted), source.name, {}), findings
    return TableMaker(source, role, raw, findings, wanted, frozenset(elements)).make(), findings


class TableMaker:
    """One pass over the columns of one table."""

    def __init__(
        self,
        source: TableSource,
        role: str,
        raw: RawTable,
        findings: Findings,
        elements: tuple[str, ...],
        needed: frozenset[str],
    ) -> None:
        self.source, self.role, self.raw, self.findings = source, role, raw, findings
        self.elements, self.needed = elements, needed
        self.file = source.name
        self.mapping = {self.plain(key): header for key, header in source.columns.items()}
        self.constants = {self.plain(key): value for key, value in source.constants.items()}
        self.headers: dict[str, str] = {}
        self.crs: str | None = None
        self.results: dict[str, Parsed] = {}
        self.reported: dict[str, list[int]] = {}

    @staticmethod
    def plain(key: str) -> str:
        """An element stands under its column, whichever way it is named."""
        plain = key.strip().casefold()
        return element_column(plain) if plain in ELEMENTS else plain

    def make(self) -> pd.DataFrame:
        """The canonical frame."""
        self._check_mapping()
        data: dict[str, Any] = {}
        for column in SCHEMAS[self.role]:
            data[column.name] = self._values(column)
            if column.kind == "result":
                parsed = self.results.get(column.name)
                blank = np.full(len(self.raw.rows), BLANK, dtype=np.int8)
                data[f"{column.name}_status"] = parsed.status if parsed else blank
                data[f"{column.name}_limit"] = parsed.limit if parsed else np.full(len(self.raw.rows), np.nan)
        if self.role in GRADE_ROLES:
            for element in self.elements:
                data.update(grade_columns(self, element))
        frame = pd.DataFrame(data) if len(self.raw.rows) else empty_table(self.role, self.elements)
        frame["source_row"] = self.raw.rows
        for column in SCHEMAS[self.role]:
            if column.kind in ("identifier", "text") and column.name in frame:
                frame[column.name] = frame[column.name].astype("str")
        self._note_unused()
        return mark(frame, self.file, self.headers, self.reported, self.crs)

    # -- the mapping ------------------------------------------------------------------------------------

    def _check_mapping(self) -> None:
        known = [column.name for column in SCHEMAS[self.role]]
        grades = self.role in GRADE_ROLES
        for given in (self.mapping, self.constants):
            for key in given:
                if key not in known and not (grades and column_element(key)):
                    near = nearest(key, known + (list(ELEMENTS) if grades else []))
                    self.findings.error(
                        "mapping-unknown",
                        f"The study maps {key!r}, which is no column of {self.role}.",
                        f"Did you mean {near!r}?" if near else f"Columns are: {', '.join(known)}.",
                        file=self.file,
                        column=key,
                    )
        for key, unit in self.source.units.items():
            allowed_units = units_of(self.plain(key)) if self.plain(key) in known else {}
            if allowed_units:
                if unit.strip().casefold() not in allowed_units:
                    self.findings.error(
                        "unit-unknown",
                        f"The unit {unit!r} of {key} is not known.",
                        f"Use one of {', '.join(allowed_units)}.",
                        file=self.file,
                        column=self.mapping.get(self.plain(key), key),
                    )
            elif key.casefold() not in ELEMENTS and column_element(key.casefold()) is None:
                self.findings.error(
                    "mapping-unknown",
                    f"The study gives a unit for {key!r}, which is no element, length or density.",
                    f"Elements are: {', '.join(ELEMENTS)}.",
                    file=self.file,
                    column=key,
                )
            elif not known_unit(unit):
                self.findings.error(
                    "unit-unknown",
                    f"The unit {unit!r} of {key} is not known.",
                    "Use one of %, ppm, ppb, g/t, mg/kg, kg/t, oz/t.",
                    file=self.file,
                    column=self.mapping.get(self.plain(key), key),
                )

    def header(self, name: str, *, required: bool, quiet: bool = False) -> str | None:
        """The file's column for a canonical one; a finding where a column that must be there is not."""
        declared = self.mapping.get(name)
        found = find_header(declared or name, self.raw.headers)
        if len(found) > 1:
            self.findings.error(
                "column-duplicate",
                f"The file has {len(found)} columns that may be {name}: {', '.join(found)}.",
                "Rename one of them, or name the right one in the study.",
                file=self.file,
                row=self.source.header_row,
                column=found[0],
            )
        if found:
            self.headers[name] = found[0]
            return found[0]
        if (required or declared) and not quiet and name not in self.constants:
            near = nearest(declared or name, self.raw.headers)
            said = column_element(name) or name  # an element is mapped by its own name
            self.findings.error(
                "column-missing",
                f"There is no column {declared or name!r}"
                + (f" for {said}" if declared else "")
                + f". The file has: {', '.join(h for h in self.raw.headers if h)[:300]}.",
                (f"The nearest is {near!r}: " if near else "")
                + f'map it in the study with columns = {{ {said} = "..." }}.',
                file=self.file,
                row=self.source.header_row,
                column=declared or name,
            )
        return None

    def _note_unused(self) -> None:
        used = set(self.headers.values())
        unused = [header for header in self.raw.headers if header and header not in used]
        if unused:
            self.findings.note(
                "columns-unused", f"Columns that were not read: {', '.join(unused)}.", file=self.file
            )

    # -- values -----------------------------------------------------------------------------------------

    def _values(self, column: Column) -> Any:
        count = len(self.raw.rows)
        place = {"easting": 0, "northing": 1}.get(column.name)
        from_points = place is not None and self.raw.points is not None
        header = self.header(column.name, required=column.required and not from_points)
        text = column.kind in ("identifier", "text")
        if header is None:
            if place is not None and self.raw.points is not None:
                self.crs = self.raw.crs
                return self.raw.points[place].to_numpy(dtype=np.float64)
            constant = self.constants.get(column.name)
            if text:
                word = column.default if constant is None else str(constant)
                return self._words(column.name, [word] * count)
            return self.constant(column.name, constant)
        if column.name in self.constants:
            self.findings.warning(
                "constant-ignored",
                f"The study gives a constant for {column.name}, but the file has it; the file was followed.",
                "Take the constant out of the study.",
                file=self.file,
                column=header,
            )
        if text:
            return self._words(column.name, self._identifiers(header, column))
        codes = COORDINATE_CODES if column.kind == "coordinate" else MISSING_CODES
        result = column.kind == "result"
        parsed = parse_numbers(self.raw.column(header), decimal=self.raw.decimal, codes=codes, limits=result)
        self.report(parsed, header)
        if result:
            self.results[column.name] = parsed
        return parsed.values * self._factor(column.name, header)

    def _factor(self, name: str, header: str) -> float:
        """Factor from the file's unit to the column's; an error where the header says another and the study nothing."""
        units = units_of(name)
        declared = next((unit for key, unit in self.source.units.items() if self.plain(key) == name), None)
        if declared is not None:
            return units.get(declared.strip().casefold(), 1.0)
        stated = stated_unit(header, name)
        if stated is not None and units[stated] != 1.0:
            own = "t/m3" if name.endswith("_tpm3") else "metres"
            self.findings.error(
                "unit-differs",
                f"The name of column {header!r} says {stated}, but {name} is in {own}.",
                f'Write units = {{ {name} = "{stated}" }} beside its columns in the study, or the unit that is true.',
                file=self.file,
                row=self.source.header_row,
                column=header,
            )
        return 1.0

    def constant(self, name: str, constant: str | float | None) -> np.ndarray:
        """A column of one value; NaN where the study gives none."""
        value = np.nan
        if constant is not None:
            try:
                value = float(constant)
            except ValueError:
                self.findings.error(
                    "not-a-number",
                    f"The constant {constant!r} of {name} is not a number.",
                    "Write a plain number in the study.",
                    file=self.file,
                    column=name,
                )
        return np.full(len(self.raw.rows), value)

    def _identifiers(self, header: str, column: Column) -> list[str]:
        texts, numeric, dates = parse_identifiers(self.raw.column(header))
        where: dict[str, Any] = {"file": self.file, "column": header}
        rows = self.raw.rows
        if dates:
            report_rows(
                self.findings, "error", "date-in-identifier", rows[dates],
                lambda i: f"The name is stored as a date ({texts[dates[i]]}).",
                "The spreadsheet has turned a name into a date: format the column as text and enter it again.", **where,
            )  # fmt: skip
        if numeric and column.kind == "identifier":
            self.findings.note(
                "identifier-number",
                f"{counted(len(numeric), 'name')} stored as numbers, so leading zeros may be lost.",
                "Format the column as text in the source if names have leading zeros.",
                row=int(rows[numeric[0]]),
                **where,
            )
        if column.kind == "identifier" and column.required:
            blank = [i for i, text in enumerate(texts) if not text]
            report_rows(
                self.findings, "error", "identifier-missing", rows[blank],
                f"The row has no {column.name}.", "Complete the row, or remove it.", **where,
            )  # fmt: skip
        return texts

    def _words(self, name: str, texts: list[str]) -> list[str]:
        """Canonical words of the columns that take only a few."""
        if name == "method":
            return [METHOD_WORDS.get(plain_word(text), text.strip().lower()) for text in texts]
        if name == "element":
            return [_element_word(text) for text in texts]
        if name not in WORDS:
            return texts
        known = WORDS[name]
        bad = [i for i, text in enumerate(texts) if plain_word(text) not in known and text not in known]
        header = self.headers.get(name, name)
        report_rows(
            self.findings, "error", "word-unknown", self.raw.rows[bad],
            lambda i: f"“{texts[bad[i]]}” is not a word for {name}.",
            f"Use one of: {allowed(name)}.", file=self.file, column=header,
        )  # fmt: skip
        return [known.get(plain_word(text), known.get(text, text)) for text in texts]

    def report(self, parsed: Parsed, header: str) -> None:
        """Findings of the cells of one column that are no numbers, and of codes for missing."""
        rows = self.raw.rows
        if parsed.problems:
            name = next((key for key, value in self.headers.items() if value == header), header)
            self.reported[name] = [int(rows[i]) for i in sorted(parsed.problems)]
        groups: dict[str, list[int]] = {}
        for i in sorted(parsed.problems):
            groups.setdefault(parsed.problems[i][0], []).append(i)
        for code, at in groups.items():
            # a first data row without any number is most often a row of units
            units_row = at[0] == 0 and len(at) == 1 and len(rows) > 3 and code == "not-a-number"
            remedy = parsed.problems[at[0]][2]
            remedy += " If this is a row of units, remove it." if units_row else ""
            report_rows(
                self.findings, "error", code, rows[at], [parsed.problems[i][1] for i in at], remedy,
                file=self.file, column=header,
            )  # fmt: skip
        coded = np.flatnonzero(parsed.coded)
        if len(coded):
            cells = self.raw.column(header).iloc[coded]
            told = list(dict.fromkeys(str(cell).strip() for cell in cells))[:3]
            self.findings.warning(
                "missing-code",
                f"{counted(len(coded), 'cell')} with a code in place of a value ({', '.join(told)}), read as blank "
                f"({in_rows(rows[coded])}).",
                "Leave the cells empty; correct what is no code.",
                file=self.file,
                row=int(rows[coded[0]]),
                column=header,
            )


def _element_word(text: str) -> str:
    found = element_of_header(text)
    return found[0] if found else text.strip().lower()
