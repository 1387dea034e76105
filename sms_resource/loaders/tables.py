"""The tables that the loaders make and everyone else reads: their columns, and frames with none of their rows.

A column that a file does not have is there all the same: NaN for numbers, an empty string for text.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import partial
from typing import TYPE_CHECKING, Literal

import pandas as pd

from sms_resource.units import element_column

if TYPE_CHECKING:
    import geopandas as gpd

    from sms_resource.blocks.grid import SurfaceGrid

Kind = Literal["identifier", "text", "number", "coordinate", "result"]

MEASURED, BELOW_DETECTION, OVER_LIMIT, BLANK = 0, 1, 2, 3
"""What ``<element column>_status`` holds."""


@dataclass(frozen=True)
class Column:
    """One column of a table.

    Parameters
    ----------
    name : str
        Canonical name, with its unit.
    kind : "identifier" | "text" | "number" | "coordinate" | "result"
        Identifiers are text and are never read as numbers. In coordinates small negative numbers are
        positions; in other numbers -99 and -999 are codes for "missing". Results may be below detection or
        over limit.
    required : bool
        Whether the file, or the study on its behalf, must have it.
    default : str
        Text of a column that is not in the file.
    """

    name: str
    kind: Kind = "number"
    required: bool = False
    default: str = ""


_HOLE = Column("hole_id", "identifier", required=True)
_FROM, _TO = Column("from_m", required=True), Column("to_m", required=True)
_PLACE = (
    Column("easting", "coordinate", required=True),
    Column("northing", "coordinate", required=True),
    Column("elevation", "coordinate", required=True),
)

SCHEMAS: Mapping[str, tuple[Column, ...]] = {
    "collars": (
        _HOLE,
        *_PLACE,
        Column("length_m"),
        Column("azimuth"),
        Column("dip"),
        Column("ended_in", "text", default="unknown"),
        Column("position_method", "text"),
        Column("position_sigma_m"),
    ),
    "surveys": (
        _HOLE,
        Column("depth_m", required=True),
        Column("azimuth", required=True),
        Column("dip", required=True),
    ),
    "runs": (_HOLE, _FROM, _TO, Column("recovered_length_m"), Column("recovery_pct")),
    "lithology": (_HOLE, _FROM, _TO, Column("code", "identifier", required=True)),
    "assays": (_HOLE, Column("sample_id", "identifier"), _FROM, _TO, Column("method", "text")),
    "densities": (
        _HOLE,
        Column("sample_id", "identifier"),
        _FROM,
        _TO,
        Column("wet_density_tpm3"),
        Column("dry_density_tpm3"),
        Column("grain_density_tpm3"),
        Column("wet_mass_g"),
        Column("dry_mass_g"),
        Column("dry_volume_cm3"),
    ),
    "surface_samples": (
        Column("sample_id", "identifier", required=True),
        Column("sample_type", "text", required=True),
        *_PLACE,
        Column("position_sigma_m"),
        Column("method", "text"),
    ),
    "dredges": (
        Column("dredge_id", "identifier", required=True),
        Column("start_easting", "coordinate", required=True),
        Column("start_northing", "coordinate", required=True),
        Column("end_easting", "coordinate", required=True),
        Column("end_northing", "coordinate", required=True),
        Column("start_elevation", "coordinate"),
        Column("end_elevation", "coordinate"),
        Column("method", "text"),
    ),
    "laboratory": (
        Column("kind", "text", required=True),
        Column("batch", "identifier"),
        Column("sequence"),
        Column("sample_id", "identifier"),
        Column("original_sample_id", "identifier"),
        Column("material", "identifier"),
        Column("stage", "text"),
        Column("element", "text", required=True),
        Column("value", "result", required=True),
        Column("original_value", "result"),
        Column("unit", "text"),
        Column("expected"),
        Column("expected_sd"),
    ),
    "base_points": _PLACE,
}
"""Columns of every table, by role."""

GRADE_ROLES = ("assays", "surface_samples", "dredges")
"""Tables that carry one column for each element."""


def element_columns(elements: tuple[str, ...]) -> list[str]:
    """Canonical columns of ``elements``, each with its status and limit beside it."""
    names: list[str] = []
    for element in elements:
        column = element_column(element)
        names += [column, f"{column}_status", f"{column}_limit"]
    return names


def empty_table(role: str, elements: tuple[str, ...] = ()) -> pd.DataFrame:
    """The table of a role with all its columns and no row."""
    frame = {}
    for column in SCHEMAS[role]:
        if column.name == "unit":  # read, used to convert, and dropped
            continue
        text = column.kind in ("identifier", "text")
        frame[column.name] = pd.Series(dtype="str" if text else "float64")
        if column.kind == "result":
            frame[f"{column.name}_status"] = pd.Series(dtype="int8")
            frame[f"{column.name}_limit"] = pd.Series(dtype="float64")
    for name in element_columns(elements) if role in GRADE_ROLES else []:
        frame[name] = pd.Series(dtype="int8" if name.endswith("_status") else "float64")
    frame["source_row"] = pd.Series(dtype="int64")
    return pd.DataFrame(frame)


@dataclass(frozen=True, eq=False)
class DrillData:
    """Tables of the holes; a table that was not given has its columns and no row.

    Every table has ``source_row``, the row that a person sees in the file (the header is row 1).
    For every element column ``c`` of ``assays`` there are ``c_status`` (0 measured, 1 below detection,
    2 over limit, 3 blank) and ``c_limit`` (the limit, or NaN); ``c`` itself is NaN unless measured.

    Parameters
    ----------
    collars, surveys, runs, lithology, assays, densities : DataFrame
        Columns as in ``SCHEMAS``.
    """

    collars: pd.DataFrame = field(default_factory=partial(empty_table, "collars"))
    surveys: pd.DataFrame = field(default_factory=partial(empty_table, "surveys"))
    runs: pd.DataFrame = field(default_factory=partial(empty_table, "runs"))
    lithology: pd.DataFrame = field(default_factory=partial(empty_table, "lithology"))
    assays: pd.DataFrame = field(default_factory=partial(empty_table, "assays"))
    densities: pd.DataFrame = field(default_factory=partial(empty_table, "densities"))


@dataclass(frozen=True, eq=False)
class LoadedData:
    """All that the files of a study hold.

    Parameters
    ----------
    drill : DrillData
        Tables of the holes.
    surface, dredges, laboratory : DataFrame
        Surface samples, dredge tracks, and laboratory inserts (one row a result).
    seafloor : SurfaceGrid, optional
        Elevation of the seafloor.
    outline, exclusions : GeoDataFrame, optional
        Polygons of the body in plan; zones set aside (name, status, buffer_m, geometry).
    base_points : DataFrame, optional
        easting, northing, elevation of the base of the sulphide from another source.
    base_grid : SurfaceGrid, optional
        The same as a grid.
    files : dict
        Role to the path as findings print it, with the roles of the study file: "collars", "surveys", "runs",
        "lithology", "assays", "densities", "surface_samples", "dredges", "laboratory", "bathymetry",
        "outline", "exclusions", "base_points", "base_grid".
    """

    drill: DrillData = field(default_factory=DrillData)
    surface: pd.DataFrame = field(default_factory=partial(empty_table, "surface_samples"))
    dredges: pd.DataFrame = field(default_factory=partial(empty_table, "dredges"))
    laboratory: pd.DataFrame = field(default_factory=partial(empty_table, "laboratory"))
    seafloor: SurfaceGrid | None = None
    outline: gpd.GeoDataFrame | None = None
    exclusions: gpd.GeoDataFrame | None = None
    base_points: pd.DataFrame | None = None
    base_grid: SurfaceGrid | None = None
    files: dict[str, str] = field(default_factory=dict)
