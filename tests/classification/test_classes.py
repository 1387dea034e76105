"""Proposed classes: every rule alone, smoothing, overrides, flags.

The rules and their default numbers are common practice, no source; the check is that each does what it says.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from shapely.geometry import box

from sms_resource.classification import (
    CLASS_NAMES,
    ClassContext,
    ClassCriteria,
    ClassOverride,
    LevelCriteria,
    Smoothing,
    connected_volumes,
    exploration_target,
    propose_classes,
)
from sms_resource.classification.codes import CODES, REASONS

PLAIN = ClassCriteria(smoothing=None)
GOOD = ClassContext(
    hole_total=12,
    range_m=40.0,
    block_size=(10.0, 10.0, 2.0),
    position_sigma_m=1.0,
    recovery_pct={"massive": 85.0, "cap": 90.0},
    density_count={"massive": 30, "cap": 12},
    laboratory={"cu": "good", "au": "caution"},
    prospects_by="A. Person",
    prospects_basis="scoping study",
)


def lattice(ni: int = 8, nj: int = 8, nk: int = 3) -> pd.DataFrame:
    """A full box of blocks that meet every criterion for Indicated."""
    i, j, k = (a.ravel() for a in np.meshgrid(range(ni), range(nj), range(nk), indexing="ij"))
    return pd.DataFrame(
        {
            "i": i, "j": j, "k": k,
            "easting": 10.0 * i + 5, "northing": 10.0 * j + 5, "elevation": -1600.0 + 2 * k,
            "domain": "massive", "extrapolation": "drilled", "open_ended": False,
            "cu_pct": 3.0, "au_gpt": 2.0, "cu_pct_slope": 0.9, "hole_count": 4, "sample_count": 12,
            "nearest_distance": 8.0, "dry_tonnes": 600.0, "wet_tonnes": 660.0,
        }
    )  # fmt: skip


def classes_of(
    frame: pd.DataFrame, criteria: ClassCriteria = PLAIN, context: ClassContext = GOOD
) -> set[str]:
    return set(propose_classes(frame, criteria, context).classes)


def test_blocks_that_meet_all_are_indicated_and_never_measured() -> None:
    proposal = propose_classes(lattice(), PLAIN, GOOD, metals=["cu_pct"])
    assert set(proposal.classes) == {"indicated"}
    assert set(proposal.block_reasons) == {""}
    # perfect figures do not make Measured: only the study's own criteria can
    perfect = lattice().assign(cu_pct_slope=1.0, hole_count=40, sample_count=200, nearest_distance=0.0)
    assert classes_of(perfect) == {"indicated"}


def test_measured_only_where_named_and_every_one_holds() -> None:
    criteria = replace(PLAIN, measured=LevelCriteria(holes=5, samples=12, within_m=10.0, slope=0.9))
    frame = lattice(2, 2, 1).assign(hole_count=[5, 4, 5, 5], cu_pct_slope=[0.95, 0.95, 0.89, 0.95])
    frame["nearest_distance"] = [9.0, 9.0, 9.0, 11.0]
    proposal = propose_classes(frame, criteria, GOOD)
    assert proposal.classes.tolist() == ["measured", "indicated", "indicated", "indicated"]
    assert proposal.block_reasons.tolist() == ["", "measured-holes", "measured-slope", "measured-distance"]
    assert "class-measured" in {f.code for f in proposal.findings}


DOMAIN_POOR = {"massive": 59.9, "cap": 90.0}
RULES = [
    ("low-recovery", {}, {"recovery_pct": DOMAIN_POOR, "domains_without_bias": frozenset({"massive"})}),
    ("few-holes-in-range", {"hole_count": 2}, {}),
    ("beyond-range", {"nearest_distance": 41.0}, {}),
    ("open-ended", {"open_ended": True}, {}),
    ("few-densities", {}, {"density_count": {"massive": 9, "cap": 12}}),
    ("position-uncertain", {}, {"position_sigma_m": 5.1}),
    ("position-uncertain", {}, {"position_sigma_m": float("nan")}),
    ("surface-samples-used", {}, {"surface_samples_used": True}),
    ("handheld-used", {}, {"handheld_used": True}),
    ("low-slope", {"cu_pct_slope": 0.49}, {}),
]


@pytest.mark.parametrize(("rule", "columns", "context"), RULES)
def test_each_downgrade_takes_one_class_and_says_so(
    rule: str, columns: dict[str, object], context: dict[str, object]
) -> None:
    easy = LevelCriteria(holes=1, samples=1, within_m=1000.0)
    criteria = replace(PLAIN, indicated=easy, inferred=easy)
    frame = lattice().assign(**columns)
    proposal = propose_classes(frame, criteria, replace(GOOD, **context))
    assert set(proposal.criteria_only) == {"indicated"}
    assert set(proposal.classes) == {"inferred"}
    assert set(proposal.block_reasons) == {rule}
    row = proposal.reasons.set_index("rule").loc[rule]
    assert (row.blocks, row.blocks_alone) == (192, 192)
    assert row.dry_tonnes == pytest.approx(192 * 600.0)
    assert any(character.isdigit() for character in row.text) or rule in (
        "open-ended", "surface-samples-used", "handheld-used",
    )  # fmt: skip
    switched_off = replace(criteria, rules_off=(rule,))
    assert classes_of(frame, switched_off, replace(GOOD, **context)) == {"indicated"}


def test_just_inside_every_limit_is_no_downgrade() -> None:
    frame = lattice().assign(hole_count=3, nearest_distance=20.0, cu_pct_slope=0.6)
    context = replace(
        GOOD,
        position_sigma_m=5.0,
        recovery_pct={"massive": 60.0},
        domains_without_bias=frozenset({"massive"}),
        density_count={"massive": 10},
    )
    assert classes_of(frame, PLAIN, context) == {"indicated"}


def test_many_downgrades_together_still_take_one_class() -> None:
    context = replace(GOOD, surface_samples_used=True, handheld_used=True, position_sigma_m=9.0)
    proposal = propose_classes(lattice(), PLAIN, context)
    assert set(proposal.classes) == {"inferred"}
    assert (proposal.reasons.blocks_alone == 0).all()


def test_downgrade_from_inferred_and_its_floor() -> None:
    frame = lattice().assign(hole_count=2)
    assert classes_of(frame) == {"unclassified"}
    assert classes_of(frame, replace(PLAIN, floor="inferred")) == {"inferred"}


@pytest.mark.parametrize(
    ("rule", "columns", "context"),
    [
        ("extrapolated", {"extrapolation": "sideways"}, {}),
        ("laboratory-quality", {}, {"laboratory": {"cu": "failed"}}),
        ("laboratory-quality", {}, {"laboratory": {}}),
        ("recovery-caution", {}, {"recovery_pct": {"massive": 79.0}}),
        ("variogram-assumed", {}, {"variogram_assumed": True}),
    ],
)
def test_caps_keep_a_block_at_inferred(
    rule: str, columns: dict[str, object], context: dict[str, object]
) -> None:
    frame = lattice().assign(**columns)
    proposal = propose_classes(frame, PLAIN, replace(GOOD, **context))
    assert set(proposal.classes) == {"inferred"}
    assert set(proposal.block_reasons) == {rule}
    # a cap and a downgrade do not add up to two classes
    both = replace(GOOD, **context, surface_samples_used=True)
    assert classes_of(frame, PLAIN, both) == {"inferred"}


def test_poor_recovery_without_bias_may_stay_indicated() -> None:
    context = replace(GOOD, recovery_pct={"massive": 70.0}, domains_without_bias=frozenset({"massive"}))
    assert classes_of(lattice(), PLAIN, context) == {"indicated"}


def test_unknown_figures_are_poor_figures() -> None:
    context = replace(GOOD, recovery_pct={}, density_count={})
    proposal = propose_classes(lattice(), PLAIN, context)
    assert set(proposal.classes) == {"inferred"}
    assert "class-domain-unknown" in {f.code for f in proposal.findings}
    assert classes_of(lattice().assign(cu_pct_slope=np.nan)) == {"unclassified"}


def test_rules_by_domain_touch_only_their_domain() -> None:
    frame = lattice()
    frame.loc[frame.k == 2, "domain"] = "cap"
    context = replace(GOOD, density_count={"massive": 30, "cap": 3})
    proposal = propose_classes(frame, PLAIN, context)
    assert set(proposal.classes[frame.domain == "cap"]) == {"inferred"}
    assert set(proposal.classes[frame.domain == "massive"]) == {"indicated"}
    assert "cap 3" in proposal.reasons.set_index("rule").text["few-densities"]
    by_range = replace(GOOD, range_m={"massive": 40.0, "cap": 7.0})
    proposal = propose_classes(frame, PLAIN, by_range)
    assert set(proposal.classes[frame.domain == "cap"]) == {"inferred"}


def test_without_drilling_there_is_no_class() -> None:
    proposal = propose_classes(lattice(), ClassCriteria(), replace(GOOD, hole_total=0))
    assert set(proposal.classes) == {"unclassified"}
    assert set(proposal.block_reasons) == {"no-drilling"}
    assert "class-no-drilling" in {f.code for f in proposal.findings}


def test_a_block_without_estimate_stays_unclassified_even_after_smoothing() -> None:
    frame = lattice()
    frame.loc[100, "cu_pct"] = np.nan
    proposal = propose_classes(frame, ClassCriteria(), GOOD)
    assert proposal.classes[100] == "unclassified"
    assert proposal.block_reasons[100] == "not-estimated"
    assert (np.delete(proposal.classes, 100) == "indicated").all()


def test_smoothing_leaves_no_spotted_dog() -> None:
    rng = np.random.default_rng(3)
    frame = lattice(20, 20, 4)
    good = (frame.i < 10) ^ (rng.random(len(frame)) < 0.12)  # two halves, speckled
    frame["hole_count"] = np.where(good, 4, 2)
    criteria = replace(ClassCriteria(rules_off=("few-holes-in-range",)))
    proposal = propose_classes(frame, criteria, GOOD)
    before = proposal.volumes_before.set_index("proposed_class").loc["indicated"]
    after = proposal.volumes_after.set_index("proposed_class").loc["indicated"]
    assert before.volumes > 10 and after.volumes == 1
    assert after.smallest_blocks >= criteria.smoothing.least_blocks
    moved = proposal.moved
    assert set(moved.from_class) == {"inferred", "indicated"}
    assert moved.blocks.sum() == (proposal.raw != proposal.classes).sum()
    table = proposal.before_after
    for step in ("criteria", "rules", "smoothed", "final"):
        assert table[f"dry_tonnes_{step}"].sum() == pytest.approx(frame.dry_tonnes.sum())
        assert table[f"blocks_{step}"].sum() == len(frame)
    # the halves come out as halves
    agree = (proposal.classes == "indicated") == (frame.i < 10).to_numpy()
    assert agree.mean() > 0.97


@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 2**31), share=st.floats(0.0, 1.0), assumed=st.booleans(), least=st.integers(1, 30))
def test_smoothing_never_gives_back_what_a_rule_took(
    seed: int, share: float, assumed: bool, least: int
) -> None:
    rng = np.random.default_rng(seed)
    frame = lattice(7, 6, 4).sample(frac=0.8, random_state=int(seed % 1000)).reset_index(drop=True)
    count = len(frame)
    frame["hole_count"] = rng.integers(1, 6, count)
    frame["nearest_distance"] = rng.uniform(1, 60, count)
    frame["cu_pct_slope"] = rng.uniform(0.3, 1.0, count)
    frame["open_ended"] = rng.random(count) < share
    criteria = ClassCriteria(smoothing=Smoothing(least_blocks=least))
    proposal = propose_classes(frame, criteria, replace(GOOD, variogram_assumed=assumed))
    rank = {name: position for position, name in enumerate(CLASS_NAMES)}
    final, raw, first = (
        np.array([rank[n] for n in c]) for c in (proposal.classes, proposal.raw, proposal.criteria_only)
    )
    assert ((raw <= first).all() and (first - raw <= 1).all()) or assumed
    lowered = frame.open_ended.to_numpy() | (frame.hole_count < 3).to_numpy()
    assert (final[lowered] <= raw[lowered]).all()
    assert (final <= raw + 1).all() or (final <= first + 1).all()
    if assumed:
        assert final.max() <= 1
    assert final.max() < 3
    # every connected volume is large enough and holds two holes
    volumes = connected_volumes(frame, final.astype(np.int8))
    assert (volumes.smallest_blocks >= least).all()
    assert len(proposal.reasons) == len(set(proposal.reasons.rule))
    assert set(proposal.reasons.rule) <= set(REASONS)


def test_a_volume_needs_two_holes() -> None:
    frame = lattice(12, 4, 2)
    frame["hole_count"] = np.where(frame.i < 6, 4, 2)
    criteria = ClassCriteria(rules_off=("few-holes-in-range",))
    one = pd.DataFrame({"hole_id": ["H1", "H2"], "i": [2, 9], "j": [1, 1]})
    two = pd.DataFrame({"hole_id": ["H1", "H2"], "i": [2, 5], "j": [1, 2]})
    assert "indicated" not in set(propose_classes(frame, criteria, GOOD, hole_cells=one).classes)
    assert "indicated" in set(propose_classes(frame, criteria, GOOD, hole_cells=two).classes)


def test_an_enclosed_island_is_filled_only_where_no_rule_acts() -> None:
    frame = lattice(9, 9, 9)
    inside = frame.i.between(3, 5) & frame.j.between(3, 5) & frame.k.between(3, 5)
    frame["cu_pct_slope"] = np.where(inside, 0.55, 0.9)  # misses Indicated, but no downgrade
    criteria = ClassCriteria(smoothing=Smoothing(passes=0, island_blocks=27))
    assert classes_of(frame, criteria) == {"indicated"}
    assert classes_of(frame, replace(criteria, smoothing=Smoothing(passes=0, island_blocks=26))) == {
        "indicated",
        "inferred",
    }
    frame["open_ended"] = inside
    assert classes_of(frame, criteria) == {"indicated", "unclassified"}


def test_override_by_polygon_with_a_reason() -> None:
    frame = lattice()
    west = ClassOverride(
        box(0, 0, 40, 80), "inferred", "holes too shallow in the west", "B. Person", name="west"
    )
    proposal = propose_classes(frame, ClassCriteria(), GOOD, overrides=[west])
    assert set(proposal.classes[frame.easting < 40]) == {"inferred"}
    assert set(proposal.classes[frame.easting > 40]) == {"indicated"}
    row = proposal.overrides.iloc[0]
    assert (row.blocks, row.blocks_changed, row.by) == (96, 96, "B. Person")
    assert row.dry_tonnes_changed == pytest.approx(96 * 600.0)
    assert set(proposal.block_reasons[frame.easting < 40]) == {"override"}
    low = replace(west, highest_elevation=-1599.0)
    lower = propose_classes(frame, ClassCriteria(), GOOD, overrides=[low])
    assert lower.overrides.iloc[0].blocks == 32


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ({"reason": "  "}, "no reason"),
        ({"by": ""}, "who decided"),
        ({"proposed_class": "measured"}, "do not name Measured"),
        ({"proposed_class": "good"}, "not one of"),
    ],
)
def test_an_override_without_grounds_is_refused(change: dict[str, str], said: str) -> None:
    good = ClassOverride(box(0, 0, 40, 80), "inferred", "shallow", "B. Person")
    proposal = propose_classes(lattice(), ClassCriteria(), GOOD, overrides=[replace(good, **change)])
    errors = proposal.findings.errors
    assert [e.code for e in errors] == ["class-override-refused"] and said in errors[0].message
    assert set(proposal.classes) == {"indicated"}


def test_an_override_outside_the_blocks_is_told() -> None:
    away = ClassOverride(box(1e6, 1e6, 2e6, 2e6), "inferred", "x", "y")
    proposal = propose_classes(lattice(), ClassCriteria(), GOOD, overrides=[away])
    assert "class-override-empty" in {f.code for f in proposal.findings}


def test_flags_richer_inferred_and_extrapolated_share() -> None:
    frame = lattice()
    east = frame.i >= 4
    frame.loc[east, ["cu_pct", "extrapolation", "nearest_distance"]] = [5.0, "sideways", 30.0]
    proposal = propose_classes(frame, PLAIN, GOOD, metals=["cu_pct", "au_gpt"])
    richer = [f for f in proposal.findings if f.code == "class-inferred-richer"]
    assert len(richer) == 1 and "5" in richer[0].message and richer[0].column == "cu_pct"
    summary = proposal.summary.set_index("proposed_class")
    assert summary.loc["all", "extrapolated_share"] == pytest.approx(0.5)
    assert summary.loc["inferred", "extrapolated_share"] == 1.0
    assert summary.loc["all", "cu_pct"] == pytest.approx(4.0)
    said = next(f.message for f in proposal.findings if f.code == "class-extrapolated")
    assert "50 % sideways" in said and "30 m" in said


def test_prospects_not_judged_labels_the_tally() -> None:
    proposal = propose_classes(lattice(), PLAIN, replace(GOOD, prospects_basis=""))
    assert proposal.tally_label.startswith("Block-model tally")
    assert "class-prospects-not-judged" in {f.code for f in proposal.findings}
    assert "resource" in propose_classes(lattice(), PLAIN, GOOD).tally_label


def test_every_finding_code_is_listed() -> None:
    context = replace(GOOD, prospects_by="", recovery_pct={})
    proposal = propose_classes(lattice(), ClassCriteria(), context, metals=["cu_pct"])
    assert {f.code for f in proposal.findings} <= set(CODES)


def test_missing_column_and_twin_blocks_are_named() -> None:
    with pytest.raises(ValueError, match="cu_pct_slope"):
        propose_classes(lattice().drop(columns="cu_pct_slope"), PLAIN, GOOD)
    with pytest.raises(ValueError, match="same i, j, k"):
        propose_classes(pd.concat([lattice(), lattice()], ignore_index=True), ClassCriteria(), GOOD)


def test_exploration_target_is_ranges_only() -> None:
    target = exploration_target(
        area_m2=(5_000.0, 12_000.0),
        thickness_m=(3.0, 10.0),
        dry_density_tpm3=(2.4, 3.2),
        grades={"cu_pct": (1.0, 6.0)},
        basis="12 grabs and the mapped mound",
    )
    assert target.dry_tonnes == pytest.approx((36_000.0, 384_000.0))
    assert "insufficient exploration" in target.caution and "conceptual" in target.caution
    assert target.to_frame().quantity.tolist() == ["dry_tonnes", "cu_pct"]
    with pytest.raises(ValueError, match="ranges only"):
        exploration_target(
            area_m2=(1.0, 2.0), thickness_m=(1.0, 2.0), dry_density_tpm3=(3.0, 3.0),
            grades={"cu_pct": (2.0, 2.0)}, basis="x",
        )  # fmt: skip
    with pytest.raises(ValueError, match="basis"):
        exploration_target(
            area_m2=(1.0, 2.0), thickness_m=(1.0, 2.0), dry_density_tpm3=(3.0, 3.0), grades={}, basis=" ",
        )  # fmt: skip
