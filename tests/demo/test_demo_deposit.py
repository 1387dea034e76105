"""The demo deposit: the files are what the generator makes, the truth is true, and what was planted is there."""

from __future__ import annotations

import importlib
import json
import math
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path
from types import ModuleType
from typing import Any

import numpy as np
import pandas as pd
import pytest

DEMO = Path(__file__).resolve().parents[2] / "demo_deposit"
TRUTH = json.loads((DEMO / "truth" / "truth.json").read_text())
METALS = ("cu_pct", "zn_pct", "au_gpt", "ag_gpt")


@pytest.fixture(scope="module")
def ground() -> Iterator[ModuleType]:
    """The module of the true ground; its folder is on the path only while these tests run."""
    sys.path.insert(0, str(DEMO))
    try:
        yield importlib.import_module("ground")
    finally:
        sys.path.remove(str(DEMO))


@pytest.fixture(scope="module")
def bathymetry() -> tuple[np.ndarray, Any]:
    import rasterio

    with rasterio.open(DEMO / "bathymetry_1m.tif") as source:
        return source.read(1, masked=True).filled(np.nan).astype(float), source.transform


def plain(column: pd.Series) -> pd.Series:
    """Results as numbers, the limit where they say "<" or ">"."""
    return pd.to_numeric(column.astype(str).str.lstrip("<>").replace("", None), errors="coerce")


@pytest.mark.slow
def test_generator_makes_the_committed_files(tmp_path: Path) -> None:
    """Byte for byte where the writers' versions agree; the same text tables with any version."""
    subprocess.run([sys.executable, str(DEMO / "generate.py"), str(tmp_path)], check=True, timeout=300)
    made = sorted(path.relative_to(tmp_path) for path in tmp_path.rglob("*") if path.is_file())
    assert len(made) == 15
    for name in made:
        same = (tmp_path / name).read_bytes() == (DEMO / name).read_bytes()
        if name.suffix in (".csv", ".asc", ".json"):
            assert same, name
        elif name.suffix == ".parquet":
            pd.testing.assert_frame_equal(pd.read_parquet(tmp_path / name), pd.read_parquet(DEMO / name))
        elif name.suffix == ".xlsx":
            pd.testing.assert_frame_equal(pd.read_excel(tmp_path / name), pd.read_excel(DEMO / name))
        elif name.suffix == ".tif":
            import rasterio

            with rasterio.open(tmp_path / name) as a, rasterio.open(DEMO / name) as b:
                np.testing.assert_array_equal(a.read(1), b.read(1))
        else:
            import geopandas as gpd

            a, b = (gpd.read_file(folder / name) for folder in (tmp_path, DEMO))
            assert a.geometry.geom_equals_exact(b.geometry, 1e-9).all() and a.crs == b.crs


def test_files_stay_small() -> None:
    assert sum(path.stat().st_size for path in DEMO.rglob("*") if path.suffix != ".pyc") < 5_000_000


def test_truth_agrees_with_itself() -> None:
    body, blocks = TRUTH["body"], pd.read_parquet(DEMO / "truth" / "truth_blocks.parquet").astype(float)
    assert blocks["dry_tonnes"].sum() == pytest.approx(body["dry_tonnes"], rel=1e-5)
    assert sum(part["volume_m3"] for part in TRUTH["by_domain"].values()) == pytest.approx(
        body["volume_m3"], rel=1e-5
    )
    for metal in METALS:
        mean = np.average(blocks[metal], weights=blocks["dry_tonnes"])
        assert mean == pytest.approx(body[metal], rel=1e-4)
        for rows in TRUTH["above_cu_cutoff"].values():
            assert rows[0][metal] == pytest.approx(body[metal], rel=1e-4)  # cut-off 0 is the whole body
    for rows in TRUTH["above_cu_cutoff"].values():
        tonnes = [row["dry_tonnes"] for row in rows]
        assert tonnes == sorted(tonnes, reverse=True)
    fine, coarse = (
        next(r for r in TRUTH["above_cu_cutoff"][s] if r["cu_cutoff_pct"] == 6.0)
        for s in ("2x2x1", "10x10x2")
    )
    assert fine["dry_tonnes"] > coarse["dry_tonnes"]  # larger blocks are smoother (Krige's relation)


