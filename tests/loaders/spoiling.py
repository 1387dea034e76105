"""Ways to break the small study in one place."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import geopandas as gpd
import numpy as np
from shapely.geometry import Polygon

from tests.loaders.small_study import SOUTH, WEST, Study


@dataclass(frozen=True)
class Case:
    """One way to break the study, and the finding that must come of it."""

    label: str
    spoil: Callable[[Study], Any]
    severity: str
    code: str
    file: str | None
    row: int | None = None
    column: str | None = None
    says: str = ""


def cell(role: str, row: int, column: str, value: Any) -> Callable[[Study], Any]:
    return lambda study: study.cell(role, row, column, value)


def every(role: str, column: str, change: Callable[[Any], Any]) -> Callable[[Study], Any]:
    def spoil(study: Study) -> None:
        for row in study.rows[role]:
            row[column] = change(row[column])

    return spoil


def drop_column(role: str, column: str) -> Callable[[Study], Any]:
    return lambda study: [row.pop(column) for row in study.rows[role]]


def source(role: str, **changes: Any) -> Callable[[Study], Any]:
    return lambda study: study.sources.setdefault(role, {}).update(changes)


def raw(role: str, data: bytes) -> Callable[[Study], Any]:
    return lambda study: study.raw.update({role: data})


def grid(**changes: Any) -> Callable[[Study], Any]:
    return lambda study: study.grid.update(changes)


def after(change: Callable[[Path], Any]) -> Callable[[Study], Any]:
    return lambda study: study.after.append(change)


def both(*spoilers: Callable[[Study], Any]) -> Callable[[Study], Any]:
    return lambda study: [spoil(study) for spoil in spoilers]


def append(role: str, **row: Any) -> Callable[[Study], Any]:
    return lambda study: study.rows[role].append({**study.rows[role][-1], **row})


def shapes(role: str, geometry: list[Any], **columns: Any) -> Callable[[Study], Any]:
    def spoil(study: Study) -> None:
        if role == "exclusions" and "no_status" not in columns:
            columns.setdefault("status", ["set aside"] * len(geometry))
        setattr(study, role, gpd.GeoDataFrame(columns or {"name": [""] * len(geometry)}, geometry=geometry))

    return spoil


def cut(name: str, share: float) -> Callable[[Path], None]:
    def change(folder: Path) -> None:
        data = (folder / name).read_bytes()
        (folder / name).write_bytes(data[: int(len(data) * share)])

    return change


def hole_in_grid(values: np.ndarray) -> np.ndarray:
    values = values.copy()
    values[100:140, 20:60] = -9999.0
    return values


def at(x: float, y: float) -> tuple[float, float]:
    """A place from the south-west corner of the grid, in m."""
    return WEST + x, SOUTH + y


BOWTIE = Polygon([at(20, 20), at(170, 130), at(170, 20), at(20, 130)])
MUD = b"\x00\x01\x02\x03" * 300


def edit_row(path: Path, row: int, change: Callable[[str], str]) -> None:
    """Change one row of a text file, as a person counts them."""
    lines = path.read_text().splitlines()
    lines[row - 1] = change(lines[row - 1])
    path.write_text("\n".join(lines) + "\n")
