"""Composites by hand: weights, rests, lost core, and what is said about them."""

from __future__ import annotations

import time

import numpy as np
import pandas as pd
import pytest

from sms_resource.samples.bracket import bracket_table, composites_by_treatment, lost_core_bracket
from sms_resource.samples.composites import Composites, composite
from sms_resource.samples.intervals import overlap_means
from tests.samples.holes import codes, intervals, paths, runs

CU = ["cu_pct"]


def make(
    assays: list[tuple], cores: list[tuple], logs: list[tuple] = (), holes: tuple = ("A",), **options: object
) -> Composites:
    return composite(
        intervals(assays, "cu_pct"), runs(list(cores)) if cores else None,
        intervals(list(logs), "domain") if logs else None, paths(*holes), metals=CU, **options,  # type: ignore[arg-type]
    )  # fmt: skip


def test_a_composite_weighs_recovered_length() -> None:
    made = make([("A", 0, 0.5, 10.0), ("A", 0.5, 1.0, 2.0)], [("A", 0, 0.5, 20.0), ("A", 0.5, 1.0, 80.0)])
    row = made.frame.iloc[0]
    assert row["cu_pct"] == pytest.approx((0.1 * 10 + 0.4 * 2) / 0.5)
    assert row["recovered_length_m"] == pytest.approx(0.5)
    assert row["recovery_pct"] == pytest.approx(50.0)
    assert row["weight"] == pytest.approx(0.5)
    assert (row["easting"], row["northing"], row["elevation"]) == pytest.approx((1000, 500, -1600.5))


def test_weighting_by_length_and_by_density() -> None:
    samples = [("A", 0, 0.5, 10.0), ("A", 0.5, 1.0, 2.0)]
    cores = [("A", 0, 0.5, 20.0), ("A", 0.5, 1.0, 80.0)]
    assert make(samples, cores, weighting="length").frame["cu_pct"].iloc[0] == pytest.approx(6.0)
    density = intervals([("A", 0, 0.5, 4.0), ("A", 0.5, 1.0, 2.0)], "dry_density_tpm3")
    made = make(samples, cores, weighting="recovered_length_density", densities=density)
    assert made.frame["cu_pct"].iloc[0] == pytest.approx((0.1 * 4 * 10 + 0.4 * 2 * 2) / (0.4 + 0.8))
    # a piece without its own density takes the mean of its domain, so one density changes nothing
    one = make(samples, cores, weighting="recovered_length_density", densities=density.iloc[:1])
    assert one.frame["cu_pct"].iloc[0] == pytest.approx(make(samples, cores).frame["cu_pct"].iloc[0])


@pytest.mark.parametrize(
    ("rest", "expected"),
    [
        ("merge", [(0, 1), (1, 2.3)]),
        ("keep", [(0, 1), (1, 2), (2, 2.3)]),
        ("drop", [(0, 1), (1, 2)]),
        ("spread", [(0, 1.15), (1.15, 2.3)]),
    ],
)
def test_rules_for_the_short_rest(rest: str, expected: list[tuple[float, float]]) -> None:
    made = make([("A", 0, 2.3, 1.0)], [("A", 0, 2.3, 100.0)], short_rest=rest)
    found = list(zip(made.frame["from_m"], made.frame["to_m"]))
    assert found == [pytest.approx(pair) for pair in expected]
    assert ("composite-dropped" in codes(made.findings)) == (rest == "drop")


def test_a_rest_that_is_long_enough_stands_alone() -> None:
    made = make([("A", 0, 2.5, 1.0)], [("A", 0, 2.5, 100.0)])
    assert made.frame["length_m"].tolist() == pytest.approx([1, 1, 0.5])


def test_domains_part_composites_and_unlogged_depth_is_named() -> None:
    made = make([("A", 0, 3, 1.0)], [("A", 0, 3, 100.0)], [("A", 0, 1.4, "cap"), ("A", 1.4, 2.6, "massive")])
    assert list(zip(made.frame["domain"], made.frame["from_m"], made.frame["to_m"])) == [
        ("cap", 0, 1.4), ("massive", 1.4, 2.6), ("unlogged", 2.6, 3.0),
    ]  # fmt: skip
    assert made.frame["composite_id"].tolist() == ["A-001", "A-002", "A-003"]


