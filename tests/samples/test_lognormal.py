"""Sichel and Land against published tables and against simulation."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from sms_resource.samples.lognormal import (
    land_factor,
    land_limits,
    lognormal_findings,
    lognormal_table,
    sichel,
    sichel_factor,
)

# EPA OSWER 9285.7-081 (1992), chromium in soil
CHROMIUM = [10, 13, 20, 36, 41, 59, 67, 110, 110, 136, 140, 160, 200, 230, 1300]


@pytest.mark.parametrize(
    ("variance", "count", "factor"), [(1.0, 5, 1.590637), (1.0, 10, 1.615007), (0.5, 20, 1.280316)]
)
def test_sichel_factor_of_the_tables(variance: float, count: int, factor: float) -> None:
    assert sichel_factor(variance, count) == pytest.approx(factor, abs=1e-6)


def test_sichel_factor_of_two_samples_is_a_cosh() -> None:
    assert sichel_factor(2.3, 2) == pytest.approx(np.cosh(np.sqrt(2.3)), rel=1e-14)


def test_sichel_has_no_bias_and_less_spread_than_the_mean() -> None:
    rng = np.random.default_rng(0)
    samples = rng.lognormal(0, 1.3, (4000, 10))
    truth = np.exp(1.3**2 / 2)
    estimates = np.array([sichel(row) for row in samples])
    error = estimates.std() / np.sqrt(len(estimates))
    assert estimates.mean() == pytest.approx(truth, abs=4 * error)
    assert estimates.std() < samples.mean(axis=1).std()


@pytest.mark.parametrize(
    ("sd", "count", "factor"),
    [
        (1.25, 15, 3.163),
        (1.0, 10, 3.103),
        (0.1, 3, 2.750),
    ],  # Land (1975) tables of H.95; the last two from memory
)
def test_land_factor_of_the_tables(sd: float, count: int, factor: float) -> None:
    assert land_factor(sd, count, 0.95) == pytest.approx(factor, abs=6e-4)


def test_land_limit_of_the_chromium_data() -> None:
    # the guidance prints 502 mg/kg, from inputs rounded to 4.38, 1.25 and 3.163
    rounded = np.exp(4.38 + 1.25**2 / 2 + 1.25 * land_factor(1.25, 15, 0.95) / np.sqrt(14))
    assert rounded == pytest.approx(502, abs=1.0)
    assert land_limits(CHROMIUM)[1] == pytest.approx(502, rel=0.012)


@pytest.mark.parametrize("count", [5, 12, 400])
def test_land_limits_cover_as_often_as_they_say(count: int) -> None:
    rng = np.random.default_rng(count)
    repeats = 200 if count < 100 else 100
    truth, inside = np.exp(0.8**2 / 2), 0
    for _ in range(repeats):
        low, high = land_limits(rng.lognormal(0, 0.8, count), 0.90)
        inside += low <= truth <= high
    assert inside / repeats == pytest.approx(0.90, abs=0.07)


def test_large_sets_meet_the_normal_approximation() -> None:
    # Cox's interval holds for many samples: mean + s2/2 -+ z sqrt(s2/n + s4/(2(n-1)))
    logs = np.random.default_rng(1).normal(0, 1, 5000)
    logs = (logs - logs.mean()) / logs.std(ddof=1)
    low, high = land_limits(np.exp(logs), 0.90)
    half = 1.6448536 * np.sqrt(1 / 5000 + 1 / (2 * 4999))
    assert (np.log(low), np.log(high)) == pytest.approx((0.5 - half, 0.5 + half), abs=1e-3)


def test_what_is_not_positive_is_left_out_and_told() -> None:
    frame = pd.DataFrame({"domain": "massive", "cu_pct": [*CHROMIUM, 0.0, np.nan]})
    table = lognormal_table(frame, ["cu_pct"])
    row = table.iloc[0]
    assert (row["n"], row["left_out"]) == (16, 1)
    assert row["land_low"] < row["sichel"] < row["land_high"]
    assert [item.code for item in lognormal_findings(table)] == ["lognormal-not-positive"]


def test_too_few_samples_have_no_limits() -> None:
    assert np.isnan(land_limits([1.0, 2.0])).all()
    assert np.isnan(sichel([1.0]))
    with pytest.raises(ValueError, match="confidence"):
        land_limits(CHROMIUM, 90.0)
    with pytest.raises(ValueError, match="count"):
        sichel_factor(1.0, 1)
