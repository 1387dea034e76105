"""Collars against the seafloor: planted shifts, outliers, slopes, and positions without an uncertainty."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from sms_resource.samples.plan_shift import horizontal_fit, plan_shift
from sms_resource.samples.position import (
    hole_ends,
    match_collars,
    position_table,
)
from tests.samples.holes import codes


class Cone:
    """A mound 20 m high on flat ground, or a plane; nothing beyond 100 m."""

    def __init__(self, slope: float = 0.4) -> None:
        self.slope = slope

    def sample(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        r = np.hypot(x, y)
        return np.where(r < 100, -1600.0 - self.slope * r + np.sin(x / 7.0) + np.cos(y / 5.0), np.nan)


def drilled(shift: float, seed: int, count: int = 40, noise: float = 0.3) -> pd.DataFrame:
    rng = np.random.default_rng(seed)
    x, y = rng.uniform(-60, 60, (2, count))
    z = Cone().sample(x, y) + shift + rng.normal(0, noise, count)
    z[0] += 9.0
    return pd.DataFrame(
        {
            "hole_id": [f"H{i}" for i in range(count)],
            "easting": x,
            "northing": y,
            "elevation": z,
            "position_sigma_m": 0.5,
            "source_row": np.arange(count) + 2,
        }
    )


@pytest.mark.parametrize("seed", range(10))
def test_a_planted_shift_is_undone_within_0_3_m(seed: int) -> None:
    match = match_collars(drilled(2.7, seed), Cone(), policy="shift_median")
    assert match.shift_m == pytest.approx(-2.7, abs=0.3)
    assert match.collars["flagged"].tolist() == [True] + [False] * 39
    assert (match.collars["original_elevation"] - match.collars["elevation"]).to_numpy() == pytest.approx(
        -match.shift_m
    )
    assert {"collar-shift", "collar-off-seafloor"} <= set(codes(match.findings))


def test_keep_changes_nothing_and_warns() -> None:
    frame = drilled(2.7, 0)
    match = match_collars(frame, Cone())
    assert match.collars["elevation"].tolist() == frame["elevation"].tolist()
    assert match.shift_m == 0.0
    assert [item.severity for item in match.findings if item.code == "collar-shift"] == ["warning"]
    table = match.table.set_index("quantity")
    assert table.loc["median_m", "before"] == pytest.approx(2.7, abs=0.2)
    assert table.loc["median_m", "before"] == table.loc["median_m", "after"]


def test_snap_puts_each_collar_on_the_floor_and_keeps_the_original() -> None:
    frame = drilled(2.7, 0)
    match = match_collars(frame, Cone(), policy="snap")
    assert match.collars["dz_after_m"].abs().max() == pytest.approx(0.0, abs=1e-12)
    assert match.collars["original_elevation"].tolist() == frame["elevation"].tolist()
    assert not match.collars["flagged"].any()


def test_good_collars_raise_nothing() -> None:
    frame = drilled(0.0, 3).iloc[1:]
    assert len(match_collars(frame, Cone()).findings) == 0


def test_a_horizontal_error_on_a_slope_widens_the_limit() -> None:
    frame = drilled(0.0, 0)
    steep = match_collars(frame.assign(position_sigma_m=4.0), Cone(0.6)).collars
    flat = match_collars(frame.assign(position_sigma_m=np.nan), Cone(0.6)).collars
    assert (steep["limit_m"] > 4.0).mean() > 0.8  # 3 sigma x 4 m x slope
    assert (flat["limit_m"] == 1.0).all()


def test_collars_off_the_grid_are_findings_and_stay() -> None:
    frame = drilled(0.0, 0)
    frame.loc[5, "easting"] = 500.0
    match = match_collars(frame, Cone(), policy="snap")
    assert np.isnan(match.collars["dz_m"].iloc[5])
    assert match.collars["elevation"].iloc[5] == frame["elevation"].iloc[5]
    assert ("collar-off-grid", 7) in [(item.code, item.row) for item in match.findings]


@pytest.mark.parametrize("option", [{"policy": "drop"}, {"sigma_grid_m": -1.0}, {"flag_m": -1.0}])
def test_wrong_options_name_themselves(option: dict) -> None:
    with pytest.raises(ValueError, match=r"policy|negative"):
        match_collars(drilled(0.0, 0), Cone(), **option)


def test_a_move_in_plan_is_found() -> None:
    frame = drilled(0.5, 1, noise=0.1)
    moved = frame.assign(easting=frame["easting"] + 6.0, northing=frame["northing"] - 3.0)
    best = horizontal_fit(moved, Cone(), reach_m=10.0).iloc[0]
    assert (best["shift_east_m"], best["shift_north_m"]) == pytest.approx((-6.0, 3.0), abs=1.0)
    assert best["median_m"] == pytest.approx(0.5, abs=0.3)
    found = plan_shift(moved, Cone(), 1, reach_m=10.0)
    assert found.verdict == "shift" and found.p_value <= 0.01
    assert codes(found.findings) == ["collar-shift-plan"] and "nothing was moved" in found.findings[0].remedy
    assert len(plan_shift(frame, Cone(), 1, reach_m=10.0).findings) == 0


class Flank:
    """A plane of 0.4 with the roughness of a grid, drawn once."""

    def __init__(self, seed: int, roughness_m: float = 0.3) -> None:
        from scipy.ndimage import gaussian_filter

        rough = gaussian_filter(np.random.default_rng(seed).normal(0, 1, (200, 200)), 1.5)
        self.rough = roughness_m * rough / rough.std()

    def sample(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        cell = tuple(np.clip(np.round(np.asarray(axis) + 100).astype(int), 0, 199) for axis in (x, y))
        return -1600.0 - 0.4 * np.asarray(x) + self.rough[cell]


def test_a_plane_flank_shows_no_move() -> None:
    """14 collars that were never moved: the spread alone finds a better place nearly always, and no warning comes."""
    tempted = 0
    for seed in range(12):
        floor, rng = Flank(seed), np.random.default_rng(100 + seed)
        x, y = rng.uniform(-40, 40, (2, 14))
        frame = pd.DataFrame(
            {"easting": x, "northing": y, "elevation": floor.sample(x, y) + rng.normal(0, 0.5, 14)}
        )
        found = plan_shift(frame, floor, 1)
        best = found.table["spread_m"].iloc[0]
        tempted += found.verdict != "none" and best < 0.67
        assert "collar-shift-plan" not in codes(found.findings)
        if found.verdict != "none":
            assert codes(found.findings) == ["collar-shift-plan-open"]
            assert "not resolvable" in found.findings[0].message
    assert tempted >= 6


class Ridge:
    """A ridge that runs north: it fixes a move east and none along itself."""

    def sample(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        return -1600.0 + 15.0 * np.exp(-((np.asarray(x) / 25.0) ** 2)) + 0.0 * np.asarray(y)


def test_a_ridge_fixes_no_move_along_its_strike() -> None:
    rng = np.random.default_rng(4)
    x, y = rng.uniform(-45, 45, (2, 30))
    frame = pd.DataFrame(
        {"easting": x + 6.0, "northing": y, "elevation": Ridge().sample(x, y) + rng.normal(0, 0.1, 30)}
    )
    found = plan_shift(frame, Ridge(), 1)
    assert found.verdict == "not resolved" and found.p_value <= 0.01
    assert min(found.weak_azimuth, 180.0 - found.weak_azimuth) < 5.0
    assert codes(found.findings) == ["collar-shift-plan-open"]


def test_the_same_seed_gives_the_same_verdict() -> None:
    frame = drilled(0.5, 1, count=12, noise=0.4)
    moved = frame.assign(easting=frame["easting"] + 4.0)
    first, second = (plan_shift(moved, Cone(), 5) for _ in range(2))
    assert (first.verdict, first.weak_sigma_m) == (
        second.verdict,
        second.weak_sigma_m,
    ) or first.verdict == "none"
    assert [item.message for item in first.findings] == [item.message for item in second.findings]


def test_how_holes_ended() -> None:
    frame = pd.DataFrame(
        {"ended_in": ["sulphide", "host", "", None, "lost"], "length_m": [10.0, 5.0, 4.0, 3.0, 2.0]}
    )
    table, findings = hole_ends(frame)
    assert table.set_index("ended_in")["holes"].to_dict() == {
        "sulphide": 1,
        "host": 1,
        "lost": 1,
        "unknown": 2,
    }
    assert table["length_m"].sum() == 24.0
    assert codes(findings) == ["hole-end-sulphide", "hole-end-unknown"]


def test_positions_by_method() -> None:
    frame = pd.DataFrame({"position_method": ["USBL", "USBL", ""], "position_sigma_m": [4.0, 6.0, np.nan]})
    table, findings = position_table(frame, "collars")
    assert table.set_index("method").loc["USBL", "sigma_median_m"] == 5.0
    assert codes(findings) == ["position-sigma-missing"]


def test_how_a_sample_was_assayed_is_not_how_it_was_placed() -> None:
    frame = pd.DataFrame({"method": ["laboratory", "handheld"], "position_sigma_m": [2.0, 3.0]})
    table, _ = position_table(frame, "surface samples")
    assert table["method"].tolist() == ["not given"] and table["positions"].tolist() == [2]
