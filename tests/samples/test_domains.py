"""Domains from logged codes, and whether their contacts are hard."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from sms_resource.samples.contacts import contact_analysis, contact_distances, contact_findings
from sms_resource.samples.domains import domain_at, domain_intervals, unmapped_codes
from tests.samples.holes import codes, intervals

MAPPING = {"MPY": "massive", "MCU": "massive", "CHR": "cap"}


def test_neighbours_of_one_domain_are_merged() -> None:
    log = intervals(
        [
            ("A", 2, 3, "MCU"),
            ("A", 0, 1, "chr "),
            ("A", 1, 2, "MPY"),
            ("A", 3.5, 4, "MPY"),
            ("A", 4, 5, "BAS"),
            ("B", 0, 1, "MPY"),
        ],
        "code",
    )
    found = domain_intervals(log, MAPPING)
    assert found.values.tolist() == [
        ["A", 0, 1, "cap"],
        ["A", 1, 3, "massive"],
        ["A", 3.5, 4, "massive"],
        ["A", 4, 5, "waste"],
        ["B", 0, 1, "massive"],
    ]


def test_codes_out_of_step_with_the_mapping_are_told() -> None:
    log = intervals([("A", 0, 1, "MPY"), ("A", 1, 3, "BAS"), ("A", 3, 4, "CHR")], "code")
    findings = unmapped_codes(log, MAPPING)
    assert codes(findings) == ["lithology-unmapped", "mapping-unused"]
    assert "2.0 m" in findings[0].message and "'MCU'" in findings[1].message


def test_an_empty_log_has_no_domains() -> None:
    found = domain_intervals(intervals([], "code"), MAPPING)
    assert list(found.columns) == ["hole_id", "from_m", "to_m", "domain"] and found.empty


def test_the_domain_with_most_length_wins() -> None:
    log = intervals([("A", 0, 2, "cap"), ("A", 2, 9, "massive")], "domain")
    found = domain_at(intervals([("A", 1, 2.5), ("A", 1.8, 4), ("A", 20, 21), ("Z", 0, 1)]), log)
    assert found.tolist() == ["cap", "massive", "unlogged", "unlogged"]


def holes(jump: float, seed: int = 0, count: int = 20) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Ten metres of cap over ten of massive; the grade jumps by ``jump`` or slides with depth."""
    rng = np.random.default_rng(seed)
    rows, log = [], []
    for number in range(count):
        hole = f"H{number}"
        contact = float(rng.integers(6, 12))
        log += [(hole, 0.0, contact, "cap"), (hole, contact, 20.0, "massive")]
        for depth in range(20):
            below = depth >= contact
            grade = 5.0 + jump * below + rng.normal(0, 1)
            rows.append((hole, float(depth), depth + 1.0, "massive" if below else "cap", grade))
    return intervals(rows, "domain", "cu_pct"), intervals(log, "domain")


def test_distances_have_the_sign_of_the_side() -> None:
    samples, log = holes(0.0, count=1)
    contact = log["to_m"].iloc[0]
    found = contact_distances(samples, log, "cap", "massive")
    assert found == pytest.approx(samples["from_m"].to_numpy() + 0.5 - contact)
    assert np.isnan(contact_distances(samples, log, "massive", "stockwork")).all()


def test_a_jump_is_hard_and_a_slide_is_soft() -> None:
    samples, log = holes(4.0)
    profile, verdicts = contact_analysis(samples, log, ["cu_pct"])
    row = verdicts.iloc[0]
    assert (row["contact"], row["verdict"]) == ("cap | massive", "hard")
    assert row["mean_second"] - row["mean_first"] == pytest.approx(4.0, abs=0.8)
    near = profile.set_index("distance_m")["mean"]
    assert near[0.5] - near[-0.5] == pytest.approx(4.0, abs=1.0)
    samples, log = holes(0.0)
    assert contact_analysis(samples, log, ["cu_pct"])[1]["verdict"].tolist() == ["soft"]


def test_soft_contacts_are_called_hard_one_time_in_twenty() -> None:
    called = sum(
        contact_analysis(*holes(0.0, seed), ["cu_pct"])[1]["verdict"].iloc[0] == "hard" for seed in range(100)
    )
    assert called <= 13  # 5 % of 100, binomial 99.9 %


def test_few_samples_decide_nothing() -> None:
    samples, log = holes(9.0, count=2)
    verdicts = contact_analysis(samples, log, ["cu_pct"])[1]
    assert codes(contact_findings(verdicts)) == ["contact-undecided"]
    row = verdicts.iloc[0]
    assert row["verdict"] == "undecided" and "too few" in row["reason"]
    with pytest.raises(ValueError, match="reach_m"):
        contact_analysis(samples, log, ["cu_pct"], reach_m=0.0)
