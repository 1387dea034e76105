"""Twin holes and metals that go together."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from sms_resource.samples.associations import (
    correlation_matrix,
    deleterious_summary,
    log_ratio,
    metal_associations,
    tracer_ratios,
)
from sms_resource.samples.twins import twin_report
from tests.samples.holes import codes, collars, intervals


def test_twins_clusters_and_comparison() -> None:
    frame = collars("A", "AT", "ATT", "B", "C", spacing=50.0)
    frame.loc[1, "easting"] = frame.loc[0, "easting"] + 2.0
    frame.loc[2, "easting"] = frame.loc[0, "easting"] + 4.5
    core = intervals([("A", 0, 2, 4.0), ("AT", 0, 1, 2.0), ("AT", 1, 3, 1.0), ("B", 0, 5, 9.0)], "cu_pct")
    report = twin_report(frame, core)
    assert report.pairs[["hole_a", "hole_b"]].values.tolist() == [["A", "AT"], ["AT", "ATT"]]
    assert report.pairs["distance_m"].tolist() == pytest.approx([2.0, 2.5])
    assert report.clusters["holes"].tolist() == [3, 1, 1]  # a chain of twins is one site
    row = report.comparison.iloc[0]
    assert (row["shared_m"], row["mean_a"], row["mean_b"]) == (2.0, 4.0, 1.5)
    assert row["relative_pct"] == pytest.approx(100 * 2.5 / 2.75)
    assert codes(report.findings) == ["twin-holes", "twin-differ"]
    assert "5 holes at 3 sites" in report.findings[0].message


def test_holes_apart_are_no_twins() -> None:
    report = twin_report(collars("A", "B"), intervals([("A", 0, 1, 1.0)], "cu_pct"))
    assert report.pairs.empty and report.comparison.empty and len(report.findings) == 0
    assert twin_report(collars(), intervals([], "cu_pct")).clusters.empty
    with pytest.raises(ValueError, match="distance_m"):
        twin_report(collars("A"), intervals([], "cu_pct"), -1.0)


def metals(seed: int = 0, count: int = 200) -> pd.DataFrame:
    """Copper and molybdenum in a fixed proportion, zinc of its own, all diluted alike."""
    rng = np.random.default_rng(seed)
    depth = rng.uniform(0, 30, count)
    cu = rng.lognormal(1, 0.5, count)
    return pd.DataFrame(
        {
            "domain": np.where(depth < 10, "cap", "massive"),
            "mid_depth_m": depth,
            "length_m": 1.0,
            "cu_pct": cu,
            "mo_ppm": 20.0 * cu,
            "zn_pct": rng.lognormal(1, 0.8, count) * np.exp(-depth / 10),
            "as_ppm": rng.lognormal(5, 1, count),
        }
    )


def test_a_fixed_proportion_has_no_log_ratio_variance() -> None:
    table = metal_associations(metals(), ["cu_pct", "mo_ppm", "zn_pct", "au_gpt"]).set_index(
        ["metal_a", "metal_b"]
    )
    row = table.loc[("cu_pct", "mo_ppm")]
    assert row["spearman"] == pytest.approx(1.0)
    assert row["log_ratio_variance"] == pytest.approx(0.0, abs=1e-12)
    assert row["ratio_geometric"] == pytest.approx(1e4 / 20.0)  # percent over ppm, by mass
    assert table.loc[("cu_pct", "zn_pct"), "log_ratio_variance"] > 0.5
    assert len(table) == 3  # what was not assayed is left out
    by = metal_associations(metals(), ["cu_pct", "mo_ppm"], by_domain=True)
    assert by["domain"].tolist() == ["all", "cap", "massive"]


def test_log_ratios_do_not_feel_dilution() -> None:
    frame = metals()
    diluted = frame.assign(cu_pct=frame["cu_pct"] * 0.3, mo_ppm=frame["mo_ppm"] * 0.3)
    a, b = (
        log_ratio(f["cu_pct"].to_numpy(), f["mo_ppm"].to_numpy(), "cu_pct", "mo_ppm")
        for f in (frame, diluted)
    )
    assert a == pytest.approx(b)


def test_rank_correlations_equal_scipy() -> None:
    from scipy.stats import spearmanr

    frame = metals()
    expected = spearmanr(frame["cu_pct"], frame["zn_pct"]).statistic
    assert correlation_matrix(frame, ["cu_pct", "zn_pct"]).iloc[0, 1] == pytest.approx(expected)
    assert metal_associations(frame, ["cu_pct", "zn_pct"])["spearman"].iloc[0] == pytest.approx(expected)


def test_tracers_with_depth_and_a_threshold_of_the_study() -> None:
    table = tracer_ratios(metals(), thresholds={"cu/zn": 1.0}, band_m=5.0)
    whole = table.loc[table["whole"]].set_index("ratio")
    assert whole.loc["cu/zn", "spearman"] > 0.4  # zinc was planted to fall with depth
    assert np.isnan(whole.loc["cu/mo", "threshold"])
    assert 0 < whole.loc["cu/zn", "share_above_pct"] < 100
    bands = table.loc[(table["ratio"] == "cu/zn") & ~table["whole"]]
    assert bands["n"].sum() == 200 and bands["geometric_mean"].iloc[-1] > bands["geometric_mean"].iloc[0]
    with pytest.raises(ValueError, match="band_m"):
        tracer_ratios(metals(), band_m=0.0)


def test_deleterious_elements_are_summarised_even_where_not_estimated() -> None:
    table, findings = deleterious_summary(metals())
    assert set(table["element"]) == {"as_ppm"} and set(table["domain"]) == {"all", "cap", "massive"}
    assert table["share_assayed_pct"].tolist() == [100.0] * 3
    assert codes(findings) == ["deleterious-not-assayed"] * 5


def test_empty_composites_make_empty_tables() -> None:
    none = metals().iloc[:0]
    assert metal_associations(none, ["cu_pct"]).empty and tracer_ratios(none).empty
    assert deleterious_summary(none)[0].empty
