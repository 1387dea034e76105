"""Sums in two parts: the same bits in any order and grouping, and next to the true sum."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
from hypothesis import given, settings
from hypothesis import strategies as st

from sms_resource.economics import exact_parts, grade_tonnage


@settings(max_examples=150, deadline=None)
@given(
    values=st.lists(st.floats(0.0, 1e9, allow_subnormal=False), min_size=1, max_size=200),
    seed=st.integers(0, 2**31),
)
def test_any_order_and_grouping_gives_the_same_bits(values: list[float], seed: int) -> None:
    rng = np.random.default_rng(seed)
    array = np.array(values)
    coarse, fine = exact_parts(array)
    whole = coarse.sum() + fine.sum()
    order = rng.permutation(len(array))
    for pieces in (1, 3, 7):
        parts = np.array_split(order, pieces)
        sums = [(coarse[part].sum(), fine[part].sum()) for part in parts]
        assert sum(c for c, _ in sums) + sum(f for _, f in sums) == whole
        one_by_one = [0.0, 0.0]
        for row in order:
            one_by_one[0] += coarse[row]
            one_by_one[1] += fine[row]
        assert sum(one_by_one) == whole
    # math.fsum rounds the true sum once; what is dropped of a number is under n**2 2**-104 of the largest
    slack = len(array) ** 3 * 2.0**-100 * array.max()
    assert abs(whole - math.fsum(values)) <= np.spacing(math.fsum(values)) + slack


@settings(max_examples=30, deadline=None)
@given(seed=st.integers(0, 2**31))
def test_a_table_of_tonnes_does_not_depend_on_its_other_cutoffs_and_groups(seed: int) -> None:
    rng = np.random.default_rng(seed)
    frame = pd.DataFrame(
        {
            "cu_pct": rng.lognormal(0.5, 1.0, 300),
            "dry_tonnes": rng.uniform(0.1, 500, 300),
            "k": rng.integers(0, 9, 300),
        }
    ).assign(wet_tonnes=lambda f: f["dry_tonnes"] * 1.1)
    many = np.unique(np.append(rng.uniform(0, 6, 40), 2.0))

    def row(table: pd.DataFrame) -> list[float]:
        whole = table[(table["cutoff"] == 2.0) & (table["k"] == "all" if "k" in table else True)]
        return whole[["dry_tonnes", "wet_tonnes", "cu_pct", "cu_t"]].iloc[0].to_list()

    plain = {"metals": ["cu_pct"], "cutoff_variable": "cu_pct"}
    single = row(grade_tonnage(frame, cutoffs=[2.0], groups=(), **plain))
    assert single == row(grade_tonnage(frame, cutoffs=many, groups=(), **plain))
    assert single == row(grade_tonnage(frame, cutoffs=many, groups=("k",), **plain))
    shuffled = frame.iloc[rng.permutation(300)]
    assert single == row(grade_tonnage(shuffled, cutoffs=[2.0], groups=(), **plain))
