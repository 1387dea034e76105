"""Joins by depth against a slow and obvious twin."""

from __future__ import annotations

import itertools

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sms_resource.findings import Findings
from sms_resource.samples.intervals import cut_holes, overlap_means, overlap_pairs, valid_intervals
from tests.samples.holes import codes, intervals


@st.composite
def tables(draw: st.DrawFn, overlapping: bool = False) -> pd.DataFrame:
    """Intervals of up to three holes, with gaps; overlapping ones if asked."""
    rows = []
    for hole in draw(st.lists(st.sampled_from(["A", "B", "C"]), unique=True, max_size=3)):
        depths = sorted(draw(st.lists(st.floats(0, 40), min_size=2, max_size=12, unique=True)))
        pairs = [(a, b) for a, b in itertools.pairwise(depths) if b - a > 1e-6]
        if overlapping:
            pairs += [(a, c) for a, c in zip(depths, depths[2:]) if c - a > 1e-6]
        keep = draw(st.lists(st.booleans(), min_size=len(pairs), max_size=len(pairs)))
        rows += [(hole, a, b) for (a, b), wanted in zip(pairs, keep) if wanted]
    return intervals(rows)


def slow_pairs(left: pd.DataFrame, right: pd.DataFrame) -> dict[tuple[int, int], float]:
    """Every pair of rows that shares depth, by two loops."""
    found = {}
    for i, a in enumerate(left.itertuples()):
        for j, b in enumerate(right.itertuples()):
            shared = min(a.to_m, b.to_m) - max(a.from_m, b.from_m)
            if a.hole_id == b.hole_id and shared > 1e-12:
                found[(i, j)] = shared
    return found


@settings(max_examples=60, deadline=None)
@given(tables(overlapping=True), tables(overlapping=True))
def test_overlap_pairs_are_those_of_two_loops(left: pd.DataFrame, right: pd.DataFrame) -> None:
    i, j, shared = overlap_pairs(left, right)
    found = dict(zip(zip(i.tolist(), j.tolist()), shared.tolist()))
    expected = slow_pairs(left, right)
    assert found.keys() == expected.keys()
    assert all(found[key] == pytest.approx(expected[key], abs=1e-12) for key in expected)


@settings(max_examples=60, deadline=None)
@given(tables(), tables(), tables())
def test_pieces_cover_every_row_exactly(a: pd.DataFrame, b: pd.DataFrame, c: pd.DataFrame) -> None:
    pieces = cut_holes([a, b, c])
    assert np.all(pieces.length > 0)
    for table, owner in zip((a, b, c), pieces.rows):
        for row, line in enumerate(table.itertuples()):
            mine = owner == row
            assert pieces.length[mine].sum() == pytest.approx(line.to_m - line.from_m, abs=1e-9)
            assert set(pieces.holes[pieces.hole[mine]]) == {line.hole_id}


def test_depths_that_differ_by_rounding_are_one() -> None:
    a = intervals([("A", 0.0, 0.1 + 0.2)])
    b = intervals([("A", 0.3, 1.0)])
    pieces = cut_holes([a, b])
    assert len(pieces) == 2


def test_overlaps_are_listed() -> None:
    pieces = cut_holes([intervals([("A", 0, 2), ("A", 1, 3), ("A", 4, 5)])])
    assert pieces.overlapping[0].tolist() == [0, 1]


def test_overlap_means_weigh_by_shared_length() -> None:
    grades = intervals([("A", 0, 1, 4.0), ("A", 1, 3, 1.0), ("B", 0, 9, 7.0)], "cu_pct")
    means = overlap_means(intervals([("A", 0.5, 2.0), ("A", 5.0, 6.0)]), grades, ["cu_pct"])
    assert means["cu_pct"].iloc[0] == pytest.approx((0.5 * 4 + 1.0 * 1) / 1.5)
    assert np.isnan(means["cu_pct"].iloc[1])
    assert means["shared_m"].tolist() == [1.5, 0.0]


def test_a_backward_interval_is_a_finding_with_its_row() -> None:
    findings = Findings()
    good = valid_intervals(intervals([("A", 0, 1), ("A", 3, 2), ("A", np.nan, 2)]), "assays", findings)
    assert len(good) == 1
    assert codes(findings) == ["interval-invalid", "interval-invalid"]
    assert [item.row for item in findings] == [3, 4]
