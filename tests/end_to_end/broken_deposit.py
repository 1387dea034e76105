"""Holes, values, places and bodies that cannot be, each with its error."""

from __future__ import annotations

import geopandas as gpd
import numpy as np
from rasterio import Affine
from shapely.geometry import LineString, Point, Polygon

from tests.end_to_end.breaking import (
    Spoil,
    append,
    both,
    cell,
    cut_short,
    decide,
    every,
    grid,
    one,
    raw,
)
from tests.end_to_end.small_study import CENTRE, CRS, SOUTH, WEST, SmallStudy, seafloor_at

HOLES = [
    one(
        "assay without a hole",
        cell("assays", 5, "hole_id", "H999"),
        "collar-missing",
        "assays.csv",
        5,
        "hole_id",
    ),
    one(
        "collar twice",
        append("collars", hole_id="H003"),
        "collar-duplicate",
        "collars.csv",
        17,
        "hole_id",
        "row 4",
    ),
    one(
        "collar without a coordinate",
        cell("collars", 5, "northing", ""),
        "collar-incomplete",
        "collars.csv",
        5,
        "northing",
    ),
    one(
        "hole of no length",
        cell("collars", 5, "length_m", 0),
        "hole-length-impossible",
        "collars.csv",
        5,
        "length_m",
    ),
    one(
        "interval backwards",
        both(cell("runs", 4, "from_m", 3), cell("runs", 4, "to_m", 2)),
        "interval-backwards",
        "runs.csv",
        4,
        "to_m",
    ),
    one("interval of no length", cell("runs", 4, "to_m", 2), "interval-zero", "runs.csv", 4, "to_m"),
    one(
        "interval above the collar",
        cell("runs", 2, "from_m", -1),
        "interval-negative",
        "runs.csv",
        2,
        "from_m",
    ),
    one(
        "run past the end of the hole", cell("runs", 8, "to_m", 9), "interval-past-end", "runs.csv", 8, "to_m"
    ),
    one(
        "assay without an end", cell("assays", 7, "to_m", ""), "interval-incomplete", "assays.csv", 7, "to_m"
    ),
    one(
        "intervals that overlap",
        cell("runs", 4, "from_m", 1.5),
        "interval-overlap",
        "runs.csv",
        4,
        "from_m",
        "row 3",
    ),
    one("dip upwards", cell("surveys", 2, "dip", 89), "dip-positive", "surveys.csv", 2, "dip"),
    one(
        "azimuth out of the circle",
        cell("surveys", 3, "azimuth", 400),
        "azimuth-range",
        "surveys.csv",
        3,
        "azimuth",
    ),
    one(
        "two stations at one depth",
        cell("surveys", 3, "depth_m", 0),
        "survey-duplicate",
        "surveys.csv",
        3,
        "depth_m",
    ),
]

VALUES = [
    one(
        "recovery over 110",
        cell("runs", 5, "recovered_length_m", 1.2),
        "recovery-impossible",
        "runs.csv",
        5,
        "recovered_length_m",
    ),
    one(
        "recovery below zero",
        cell("runs", 5, "recovered_length_m", -0.2),
        "recovery-negative",
        "runs.csv",
        5,
        "recovered_length_m",
    ),
    one(
        "more copper than any mineral",
        cell("assays", 3, "cu_pct", 85),
        "grade-impossible",
        "assays.csv",
        3,
        "cu_pct",
    ),
    one(
        "minerals over 100 %",
        both(cell("assays", 3, "cu_pct", 30), cell("assays", 3, "zn_pct", 45)),
        "minerals-over-100",
        "assays.csv",
        3,
        "cu_pct, zn_pct",
    ),
    one("grade below zero", cell("assays", 3, "au_gpt", -0.01), "grade-negative", "assays.csv", 3, "au_gpt"),
    one(
        "density of a cloud",
        cell("densities", 3, "wet_density_tpm3", 0.3),
        "density-impossible",
        "densities.csv",
        3,
        "wet_density_tpm3",
    ),
    one(
        "dry above wet",
        cell("densities", 3, "dry_density_tpm3", 3.9),
        "density-order",
        "densities.csv",
        3,
        "dry_density_tpm3",
    ),
    one(
        "sample name twice",
        cell("assays", 5, "sample_id", "H001-0"),
        "sample-duplicate",
        "assays.csv",
        5,
        "sample_id",
    ),
    one(
        "reference without its value",
        cell("laboratory", 2, "expected", ""),
        "reference-without-expected",
        "laboratory.csv",
        2,
        "expected",
    ),
]


def _rotated() -> Affine:
    turned, cell = np.radians(20.0), 2.0
    east, north = cell * np.cos(turned), cell * np.sin(turned)
    return Affine(east, north, WEST - 20.0, north, -east, SOUTH + 60.0)


def _outline(*shapes: object, crs: str | None = CRS) -> Spoil:
    def spoil(study: SmallStudy) -> None:
        study.outline = gpd.GeoDataFrame({"name": ["body"] * len(shapes)}, geometry=list(shapes), crs=crs)

    return spoil


