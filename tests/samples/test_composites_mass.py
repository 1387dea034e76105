"""Mass balance of compositing and the order of the treatments of lost core, for any holes (property tests)."""

from __future__ import annotations

import itertools

import numpy as np
import pandas as pd
import pytest
from hypothesis import Phase, given, settings
from hypothesis import strategies as st

from sms_resource.samples.composites import Composites, composite
from tests.samples.holes import intervals, paths

HOLES = ("A", "B", "C")
METALS = ["cu_pct", "au_gpt"]
PATHS = paths(*HOLES, length=30.0)
# shrinking a failure of three tables takes minutes: the case as found is small enough to read
PHASES = (Phase.explicit, Phase.reuse, Phase.generate)


def _stretches(draw: st.DrawFn, hole: str, most: int) -> list[tuple[str, float, float]]:
    depths = sorted(draw(st.lists(st.floats(0, 30), min_size=2, max_size=most, unique=True)))
    pairs = [(hole, a, b) for a, b in itertools.pairwise(depths) if b - a > 1e-3]
    keep = draw(st.lists(st.booleans(), min_size=len(pairs), max_size=len(pairs)))
    return [pair for pair, wanted in zip(pairs, keep) if wanted]


grade = st.one_of(st.floats(0.01, 40), st.just(float("nan")))


@st.composite
def drilled(draw: st.DrawFn) -> tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame]:
    """Assays, runs and domains of up to three holes: gaps everywhere, grades and recoveries of any kind."""
    samples, cores, logs = [], [], []
    for hole in HOLES[: draw(st.integers(1, 3))]:
        samples += [(*row, draw(grade), draw(grade)) for row in _stretches(draw, hole, 14)]
        cores += [
            (*row, draw(st.sampled_from([0.0, 1.0]) | st.floats(0, 1.05)))
            for row in _stretches(draw, hole, 9)
        ]
        logs += [(*row, draw(st.sampled_from(["cap", "massive"]))) for row in _stretches(draw, hole, 6)]
    runs = intervals(cores, "share")
    runs["recovered_length_m"] = runs["share"].astype(float) * (runs["to_m"] - runs["from_m"])
    runs["recovery_pct"] = 100.0 * runs["share"].astype(float)
    return intervals(samples, *METALS), runs, intervals(logs, "domain")


def union_length(*tables: pd.DataFrame) -> float:
    """Length of hole that any table covers, by sweeping sorted intervals."""
    total = 0.0
    for hole in HOLES:
        spans = sorted((r.from_m, r.to_m) for t in tables for r in t.itertuples() if r.hole_id == hole)
        reach = -np.inf
        for start, end in spans:
            total += max(0.0, end - max(start, reach))
            reach = max(reach, end)
    return total


def make(data: tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame], **options: object) -> Composites:
    assays, runs, domains = data
    return composite(assays, runs, domains, PATHS, metals=METALS, **options)  # type: ignore[arg-type]


rests = st.sampled_from(["merge", "keep", "spread"])
sizes = st.sampled_from([(1.0, 0.5), (2.0, 1.0), (0.7, 0.0), (3.0, 3.0)])


@settings(phases=PHASES, max_examples=50, deadline=None)
@given(drilled(), rests, sizes)
def test_length_metal_and_recovered_length_are_kept(
    data: tuple, rest: str, size: tuple[float, float]
) -> None:
    assays, runs, domains = data
    made = make(data, short_rest=rest, length_m=size[0], shortest_m=size[1], weighting="length")
    frame = made.frame
    assert frame["length_m"].sum() == pytest.approx(union_length(assays, runs, domains), abs=1e-9)
    assert frame["recovered_length_m"].sum() == pytest.approx(runs["recovered_length_m"].sum(), abs=1e-9)
    for metal in METALS:
        length = assays["to_m"] - assays["from_m"]
        before = (assays[metal] * length).sum()
        after = (frame[metal] * made.metal_weights[metal]).sum()
        assert after == pytest.approx(before, rel=1e-11, abs=1e-9)
        assert made.metal_weights[metal].sum() == pytest.approx(length[assays[metal].notna()].sum(), abs=1e-9)
    known = made.audit["difference"].dropna()
    assert known.abs().max() < 1e-9


@settings(phases=PHASES, max_examples=30, deadline=None)
@given(drilled(), sizes)
def test_what_is_dropped_is_counted(data: tuple, size: tuple[float, float]) -> None:
    made = make(data, short_rest="drop", length_m=size[0], shortest_m=size[1], least_recovery_pct=30.0)
    assert made.audit["difference"].dropna().abs().max() < 1e-9
    whole = made.audit.set_index("quantity").loc["length_m"]
    assert made.frame["length_m"].sum() == pytest.approx(whole["in_composites"], abs=1e-9)


@settings(phases=PHASES, max_examples=30, deadline=None)
@given(drilled(), rests, sizes)
def test_composites_never_cross_a_contact_or_each_other(
    data: tuple, rest: str, size: tuple[float, float]
) -> None:
    domains = data[2]
    frame = make(data, short_rest=rest, length_m=size[0], shortest_m=size[1]).frame
    for hole, part in frame.groupby("hole_id"):
        start, end = part["from_m"].to_numpy(), part["to_m"].to_numpy()
        assert np.all(start[1:] >= end[:-1] - 1e-9)
        for line in domains.loc[domains["hole_id"] == hole].itertuples():
            for depth in (line.from_m, line.to_m):
                inside = part.loc[(part["from_m"] < depth - 1e-9) & (part["to_m"] > depth + 1e-9)]
                # a boundary of the log inside a composite must have the same domain on both sides
                assert (inside["domain"] == line.domain).all()