def test_a_run_without_core_and_assay_stays_in_the_account() -> None:
    made = make([("A", 0, 1, 5.0)], [("A", 0, 1, 80.0), ("A", 1, 2, 0.0)])
    assert made.frame["length_m"].sum() == 2.0
    lost = made.frame.iloc[1]
    assert np.isnan(lost["cu_pct"])
    assert (lost["recovery_pct"], lost["recovered_length_m"], lost["assayed_length_m"]) == (0.0, 0.0, 0.0)
    assert len(made.samples) == 1
    audit = made.audit.set_index("quantity")
    assert audit.loc["length_without_assay_m", "in_composites"] == 1.0


def test_four_treatments_by_hand() -> None:
    """One run of 2 m with half its core: 1 m assayed at 6; then 2 m lost; a poor run of 3 % at 20 % beside it."""
    samples = [("A", 0, 1, 6.0), ("A", 4, 5, 3.0)]
    cores = [("A", 0, 2, 50.0), ("A", 2, 4, 0.0), ("A", 4, 5, 20.0)]
    options = {"length_m": 5.0, "shortest_m": 0.0}
    # core 1 m of 6 %, 0.2 m of 3 %; 1 m and 2 m and 0.8 m are lost
    assert make(samples, cores, **options).frame["cu_pct"].iloc[0] == pytest.approx((1 * 6 + 0.2 * 3) / 1.2)
    upper = make(samples, cores, lost_core="represented", **options).frame["cu_pct"].iloc[0]
    assert upper == pytest.approx(
        (2 * 6 + 1 * 3) / 3
    )  # the run of 2 m stands whole; what was never sampled does not
    floor = (
        make(samples, cores, lost_core="background", background={"cu_pct": 0.5}, **options)
        .frame["cu_pct"]
        .iloc[0]
    )
    assert floor == pytest.approx((1 * 6 + 0.2 * 3 + 3.8 * 0.5) / 5)
    # poorly recovered (<= 25 %) and assayed is the last metre alone
    near = (
        make(samples, cores, lost_core="neighbour_mean", neighbour_recovery_pct=25.0, **options)
        .frame["cu_pct"]
        .iloc[0]
    )
    assert near == pytest.approx((1 * 6 + 0.2 * 3 + 3.8 * 3) / 5)


def test_background_by_domain() -> None:
    made = make(
        [("A", 0, 1, 6.0), ("A", 1, 2, 6.0)], [("A", 0, 1, 50.0), ("A", 1, 2, 50.0)],
        [("A", 0, 1, "cap"), ("A", 1, 2, "massive")], lost_core="background",
        background={"cap": {"cu_pct": 2.0}, "cu_pct": 1.0},
    )  # fmt: skip
    assert made.frame["cu_pct"].tolist() == pytest.approx([4.0, 3.5])
    assert "background-zero" not in codes(made.findings)


def test_no_background_means_zero_and_says_so() -> None:
    made = make([("A", 0, 1, 6.0)], [("A", 0, 1, 50.0)], lost_core="background")
    assert made.frame["cu_pct"].iloc[0] == pytest.approx(3.0)
    assert "background-zero" in codes(made.findings)


def test_neighbours_are_the_nearest_of_their_domain_within_reach() -> None:
    samples = [("A", 0, 1, 4.0), ("B", 0, 1, 8.0), ("C", 0, 1, 1.0)]
    cores = [("A", 0, 1, 100.0), ("B", 0, 1, 10.0), ("C", 0, 1, 10.0), ("A", 1, 2, 0.0)]
    # holes stand 10 m apart: within 12 m of the lost metre of A only B is poorly recovered
    made = make(samples, cores, holes=("A", "B", "C"), lost_core="neighbour_mean", neighbour_distance_m=12.0)
    lost = made.frame.loc[(made.frame["hole_id"] == "A") & (made.frame["from_m"] == 1)]
    assert lost["cu_pct"].iloc[0] == pytest.approx(8.0)
    far = make(samples, cores, holes=("A", "B", "C"), lost_core="neighbour_mean", neighbour_distance_m=0.5)
    lost = far.frame.loc[(far.frame["hole_id"] == "A") & (far.frame["from_m"] == 1)]
    assert lost["cu_pct"].iloc[0] == pytest.approx(4.5)  # none near: mean of all poor ones of the domain


