"""Overrides, tornado, heat table, decision ledger and the waterfall between two runs."""

from __future__ import annotations

import itertools

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sms_resource.economics import (
    Decision,
    ScenarioError,
    build_ledger,
    difference_waterfall,
    expand_overrides,
    one_at_a_time,
    tornado_table,
)
from sms_resource.economics.ledger import as_text


def test_lists_and_grids_expand() -> None:
    got = expand_overrides(
        [
            {"label": "rich", "set": {"value": {"metals": {"cu": {"price": 5.0}}}, "cutoff.at": 2}},
            {"set": {"a.b": True}},
        ],
        [{"label": "g", "vary": {"cutoff.at": [1.0, 2.0], "body": {"base_shift_m": [-1, 0, 1]}}}],
    )
    assert got[0] == ("rich", {"value.metals.cu.price": 5.0, "cutoff.at": 2})
    assert got[1] == ("a.b=True", {"a.b": True})
    assert len(got) == 8
    assert got[2] == ("g: cutoff.at=1.0, body.base_shift_m=-1", {"cutoff.at": 1.0, "body.base_shift_m": -1})
    pairs = [tuple(keys.values()) for _, keys in got[2:]]
    assert pairs == list(itertools.product([1.0, 2.0], [-1, 0, 1]))


@pytest.mark.parametrize(
    ("items", "grids", "said"),
    [
        ([{"label": "x", "set": {}}], [], "sets nothing"),
        ([], [{"label": "g"}], "varies nothing"),
        ([], [{"vary": {"a": []}}], "list of values"),
        ([], [{"vary": {"a": 3}}], "list of values"),
        ([{"label": "x", "set": {"a": 1}}, {"label": "x", "set": {"a": 2}}], [], "two scenarios"),
        ([], [{"vary": {"a": [1, 1]}}], "two scenarios"),
    ],
)
def test_scenarios_that_make_no_sense_are_named(items: list, grids: list, said: str) -> None:
    with pytest.raises(ScenarioError, match=said):
        expand_overrides(items, grids)


def test_one_at_a_time() -> None:
    assert one_at_a_time({"a.b": [1, 2], "c": ["x"]}) == [
        ("a.b=1", {"a.b": 1}), ("a.b=2", {"a.b": 2}), ("c=x", {"c": "x"}),
    ]  # fmt: skip


def test_tornado_ranks_by_swing() -> None:
    results = pd.DataFrame(
        {
            "key": ["density", "density", "base", "base", "cut", "none"],
            "label": ["d-", "d+", "b-", "b+", "c1", "n"],
            "dry_tonnes": [90.0, 108.0, 70.0, 95.0, 130.0, 100.0],
            "cu_pct": [5.0, 5.0, 5.2, 4.9, 6.0, np.nan],
        }
    )
    table = tornado_table(results, {"dry_tonnes": 100.0, "cu_pct": 5.0}, ["dry_tonnes", "cu_pct"])
    tonnes = table[table.measure == "dry_tonnes"]
    # widths by hand: base shift 70 to 100 (30), cut 100 to 130 (30), density 90 to 108 (18), none 0
    assert tonnes.key.tolist() == ["base", "cut", "density", "none"]
    assert tonnes["rank"].tolist() == [1, 2, 3, 4]
    first = tonnes.iloc[0]
    assert (first.low, first.high, first.low_label, first.high_label) == (70.0, 100.0, "b-", "base")
    assert (first.low_pct, first.high_pct, first.swing_pct) == pytest.approx((-30.0, 0.0, 30.0))
    grades = table[table.measure == "cu_pct"]
    assert grades.key.iloc[0] == "cut" and grades.set_index("key").swing_pct["none"] == 0.0
    assert tornado_table(results.head(0), {"dry_tonnes": 1.0}, ["dry_tonnes"]).empty


DECISIONS = [
    Decision("composites.length_m", 1.0, "default", "usual", "", "length of a composite", (0.5, 2.0)),
    Decision("density.method", "measured_mean", "choice", "30 densities", "A. Person", "", ("regression",)),
    Decision("seed", 1, "default"),
]


