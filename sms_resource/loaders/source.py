"""What the study says about one file of a table."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Literal


@dataclass(frozen=True)
class TableSource:
    """A file that holds a table, and how to read it.

    Whatever is None is found out from the file, and noted as a finding where it is not the plain default
    (UTF-8, commas, decimal points).

    Parameters
    ----------
    path : Path
        The file: text with any separator, .xlsx, .parquet, .gpkg or another vector format.
    shown_as : str
        Name of the file in findings; the file's own name if empty.
    sheet, layer : str, optional
        Sheet of a workbook (the first one if not given), layer of a vector file (the only one if not given).
    delimiter, decimal, encoding : str, optional
        Form of a text table.
    columns : mapping
        Canonical column to the file's column. Elements may be named "cu" or "cu_pct". A canonical column that
        is not mentioned is looked up under its own name.
    units : mapping
        Element, length or density to the unit in the file, such as ``{"au": "ppb", "from_m": "cm"}``.
    vertical : "elevation" | "depth"
        Whether vertical positions are elevations (negative below sea level) or depths (positive downwards).
    constants : mapping
        Values of columns that the file does not have, such as ``{"method": "laboratory"}``.
    detection_limits : mapping
        Element to its detection limit in the file's unit, for results that say only "bdl" or "<".
    header_row : int
        Row of the column names, counted from 1.
    """

    path: Path
    shown_as: str = ""
    sheet: str | None = None
    layer: str | None = None
    delimiter: str | None = None
    decimal: str | None = None
    encoding: str | None = None
    columns: Mapping[str, str] = field(default_factory=dict)
    units: Mapping[str, str] = field(default_factory=dict)
    vertical: Literal["elevation", "depth"] = "elevation"
    constants: Mapping[str, str | float] = field(default_factory=dict)
    detection_limits: Mapping[str, float] = field(default_factory=dict)
    header_row: int = 1

    @property
    def name(self) -> str:
        """Name of the file in findings."""
        return self.shown_as or self.path.name
