"""By domain, bench and screen every tonne is told once; loss and dilution go on from what the screens leave."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from sms_resource import load_study
from sms_resource.units import contained_tonnes
from sms_resource.workflow.means import waterfall_rows
from sms_resource.workflow.stage import Outcome, run_stages
from sms_resource.workflow.stages import ESTIMATE_STAGES
from tests.end_to_end.small_study import SmallStudy

METALS = ["cu_pct", "zn_pct", "au_gpt", "ag_gpt"]
SKIN = {"over_cut_m": 0.4, "under_cut_m": 0.2, "host_dry_density_tpm3": 2.2, "host_wet_density_tpm3": 2.5}


def run(folder: Path, **screens: Any) -> Outcome:
    study = SmallStudy(folder)
    study.toml["screens"] |= {"slope_max_deg": 18.0, "bench_m": 3.0, **screens}
    return run_stages(ESTIMATE_STAGES, load_study(study.write()), threads=1)


@pytest.fixture(scope="module")
def outcome(tmp_path_factory: pytest.TempPathFactory) -> Outcome:
    made = run(tmp_path_factory.mktemp("splits"), host_grades={"cu": 0.1}, **SKIN)
    assert not made.findings.has_errors, made.findings.errors
    return made


def test_domains_benches_and_screens_sum_to_the_body(outcome: Outcome) -> None:
    state = outcome.done["classify"]
    frame, parts = outcome.done["value"].frame, state.tables["body_parts"]
    assert parts["domain"].nunique() == 2 and parts["floor_elevation"].nunique() > 3
    assert set(parts["screen"]) >= {"kept", "zone vent", "slope"}
    wanted = {name: frame[name].sum() for name in ("volume_m3", "dry_tonnes", "wet_tonnes")}
    for metal in METALS:
        mass = contained_tonnes(frame["dry_tonnes"].to_numpy(), np.nan_to_num(frame[metal].to_numpy()), metal)
        wanted[f"{metal[:2]}_contained_t"] = mass.sum()
    for name, whole in wanted.items():
        assert parts[name].sum() == pytest.approx(whole, rel=1e-9)
    # The blocks integrate the surfaces anew, cell by cell.
    assert wanted["volume_m3"] == pytest.approx(outcome.done["body"].body.volume_m3, rel=1e-5)
    by_screen = parts.groupby("screen")["dry_tonnes"].sum()
    fall = state.waterfall.set_index("step")
    assert by_screen["kept"] == pytest.approx(fall.loc["remains", "remaining_dry_tonnes"], rel=1e-9)
    for screen in by_screen.index.drop("kept"):
        assert by_screen[screen] == pytest.approx(fall.loc[screen, "taken_dry_tonnes"], rel=1e-9)


@pytest.mark.parametrize("name", ["domain", "bench", "screen"])
def test_each_split_of_grade_and_tonnage_sums_to_the_whole(outcome: Outcome, name: str) -> None:
    state = outcome.done["classify"]
    table = state.tables[f"grade_tonnage_by_{name}"]
    contents = ["cu_t", "zn_t", "au_kg", "ag_kg"]
    for _, rows in table.groupby(["cutoff", "proposed_class"]):
        whole, split = rows[rows[name] == "all"], rows[rows[name] != "all"]
        assert len(whole) == 1
        for column in ("dry_tonnes", "wet_tonnes", *contents):
            assert split[column].sum() == pytest.approx(whole[column].iloc[0], rel=1e-9, abs=1e-9)
    whole = table[(table[name] == "all") & (table["proposed_class"] == "all")].set_index("cutoff")
    # By screen it is that of the whole body, and its kept part that of the study's own table.
    if name == "screen":
        frame = outcome.done["value"].frame
        for cutoff, tonnes in whole["dry_tonnes"].items():
            assert tonnes == pytest.approx(frame.loc[frame["cu_pct"] >= cutoff, "dry_tonnes"].sum(), rel=1e-9)
        whole = table[(table[name] == "kept") & (table["proposed_class"] == "all")].set_index("cutoff")
    study = state.grade_tonnage.query("proposed_class == 'all'").set_index("cutoff")
    for column in ("dry_tonnes", "wet_tonnes", *METALS, *contents):
        np.testing.assert_allclose(whole[column], study[column], rtol=1e-9)


def test_benches_are_those_of_the_cutoff_from_the_top_down(outcome: Outcome) -> None:
    state = outcome.done["classify"]
    table = state.tables["benches"]
    assert (np.diff(table["floor_elevation"]) < 0).all()
    np.testing.assert_allclose(table["roof_elevation"] - table["floor_elevation"], 3.0)
    above = state.grade_tonnage.query("proposed_class == 'all' and cutoff == 4.0").iloc[0]
    for column in ("dry_tonnes", "wet_tonnes"):
        assert table[column].sum() == pytest.approx(above[column], rel=1e-9)
    assert table["cu_contained_t"].sum() == pytest.approx(above["cu_t"], rel=1e-9)
    told = state.tables["grade_tonnage_by_bench"].query("proposed_class == 'all' and cutoff == 4.0")
    told = told[told["bench"] != "all"]
    told = told[told["dry_tonnes"] > 0]
    np.testing.assert_allclose(told["dry_tonnes"], table["dry_tonnes"], rtol=1e-9)
    np.testing.assert_allclose(told["floor_elevation"], table["floor_elevation"])


def test_loss_and_dilution_go_on_from_what_is_above_the_cutoff(outcome: Outcome) -> None:
    state = outcome.done["classify"]
    table = state.tables["dilution_and_loss"].set_index("step")
    above = state.grade_tonnage.query("proposed_class == 'all' and cutoff == 4.0").iloc[0]
    cut, loss, dilution, after = (table.iloc[n] for n in range(4))
    for name in ("dry_tonnes", "wet_tonnes", *METALS):
        assert cut[name] == pytest.approx(above[name], rel=1e-9)
    for name in ("dry_tonnes", "wet_tonnes", "cu_contained_t", "ag_contained_t"):
        assert after[name] == pytest.approx(cut[name] - loss[name] + dilution[name], rel=1e-12)
        assert 0 < loss[name] < cut[name] and dilution[name] > 0
    # Depth times area, at most what each block holds: the areas are those of the cut blocks' open faces.
    assert dilution["volume_m3"] > loss["volume_m3"] > 0
    assert after["cu_pct"] < cut["cu_pct"]
    # Diluted by rock at 0.1 % and by sulphide under the cut-off of 4 %: between the two.
    assert 0.1 < dilution["cu_pct"] < 4.0
    fall = state.waterfall
    steps = fall["step"].tolist()
    assert steps[steps.index("remains") :] == [
        "remains", "below_cutoff", "above_cutoff", "loss", "dilution", "delivered",
    ]  # fmt: skip
    last = fall.set_index("step").loc["delivered"]
    assert last["remaining_dry_tonnes"] == pytest.approx(after["dry_tonnes"], rel=1e-9)
    assert last["remaining_cu_contained_t"] == pytest.approx(after["cu_contained_t"], rel=1e-9)


def test_rows_of_the_waterfall_add_up(outcome: Outcome) -> None:
    rows = waterfall_rows(outcome.done["classify"].waterfall, METALS)
    assert rows["kind"].tolist()[-6:] == ["total", "cut-off", "total", "skin", "skin", "total"]
    level = 0.0
    for row in rows.to_dict("records"):
        if row["kind"] == "total":
            assert level == pytest.approx(row["wet_tonnes"], rel=1e-9) or level == 0.0
            level = row["wet_tonnes"]
        else:
            level += row["wet_tonnes"]
    assert rows["dry_tonnes"].iloc[-2] > 0 > rows["dry_tonnes"].iloc[-3]  # dilution adds, loss takes


def test_without_depths_there_is_neither_loss_nor_dilution(tmp_path: Path) -> None:
    state = run(tmp_path).done["classify"]
    assert "dilution_and_loss" not in state.tables
    assert state.waterfall["step"].iloc[-1] == "remains"


def test_the_host_is_measured_or_asked_for(tmp_path: Path) -> None:
    """The small study measures densities in the sulphide alone."""
    outcome = run(tmp_path / "asked", over_cut_m=0.3)
    codes = [(item.code, item.column) for item in outcome.findings.errors]
    assert codes == [
        ("host-density", "screens.host_dry_density_tpm3"), ("host-density", "screens.host_wet_density_tpm3"),
    ]  # fmt: skip
    study = SmallStudy(tmp_path / "measured")
    study.toml["screens"] |= {"over_cut_m": 0.3}
    holes = [row for row in study.rows["lithology"] if row["code"] == "AV"][:2]
    for number, row in enumerate(holes):
        study.rows["densities"].append(
            {"hole_id": row["hole_id"], "sample_id": f"R{number}", "from_m": row["from_m"] + 0.2,
             "to_m": row["from_m"] + 0.4, "wet_density_tpm3": 2.5 + 0.1 * number,
             "dry_density_tpm3": 2.3 + 0.1 * number}
        )  # fmt: skip
    outcome = run_stages(ESTIMATE_STAGES, load_study(study.write()), threads=1)
    assert not outcome.findings.has_errors, outcome.findings.errors
    notes = [item.message for item in outcome.findings if item.code == "host-density-measured"]
    assert len(notes) == 2 and "2.35 t/m³" in notes[0] and "2.55 t/m³" in notes[1]


def test_values_of_the_host_are_checked(tmp_path: Path) -> None:
    from sms_resource import StudyError

    study = SmallStudy(tmp_path)
    study.toml["screens"] |= SKIN | {"host_wet_density_tpm3": 2.0, "host_grades": {"xx": 1.0, "cu": -1.0}}
    with pytest.raises(StudyError) as caught:
        load_study(study.write())
    columns = {item.column for item in caught.value.findings.errors}
    assert columns == {"screens.host_wet_density_tpm3", "screens.host_grades.xx", "screens.host_grades.cu"}


def test_a_block_on_two_benches_is_cut_between_them(outcome: Outcome) -> None:
    """Blocks are 2 m high and benches 3 m: shares of one block add to one, and no bench is higher than it is."""
    table = outcome.done["classify"].tables["body_parts"]
    heights = pd.Series(table["roof_elevation"] - table["floor_elevation"])
    np.testing.assert_allclose(heights, 3.0)
    grid = outcome.done["blocks"].model.grid
    below = (table["floor_elevation"] - grid.origin[2]) / 3.0
    np.testing.assert_allclose(below, np.round(below), atol=1e-9)
