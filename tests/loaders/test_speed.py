"""Reading and checking 500 holes with 20 000 assays of ten elements stays under the time that a user waits for."""

from __future__ import annotations

import time
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.loaders.checks import CheckSettings, check_data
from sms_resource.loaders.drilling import load_drilling
from sms_resource.loaders.source import TableSource
from sms_resource.loaders.tables import LoadedData

HOLES, SAMPLES = 500, 40
ELEMENTS = ("cu", "zn", "au", "ag")
MORE = ("pb", "as", "fe", "ba", "sio2", "mo")


def write_large(folder: Path) -> None:
    rng = np.random.default_rng(7)
    names = np.array([f"{i:04d}" for i in range(HOLES)])
    x, y = rng.uniform(10, 990, HOLES), rng.uniform(10, 990, HOLES)
    pd.DataFrame(
        {
            "hole_id": names,
            "easting": x,
            "northing": y,
            "elevation": -1600.0,
            "length_m": SAMPLES,
            "ended_in": "host",
        }
    ).to_csv(folder / "collars.csv", index=False)
    hole, top = np.repeat(names, SAMPLES), np.tile(np.arange(SAMPLES), HOLES)
    n = len(hole)
    assays = pd.DataFrame(
        {"hole_id": hole, "sample_id": [f"S{i:06d}" for i in range(n)], "from_m": top, "to_m": top + 1}
    )
    for element, scale in zip((*ELEMENTS, *MORE), (2, 4, 3, 50, 3000, 200, 20, 2, 10, 50)):
        unit = {
            "cu": "pct",
            "zn": "pct",
            "fe": "pct",
            "ba": "pct",
            "sio2": "pct",
            "au": "gpt",
            "ag": "gpt",
        }.get(element, "ppm")
        values = np.round(rng.lognormal(0, 0.25, n) * scale, 3).astype(str).astype(object)
        values[rng.random(n) < 0.1] = f"<{0.01 * scale:g}"
        values[rng.random(n) < 0.02] = ""
        assays[f"{element}_{unit}"] = values
    assays["method"] = "laboratory"
    assays.to_csv(folder / "assays.csv", index=False)
    runs = pd.DataFrame(
        {"hole_id": hole, "from_m": top, "to_m": top + 1, "recovery_pct": rng.uniform(20, 100, n).round(1)}
    )
    runs.to_csv(folder / "runs.csv", index=False)


def source(folder: Path, role: str) -> TableSource:
    return TableSource(folder / f"{role}.csv")


@pytest.mark.parametrize("spoilt", [False, True], ids=["sound", "every assay spoilt"])
def test_twenty_thousand_assays(tmp_path: Path, spoilt: bool) -> None:
    write_large(tmp_path)
    if spoilt:
        frame = pd.read_csv(tmp_path / "assays.csv", dtype=str, keep_default_na=False)
        frame["cu_pct"] = "x" + frame["cu_pct"]
        frame["to_m"] = frame["from_m"]
        frame.to_csv(tmp_path / "assays.csv", index=False)
    start = time.process_time()
    drill, found = load_drilling(
        source(tmp_path, "collars"), runs=source(tmp_path, "runs"), assays=source(tmp_path, "assays"),
        elements=ELEMENTS, summarise=MORE,
    )  # fmt: skip
    grid = SurfaceGrid(0.5, 0.5, 1.0, 1.0, np.full((1000, 1000), -1600.0), "EPSG:32702")
    found.extend(check_data(LoadedData(drill=drill, seafloor=grid), settings=CheckSettings(crs="EPSG:32702")))
    spent = time.process_time() - start
    assert len(drill.assays) == HOLES * SAMPLES
    assert found.has_errors == spoilt
    assert len(found) < 200
    assert spent < 4.0  # seconds of processor time; about 1 where it was measured