@settings(phases=PHASES, max_examples=25, deadline=None)
@given(drilled(), st.floats(0.0, 0.01), sizes)
def test_floor_is_never_above_the_default(data: tuple, background: float, size: tuple[float, float]) -> None:
    """floor = (sum r g + L b) / (sum r + L) with lost length L: at most the default wherever b <= every grade."""
    options = {"length_m": size[0], "shortest_m": size[1]}
    default = make(data, **options).frame
    floor = make(data, lost_core="background", background=dict.fromkeys(METALS, background), **options).frame
    upper = make(data, lost_core="represented", **options).frame
    for metal in METALS:
        both = floor[metal].notna() & default[metal].notna()
        assert (floor.loc[both, metal] <= default.loc[both, metal] * (1 + 1e-12) + 1e-12).all()
        # a composite with a default grade has one under every treatment
        assert not (default[metal].notna() & (floor[metal].isna() | upper[metal].isna())).any()


@settings(phases=PHASES, max_examples=25, deadline=None)
@given(
    st.lists(st.tuples(st.floats(0.05, 1.5), st.floats(0.1, 30.0)), min_size=1, max_size=12),
    st.lists(st.tuples(st.floats(0.1, 3.0), st.floats(0.0, 1.0)), min_size=1, max_size=6),
    st.floats(0.0, 0.1),
)
def test_floor_is_never_above_upper_where_runs_are_sampled_whole(
    samples: list[tuple[float, float]], cores: list[tuple[float, float]], background: float
) -> None:
    """floor = (sum r g + sum (l - r) b) / sum l, upper = sum l g / sum l: apart by (l - r)(g - b) >= 0."""
    edges = np.cumsum([0.0, *(length for length, _ in samples)])
    assays = intervals([("A", a, b, g, g) for a, b, (_, g) in zip(edges, edges[1:], samples)], *METALS)
    ends = np.minimum(np.cumsum([0.0, *(length for length, _ in cores)]), edges[-1])
    ends[-1] = edges[-1]
    rows = [("A", a, b, 100 * share) for a, b, (_, share) in zip(ends, ends[1:], cores) if b - a > 1e-6]
    data = (assays, intervals(rows, "recovery_pct"), intervals([], "domain"))
    floor = make(data, lost_core="background", background=dict.fromkeys(METALS, background)).frame
    upper = make(data, lost_core="represented").frame
    both = floor["cu_pct"].notna() & upper["cu_pct"].notna()
    assert both.any()
    assert (floor.loc[both, "cu_pct"] <= upper.loc[both, "cu_pct"] * (1 + 1e-12)).all()


@settings(phases=PHASES, max_examples=30, deadline=None)
@given(st.lists(st.tuples(st.floats(0.05, 1.0), st.floats(0.1, 30.0)), min_size=1, max_size=8))
def test_default_is_never_above_upper_where_poor_recovery_is_rich(pairs: list[tuple[float, float]]) -> None:
    """Chebyshev's sum inequality: if grade falls as recovery rises, weighing by recovery lowers the mean."""
    recovery = sorted(share for share, _ in pairs)
    grades = sorted((g for _, g in pairs), reverse=True)
    step = 1.0 / len(pairs)
    edges = np.arange(len(pairs) + 1) * step
    assays = intervals([("A", a, b, g, g) for a, b, g in zip(edges, edges[1:], grades)], *METALS)
    runs = intervals([("A", a, b, 100 * r) for a, b, r in zip(edges, edges[1:], recovery)], "recovery_pct")
    data = (assays, runs, intervals([], "domain"))
    default, upper = make(data).frame, make(data, lost_core="represented").frame
    assert len(default) == len(upper) == 1
    assert default["cu_pct"].iloc[0] <= upper["cu_pct"].iloc[0] * (1 + 1e-12)


@settings(phases=PHASES, max_examples=15, deadline=None)
@given(
    st.lists(st.tuples(st.floats(0.05, 1.5), st.floats(0.1, 30.0)), min_size=1, max_size=12),
    st.floats(0.01, 1.0),
)
def test_uniform_recovery_makes_default_and_upper_equal(
    samples: list[tuple[float, float]], share: float
) -> None:
    edges = np.cumsum([0.0, *(length for length, _ in samples)])
    assays = intervals([("A", a, b, g, g) for a, b, (_, g) in zip(edges, edges[1:], samples)], *METALS)
    data = (assays, intervals([("A", 0.0, edges[-1], 100 * share)], "recovery_pct"), intervals([], "domain"))
    default, upper = make(data).frame, make(data, lost_core="represented").frame
    assert default["cu_pct"].to_numpy() == pytest.approx(upper["cu_pct"].to_numpy(), rel=1e-12)


@settings(phases=PHASES, max_examples=25, deadline=None)
@given(drilled(), st.sampled_from(["unknown", "represented", "background", "neighbour_mean"]))
def test_grades_stay_within_the_samples(data: tuple, treatment: str) -> None:
    frame = make(data, lost_core=treatment).frame
    for metal in METALS:
        values, samples = frame[metal].dropna(), data[0][metal].dropna()
        if len(values) and len(samples):
            low = 0.0 if treatment == "background" else samples.min()
            assert values.max() <= samples.max() * (1 + 1e-12)
            assert values.min() >= low * (1 - 1e-12)


@settings(phases=PHASES, max_examples=20, deadline=None)
@given(drilled())
def test_the_order_of_the_rows_does_not_matter(data: tuple) -> None:
    shuffled = tuple(table.iloc[::-1].reset_index(drop=True) for table in data)
    one, two = make(data, lost_core="neighbour_mean").frame, make(shuffled, lost_core="neighbour_mean").frame
    pd.testing.assert_frame_equal(one, two, rtol=1e-9, atol=1e-12)