def test_least_recovery_takes_assays_out() -> None:
    made = make(
        [("A", 0, 1, 6.0), ("A", 1, 2, 2.0)], [("A", 0, 1, 20.0), ("A", 1, 2, 90.0)], least_recovery_pct=50.0
    )
    assert np.isnan(made.frame["cu_pct"].iloc[0])
    assert made.frame["cu_pct"].iloc[1] == pytest.approx(2.0)
    assert made.audit["difference"].dropna().abs().max() < 1e-12


def test_over_recovery_weighs_no_more_than_its_length() -> None:
    made = make([("A", 0, 0.5, 6.0), ("A", 0.5, 1.0, 2.0)], [("A", 0, 0.5, 110.0), ("A", 0.5, 1, 100.0)])
    assert made.frame["cu_pct"].iloc[0] == pytest.approx(4.0)
    assert made.frame["recovered_length_m"].iloc[0] == pytest.approx(1.05)


def test_no_runs_at_all_is_said() -> None:
    made = make([("A", 0, 1, 6.0)], [])
    assert codes(made.findings) == ["recovery-unknown"]
    assert np.isnan(made.frame["recovery_pct"].iloc[0])
    assert made.frame["cu_pct"].iloc[0] == 6.0


@pytest.mark.parametrize(
    ("samples", "cores", "code", "row"),
    [
        ([("A", 0, 1, 1.0), ("A", 0.5, 1.5, 1.0)], [("A", 0, 2, 90.0)], "interval-overlap", 3),
        ([("A", 0, 1, 1.0), ("A", 3, 2, 1.0)], [("A", 0, 2, 90.0)], "interval-invalid", 3),
        ([("A", 0, 1, 1.0)], [("A", 0, 1, 90.0), ("A", 0.9, 2, 50.0)], "interval-overlap", 3),
        ([("Z", 0, 1, 1.0)], [("Z", 0, 1, 90.0)], "assay-without-hole", None),
        ([("A", 0, 1, np.nan)], [("A", 0, 1, 90.0)], "composite-none", None),
        ([("A", 0, 1, 5.0)], [("A", 0, 1, 0.0)], "assay-in-lost-core", 2),
    ],
)
def test_wrong_input_is_a_finding_at_its_row(samples: list, cores: list, code: str, row: int | None) -> None:
    findings = make(samples, cores).findings
    assert (code, row) in [(item.code, item.row) for item in findings]
    assert all(item.message and item.remedy for item in findings if item.severity != "note")


@pytest.mark.parametrize(
    ("options", "text"),
    [
        ({"length_m": 0.0}, "length_m"), ({"shortest_m": 2.0}, "shortest_m"), ({"short_rest": "split"}, "short_rest"),
        ({"weighting": "mass"}, "weighting"), ({"lost_core": "guess"}, "lost_core"),
        ({"least_recovery_pct": 150.0}, "least_recovery_pct"), ({"neighbour_distance_m": 0.0}, "neighbour_distance_m"),
        ({"neighbour_recovery_pct": -1.0}, "neighbour_recovery_pct"),
    ],
)  # fmt: skip
def test_wrong_options_name_themselves(options: dict, text: str) -> None:
    with pytest.raises(ValueError, match=text):
        make([("A", 0, 1, 6.0)], [("A", 0, 1, 50.0)], **options)


def test_empty_tables_make_no_composites() -> None:
    made = make([], [])
    assert len(made.frame) == 0
    assert "composite-none" in codes(made.findings)


