"""Broken input of the body and the blocks: a finding or a ValueError that names the argument, never worse."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest
import shapely

from sms_resource.blocks.body import build_body
from sms_resource.blocks.codes import CODES
from sms_resource.blocks.grid import BlockGrid, SurfaceGrid
from sms_resource.blocks.model import BlockModel, fill_blocks, propose_grid
from sms_resource.blocks.thickness_model import ThicknessSettings
from tests.blocks.solids import NO_CONTACTS

X, Y = np.meshgrid(2.0 * np.arange(61), 2.0 * np.arange(61))
SEAFLOOR = SurfaceGrid(0, 0, 2, 2, -1500 - 0.1 * X)
DISC = shapely.Point(60, 60).buffer(40)
HOLES = pd.DataFrame({
    "hole_id": list("ABCDEF"), "easting": [60.0, 45, 75, 60, 60, 50], "northing": [60.0, 60, 60, 45, 75, 50],
    "thickness_m": [12.0, 8, 9, 7, 8, 9], "kind": "reached", "source_row": range(2, 8),
})  # fmt: skip


def codes(body) -> set[str]:
    found = {finding.code for finding in body.findings}
    assert found <= set(CODES), found - set(CODES)
    return found


@pytest.mark.parametrize(
    ("outline", "code"),
    [
        (None, "outline-missing"),
        (shapely.Polygon(), "outline-missing"),
        (shapely.LineString([(0, 0), (50, 50)]), "outline-not-area"),
        (shapely.Point(50, 50), "outline-not-area"),
        (shapely.Polygon([(20, 20), (90, 90), (90, 20), (20, 90)]), "outline-crosses-itself"),
        (shapely.Point(6000, 60).buffer(40), "outline-outside-grid"),
        (shapely.Point(100, 60).buffer(40), "outline-outside-grid"),
    ],
)
def test_outlines_that_cannot_be_used(outline, code: str) -> None:
    body = build_body(SEAFLOOR, outline, HOLES)
    assert code in codes(body) and body.findings.has_errors
    assert body.volume_m3 == 0.0
    assert all(finding.remedy for finding in body.findings.errors)


def test_seafloor_without_values() -> None:
    body = build_body(SEAFLOOR.with_values(np.full(SEAFLOOR.shape, np.nan)), DISC, HOLES)
    assert "seafloor-empty" in codes(body) and body.volume_m3 == 0.0
    hole = SEAFLOOR.values.copy()
    hole[8:52, 8:52] = np.nan
    assert "outline-no-seafloor" in codes(build_body(SEAFLOOR.with_values(hole), DISC, HOLES))


def test_a_gap_in_the_seafloor_holds_no_volume() -> None:
    values = SEAFLOOR.values.copy()
    values[38:43, 36:44] = np.nan  # where no hole stands
    plain = ThicknessSettings(relief=False)  # relief cannot be followed where it is not known
    body = build_body(SEAFLOOR.with_values(values), DISC, HOLES, settings=plain)
    whole = build_body(SEAFLOOR, DISC, HOLES, settings=plain)
    assert "outline-no-seafloor" in codes(body)
    assert 0 < body.volume_m3 < whole.volume_m3
    grid, _ = propose_grid(whole, HOLES[["easting", "northing"]].to_numpy(), size=(2, 2, 2))
    assert fill_blocks(body, grid).volume_m3 == pytest.approx(body.volume_m3, rel=2e-3)


def test_no_hole_at_all_and_all_holes_open() -> None:
    assert "contacts-missing" in codes(build_body(SEAFLOOR, DISC, NO_CONTACTS))
    outside = build_body(SEAFLOOR, DISC, HOLES.assign(easting=500.0))
    assert {"contacts-missing", "contact-outside-outline"} <= codes(outside)
    body = build_body(SEAFLOOR, DISC, HOLES.assign(kind="open"))
    assert "contacts-all-open" in codes(body) and body.volume_m3 > 0
    assert body.audit["honoured"].all()
    # Nothing is known below the ends, so nothing is put there.
    assert body.categories.set_index("category")["volume_m3"]["downwards"] < 1e-3 * body.volume_m3
    few = build_body(SEAFLOOR, DISC, HOLES.assign(kind=["reached"] + ["open"] * 5))
    assert "contacts-few" in codes(few)


def test_one_hole_is_enough_and_is_said_to_be_little() -> None:
    body = build_body(SEAFLOOR, DISC, HOLES.iloc[:1])
    assert "contacts-few" in codes(body)
    assert body.thickness.sample(60.0, 60.0) == pytest.approx(12.0, abs=1e-6)
    assert body.volume_sigma_m3 > 0.1 * body.volume_m3


def test_contacts_that_cannot_be_used_are_named_with_their_row() -> None:
    bad = pd.DataFrame({
        "hole_id": ["N", "P", "U"], "easting": [55.0, np.nan, 65.0], "northing": [55.0, 60, 65],
        "thickness_m": [np.nan, 5.0, -2.0], "kind": "reached", "source_row": [20, 21, 22],
    })  # fmt: skip
    body = build_body(SEAFLOOR, DISC, pd.concat([HOLES, bad]))
    rows = {(finding.code, finding.row) for finding in body.findings}
    assert {("contacts-not-finite", 20), ("contacts-not-finite", 21), ("contact-above-seafloor", 22)} <= rows
    assert codes(body)
    assert build_body(SEAFLOOR, DISC, HOLES).volume_m3 == body.volume_m3


def test_two_holes_at_one_place_that_disagree() -> None:
    twin = HOLES.iloc[[0]].assign(hole_id="T", thickness_m=6.0)
    body = build_body(SEAFLOOR, DISC, pd.concat([HOLES, twin]))
    assert "contacts-joined" in codes(body)
    assert body.thickness.sample(60.0, 60.0) == pytest.approx(9.0, abs=1e-6)
    assert (
        body.audit.set_index("hole_id")["honoured"].to_dict()["T"] is False
        or not body.audit["honoured"].all()
    )


def test_a_base_of_the_users_above_the_seafloor() -> None:
    base = SEAFLOOR.with_values(np.where(X < 60, SEAFLOOR.values + 1, SEAFLOOR.values - 6))
    body = build_body(SEAFLOOR, DISC, NO_CONTACTS, base_grid=base)
    assert "base-above-seafloor" in codes(body)
    assert (body.base.values <= body.top.values).all()
    small = SurfaceGrid(40, 40, 2, 2, np.full((10, 10), -1520.0))
    assert "base-grid-gap" in codes(build_body(SEAFLOOR, DISC, NO_CONTACTS, base_grid=small))
    points = pd.DataFrame({"easting": [50.0, 70], "northing": [60.0, 60], "elevation": [-1490.0, -1515.0]})
    assert "base-above-seafloor" in codes(build_body(SEAFLOOR, DISC, HOLES, base_points=points))


def test_contacts_correct_a_base_of_the_users() -> None:
    base = SEAFLOOR.with_values(SEAFLOOR.values - 8)
    deeper = HOLES.assign(thickness_m=10.0)
    body = build_body(SEAFLOOR, DISC, deeper, base_grid=base)
    assert body.audit["honoured"].all()
    assert 9.0 < body.mean_thickness_m < 10.5  # two metres deeper in every hole: deeper between them too
    far = pd.DataFrame({"easting": np.linspace(30, 90, 40), "northing": 60.0, "elevation": -1520.0})
    softly = build_body(SEAFLOOR, DISC, HOLES, base_points=far, base_point_sigma_m=2.0)
    assert softly.audit["honoured"].all()
    assert softly.record["base_points"] == 40


@pytest.mark.parametrize("method", ["spline", "linear"])
def test_other_methods_for_comparison(method: str) -> None:
    body, kriged = build_body(SEAFLOOR, DISC, HOLES, method=method), build_body(SEAFLOOR, DISC, HOLES)
    assert body.volume_m3 == pytest.approx(kriged.volume_m3, rel=0.3)
    assert math.isnan(body.volume_sigma_m3)
    assert body.audit["honoured"].all()


@pytest.mark.parametrize(
    ("arguments", "name"),
    [
        ({"method": "guess"}, "method"),
        ({"cell_m": 0.0}, "cell_m"),
        ({"cell_m": math.nan}, "cell_m"),
        ({"edge_thickness_m": -1.0}, "edge_thickness_m"),
        ({"extrapolate_below_m": -1.0}, "extrapolate_below_m"),
        ({"drilled_within_m": 0.0}, "drilled_within_m"),
        ({"base_point_sigma_m": -0.1}, "base_point_sigma_m"),
        ({"base_points": pd.DataFrame({"easting": [1.0]})}, "base_points"),
    ],
)
def test_arguments_out_of_range_are_named(arguments: dict, name: str) -> None:
    with pytest.raises(ValueError, match=name):
        build_body(SEAFLOOR, DISC, HOLES, **arguments)


def test_columns_and_kinds_are_named() -> None:
    with pytest.raises(ValueError, match="thickness_m"):
        build_body(SEAFLOOR, DISC, HOLES.drop(columns="thickness_m"))
    with pytest.raises(ValueError, match="kind"):
        build_body(SEAFLOOR, DISC, HOLES.assign(kind="perhaps"))
    for wrong in ({"range_m": -1.0}, {"shape": "cubic"}, {"short_share": 2.0}, {"root": 5}, {"draws": 3},
                  {"edge_power": -1.0}):  # fmt: skip
        with pytest.raises(ValueError, match=next(iter(wrong))):
            ThicknessSettings(**wrong)
    for wrong in ({"values": np.zeros(3)}, {"dx": 0.0}, {"x0": math.inf}, {"uncertainty": np.zeros((2, 2))}):
        values = {"x0": 0.0, "y0": 0.0, "dx": 1.0, "dy": 1.0, "values": np.zeros((3, 3))} | wrong
        with pytest.raises(ValueError, match=next(iter(wrong))):
            SurfaceGrid(**values)


def test_block_grids_that_are_too_fine_or_too_small() -> None:
    body = build_body(SEAFLOOR, DISC, HOLES)
    with pytest.raises(ValueError, match=r"50,000,000 blocks\. Use blocks of at least"):
        fill_blocks(body, BlockGrid((0, 0, -1530), (0.02, 0.02, 0.02), (6000, 6000, 2000), 30.0))
    small = fill_blocks(body, BlockGrid((40, 40, -1512), (2, 2, 2), (10, 10, 4)))
    assert [finding.code for finding in small.findings] == ["blocks-miss-body"]
    assert 0 < small.volume_m3 < body.volume_m3
    away = fill_blocks(body, BlockGrid((4000, 40, -1512), (2, 2, 2), (10, 10, 4)))
    assert len(away) == 0 and "blocks-miss-body" in {finding.code for finding in away.findings}
    assert "_html_" not in away._repr_html_() and "0" in repr(away)
    with pytest.raises(ValueError, match="split"):
        fill_blocks(body, small.grid, split=0)
    empty = build_body(SEAFLOOR, DISC, NO_CONTACTS)
    with pytest.raises(ValueError, match="volume"):
        propose_grid(empty, HOLES[["easting", "northing"]].to_numpy())


def test_a_block_model_shows_itself() -> None:
    body = build_body(SEAFLOOR, DISC, HOLES)
    grid, why = propose_grid(body, HOLES[["easting", "northing"]].to_numpy())
    model = fill_blocks(body, grid, single_domain="massive")
    assert isinstance(model, BlockModel) and model.domains == ["massive"]
    page = model._repr_html_()
    assert "m³" in page and "massive" in page and "<table>" in page
    assert (
        set(why["what"]) == {"size", "azimuth", "origin", "shape"} and (why["decided_by"] == "proposed").all()
    )
    kept, given = propose_grid(
        body, HOLES[["easting", "northing"]].to_numpy(), size=(3, 3, 1), azimuth=20.0, origin=(0, 0, -1540)
    )
    assert kept.size == (3, 3, 1) and kept.azimuth == 20.0 and kept.origin == (0, 0, -1540)
    assert (given["decided_by"] == "study").sum() == 3


def test_a_long_body_turns_its_blocks() -> None:
    from shapely.affinity import rotate

    long = rotate(shapely.box(35, 50, 85, 70), 30)  # its axis: 30 degrees north of east, azimuth 60
    body = build_body(SEAFLOOR, long, NO_CONTACTS, base_grid=SEAFLOOR.with_values(SEAFLOOR.values - 5))
    grid, _ = propose_grid(body, HOLES[["easting", "northing"]].to_numpy())
    assert grid.azimuth == pytest.approx(60.0, abs=1.5)
    model = fill_blocks(body, grid)
    assert not model.findings.of("warning")
    assert model.volume_m3 == pytest.approx(body.volume_m3, rel=1e-6)


def test_every_code_of_the_room_is_explained_and_used() -> None:
    import re
    from pathlib import Path

    import sms_resource.blocks as room

    text = "".join(
        path.read_text(encoding="utf-8")
        for path in sorted(Path(room.__file__).parent.glob("*.py"))
        if path.name != "codes.py" and not path.name.startswith("exchange")
    )
    used = set(re.findall(r"findings\.(?:error|warning|note)\(\s*\"([a-z-]+)\"", text))
    assert used <= set(CODES), used - set(CODES)
    others = {code for code in CODES if code not in used and not code.startswith("exchange")}
    assert all(f'"{code}"' in text for code in others) or not others, others
