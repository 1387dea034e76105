"""Mineable shapes: against exhaustive search on small cases, and what must hold on any."""

from __future__ import annotations

import itertools

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sms_resource.economics import ShapeRules, mineable_shapes
from sms_resource.economics.closure import greatest_closure, needed_by

SIZE = (5.0, 5.0, 2.0)


def blocks(cells: dict[tuple[int, int, int], float], dry: float = 100.0) -> pd.DataFrame:
    frame = pd.DataFrame([(*cell, grade) for cell, grade in cells.items()], columns=["i", "j", "k", "cu_pct"])
    return frame.assign(dry_tonnes=dry, wet_tonnes=dry * 1.1, volume_m3=50.0, au_gpt=1.0)


def random_blocks(seed: int, ni: int = 4, nj: int = 4, nk: int = 4) -> pd.DataFrame:
    rng = np.random.default_rng(seed)
    cells = {
        c: float(rng.lognormal(0, 1))
        for c in itertools.product(range(ni), range(nj), range(nk))
        if rng.random() < 0.8
    }
    frame = blocks(cells or {(0, 0, 0): 1.0})
    return frame.assign(dry_tonnes=rng.uniform(0, 200, len(frame)))


def shapes(frame: pd.DataFrame, cutoff: float = 2.0, **more: object):
    return mineable_shapes(
        frame, cutoff_variable="cu_pct", cutoff=cutoff, block_size=SIZE, metals=("cu_pct", "au_gpt"), **more
    )


def test_poor_cover_is_taken_where_rich_material_below_pays_for_it() -> None:
    # column 0: 1, 1, 6 from the top down averages 2.67; column 1: 1, 1, 3 averages 1.67
    frame = blocks({(0, 0, 2): 1, (0, 0, 1): 1, (0, 0, 0): 6, (5, 0, 2): 1, (5, 0, 1): 1, (5, 0, 0): 3})
    shape = shapes(frame)
    assert shape.patches.tolist() == [True, True, True, False, False, False]
    table = shape.table.set_index("method")
    assert table.loc["cut-off alone", "dry_tonnes"] == 200.0
    patches = table.loc["patches"]
    assert patches.cu_pct == pytest.approx(8 / 3)
    assert (patches.below_blocks, patches.below_dry_tonnes) == (2, 200.0)
    assert patches.below_share == pytest.approx(2 / 3)
    assert patches.left_dry_tonnes == 100.0  # the rich block that its cover does not pay for
    assert patches.wet_tonnes == pytest.approx(330.0) and patches.cu_t == pytest.approx(8.0)
    assert patches.au_kg == pytest.approx(0.3)
    assert shape.patch_table.area_m2.tolist() == [25.0]


def test_depth_stops_where_poor_material_begins() -> None:
    frame = blocks({(0, 0, 3): 5, (0, 0, 2): 3, (0, 0, 1): 0.5, (0, 0, 0): 2.4})
    assert shapes(frame).patches.tolist() == [True, True, False, False]


def test_full_benches_carry_each_other() -> None:
    poor = {(i, 0, 1): 1.0 for i in range(4)}
    rich = {(i, 0, 0): 3.5 for i in range(4)}
    shape = shapes(blocks({**poor, **rich}))
    assert shape.benches.all()
    assert shape.bench_table.taken.tolist() == [True, True]
    assert shape.table.set_index("method").loc["full benches", "below_dry_tonnes"] == 400.0
    assert not shapes(blocks({**poor, **dict.fromkeys(rich, 2.9)})).benches.any()


def test_a_zone_that_may_not_be_touched_shuts_what_lies_below() -> None:
    frame = blocks({(0, 0, 1): 9.0, (0, 0, 0): 9.0, (1, 0, 1): 9.0, (1, 0, 0): 9.0})
    shape = shapes(frame, allowed=np.array([False, True, True, True]))
    assert shape.patches.tolist() == [False, False, True, True]
    # the lower bench is one part, and half of it lies under the zone: it cannot be taken whole
    assert shape.benches.tolist() == [False, False, True, False]


def test_gaps_enclosed_in_a_patch_are_taken_with_it() -> None:
    cells = {(i, j, 0): 5.0 for i in range(3) for j in range(3)}
    cells[(1, 1, 0)] = 0.0
    frame = blocks(cells)
    filled = shapes(frame)
    assert filled.patches.all() and filled.table.set_index("method").loc["patches", "below_blocks"] == 1
    assert shapes(frame, rules=ShapeRules(fill_gaps=False)).patches.sum() == 8
    # eight columns at 2.1 gain 0.8 in all; the gap at 0 costs 2: it stays
    poor = blocks({cell: (0.0 if cell == (1, 1, 0) else 2.1) for cell in cells})
    assert shapes(poor).patches.sum() == 8
    # a gap that may not be touched stays as well
    shut = shapes(frame, allowed=~((frame.i == 1) & (frame.j == 1)).to_numpy())
    assert shut.patches.sum() == 8


def test_small_patches_go_but_the_top_of_a_mound_stays() -> None:
    mound = {(i, j, 0): 4.0 for i in range(4) for j in range(4)} | {(1, 1, 1): 1.0}
    frame = blocks(mound | {(9, 9, 0): 9.0})
    rules = ShapeRules(least_patch_m2=100.0)
    shape = shapes(frame, rules=rules)
    lone = (frame.i == 9).to_numpy()
    assert shape.patches[~lone].all() and not shape.patches[lone].any()
    assert shape.benches[~lone].all() and not shape.benches[lone].any()
    # alone the top is rich but too small to stand
    top = blocks({**dict.fromkeys(mound, 0.1), (1, 1, 1): 9.0})
    assert not shapes(top, rules=rules).benches.any()


