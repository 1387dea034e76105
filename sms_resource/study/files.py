"""The sections of a study that name its data files."""

from __future__ import annotations

from typing import Literal

from sms_resource.study.base import Section, key


class TableFile(Section):
    """One table: CSV, Excel, Parquet or GeoPackage."""

    file: str = key(..., "Path of the file, relative to the study file.", decision=False)
    sheet: str | None = key(None, "Sheet of an Excel workbook; the first one if not given.", decision=False)
    layer: str | None = key(None, "Layer of a GeoPackage; the only one if not given.", decision=False)
    delimiter: str | None = key(
        None, "Column separator of a text table; found out and noted if not given.", decision=False
    )
    decimal: str | None = key(
        None, "Decimal mark, '.' or ','; found out and noted if not given.", decision=False
    )
    encoding: str | None = key(None, "Text encoding; found out and noted if not given.", decision=False)
    columns: dict[str, str] = key(
        {}, "Mapping from the tool's column name to the file's, such as hole_id = \"HoleID\".", decision=False
    )
    units: dict[str, str] = key(
        {},
        'Unit of an element, a length or a density as the file has it, such as au = "ppb" or from_m = "cm".',
        decision=False,
    )
    vertical: Literal["elevation", "depth"] = key(
        "elevation",
        "Whether vertical positions are elevations (negative below sea level) or depths (positive down).",
    )
    header_row: int = key(1, "Row of the column names.", ge=1, decision=False)
    detection_limits: dict[str, float] = key(
        {},
        'Detection limit of each element in the file\'s unit, for results that say only "bdl" and to judge blanks by.',
    )
    constants: dict[str, str | float] = key(
        {}, 'Values for columns that the file lacks, such as method = "laboratory".'
    )


class GridFile(Section):
    """One raster of the seafloor or of a base surface."""

    file: str = key(..., "Path of the file, relative to the study file.", decision=False)
    crs: str | None = key(None, 'Coordinate system, where the file has none inside, such as "EPSG:32702".')
    reproject: bool = key(
        False,
        "Whether to resample a grid that is in another projected system, or rotated; refused otherwise. A grid in "
        "degrees is always resampled into study.crs, with a note.",
    )
    vertical: Literal["elevation", "depth"] = key(
        "elevation", "Whether cells hold elevations or depths (positive down)."
    )
    variable: str | None = key(None, "Variable of a NetCDF file that holds several grids.", decision=False)
    band: int = key(1, "Band that holds the elevation.", ge=1)
    uncertainty_band: int | None = key(
        None, "Band that holds the vertical uncertainty, where there is one.", ge=1
    )


class LayerFile(Section):
    """One layer of polygons, lines or points."""

    file: str = key(..., "Path of the file, relative to the study file.", decision=False)
    layer: str | None = key(None, "Layer in the file; the only one if not given.", decision=False)
    crs: str | None = key(None, "Coordinate system, where the file has none inside.")
    reproject: bool = key(False, "Whether to reproject a layer that is in another coordinate system.")
    columns: dict[str, str] = key(
        {},
        "Mapping to the file's columns: name, status, buffer_m of zones; name, height_m of chimneys; class, reason, "
        "by of class overrides.",
        decision=False,
    )


class DataFiles(Section):
    """All files of a study, each in its role. Only collars, assays and bathymetry must be there."""

    collars: TableFile | None = key(
        None, "Where each hole starts, its length and how it ended. Only a study with [exploration] goes without.",
        decision=False,
    )  # fmt: skip
    surveys: TableFile | None = key(None, "Azimuth and dip down the holes.", decision=False)
    runs: TableFile | None = key(None, "Cored lengths and what was recovered of them.", decision=False)
    lithology: TableFile | None = key(None, "Logged rock codes by depth.", decision=False)
    assays: TableFile | None = key(
        None, "Grades by depth. Only a study with [exploration] goes without.", decision=False
    )
    densities: TableFile | None = key(None, "Measured densities.", decision=False)
    surface_samples: TableFile | None = key(
        None, "Grabs, chimney pieces and short cores from the seafloor.", decision=False
    )
    dredges: TableFile | None = key(None, "Dredge tracks with their grades.", decision=False)
    laboratory: TableFile | None = key(None, "Reference materials, blanks and duplicates.", decision=False)
    bathymetry: GridFile = key(..., "The seafloor.", decision=False)
    outline: LayerFile | None = key(None, "Polygons that bound the body in plan.", decision=False)
    exclusions: LayerFile | None = key(
        None, "Zones that are set aside, with status and buffer.", decision=False
    )
    chimneys: LayerFile | None = key(
        None,
        'Polygons of chimneys with the height_m of each, for chimneys.source = "polygons".',
        decision=False,
    )
    class_overrides: LayerFile | None = key(
        None, "Polygons in which a CP sets the class (columns: class, reason, by).", decision=False
    )
    base_points: TableFile | None = key(
        None, "Points on the base of the sulphide from another source.", decision=False
    )
    base_grid: GridFile | None = key(
        None, "Grid of the base of the sulphide from another source.", decision=False
    )
    truth: str | None = key(
        None, "Known truth of an invented deposit (JSON), for a page that compares.", decision=False
    )


TABLE_ROLES = (
    "collars", "surveys", "runs", "lithology", "assays", "densities", "surface_samples", "dredges", "laboratory",
    "base_points",
)  # fmt: skip
GRID_ROLES = ("bathymetry", "base_grid")
LAYER_ROLES = ("outline", "exclusions", "chimneys", "class_overrides")
