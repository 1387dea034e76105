"""A small invented deposit on disk, sound as it stands and easy to change in one place.

Fifteen holes in a mound of 60 x 60 m: a cap over a massive domain, short core, two holes that end in sulphide. A run
takes seconds.
"""

from __future__ import annotations

import csv
import json
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import geopandas as gpd
import numpy as np
import rasterio
from rasterio.transform import from_origin
from shapely.geometry import Point

CRS = "EPSG:32702"
WEST, SOUTH = 500000.0, 8000000.0
CENTRE = (WEST + 30.0, SOUTH + 30.0)
ELEMENTS = ("cu_pct", "zn_pct", "au_gpt", "ag_gpt")
CAP_M = 2.0

Row = dict[str, Any]


def seafloor_at(x: Any, y: Any) -> Any:
    """A mound of 12 m."""
    r2 = (np.asarray(x) - CENTRE[0]) ** 2 + (np.asarray(y) - CENTRE[1]) ** 2
    return -1600.0 + 12.0 * np.exp(-r2 / (2 * 16.0**2))


def thickness_at(x: float, y: float) -> float:
    """Depth of the base under the seafloor, to 0.1 m."""
    r2 = (x - CENTRE[0]) ** 2 + (y - CENTRE[1]) ** 2
    return round(11.0 - 0.012 * r2, 1)


def hole_places() -> list[tuple[float, float]]:
    """Four by four without the last, some 11 m apart."""
    grid = [(WEST + 13.5 + 11.0 * i, SOUTH + 13.5 + 11.0 * j) for j in range(4) for i in range(4)]
    return grid[:15]


def tables() -> dict[str, list[Row]]:
    """Rows of every table, as they stand in the files."""
    rng = np.random.default_rng(20)
    roles = (
        "collars",
        "surveys",
        "runs",
        "lithology",
        "assays",
        "densities",
        "surface_samples",
        "laboratory",
    )
    out: dict[str, list[Row]] = {role: [] for role in roles}
    for number, (x, y) in enumerate(hole_places(), 1):
        _hole(out, f"H{number:03d}", x, y, number in (6, 11), rng)
    for number in range(8):
        x, y = WEST + 22.0 + 2.0 * number, SOUTH + 31.0
        out["surface_samples"].append(
            {"sample_id": f"S{number}", "sample_type": ("grab", "chimney")[number % 2], "easting": x, "northing": y,
             "elevation": round(float(seafloor_at(x, y)), 2), "position_sigma_m": 2.0, "method": "laboratory",
             "cu_pct": 9.0 + 0.5 * number, "zn_pct": 12.0, "au_gpt": 8.0, "ag_gpt": 150.0}
        )  # fmt: skip
    out["laboratory"] = _laboratory()
    return out


def _hole(out: dict[str, list[Row]], hole: str, x: float, y: float, open_end: bool, rng: Any) -> None:
    base = thickness_at(x, y)
    length = int(base) if open_end else int(base) + 3
    out["collars"].append(
        {"hole_id": hole, "easting": x, "northing": y, "elevation": round(float(seafloor_at(x, y)), 3),
         "length_m": length, "ended_in": "sulphide" if open_end else "host", "position_method": "LBL",
         "position_sigma_m": 0.5}
    )  # fmt: skip
    for depth in (0, length):
        out["surveys"].append({"hole_id": hole, "depth_m": depth, "azimuth": 40, "dip": -89})
    layers = [(0.0, CAP_M, "CP"), (CAP_M, length if open_end else base, "MS")]
    layers += [] if open_end else [(base, length, "AV")]
    for start, stop, code in layers:
        out["lithology"].append({"hole_id": hole, "from_m": start, "to_m": stop, "code": code})
    for start in range(length):
        inside = start + 0.5 < base
        cap = start < CAP_M
        recovered = round(0.55 + 0.4 * rng.random(), 2)
        out["runs"].append(
            {"hole_id": hole, "from_m": start, "to_m": start + 1, "recovered_length_m": recovered}
        )
        level = (3.0 if cap else 6.0) if inside else 0.2
        noise = np.exp(0.3 * rng.standard_normal(4) - 0.045)
        grades = np.array([level, level * (1.5 if cap else 0.4), 0.6 * level, 12.0 * level]) * noise
        out["assays"].append(
            {"hole_id": hole, "sample_id": f"{hole}-{start}", "from_m": start, "to_m": start + 1,
             "method": "laboratory", **{name: round(float(v), 3) for name, v in zip(ELEMENTS, grades)}}
        )  # fmt: skip
    for depth, dry in ((0.2, 2.45), (3.2, 3.05)):
        dry = round(dry + 0.1 * rng.standard_normal(), 3)
        wet = round(dry + 1.024 * (1 - dry / 4.0), 3)
        out["densities"].append(
            {"hole_id": hole, "sample_id": f"{hole}-D{depth:g}", "from_m": depth, "to_m": depth + 0.2,
             "wet_density_tpm3": wet, "dry_density_tpm3": dry}
        )  # fmt: skip


