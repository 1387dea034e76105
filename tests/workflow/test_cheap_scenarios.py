"""Scenarios of value and cut-off alone: all in one pass, and each bit for bit what a fresh run gives."""

from __future__ import annotations

import time
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from sms_resource import load_study
from sms_resource.cache import StageCache
from sms_resource.study import Study
from sms_resource.workflow import cheap
from sms_resource.workflow.manifest import input_hashes
from sms_resource.workflow.scenarios import (
    Scenario,
    final_key,
    measures,
    outcome_stages,
    run_scenarios,
    scenario_list,
    stage_row_key,
)
from sms_resource.workflow.stage import Outcome, run_stages
from sms_resource.workflow.state import ValueState
from tests.economics.test_cheap_scenarios import model
from tests.end_to_end.small_study import SmallStudy

PLACE = "value.metals"
CHANGES: list[dict[str, Any]] = [
    {"cutoff.at": 5.0},
    {"cutoff.at": 3.3, "cutoff.variable": "zn"},
    {"cutoff.steps": [0.0, 1.0, 3.0]},
    {f"{PLACE}.cu.price": 7000.0},
    {"cutoff.variable": "value", "cutoff.at": 400.0},
    {"cutoff.variable": "value", "cutoff.at": 250.0, f"{PLACE}.zn.price": 4000.0, "value.royalty_pct": 5.0},
    {"cutoff.variable": "value", "cutoff.at": 250.0, "value.royalty_pct": 20.0, "value.royalty_basis": "net",
     "value.freight_per_wet_tonne": 40.0},
    {"cutoff.variable": "value", "cutoff.at": 200.0, f"{PLACE}.cu.deduction": 0.4},
    {"cutoff.variable": "value", "cutoff.at": 200.0, f"{PLACE}.cu.deduction": 1.0,
     f"{PLACE}.cu.deduction_kind": "minimum", "value.product": {"carrier": "cu", "grade": 24.0, "freight": 80.0}},
    {"cutoff.variable": "value", "cutoff.at": 200.0, f"{PLACE}.cu.recovery_pct": None,
     f"{PLACE}.cu.recovery_by_domain": {"cap": 60.0, "massive": 90.0}},
    {"cutoff.variable": "value", "cutoff.at": 200.0, f"{PLACE}.cu.recovery_pct": None,
     f"{PLACE}.cu.recovery_by_grade": [[1.0, 40.0], [4.0, 80.0], [8.0, 92.0]]},
    {"cutoff.variable": "equivalent", "cutoff.at": 4.5},
    {"cutoff.variable": "equivalent", "cutoff.at": 2.0, "value.equivalent_in": "zn", f"{PLACE}.cu.price": 5000.0},
    {"cutoff.variable": "value", "cutoff.at": 1e6},
]  # fmt: skip


def hashes(study: Study) -> dict[str, str]:
    return {role: entry["sha256"] for role, entry in input_hashes(study).items() if role != "study"}


class Told:
    """Progress that remembers."""

    def __init__(self) -> None:
        self.lines: list[str] = []

    def started(self, name: str, label: str) -> None:
        """Say nothing."""

    def finished(self, name: str, seconds: float, detail: str, from_cache: bool) -> None:
        self.lines.append(f"{name} {detail}")


@pytest.fixture(scope="module")
def study(tmp_path_factory: pytest.TempPathFactory) -> Study:
    made = SmallStudy(tmp_path_factory.mktemp("cheap"))
    made.toml["scenarios"] = {"ledger": False}
    return load_study(made.write())


@pytest.fixture(scope="module")
def store(study: Study, tmp_path_factory: pytest.TempPathFactory) -> StageCache:
    kept = StageCache(tmp_path_factory.mktemp("kept"))
    assert not run_stages(outcome_stages(), study, store=kept, files=hashes(study)).findings.has_errors
    return kept


@pytest.fixture(scope="module")
def blocks(study: Study, store: StageCache) -> pd.DataFrame:
    return run_stages(outcome_stages(), study, store=store, files=hashes(study)).done["value"].frame


def test_every_column_is_that_of_a_fresh_run_bit_for_bit(study: Study, store: StageCache) -> None:
    told = Told()
    wanted = [Scenario(str(n), change, "list") for n, change in enumerate(CHANGES)]
    run = run_scenarios(study, wanted, store=store, files=hashes(study), progress=told)
    assert list(run.table["state"]) == ["run"] * len(CHANGES)
    assert len(told.lines) == 1 and f"{len(CHANGES)} scenarios" in told.lines[0]  # one line for all of them
    for row, change in zip(run.table.to_dict("records"), CHANGES):
        changed = study.with_overrides(change)
        fresh = run_stages(outcome_stages(), changed, store=store, files=hashes(study))
        assert not fresh.findings.has_errors, change
        want = measures(changed, fresh.done)
        assert set(want) <= set(row)
        for name, value in want.items():
            assert np.array_equal(row[name], value, equal_nan=True), (change, name)
    tonnes = run.table["dry_tonnes"]
    assert tonnes.nunique() >= 8 and tonnes.iloc[-1] == 0.0


