"""A small invented study on disk: sound as it stands, and easy to break in one place."""

from __future__ import annotations

import csv
from collections.abc import Callable
from dataclasses import dataclass, field, replace
from functools import cache
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

import geopandas as gpd
import numpy as np
import rasterio
from rasterio.transform import from_origin
from shapely.geometry import Point, Polygon

from sms_resource.findings import Finding, Findings
from sms_resource.loaders.bathymetry import load_grid
from sms_resource.loaders.boundaries import LayerSource, load_exclusions, load_outline
from sms_resource.loaders.checks import CheckSettings, check_data
from sms_resource.loaders.drilling import load_drilling
from sms_resource.loaders.laboratory import load_laboratory
from sms_resource.loaders.points import load_points
from sms_resource.loaders.source import TableSource
from sms_resource.loaders.surface_samples import load_dredges, load_surface
from sms_resource.loaders.tables import LoadedData

CRS = "EPSG:32702"
ELEMENTS = ("cu", "zn", "au", "ag")
HOLES = [f"H{i:03d}" for i in range(1, 13)]
LENGTHS = [6 + i % 3 for i in range(12)]
WEST, SOUTH = 500000.0, 8000000.0

Row = dict[str, Any]


def seafloor_at(x: float, y: float) -> float:
    """An inclined plane, so that a bilinear grid holds it exactly."""
    return -1600.0 + 0.05 * (x - WEST) - 0.02 * (y - SOUTH)