def _laboratory() -> list[Row]:
    rows = []
    for number in range(12):
        kind, original, material, value, expected, sd = (
            ("reference", "", "RM1", 2.0 + 0.02 * (number % 3), 2.02, 0.05),
            ("blank", "", "QZ", 0.001, "", ""),
            ("duplicate", f"H{1 + number // 3:03d}-1", "", 3.0, "", ""),
        )[number % 3]
        rows.append(
            {"kind": kind, "batch": "B1", "sequence": number + 1, "sample_id": f"L{number}",
             "original_sample_id": original, "material": material, "stage": "pulp" if original else "",
             "element": "Cu", "value": value, "unit": "%", "expected": expected, "expected_sd": sd}
        )  # fmt: skip
    return rows


def decisions() -> dict[str, Any]:
    """The study file as nested tables."""
    roles = (
        "collars",
        "surveys",
        "runs",
        "lithology",
        "assays",
        "densities",
        "surface_samples",
        "laboratory",
    )
    data: dict[str, Any] = {role: {"file": f"{role}.csv"} for role in roles}
    data["bathymetry"] = {"file": "bathymetry.tif"}
    data["outline"] = {"file": "outline.gpkg", "layer": "outline"}
    data["exclusions"] = {"file": "exclusions.gpkg", "layer": "zones"}
    sale = {"price_unit": "t", "price_source": "invented", "price_date": "2026-01-31", "recovery_pct": 85.0,
            "recovery_basis": "invented", "payable_pct": 90.0, "sold_statement": "invented"}  # fmt: skip
    return {
        "study": {"name": "Small mound", "effective_date": Bare("2026-01-31"), "crs": CRS, "seed": 5},
        "data": data,
        "metals": {"estimate": ["cu", "zn", "au", "ag"], "summarise": []},
        "domains": {"codes": {"CP": "cap", "MS": "massive", "AV": "waste"}, "sulphide": ["cap", "massive"]},
        "blocks": {"size_m": [5.0, 5.0, 2.0], "azimuth_deg": 0.0, "origin_m": [WEST, SOUTH, -1620.0]},
        "kriging": {"discretisation": [2, 2, 2]},
        "variograms": {"intervals": False},
        "body": {"extrapolate_below_m": 2.0},
        "classes": {"least_volume_m3": 100.0},
        "screens": {"least_thickness_m": 0.5},
        "cutoff": {"variable": "cu", "at": 4.0, "steps": [0.0, 2.0, 4.0, 6.0], "basis": "invented"},
        "value": {
            "metals": {"cu": {"price": 9000.0, **sale}, "zn": {"price": 2500.0, **sale}},
            "costs": {"vessel_cost_per_day": 100000.0, "wet_tonnes_per_day": 2000.0},
        },
    }


class Bare(str):
    """Text that stands in TOML without quotation marks."""

    __slots__ = ()


def toml(tables: dict[str, Any], prefix: str = "") -> str:
    """Nested tables as TOML: a table's own keys first, then its tables."""
    lines = []
    own = {name: value for name, value in tables.items() if not isinstance(value, dict)}
    if prefix and own:
        lines.append(f"[{prefix}]")
    lines += [f"{_name(name)} = {_value(value)}" for name, value in own.items()]
    if own:
        lines.append("")
    text = "\n".join(lines) + ("\n" if lines else "")
    for name, value in tables.items():
        if isinstance(value, dict):
            inner = f"{prefix}.{_name(name)}" if prefix else _name(name)
            text += toml(value, inner) if value else f"[{inner}]\n\n"
    return text


