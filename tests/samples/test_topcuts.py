"""Top cuts: curves by hand, proposals that follow their rule, cuts that are counted."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from sms_resource.samples.topcuts import (
    apply_top_cuts,
    cut_curve,
    log_probability,
    top_cut_findings,
    top_cut_study,
)
from tests.samples.holes import codes


def composites(values: list[float] | np.ndarray, **more: object) -> pd.DataFrame:
    count = len(values)
    rng = np.random.default_rng(9)
    base = {
        "domain": "massive",
        "hole_id": [f"H{i % 15}" for i in range(count)],
        "easting": rng.uniform(0, 200, count),
        "northing": rng.uniform(0, 200, count),
        "elevation": rng.uniform(-30, 0, count),
        "length_m": 1.0,
    }
    return pd.DataFrame({**base, "au_gpt": values, **more})


def test_curve_by_hand() -> None:
    curve = cut_curve([1, 2, 3, 10], cuts=[2, 5, 10]).set_index("cut")
    assert curve.loc[5, "mean"] == pytest.approx(11 / 4)
    assert curve.loc[5, "metal_removed_pct"] == pytest.approx(100 * 5 / 16)
    assert curve.loc[5, "n_cut"] == 1
    assert curve.loc[2, "cv"] == pytest.approx(np.std([1, 2, 2, 2]) / 1.75)
    assert curve.loc[10, "metal_removed_pct"] == pytest.approx(0.0)


def test_curve_weighs() -> None:
    curve = cut_curve([1, 10], weights=[3, 1], cuts=[5])
    assert curve["mean"].iloc[0] == pytest.approx((3 * 1 + 5) / 4)
    with pytest.raises(ValueError, match="entries"):
        cut_curve([1, 2], weights=[1])


def test_log_probability_points() -> None:
    points = log_probability([4, 1, 2])
    assert points["value"].tolist() == [1, 2, 4]
    assert points["cumulative_pct"].tolist() == pytest.approx([100 / 6, 50, 500 / 6])
    assert points["normal_score"].iloc[1] == pytest.approx(0.0)


def test_a_tame_set_is_not_cut() -> None:
    row = top_cut_study(composites(np.random.default_rng(0).lognormal(1, 0.5, 200)), ["au_gpt"]).iloc[0]
    assert np.isnan(row["cut"]) and "no cut" in row["reason"] and row["n_cut"] == 0


def test_few_samples_are_not_cut() -> None:
    row = top_cut_study(composites([1.0] * 10 + [90.0]), ["au_gpt"]).iloc[0]
    assert np.isnan(row["cut"]) and "too few" in row["reason"]


def test_accidents_beyond_a_break_are_cut_at_the_break() -> None:
    body = np.random.default_rng(1).lognormal(1, 0.6, 300)
    row = top_cut_study(composites([*body, 150.0, 180.0, 260.0]), ["au_gpt"]).iloc[0]
    assert row["cut"] == pytest.approx(body.max())
    assert row["n_cut"] == 3
    assert "breaks" in row["reason"]
    assert row["holes_cut"] == "H0 (1), H1 (1), H2 (1)"
    assert row["metal_removed_pct"] > 0 and row["mean_after"] < row["mean"] and row["cv_cut"] < row["cv"]


def test_a_smooth_tail_is_cut_where_the_spread_is_tame() -> None:
    row = top_cut_study(composites(np.random.default_rng(4).lognormal(0, 1.25, 400)), ["au_gpt"]).iloc[0]
    assert row["metal_removed_pct"] <= 15.0
    assert row["cv_cut"] < row["cv"]


def test_a_second_population_is_not_cut_away() -> None:
    rng = np.random.default_rng(2)
    values = np.concatenate([rng.lognormal(0, 0.3, 160), rng.lognormal(4, 0.3, 40)])
    row = top_cut_study(composites(values), ["au_gpt"]).iloc[0]
    assert row["metal_removed_pct"] <= 15.0
    assert "population" in row["reason"] or row["cv_cut"] <= 1.2 or np.isfinite(row["cut"])


def test_samples_that_lie_together_are_pointed_out() -> None:
    body = np.random.default_rng(1).lognormal(1, 0.6, 300)
    frame = composites([*body, 150.0, 180.0, 260.0])
    frame.loc[frame.index[-3:], ["easting", "northing", "elevation"]] = [
        [10, 10, -5],
        [11, 10, -5],
        [10, 11, -5],
    ]
    row = top_cut_study(frame, ["au_gpt"]).iloc[0]
    assert "lie together" in row["reason"] and row["spacing_m"] == pytest.approx(1.0, abs=0.5)


def test_applied_cuts_are_counted_and_the_original_kept() -> None:
    frame = composites([1.0, 5.0, 40.0]).assign(domain=["massive", "massive", "cap"])
    cut, summary = apply_top_cuts(
        frame, {("massive", "au_gpt"): 3.0, ("all", "au_gpt"): 10.0, ("waste", "au_gpt"): 2.0}
    )
    assert cut["au_gpt"].tolist() == [1.0, 3.0, 10.0]
    assert cut["au_gpt_uncut"].tolist() == [1.0, 5.0, 40.0]
    rows = summary.set_index("domain")
    assert rows["n_cut"].to_dict() == {"massive": 1, "all": 1, "waste": 0}
    assert rows.loc["massive", "metal_removed_pct"] == pytest.approx(100 / 3)
    assert (rows.loc["massive", "mean_before"], rows.loc["massive", "mean_after"]) == (3.0, 2.0)
    assert codes(top_cut_findings(summary)) == ["top-cut-applied", "top-cut-applied", "top-cut-unused"]
    assert frame["au_gpt"].tolist() == [1.0, 5.0, 40.0]


def test_no_cuts_change_nothing() -> None:
    frame = composites([1.0, 2.0])
    cut, summary = apply_top_cuts(frame, {})
    pd.testing.assert_frame_equal(cut, frame)
    assert summary.empty and "n_cut" in summary


@pytest.mark.parametrize("value", [0.0, -1.0, np.nan])
def test_a_cut_must_be_positive(value: float) -> None:
    with pytest.raises(ValueError, match="positive"):
        apply_top_cuts(composites([1.0]), {("massive", "au_gpt"): value})
