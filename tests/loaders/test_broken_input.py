"""Broken input, one kind a case: each gives its finding at its file, row and column, and never a traceback."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import geopandas as gpd
import numpy as np
import pytest
from rasterio.transform import Affine, from_origin
from shapely.geometry import LineString, Point, Polygon

from sms_resource.loaders.codes import CODES
from tests.loaders.small_study import SOUTH, WEST, Study, matching


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


BOWTIE = Polygon([(WEST + 20, SOUTH + 20), (WEST + 170, SOUTH + 130), (WEST + 170, SOUTH + 20), (WEST + 20, SOUTH + 130)])
MUD = b"\x00\x01\x02\x03" * 300

FILES = [
    Case("file not there", source("assays", path=Path("nowhere/assays.csv")), "error", "file-missing", "assays.csv"),
    Case("folder in place of a file", after(lambda f: ((f / "runs.csv").unlink(), (f / "runs.csv").mkdir())), "error",
         "file-missing", "runs.csv"),
    Case("file of no bytes", raw("assays", b""), "error", "file-empty", "assays.csv"),
    Case("header and no rows", raw("assays", b"hole_id,from_m,to_m,cu_pct,zn_pct,au_gpt,ag_gpt\n"), "error", "table-empty",
         "assays.csv"),
    Case("binary data", raw("runs", MUD), "error", "file-not-text", "runs.csv"),
    Case("workbook named .csv", raw("collars", b"PK\x03\x04 and more"), "error", "file-not-text", "collars.csv"),
    Case("text named .xlsx", lambda s: (s.suffix.update(runs=".xlsx"), s.raw.update(runs=b"hole_id,from_m\n")), "error",
         "file-unreadable", "runs.xlsx"),
    Case("text named .parquet", lambda s: (s.suffix.update(runs=".parquet"), s.raw.update(runs=b"hole_id,from_m\n")), "error",
         "file-unreadable", "runs.parquet"),
    Case("text named .gpkg", lambda s: (s.suffix.update(runs=".gpkg"), s.raw.update(runs=b"hole_id,from_m\n")), "error",
         "file-unreadable", "runs.gpkg"),
    Case("unknown kind of file", lambda s: s.suffix.update(runs=".doc"), "error", "file-kind-unknown", "runs.doc"),
    Case("encoding that is none", source("runs", encoding="utf-99"), "error", "encoding-unknown", "runs.csv"),
    Case("not in the stated encoding", both(cell("lithology", 4, "code", "Ä"), source("lithology", encoding="ascii")), "error",
         "encoding-wrong", "lithology.csv", 4),
    Case("wrong delimiter stated", source("runs", delimiter=";"), "error", "delimiter-wrong", "runs.csv", 1),
    Case("delimiter of two characters", source("runs", delimiter=";;"), "error", "delimiter-wrong", "runs.csv"),
    Case("a field too many", after(lambda f: _edit(f / "runs.csv", 5, lambda t: t + ",9")), "error", "row-ragged", "runs.csv", 5),
    Case("a field too few", after(lambda f: _edit(f / "runs.csv", 5, lambda t: t.rsplit(",", 1)[0])), "warning", "row-short",
         "runs.csv", 5),
    Case("quotation mark left open", after(lambda f: _edit(f / "lithology.csv", 6, lambda t: t.replace("MS", '"MS').replace("FR", '"FR'))),
         "error", "quote-open", "lithology.csv", 6),
    Case("decimal commas and commas between columns", after(lambda f: _edit(f / "runs.csv", 7, lambda t: t.replace("0.", "0,"))),
         "error", "row-ragged", "runs.csv", 7, None, "decimal comma"),
    Case("thousands or decimal comma", raw("base_points", b"easting;northing;elevation\n500,070;8,000,070;-1,620\n"), "error",
         "decimal-unclear", "base_points.csv"),
    Case("row of names left empty", raw("runs", b"\n\nhole_id,from_m,to_m,recovery_pct\nH001,0,1,60\n"), "error",
         "header-missing", "runs.csv", 1),
]  # fmt: skip

COLUMNS = [
    Case("column missing", lambda s: s.rename.update(collars={"easting": "estng"}), "error", "column-missing", "collars.csv", 1,
         "easting", "estng"),
    Case("mapped column missing", source("collars", columns={"easting": "UTM_E"}), "error", "column-missing", "collars.csv", 1,
         "UTM_E"),
    Case("two columns of one name", lambda s: (s.rename.update(collars={"length_m": "easting"})), "error", "column-duplicate",
         "collars.csv", 1, "easting"),
    Case("element with two columns", lambda s: (every("assays", "cu_pct", lambda v: v)(s),
         [row.update({"Cu_ppm": 1}) for row in s.rows["assays"]]), "error", "column-duplicate", "assays.csv", 1, "cu_pct"),
    Case("mapping of no column", source("collars", columns={"eastng": "easting"}), "error", "mapping-unknown", "collars.csv",
         None, "eastng", "easting"),
    Case("unit of no element", source("assays", units={"xx": "%"}), "error", "mapping-unknown", "assays.csv", None, "xx"),
    Case("unknown unit", source("assays", units={"au": "grains"}), "error", "unit-unknown", "assays.csv", None, "au"),
    Case("unit not stated", lambda s: s.rename.update(assays={"cu_pct": "Cu"}), "error", "unit-missing", "assays.csv", 1, "Cu"),
    Case("unit against the header", source("assays", units={"au": "ppb"}), "warning", "unit-contradicts-header", "assays.csv", 1,
         "au_gpt"),
    Case("element missing from assays", drop_column("assays", "zn_pct"), "error", "column-missing", "assays.csv", 1, "zn_pct"),
    Case("element missing from surface samples", drop_column("surface_samples", "zn_pct"), "warning", "element-missing",
         "surface_samples.csv", None, "zn_pct"),
    Case("constant that is no number", both(drop_column("collars", "length_m"), source("collars", constants={"length_m": "ten"})),
         "error", "not-a-number", "collars.csv", None, "length_m"),
    Case("constant beside the column", source("collars", constants={"length_m": 10.0}), "warning", "constant-ignored",
         "collars.csv", None, "length_m"),
    Case("no density in the densities", lambda s: [drop_column("densities", c)(s) for c in
         ("wet_density_tpm3", "dry_density_tpm3", "grain_density_tpm3")], "error", "column-missing", "densities.csv", 1,
         "wet_density_tpm3"),
    Case("no recovery in the runs", drop_column("runs", "recovered_length_m"), "error", "column-missing", "runs.csv", 1,
         "recovery_pct"),
    Case("method not stated", drop_column("assays", "method"), "warning", "method-not-stated", "assays.csv", 2, "method"),
]  # fmt: skip

CELLS = [
    Case("word in a number", cell("assays", 5, "cu_pct", "high"), "error", "not-a-number", "assays.csv", 5, "cu_pct", "high"),
    Case("unit in a number", cell("runs", 3, "to_m", "2 m"), "error", "not-a-number", "runs.csv", 3, "to_m", "2 m"),
    Case("thousands separator", cell("collars", 3, "easting", "500,065"), "error", "not-a-number", "collars.csv", 3, "easting"),
    Case("infinity", cell("assays", 5, "au_gpt", "inf"), "error", "not-a-number", "assays.csv", 5, "au_gpt"),
    Case("limit where none can be", cell("runs", 4, "to_m", "<3"), "error", "not-a-number", "runs.csv", 4, "to_m"),
    Case("error of a formula", cell("assays", 6, "zn_pct", "#REF!"), "error", "formula-error", "assays.csv", 6, "zn_pct"),
    Case("code for missing", cell("assays", 6, "zn_pct", -999), "warning", "missing-code", "assays.csv", 6, "zn_pct"),
    Case("code for missing in a coordinate", cell("collars", 6, "elevation", -9999), "warning", "missing-code", "collars.csv", 6,
         "elevation"),
    Case("below detection without limit", cell("assays", 7, "au_gpt", "<"), "error", "detection-limit-missing", "assays.csv", 7,
         "au_gpt"),
    Case("nd", cell("assays", 7, "au_gpt", "nd"), "error", "result-unclear", "assays.csv", 7, "au_gpt"),
    Case("identifier missing", cell("assays", 8, "hole_id", ""), "error", "identifier-missing", "assays.csv", 8, "hole_id"),
    Case("unknown end of a hole", cell("collars", 4, "ended_in", "purple"), "error", "word-unknown", "collars.csv", 4, "ended_in"),
    Case("unknown type of sample", cell("surface_samples", 4, "sample_type", "box"), "error", "word-unknown",
         "surface_samples.csv", 4, "sample_type"),
    Case("unknown element in the laboratory", cell("laboratory", 3, "element", "Qq"), "error", "element-unknown",
         "laboratory.csv", 3, "element"),
    Case("unknown kind of insert", cell("laboratory", 3, "kind", "sprite"), "error", "word-unknown", "laboratory.csv", 3, "kind"),
    Case("unknown unit in the laboratory", cell("laboratory", 3, "unit", "oz"), "error", "unit-unknown", "laboratory.csv", 3,
         "unit"),
    Case("no unit in the laboratory", drop_column("laboratory", "unit"), "error", "unit-missing", "laboratory.csv", 2, "value"),
]  # fmt: skip

HOLES = [
    Case("hole without collar", cell("assays", 9, "hole_id", "H999"), "error", "collar-missing", "assays.csv", 9, "hole_id"),
    Case("hole written otherwise", cell("lithology", 3, "hole_id", "h-001"), "error", "collar-missing", "lithology.csv", 3,
         "hole_id", "H001"),
    Case("collar twice", append("collars", hole_id="H003"), "error", "collar-duplicate", "collars.csv", 14, "hole_id", "row 4"),
    Case("collar without position", cell("collars", 5, "northing", ""), "error", "collar-incomplete", "collars.csv", 5,
         "northing"),
    Case("hole of no length", cell("collars", 5, "length_m", 0), "error", "hole-length-impossible", "collars.csv", 5, "length_m"),
    Case("hole of unknown length", cell("collars", 5, "length_m", ""), "note", "hole-length-missing", "collars.csv", 5,
         "length_m"),
    Case("hole whose end is not known", cell("collars", 5, "ended_in", ""), "note", "ended-unknown", "collars.csv", 5,
         "ended_in", "H004"),
    Case("hole without assays", lambda s: s.rows.update(assays=[r for r in s.rows["assays"] if r["hole_id"] != "H002"]),
         "warning", "hole-without-assays", "collars.csv", 3, "hole_id", "H002"),
    Case("hole without lithology", lambda s: s.rows.update(lithology=[r for r in s.rows["lithology"] if r["hole_id"] != "H002"]),
         "warning", "hole-without-lithology", "collars.csv", 3, "hole_id", "H002"),
    Case("interval backwards", both(cell("runs", 4, "from_m", 3), cell("runs", 4, "to_m", 2)), "error", "interval-backwards",
         "runs.csv", 4, "to_m"),
    Case("interval of no length", cell("runs", 4, "to_m", 2), "error", "interval-zero", "runs.csv", 4, "to_m"),
    Case("interval above the collar", cell("runs", 2, "from_m", -1), "error", "interval-negative", "runs.csv", 2, "from_m"),
    Case("interval past the end", cell("assays", 7, "to_m", 7), "error", "interval-past-end", "assays.csv", 7, "to_m"),
    Case("interval without an end", cell("assays", 7, "to_m", ""), "error", "interval-incomplete", "assays.csv", 7, "to_m"),
    Case("overlapping runs", cell("runs", 4, "from_m", 1.5), "error", "interval-overlap", "runs.csv", 4, "from_m", "row 3"),
    Case("overlap under a longer interval", cell("lithology", 2, "to_m", 5.5), "error", "interval-overlap", "lithology.csv", 3,
         "from_m", "row 2"),
    Case("interval twice", append("lithology", hole_id="H012", from_m=7, to_m=8), "error", "interval-duplicate", "lithology.csv",
         26, "from_m"),
    Case("gap between runs", cell("runs", 4, "from_m", 2.4), "warning", "interval-gap", "runs.csv", 4, "from_m"),
    Case("gap between assays", cell("assays", 4, "from_m", 2.4), "note", "interval-gap", "assays.csv", 4, "from_m"),
    Case("surveys missing", lambda s: s.skip.add("surveys"), "note", "survey-missing", "collars.csv", None, None, "H012"),
    Case("survey of one hole missing", lambda s: s.rows.update(surveys=s.rows["surveys"][2:]), "note", "survey-missing",
         "surveys.csv", None, None, "1 of 12 holes"),
    Case("dip upwards", cell("surveys", 2, "dip", 88), "error", "dip-positive", "surveys.csv", 2, "dip"),
    Case("all dips positive", every("surveys", "dip", lambda v: -v), "error", "dip-positive", "surveys.csv", 2, "dip", "All 24"),
    Case("dip beyond the vertical", cell("surveys", 3, "dip", -95), "error", "dip-range", "surveys.csv", 3, "dip"),
    Case("inclination in place of dip", cell("surveys", 3, "dip", -5), "warning", "dip-flat", "surveys.csv", 3, "dip"),
    Case("azimuth out of the circle", cell("surveys", 3, "azimuth", 400), "error", "azimuth-range", "surveys.csv", 3, "azimuth"),
    Case("azimuth below zero", cell("surveys", 3, "azimuth", -10), "error", "azimuth-range", "surveys.csv", 3, "azimuth"),
    Case("station without a dip", cell("surveys", 3, "dip", ""), "error", "survey-incomplete", "surveys.csv", 3, "dip"),
    Case("two stations at one depth", cell("surveys", 3, "depth_m", 0), "error", "survey-duplicate", "surveys.csv", 3, "depth_m"),
    Case("station past the end", cell("surveys", 3, "depth_m", 60), "warning", "survey-past-end", "surveys.csv", 3, "depth_m"),
    Case("station above the collar", cell("surveys", 2, "depth_m", -3), "error", "survey-depth", "surveys.csv", 2, "depth_m"),
    Case("hole that turns sharply", cell("surveys", 3, "dip", -60), "warning", "survey-jump", "surveys.csv", 3, "depth_m"),
]  # fmt: skip

VALUES = [
    Case("recovery a little over 100", cell("runs", 5, "recovered_length_m", 1.05), "warning", "recovery-over-100", "runs.csv", 5,
         "recovered_length_m"),
    Case("recovery far over 100", cell("runs", 5, "recovered_length_m", 1.5), "error", "recovery-impossible", "runs.csv", 5,
         "recovered_length_m"),
    Case("recovery below zero", cell("runs", 5, "recovered_length_m", -0.2), "error", "recovery-negative", "runs.csv", 5,
         "recovered_length_m"),
    Case("recovery not logged", cell("runs", 5, "recovered_length_m", ""), "warning", "recovery-missing", "runs.csv", 5,
         "recovered_length_m"),
    Case("recoveries as fractions", lambda s: [row.update(recovery_pct=row.pop("recovered_length_m")) for row in s.rows["runs"]],
         "error", "recovery-fraction", "runs.csv", 2, "recovery_pct"),
    Case("length and percent disagree", lambda s: [row.update(recovery_pct=100 * row["recovered_length_m"] + 20 * (i == 3))
         for i, row in enumerate(s.rows["runs"])], "warning", "recovery-disagrees", "runs.csv", 5, "recovery_pct"),
    Case("run that recovered nothing", both(cell("runs", 5, "recovered_length_m", 0), lambda s: s.rows["assays"].pop(3)), "note",
         "run-lost", "runs.csv", 5),
    Case("assay of lost core", cell("runs", 5, "recovered_length_m", 0), "warning", "assay-in-lost-core", "assays.csv", 5,
         "from_m"),
    Case("assay without a run", lambda s: s.rows["runs"].pop(3), "warning", "assay-without-run", "assays.csv", 5, "from_m"),
    Case("no runs at all", lambda s: s.skip.add("runs"), "warning", "runs-missing", None),
    Case("grade over the guard", cell("assays", 5, "cu_pct", 36), "warning", "grade-guard", "assays.csv", 5, "cu_pct"),
    Case("more copper than any mineral", cell("assays", 5, "cu_pct", 85), "error", "grade-impossible", "assays.csv", 5, "cu_pct"),
    Case("more zinc than sphalerite", cell("assays", 5, "zn_pct", 67.3), "error", "grade-impossible", "assays.csv", 5, "zn_pct"),
    Case("gold over the guard", cell("surface_samples", 3, "au_gpt", 140), "warning", "grade-guard", "surface_samples.csv", 3,
         "au_gpt"),
    Case("minerals over 100 %", both(cell("assays", 5, "cu_pct", 30), cell("assays", 5, "zn_pct", 45)), "error",
         "minerals-over-100", "assays.csv", 5),
    Case("minerals over 100 % but for chalcocite", both(cell("assays", 5, "cu_pct", 30), cell("assays", 5, "zn_pct", 25)),
         "warning", "minerals-over-100", "assays.csv", 5),
    Case("negative grade", cell("assays", 5, "au_gpt", -0.01), "error", "grade-negative", "assays.csv", 5, "au_gpt"),
    Case("gold in ppb said to be g/t", every("assays", "au_gpt", lambda v: 1000 * v), "warning", "unit-doubtful", "assays.csv", 1,
         "au_gpt"),
    Case("copper in fractions said to be %", every("assays", "cu_pct", lambda v: 0.001 * v), "warning", "unit-doubtful",
         "assays.csv", 1, "cu_pct"),
    Case("limit above the measured", cell("assays", 6, "au_gpt", "<10"), "warning", "detection-limit-high", "assays.csv", 6,
         "au_gpt"),
    Case("sample without grades", lambda s: s.rows["assays"][4].update(cu_pct="", zn_pct="", au_gpt="NA", ag_gpt="-"), "note",
         "sample-without-grades", "assays.csv", 6),
    Case("handheld readings", cell("assays", 6, "method", "pXRF"), "note", "method-other", "assays.csv", 6, "method"),
    Case("sample name twice", cell("assays", 5, "sample_id", "H001-0"), "error", "sample-duplicate", "assays.csv", 5, "sample_id"),
    Case("surface sample named as core", cell("surface_samples", 4, "sample_id", "H001-0"), "warning", "sample-shared",
         "surface_samples.csv", 4, "sample_id"),
    Case("density of a cloud", cell("densities", 4, "wet_density_tpm3", 0.3), "error", "density-impossible", "densities.csv", 4,
         "wet_density_tpm3"),
    Case("densities in kg/m3", every("densities", "wet_density_tpm3", lambda v: 1000 * v), "error", "density-impossible",
         "densities.csv", 2, "wet_density_tpm3"),
    Case("dry above wet", cell("densities", 4, "dry_density_tpm3", 3.5), "error", "density-order", "densities.csv", 4,
         "dry_density_tpm3"),
    Case("grain below dry", cell("densities", 4, "grain_density_tpm3", 2.9), "error", "density-order", "densities.csv", 4,
         "grain_density_tpm3"),
    Case("density impossible for the minerals", both(cell("densities", 4, "dry_density_tpm3", 5.29),
         cell("densities", 4, "wet_density_tpm3", 5.3), cell("densities", 4, "grain_density_tpm3", "")), "error",
         "density-mineralogy", "densities.csv", 4, "dry_density_tpm3"),
    Case("grain density too light for the minerals", lambda s: (s.rows["densities"][0].update(dry_density_tpm3=1.9,
         wet_density_tpm3=2.0, grain_density_tpm3=2.0), s.rows["assays"][1].update(cu_pct=20, zn_pct=20)), "warning",
         "density-mineralogy", "densities.csv", 2, "grain_density_tpm3"),
    Case("reference without its value", cell("laboratory", 2, "expected", ""), "error", "reference-without-expected",
         "laboratory.csv", 2, "expected"),
    Case("reference without its spread", cell("laboratory", 2, "expected_sd", ""), "warning", "reference-without-sd",
         "laboratory.csv", 2, "expected_sd"),
    Case("reference in another unit", cell("laboratory", 2, "value", 20500), "warning", "reference-far-off", "laboratory.csv", 2,
         "value"),
    Case("duplicate of nothing", cell("laboratory", 4, "original_sample_id", ""), "error", "duplicate-without-original",
         "laboratory.csv", 4, "original_sample_id"),
    Case("duplicate of an unknown sample", cell("laboratory", 4, "original_sample_id", "X9"), "warning", "original-missing",
         "laboratory.csv", 4, "original_sample_id"),
    Case("negative result", cell("laboratory", 3, "value", -0.01), "error", "grade-negative", "laboratory.csv", 3, "value"),
    Case("insert without result", cell("laboratory", 3, "value", ""), "warning", "result-missing", "laboratory.csv", 3, "value"),
    Case("no laboratory inserts", lambda s: s.skip.add("laboratory"), "warning", "laboratory-missing", None),
]  # fmt: skip

PLACES = [
    Case("depths given as elevations", every("collars", "elevation", lambda v: -v), "error", "elevation-sign", "collars.csv", 2,
         "elevation"),
    Case("one sign wrong", cell("collars", 7, "elevation", 1597), "error", "elevation-sign", "collars.csv", 7, "elevation"),
    Case("elevations given as depths", source("collars", vertical="depth"), "error", "elevation-sign", "collars.csv", 2,
         "elevation"),
    Case("grid of depths given as elevations", grid(change=lambda v: -v), "error", "elevation-sign", "bathymetry.tif"),
    Case("grid of elevations given as depths", grid(vertical="depth"), "error", "elevation-sign", "bathymetry.tif"),
    Case("collar off the grid", cell("collars", 4, "easting", WEST - 50), "error", "collar-off-grid", "collars.csv", 4,
         "easting, northing"),
    Case("collar over a hole in the grid", grid(change=hole_in_grid), "warning", "collar-on-nodata", "collars.csv", 2,
         "elevation"),
    Case("collar above the seafloor", lambda s: s.rows["collars"][3].update(elevation=s.rows["collars"][3]["elevation"] + 4),
         "warning", "collar-off-seafloor", "collars.csv", 5, "elevation", "4.00 m above"),
    Case("collar far from the seafloor", lambda s: s.rows["collars"][3].update(elevation=-1300), "error", "collar-off-seafloor",
         "collars.csv", 5, "elevation"),
    Case("all collars shifted", every("collars", "elevation", lambda v: v + 2.5), "warning", "collars-shifted", "collars.csv",
         None, "elevation", "2.50 m"),
    Case("columns exchanged", lambda s: [r.update(easting=r["northing"], northing=r["easting"]) for r in s.rows["collars"]],
         "error", "coordinates-swapped", "collars.csv", 2),
    Case("degrees in place of metres", lambda s: [r.update(easting=-171.0 + i * 1e-4, northing=-18.0) for i, r in
         enumerate(s.rows["collars"])], "error", "coordinates-geographic", "collars.csv", 2),
    Case("two holes at one place", lambda s: s.rows["collars"][5].update({k: s.rows["collars"][4][k] for k in
         ("easting", "northing", "elevation")}), "warning", "collar-same-place", "collars.csv", 7, "easting"),
    Case("twins", lambda s: s.rows["collars"][5].update(easting=s.rows["collars"][4]["easting"] + 2, northing=
         s.rows["collars"][4]["northing"]), "note", "hole-twins", "collars.csv", None, None, "H005 and H006 (2.0 m)"),
    Case("doubtful sigma", cell("collars", 3, "position_sigma_m", 900), "warning", "position-sigma", "collars.csv", 3,
         "position_sigma_m"),
    Case("surface sample above the seafloor", lambda s: s.rows["surface_samples"][2].update(elevation=-1590), "warning",
         "sample-above-seafloor", "surface_samples.csv", 4, "elevation"),
    Case("surface sample in the sky", lambda s: s.rows["surface_samples"][2].update(elevation=-900), "error",
         "sample-above-seafloor", "surface_samples.csv", 4, "elevation"),
    Case("surface sample far below", lambda s: s.rows["surface_samples"][2].update(elevation=-1800), "error",
         "sample-below-seafloor", "surface_samples.csv", 4, "elevation"),
    Case("surface sample off the grid", cell("surface_samples", 3, "northing", SOUTH + 900), "warning", "sample-off-grid",
         "surface_samples.csv", 3),
    Case("surface sample without a place", cell("surface_samples", 3, "elevation", ""), "warning", "sample-without-place",
         "surface_samples.csv", 3, "elevation"),
    Case("depth below the sea surface", lambda s: [r.update(from_m=r["from_m"] + 1600, to_m=r["to_m"] + 1600) for r in
         s.rows["assays"]], "warning", "sample-far-below", "assays.csv", 2, "to_m"),
    Case("dredge without a track", lambda s: s.rows["dredges"][0].update(end_easting=WEST + 30, end_northing=SOUTH + 30),
         "warning", "dredge-track", "dredges.csv", 2, "end_easting"),
    Case("base above the seafloor", cell("base_points", 2, "elevation", -1500), "error", "base-above-seafloor",
         "base_points.csv", 2, "elevation"),
]  # fmt: skip

GRIDS = [
    Case("grid cut short", after(cut("bathymetry.tif", 0.4)), "error", "grid-unreadable", "bathymetry.tif"),
    Case("grid that is text", after(lambda f: (f / "bathymetry.tif").write_text("no grid at all\n")), "error", "grid-unreadable",
         "bathymetry.tif"),
    Case("grid of no bytes", after(lambda f: (f / "bathymetry.tif").write_bytes(b"")), "error", "file-empty", "bathymetry.tif"),
    Case("grid not there", after(lambda f: (f / "bathymetry.tif").unlink()), "error", "file-missing", "bathymetry.tif"),
    Case("grid without values", grid(change=lambda v: np.full_like(v, -9999.0)), "error", "grid-empty", "bathymetry.tif"),
    Case("grid with undeclared fill", grid(nodata=None, change=hole_in_grid), "warning", "grid-fill-undeclared",
         "bathymetry.tif"),
    Case("grid without a system", grid(crs=None), "error", "crs-missing", "bathymetry.tif"),
    Case("grid in another system", grid(crs="EPSG:32703"), "error", "crs-different", "bathymetry.tif"),
    Case("grid in feet", grid(crs="EPSG:2227"), "error", "crs-not-metres", "bathymetry.tif"),
    Case("grid said to be in another system", grid(declared_crs="EPSG:32703"), "error", "crs-different", "bathymetry.tif"),
    Case("unknown system", grid(crs=None, declared_crs="EPSG:0"), "error", "crs-unknown", "bathymetry.tif"),
    Case("grid without a place", grid(crs=None, transform=Affine.identity()), "error", "grid-no-position", "bathymetry.tif"),
    Case("rotated grid", grid(transform=Affine.translation(WEST, SOUTH + 160) @ Affine.rotation(20) @ Affine.scale(1, -1)), "error",
         "grid-rotated", "bathymetry.tif"),
    Case("band that is not there", grid(band=3), "error", "grid-band-missing", "bathymetry.tif"),
    Case("coarse grid", grid(transform=from_origin(WEST - 5000, SOUTH + 5000, 50, 50)), "warning", "grid-coarse",
         "bathymetry.tif"),
    Case("deeper than any sea", grid(change=lambda v: 10 * v), "error", "grid-impossible", "bathymetry.tif"),
    Case("outline without a system", lambda s: setattr(s, "layer_crs", None), "error", "crs-missing", "outline.gpkg"),
    Case("outline in another system", lambda s: setattr(s, "layer_crs", "EPSG:32703"), "error", "crs-different", "outline.gpkg"),
    Case("outline cut short", after(cut("outline.gpkg", 0.1)), "error", "file-unreadable", "outline.gpkg"),
    Case("outline that crosses itself", shapes("outline", [BOWTIE]), "warning", "geometry-repaired", "outline.gpkg", 2, "geometry"),
    Case("outline that is a point", shapes("outline", [Point(WEST, SOUTH)]), "error", "outline-not-polygon", "outline.gpkg", 2,
         "geometry"),
    Case("outline that is a closed line", shapes("outline", [LineString(Polygon([(WEST + 20, SOUTH + 20), (WEST + 170, SOUTH + 20),
         (WEST + 170, SOUTH + 130)]).exterior)]), "warning", "outline-line-closed", "outline.gpkg", 2, "geometry"),
    Case("outline without a shape", shapes("outline", [None]), "error", "geometry-empty", "outline.gpkg", 2, "geometry"),
    Case("outline off the grid", shapes("outline", [Polygon([(WEST - 90, SOUTH), (WEST + 90, SOUTH), (WEST + 90, SOUTH + 90)])]),
         "error", "outline-off-grid", "outline.gpkg"),
    Case("outline without holes", shapes("outline", [Polygon([(WEST + 1, SOUTH + 1), (WEST + 30, SOUTH + 1), (WEST + 30, SOUTH + 30)])]),
         "error", "outline-without-holes", "outline.gpkg"),
    Case("outline of a room", shapes("outline", [Point(WEST + 40, SOUTH + 40).buffer(2)]), "warning", "outline-size",
         "outline.gpkg"),
    Case("zone of unknown status", shapes("exclusions", [BOWTIE.convex_hull], status=["garden"]), "warning", "status-unknown",
         "exclusions.gpkg", 2, "status"),
    Case("point without a buffer", shapes("exclusions", [Point(WEST, SOUTH)], status=["vent"]), "error", "buffer-missing",
         "exclusions.gpkg", 2, "buffer_m"),
    Case("negative buffer", shapes("exclusions", [BOWTIE.convex_hull], buffer_m=[-5.0]), "error", "buffer-negative",
         "exclusions.gpkg", 2, "buffer_m"),
    Case("buffer that is no number", shapes("exclusions", [BOWTIE.convex_hull], buffer_m=["wide"]), "error", "not-a-number",
         "exclusions.gpkg", 2, "buffer_m"),
    Case("zones without a status", shapes("exclusions", [BOWTIE.convex_hull], no_status=["vent"]), "error",
         "column-missing", "exclusions.gpkg", 1, "status"),
]  # fmt: skip


def _edit(path: Path, row: int, change: Callable[[str], str]) -> None:
    lines = path.read_text().splitlines()
    lines[row - 1] = change(lines[row - 1])
    path.write_text("\n".join(lines) + "\n")


CASES = [*FILES, *COLUMNS, *CELLS, *HOLES, *VALUES, *PLACES, *GRIDS]


@pytest.mark.parametrize("case", CASES, ids=[case.label for case in CASES])
def test_broken_input_has_its_finding(case: Case, tmp_path: Path) -> None:
    study = Study(tmp_path)
    case.spoil(study)
    _, found = study.load()
    assert {item.code for item in found} <= set(CODES)
    here = matching(found, code=case.code)
    assert here, f"no {case.code} among {[(f.code, f.where) for f in found if f.severity != 'note']}"
    wanted: dict[str, Any] = {"severity": case.severity, "file": case.file}
    wanted |= {key: value for key in ("row", "column") if (value := getattr(case, key)) is not None}
    exact = matching(found, code=case.code, **wanted)
    assert exact, here
    assert case.says in f"{exact[0].message} {exact[0].remedy}", exact[0]
    assert exact[0].message.endswith(".")
    if case.severity == "error":
        assert exact[0].remedy


def test_labels_are_unlike_each_other() -> None:
    assert len({case.label for case in CASES}) == len(CASES) >= 45


def test_all_findings_are_listed_not_only_the_first(tmp_path: Path) -> None:
    study = Study(tmp_path)
    cell("assays", 5, "cu_pct", "high")(study)
    cell("assays", 9, "zn_pct", "low")(study)
    cell("collars", 3, "easting", "")(study)
    cell("runs", 4, "from_m", 1.5)(study)
    study.layer_crs = None
    _, found = study.load()
    codes = {item.code for item in found.errors}
    assert {"not-a-number", "collar-incomplete", "interval-overlap", "crs-missing"} <= codes
    assert len(matching(found, code="not-a-number")) == 2


def test_many_of_a_kind_share_one_finding_that_lists_their_rows(tmp_path: Path) -> None:
    study = Study(tmp_path)
    for row in range(2, 62):
        cell("assays", row, "cu_pct", "x")(study)
    _, found = study.load()
    items = matching(found, code="not-a-number")
    assert len(items) == 26
    assert "rows" in items[-1].message and "27-61" in items[-1].message


def test_a_cell_that_is_no_number_has_one_finding(tmp_path: Path) -> None:
    study = Study(tmp_path)
    cell("runs", 5, "to_m", "four")(study)
    cell("collars", 3, "easting", "far")(study)
    _, found = study.load()
    for file, row in (("runs.csv", 5), ("collars.csv", 3)):
        assert [item.code for item in found.errors if item.file == file and item.row == row] == ["not-a-number"]


def test_the_settings_move_the_guards(tmp_path: Path) -> None:
    study = Study(tmp_path)
    study.settings = replace(study.settings, warn_above={"cu": 2.5}, error_above={"cu": 3.1})
    _, found = study.load()
    assert matching(found, code="grade-guard") and matching(found, code="grade-impossible")
