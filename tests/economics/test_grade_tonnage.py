"""Tables of tonnes: against plain loops, by conservation, and by order."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sms_resource.economics import beside_change_of_support, grade_tonnage, missing_tonnage

METALS = ("cu_pct", "au_gpt")


def blocks(seed: int, count: int, missing: float = 0.05) -> pd.DataFrame:
    rng = np.random.default_rng(seed)
    dry = rng.uniform(0, 500, count)
    frame = pd.DataFrame(
        {
            "dry_tonnes": dry,
            "wet_tonnes": dry * rng.uniform(1.02, 1.3, count),
            # one decimal, so that grades fall exactly on cut-offs
            "cu_pct": np.round(rng.lognormal(0.5, 0.8, count), 1),
            "au_gpt": rng.lognormal(0.0, 1.0, count),
            "proposed_class": rng.choice(["indicated", "inferred", "unclassified"], count),
            "domain": rng.choice(["cap", "massive", "stockwork"], count),
            "k": rng.integers(0, 5, count),
        }
    )
    frame.loc[rng.random(count) < missing, "au_gpt"] = np.nan
    return frame


def slow_twin(frame: pd.DataFrame, variable: str, cutoff: float) -> dict[str, float]:
    """One cut-off by a plain loop over blocks."""
    sums = dict.fromkeys(("dry", "wet", "cu", "au", "au_dry"), 0.0)
    for block in frame.itertuples():
        if not getattr(block, variable) >= cutoff:
            continue
        sums["dry"] += block.dry_tonnes
        sums["wet"] += block.wet_tonnes
        sums["cu"] += block.dry_tonnes * block.cu_pct / 100.0
        if not np.isnan(block.au_gpt):
            sums["au"] += block.dry_tonnes * block.au_gpt
            sums["au_dry"] += block.dry_tonnes
    return sums


@pytest.mark.parametrize("variable", METALS)
def test_equals_a_plain_loop(variable: str) -> None:
    frame = blocks(1, 400)
    cutoffs = [0.0, 0.5, 1.0, 2.3, 99.0]
    table = grade_tonnage(frame, metals=METALS, cutoff_variable=variable, cutoffs=cutoffs)
    for name, part in [("all", frame), *frame.groupby("proposed_class")]:
        for cutoff in cutoffs:
            row = table[(table.proposed_class == name) & (table.cutoff == cutoff)].iloc[0]
            want = slow_twin(part, variable, cutoff)
            assert row.dry_tonnes == pytest.approx(want["dry"], rel=1e-12)
            assert row.wet_tonnes == pytest.approx(want["wet"], rel=1e-12)
            assert row.cu_t == pytest.approx(want["cu"], rel=1e-12)
            assert row.au_kg == pytest.approx(want["au"] / 1000.0, rel=1e-12)
            # troy ounce: NIST Handbook 44, appendix C
            assert row.au_oz == pytest.approx(want["au"] / 31.1034768, rel=1e-9)
            if want["dry"] > 0:
                assert row.cu_pct == pytest.approx(100.0 * want["cu"] / want["dry"], rel=1e-12)
            else:
                assert np.isnan(row.cu_pct)


def test_columns_are_those_of_the_public_surface() -> None:
    table = grade_tonnage(blocks(2, 50), metals=METALS, cutoff_variable="cu_pct", cutoffs=[1.0])
    assert list(table.columns) == [
        "cutoff_variable", "cutoff", "proposed_class", "dry_tonnes", "wet_tonnes",
        "cu_pct", "au_gpt", "cu_t", "au_kg", "au_oz",
    ]  # fmt: skip


def test_a_block_at_the_cutoff_is_in() -> None:
    frame = pd.DataFrame(
        {
            "dry_tonnes": [10.0, 5.0],
            "wet_tonnes": [11.0, 6.0],
            "cu_pct": [2.0, 1.0],
            "proposed_class": "inferred",
        }
    )
    table = grade_tonnage(frame, metals=["cu_pct"], cutoff_variable="cu_pct", cutoffs=[2.0])
    assert table[table.proposed_class == "all"].dry_tonnes.item() == 10.0
    assert table[table.proposed_class == "all"].cu_t.item() == pytest.approx(0.2)


@settings(max_examples=30, deadline=None)
@given(
    seed=st.integers(0, 2**31),
    count=st.integers(1, 300),
    cutoffs=st.one_of(st.just("all"), st.lists(st.floats(-1, 20, allow_nan=False), min_size=1, max_size=12)),
    variable=st.sampled_from(METALS),
)
def test_parts_sum_to_the_whole_and_tonnes_fall(
    seed: int, count: int, cutoffs: object, variable: str
) -> None:
    frame = blocks(seed, count)
    groups = ["proposed_class", "domain", "k"]
    table = grade_tonnage(frame, metals=METALS, cutoff_variable=variable, cutoffs=cutoffs, groups=groups)
    sums = ["dry_tonnes", "wet_tonnes", "cu_t", "au_kg", "au_oz"]
    whole = table[(table[groups] == "all").all(axis=1)].set_index("cutoff")[sums]
    for column in groups:
        others = [name for name in groups if name != column]
        parts = table[(table[others] == "all").all(axis=1) & (table[column] != "all")]
        np.testing.assert_allclose(parts.groupby("cutoff")[sums].sum(), whole, rtol=1e-9, atol=1e-9)
    every = table[(table[groups] != "all").all(axis=1)]
    np.testing.assert_allclose(every.groupby("cutoff")[sums].sum(), whole, rtol=1e-9, atol=1e-9)
    for _, part in table.groupby(groups):
        for column in ("dry_tonnes", "wet_tonnes", "cu_t", "au_kg"):
            assert (np.diff(part[column].to_numpy()) <= 0).all()
    # the whole is also what a direct sum gives, not only what the parts give
    lowest = float(whole.index.min()) if len(whole) else 0.0
    assert len(whole) == 0 or whole.dry_tonnes.iloc[0] == pytest.approx(
        frame.dry_tonnes[frame[variable] >= lowest].sum(), rel=1e-9
    )


def test_grade_above_the_cutoff_is_at_or_above_it() -> None:
    frame = blocks(3, 2000)
    table = grade_tonnage(frame, metals=["cu_pct"], cutoff_variable="cu_pct", cutoffs="all")
    left = table[table.dry_tonnes > 0]
    assert (left.cu_pct >= left.cutoff - 1e-9).all()


def test_missing_tonnage_tells_what_the_table_cannot_hold() -> None:
    frame = blocks(4, 500, missing=0.2)
    lost = missing_tonnage(frame, columns=METALS)
    table = grade_tonnage(frame, metals=METALS, cutoff_variable="au_gpt", cutoffs=[-1.0], groups=())
    assert lost.column.tolist() == ["au_gpt"]
    assert table.dry_tonnes.item() + lost.dry_tonnes.item() == pytest.approx(
        frame.dry_tonnes.sum(), rel=1e-12
    )


def test_a_block_without_a_label_keeps_its_tonnes() -> None:
    frame = blocks(5, 60)
    frame.loc[::7, "domain"] = None
    table = grade_tonnage(frame, metals=[], cutoff_variable="cu_pct", cutoffs=[0.0], groups=["domain"])
    assert "not given" in set(table.domain)
    parts = table[table.domain != "all"].dry_tonnes.sum()
    assert parts == pytest.approx(frame.dry_tonnes.sum(), rel=1e-12)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"dry_tonnes": -1.0}, "dry_tonnes"),
        ({"wet_tonnes": np.nan}, "wet_tonnes"),
        ({"proposed_class": "all"}, "'all'"),
    ],
)
def test_bad_blocks_are_named(change: dict[str, object], message: str) -> None:
    frame = blocks(6, 10).assign(**change)
    with pytest.raises(ValueError, match=message):
        grade_tonnage(frame, metals=["cu_pct"], cutoff_variable="cu_pct", cutoffs=[0.0])


def test_missing_column_and_bad_cutoffs_are_named() -> None:
    frame = blocks(7, 10)
    with pytest.raises(ValueError, match="zn_pct"):
        grade_tonnage(frame, metals=["zn_pct"], cutoff_variable="cu_pct", cutoffs=[0.0])
    with pytest.raises(ValueError, match="not a number"):
        grade_tonnage(frame, metals=[], cutoff_variable="cu_pct", cutoffs=[float("nan")])
    with pytest.raises(ValueError, match="some"):
        grade_tonnage(frame, metals=[], cutoff_variable="cu_pct", cutoffs="some")


def test_change_of_support_stands_beside_the_blocks() -> None:
    """Lognormal points against the closed form (Journel & Huijbregts 1978, from memory)."""
    from scipy.stats import norm

    mean, cv, count = 5.0, 1.2, 400_001
    sigma = np.sqrt(np.log1p(cv**2))
    # quantiles of equal weight stand for the distribution
    grades = mean * np.exp(sigma * norm.ppf((np.arange(count) + 0.5) / count) - sigma**2 / 2)
    frame = pd.DataFrame(
        {"dry_tonnes": 1.0, "wet_tonnes": 1.1, "cu_pct": grades, "proposed_class": "inferred"}
    )
    cutoffs = np.array([0.0, 2.5, 5.0, 10.0])
    table = grade_tonnage(frame, metals=["cu_pct"], cutoff_variable="cu_pct", cutoffs=cutoffs)
    with np.errstate(divide="ignore"):
        t = np.log(cutoffs / mean) / sigma
    proportion, metal = norm.sf(t + sigma / 2), mean * norm.sf(t - sigma / 2)
    # points above 5 at m 5, CV 1.2: proportion .318382, metal 3.408090
    assert proportion[2] == pytest.approx(0.318382, abs=1e-6)
    assert metal[2] == pytest.approx(3.408090, abs=1e-6)
    curve = pd.DataFrame({"cutoff": cutoffs, "proportion": proportion, "grade": metal / proportion})
    beside = beside_change_of_support(table, curve, metal="cu_pct")
    np.testing.assert_allclose(beside.tonnes_difference_pct, 0.0, atol=0.01)
    np.testing.assert_allclose(beside.block_grade, beside.support_grade, rtol=2e-4)
    with pytest.raises(ValueError, match="au_gpt"):
        beside_change_of_support(table, curve, metal="au_gpt")
