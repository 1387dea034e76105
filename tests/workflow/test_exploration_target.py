"""What no class takes in appears as ranges with its caution, and never as a number of the estimate."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest

from sms_resource import StudyError, load_study, run_study
from sms_resource.reporting.checklist_estimate import classification
from sms_resource.reporting.sections_estimate import classes
from sms_resource.reporting.sections_summary import summary
from sms_resource.workflow.report_data import report_data
from tests.end_to_end.small_study import SmallStudy


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> Any:
    small = SmallStudy(tmp_path_factory.mktemp("target"))
    small.toml["classes"].update(inferred_within_m=5.0, least_volume_m3=0.0, smooth=False)
    study = load_study(small.write())
    result = run_study(study, None, cache=False)
    assert not result.findings.has_errors, result.findings.errors
    return study, result


def test_blocks_that_no_class_takes_in_are_ranges_around_what_they_hold(made: Any) -> None:
    _, result = made
    state = result.stages["classify"]
    frame = result.stages["value"].frame
    frame = frame[frame["kept_share"] > 0]
    left = frame[frame["proposed_class"] == "unclassified"]
    held = float((left["dry_tonnes"] * left["kept_share"]).sum())
    table = state.tables["exploration_target"].set_index("quantity")
    low, high = table.loc["dry_tonnes", ["low", "high"]]
    assert 0.0 <= low < held < high < 3.0 * held
    for metal in ("cu_pct", "zn_pct", "au_gpt", "ag_gpt"):
        assert 0.0 < table.loc[metal, "low"] < table.loc[metal, "high"]
    (note,) = [item for item in result.findings if item.code == "exploration-target"]
    assert "conceptual" in note.message and "uncertain whether" in note.message


def test_the_report_states_ranges_and_caution_but_no_headline(made: Any) -> None:
    import pandas as pd

    study, result = made
    data = report_data(study, result.stages, result.findings, pd.DataFrame(), {}, None)
    (said,) = [
        block.text for block in classes(data) if getattr(block, "text", "").startswith("Exploration target")
    ]
    for words in (
        "not part of the estimate",
        "conceptual",
        "insufficient exploration",
        "uncertain",
        " to ",
        "t dry",
    ):
        assert words in said, words
    assert "Exploration target, not part of the estimate" in classification(data)[1]
    assert not any("xploration target:" in str(block) or "not part of the estimate" in str(block)
                   for block in summary(data, []))  # fmt: skip


def test_a_body_that_classes_take_in_whole_has_no_target(tmp_path: Path) -> None:
    small = SmallStudy(tmp_path)
    small.toml["classes"].update(inferred_within_m=500.0, inferred_holes=1, inferred_samples=1, smooth=False)
    result = run_study(load_study(small.write()), None, cache=False)
    frame = result.stages["value"].frame
    assert (frame["proposed_class"] != "unclassified").all()
    assert not len(result.stages["classify"].tables["exploration_target"])
    assert not [item for item in result.findings if item.code == "exploration-target"]


def test_surface_samples_alone_give_no_block_estimate_and_say_what_they_may_support(tmp_path: Path) -> None:
    small = SmallStudy(tmp_path)
    path = small.write()
    text = path.read_text()
    for role in ("collars", "surveys", "runs", "lithology", "assays", "densities", "laboratory"):
        text = text.replace(f'[data.{role}]\nfile = "{role}.csv"\n', "")
    path.write_text(text)
    with pytest.raises(StudyError) as raised:
        load_study(path)
    told = [item for item in raised.value.findings.errors if item.code == "study-no-drilling"]
    assert {item.column for item in told} == {"data.collars", "data.assays"}
    assert all(
        "surface samples alone" in item.message and "exploration target" in item.remedy for item in told
    )
