"""Validation figures against SciPy, against gstat's leave one out, and verdicts against their limits."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from sms_resource.geostatistics.codes import CODES
from sms_resource.geostatistics.model import Structure, VariogramModel
from sms_resource.geostatistics.validation import (
    TABLE_COLUMNS,
    ValidationLimits,
    block_variance_check,
    compare_estimators,
    cross_validation_summary,
    mean_covariance,
)
from sms_resource.geostatistics.verdicts import validation_findings, validation_table

from .open_data import open_data


def left_out(count=80, seed=0, slope=1.0):
    generator = np.random.default_rng(seed)
    estimate = generator.uniform(1.0, 5.0, count)
    true = 3.0 + slope * (estimate - 3.0) + generator.normal(0, 0.5, count)
    frame = pd.DataFrame(
        {"index": np.arange(count), "column": "cu_pct", "true": true, "estimate": estimate, "variance": 0.25}
    )
    frame["error"] = frame["estimate"] - frame["true"]
    frame["standardised_error"] = frame["error"] / 0.5
    return frame


def test_summary_agrees_with_scipy_by_domain():
    from scipy.stats import linregress

    frame = left_out()
    frame.loc[5, ["estimate", "error", "standardised_error"]] = np.nan
    domains = np.where(np.arange(80) < 50, "cap", "massive")
    summary = cross_validation_summary(frame, domains).set_index("domain")
    assert summary.index.tolist() == ["all", "cap", "massive"]
    for domain, part in (("all", frame), ("cap", frame[:50]), ("massive", frame[50:])):
        part = part.dropna()
        row = summary.loc[domain]
        line = linregress(part["estimate"], part["true"])
        assert (row["slope"], row["intercept"]) == pytest.approx((line.slope, line.intercept))
        assert row["correlation"] == pytest.approx(line.rvalue)
        assert row["mean_error"] == pytest.approx(part["error"].mean())
        assert row["mse"] == pytest.approx((part["error"] ** 2).mean())
        assert row["variance_standardised_error"] == pytest.approx(part["standardised_error"].var(ddof=0))
    assert summary["count"].tolist() == [79, 49, 30]
    assert summary["missing"].tolist() == [1, 1, 0]


def test_jura_leave_one_out():
    """gstat on jura cobalt, 3 nugget + 9 Sph(1.1), all samples: mean residual (true - estimate) and its square."""
    from sms_resource.geostatistics import leave_one_out

    jura = open_data("jura.pred")
    xyz = np.column_stack([jura["Xloc"], jura["Yloc"], np.zeros(len(jura))])
    model = VariogramModel(3.0, [Structure("spherical", 9.0, (1.1, 1.1, 1.1))])
    frame = leave_one_out(xyz, jura["Co"].to_numpy(), model, leave="sample")
    row = cross_validation_summary(frame, names={0: "Co"}).iloc[0]
    assert row["metal"] == "Co"
    assert -row["mean_error"] == pytest.approx(-0.0461832603, abs=1e-9)
    assert row["mse"] == pytest.approx(4.4045298411, abs=1e-8)


def test_small_groups_give_missing_figures():
    frame = left_out(2)
    row = cross_validation_summary(frame).iloc[0]
    assert np.isnan(row["slope"])
    assert row["count"] == 2
    equal = left_out(10).assign(estimate=2.0)
    assert np.isnan(cross_validation_summary(equal).iloc[0]["slope"])
    with pytest.raises(ValueError, match="standardised_error"):
        cross_validation_summary(frame.drop(columns="standardised_error"))


def test_block_variance_of_a_body_whose_blocks_are_known():
    """Fields on a grid: the variance of true blocks inside the body is C(V,V) - C(D,D) on average (Krige)."""
    from sms_resource.geostatistics import block_variance

    model = VariogramModel(0.2, [Structure("spherical", 0.8, (12.0, 12.0, 12.0))])
    points = np.stack(np.meshgrid(np.arange(24.0), np.arange(24.0), [0.0], indexing="ij"), -1).reshape(-1, 3)
    covariance = model.structured_covariance(points[:, None] - points[None, :])
    factor = np.linalg.cholesky(covariance + 1e-10 * np.eye(len(points)))
    block = (points[:, 0] // 4 * 6 + points[:, 1] // 4).astype(int)
    fields = np.random.default_rng(5).normal(size=(300, len(points))) @ factor.T
    means = np.array([np.bincount(block, weights=field) / 16.0 for field in fields])
    within_field = means.var(axis=1).mean()
    inside = block_variance(model, (4.0, 4.0, 1.0), (4, 4, 1))
    shared = mean_covariance(model, points)
    figures = block_variance_check(
        means[0], np.zeros(36), inside, model.total_sill, deposit_covariance=shared
    )
    assert figures["theoretical_blocks"] == pytest.approx(within_field, rel=0.05)
    assert figures["realised"] == pytest.approx(means[0].var())
    assert figures["ratio"] == pytest.approx(means[0].var() / (inside - shared))
    assert figures["variance_factor"] == pytest.approx(inside)


def test_smoothing_and_missing_theory():
    figures = block_variance_check([1.0, 2.0, np.nan], [0.1, 0.3, np.nan], 1.0, 2.0, weights=[1.0, 1.0, 5.0])
    assert figures["realised"] == pytest.approx(0.25)
    assert figures["theoretical_estimates"] == pytest.approx(0.8)
    assert figures["smoothing"] == pytest.approx(0.75)
    assert np.isnan(block_variance_check([1.0, 2.0], [2.0, 2.0], 1.0, 2.0)["ratio"])


def test_variance_of_kriged_blocks_is_what_the_theory_says():
    """400 fields kriged in one go: the spread of an ordinary kriging estimate is C(V,V) - KV - 2 mu."""
    from sms_resource.geostatistics import block_variance, ordinary_kriging

    from .variogram_twin import simulated

    model = VariogramModel(0.2, [Structure("spherical", 0.8, (30.0, 30.0, 30.0))])
    samples = np.random.default_rng(0).uniform(0.0, 60.0, (25, 3)) * (1.0, 1.0, 0.1)
    values = simulated(model, samples, 400, seed=1).T
    result = ordinary_kriging(
        samples, values, [[30.0, 30.0, 3.0]], model, block_size=(10.0, 10.0, 2.0), discretisation=(4, 4, 1)
    )
    figures = block_variance_check(
        result.estimate[0], result.variance[0], block_variance(model, (10.0, 10.0, 2.0), (4, 4, 1)),
        model.total_sill, lagrange=result.lagrange[0],
    )  # fmt: skip
    assert figures["ratio"] == pytest.approx(1.0, abs=0.15)
    assert figures["realised"] == pytest.approx(result.estimate[0].var())


def estimators():
    generator = np.random.default_rng(3)
    blocks = pd.DataFrame({"cu_pct": generator.uniform(1, 3, 50), "dry_tonnes": generator.uniform(1, 5, 50)})
    blocks["cu_nearest"] = 1.2 * blocks["cu_pct"]
    blocks["cu_power"] = blocks["cu_pct"] + generator.normal(0, 0.05, 50)
    blocks["domain"] = np.where(np.arange(50) < 20, "cap", "massive")
    return blocks


def test_estimators_are_compared_by_domain():
    blocks = estimators()
    table = compare_estimators(
        blocks, ["cu_pct"], {"cu_pct": {"nearest": "cu_nearest", "inverse distance": "cu_power"}},
        weight="dry_tonnes", reference={("all", "cu_pct"): 2.0},
    )  # fmt: skip
    assert len(table) == 3 * 3
    nearest = table[table["estimator"] == "nearest"]
    np.testing.assert_allclose(nearest["difference_pct"], 20.0)
    np.testing.assert_allclose(nearest["correlation"], 1.0)
    whole = table[(table["domain"] == "all") & (table["estimator"] == "kriging")].iloc[0]
    mean = np.average(blocks["cu_pct"], weights=blocks["dry_tonnes"])
    assert whole["mean"] == pytest.approx(mean)
    assert whole["reference_pct"] == pytest.approx(100 * (mean / 2.0 - 1))


def test_verdicts_follow_the_limits_and_carry_figures():
    good, bad = left_out(slope=1.0), left_out(slope=0.4)
    bad["column"] = "au_gpt"
    summary = cross_validation_summary(pd.concat([good, bad], ignore_index=True))
    means = pd.DataFrame(
        {
            "domain": ["massive", "massive", "cap"],
            "metal": ["cu_pct", "zn_pct", "cu_pct"],
            "block_mean": [2.0, 2.0, np.nan],
            "declustered_mean": [2.1, 2.5, 1.0],
            "sample_count": [30, 30, 0],
        }
    )
    swaths = pd.DataFrame(
        {
            "axis": "easting", "column": "cu_pct", "sample_count": [20, 20, 3, 20],
            "difference_pct": [2.0, -40.0, 90.0, np.nan],
        }
    )  # fmt: skip
    variances = {("massive", "cu_pct"): block_variance_check([1.0, 3.0], [0.1, 0.1], 1.2, 2.0)}
    blocks = estimators()
    compared = compare_estimators(blocks, ["cu_pct"], {"cu_pct": {"nearest": "cu_nearest"}}, domain=None)
    table = validation_table(
        cross_validation=summary, means=means, swaths=swaths, block_variance=variances, estimators=compared
    )
    assert tuple(table.columns) == TABLE_COLUMNS
    assert set(table["verdict"]) == {"within", "flag", "not judged"}
    verdict = {(r.check, r.domain, r.metal): r.verdict for r in table.itertuples()}
    assert verdict[("global mean", "massive", "cu_pct")] == "within"
    assert verdict[("global mean", "massive", "zn_pct")] == "flag"
    assert verdict[("global mean", "cap", "cu_pct")] == "not judged"
    assert verdict[("leave one out: slope", "all", "cu_pct")] == "within"
    assert verdict[("leave one out: slope", "all", "au_gpt")] == "flag"
    assert verdict[("swath along easting", "all", "cu_pct")] == "flag"  # 1 of 2 judged slices is off
    assert verdict[("block variance", "massive", "cu_pct")] == "within"
    assert verdict[("other estimator: nearest", "all", "cu_pct")] == "flag"
    assert table["figures"].str.len().min() > 20
    flagged = validation_findings(table)
    assert len(flagged) == (table["verdict"] == "flag").sum()
    assert {item.code for item in flagged} <= set(CODES)
    assert all("limit" in item.message for item in flagged)


def test_limits_are_settings():
    means = pd.DataFrame(
        {"domain": ["m"], "metal": ["cu_pct"], "block_mean": [2.0], "declustered_mean": [2.14]}
    )
    assert validation_table(means=means)["verdict"].tolist() == ["within"]
    strict = ValidationLimits(mean_pct=5.0)
    assert validation_table(means=means, limits=strict)["verdict"].tolist() == ["flag"]
    assert validation_table().empty
