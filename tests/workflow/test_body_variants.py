"""Every way to bound a body, its domains, its chimneys and its screens, from the study file to the blocks."""

from __future__ import annotations

import copy
from collections.abc import Callable
from pathlib import Path
from typing import Any

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest
import rasterio
import shapely
from rasterio.transform import from_origin

from sms_resource import load_study
from sms_resource.workflow.stage import Outcome, run_stages
from sms_resource.workflow.stages import ESTIMATE_STAGES
from tests.end_to_end.small_study import CENTRE, CRS, SOUTH, WEST, SmallStudy, seafloor_at, thickness_at

Change = Callable[[SmallStudy], Any]


def run(folder: Path, *changes: Change, stages: int = len(ESTIMATE_STAGES)) -> Outcome:
    study = SmallStudy(folder)
    for change in changes:
        change(study)
    outcome = run_stages(ESTIMATE_STAGES[:stages], load_study(study.write()), threads=1)
    assert not outcome.findings.has_errors, outcome.findings.errors
    return outcome


def decide(**sections: dict[str, Any]) -> Change:
    def change(study: SmallStudy) -> None:
        for section, keys in sections.items():
            study.toml[section] = {**study.toml.get(section, {}), **copy.deepcopy(keys)}

    return change


UP_TO_BLOCKS = 6


@pytest.fixture(scope="module")
def plain(tmp_path_factory: pytest.TempPathFactory) -> Outcome:
    return run(tmp_path_factory.mktemp("plain"), stages=UP_TO_BLOCKS)


def test_uncertainty_of_the_file_stands_in_for_the_study(tmp_path: Path) -> None:
    """Band 2, as in BAG: 0.5 m where the body is, 4 m elsewhere; the study's own 0.3 m is not used."""

    def two_bands(folder: Path) -> None:
        path = folder / "bathymetry.tif"
        with rasterio.open(path) as data:
            heights, profile = data.read(1), data.profile
        x = WEST + 2.0 * (0.5 + np.arange(30))
        y = SOUTH + 2.0 * (29.5 - np.arange(30))
        far = np.hypot(*np.meshgrid(x - CENTRE[0], y - CENTRE[1])) > 27.0
        profile["count"] = 2
        with rasterio.open(path, "w", **profile) as data:
            data.write(heights, 1)
            data.write(np.where(far, 4.0, 0.5), 2)

    def change(study: SmallStudy) -> None:
        study.toml["data"]["bathymetry"]["uncertainty_band"] = 2
        study.after.append(two_bands)

    outcome = run(tmp_path, change)
    table = outcome.done["validate"].geometry.set_index("case")
    body = outcome.done["body"].body
    rise = body.shifted(top_m=0.5).volume_m3 - body.volume_m3
    assert table.loc["seafloor_up", "change_m3"] == pytest.approx(rise, rel=1e-9)
    assert "0.5 m" in table.loc["seafloor_up", "what"]
    assert outcome.done["body"].facts["sigma_from"] == "file"


def test_points_and_a_grid_of_the_user_hold_the_base(tmp_path: Path, plain: Outcome) -> None:
    """A base 3 m deeper than the holes tell between them, from points; and a grid that the contacts correct."""
    places = [(WEST + 19.0 + 11.0 * i, SOUTH + 19.0 + 11.0 * j) for i in range(3) for j in range(3)]
    points = [
        {
            "easting": x,
            "northing": y,
            "elevation": round(float(seafloor_at(x, y)) - thickness_at(x, y) - 3.0, 2),
        }
        for x, y in places
    ]

    def with_points(study: SmallStudy) -> None:
        study.rows["base_points"] = points
        study.toml["data"]["base_points"] = {"file": "base_points.csv"}

    def base_grid(folder: Path) -> None:
        x, y = np.meshgrid(WEST + 0.5 + np.arange(60), SOUTH + 59.5 - np.arange(60))
        depth = np.vectorize(thickness_at)(x, y) + 2.0
        profile = {"driver": "GTiff", "width": 60, "height": 60, "count": 1, "dtype": "float64", "crs": CRS,
                   "transform": from_origin(WEST, SOUTH + 60.0, 1.0, 1.0), "nodata": -9999.0}  # fmt: skip
        with rasterio.open(folder / "base.tif", "w", **profile) as data:
            data.write(seafloor_at(x, y) - depth, 1)

    def with_grid(study: SmallStudy) -> None:
        study.toml["data"]["base_grid"] = {"file": "base.tif"}
        study.after.append(base_grid)

    first = plain.done["body"].body
    for name, change in (("points", with_points), ("grid", with_grid)):
        body = run(tmp_path / name, change, stages=UP_TO_BLOCKS).done["body"].body
        assert body.audit["honoured"].all()
        if (
            name == "grid"
        ):  # the contacts take out its 2 m: what is left is the true body, cut upright at its outline
            r2 = 24.0**2
            assert body.volume_m3 == pytest.approx(np.pi * (11.0 * r2 - 0.012 * r2**2 / 2), rel=0.01)
        else:
            assert body.volume_m3 > 1.04 * first.volume_m3
            x, y = (np.array(axis) for axis in zip(*places, strict=True))
            deeper = body.thickness.sample(x, y) - first.thickness.sample(x, y)
            assert (
                np.median(deeper) > 1.0
            )  # a metre of error is granted to points, so they are not met exactly


