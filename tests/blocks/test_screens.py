"""Screens, skins, benches and geometry uncertainty: every tonne is accounted for."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest
import shapely

from sms_resource.blocks.benches import bench_parts, benches
from sms_resource.blocks.body import Body, build_body
from sms_resource.blocks.grid import BlockGrid, SurfaceGrid
from sms_resource.blocks.model import BlockModel, fill_blocks, propose_grid
from sms_resource.blocks.screens import ScreenSettings, apply_screens
from sms_resource.blocks.skins import Host, skins
from sms_resource.blocks.uncertainty import geometry_uncertainty
from tests.blocks.mounds import invent_mound
from tests.blocks.solids import NO_CONTACTS

CRS = "EPSG:32756"


@pytest.fixture(scope="module")
def mound() -> tuple[Body, BlockModel]:
    made = invent_mound(6)
    seafloor = SurfaceGrid(
        made.seafloor.x0, made.seafloor.y0, made.seafloor.dx, made.seafloor.dy, made.seafloor.values, CRS
    )
    body = build_body(seafloor, made.outline, made.contacts, cell_m=2.0)
    grid, _ = propose_grid(body, made.contacts[["easting", "northing"]].to_numpy(), size=(4, 4, 2))
    model = fill_blocks(body, grid)
    rng = np.random.default_rng(1)
    n = len(model)
    return body, model.with_frame(
        model.frame.assign(dry_density_tpm3=rng.uniform(2.5, 3.5, n), cu_pct=rng.lognormal(1.2, 0.5, n))
    )


@pytest.fixture(scope="module")
def slab() -> tuple[Body, BlockModel]:
    """60 x 40 m, 4 m thick, flat; blocks of 5 x 5 x 2 m fit it exactly; density 3, copper 2 %."""
    top = SurfaceGrid(-10, -10, 2, 2, np.full((41, 51), -1500.0), CRS)
    body = build_body(top, shapely.box(0, 0, 60, 40), NO_CONTACTS, base_grid=top.with_values(top.values - 4))
    model = fill_blocks(body, BlockGrid((0, 0, -1504), (5, 5, 2), (12, 8, 2)))
    return body, model.with_frame(model.frame.assign(dry_density_tpm3=3.0, cu_pct=2.0))


def zones(*rows: tuple[str, str, float, shapely.Geometry], crs: str = CRS):
    import geopandas as gpd

    frame = pd.DataFrame([row[:3] for row in rows], columns=["name", "status", "buffer_m"])
    return gpd.GeoDataFrame(frame, geometry=[row[3] for row in rows], crs=crs)


def test_every_tonne_is_in_the_waterfall(mound: tuple[Body, BlockModel]) -> None:
    body, model = mound
    centre = body.outline.centroid
    areas = zones(
        ("vent", "active_vent", 12.0, centre.buffer(3)),
        ("quiet area", "set_aside", 0.0, shapely.box(centre.x, centre.y, centre.x + 90, centre.y + 25)),
        ("elsewhere", "set_aside", 5.0, shapely.Point(0, 0).buffer(2)),
    )
    settings = ScreenSettings(
        slope_max_deg=9.0, least_thickness_m=1.5, least_thickness_grade=8.0, thickness_grade_column="cu_pct",
        least_patch_m2=150.0,
    )  # fmt: skip
    result = apply_screens(model, body, settings=settings, zones=areas, metals=["cu_pct"])
    fall = result.waterfall
    assert fall["step"].tolist() == [
        "body", "zone vent", "zone quiet area", "zone elsewhere", "slope", "thickness", "thickness_grade", "patch",
        "remains",
    ]  # fmt: skip
    frame = model.frame
    tonnes = frame["volume_m3"] * frame["dry_density_tpm3"]
    whole = {
        "volume_m3": frame["volume_m3"].sum(), "dry_tonnes": tonnes.sum(),
        "cu_contained_t": (tonnes * frame["cu_pct"] / 100).sum(),
    }  # fmt: skip
    left = result.blocks["kept_share"]
    for name, total in whole.items():
        assert fall[f"remaining_{name}"].iloc[0] == pytest.approx(total, rel=1e-9)
        assert fall[f"taken_{name}"].sum() + fall[f"remaining_{name}"].iloc[-1] == pytest.approx(
            total, rel=1e-9
        )
    assert (left * tonnes).sum() == pytest.approx(fall["remaining_dry_tonnes"].iloc[-1], rel=1e-9)
    shares = result.blocks.filter(regex="^kept_share|^taken_")
    np.testing.assert_allclose(shares.sum(axis=1), 1.0, atol=1e-12)
    assert (shares.to_numpy() >= 0).all()
    assert (fall["taken_volume_m3"].iloc[[1, 2, 4, 5]] > 0).all()
    assert "screen-zone-empty" in {finding.code for finding in result.findings}


def test_zones_cut_blocks_exactly(slab: tuple[Body, BlockModel]) -> None:
    body, model = slab
    areas = zones(
        ("a", "active_vent", 0.0, shapely.box(-5, 3.3, 31.7, 21.1)),
        ("b", "set_aside", 0.0, shapely.box(20, 10, 45, 30)),
    )
    fall = apply_screens(model, body, zones=areas).waterfall.set_index("step")
    assert fall.loc["zone a", "taken_volume_m3"] == pytest.approx(4 * 31.7 * 17.8, rel=1e-9)
    both = 4 * (25 * 20 - 11.7 * 11.1)  # what zone a has not taken already
    assert fall.loc["zone b", "taken_volume_m3"] == pytest.approx(both, rel=1e-9)
    assert fall.loc["body", "remaining_dry_tonnes"] == pytest.approx(3 * 4 * 2400, rel=1e-9)
    buffered = apply_screens(
        model, body, zones=zones(("v", "active_vent", 99.0, shapely.Point(30, 20))),
        settings=ScreenSettings(vent_buffer_m=10.0),
    )  # fmt: skip
    ring = shapely.Point(30, 20).buffer(10).area
    assert buffered.waterfall["taken_volume_m3"].sum() == pytest.approx(4 * ring, rel=1e-9)
    only = apply_screens(model, body, zones=areas, settings=ScreenSettings(exclude_status=("active_vent",)))
    assert only.waterfall["step"].tolist() == ["body", "zone a", "remains"]


def test_outside_the_tenure_is_taken_first(slab: tuple[Body, BlockModel]) -> None:
    body, model = slab
    held = shapely.box(0, 0, 42, 40)
    for result in (
        apply_screens(model, body, tenure=held),
        apply_screens(model, body, zones=zones(("licence", "tenure", 0.0, held))),
    ):
        assert result.waterfall["step"].tolist() == ["body", "tenure", "remains"]
        assert result.waterfall["taken_volume_m3"].iloc[1] == pytest.approx(4 * 18 * 40, rel=1e-9)


def test_small_patches_fall_and_corners_do_not_join(slab: tuple[Body, BlockModel]) -> None:
    body, model = slab
    # A band leaves 10 x 40 = 400 m2 to the west of it and 45 x 40 m2 to the east.
    band = zones(("band", "set_aside", 0.0, shapely.box(10, -1, 15, 41)))
    for least, lost in ((399.0, 0.0), (401.0, 1600.0)):
        settings = ScreenSettings(least_patch_m2=least)
        fall = apply_screens(model, body, zones=band, settings=settings).waterfall.set_index("step")
        assert fall.loc["patch", "taken_volume_m3"] == pytest.approx(lost, abs=1e-6)
    nothing = apply_screens(model, body, settings=ScreenSettings(least_thickness_m=5.0))
    assert "screen-all-taken" in {finding.code for finding in nothing.findings}
    assert nothing.waterfall["remaining_volume_m3"].iloc[-1] == pytest.approx(0.0, abs=1e-9)


def test_slope_is_judged_over_the_footprint() -> None:
    x, _ = np.meshgrid(np.arange(-10.0, 91), np.arange(-10.0, 51))
    top = SurfaceGrid(-10, -10, 1, 1, -1500 - np.where(x < 40, 0.0, np.tan(np.radians(22)) * (x - 40)), CRS)
    body = build_body(top, shapely.box(0, 0, 80, 40), NO_CONTACTS, base_grid=top.with_values(top.values - 4))
    model = fill_blocks(body, BlockGrid((0, 0, -1530), (5, 5, 2), (16, 8, 20)))
    result = apply_screens(model, body, settings=ScreenSettings(slope_max_deg=20.0, footprint_m=5.0))
    assert result.waterfall["taken_volume_m3"].iloc[1] == pytest.approx(4 * 40 * 40, rel=1e-6)
    flat = result.columns["easting"] < 37
    np.testing.assert_allclose(result.columns.loc[flat, "slope_deg"], 0.0, atol=1e-6)


def test_bad_zones_are_findings(slab: tuple[Body, BlockModel]) -> None:
    body, model = slab
    bow = shapely.Polygon([(0, 0), (10, 10), (10, 0), (0, 10)])
    crossed = apply_screens(model, body, zones=zones(("bow", "set_aside", 0.0, bow)))
    assert [finding.code for finding in crossed.findings.errors] == ["screen-zone-empty"]
    empty = apply_screens(model, body, zones=zones(("none", "set_aside", 0.0, shapely.Polygon())))
    assert empty.findings.has_errors
    turned = apply_screens(
        model, body, zones=zones(("a", "set_aside", 0.0, shapely.box(0, 0, 1, 1)), crs="EPSG:4326")
    )
    assert [finding.code for finding in turned.findings.errors] == ["screen-crs"]
    with pytest.raises(ValueError, match="zn_pct"):
        apply_screens(model, body, metals=["zn_pct"])
    with pytest.raises(ValueError, match="thickness_grade_column"):
        ScreenSettings(least_thickness_grade=3.0)
    with pytest.raises(ValueError, match="slope_max_deg"):
        ScreenSettings(slope_max_deg=-1.0)


def test_benches_sum_to_the_blocks(mound: tuple[Body, BlockModel]) -> None:
    _, model = mound
    frame = model.frame
    tonnes = frame["volume_m3"] * frame["dry_density_tpm3"]
    for height, floor in ((None, None), (3.0, None), (0.7, -1603.3), (50.0, None)):
        table = benches(model, height_m=height, floor_m=floor, metals=["cu_pct"])
        assert table["volume_m3"].sum() == pytest.approx(frame["volume_m3"].sum(), rel=1e-9)
        assert table["dry_tonnes"].sum() == pytest.approx(tonnes.sum(), rel=1e-9)
        assert table["cu_contained_t"].sum() == pytest.approx(
            (tonnes * frame["cu_pct"]).sum() / 100, rel=1e-9
        )
        assert (np.diff(table["floor_elevation"]) < 0).all()
        parts = bench_parts(model, height_m=height, floor_m=floor)
        np.testing.assert_allclose(parts.groupby("row")["share"].sum(), np.ones(len(frame)), rtol=1e-12)
    by_block = benches(model)
    np.testing.assert_allclose(by_block["volume_m3"], frame.groupby("k")["volume_m3"].sum()[::-1], rtol=1e-12)
    with pytest.raises(ValueError, match="height_m"):
        benches(model, height_m=0)
    none = model.with_frame(frame.iloc[:0])
    assert len(benches(none, metals=["cu_pct"])) == 0


def test_benches_tell_wet_tonnes_and_grades_of_what_is_known(slab: tuple[Body, BlockModel]) -> None:
    _, model = slab
    upper = (model.frame["k"] == 1).to_numpy()
    dry = 3.0 * model.frame["volume_m3"]
    frame = model.frame.assign(wet_tonnes=1.1 * dry, cu_pct=np.where(upper, 6.0, np.nan))
    table = benches(model.with_frame(frame), height_m=4.0, metals=["cu_pct"])
    assert table[["floor_elevation", "roof_elevation"]].to_numpy().tolist() == [[-1504.0, -1500.0]]
    assert table["wet_tonnes"].iloc[0] == pytest.approx(1.1 * 28_800)
    assert table["cu_pct"].iloc[0] == pytest.approx(6.0)  # the lower half has no grade, which is not zero
    assert table["cu_contained_t"].iloc[0] == pytest.approx(14_400 * 0.06)


def test_skins_of_a_slab_by_hand(slab: tuple[Body, BlockModel]) -> None:
    """Floor 60 x 40, sides 2 x (60 + 40) x 4 m; over-cut 0.3 m into host of 2 t/m3, under-cut 0.1 m."""
    body, model = slab
    model = model.with_frame(model.frame.assign(wet_tonnes=3.2 * model.frame["volume_m3"]))
    host = Host(2.0, 2.4, {"cu_pct": 0.1})
    made = skins(
        model, body, np.ones(len(model)), host=host, over_cut_m=0.3, under_cut_m=0.1, metals=["cu_pct"]
    )
    assert made.blocks["floor_area_m2"].sum() == pytest.approx(2400)
    assert made.blocks["side_area_m2"].sum() == pytest.approx(800)
    assert made.blocks["roof_area_m2"].sum() == 0
    assert made.blocks["dilution_m3"].sum() == pytest.approx(0.3 * 3200)
    table = made.table.set_index("step")
    assert table.loc["cut", "dry_tonnes"] == pytest.approx(28_800)
    assert table.loc["dilution", "dry_tonnes"] == pytest.approx(0.3 * 3200 * 2)
    assert table.loc["dilution", "wet_tonnes"] == pytest.approx(0.3 * 3200 * 2.4)
    assert table.loc["dilution", "cu_pct"] == pytest.approx(0.1)
    assert table.loc["loss", "dry_tonnes"] == pytest.approx(0.1 * 3200 * 3)
    assert table.loc["loss", "wet_tonnes"] == pytest.approx(0.1 * 3200 * 3.2)
    delivered = 28_800 - 960 + 1920
    assert table.loc["delivered", "dry_tonnes"] == pytest.approx(delivered)
    assert table.loc["delivered", "wet_tonnes"] == pytest.approx(3.2 * (9600 - 320) + 2.4 * 960)
    assert table.loc["delivered", "cu_pct"] == pytest.approx((2.0 * (28_800 - 960) + 0.1 * 1920) / delivered)
    nothing = skins(model, body, np.ones(len(model)), host=host, over_cut_m=0.0).table.set_index("step")
    assert nothing.loc["delivered", "dry_tonnes"] == pytest.approx(28_800)
    assert nothing.loc["loss", "dry_tonnes"] == nothing.loc["dilution", "dry_tonnes"] == 0.0


def test_dilution_from_inside_the_body_carries_its_grade(slab: tuple[Body, BlockModel]) -> None:
    body, model = slab
    upper = (model.frame["k"] == 1).to_numpy()
    frame = model.frame.assign(cu_pct=np.where(upper, 6.0, 1.0))
    made = skins(
        model.with_frame(frame), body, upper.astype(float), host=Host(2.0), over_cut_m=0.5, metals=["cu_pct"]
    )
    table = made.table.set_index("step")
    floor, side = 2400 * 0.5 * 3.0, 200 * 2 * 0.5 * 2.0
    assert table.loc["dilution", "dry_tonnes"] == pytest.approx(floor + side)
    assert table.loc["dilution", "cu_contained_t"] == pytest.approx(floor * 0.01)
    below = skins(model.with_frame(frame), body, (~upper).astype(float), host=Host(2.0), over_cut_m=0.5)
    assert below.blocks["roof_area_m2"].sum() == pytest.approx(2400)
    ungraded = frame.assign(cu_pct=np.where(upper, 6.0, np.nan))
    told = skins(model.with_frame(ungraded), body, np.full(len(model), 1.0), host=Host(2.0), over_cut_m=0.0,
                 metals=["cu_pct"]).table.set_index("step")  # fmt: skip
    assert told.loc["cut", "cu_pct"] == pytest.approx(6.0)  # missing is not zero
    for wrong in ({"over_cut_m": -1.0}, {"under_cut_m": math.nan}):
        with pytest.raises(ValueError, match=next(iter(wrong))):
            skins(model, body, np.ones(len(model)), host=Host(2.0), **wrong)
    with pytest.raises(ValueError, match="kept_share"):
        skins(model, body, np.ones(3), host=Host(2.0))
    for densities in ((0.0,), (2.0, 1.9)):
        with pytest.raises(ValueError, match="density"):
            Host(*densities)


def test_no_block_gives_more_than_it_has(slab: tuple[Body, BlockModel]) -> None:
    """A deep over-cut takes what is left below and then host; a block cut on all sides is taken once."""
    body, model = slab
    upper = (model.frame["k"] == 1).to_numpy()
    deep = skins(model, body, upper.astype(float), host=Host(2.0), over_cut_m=3.0, metals=["cu_pct"])
    table = deep.table.set_index("step")
    assert table.loc["dilution", "dry_tonnes"] == pytest.approx(
        2400 * (2 * 3.0 + 1 * 2.0) + 200 * 2 * 3.0 * 2.0
    )
    island = ((model.frame["i"] == 4) & (model.frame["j"] == 4)).to_numpy()
    round_it = skins(model, body, (~island).astype(float), host=Host(2.0), over_cut_m=4.0, metals=["cu_pct"])
    outer = 4.0 * (2400 + 800 - 25) * 2.0  # floor and outer sides; from the island, its 25 x 4 m3 at most
    got = round_it.table.set_index("step").loc["dilution", "dry_tonnes"]
    assert got == pytest.approx(outer + 25 * 4 * 3.0)
    assert round_it.blocks["side_area_m2"].sum() == pytest.approx(800 + 4 * 5 * 4)


def test_water_down_the_slope_does_not_dilute() -> None:
    """A layer of 4 m on a plane of 45 degrees: its floor, its ends and the side uphill are rock, the rest is water."""
    x, _ = np.meshgrid(np.arange(-20.0, 101, 2.0), np.arange(-20.0, 61, 2.0))
    top = SurfaceGrid(-20, -20, 2, 2, -1500.0 - x, CRS)
    body = build_body(top, shapely.box(0, 0, 60, 40), NO_CONTACTS, base_grid=top.with_values(top.values - 4))
    model = fill_blocks(body, BlockGrid((0, 0, -1580), (2, 2, 2), (30, 20, 40)))
    model = model.with_frame(model.frame.assign(dry_density_tpm3=3.0))
    made = skins(model, body, np.ones(len(model)), host=Host(2.0), over_cut_m=0.5)
    assert made.blocks["floor_area_m2"].sum() == pytest.approx(2400, rel=1e-6)
    # Ends to the north and the south 2 x 60 x 4 m, the uphill end 40 x 4 m; the lower end stands against rock as well
    # where the seafloor outside is higher than the middle of a block: not more than its own 40 x 4 m.
    sides = made.blocks["side_area_m2"].sum()
    assert 2 * 240 + 120 <= sides <= 2 * 240 + 2 * 160
    downhill = (model.frame["i"] == 29).to_numpy() & (model.frame["k"] == model.frame["k"].min()).to_numpy()
    assert downhill.any() and made.table["dry_tonnes"].iloc[2] == pytest.approx(0.5 * 2.0 * (2400 + sides))


def test_geometry_uncertainty_of_a_slab_by_hand(slab: tuple[Body, BlockModel]) -> None:
    body, _ = slab
    table = geometry_uncertainty(body, seafloor_sigma_m=0.3, outline_m=5.0, dry_density_tpm3=3.0).set_index(
        "case"
    )
    assert table.loc["base_case", "volume_m3"] == pytest.approx(9600)
    assert table.loc["seafloor_up", "change_m3"] == pytest.approx(0.3 * 2400, rel=1e-9)
    assert table.loc["seafloor_down", "change_pct"] == pytest.approx(-7.5)
    wider = 4 * shapely.box(0, 0, 60, 40).buffer(5).area
    assert table.loc["outline_out", "volume_m3"] == pytest.approx(wider, rel=1e-3)
    assert table.loc["outline_in", "volume_m3"] == pytest.approx(4 * 50 * 30, rel=1e-9)
    assert table.loc["outline_in", "change_dry_tonnes"] == pytest.approx(3 * (6000 - 9600))
    assert table.loc["outline_cut", "volume_m3"] == pytest.approx(6000, rel=1e-9)
    for wrong in ({"seafloor_sigma_m": -1.0}, {"outline_m": math.nan}, {"dry_density_tpm3": 0.0}):
        with pytest.raises(ValueError, match=next(iter(wrong))):
            geometry_uncertainty(body, **wrong)


def test_geometry_uncertainty_of_a_mound(mound: tuple[Body, BlockModel]) -> None:
    body, _ = mound
    table = geometry_uncertainty(body).set_index("case")["change_m3"]
    assert table["base_mean_down"] == pytest.approx(body.volume_sigma_m3)
    # One sigma everywhere at once is worse than one sigma of the whole.
    assert table["base_everywhere_down"] > table["base_mean_down"]
    assert table["outline_out"] > 0 > table["outline_in"]
    inner = body.outline.buffer(-5.0)
    x, y = body.thickness.mesh()
    strip = shapely.contains_xy(body.outline, x, y) & ~shapely.contains_xy(inner, x, y)
    near = body.thickness.values[strip].sum() * body.thickness.dx * body.thickness.dy  # a plain sum of cells
    assert table["outline_cut"] == pytest.approx(-near, rel=0.05) and table["outline_cut"] < 0
    assert table["together_high"] >= max(table["base_mean_down"], table["seafloor_up"])
    shifted = body.shifted(base_m=-0.5)
    thick = body.thickness.values > 0
    np.testing.assert_allclose((shifted.thickness.values - body.thickness.values)[thick], 0.5, atol=1e-9)
    assert shifted.categories["volume_m3"].sum() == pytest.approx(shifted.volume_m3, rel=1e-9)
    with pytest.raises(ValueError, match="outline_m"):
        body.shifted(outline_m=-500.0)


def test_sums_of_skins_do_not_rest_on_products_of_vectors(slab: tuple[Body, BlockModel]) -> None:
    """To the last bit the sums that NumPy gives; a product of long vectors would go by the threads of the machine."""
    body, model = slab
    rng = np.random.default_rng(4)
    frame = model.frame.assign(cu_pct=rng.lognormal(1.0, 0.8, len(model)))
    share = rng.random(len(model))
    made = skins(model.with_frame(frame), body, share, host=Host(2.0), over_cut_m=0.0, metals=["cu_pct"])
    cut = made.table.set_index("step").loc["cut"]
    volume = frame["volume_m3"].to_numpy()
    assert cut["volume_m3"] == np.sum(np.ones(len(volume)) * (volume * share))
    density = (
        frame["dry_tonnes"].to_numpy() / volume
        if "dry_tonnes" in frame
        else frame["dry_density_tpm3"].to_numpy()
    )
    assert cut["dry_tonnes"] == np.sum(density * (volume * share))
