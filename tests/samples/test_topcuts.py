"""Top cuts: curves by hand, proposals that follow their rule, cuts that are counted."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from sms_resource.samples.topcut_tables import cut_curves, cut_summary
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


def test_curve_equals_cutting_one_value_after_another() -> None:
    rng = np.random.default_rng(12)
    value, weight = rng.lognormal(5.0, 1.5, 500), rng.uniform(0.1, 2.0, 500)
    curve = cut_curve(value, weight)
    for row in curve.iloc[::17].itertuples():
        lowered = np.minimum(value, row.cut)
        mean = np.average(lowered, weights=weight)
        spread = np.sqrt(np.average((lowered - mean) ** 2, weights=weight))
        assert row.mean == pytest.approx(mean, rel=1e-12)
        assert row.cv == pytest.approx(spread / mean, rel=1e-9)
        assert row.metal_removed_pct == pytest.approx(
            100 * (1 - mean / np.average(value, weights=weight)), abs=1e-9
        )
        assert row.n_cut == (value > row.cut).sum()
    assert curve["metal_removed_pct"].iloc[-1] == 0.0 and curve["n_cut"].iloc[-1] == 0
    assert (np.diff(curve["mean"]) > 0).all()


def test_curves_of_every_domain_and_metal_end_uncut() -> None:
    rng = np.random.default_rng(3)
    frame = composites(rng.lognormal(1, 1, 900), cu_pct=rng.lognormal(0, 0.4, 900), weight=1.0)
    frame["domain"] = np.where(frame.index % 2 == 0, "cap", "massive")
    frame.loc[:9, "au_gpt"] = np.nan
    curves = cut_curves(frame, ["au_gpt", "cu_pct", "zn_pct"])
    assert set(zip(curves["domain"], curves["metal"])) == {
        (domain, metal) for domain in ("cap", "massive") for metal in ("au_gpt", "cu_pct")
    }
    for (domain, metal), part in curves.groupby(["domain", "metal"]):
        whole = frame.loc[(frame["domain"] == domain), metal].dropna()
        assert len(part) <= 60 and part["n_cut"].iloc[-1] == 0
        assert part["cut"].iloc[-1] == whole.max() and part["mean"].iloc[-1] == pytest.approx(whole.mean())
        assert part["cut"].iloc[0] >= np.quantile(whole, 0.8)


def test_the_summary_puts_what_is_used_beside_what_is_proposed() -> None:
    body = np.random.default_rng(1).lognormal(1, 0.6, 300)
    frame = composites([*body, 150.0, 180.0, 260.0], weight=2.0)
    study = top_cut_study(frame, ["au_gpt"], weight_column="weight")
    none = pd.DataFrame({"domain": [], "metal": [], "cut": []})
    row = cut_summary(frame, study, none).iloc[0]
    assert np.isnan(row["cut"]) and row["proposed"] == body.max() and row["effect_of"] == "proposed, not used"
    assert row["n_cut"] == 3 and row["holes_cut"] == "H0 (1), H1 (1), H2 (1)"
    everywhere = pd.DataFrame({"domain": ["all"], "metal": ["au_gpt"], "cut": [170.0]})
    row = cut_summary(frame, study, everywhere).iloc[0]
    assert row["cut"] == 170.0 and row["effect_of"] == "cut in use" and row["n_cut"] == 2
    assert row["mean_before"] == pytest.approx(frame["au_gpt"].mean())
    assert row["mean_after"] == pytest.approx(frame["au_gpt"].clip(upper=170.0).mean())
    assert row["cv_after"] == pytest.approx(frame["au_gpt"].clip(upper=170.0).std(ddof=0) / row["mean_after"])
    own = pd.DataFrame({"domain": ["all", "massive"], "metal": "au_gpt", "cut": [170.0, 200.0]})
    assert cut_summary(frame, study, own)["n_cut"].iloc[0] == 1
    tame = composites(np.full(30, 2.0), weight=1.0)
    row = cut_summary(tame, top_cut_study(tame, ["au_gpt"]), none).iloc[0]
    assert row["effect_of"] == "none" and row["n_cut"] == 0 and row["mean_after"] == row["mean_before"] == 2.0


def test_means_of_applied_cuts_take_the_weights_of_the_composites() -> None:
    frame = composites([1.0, 5.0], weight=[3.0, 1.0])
    _, summary = apply_top_cuts(frame, {("massive", "au_gpt"): 3.0})
    assert summary["mean_before"].iloc[0] == pytest.approx((3 * 1 + 5) / 4)
    assert summary["mean_after"].iloc[0] == pytest.approx((3 * 1 + 3) / 4)