def test_the_bracket_lists_all_treatments() -> None:
    samples = intervals([("A", 0, 1, 6.0), ("A", 1, 2, 2.0), ("A", 2, 3, 9.0)], "cu_pct")
    cores = runs([("A", 0, 1, 50.0), ("A", 1, 2, 90.0), ("A", 2, 3, 10.0)])
    logs = intervals([("A", 0, 2, "massive"), ("A", 2, 3, "waste")], "domain")
    table = lost_core_bracket(
        samples, cores, logs, paths("A"), metals=CU, options={"lost_core": "unknown"}, domains=["massive"]
    )
    assert table["treatment"].drop_duplicates().tolist() == [
        "unknown",
        "represented",
        "background",
        "neighbour_mean",
    ]
    whole = table.loc[table["domain"] == "all"].set_index("treatment")["cu_pct"]
    assert whole["unknown"] == pytest.approx(4.0)  # each metre is one composite, so each weighs one
    assert whole["background"] == pytest.approx((3.0 + 1.8) / 2)
    assert set(table["domain"]) == {"massive", "all"}
    made = composites_by_treatment(samples, cores, logs, paths("A"), metals=CU)
    long = bracket_table({name: item.frame for name, item in made.items()}, CU)
    assert (long.loc[long["treatment"] == "unknown", "ratio_to_default"].dropna() == 1.0).all()


def many_holes(
    count: int = 500, each: int = 40
) -> tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame, tuple[str, ...]]:
    """20 000 assays of two metals in 500 holes, runs out of step with them, two domains."""
    rng = np.random.default_rng(5)
    names = tuple(f"H{i:03d}" for i in range(count))
    depth = np.tile(np.arange(each, dtype=float), count)
    assays = pd.DataFrame({"hole_id": np.repeat(names, each), "from_m": depth, "to_m": depth + 1})
    assays["cu_pct"], assays["au_gpt"] = rng.lognormal(1, 0.8, (2, len(assays)))
    start = np.tile(np.arange(each // 2) * 2.0 + 0.3, count)
    cores = pd.DataFrame({"hole_id": np.repeat(names, each // 2), "from_m": start, "to_m": start + 2})
    cores["recovery_pct"] = rng.uniform(0, 100, len(cores))
    cut = rng.uniform(3, 30, count)
    logs = pd.DataFrame(
        {
            "hole_id": np.repeat(names, 2), "from_m": np.column_stack([np.zeros(count), cut]).ravel(),
            "to_m": np.column_stack([cut, np.full(count, 40.0)]).ravel(), "domain": ["massive", "stockwork"] * count,
        }
    )  # fmt: skip
    return assays, cores, logs, names


def test_twenty_thousand_assays_in_five_seconds() -> None:
    assays, cores, logs, names = many_holes()
    start = time.perf_counter()
    path = paths(*names, length=41.0)
    table = lost_core_bracket(assays, cores, logs, path, metals=["cu_pct", "au_gpt"])
    seconds = time.perf_counter() - start
    assert len(table) == 16  # four treatments, two domains, what was not logged, and all
    assert seconds < 5.0


def test_composites_equal_a_slow_twin() -> None:
    assays, cores, logs, names = many_holes(count=6, each=20)
    made = composite(assays, cores, logs, paths(*names, length=41.0), metals=CU, weighting="length")
    slow = overlap_means(made.frame, assays, CU)
    assert made.frame["cu_pct"].to_numpy() == pytest.approx(slow["cu_pct"].to_numpy(), nan_ok=True)


def test_composites_cut_out_of_one_assay_are_marked_and_told() -> None:
    cores = [("A", 0, 7, 100.0)]
    made = make([("A", 0, 2, 3.0), ("A", 2, 3, 4.0), ("A", 3, 4.5, 5.0), ("A", 4.5, 7, 6.0)], cores)
    # 0-1 and 1-2 are of the first assay, 5-6 and 6-7 of the last; 4-5 rests on two
    assert made.frame["shared_assay"].tolist() == [1, 1, 0, 0, 0, 2, 2]
    found = [item for item in made.findings if item.code == "composite-cut"]
    assert len(found) == 1 and "4 of 7 composites (57 %)" in found[0].message
    fitting = make([("A", n, n + 1, 1.0 + n) for n in range(7)], cores)
    assert not fitting.frame["shared_assay"].any() and "composite-cut" not in codes(fitting.findings)


def test_composites_without_a_grade_share_no_assay() -> None:
    made = make([("A", 0, 2, np.nan), ("A", 2, 3, 4.0)], [("A", 0, 3, 100.0)])
    assert not made.frame["shared_assay"].any()
