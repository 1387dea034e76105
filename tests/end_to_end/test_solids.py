"""Bodies whose volume is known and grades that are the same everywhere, through the whole study."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import rasterio
from rasterio.transform import from_origin
from shapely.geometry import Point

from sms_resource import load_study
from sms_resource.workflow.stage import Outcome, run_stages
from sms_resource.workflow.stages import ESTIMATE_STAGES
from tests.end_to_end.small_study import CENTRE, CRS, SOUTH, WEST, SmallStudy

RADIUS, HEIGHT, FLOOR, DENSITY = 20.0, 15.0, -1615.0, 3.2
GRADES = {"cu_pct": 3.7, "zn_pct": 1.1, "au_gpt": 2.3, "ag_gpt": 41.0}

Shape = Callable[[Any], Any]

# Volumes by the closed forms: pi R^2 H / 3, pi R^2 H / 2, and pi H (3 R^2 + H^2) / 6 of a spherical cap.
SOLIDS: dict[str, tuple[Shape, float]] = {
    "cone": (lambda r: HEIGHT * (1 - r / RADIUS), 6283.1853),
    "paraboloid": (lambda r: HEIGHT * (1 - (r / RADIUS) ** 2), 9424.7780),
    "spherical cap": (
        lambda r: (
            np.sqrt(np.maximum((RADIUS**2 + HEIGHT**2) ** 2 / (2 * HEIGHT) ** 2 - r**2, 0.0))
            - ((RADIUS**2 + HEIGHT**2) / (2 * HEIGHT) - HEIGHT)
        ),
        11191.9238,
    ),
}


def radius(x: Any, y: Any) -> Any:
    return np.hypot(np.asarray(x) - CENTRE[0], np.asarray(y) - CENTRE[1])


def solid(folder: Path, shape: Shape, azimuth: float = 0.0) -> SmallStudy:
    """A solid on a flat base that a grid gives, nine holes to that base, one grade and one density everywhere."""
    study = SmallStudy(folder)

    def surface(x: Any, y: Any) -> Any:
        return FLOOR + np.maximum(shape(radius(x, y)), 0.0)

    study.grid.update(values=surface, cell=1.0)
    roles = ("collars", "surveys", "runs", "lithology", "assays")
    study.rows = {role: [] for role in roles}
    for number in range(9):
        turn, away = 2 * np.pi * number / 9, (3.0, 8.0, 13.0)[number % 3]
        x, y = round(CENTRE[0] + away * np.sin(turn), 2), round(CENTRE[1] + away * np.cos(turn), 2)
        top = round(float(surface(x, y)), 3)
        base = round(top - FLOOR, 3)
        hole, length = f"H{number}", int(base) + 2
        study.rows["collars"].append(
            {
                "hole_id": hole,
                "easting": x,
                "northing": y,
                "elevation": top,
                "length_m": length,
                "ended_in": "host",
            }
        )
        study.rows["surveys"].append({"hole_id": hole, "depth_m": 0, "azimuth": 0, "dip": -90})
        for start, stop, code in ((0, base, "MS"), (base, length, "AV")):
            study.rows["lithology"].append({"hole_id": hole, "from_m": start, "to_m": stop, "code": code})
        for start in range(length):
            span = {"hole_id": hole, "from_m": start, "to_m": start + 1}
            study.rows["runs"].append({**span, "recovery_pct": 60 + 10 * (start % 4)})
            study.rows["assays"].append(
                {**span, "sample_id": f"{hole}-{start}", "method": "laboratory", **GRADES}
            )
    for role in ("densities", "surface_samples", "laboratory", "exclusions"):
        del study.toml["data"][role]
    study.toml["data"]["base_grid"] = {"file": "base.tif"}
    study.toml["density"] = {"method": "assigned", "assigned_dry_tpm3": {"massive": DENSITY},
                             "porosity_fraction": {"massive": 0.2}}  # fmt: skip
    study.toml["domains"] = {"codes": {"MS": "massive", "AV": "waste"}, "sulphide": ["massive"]}
    study.toml["blocks"] = {"size_m": [2.0, 2.0, 2.0], "azimuth_deg": azimuth}
    del study.toml["screens"]
    import geopandas as gpd

    study.outline = gpd.GeoDataFrame(
        {"name": ["body"]}, geometry=[Point(*CENTRE).buffer(RADIUS, quad_segs=90)], crs=CRS
    )
    study.after.append(flat_base)
    return study


def flat_base(folder: Path) -> None:
    values = np.full((60, 60), FLOOR)
    with rasterio.open(
        folder / "base.tif", "w", driver="GTiff", width=60, height=60, count=1, dtype="float64", crs=CRS,
        transform=from_origin(WEST, SOUTH + 60.0, 1.0, 1.0), nodata=-9999.0,
    ) as data:  # fmt: skip
        data.write(values, 1)


def estimated(study: SmallStudy) -> Outcome:
    """All stages but the checks of the estimate."""
    stages = tuple(stage for stage in ESTIMATE_STAGES if stage.name != "validate")
    outcome = run_stages(stages, load_study(study.write()))
    assert not outcome.findings.has_errors, outcome.findings.errors
    return outcome


@pytest.mark.parametrize(("name", "azimuth"), [("cone", 0.0), ("paraboloid", 0.0), ("spherical cap", 25.0)])
def test_a_solid_has_its_volume_and_a_constant_grade_stays_as_it_is(
    name: str, azimuth: float, tmp_path: Path
) -> None:
    shape, volume = SOLIDS[name]
    outcome = estimated(solid(tmp_path, shape, azimuth))
    frame = outcome.done["value"].frame
    assert frame["volume_m3"].sum() == pytest.approx(volume, rel=0.005)
    assert frame["dry_tonnes"].sum() == pytest.approx(DENSITY * volume, rel=0.005)
    # weights sum to one: every block has the grade that every sample has
    for metal, grade in GRADES.items():
        np.testing.assert_allclose(frame[metal], grade, rtol=1e-12)
    np.testing.assert_allclose(frame["dry_tonnes"], frame["volume_m3"] * DENSITY, rtol=1e-14)
    # what fills the pores is seawater of 1.02 to 1.06 t/m3, a fifth of the volume
    pores = (frame["wet_tonnes"] - frame["dry_tonnes"]) / frame["volume_m3"]
    assert pores.between(0.2 * 1.02, 0.2 * 1.06).all()
    table = outcome.done["classify"].grade_tonnage
    whole = table[(table["proposed_class"] == "all") & (table["cutoff"] == 2.0)].iloc[0]
    assert whole["dry_tonnes"] == pytest.approx(frame["dry_tonnes"].sum(), rel=1e-12)
    assert whole["cu_pct"] == pytest.approx(3.7, rel=1e-12)
    assert whole["cu_t"] == pytest.approx(frame["dry_tonnes"].sum() * 0.037, rel=1e-12)
    nothing = table[(table["proposed_class"] == "all") & (table["cutoff"] == 4.0)]
    assert nothing["dry_tonnes"].sum() == 0.0


def test_blocks_of_other_sizes_hold_the_same_body(tmp_path: Path) -> None:
    shape, _ = SOLIDS["paraboloid"]
    study = solid(tmp_path, shape)
    volumes = {}
    for size in ([2.0, 2.0, 2.0], [5.0, 5.0, 1.0]):
        study.toml["blocks"] = {"size_m": size, "azimuth_deg": 10.0}
        stages = tuple(stage for stage in ESTIMATE_STAGES[:6])
        done = run_stages(stages, load_study(study.write())).done
        volumes[tuple(size)] = done["blocks"].model.frame["volume_m3"].sum()
        assert volumes[tuple(size)] == pytest.approx(done["body"].body.volume_m3, rel=1e-3)
    assert np.ptp(list(volumes.values())) < 1e-3 * max(volumes.values())