@pytest.mark.parametrize("method", ["spline", "linear"])
def test_other_interpolations_honour_the_contacts(tmp_path: Path, plain: Outcome, method: str) -> None:
    body = run(tmp_path, decide(body={"method": method}), stages=UP_TO_BLOCKS).done["body"].body
    assert body.audit["honoured"].all() and np.isnan(body.thickness_sigma.values).all()
    # Planes between the outer holes and an edge of no thickness hold less than a dome.
    assert 0.7 < body.volume_m3 / plain.done["body"].body.volume_m3 < 1.1


@pytest.mark.parametrize("layout", ["indicator", "signed_distance"])
def test_logged_domains_keep_their_probability(tmp_path: Path, layout: str) -> None:
    outcome = run(tmp_path, decide(domains={"layout": layout}))
    frame = outcome.done["value"].frame
    likely = frame[["probability_cap", "probability_massive"]].to_numpy()
    assert (likely >= 0).all() and (likely <= 1).all()
    np.testing.assert_allclose(likely.sum(axis=1), 1.0, atol=1e-6)
    assert (
        frame["domain"].astype(str).to_numpy() == np.array(["cap", "massive"])[likely.argmax(axis=1)]
    ).all()
    cap = frame["domain"].astype(str) == "cap"
    assert (
        frame.loc[cap, "depth_below_seafloor_m"].mean()
        < 2.5
        < frame.loc[~cap, "depth_below_seafloor_m"].mean()
    )


def chimneys(source: str) -> list[Change]:
    """A chimney of 5 m on the mound, 8 m wide, in the grid, and its polygon."""

    def tall(x: Any, y: Any) -> Any:
        near = np.hypot(np.asarray(x) - CENTRE[0] + 6.0, np.asarray(y) - CENTRE[1]) < 4.0
        return seafloor_at(x, y) + np.where(near, 5.0, 0.0)

    def change(study: SmallStudy) -> None:
        study.grid |= {"values": tall, "cell": 1.0}
        study.toml["domains"]["sulphide"] = ["chimney", "cap", "massive"]
        study.toml["density"] = {"assigned_dry_tpm3": {"chimney": 1.9}, "porosity_fraction": {"chimney": 0.4}}
        study.toml["chimneys"] = {"source": source, "domain": "chimney", "width_m": 12.0}
        if source == "polygons":
            study.toml["data"]["chimneys"] = {"file": "chimneys.gpkg"}
            study.after.append(
                lambda folder: gpd.GeoDataFrame(
                    {"name": ["c"], "height_m": [5.0]}, geometry=[shapely.Point(CENTRE[0] - 6.0, CENTRE[1]).buffer(4.0)],
                    crs=CRS,
                ).to_file(folder / "chimneys.gpkg", driver="GPKG")
            )  # fmt: skip

    return [change]


@pytest.mark.parametrize("source", ["polygons", "relief"])
def test_chimneys_are_a_light_domain_on_top(tmp_path: Path, source: str) -> None:
    outcome = run(tmp_path, *chimneys(source))
    frame = outcome.done["value"].frame
    share = frame["share_chimney"] * frame["volume_m3"]
    wanted = np.pi * 16.0 * 5.0  # on cells of 1 m, and the relief finds the foot by a smoothed seafloor
    assert share.sum() == pytest.approx(wanted, rel=0.35)
    whole = frame[frame["share_chimney"] > 0.999]
    assert len(whole) == 0 or whole["dry_density_tpm3"].max() == pytest.approx(1.9)
    assert "domain-without-samples" in {item.code for item in outcome.findings}
    assert len(whole) == 0 or whole["cu_pct"].isna().all()
    near = np.hypot(frame["easting"] - CENTRE[0] + 6.0, frame["northing"] - CENTRE[1]) < 8.0
    assert (share[~near] < 1e-9).all()