def test_true_volume_by_a_finer_sum(ground: ModuleType) -> None:
    """Columns of 0.4 m against the 1 m columns of the truth, and the area against shapely's of the outline."""
    import geopandas as gpd

    made = ground.Ground.make(TRUTH["seed"])
    step, volume, area = 0.4, 0.0, 0.0
    for start in range(100, 320, 20):  # strips of northing
        x, y = np.meshgrid(ground.EAST0 + 140 + step * (np.arange(550) + 0.5),
                           ground.NORTH0 + start + step * (np.arange(50) + 0.5))  # fmt: skip
        thick = made.contacts(x, y)[2]
        volume += step**2 * thick.sum()
        area += step**2 * (made.thickness(x, y) > 0).sum()
    assert volume == pytest.approx(TRUTH["body"]["volume_m3"], rel=2e-3)
    assert float(gpd.read_file(DEMO / "outline.gpkg").area.sum()) == pytest.approx(area, rel=0.01)


def test_planted_field_has_the_stated_variogram(ground: ModuleType) -> None:
    """The random field against its exponential model, 1 - exp(-3 h / range), averaged over the ground."""
    rng = np.random.default_rng(8)
    fields = [ground.gaussian_field(rng, (128, 128), (15.0, 15.0)) for _ in range(20)]
    for lag in (2, 5, 10, 20):
        gamma = np.mean([0.5 * np.mean((np.roll(f, lag, 0) - f) ** 2) for f in fields])
        assert gamma == pytest.approx(1 - math.exp(-3 * lag / 15.0), abs=0.05)


def test_collars_stand_above_the_grid_by_the_planted_shift(bathymetry: tuple[np.ndarray, Any]) -> None:
    values, transform = bathymetry
    collars = pd.read_excel(DEMO / "collars.xlsx", sheet_name="Collars", dtype={"HoleID": str})
    assert 60 <= len(collars) <= 90 and len(collars) == TRUTH["holes"]
    column = (collars["East_m"].to_numpy() - transform.c) / transform.a
    row = (collars["North_m"].to_numpy() - transform.f) / transform.e
    floor = values[row.astype(int), column.astype(int)]
    lift = -collars["WaterDepth_m"] - floor
    assert np.nanmedian(lift) == pytest.approx(TRUTH["collar_shift_m"], abs=0.2)
    odd = set(collars["HoleID"][(lift - TRUTH["collar_shift_m"]).abs() > 3])
    assert odd == set(TRUTH["collar_outliers_m"])
    ended = (collars["EndedIn"] != "host").mean()
    assert 0.3 < ended < 0.45 and (ended * len(collars)) == pytest.approx(TRUTH["holes_ended_in_sulphide"])
    twins = [name for name in collars["HoleID"] if name.endswith("T")]
    place = collars.set_index("HoleID")[["East_m", "North_m"]]
    assert len(twins) == 4
    assert all(np.hypot(*(place.loc[name] - place.loc[name[:-1]])) < 3 for name in twins)


def test_runs_and_assays_carry_their_diseases() -> None:
    runs = pd.read_csv(DEMO / "runs.csv", dtype={"HoleID": str})
    assays = pd.read_csv(DEMO / "assays.csv", dtype=str, keep_default_na=False)
    length = runs["RunTo_m"] - runs["RunFrom_m"]
    assert 100 * runs["CoreRecovered_m"].sum() / length.sum() == pytest.approx(
        TRUTH["mean_recovery_pct"], abs=0.2
    )
    assert (runs["Recovery_pct"] == 0).sum() == 1 and (runs["Recovery_pct"] == 104).sum() == 1
    lost = runs[runs["Recovery_pct"] == 0].iloc[0]
    inside = assays[
        (assays["HoleID"] == lost["HoleID"]) & (assays["From_m"].astype(float) >= lost["RunFrom_m"])
    ]
    # Nothing was assayed where nothing came up.
    assert (inside["From_m"].astype(float) >= lost["RunTo_m"]).all()
    text = assays.drop(columns=["HoleID", "SampleNo"]).to_numpy().ravel()
    assert (
        any(t.startswith("<") for t in text) and any(t.startswith(">") for t in text) and (text == "").any()
    )
    assert set(assays["Method"]) == {"laboratory", "handheld_xrf"}
    assert (pd.to_numeric(assays["To_m"]) > pd.to_numeric(assays["From_m"])).all()


