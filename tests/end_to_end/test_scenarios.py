"""Scenarios: each is what a fresh run of the changed study would give, and only what it touches is run again."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import pandas as pd
import pytest
from typer.testing import CliRunner

import sms_resource.workflow.publish as publish
from sms_resource import StudyError, load_study, run_study
from sms_resource.cache import StageCache
from sms_resource.cli import app
from sms_resource.study import Study
from sms_resource.workflow.manifest import input_hashes
from sms_resource.workflow.publish import ledger_table
from sms_resource.workflow.scenario_tables import effects, tables
from sms_resource.workflow.scenarios import (
    RecentStages,
    Scenario,
    ledger_scenarios,
    measures,
    outcome_stages,
    run_scenarios,
    scenario_list,
)
from sms_resource.workflow.stage import run_stages
from tests.end_to_end.small_study import SmallStudy

NAMES = [stage.name for stage in outcome_stages()]


def hashes(study: Study) -> dict[str, str]:
    return {role: entry["sha256"] for role, entry in input_hashes(study).items() if role != "study"}


@pytest.fixture(scope="module")
def study(tmp_path_factory: pytest.TempPathFactory) -> Study:
    made = SmallStudy(tmp_path_factory.mktemp("scenarios"))
    made.toml["scenarios"] = {"ledger": False}
    return load_study(made.write())


@pytest.fixture(scope="module")
def store(study: Study, tmp_path_factory: pytest.TempPathFactory) -> StageCache:
    """A cache that holds every stage of the study as it is."""
    kept = StageCache(tmp_path_factory.mktemp("kept"))
    outcome = run_stages(outcome_stages(), study, store=kept, files=hashes(study))
    assert not outcome.findings.has_errors
    return kept


@pytest.fixture
def light(monkeypatch: pytest.MonkeyPatch) -> None:
    """Results without figures and page, which other tests make."""
    monkeypatch.setattr(publish, "write_report_files", lambda *_: [])


# What each change must run again; what comes before it in the house is taken as it was.
CHANGES: list[tuple[dict[str, Any], str]] = [
    ({"cutoff.at": 5.0}, "value"),
    ({"value.metals.cu.price": 7000.0}, "value"),
    ({"screens.vent_buffer_m": 12.0}, "propose"),
    ({"search.most_samples": 8}, "estimate"),
    ({"variograms.range_factor": 0.7}, "variograms"),
    ({"top_cuts.apply": "given", "top_cuts.cuts": {"massive": {"cu": 6.0}}}, "variograms"),
    ({"density.factor": 1.05}, "density"),
    ({"body.base_shift_m": -1.0}, "body"),
    ({"composites.lost_core": "background"}, "composite"),
]


@pytest.mark.parametrize(("change", "first"), CHANGES, ids=[" ".join(change) for change, _ in CHANGES])
def test_only_what_a_change_touches_is_run_again(
    change: dict[str, Any], first: str, study: Study, store: StageCache
) -> None:
    outcome = run_stages(
        outcome_stages(), study.with_overrides(change), store=RecentStages(store), files=hashes(study)
    )
    again = [record.name for record in outcome.records if not record.from_cache]
    assert not set(again) & set(NAMES[: NAMES.index(first)])
    # Tonnes above a cut-off on a metal are what they were, whatever it sells for.
    assert first in again and ("classify" in again) != ("value.metals.cu.price" in change)


def test_rows_of_scenarios_are_those_of_fresh_runs(study: Study, store: StageCache) -> None:
    chosen = [CHANGES[index][0] for index in (0, 1, 5, 6, 7)]
    run = run_scenarios(
        study,
        [Scenario(str(n), change, "list") for n, change in enumerate(chosen)],
        store=store,
        files=hashes(study),
    )
    assert not run.findings.has_errors and list(run.table["state"]) == ["run"] * len(chosen)
    for row, change in zip(run.table.to_dict("records"), chosen):
        fresh_study = study.with_overrides(change)
        fresh = run_stages(outcome_stages(), fresh_study, threads=1)
        for name, value in measures(fresh_study, fresh.done).items():
            assert row[name] == value, (change, name)
        # the blocks as well, not only their sums
        quick = run_stages(outcome_stages(), fresh_study, store=RecentStages(store), files=hashes(study))
        pd.testing.assert_frame_equal(quick.done["value"].frame, fresh.done["value"].frame, check_exact=True)
    assert run.base == measures(
        study, run_stages(outcome_stages(), study, store=store, files=hashes(study)).done
    )


def test_a_scenario_is_what_a_study_file_with_that_value_gives(
    study: Study, store: StageCache, tmp_path: Path
) -> None:
    other = SmallStudy(tmp_path)
    other.toml["density"] = {"factor": 1.05}
    other.toml["cutoff"]["at"] = 5.0
    written = load_study(other.write())
    made = measures(written, run_stages(outcome_stages(), written).done)
    run = run_scenarios(
        study,
        [Scenario("both", {"density.factor": 1.05, "cutoff.at": 5.0}, "list")],
        store=store,
        files=hashes(study),
    )
    row = run.table.iloc[0]
    assert {name: row[name] for name in made} == made


def test_rows_are_kept_and_not_run_twice(
    study: Study, store: StageCache, monkeypatch: pytest.MonkeyPatch
) -> None:
    wanted = [Scenario("light", {"density.factor": 0.97}, "list")]
    first = run_scenarios(study, wanted, store=store, files=hashes(study)).table
    monkeypatch.setattr("sms_resource.workflow.scenarios.run_stages", None)
    second = run_scenarios(study, wanted, store=store, files=hashes(study)).table
    pd.testing.assert_frame_equal(first, second, check_exact=True)


def test_one_domain_for_all_uses_the_samples_of_all(study: Study, store: StageCache) -> None:
    """The alternative to layers is one domain of all sulphide, not the first layer throughout."""
    run = run_scenarios(
        study, [Scenario("single", {"domains.layout": "single"}, "list")], store=store, files=hashes(study)
    )
    row = run.table.iloc[0]
    assert row["state"] == "run"
    assert abs(row["dry_tonnes"] / run.base["dry_tonnes"] - 1.0) < 0.35
    assert abs(row["cu_pct"] / run.base["cu_pct"] - 1.0) < 0.2


def test_a_wrong_override_is_told_and_the_others_are_run(study: Study, store: StageCache) -> None:
    wanted = [
        Scenario("wrong key", {"density.faktor": 1.1}, "list"),
        Scenario("wrong value", {"composites.lost_core": "ignore"}, "list"),
        Scenario("no sense", {"composites.shortest_m": 9.0}, "list"),
        Scenario("no blocks", {"blocks.origin_m": [0.0, 0.0, 0.0]}, "list"),
        Scenario("sound", {"cutoff.at": 5.0}, "list"),
    ]
    run = run_scenarios(study, wanted, store=store, files=hashes(study))
    assert list(run.table["state"]) == ["not run"] * 4 + ["run"]
    told = [item for item in run.findings if item.code == "scenario-failed"]
    assert [item.message.split(":")[0] for item in told] == [
        "wrong key",
        "wrong value",
        "no sense",
        "no blocks",
    ]
    assert "factor" in told[0].remedy


@pytest.mark.parametrize(
    "scenarios",
    [
        {
            "single": [
                {"label": "a", "change": {"cutoff.at": 1.0}},
                {"label": "a", "change": {"cutoff.at": 2.0}},
            ]
        },
        {"single": [{"label": "a", "change": {}}]},
        {"grid": [{"label": "g", "vary": {"cutoff.at": []}}]},
        {"single": [{"label": "a", "change": {"density.faktor": 1.1}}]},
        {"grid": [{"label": "g", "vary": {"cutoff.at": [1.0, "two"]}}]},
    ],
    ids=["label twice", "nothing changed", "empty list", "unknown key", "wrong value"],
)
def test_a_list_of_scenarios_that_makes_no_sense_is_an_error(
    scenarios: dict[str, Any], tmp_path: Path
) -> None:
    made = SmallStudy(tmp_path / "study")
    made.toml["scenarios"] = {"ledger": False, **scenarios}
    done = CliRunner().invoke(
        app, ["scenarios", str(made.write()), "--out", str(tmp_path / "results"), "--json"]
    )
    assert done.exception is None or isinstance(done.exception, SystemExit), done.exception
    assert done.exit_code == 1
    (item,) = json.loads(done.stdout)
    assert (item["severity"], item["code"], item["file"]) == ("error", "scenario-invalid", "study.toml")
    lines = (tmp_path / "study" / "study.toml").read_text(encoding="utf-8").splitlines()
    headers = [line for line in lines[: item["row"]] if line.startswith("[")]
    assert headers[-1].strip("[]").startswith("scenarios")  # the row lies in that part of the study
    assert not (tmp_path / "results").exists()


def test_effects_of_alternatives_stand_in_the_ledger(study: Study, store: StageCache) -> None:
    keys = ("density.factor", "screens.vent_buffer_m")
    wanted = [item for item in ledger_scenarios(study) if item.group in keys]
    assert len(wanted) >= 4
    run = run_scenarios(study, wanted, store=store, files=hashes(study))
    said = effects(study, run)
    table = ledger_table(study, {"effects": said}).set_index("key")
    assert "1.05: dry t +5.0 %" in table.loc["density.factor", "effect"]
    assert "0.95: dry t -5.0 %" in table.loc["density.factor", "effect"]
    # 50 m round the vent is more than the whole body
    assert "50: dry t -100.0 %" in table.loc["screens.vent_buffer_m", "effect"]
    assert table.loc["composites.length_m", "effect"] == ""


def test_the_ledger_tells_what_an_alternative_does_to_the_classes(study: Study, store: StageCache) -> None:
    """Without a floor every downgraded Inferred block is unclassified: no tonne moves, but a class does."""
    (wanted,) = [item for item in ledger_scenarios(study) if item.group == "classes.floor"]
    run = run_scenarios(study, [wanted], store=store, files=hashes(study))
    row, base = run.table.iloc[0], run.base
    assert (
        row["dry_tonnes"] == base["dry_tonnes"] and row["inferred_dry_tonnes"] < base["inferred_dry_tonnes"]
    )
    assert "Inferred dry t -" in effects(study, run)["classes.floor"]


def test_the_report_holds_every_grid_and_what_was_moved_alone(study: Study, store: StageCache) -> None:
    made = study.with_overrides({})
    grids = [{"label": "one", "vary": {"cutoff.at": [2.0, 6.0], "value.metals.cu.price": [7000.0, 9000.0]}},
             {"label": "two", "vary": {"cutoff.at": [2.0, 5.0], "density.factor": [0.9, 1.1]}}]  # fmt: skip
    section = type(study.config.scenarios)(
        ledger=False, grid=grids, single=[{"label": "low cut", "change": {"cutoff.at": 3.0}}]
    )
    made = replace(made, config=made.config.model_copy(update={"scenarios": section}))
    run = run_scenarios(made, scenario_list(made), store=store, files=hashes(study))
    said = tables(made, run)
    assert [grid["label"] for grid in said["heat_maps"]] == ["one", "two"]
    assert said["heat_maps"][0]["x"] == "value.metals.cu.price (US$/t)"
    assert said["heat_maps"][1]["y"] == "cutoff.at (Cu, %)"
    frame = said["heat_maps"][1]["frame"].set_index(["y", "x"])
    assert frame.loc[("2", "1.1"), "dry_tonnes"] / frame.loc[("2", "0.9"), "dry_tonnes"] == pytest.approx(
        11 / 9
    )
    tornado = said["tornado"]
    assert list(tornado["measure"]) == ["dry_tonnes", "cu_pct", "cu_t"] and set(tornado["decision"]) == {
        "cutoff.at"
    }
    assert (tornado["high_label"].iloc[0], tornado["low_label"].iloc[0]) == ("3", "base")


def test_the_command_runs_lists_and_grids(tmp_path: Path, light: None) -> None:
    made = SmallStudy(tmp_path / "study")
    made.toml["scenarios"] = {
        "ledger": False,
        "single": [{"label": "poor", "change": {"value.metals.cu.price": 5000.0}}],
        "grid": [{"label": "g", "vary": {"cutoff.at": [2.0, 6.0], "density.factor": [0.9, 1.0]}}],
    }
    out = tmp_path / "results"
    done = CliRunner().invoke(app, ["scenarios", str(made.write()), "--out", str(out), "--quiet"])
    assert done.exit_code == 0, done.output
    table = pd.read_csv(out / "scenarios.csv")
    assert list(table["origin"]) == ["list"] + ["grid"] * 4
    assert (table["state"] == "run").all()
    grid = table[table["origin"] == "grid"].copy()
    grid["at"] = grid["changes"].map(lambda text: json.loads(text)["cutoff.at"])
    grid["factor"] = grid["changes"].map(lambda text: json.loads(text)["density.factor"])
    tonnes = grid.pivot_table(index="at", columns="factor", values="dry_tonnes")
    assert (tonnes[0.9] / tonnes[1.0]).to_list() == pytest.approx([0.9, 0.9], rel=1e-9)
    assert (tonnes.loc[6.0] < tonnes.loc[2.0]).all()
    assert json.loads((out / "manifest.json").read_text())["scenarios"] is True


def test_overrides_of_nothing_that_is_known_are_errors(study: Study) -> None:
    for change in (
        {"nothing.at_all": 1},
        {"cutoff.at.more": 1},
        {"metals.estimate": ["xx"]},
        {"cutoff.at": "two"},
    ):
        with pytest.raises(StudyError):
            study.with_overrides(change)


def test_what_changed_since_another_run_adds_up_and_names_decisions(
    tmp_path: Path, light: None, store: StageCache
) -> None:
    made = SmallStudy(tmp_path / "study")
    made.toml["scenarios"] = {"ledger": False}
    first = run_study(load_study(made.write()), tmp_path / "first", cache=store)
    made.toml["density"] = {"factor": 1.05}
    made.toml["cutoff"]["at"] = 5.0
    made.toml["screens"]["vent_buffer_m"] = 12.0
    changed = load_study(made.write())
    caught: dict[str, Any] = {}

    def catch(*arguments: Any) -> list[Path]:
        caught.update(next(item for item in arguments if isinstance(item, dict) and "changes" in item))
        return []

    publish.write_report_files = catch  # type: ignore[assignment]  # put back by the fixture
    second = run_study(changed, tmp_path / "second", cache=store, against=tmp_path / "first")
    table = caught["changes"]
    assert list(table["kind"]) == ["total", "change", "change", "change", "total"]
    totals, steps = table[table["kind"] == "total"]["dry_tonnes"], table[table["kind"] == "change"]

    def above(result: Any, at: float) -> float:
        rows = result.grade_tonnage
        return float(rows[(rows["cutoff"] == at) & (rows["proposed_class"] == "all")]["dry_tonnes"].iloc[0])

    assert totals.iloc[0] == pytest.approx(above(first, 4.0), rel=1e-12)
    assert totals.iloc[1] == pytest.approx(above(second, 5.0), rel=1e-12)
    assert steps["dry_tonnes"].sum() == pytest.approx(totals.iloc[1] - totals.iloc[0], rel=1e-9)
    assert {step.split(":")[0] for step in steps["decision"]} == {
        "cutoff.at", "density.factor", "screens.vent_buffer_m"
    }  # fmt: skip
    assert "cutoff.at: 4 to 5" in set(steps["decision"])