def test_ledger_tells_what_the_alternatives_do() -> None:
    base = {"dry_tonnes": 1000.0, "cu_pct": 5.0}
    results = {
        ("composites.length_m", "0.5"): {"dry_tonnes": 1000.0, "cu_pct": 5.1},
        ("density.method", "regression"): {"dry_tonnes": 880.0, "cu_pct": 5.0},
    }
    table = build_ledger(DECISIONS, results, base, ["dry_tonnes", "cu_pct"])
    assert table.key.tolist() == ["density.method", "composites.length_m", "composites.length_m", "seed"]
    first = table.iloc[0]
    assert (first.dry_tonnes_change, first.dry_tonnes_pct, first.cu_pct_change) == pytest.approx(
        (-120.0, -12.0, 0.0)
    )
    assert (first.reason, first.who, first.widest_pct) == ("30 densities", "A. Person", 12.0)
    assert table.state.tolist() == ["run", "run", "not run", "no alternative"]
    assert table.cu_pct_pct[1] == pytest.approx(2.0)
    assert table.reason.tolist()[-1] == "no reason given" and table.who.tolist()[-1] == "not named"
    assert build_ledger([], {}, base, ["dry_tonnes"]).empty
    with pytest.raises(ValueError, match="origin"):
        Decision("a", 1, "guess")


def measures(state: dict[str, object]) -> dict[str, float]:
    """Volume x density x share above the cut-off: decisions that act together."""
    volume = 100.0 + 10.0 * float(state.get("base_shift", 0.0))
    dry = volume * float(state["density"]) * (1.0 - 0.1 * float(state["cutoff"]))
    return {"dry_tonnes": dry, "cu_pct": 4.0 + float(state["cutoff"])}


def test_waterfall_between_two_runs_by_hand() -> None:
    before = {"density": 3.0, "cutoff": 1.0, "note": "same"}
    after = {"density": 3.3, "cutoff": 2.0, "base_shift": 1.0, "note": "same"}
    table = difference_waterfall(
        before, after, measures, ["dry_tonnes", "cu_pct"], order=["base_shift", "density"]
    )
    assert table.key.tolist() == ["first run", "base_shift", "density", "cutoff", "second run"]
    # by hand: 270 -> 297 (+27) -> 326.7 (+29.7) -> 290.4 (-36.3)
    assert table.dry_tonnes.tolist() == pytest.approx([270.0, 297.0, 326.7, 290.4, 290.4])
    assert table.dry_tonnes_step.tolist()[1:4] == pytest.approx([27.0, 29.7, -36.3])
    assert table.dry_tonnes_alone.tolist()[1:4] == pytest.approx([27.0, 27.0, -30.0])
    assert table.dry_tonnes_last.tolist()[1:4] == pytest.approx([26.4, 26.4, -36.3])
    assert table.dry_tonnes_step.iloc[-1] == pytest.approx(20.4)
    assert table["from"].tolist()[1] == "not given" and table.to.tolist()[2] == "3.3"
    same = difference_waterfall(before, dict(before), measures, ["dry_tonnes"])
    assert same.key.tolist() == ["first run", "second run"] and same.dry_tonnes_step.iloc[-1] == 0.0


@settings(max_examples=50, deadline=None)
@given(
    first=st.tuples(st.floats(2, 4), st.floats(0, 5), st.floats(-3, 3)),
    second=st.tuples(st.floats(2, 4), st.floats(0, 5), st.floats(-3, 3)),
    order=st.permutations(["density", "cutoff", "base_shift"]),
)
def test_waterfall_steps_sum_to_the_difference(first: tuple, second: tuple, order: list[str]) -> None:
    names = ("density", "cutoff", "base_shift")
    before, after = dict(zip(names, first)), dict(zip(names, second))
    table = difference_waterfall(before, after, measures, ["dry_tonnes"], order=order)
    want = measures(after)["dry_tonnes"] - measures(before)["dry_tonnes"]
    assert table.dry_tonnes_step.iloc[1:-1].sum() == pytest.approx(want, abs=1e-9)
    assert [k for k in order if before[k] != after[k]] == table.key.tolist()[1:-1]


def test_text_of_values() -> None:
    assert [as_text(v) for v in (None, True, 1.50, [1, 2.0], (), {"a": 1}, "x")] == [
        "not given", "yes", "1.5", "1, 2", "none", "a: 1", "x",
    ]  # fmt: skip