@pytest.mark.parametrize("graded", [(), ("cu_pct",)], ids=["no core", "copper alone"])
def test_a_logged_chimney_without_grades_has_tonnes_or_a_remedy_that_can_be_taken(
    tmp_path: Path, graded: tuple[str, ...]
) -> None:
    """A code is mapped to chimneys: without core of it the run goes on; with one metal the remedy keeps the rule."""

    def logged(study: SmallStudy) -> None:
        study.toml["domains"]["codes"] = {"CH": "chimney", **study.toml["domains"]["codes"]}
        if graded:
            for row in study.rows["lithology"]:
                row["code"] = "CH" if row["code"] == "CP" else row["code"]
            for row in study.rows["assays"]:
                if row["from_m"] < 2:
                    row.update(dict.fromkeys(("zn_pct", "au_gpt", "ag_gpt"), ""))

    if not graded:
        outcome = run(tmp_path, *chimneys("polygons"), logged)
        assert "domain-without-samples" in {item.code for item in outcome.findings}
        return
    study = SmallStudy(tmp_path)
    for change in (*chimneys("polygons"), logged):
        change(study)
    errors = run_stages(ESTIMATE_STAGES, load_study(study.write()), threads=1).findings.errors
    found = [item for item in errors if "'chimney'" in item.message]
    assert [item.code for item in found] == ["no-composites"] * 3
    assert all("domains.sulphide" not in item.remedy and "domains.codes" in item.remedy for item in found)


def test_outside_the_tenure_is_taken_and_told(tmp_path: Path) -> None:
    def change(study: SmallStudy) -> None:
        held = shapely.box(WEST, SOUTH, CENTRE[0] + 5.0, SOUTH + 60.0)
        study.zones = gpd.GeoDataFrame(
            {"name": ["licence"], "status": ["tenure"], "buffer_m": [0.0]}, geometry=[held], crs=CRS
        )

    outcome = run(tmp_path, change)
    fall = outcome.done["classify"].waterfall
    assert fall["step"].tolist()[:2] == ["body", "tenure"] and fall["taken_dry_tonnes"].iloc[1] > 0
    frame = outcome.done["value"].frame
    assert frame.loc[frame["easting"] > CENTRE[0] + 8.0, "kept_share"].max() == 0.0


@pytest.mark.parametrize("frame", ["elevation", "proportional"])
def test_other_vertical_frames_leave_blocks_in_their_place(
    tmp_path: Path, plain: Outcome, frame: str
) -> None:
    outcome = run(tmp_path, decide(blocks={"vertical_frame": frame}))
    there = outcome.done["value"].frame[["easting", "northing", "elevation", "volume_m3"]]
    pd.testing.assert_frame_equal(there, plain.done["blocks"].model.frame[there.columns.tolist()])
    assert outcome.done["blocks"].frame.kind == frame
    effect = outcome.done["validate"].facts["frames_effect"]
    assert set(effect["frame"].astype(str)) >= {"elevation", "depth", "proportional"} or len(effect) >= 3


def test_tonnes_stand_by_slope_of_the_seafloor(tmp_path: Path) -> None:
    outcome = run(tmp_path)
    state = outcome.done["classify"]
    table = state.tables["slope_classes"].set_index("slope")
    assert table["dry_tonnes"].sum() == pytest.approx(
        outcome.done["value"].frame["dry_tonnes"].sum(), rel=1e-9
    )
    assert table["share_pct"].sum() == pytest.approx(100.0)
    assert table["area_m2"].sum() == pytest.approx(outcome.done["body"].outline.area, rel=2e-3)
    # The mound's steepest place, by its own formula: 12 / 16 e^-1/2 = 0.455, 24.5 degrees.
    assert (
        set(table.index) <= {"0 to 10°", "10 to 15°", "15 to 20°", "20 to 25°"}
        and table.loc["20 to 25°"].all()
    )


def test_a_proposed_outline_holds_the_holes_with_sulphide(tmp_path: Path) -> None:
    outcome = run(tmp_path, decide(body={"outline": "proposed"}), stages=UP_TO_BLOCKS)
    body = outcome.done["body"]
    assert body.facts["outline_from"].startswith("proposed")
    inside = body.contacts[body.contacts["thickness_m"] > 0]
    assert shapely.contains_xy(body.outline, inside["easting"], inside["northing"]).all()
    assert "outline-proposed" in {item.code for item in outcome.findings}