def place(i: int) -> tuple[float, float]:
    return WEST + 40.0 + 25.0 * (i % 4), SOUTH + 40.0 + 25.0 * (i // 4)


def tables() -> dict[str, list[Row]]:
    """Rows of every table, as they stand in the files."""
    out: dict[str, list[Row]] = {
        role: []
        for role in (
            "collars",
            "surveys",
            "runs",
            "lithology",
            "assays",
            "densities",
            "surface_samples",
            "dredges",
            "laboratory",
            "base_points",
        )
    }
    for i, (hole, length) in enumerate(zip(HOLES, LENGTHS)):
        x, y = place(i)
        out["collars"].append(
            {
                "hole_id": hole,
                "easting": x,
                "northing": y,
                "elevation": round(seafloor_at(x, y), 3),
                "length_m": length,
                "ended_in": "sulphide" if i % 3 == 0 else "host",
                "position_method": "LBL",
                "position_sigma_m": 1.0,
            }
        )
        for depth in (0, length):
            out["surveys"].append(
                {"hole_id": hole, "depth_m": depth, "azimuth": 30, "dip": -88 + depth * 0.1}
            )
        for k in range(length):
            out["runs"].append(
                {"hole_id": hole, "from_m": k, "to_m": k + 1, "recovered_length_m": 0.6 + 0.05 * (k % 4)}
            )
            out["assays"].append(
                {
                    "hole_id": hole,
                    "sample_id": f"{hole}-{k}",
                    "from_m": k,
                    "to_m": k + 1,
                    "method": "laboratory",
                    "cu_pct": round(2 + 0.3 * ((i + k) % 5), 2),
                    "zn_pct": round(1 + 0.4 * ((i * k) % 3), 2),
                    "au_gpt": 1.5 + 0.25 * (k % 3),
                    "ag_gpt": 20 + 3 * (i % 4),
                }
            )
        out["lithology"].append({"hole_id": hole, "from_m": 0, "to_m": length - 1, "code": "MS"})
        out["lithology"].append({"hole_id": hole, "from_m": length - 1, "to_m": length, "code": "FR"})
        out["densities"].append(
            {
                "hole_id": hole,
                "sample_id": f"D{i}",
                "from_m": 1,
                "to_m": 1.2,
                "wet_density_tpm3": 3.3,
                "dry_density_tpm3": 3.1,
                "grain_density_tpm3": 3.9,
            }
        )
    for i, kind in enumerate(("grab", "chimney", "push core", "gravity core", "grab", "chimney")):
        x, y = WEST + 50.0 + 10 * i, SOUTH + 60.0
        out["surface_samples"].append(
            {
                "sample_id": f"S{i}",
                "sample_type": kind,
                "easting": x,
                "northing": y,
                "elevation": round(seafloor_at(x, y), 2),
                "position_sigma_m": 2.0,
                "method": "laboratory",
                "cu_pct": 5.0,
                "zn_pct": 9.0,
                "au_gpt": 4.0,
                "ag_gpt": 90.0,
            }
        )
    out["dredges"].append(
        {
            "dredge_id": "DR1",
            "start_easting": WEST + 30,
            "start_northing": SOUTH + 30,
            "end_easting": WEST + 130,
            "end_northing": SOUTH + 90,
            "start_elevation": -1599,
            "end_elevation": -1596,
            "method": "laboratory",
            "cu_pct": 3.0,
            "zn_pct": 4.0,
            "au_gpt": 2.0,
            "ag_gpt": 40.0,
        }
    )
    lab = [
        ("reference", "", "RM1", 2.0, 2.05, 0.05),
        ("blank", "", "QZ", 0.01, 0.0, 0.0),
        ("duplicate", "H001-0", "", 2.1, "", ""),
        ("check", "H001-1", "", 2.2, "", ""),
    ]
    for i, (kind, original, material, value, expected, sd) in enumerate(lab):
        out["laboratory"].append(
            {
                "kind": kind,
                "batch": "B1",
                "sequence": i + 1,
                "sample_id": f"L{i}",
                "original_sample_id": original,
                "material": material,
                "stage": "pulp" if original else "",
                "element": "Cu",
                "value": value,
                "unit": "%",
                "expected": expected,
                "expected_sd": sd,
            }
        )
    out["base_points"] = [{"easting": WEST + 70, "northing": SOUTH + 70, "elevation": -1620.0}]
    return out


@dataclass
class Study:
    """Files of the small study, and what is said of them."""

    folder: Path
    rows: dict[str, list[Row]] = field(default_factory=tables)
    sources: dict[str, dict[str, Any]] = field(default_factory=dict)
    settings: CheckSettings = field(default_factory=lambda: CheckSettings(crs=CRS))
    raw: dict[str, bytes] = field(default_factory=dict)
    rename: dict[str, dict[str, str]] = field(default_factory=dict)
    suffix: dict[str, str] = field(default_factory=dict)
    grid: dict[str, Any] = field(default_factory=dict)
    outline: Any = None
    exclusions: Any = None
    layer_crs: str | None = CRS
    skip: set[str] = field(default_factory=set)
    after: list[Callable[[Path], None]] = field(default_factory=list)

    def name(self, role: str) -> str:
        return f"{role}{self.suffix.get(role, '.csv')}"

    def cell(self, role: str, row: int, column: str, value: Any) -> Study:
        """Put a value at a row as a person counts it: the first one under the header is row 2."""
        self.rows[role][row - 2][column] = value
        return self

    def write(self) -> None:
        for role, rows in self.rows.items():
            path = self.folder / self.name(role)
            if role in self.raw:
                path.write_bytes(self.raw[role])
                continue
            names = list(dict.fromkeys(key for row in rows for key in row))
            with path.open("w", newline="", encoding="utf-8") as stream:
                writer = csv.writer(stream)
                renamed = self.rename.get(role, {})
                writer.writerow([renamed.get(name, name) for name in names])
                writer.writerows([[row.get(name, "") for name in names] for row in rows])
        if not self.space_is_sound():
            self._write_space()
        for change in self.after:
            change(self.folder)

    def space_is_sound(self) -> bool:
        """Whether no case touches the grid or a layer; they are read once for all then."""
        spoilt = self.grid or self.after or self.outline is not None or self.exclusions is not None
        return not spoilt and self.layer_crs == CRS

    def _write_space(self) -> None:
        self._write_grid()
        square = Polygon(
            [
                (WEST + 20, SOUTH + 20),
                (WEST + 170, SOUTH + 20),
                (WEST + 170, SOUTH + 130),
                (WEST + 20, SOUTH + 130),
            ]
        )
        outline = (
            self.outline
            if self.outline is not None
            else gpd.GeoDataFrame({"name": ["body"]}, geometry=[square])
        )
        zones = self.exclusions
        if zones is None:
            vent = Point(WEST + 60, SOUTH + 60)
            zones = gpd.GeoDataFrame(
                {"name": ["vent"], "status": ["active vent"], "buffer_m": [20.0]}, geometry=[vent]
            )
        for role, frame in (("outline", outline), ("exclusions", zones)):
            frame.set_crs(self.layer_crs, allow_override=True).to_file(
                self.folder / f"{role}.gpkg", driver="GPKG", layer=role
            )

    def _write_grid(self) -> None:
        nx, ny = 200, 160
        x, y = np.meshgrid(WEST + 0.5 + np.arange(nx), SOUTH + ny - 0.5 - np.arange(ny))
        values = seafloor_at(x, y).astype("float32")  # type: ignore[attr-defined]
        change = self.grid.get("change")
        values = change(values) if change else values
        profile = {
            "driver": "GTiff",
            "width": nx,
            "height": ny,
            "count": 1,
            "dtype": "float32",
            "crs": self.grid.get("crs", CRS),
            "transform": self.grid.get("transform", from_origin(WEST, SOUTH + ny, 1, 1)),
            "nodata": self.grid.get("nodata", -9999.0),
        }
        with rasterio.open(self.folder / "bathymetry.tif", "w", **profile) as data:
            data.write(values, 1)

    def source(self, role: str) -> TableSource | None:
        if role in self.skip:
            return None
        base = TableSource(path=self.folder / self.name(role), shown_as=self.name(role))
        return replace(base, **self.sources.get(role, {}))

    def load(self) -> tuple[LoadedData, Findings]:
        """Write, read and check everything."""
        self.write()
        found = Findings()
        roles = ("collars", "surveys", "runs", "lithology", "assays", "densities")
        drill, more = load_drilling(**{role: self.source(role) for role in roles}, elements=ELEMENTS)
        found.extend(more)
        parts: dict[str, Any] = {}
        for role, field_name, reader in (
            ("surface_samples", "surface", lambda s: load_surface(s, ELEMENTS)),
            ("dredges", "dredges", lambda s: load_dredges(s, ELEMENTS)),
            ("laboratory", "laboratory", load_laboratory),
            ("base_points", "base_points", load_points),
        ):
            source = self.source(role)
            if source is not None:
                parts[field_name], more = reader(source)
                found.extend(more)
        if self.space_is_sound():
            space, more = _sound_space()
        else:
            space, more = self.load_space()
        found.extend(more)
        parts |= space
        files = {role: self.name(role) for role in self.rows if role not in self.skip}
        files |= {"bathymetry": "bathymetry.tif", "outline": "outline.gpkg", "exclusions": "exclusions.gpkg"}
        data = LoadedData(drill=drill, files=files, **parts)
        found.extend(check_data(data, settings=self.settings))
        return data, found

    def load_space(self) -> tuple[dict[str, Any], Findings]:
        """Read the grid and the layers."""
        parts: dict[str, Any] = {}
        found = Findings()
        options = {
            key: self.grid[key]
            for key in ("vertical", "band", "declared_crs", "reproject")
            if key in self.grid
        }
        parts["seafloor"], more = load_grid(
            self.folder / self.grid.get("file", "bathymetry.tif"),
            shown_as="bathymetry.tif",
            crs=CRS,
            **options,
        )
        found.extend(more)
        parts["outline"], more = load_outline(
            LayerSource(self.folder / "outline.gpkg", shown_as="outline.gpkg", crs=CRS)
        )
        found.extend(more)
        parts["exclusions"], more = load_exclusions(
            LayerSource(self.folder / "exclusions.gpkg", shown_as="exclusions.gpkg", crs=CRS)
        )
        found.extend(more)
        return parts, found


@cache
def _sound_space() -> tuple[dict[str, Any], Findings]:
    """Grid and layers as they are where a case does not touch them: read once."""
    with TemporaryDirectory() as folder:
        study = Study(Path(folder))
        study._write_space()
        return study.load_space()


def matching(found: Findings, **wanted: Any) -> list[Finding]:
    """Findings that have all the given attributes."""
    return [item for item in found if all(getattr(item, key) == value for key, value in wanted.items())]
