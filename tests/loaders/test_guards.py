"""Guards of the grades: mass fractions of metals in minerals, against atomic weights, and what they add up to."""

from __future__ import annotations

from pathlib import Path

import geopandas as gpd
import numpy as np
import pandas as pd
import periodictable
import pytest
from shapely.geometry import Point

from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.findings import Findings
from sms_resource.loaders.check_grades import RICHEST_SHARE, USUAL_SHARE, grades_of, mineral_sum
from sms_resource.loaders.check_intervals import check_intervals
from sms_resource.loaders.checks import CheckSettings, check_data
from sms_resource.loaders.source import TableSource
from sms_resource.loaders.table import load_table
from sms_resource.loaders.tables import DrillData, LoadedData, empty_table
from tests.loaders.small_study import Study, matching

# formula of the mineral, and the metal in it: handbook formulas; weights from periodictable (IUPAC)
MINERALS = {
    ("cu", "usual"): ("CuFeS2", "Cu"),
    ("cu", "richest"): ("Cu2S", "Cu"),
    ("zn", "usual"): ("ZnS", "Zn"),
    ("pb", "usual"): ("PbS", "Pb"),
    ("ba", "usual"): ("BaSO4", "Ba"),
}


@pytest.mark.parametrize(("element", "kind"), list(MINERALS))
def test_metal_in_minerals_against_atomic_weights(element: str, kind: str) -> None:
    formula, symbol = MINERALS[element, kind]
    mass = periodictable.formula(formula)
    metal = getattr(periodictable, symbol)
    expected = metal.mass * mass.atoms[metal] / mass.mass
    share = (RICHEST_SHARE if kind == "richest" else USUAL_SHARE)[element]
    assert share == pytest.approx(expected, abs=2e-4)


def test_pure_minerals_make_one_hundred_percent() -> None:
    pure = {element: np.array([100.0 * share]) for element, share in USUAL_SHARE.items()}
    for element, grade in pure.items():
        assert mineral_sum({element: grade}, USUAL_SHARE)[0] == pytest.approx(100.0)


@pytest.mark.parametrize(
    ("copper", "zinc", "severity"), [(30.0, 8.0, None), (30.0, 20.0, "warning"), (30.0, 45.0, "error")]
)
def test_sums_are_doubted_or_refused(
    tmp_path: Path, copper: float, zinc: float, severity: str | None
) -> None:
    study = Study(tmp_path)
    study.cell("assays", 9, "cu_pct", copper).cell("assays", 9, "zn_pct", zinc)
    _, found = study.load()
    assert [item.severity for item in matching(found, code="minerals-over-100")] == (
        [severity] if severity else []
    )


def test_grades_over_a_limit_count_with_the_limit() -> None:
    frame = pd.DataFrame(
        {"cu_pct": [1.0, np.nan, np.nan], "cu_pct_status": [0, 2, 1], "cu_pct_limit": [np.nan, 30.0, 0.1]}
    )
    np.testing.assert_array_equal(grades_of(frame)["cu"], [1.0, 30.0, np.nan])


def test_points_of_a_layer_in_another_system(tmp_path: Path) -> None:
    study = Study(tmp_path)
    rows = study.rows["collars"]
    frame = gpd.GeoDataFrame(
        [{k: v for k, v in row.items() if k not in ("easting", "northing")} for row in rows],
        geometry=[Point(row["easting"], row["northing"]) for row in rows],
        crs="EPSG:32703",
    )
    study.after.append(lambda folder: frame.to_file(folder / "collars.gpkg", driver="GPKG"))
    study.sources["collars"] = {"path": tmp_path / "collars.gpkg", "shown_as": "collars.gpkg"}
    data, found = study.load()
    assert list(data.drill.collars["easting"]) == [row["easting"] for row in rows]
    assert [item.file for item in matching(found, code="crs-different")] == ["collars.gpkg"]


def test_base_grids(tmp_path: Path) -> None:
    flat = SurfaceGrid(0.5, 0.5, 1.0, 1.0, np.full((20, 20), -1600.0), "EPSG:32702")

    def codes(base: SurfaceGrid) -> list[tuple[str, str]]:
        found = check_data(
            LoadedData(seafloor=flat, base_grid=base), settings=CheckSettings(crs="EPSG:32702")
        )
        return [(item.code, item.severity) for item in found if item.code.startswith(("base", "crs"))]

    assert codes(flat.with_values(flat.values - 10)) == []
    assert codes(flat.with_values(flat.values + 10)) == [("base-above-seafloor", "error")]
    partly = flat.values - 10
    partly[0, 0] = -1500.0
    assert codes(flat.with_values(partly)) == [("base-above-seafloor", "warning")]
    assert codes(SurfaceGrid(900.0, 900.0, 1.0, 1.0, flat.values, "EPSG:32702")) == [
        ("base-off-grid", "error")
    ]
    assert codes(SurfaceGrid(0.5, 0.5, 1.0, 1.0, flat.values - 10, None)) == [("crs-missing", "error")]


@pytest.mark.parametrize("seed", range(5))
def test_overlaps_against_a_plain_search(seed: int) -> None:
    """The running maximum finds the same rows as comparing every pair of intervals."""
    rng = np.random.default_rng(seed)
    n = 60
    start = rng.integers(0, 40, n) / 2.0
    frame = pd.DataFrame(
        {
            "hole_id": rng.choice(["A", "B", "C"], n),
            "from_m": start,
            "to_m": start + rng.integers(1, 4, n) / 2.0,
            "code": "x",
            "source_row": np.arange(2, n + 2),
        }
    )
    collars = empty_table("collars").reindex(range(3))
    collars["hole_id"], collars["length_m"] = ["A", "B", "C"], 1000.0
    found = Findings()
    check_intervals(LoadedData(drill=DrillData(collars=collars, lithology=frame)), CheckSettings(), found)
    got = {item.row for item in found if item.code in ("interval-overlap", "interval-duplicate")}
    got_all = sum(item.code in ("interval-overlap", "interval-duplicate") for item in found)
    expected = set()
    for _, rows in frame.groupby("hole_id"):
        rows = rows.sort_values(["from_m", "to_m", "source_row"])
        for i in range(len(rows)):
            below = rows.iloc[:i]
            if (below["to_m"] > rows["from_m"].iloc[i] + 1e-3).any():
                expected.add(int(rows["source_row"].iloc[i]))
    if got_all < 25:
        assert got == expected
    else:
        assert got <= expected


def test_the_same_interval_by_two_methods_is_no_overlap(tmp_path: Path) -> None:
    study = Study(tmp_path)
    study.rows["assays"].append(study.rows["assays"][0] | {"method": "handheld", "sample_id": "X"})
    _, found = study.load()
    assert not matching(found, severity="error")


def test_stored_names_of_a_table_survive(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    path.write_text("Hole,from_m,to_m,method,cu_pct\nH1,0,1,laboratory,1.0\n")
    frame, _ = load_table(
        TableSource(path, shown_as="data/a.csv", columns={"hole_id": "Hole"}), "assays", ("cu",)
    )
    assert frame.attrs["file"] == "data/a.csv" and frame.attrs["headers"]["hole_id"] == "Hole"