@pytest.mark.parametrize("domain", ["cap", "massive", "stockwork"])
def test_truth_lies_between_the_readings_of_lost_core(domain: str) -> None:
    for metal in METALS:
        row = TRUTH["lost_core"][domain][metal]
        assert row["lost_core_barren"] <= row["true_along_holes"] <= row["core_stands_for_run"], metal
        assert abs(row["recovered_core"] / row["true_along_holes"] - 1) < 0.08, metal  # some percent, no more


def test_a_plain_mean_of_all_samples_is_clearly_wrong() -> None:
    """All samples, surface included: more than 8 % over the truth in every metal, and more than 20 % in three."""
    files = ("assays.csv", "surface_samples.csv")
    core, top = (pd.read_csv(DEMO / name, dtype=str, keep_default_na=False) for name in files)
    assert len(top) == 60
    over = {}
    for metal, column, factor in (("cu_pct", "Cu_pct", 1), ("zn_pct", "Zn_pct", 1), ("au_gpt", "Au_ppb", 1e-3),
                                  ("ag_gpt", "Ag_gpt", 1)):  # fmt: skip
        mean = factor * plain(pd.concat([core[column], top[column]])).mean()
        over[metal] = mean / TRUTH["body"][metal] - 1
    assert min(over.values()) > 0.08 and sorted(over.values())[1] > 0.2, over


def test_surface_ratios_came_out_near_the_planted() -> None:
    for metal, row in TRUTH["surface_ratio"].items():
        assert row["of_these_samples"] == pytest.approx(row["planted"], rel=0.1), metal


def test_laboratory_has_one_bad_batch() -> None:
    lab = pd.read_csv(DEMO / "laboratory.csv", dtype={"Result": str})
    reference = lab[lab["Kind"] == "reference"].copy()
    reference["z"] = (plain(reference["Result"]) - reference["Expected"]) / reference["Expected_SD"]
    by_batch = reference.groupby(["Batch", "Element"])["z"].mean()
    bad = TRUTH["bad_batch"]
    element = bad["column"].split("_")[0].capitalize()
    assert by_batch.idxmin() == (bad["batch"], element) and by_batch.min() < -3
    assert by_batch.drop((bad["batch"], element)).abs().max() < 1
    assert set(lab["Kind"]) == {"reference", "blank", "duplicate", "check"}
    assert set(lab.loc[lab["Kind"] == "duplicate", "Stage"]) == {"field", "pulp"}


def test_second_grid_agrees_with_the_first(bathymetry: tuple[np.ndarray, Any]) -> None:
    import rasterio

    values, _ = bathymetry
    with rasterio.open(DEMO / "bathymetry_0p5m.asc") as source:
        fine, t = source.read(1), source.transform
    assert t.a == 0.5 and fine.shape == (448, 420)
    mean = fine.reshape(224, 2, 210, 2).mean(axis=(1, 3))
    row, column = 400 - (316), 150
    part = values[row : row + 224, column : column + 210]
    assert np.nanmedian(np.abs(part - mean)) < 0.1 and abs(np.nanmean(part - mean)) < 0.02


def test_zones_take_a_modest_share() -> None:
    total = sum(zone["dry_tonnes"] for zone in TRUTH["in_exclusions"].values())
    assert 0.02 < total / TRUTH["body"]["dry_tonnes"] < 0.15
    assert {zone["status"] for zone in TRUTH["in_exclusions"].values()} == {"active_vent", "set_aside"}