def _name(name: str) -> str:
    return name if name.replace("_", "").isalnum() else json.dumps(name)


def _value(value: Any) -> str:
    if isinstance(value, Bare):
        return str(value)
    if isinstance(value, list | tuple):
        return "[" + ", ".join(_value(item) for item in value) + "]"
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{_name(k)} = {_value(v)}" for k, v in value.items()) + " }"
    return json.dumps(value, ensure_ascii=False)


@dataclass
class SmallStudy:
    """What the files of the study hold; write() puts them in a folder.

    Attributes
    ----------
    rows : dict
        Rows of each table; ``rows["assays"][3]`` is row 5 of the file.
    toml : dict
        The study file as nested tables.
    raw : dict
        Bytes that stand in a file in place of its content, by file name.
    grid : dict
        Changes of the seafloor grid: values (callable), cell, crs, transform, nodata.
    outline, zones : GeoDataFrame
    after : list of callable
        What is done to the folder when all is written.
    """

    folder: Path
    rows: dict[str, list[Row]] = field(default_factory=tables)
    toml: dict[str, Any] = field(default_factory=decisions)
    raw: dict[str, bytes] = field(default_factory=dict)
    grid: dict[str, Any] = field(default_factory=dict)
    outline: Any = None
    zones: Any = None
    after: list[Callable[[Path], Any]] = field(default_factory=list)

    @property
    def path(self) -> Path:
        """The study file."""
        return self.folder / "study.toml"

    def write(self) -> Path:
        """Write every file; returns the path of the study file."""
        self.folder.mkdir(parents=True, exist_ok=True)
        for role, rows in self.rows.items():
            names = list(dict.fromkeys(key for row in rows for key in row))
            with (self.folder / f"{role}.csv").open("w", newline="", encoding="utf-8") as stream:
                writer = csv.writer(stream)
                writer.writerow(names)
                writer.writerows([[row.get(name, "") for name in names] for row in rows])
        self._write_grid()
        self._write_layers()
        self.path.write_text(toml(self.toml), encoding="utf-8")
        for name, content in self.raw.items():
            (self.folder / name).write_bytes(content)
        for change in self.after:
            change(self.folder)
        return self.path

    def row_of(self, text: str) -> int:
        """Row of the study file that starts with a text."""
        lines = self.path.read_text(encoding="utf-8").splitlines()
        return next(number for number, line in enumerate(lines, 1) if line.startswith(text))

    def _write_grid(self) -> None:
        cell = self.grid.get("cell", 2.0)
        count = round(60.0 / cell)
        x = WEST + cell * (0.5 + np.arange(count))
        y = SOUTH + cell * (count - 0.5 - np.arange(count))
        values = self.grid.get("values", seafloor_at)(*np.meshgrid(x, y)).astype("float64")
        profile = {
            "driver": "GTiff", "width": count, "height": count, "count": 1, "dtype": "float64",
            "crs": self.grid.get("crs", CRS), "nodata": self.grid.get("nodata", -9999.0),
            "transform": self.grid.get("transform", from_origin(WEST, SOUTH + cell * count, cell, cell)),
        }  # fmt: skip
        with rasterio.open(self.folder / "bathymetry.tif", "w", **profile) as data:
            data.write(values, 1)

    def _write_layers(self) -> None:
        outline, zones = self.outline, self.zones
        if outline is None:
            outline = gpd.GeoDataFrame({"name": ["body"]}, geometry=[Point(*CENTRE).buffer(24.0)], crs=CRS)
        if zones is None:
            zones = gpd.GeoDataFrame(
                {"name": ["vent"], "status": ["active_vent"], "buffer_m": [6.0]},
                geometry=[Point(WEST + 44.0, SOUTH + 40.0)], crs=CRS,
            )  # fmt: skip
        outline.to_file(self.folder / "outline.gpkg", driver="GPKG", layer="outline")
        zones.to_file(self.folder / "exclusions.gpkg", driver="GPKG", layer="zones")
