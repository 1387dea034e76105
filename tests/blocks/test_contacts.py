"""What each hole says of the base, the proposed outline, and the domains from logs."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import shapely

from sms_resource.blocks.body import build_body
from sms_resource.blocks.chimneys import chimneys_from_polygons, chimneys_from_relief, with_chimneys
from sms_resource.blocks.contacts import base_contacts
from sms_resource.blocks.domains import LayeredDomains, layered_domains
from sms_resource.blocks.frames import VerticalFrame
from sms_resource.blocks.grid import BlockGrid, SurfaceGrid
from sms_resource.blocks.logged_domains import interpolate_domains
from sms_resource.blocks.model import fill_blocks, propose_grid
from sms_resource.blocks.outline import propose_outline
from sms_resource.findings import Findings
from tests.blocks.mounds import invent_mound

FLAT = SurfaceGrid(0, 0, 2, 2, np.full((51, 51), -1500.0), "EPSG:32756")


class Vertical:
    """Vertical holes from the seafloor at stated places."""

    def __init__(
        self, places: dict[str, tuple[float, float]], seafloor: SurfaceGrid, lean: float = 0.0
    ) -> None:
        self.places, self.seafloor, self.lean = places, seafloor, lean

    def positions(self, hole_ids, depths) -> np.ndarray:
        xy = np.array([self.places[hole] for hole in hole_ids], dtype=float).reshape(-1, 2)
        depths = np.asarray(depths, dtype=float)
        z = self.seafloor.sample(xy[:, 0], xy[:, 1])
        angle = np.radians(self.lean)
        east = xy[:, 0] + depths * np.sin(angle)
        return np.column_stack([east, xy[:, 1], z - depths * np.cos(angle)])


def table(rows: list[tuple]) -> pd.DataFrame:
    return pd.DataFrame(rows, columns=["hole_id", "from_m", "to_m", "domain"])


def holes(rows: list[tuple]) -> pd.DataFrame:
    return pd.DataFrame(rows, columns=["hole_id", "length_m", "ended_in", "source_row"])


def test_every_way_a_hole_can_end() -> None:
    intervals = table([
        ("A", 0, 8, "massive"), ("A", 8, 12, "waste"),
        ("B", 0, 9, "massive"),
        ("C", 0, 9, "massive"),
        ("D", 0, 9, "massive"),
        ("E", 0, 6, "waste"),
        ("F", 0, 3, "massive"), ("F", 3, 7, "waste"), ("F", 7, 10, "stockwork"), ("F", 10, 11, "waste"),
        ("G", 0, 4, "massive"),
    ])  # fmt: skip
    collars = holes([
        ("A", 12, "host", 2), ("B", 9, "sulphide", 3), ("C", 11, "lost", 4), ("D", 9, "unknown", 5),
        ("E", 6, "host", 6), ("F", 11, "host", 7), ("G", 4, "host", 8), ("H", 5, "host", 9),
    ])  # fmt: skip
    paths = Vertical({hole: (10.0 * n + 5, 50.0) for n, hole in enumerate("ABCDEFGH")}, FLAT)
    findings = Findings()
    contacts = base_contacts(collars, intervals, paths, ("massive", "stockwork"), FLAT, findings=findings)
    found = contacts.set_index("hole_id")
    kinds = {
        "A": "reached",
        "B": "open",
        "C": "open",
        "D": "open",
        "E": "reached",
        "F": "reached",
        "G": "reached",
    }
    assert found["kind"].to_dict() == kinds
    assert found["thickness_m"].to_dict() == pytest.approx(
        {"A": 8, "B": 9, "C": 9, "D": 9, "E": 0, "F": 10, "G": 4}
    )
    assert found.loc["A", "elevation"] == pytest.approx(-1508)
    codes = {(finding.code, finding.row) for finding in findings}
    assert codes == {("hole-end-unknown", 5), ("internal-waste", 7), ("hole-not-logged", 9)}


def test_thickness_is_vertical_below_the_seafloor_at_the_contact() -> None:
    """A leaning hole on a slope: its contact stands elsewhere than its collar."""
    x, _ = np.meshgrid(2.0 * np.arange(51), 2.0 * np.arange(51))
    slope = SurfaceGrid(0, 0, 2, 2, -1500 - 0.3 * x)
    intervals, collars = (
        table([("A", 0, 10, "massive"), ("A", 10, 14, "waste")]),
        holes([("A", 14, "host", 2)]),
    )
    contact = base_contacts(
        collars, intervals, Vertical({"A": (40.0, 50.0)}, slope, 10), {"massive"}, slope
    ).iloc[0]
    east = 40 + 10 * np.sin(np.radians(10))
    assert contact["easting"] == pytest.approx(east)
    assert contact["thickness_m"] == pytest.approx(
        (-1500 - 0.3 * east) - (-1512 - 10 * np.cos(np.radians(10)))
    )
    above = base_contacts(collars, intervals, Vertical({"A": (40.0, 50.0)}, slope), {"massive"},
                          slope.with_values(slope.values - 20), findings=(named := Findings()))  # fmt: skip
    assert above["thickness_m"].iloc[0] < 0
    assert [finding.code for finding in named] == ["contact-above-seafloor"]
    with pytest.raises(ValueError, match="sulphide_domains"):
        base_contacts(collars, intervals, Vertical({"A": (40.0, 50.0)}, slope), (), slope)


def test_an_outline_is_proposed_near_the_true_one() -> None:
    shares = []
    for seed in (1, 2, 4, 6, 9):
        mound = invent_mound(seed, holes=45)
        proposed = propose_outline(mound.contacts, mound.seafloor)
        assert proposed.is_valid and not proposed.is_empty
        inside = shapely.contains_xy(proposed, mound.contacts[["easting", "northing"]].to_numpy())
        assert inside.mean() > 0.9
        shares.append(proposed.intersection(mound.outline).area / proposed.union(mound.outline).area)
    assert np.mean(shares) > 0.75, shares


def test_barren_holes_and_the_break_of_slope_bound_the_outline() -> None:
    x, y = FLAT.mesh()
    cone = FLAT.with_values(
        -1500 + np.maximum(12 - 0.4 * np.hypot(x - 50, y - 50), 0)
    )  # foot 30 m out, 22 degrees
    contacts = pd.DataFrame({
        "hole_id": list("ABCDE"), "easting": [50.0, 40, 60, 50, 75], "northing": [50.0, 50, 50, 62, 50],
        "thickness_m": [9.0, 5, 5, 4, 0], "kind": "reached",
    })  # fmt: skip
    proposed = propose_outline(contacts, cone, reach_m=10.0)
    assert not proposed.contains(shapely.Point(75, 50))
    assert not proposed.contains(shapely.Point(70, 50))  # nearer to the barren hole at 75 than to that at 60
    assert proposed.contains(shapely.Point(24, 50))  # 16 m from a hole, but still on the steep flank
    assert not proposed.contains(shapely.Point(14, 50))  # beyond the foot
    flat = propose_outline(contacts, FLAT, reach_m=10.0)
    assert not flat.contains(shapely.Point(26, 50))  # no flank to follow
    grabs = pd.DataFrame({"easting": [50.0, 80], "northing": [85.0, 85], "sample_type": ["grab", "dredge"]})
    wider = propose_outline(contacts, FLAT, surface=grabs, reach_m=10.0)
    assert wider.contains(shapely.Point(50, 85)) and not wider.contains(shapely.Point(80, 85))
    with pytest.raises(ValueError, match="no hole with sulphide"):
        propose_outline(contacts[contacts["thickness_m"] == 0], FLAT)
    with pytest.raises(ValueError, match="outside the seafloor"):
        propose_outline(contacts.assign(easting=1e6), FLAT)


def logged_mound(seed: int):
    """A mound with a cap that thickens to the east, logged in every hole."""
    mound = invent_mound(seed, holes=50, roughness="none", open_holes=True)
    places = {
        h: (e, n) for h, e, n in mound.contacts[["hole_id", "easting", "northing"]].itertuples(index=False)
    }
    intervals, collars = [], []
    for hole in mound.contacts.itertuples():
        cap = min(2.5 + 0.02 * (hole.easting - 1000), hole.thickness_m)
        intervals.append((hole.hole_id, 0.0, cap, "cap"))
        if hole.thickness_m > cap:
            intervals.append((hole.hole_id, cap, hole.thickness_m, "massive"))
        if hole.kind == "reached":
            intervals.append((hole.hole_id, hole.thickness_m, hole.thickness_m + 3, "waste"))
        ended = "sulphide" if hole.kind == "open" else "host"
        collars.append((hole.hole_id, hole.thickness_m + 3 * (ended == "host"), ended, 2))
    return mound, table(intervals), holes(collars), Vertical(places, mound.seafloor)


def test_layers_follow_their_contacts_and_keep_their_shares() -> None:
    mound, intervals, collars, paths = logged_mound(3)
    contacts = base_contacts(collars, intervals, paths, ("cap", "massive"), mound.seafloor)
    body = build_body(mound.seafloor, mound.outline, contacts, cell_m=2.0)
    layers = layered_domains(body, intervals, collars, paths, ("cap", "massive"))
    both = intervals[intervals["domain"] == "massive"]
    at = np.array([paths.places[hole] for hole in both["hole_id"]])
    # Contacts are met on the lattice up to the rounding of the vertical sums.
    np.testing.assert_allclose(layers.contacts[0].sample(at[:, 0], at[:, 1]), both["from_m"], atol=1e-6)
    grid, _ = propose_grid(body, contacts[["easting", "northing"]].to_numpy())
    frame = fill_blocks(body, grid, domains=layers).frame
    shares = frame[["share_cap", "share_massive"]]
    np.testing.assert_allclose(shares.sum(axis=1), 1.0, atol=1e-12)
    assert ((shares > 0.05).all(axis=1)).sum() > 20  # blocks that hold both
    assert (
        frame["domain"].astype(str) == np.where(shares["share_cap"] >= 0.5, "cap", "massive")
    ).mean() > 0.999
    by_domain = (shares.mul(frame["volume_m3"], axis=0)).sum()
    assert by_domain.sum() == pytest.approx(frame["volume_m3"].sum(), rel=1e-9)
    x, _ = mound.thickness.mesh()
    true_cap = np.clip(np.minimum(2.5 + 0.02 * (x - 1000), mound.thickness.values), 0, None).sum() * 4.0
    assert by_domain["share_cap"] == pytest.approx(true_cap, rel=0.05)


def test_a_cap_of_stated_thickness_is_exact() -> None:
    body = build_body(FLAT, shapely.box(20, 20, 80, 70), pd.DataFrame({
        "hole_id": ["A", "B"], "easting": [40.0, 60], "northing": [40.0, 50], "thickness_m": [8.0, 8.0], "kind": "reached",
    }), base_grid=FLAT.with_values(FLAT.values - 8))  # fmt: skip
    layers = layered_domains(
        body, table([]), holes([]), Vertical({}, FLAT), ("cap", "massive"), thickness_m={"cap": 1.3}
    )
    frame = fill_blocks(body, BlockGrid((20, 20, -1510), (3, 5, 2), (20, 10, 6), 0), domains=layers).frame
    assert (frame["share_cap"] * frame["volume_m3"]).sum() == pytest.approx(1.3 * 3000, rel=1e-9)
    with pytest.raises(ValueError, match="thickness_m"):
        layered_domains(body, table([]), holes([]), Vertical({}, FLAT), ("cap",), thickness_m={"crust": 1.0})


def test_logs_without_a_contact_are_named() -> None:
    mound, intervals, collars, paths = logged_mound(3)
    contacts = base_contacts(collars, intervals, paths, ("cap", "massive"), mound.seafloor)
    body = build_body(mound.seafloor, mound.outline, contacts, cell_m=2.0)
    only_cap = intervals[intervals["domain"] != "massive"]
    findings = Findings()
    layers = layered_domains(body, only_cap, collars, paths, ("cap", "massive"), findings=findings)
    assert [finding.code for finding in findings] == ["domain-surface-gap"]
    assert (layers.contacts[0].values > body.thickness.values.max()).all()
    with pytest.raises(ValueError, match="names"):
        LayeredDomains(("a", "a"), (FLAT,))
    with pytest.raises(ValueError, match="contacts"):
        LayeredDomains(("a", "b"))


def test_chimneys_are_a_domain_on_top() -> None:
    import geopandas as gpd

    x, y = FLAT.mesh()
    slope = -1500 - 0.35 * x
    chimney = np.hypot(x - 50, y - 40) < 5
    top = FLAT.with_values(slope + np.where(chimney, 7.0, 0.0))
    found = chimneys_from_relief(top, width_m=16.0, least_height_m=2.0)
    assert (found.values[chimney] > 5.0).all()
    assert (found.values[~chimney] == 0).mean() > 0.99
    assert (chimneys_from_relief(FLAT.with_values(slope)).values == 0).all()
    polygons = gpd.GeoDataFrame(
        {"height_m": [7.0]}, geometry=[shapely.Point(50, 40).buffer(6)], crs="EPSG:32756"
    )
    drawn = chimneys_from_polygons(top, polygons)
    body = build_body(top, shapely.box(20, 20, 80, 70), pd.DataFrame({
        "hole_id": ["A"], "easting": [30.0], "northing": [30.0], "thickness_m": [6.0], "kind": "reached",
    }), base_grid=top.with_values(slope - 6))  # fmt: skip
    layers = with_chimneys(LayeredDomains(("massive",)), drawn)
    frame = fill_blocks(body, BlockGrid((10, 10, -1560), (2, 2, 2), (40, 40, 35)), domains=layers).frame
    volume = (frame["share_chimney"] * frame["volume_m3"]).sum()
    assert layers.names == ("chimney", "massive")
    assert volume == pytest.approx(7.0 * polygons.area.sum(), rel=0.15)  # the rim is a cell wide
    with pytest.raises(ValueError, match="height_m"):
        chimneys_from_polygons(top, polygons.assign(height_m=-1.0))


@pytest.mark.parametrize("method", ["indicator", "signed_distance"])
def test_domains_from_logged_codes_keep_their_probability(method: str) -> None:
    mound, intervals, collars, paths = logged_mound(5)
    contacts = base_contacts(collars, intervals, paths, ("cap", "massive"), mound.seafloor)
    body = build_body(mound.seafloor, mound.outline, contacts, cell_m=2.0)
    grid, _ = propose_grid(body, contacts[["easting", "northing"]].to_numpy(), size=(5, 5, 1))
    model = fill_blocks(body, grid)
    logged = [
        (hole, 0.5 * (a + b), domain)
        for hole, start, end, domain in intervals[intervals["domain"] != "waste"].itertuples(index=False)
        for a, b in ((z, min(z + 1, end)) for z in np.arange(start, end, 1.0))
    ]
    at = paths.positions([row[0] for row in logged], [row[1] for row in logged])
    made = interpolate_domains(
        model, at, [row[2] for row in logged], method=method, range_m=60, vertical_range_m=5,
        frame=VerticalFrame("depth", body.top),
    )  # fmt: skip
    frame = made.frame
    chance = frame[["probability_cap", "probability_massive"]]
    np.testing.assert_allclose(chance.sum(axis=1), 1.0, atol=1e-9)
    assert chance.min().min() >= 0 and chance.max().max() <= 1
    assert ((frame["share_cap"] + frame["share_massive"]) == 1).all() and "share_body" not in frame
    true_cap = frame["depth_below_seafloor_m"] < 2.5 + 0.02 * (frame["easting"] - 1000)
    right = ((frame["domain"] == "cap") == true_cap)[frame["body_fraction"] > 0.9]
    assert right.mean() > 0.9
    # Where the tool is sure it is more often right than where it is not.
    sure = chance.max(axis=1)[frame["body_fraction"] > 0.9] > 0.9
    assert right[sure].mean() > right[~sure].mean()
    with pytest.raises(ValueError, match="range_m"):
        interpolate_domains(model, at, [row[2] for row in logged], range_m=0, vertical_range_m=5)
    with pytest.raises(ValueError, match="at least one"):
        interpolate_domains(model, np.empty((0, 3)), [], range_m=10, vertical_range_m=5)