PLACES = [
    one(
        "collar off the grid",
        cell("collars", 3, "easting", WEST + 300.0),
        "collar-off-grid",
        "collars.csv",
        3,
        "easting, northing",
    ),
    one(
        "easting and northing exchanged",
        lambda s: [row.update(easting=row["northing"], northing=row["easting"]) for row in s.rows["collars"]],
        "coordinates-swapped",
        "collars.csv",
        2,
        "easting, northing",
    ),
    one(
        "collars in degrees",
        lambda s: [
            row.update(easting=-171.0 + 1e-4 * i, northing=-18.1) for i, row in enumerate(s.rows["collars"])
        ],
        "coordinates-geographic",
        "collars.csv",
        2,
        "easting, northing",
    ),
    one(
        "depths that are not said to be depths",
        every("collars", "elevation", lambda value: -value),
        "elevation-sign",
        "collars.csv",
        2,
        "elevation",
        "depth",
    ),
    one(
        "grid of depths that are not said to be",
        grid(values=lambda x, y: -seafloor_at(x, y)),
        "elevation-sign",
        "bathymetry.tif",
    ),
    one("grid without a system", grid(crs=None), "crs-missing", "bathymetry.tif"),
    one("grid in another system", grid(crs="EPSG:32701"), "crs-different", "bathymetry.tif"),
    one("grid in feet", grid(crs="EPSG:2225"), "crs-not-metres", "bathymetry.tif"),
    one(
        "grid without a value",
        grid(values=lambda x, y: np.full_like(x, -9999.0)),
        "grid-empty",
        "bathymetry.tif",
    ),
    one("grid that is rotated", grid(transform=_rotated()), "grid-rotated", "bathymetry.tif"),
    one("grid cut short", cut_short("bathymetry.tif", 0.5), "grid-unreadable", "bathymetry.tif"),
    one("grid that is none", raw("bathymetry.tif", b"not a grid"), "grid-unreadable", "bathymetry.tif"),
    one("band that is not there", decide("data.bathymetry.band", 3), "grid-band-missing", "bathymetry.tif"),
    one(
        "layer that is not there",
        decide("data.outline.layer", "outlines"),
        "layer-unknown",
        "outline.gpkg",
        None,
        None,
        "outline",
    ),
    one("outline without a shape", _outline(), "layer-empty", "outline.gpkg"),
    one("outline of points", _outline(Point(*CENTRE)), "outline-not-polygon", "outline.gpkg", 2, "geometry"),
    one(
        "outline of an open line",
        _outline(LineString([CENTRE, (WEST, SOUTH), (WEST + 9, SOUTH)])),
        "outline-not-polygon",
        "outline.gpkg",
        2,
        "geometry",
    ),
    one(
        "outline in another system",
        _outline(Point(*CENTRE).buffer(24.0), crs="EPSG:32701"),
        "crs-different",
        "outline.gpkg",
    ),
    one(
        "outline without a system",
        _outline(Point(*CENTRE).buffer(24.0), crs=None),
        "crs-missing",
        "outline.gpkg",
    ),
    one(
        "outline far from the grid",
        _outline(Point(WEST + 900.0, SOUTH).buffer(24.0)),
        "outline-off-grid",
        "outline.gpkg",
    ),
]


BODIES = [
    one("no sample in sulphide", every("lithology", "code", lambda _: "AV"), "no-composites", "study.toml"),
    one(
        "truth that is no table",
        both(raw("truth.json", b"[1, 2"), decide("data.truth", "truth.json")),
        "truth-unreadable",
        "truth.json",
    ),
    one(
        "no grade that is accepted",
        lambda s: [row.update(method="handheld") for row in s.rows["assays"]],
        "composite-none",
        "assays.csv",
    ),
    one(
        "no densities",
        decide("data.densities", None),
        "study-value-missing",
        "study.toml",
        None,
        "density.method",
        "assigned",
    ),
    one(
        "density of one domain alone",
        both(
            decide("data.densities", None),
            decide("density", {"method": "assigned", "assigned_dry_tpm3": {"cap": 2.5}}),
        ),
        "density-unmeasured",
        None,
        None,
        None,
        "massive",
    ),
    one(
        "no log of the rocks",
        decide("data.lithology", None),
        "study-value-missing",
        "study.toml",
        "[domains.codes]",
        "domains.codes",
    ),
    one(
        "blocks without number",
        decide("blocks.size_m", [0.01, 0.01, 0.01]),
        "blocks-too-many",
        "study.toml",
        None,
        "blocks.size_m",
    ),
    one(
        "blocks beside the body",
        decide("blocks.origin_m", [WEST + 500.0, SOUTH, -1620.0]),
        "blocks-empty",
        "study.toml",
        None,
        "blocks.origin_m",
    ),
    one(
        "base above the seafloor",
        both(
            raw("base.csv", b"easting,northing,elevation\n500030,8000030,-1500\n"),
            decide("data.base_points", {"file": "base.csv"}),
        ),
        "base-above-seafloor",
        "base.csv",
        2,
        "elevation",
    ),
    one("base above all of the seafloor", decide("body.base_shift_m", 50.0), "stage-refused", "study.toml"),
    one(
        "fewer samples than are needed",
        decide("search", {"least_samples": 16, "radii_m": [2.0, 2.0, 2.0], "passes": [1.0], "fill": False}),
        "blocks-not-estimated",
        "study.toml",
    ),
    one(
        "outline that leaves the grid",
        _outline(Point(WEST + 58.0, SOUTH + 30.0).buffer(20.0)),
        "outline-off-grid",
        "outline.gpkg",
    ),
    one(
        "outline beside the holes",
        _outline(Polygon([(WEST + 1, SOUTH + 1), (WEST + 9, SOUTH + 1), (WEST + 9, SOUTH + 9)])),
        "outline-without-holes",
        "outline.gpkg",
    ),
]

# What is cut on must be known.
CUTOFFS = [
    one(
        "equivalent of a metal without recovery",
        both(decide("value.metals.cu.recovery_pct", None), decide("cutoff.variable", "equivalent")),
        "study-value",
        "study.toml",
        "[value.metals.cu]",
        "value.metals.cu",
        "no recovery",
    ),
]
