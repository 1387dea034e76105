"""Tables of tonnes on any variable and at any cut-offs, and what stands beside them, as a run makes them."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from sms_resource import StudyError, load_study, run_study
from sms_resource.economics import grade_tonnage
from sms_resource.workflow.report_data import report_data
from sms_resource.workflow.screening import kept
from sms_resource.workflow.stage import run_stages
from sms_resource.workflow.stages import ESTIMATE_STAGES
from sms_resource.workflow.tonnage_tables import levels
from tests.end_to_end.small_study import SmallStudy

METALS = ["cu_pct", "zn_pct", "au_gpt", "ag_gpt"]


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> Any:
    small = SmallStudy(tmp_path_factory.mktemp("curves"))
    small.toml["cutoff"].update(
        steps="all",
        most_steps=60,
        curves={"value": [0.0, 200.0, 400.0], "equivalent": "all", "zn": [1.0, 2.0]},
    )
    small.toml["value"]["metals"]["cu"].update(deduction=0.3, equivalent_payable_pct=80.0)
    study = load_study(small.write())
    outcome = run_stages(ESTIMATE_STAGES, study)
    assert not outcome.findings.has_errors, outcome.findings.errors
    return study, outcome


def test_every_variable_that_is_asked_for_has_its_curve(made: Any) -> None:
    _, outcome = made
    state = outcome.done["classify"]
    table, left = state.grade_tonnage, kept(outcome.done["value"].frame)
    assert list(table["cutoff_variable"].unique()) == [
        "cu_pct",
        "value_per_dry_tonne",
        "equivalent",
        "zn_pct",
    ]
    whole = left["dry_tonnes"].sum()
    for variable, part in table.groupby("cutoff_variable"):
        total = part[part["proposed_class"] == "all"].sort_values("cutoff")
        assert (np.diff(total["dry_tonnes"]) <= 0).all()
        for cutoff, rows in part.groupby("cutoff"):
            classes = rows.loc[rows["proposed_class"] != "all", "dry_tonnes"].sum()
            above = left.loc[left[variable] >= cutoff, "dry_tonnes"].sum()
            assert classes == pytest.approx(above, rel=1e-9, abs=1e-9 * whole)
    assert set(table.loc[table["cutoff_variable"] == "zn_pct", "cutoff"]) == {0.0, 1.0, 2.0}


def test_all_cutoffs_are_the_blocks_own_values_and_thinned_where_they_are_many(made: Any) -> None:
    _, outcome = made
    state = outcome.done["classify"]
    left = kept(outcome.done["value"].frame)
    mine = state.grade_tonnage[state.grade_tonnage["cutoff_variable"] == "cu_pct"]["cutoff"].unique()
    distinct = left["cu_pct"].nunique()
    assert distinct > 60 and 55 <= len(mine) <= 62  # 60, zero and the study's own
    assert set(mine) - {0.0, 4.0} <= set(left["cu_pct"])
    assert {left["cu_pct"].min(), left["cu_pct"].max(), 4.0} <= set(mine)
    told = [item.message for item in outcome.findings if item.code == "cutoffs-thinned"]
    assert len(told) == 2 and f"{distinct:,} distinct values" in told[0]
    every, thinned = levels(left["cu_pct"].to_numpy(), "all", (0.0,), 10**6)
    assert thinned == 0 and set(every) == {0.0, *left["cu_pct"]}
    table = grade_tonnage(left, metals=["cu_pct"], cutoff_variable="cu_pct", cutoffs=every, groups=())
    last = table.iloc[-1]
    assert last["cu_pct"] == pytest.approx(left["cu_pct"].max(), rel=1e-12)  # one block, and its own grade


def test_the_report_gets_what_the_stages_have_made(made: Any) -> None:
    study, outcome = made
    data = report_data(study, outcome.done, outcome.findings, pd.DataFrame(), {}, None)
    value = data.value
    assert list(value.mineable_shape["method"]) == ["cut-off alone", "patches", "full benches"]
    beside = value.beside_support
    assert (beside["block_dry_tonnes"].diff().dropna() <= 0).all() and beside["support_grade"].notna().any()
    assert beside["support_dry_tonnes"].iloc[0] == pytest.approx(beside["block_dry_tonnes"].iloc[0])
    assert (value.by_value["gain"] >= -1e-9).all() and len(value.by_value) > 3
    page = value.equivalent
    assert list(page["table"]["metal"]) == ["cu_pct", "zn_pct"] and page["table"][
        "payable_pct"
    ].to_list() == [80.0, 90.0]
    # (2500 x .85 x .90) / (9000 x .85 x .80), the formula of practice.md with the single payability of copper
    assert page["table"]["factor"].to_list() == pytest.approx([1.0, 2500 * 0.9 / (9000 * 0.8)])
    assert any(
        "payability 80 %" in text and "stated for the equivalent" in text for text in page["statements"]
    )
    assert list(data.classes.before_after)[1:] == [
        "by_criteria_dry_tonnes", "after_rules_dry_tonnes", "smoothed_dry_tonnes", "final_dry_tonnes",
    ]  # fmt: skip
    totals = data.classes.before_after.iloc[:, 1:].sum()
    assert totals.to_numpy() == pytest.approx([outcome.done["value"].frame["dry_tonnes"].sum()] * 4, rel=1e-9)


def test_a_deduction_without_a_single_payability_refuses_the_equivalent(tmp_path: Path) -> None:
    small = SmallStudy(tmp_path)
    small.toml["value"]["metals"]["cu"]["deduction"] = 0.3
    small.toml["cutoff"].update(variable="equivalent")
    result = run_study(load_study(small.write()), None, cache=False)
    said = [item.message for item in result.findings.errors if item.code == "equivalent-refused"]
    assert len(said) == 1 and "payability of Cu varies with grade" in said[0]


@pytest.mark.parametrize(
    ("change", "said"),
    [({"curves": {"pb": "all"}}, "pb"), ({"curves": {"zn": [-1.0]}}, "below zero"), ({"steps": "some"}, "all"),
     ({"steps": [-1.0]}, "below zero")],
)  # fmt: skip
def test_curves_that_cannot_be_are_told(change: dict[str, Any], said: str, tmp_path: Path) -> None:
    small = SmallStudy(tmp_path)
    small.toml["cutoff"].update(change)
    with pytest.raises(StudyError) as raised:
        load_study(small.write())
    assert any(said in f"{item.message} {item.remedy}" for item in raised.value.findings.errors)
