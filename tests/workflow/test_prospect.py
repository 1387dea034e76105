"""A study without drilling ends in ranges with their caution, and in nothing that reads like an estimate."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest
from typer.testing import CliRunner, Result

from sms_resource import StudyError, load_study, run_study
from sms_resource.cli import app
from sms_resource.workflow import check_study
from tests.end_to_end.small_study import SmallStudy

DRILLED = ("collars", "surveys", "runs", "lithology", "assays", "densities", "laboratory", "exclusions")


def undrilled(folder: Path) -> SmallStudy:
    """The small mound with its outline, its bathymetry and eight surface samples."""
    small = SmallStudy(folder)
    for role in DRILLED:
        small.toml["data"].pop(role, None)
    small.toml = {name: small.toml[name] for name in ("study", "data", "metals")}
    small.toml["density"] = {"assigned_dry_tpm3": {"massive": [2.4, 3.0, 3.6]}}
    small.toml["exploration"] = {
        "thickness_low_m": 2.0, "thickness_high_m": 12.0, "surface_divisor": {"cu": 1.5, "zn": 8.0}
    }  # fmt: skip
    small.toml["reasons"] = {"exploration.surface_divisor": {"why": "pairs <elsewhere>", "by": "A. Person"}}
    return small


def call(*arguments: object) -> Result:
    done = CliRunner().invoke(app, [str(item) for item in arguments])
    assert done.exception is None or isinstance(done.exception, SystemExit), done.exception
    return done


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path, Result]:
    folder = tmp_path_factory.mktemp("undrilled")
    path = undrilled(folder / "study").write()
    done = call("run", path, "--out", folder / "results")
    return path, folder / "results", done


def test_ranges_are_area_times_thickness_times_density_by_hand(made: tuple[Path, Path, Result]) -> None:
    path, out, done = made
    assert done.exit_code == 0, done.output
    table = pd.read_csv(out / "exploration_target.csv").set_index("quantity")
    area = float(gpd.read_file(path.parent / "outline.gpkg").geometry.area.sum())
    assert table.loc["volume_m3", ["low", "high"]].tolist() == pytest.approx([2.0 * area, 12.0 * area])
    assert table.loc["dry_tonnes", ["low", "high"]].tolist() == pytest.approx([4.8 * area, 43.2 * area])
    copper = pd.read_csv(path.parent / "surface_samples.csv")["cu_pct"]
    wanted = [np.percentile(copper, 25) / 1.5, np.percentile(copper, 75)]
    assert table.loc["cu_pct", ["low", "high"]].tolist() == pytest.approx(wanted)
    # no divisor is stated for gold: no ratio is invented
    assert np.isnan(table.loc["au_gpt", "low"]) and table.loc["au_gpt", "high"] == pytest.approx(8.0)
    assert table["caution"].str.contains("conceptual").all()


def test_exclusion_zones_are_taken_out_and_named(tmp_path: Path) -> None:
    """Areas by shapely: the outline less the vent with the buffer that the study states; tonnes fall in proportion."""
    small = undrilled(tmp_path / "study")
    small.toml["data"]["exclusions"] = SmallStudy(tmp_path / "other").toml["data"]["exclusions"]
    small.toml["screens"] = {"vent_buffer_m": 9.0}
    path = small.write()
    done = call("run", path, "--out", tmp_path / "results")
    assert done.exit_code == 0, done.output
    table = pd.read_csv(tmp_path / "results" / "exploration_target.csv").set_index("quantity")
    outline = gpd.read_file(path.parent / "outline.gpkg").geometry.union_all()
    zones = gpd.read_file(path.parent / "exclusions.gpkg")
    vents = zones[zones["status"] == "active_vent"].geometry.buffer(9.0).union_all()
    left = outline.difference(vents).area
    assert 0 < left < outline.area
    assert table.loc["volume_m3", ["low", "high"]].tolist() == pytest.approx([2.0 * left, 12.0 * left])
    assert table.loc["dry_tonnes", ["low", "high"]].tolist() == pytest.approx([4.8 * left, 43.2 * left])
    assert (
        "active vent" in table.loc["volume_m3", "basis"] and "9 m around" in table.loc["volume_m3", "basis"]
    )
    small.toml["screens"] = {"vent_buffer_m": 5000.0}
    done = call("run", small.write(), "--out", tmp_path / "none", "--json")
    errors = [item for item in json.loads(done.stdout) if item["severity"] == "error"]
    assert done.exit_code == 1 and [item["code"] for item in errors] == ["screen-all-taken"]
    assert not (tmp_path / "none").exists()


def test_nothing_reads_like_an_estimate(made: tuple[Path, Path, Result]) -> None:
    _, out, done = made
    assert {item.name for item in out.iterdir()} == {
        "exploration_target.csv", "findings.json", "decisions.csv", "report.html", "manifest.json"
    }  # fmt: skip
    page = (out / "report.html").read_text(encoding="utf-8")
    head = page[page.index("<header>") : page.index("</header>")]
    assert "kt" not in head and "insufficient exploration" in head and "no table of tonnes" in head
    body = page[page.index("<main") :]
    for words in (
        "conceptual",
        "uncertain whether further exploration",
        "kt dry",
        "left to the CP",
        "&lt;elsewhere&gt;",
    ):
        assert words in body, words
    for word in (
        " ore ",
        "reserve",
        "proven",
        "probable",
        "compliant",
        "guaranteed",
        "calculated",
        "Indicated",
        "Inferred",
    ):
        assert word not in page.lower() if word.islower() else word not in page, word
    assert "no estimate" in done.output and "conceptual" in done.output
    found = {item["code"]: item for item in json.loads((out / "findings.json").read_text())}
    assert found["exploration-surface-alone"]["severity"] == "warning"
    assert "Au, Ag" in found["exploration-surface-alone"]["message"]
    assert "runs-missing" not in found


def test_the_same_study_gives_the_same_bytes_and_other_commands_say_what_is_missing(
    made: tuple[Path, Path, Result], tmp_path: Path
) -> None:
    path, out, _ = made
    assert call("run", "--verify", out).exit_code == 0
    for name in ("export", "view"):
        done = call(name, out)
        assert done.exit_code == 2 and "no block model" in done.output.replace("\n", " ")
    result = run_study(load_study(path), tmp_path / "again", scenarios=True)
    assert "exploration-unused" in {item.code for item in result.findings} and result.block_model is None


@pytest.mark.parametrize(
    ("change", "column"),
    [
        ({"exploration": {"thickness_low_m": 2.0}}, "exploration.thickness_high_m"),
        ({"exploration": {"thickness_low_m": 5.0, "thickness_high_m": 5.0}}, "exploration.thickness_high_m"),
        ({"density": {}}, "density.assigned_dry_tpm3"),
        ({"exploration": {"thickness_low_m": 1.0, "thickness_high_m": 5.0, "surface_divisor": {"cu": 0.5}}},
         "exploration.surface_divisor.cu"),
        ({"exploration": {"thickness_low_m": 1.0, "thickness_high_m": 5.0, "surface_divisor": {"pb": 2.0}}},
         "exploration.surface_divisor.pb"),
    ],
    ids=["no high", "no range", "no density", "poorer", "other element"],
)  # fmt: skip
def test_what_a_target_needs_is_asked_for_and_never_guessed(
    change: dict[str, Any], column: str, tmp_path: Path
) -> None:
    small = undrilled(tmp_path)
    small.toml.update(change)
    with pytest.raises(StudyError) as raised:
        load_study(small.write())
    assert [item.column for item in raised.value.findings.errors] == [column]


def test_without_an_outline_or_with_half_the_drilling_nothing_is_run(tmp_path: Path) -> None:
    small = undrilled(tmp_path)
    outline = small.toml["data"].pop("outline")
    with pytest.raises(StudyError) as raised:
        load_study(small.write())
    assert [item.column for item in raised.value.findings.errors] == ["data.outline"]
    small.toml["data"] |= {"outline": outline, "assays": {"file": "assays.csv"}}
    with pytest.raises(StudyError) as raised:
        load_study(small.write())
    assert {item.column for item in raised.value.findings.errors} == {"data.collars"}


def test_check_reads_the_data_of_such_a_study(tmp_path: Path) -> None:
    small = undrilled(tmp_path)
    small.rows["surface_samples"][2]["cu_pct"] = 85.0
    found = check_study(load_study(small.write()))
    assert [(item.file, item.row) for item in found.errors] == [("surface_samples.csv", 4)]