def test_benches_of_several_levels() -> None:
    frame = blocks({(0, 0, k): g for k, g in enumerate([0.0, 5.0, 5.0, 0.0])})
    two = shapes(frame, rules=ShapeRules(bench_blocks=2))
    assert two.bench_table.bench.tolist() == [0, 1] and two.benches.all()
    with pytest.raises(ValueError, match="bench_blocks"):
        ShapeRules(bench_blocks=0)


def test_a_missing_value_is_lifted_but_brings_nothing() -> None:
    frame = blocks({(0, 0, 1): np.nan, (0, 0, 0): 5.0})
    shape = shapes(frame)
    assert shape.patches.all()
    row = shape.table.set_index("method").loc["patches"]
    assert row.below_dry_tonnes == 100.0 and row.cu_pct == pytest.approx(2.5)


def test_no_blocks_no_shape() -> None:
    shape = shapes(blocks({(0, 0, 0): 5.0}).head(0))
    assert shape.table.dry_tonnes.tolist() == [0.0, 0.0, 0.0] and shape.patch_table.empty


def gain(frame: pd.DataFrame, mask: np.ndarray, cutoff: float = 2.0) -> float:
    return float(((frame.cu_pct - cutoff) * frame.dry_tonnes)[mask].sum())


@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 2**31))
def test_columns_stop_at_the_best_depth(seed: int) -> None:
    """Exhaustive: no other depth of any column gains more."""
    frame = random_blocks(seed)
    shape = shapes(frame, rules=ShapeRules(fill_gaps=False))
    want = 0.0
    for _, column in frame.groupby(["i", "j"]):
        column = column.sort_values("k", ascending=False)
        sums = ((column.cu_pct - 2.0) * column.dry_tonnes).cumsum()
        want += max(0.0, float(sums.max()))
    assert gain(frame, shape.patches) == pytest.approx(want, abs=1e-6)


@settings(max_examples=25, deadline=None)
@given(seed=st.integers(0, 2**31), least=st.sampled_from([0.0, 60.0]), levels=st.integers(1, 2))
def test_what_holds_for_every_shape(seed: int, least: float, levels: int) -> None:
    frame = random_blocks(seed, 5, 4, 4)
    rng = np.random.default_rng(seed)
    allowed = rng.random(len(frame)) < 0.95
    shape = shapes(frame, rules=ShapeRules(bench_blocks=levels, least_patch_m2=least), allowed=allowed)
    level = frame.k // levels
    for mask, unit in ((shape.patches, frame.k), (shape.benches, level)):
        assert not (mask & ~allowed).any()
        if mask.any():
            assert gain(frame, mask) >= -1e-6  # it meets the cut-off on average
        for _, column in frame.assign(taken=mask, level=unit).groupby(["i", "j"]):
            taken = column.groupby("level").taken
            assert (taken.nunique() == 1).all() or unit is level
            steps = taken.any().sort_index(ascending=False).to_numpy()
            assert not (~steps[:-1] & steps[1:]).any(), "something was taken from under what stays"
    for number in range(1, int(shape.patch_number.max(initial=0)) + 1):
        assert gain(frame, shape.patch_number == number) >= -1e-6
        assert shape.patch_table.area_m2[number - 1] >= least
    table = shape.table.set_index("method")
    for name, mask in (("patches", shape.patches), ("full benches", shape.benches)):
        assert table.loc[name, "dry_tonnes"] == pytest.approx(frame.dry_tonnes[mask].sum())
        below = mask & (frame.cu_pct < 2.0)
        assert table.loc[name, "below_dry_tonnes"] == pytest.approx(frame.dry_tonnes[below].sum())
    # a shape that must take what lies above can gain no more than picking blocks at will
    best = gain(frame, allowed & (frame.cu_pct >= 2.0).to_numpy())
    assert gain(frame, shape.benches) <= best + 1e-6 and gain(frame, shape.patches) <= best + 1e-6


@settings(max_examples=80, deadline=None)
@given(seed=st.integers(0, 2**31), count=st.integers(1, 9))
def test_closure_is_the_best_of_all_sets(seed: int, count: int) -> None:
    rng = np.random.default_rng(seed)
    weights = rng.normal(0, 10, count)
    pairs = np.array([(a, b) for a in range(count) for b in range(a) if rng.random() < 0.3]).reshape(-1, 2)
    barred = rng.random(count) < 0.15
    got = greatest_closure(weights, pairs, barred)
    best = 0.0
    for members in itertools.product([False, True], repeat=count):
        chosen = np.array(members)
        if (chosen & barred).any() or any(chosen[a] and not chosen[b] for a, b in pairs):
            continue
        best = max(best, float(weights[chosen].sum()))
    assert not (got & barred).any() and all(got[b] for a, b in pairs if got[a])
    assert weights[got].sum() == pytest.approx(best, abs=1e-6)


def test_what_is_needed() -> None:
    pairs = np.array([(2, 1), (1, 0), (3, 1)])
    assert needed_by(pairs, np.array([False, False, True, False])).tolist() == [True, True, False, False]
    assert not needed_by(np.empty((0, 2), int), np.array([True])).any()