def test_a_block_on_the_very_edge_is_taken_as_the_stage_takes_it(
    study: Study, store: StageCache, blocks: pd.DataFrame, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A cut-off that is the value of a block itself: the order of the arithmetic decides, so that of the stage is used."""
    priced = study.with_overrides({"cutoff.variable": "value"})
    fresh = run_stages(outcome_stages(), priced, store=store, files=hashes(study))
    worth = np.sort(fresh.done["value"].frame["value_per_dry_tonne"].dropna().unique())
    edges = [float(v) for v in worth[len(worth) // 4 :: len(worth) // 6]]
    used = []
    exact = cheap._worth
    monkeypatch.setattr(cheap, "_worth", lambda *given: used.append(1) or exact(*given))
    rows = cheap.cheap_rows(study, [{"cutoff.variable": "value", "cutoff.at": at} for at in edges], blocks)
    assert len(used) == len(edges) == len(rows)
    for number, at in enumerate(edges):
        changed = study.with_overrides({"cutoff.variable": "value", "cutoff.at": at})
        want = measures(changed, run_stages(outcome_stages(), changed, store=store, files=hashes(study)).done)
        assert rows[number] == want


def test_what_is_not_whole_is_left_to_the_stages_which_tell_why(study: Study, store: StageCache) -> None:
    changes: list[dict[str, Any]] = [
        {"cutoff.variable": "value", f"{PLACE}.cu.price": None},
        {"cutoff.variable": "equivalent", f"{PLACE}.cu.deduction": 1.0},
        {"cutoff.variable": "value", f"{PLACE}.cu.recovery_pct": None,
         f"{PLACE}.cu.recovery_by_domain": {"massive": 90.0}},
        {"cutoff.at": -1.0},
        {"density.factor": 1.05, "cutoff.at": 5.0},
        {"cutoff.variable": "value", "cutoff.at": 100.0},
    ]  # fmt: skip
    blocks = run_stages(outcome_stages(), study, store=store, files=hashes(study)).done["value"].frame
    assert set(cheap.cheap_rows(study, changes, blocks)) == {5}
    run = run_scenarios(
        study, [Scenario(str(n), c, "list") for n, c in enumerate(changes)], store=store, files=hashes(study)
    )
    assert list(run.table["state"]) == ["not run"] * 4 + ["run"] * 2
    said = " ".join(item.message for item in run.findings)
    for words in ("no price", "payability of Cu varies", "no recovery in cap"):
        assert words in said, words


def test_a_metal_that_is_not_paid_may_be_missing_from_the_blocks(tmp_path: Path) -> None:
    made = SmallStudy(tmp_path)
    made.toml["metals"] = {"estimate": ["cu", "au"], "summarise": []}
    made.toml["value"]["metals"]["zn"] = {"payable_pct": 0.0}
    made.toml["cutoff"]["variable"] = "equivalent"
    made.toml["scenarios"] = {"ledger": False}
    small = load_study(made.write())
    outcome = run_stages(outcome_stages(), small)
    assert not outcome.findings.has_errors, outcome.findings.errors
    frame = outcome.done["value"].frame
    np.testing.assert_allclose(frame["equivalent"], frame["cu_pct"], rtol=1e-12)
    assert frame["value_per_dry_tonne"].notna().all()


@pytest.mark.benchmark
@pytest.mark.parametrize("variable", ["value", "equivalent", "cu"])
def test_a_thousand_scenarios_of_a_study_of_a_million_blocks(
    variable: str, tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    """As the command runs them: overrides checked and resolved, one pass, one tidy table."""
    made = SmallStudy(tmp_path)
    prices = [8000.0 + 50.0 * n for n in range(40)]
    cuts = (
        [1.0 + 0.1 * n for n in range(25)] if variable != "value" else [100.0 + 10.0 * n for n in range(25)]
    )
    made.toml["cutoff"].update(variable=variable, at=cuts[3])
    made.toml["scenarios"] = {
        "ledger": False,
        "grid": [{"label": "g", "vary": {f"{PLACE}.cu.price": prices, "cutoff.at": cuts}}],
    }
    large = load_study(made.write())
    frame = model(1_000_000).assign(proposed_class="inferred", kept_share=1.0, volume_m3=4.0)
    frame.loc[::3, "proposed_class"] = "indicated"
    kept = StageCache(tmp_path / "cache")
    # The study's own stages are not part of the measure: their output is at hand.
    base = Outcome(done={"value": ValueState(frame)})
    monkeypatch.setattr("sms_resource.workflow.scenarios.run_stages", lambda *_, **__: base)
    kept.put(stage_row_key(final_key(large, {})), {"dry_tonnes": float(frame["dry_tonnes"].sum())})
    run_scenarios(large, scenario_list(large)[:2], store=kept, files={})  # compiles
    begun, used = time.perf_counter(), time.process_time()
    run = run_scenarios(large, scenario_list(large), store=kept, files={})
    took, used = time.perf_counter() - begun, time.process_time() - used
    with capsys.disabled():
        print(
            f"\n1000 scenarios, 1 000 000 blocks, cut on {variable}: {took:.1f} s, {used:.1f} s of processor"
        )
    assert (run.table["state"] == "run").all() and len(run.table) == 1000
    assert used < 10.0
