"""`run --verify`: the same bytes again, or the input, decision or output that differs."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import pytest
from typer.testing import CliRunner

import sms_resource.workflow.publish as publish
from sms_resource import load_study, run_study
from sms_resource.cli import app
from sms_resource.workflow.reproduce import differences
from tests.end_to_end.conftest import Run, command
from tests.end_to_end.places import tree
from tests.end_to_end.small_study import SmallStudy


@pytest.mark.slow
def test_verify_says_the_same_bytes(run: Run) -> None:
    before = tree(run.out)
    done = command("run", "--verify", run.out, "--json")
    assert done.returncode == 0, done.stderr
    told = json.loads(done.stdout)
    assert (told["same"], told["differing"], told["causes"]) == (True, [], [])
    assert tree(run.out) == before


@pytest.fixture
def light(monkeypatch: pytest.MonkeyPatch) -> None:
    """Results without figures and page, which other tests make."""
    monkeypatch.setattr(publish, "write_report_files", lambda *_: [])


def test_verify_names_what_differs(tmp_path: Path, light: None) -> None:
    made = SmallStudy(tmp_path / "study")
    out = tmp_path / "results"
    run_study(load_study(made.write()), out)
    # An input, a decision and an output are changed after the run. The decision of the first run is taken again.
    layers = {path: path.read_bytes() for path in made.folder.glob("*.gpkg")}
    made.rows["assays"][4]["cu_pct"] = 5.5
    made.toml["search"] = {"most_samples": 12}
    made.write()
    for path, content in layers.items():  # a layer that is written again carries another time
        path.write_bytes(content)
    (out / "grade_tonnage.csv").write_text("cutoff\n")
    done = CliRunner().invoke(app, ["run", "--verify", str(out), "--json"])
    assert done.exit_code == 1, done.output
    told = json.loads(done.stdout)
    assert told["same"] is False
    causes = " | ".join(told["causes"])
    assert "output changed after the run: grade_tonnage.csv" in causes
    assert "input has changed: assays (assays.csv)" in causes
    assert "search.most_samples was 16, is 12" in causes
    assert len(told["causes"]) == 3
    assert {"block_model.parquet", "composites.csv"} <= set(told["differing"])
    assert "layers/seafloor.tif" not in told["differing"]
    said = CliRunner().invoke(app, ["run", "--verify", str(out), "--quiet"])
    assert said.exit_code == 1 and "outputs differ" in said.output


def test_a_study_that_is_gone_or_broken_is_told(run: Run, tmp_path: Path) -> None:
    out = tmp_path / "results"
    shutil.copytree(run.out, out)
    manifest = json.loads((out / "manifest.json").read_text())
    manifest["study"]["folder"] = str(tmp_path / "nowhere")
    (out / "manifest.json").write_text(json.dumps(manifest))
    done = CliRunner().invoke(app, ["run", "--verify", str(out), "--json"])
    assert done.exit_code == 1 and isinstance(done.exception, SystemExit)
    told = json.loads(done.stdout)
    assert not told["same"] and any("cannot be read" in cause for cause in told["causes"])
    assert told["findings"][0]["code"] == "study-missing"


@pytest.mark.parametrize("text", ["", "{", "[]", "{}"])
def test_a_manifest_that_is_damaged_is_told(text: str, tmp_path: Path) -> None:
    (tmp_path / "manifest.json").write_text(text)
    done = CliRunner().invoke(app, ["run", "--verify", str(tmp_path)])
    assert isinstance(done.exception, SystemExit), done.exception
    assert done.exit_code == 2
    assert "manifest" in done.output


def test_against_a_run_with_a_damaged_manifest_the_run_is_still_made(
    run: Run, tmp_path: Path, light: None
) -> None:
    (tmp_path / "old").mkdir()
    (tmp_path / "old" / "manifest.json").write_text("{}")
    result = run_study(
        load_study(run.study.path), tmp_path / "new", cache=run.store, against=tmp_path / "old"
    )
    assert result.out == tmp_path / "new"
    assert [item.severity for item in result.findings if item.code == "against-unreadable"] == ["warning"]


def test_versions_and_code_that_differ_are_named(run: Run) -> None:
    manifest = json.loads((run.out / "manifest.json").read_text())
    study = load_study(run.study.path)
    assert differences(manifest, study) == []
    manifest["versions"]["numpy"] = "0.1"
    manifest["code"] = "other"
    told = differences(manifest, study)
    assert any(item.startswith("version has changed: numpy was 0.1") for item in told)
    assert any("code of sms_resource has changed" in item for item in told)
    assert len(told) == 2
