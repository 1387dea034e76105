"""Recovery joined by depth, bias with grade, and sticks with their gaps."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sms_resource.samples.core_length import recovered_on_pieces
from sms_resource.samples.recovery import (
    join_recovery,
    recovery_bias,
    recovery_bias_findings,
    recovery_summary,
    sticks,
)
from tests.samples.holes import codes, intervals, paths, runs


def test_samples_take_the_recovery_of_their_runs() -> None:
    cores = runs([("A", 0, 2, 50.0), ("A", 2, 3, 100.0), ("B", 0, 1, 10.0)])
    found = join_recovery(intervals([("A", 0, 1), ("A", 1.5, 2.5), ("A", 2.5, 4), ("C", 0, 1)]), cores)
    assert found["recovery_pct"].tolist()[:3] == pytest.approx([50.0, 75.0, 100.0])
    assert found["recovered_length_m"].tolist()[:3] == pytest.approx([0.5, 0.75, 0.5])
    assert found.iloc[3][["recovery_pct", "recovered_length_m"]].isna().all()


def test_percent_stands_in_for_a_missing_length() -> None:
    cores = runs([("A", 0, 2, 50.0)]).assign(recovered_length_m=np.nan)
    assert join_recovery(intervals([("A", 0, 2)]), cores)["recovered_length_m"].iloc[0] == pytest.approx(1.0)
    nothing = cores.assign(recovery_pct=np.nan)
    assert join_recovery(intervals([("A", 0, 2)]), nothing)["recovery_pct"].isna().all()


@settings(max_examples=100, deadline=None)
@given(
    st.lists(st.tuples(st.floats(0.01, 3), st.booleans(), st.integers(0, 3)), min_size=1, max_size=20),
    st.lists(st.floats(0, 1.1), min_size=4, max_size=4),
)
def test_core_of_a_run_is_shared_without_loss(
    pieces: list[tuple[float, bool, int]], shares: list[float]
) -> None:
    length = np.array([item[0] for item in pieces])
    sampled = np.array([item[1] for item in pieces])
    run = np.array([item[2] for item in pieces])
    total = np.bincount(run, length, 4)
    core = total * np.array(shares)
    found = recovered_on_pieces(length, run, sampled, core, total)
    assert np.bincount(run, found, 4) == pytest.approx(core, abs=1e-12)
    assert np.all(found >= 0)
    # core lies in sampled pieces before it lies in others
    for number in range(4):
        inside = run == number
        if (
            core[number] < total[number] - 1e-9
            and (inside & ~sampled).any()
            and found[inside & ~sampled].sum() > 1e-9
        ):
            assert found[inside & sampled].sum() == pytest.approx(length[inside & sampled].sum())


def biased(sign: float, seed: int = 0, count: int = 80) -> pd.DataFrame:
    rng = np.random.default_rng(seed)
    recovery = rng.uniform(5, 100, count)
    grade = np.exp(sign * recovery / 60 + rng.normal(0, 0.5, count))
    return pd.DataFrame({"domain": "massive", "recovery_pct": recovery, "zn_pct": grade})


@pytest.mark.parametrize(
    ("sign", "word", "flag"), [(1, "poorer", True), (-1, "richer", True), (0, "no link", False)]
)
def test_the_sign_of_the_bias_is_found(sign: float, word: str, flag: bool) -> None:
    row = recovery_bias(biased(sign), ["zn_pct"]).iloc[0]
    assert word in row["verdict"]
    assert row["biased"] == flag
    found = recovery_bias_findings(recovery_bias(biased(sign), ["zn_pct"]))
    assert codes(found) == ["recovery-bias"] * int(flag)
    assert np.sign(row["spearman"]) == sign or sign == 0
    assert (row["mean_high"] > row["mean_low"]) == (row["spearman"] > 0)


def test_no_bias_is_called_one_time_in_twenty() -> None:
    called = sum(recovery_bias(biased(0, seed), ["zn_pct"])["biased"].iloc[0] for seed in range(200))
    assert 3 <= called <= 20  # 5 % of 200, binomial 99.9 %


def test_spearman_is_that_of_scipy() -> None:
    from scipy.stats import spearmanr

    frame = biased(0.2)
    row = recovery_bias(frame, ["zn_pct"]).iloc[0]
    expected = spearmanr(frame["recovery_pct"], frame["zn_pct"])
    assert (row["spearman"], row["p_value"]) == pytest.approx((expected.statistic, expected.pvalue))


def test_one_small_p_among_twenty_tests_is_no_link() -> None:
    """The table of a user test: 20 tests, the least p 0.029 at a correlation of -0.09. Holm: 20 x 0.029 = 0.58."""
    rng = np.random.default_rng(3)
    count, metals = 590, [f"m{number}_pct" for number in range(20)]
    recovery = rng.uniform(5, 100, count)
    frame = pd.DataFrame({"domain": "massive", "recovery_pct": recovery})
    for metal in metals:
        noise = rng.normal(0, 1, count)
        noise -= np.polyval(np.polyfit(recovery, noise, 1), recovery)
        frame[metal] = noise - (0.0037 * recovery if metal == "m0_pct" else 0.0)
    table = recovery_bias(frame, metals)
    first = table[table["metal"] == "m0_pct"].iloc[0]
    assert 0.01 < first["p_value"] < 0.05 and -0.12 < first["spearman"] < -0.07
    assert first["p_adjusted"] == pytest.approx(min(1.0, 20 * first["p_value"]))
    assert not first["biased"] and "richer" not in first["verdict"]
    assert codes(recovery_bias_findings(table)) == []
    # the same column alone is a link, and a weak one
    alone = recovery_bias(frame, ["m0_pct"]).iloc[0]
    assert alone["biased"] and alone["p_adjusted"] == alone["p_value"]
    assert "weakly" in alone["verdict"] and "probably" not in alone["verdict"]


def test_adjusted_p_values_are_those_of_statsmodels() -> None:
    multipletests = pytest.importorskip("statsmodels.stats.multitest").multipletests
    frame = pd.concat(
        [biased(sign, seed).assign(domain=f"d{seed}") for seed, sign in enumerate((0, 0.1, 0.3, 0.05))]
    )
    table = recovery_bias(frame.assign(cu_pct=frame["zn_pct"].to_numpy()[::-1]), ["zn_pct", "cu_pct"])
    assert table["p_adjusted"].to_numpy() == pytest.approx(multipletests(table["p_value"], method="holm")[1])
    assert table["biased"].tolist() == (table["p_adjusted"] < 0.05).tolist()
    assert table["not_excluded"].tolist() == (table["p_value"] < 0.05).tolist()


def test_few_samples_are_not_judged_and_count_as_possibly_biased() -> None:
    row = recovery_bias(biased(1, count=5), ["zn_pct"]).iloc[0]
    assert row["biased"] and "cannot be judged" in row["verdict"]


def test_summary_by_domain_with_bands_and_findings() -> None:
    cores = runs(
        [
            ("A", 0, 1, 95.0),
            ("A", 1, 2, 85.0),
            ("A", 2, 3, 60.0),
            ("A", 3, 4, 0.0),
            ("A", 4, 5, 105.0),
            ("A", 5, 6, 130.0),
        ]
    )
    logs = intervals([("A", 0, 2, "cap"), ("A", 2, 6, "massive")], "domain")
    table, findings = recovery_summary(cores, logs)
    whole = table.set_index("domain").loc["all"]
    assert whole["recovery_pct"] == pytest.approx(475 / 6)
    assert whole["lost_runs"] == 1
    assert whole[["good_pct", "caution_pct", "flagged_pct", "missing_pct"]].sum() == pytest.approx(100.0)
    assert table.set_index("domain").loc["cap", "recovery_pct"] == pytest.approx(90.0)
    assert [(f.severity, f.row) for f in findings if f.code == "recovery-over-100"] == [
        ("error", 7),
        ("warning", None),
    ]
    assert "recovery-low" in codes(findings)


def test_sticks_leave_lost_core_blank_and_keep_length() -> None:
    assays = intervals([("A", 0, 1, 4.0), ("A", 1, 2, 8.0)], "cu_pct")
    cores = runs([("A", 0, 2, 50.0), ("A", 2, 3, 0.0)])
    logs = intervals([("A", 0, 1.5, "cap"), ("A", 1.5, 4, "massive")], "domain")
    found = sticks(assays, cores, logs, paths("A"), ["cu_pct"])
    assert list(found.columns) == [
        "hole_id",
        "from_m",
        "to_m",
        "recovery_pct",
        "domain",
        "cu_pct",
        "x_from",
        "y_from",
        "z_from",
        "x_to",
        "y_to",
        "z_to",
    ]
    assert (found["to_m"] - found["from_m"]).sum() == pytest.approx(4.0)
    assert found["from_m"].to_numpy()[1:] == pytest.approx(found["to_m"].to_numpy()[:-1])
    lost = found["recovery_pct"] == 0
    assert (found["to_m"] - found["from_m"])[lost].sum() == pytest.approx(2.0)
    assert found.loc[lost, "cu_pct"].isna().all()
    assert found.loc[~lost & found["cu_pct"].notna(), "cu_pct"].tolist() == [4.0, 8.0, 8.0]
    assert found["z_to"].iloc[-1] == pytest.approx(-1604.0)
    assert np.isnan(found["recovery_pct"].iloc[-1])  # logged, but drilled in no run


def test_sticks_of_a_whole_run_have_no_gap() -> None:
    found = sticks(
        intervals([("A", 0, 1, 4.0)], "cu_pct"),
        runs([("A", 0, 1, 104.0)]),
        intervals([], "domain"),
        paths("A"),
        ["cu_pct"],
    )
    assert len(found) == 1 and found["recovery_pct"].iloc[0] == pytest.approx(104.0)
