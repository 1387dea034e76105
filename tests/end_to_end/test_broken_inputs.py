"""Broken input through the command line: the errors at their places, exit 1, no traceback, the last results untouched."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
from typer.testing import CliRunner

from sms_resource.cli import app
from sms_resource.findings import Findings
from sms_resource.workflow.folder import ResultFolder
from tests.end_to_end.breaking import Case
from tests.end_to_end.broken_decisions import DECISIONS
from tests.end_to_end.broken_decisions import VALUES as CHOICES
from tests.end_to_end.broken_deposit import BODIES, CUTOFFS, HOLES, PLACES, VALUES
from tests.end_to_end.broken_tables import CELLS, COLUMNS, FILES
from tests.end_to_end.places import tree
from tests.end_to_end.small_study import SmallStudy

CASES = [*DECISIONS, *CHOICES, *FILES, *COLUMNS, *CELLS, *HOLES, *VALUES, *PLACES, *BODIES, *CUTOFFS]
LABELS = [case.label for case in CASES]


@pytest.fixture(scope="module")
def results(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Results that stand before any of these runs."""
    out = tmp_path_factory.mktemp("before") / "results"
    with ResultFolder(out) as folder:
        (folder.staging / "manifest.json").write_text("{}")
        (folder.staging / "grade_tonnage.csv").write_text("cutoff,dry_tonnes\n1,2\n")
        (folder.staging / "figures").mkdir()
        (folder.staging / "figures" / "plan.png").write_bytes(b"\x89PNG")
        folder.publish()
    return out


def expected(case: Case, study: SmallStudy) -> list[tuple[Any, ...]]:
    """Errors of a case, with rows of the study file looked up by how they start."""
    return sorted(
        (
            (code, file, study.row_of(row) if isinstance(row, str) else row, column)
            for code, file, row, column in case.errors
        ),
        key=str,
    )


@pytest.mark.parametrize("case", CASES, ids=LABELS)
def test_broken_input_is_told_and_nothing_is_touched(case: Case, tmp_path: Path, results: Path) -> None:
    study = SmallStudy(tmp_path / "study")
    case.spoil(study)
    path = study.write()
    before = tree(results)

    done = CliRunner().invoke(app, ["run", str(path), "--out", str(results), "--json", "--no-cache"])

    assert done.exception is None or isinstance(done.exception, SystemExit), done.exception
    assert "Traceback" not in done.output
    assert done.exit_code == 1
    found = [item for item in json.loads(done.stdout) if item["severity"] == "error"]
    places = sorted(((f["code"], f["file"], f["row"], f["column"]) for f in found), key=str)
    assert places == expected(case, study), found
    for item in found:
        assert item["message"] and item["remedy"], item
    assert case.says in f"{found[0]['message']} {found[0]['remedy']}", found[0]
    assert tree(results) == before
    assert [other.name for other in results.parent.iterdir()] == ["results"]


def test_there_are_forty_kinds_and_more() -> None:
    assert len(set(LABELS)) == len(LABELS) >= 40
    codes = {code for case in CASES for code, *_ in case.errors}
    assert len(codes) >= 60


@pytest.mark.parametrize("label", ["word for a number", "key that is not known", "grid cut short"])
def test_a_process_of_its_own_ends_with_one_and_no_traceback(
    label: str, tmp_path: Path, results: Path
) -> None:
    study = SmallStudy(tmp_path / "study")
    next(case for case in CASES if case.label == label).spoil(study)
    before = tree(results)
    command = [sys.executable, "-m", "sms_resource.cli", "run", str(study.write()), "--out", str(results)]
    done = subprocess.run(command, capture_output=True, text=True, timeout=300, check=False)
    assert done.returncode == 1
    assert "Traceback" not in done.stdout + done.stderr
    assert done.stdout.count("error [") + done.stderr.count("error [") >= 1
    assert tree(results) == before


def test_check_lists_every_fault_of_every_file(tmp_path: Path) -> None:
    labels = ("grade below zero", "run past the end of the hole", "azimuth out of the circle", "recovery over 110",
              "collar without a coordinate", "reference without its value")  # fmt: skip
    chosen = [case for case in CASES if case.label in labels]
    assert len(chosen) == len(labels)
    study = SmallStudy(tmp_path)
    for case in chosen:
        case.spoil(study)
    done = CliRunner().invoke(app, ["check", str(study.write()), "--json"])
    assert done.exit_code == 1
    found = {(f["code"], f["file"], f["row"]) for f in json.loads(done.stdout) if f["severity"] == "error"}
    assert found == {(code, file, row) for case in chosen for code, file, row, _ in case.errors}


def test_a_sound_study_has_no_error(tmp_path: Path) -> None:
    done = CliRunner().invoke(app, ["check", str(SmallStudy(tmp_path).write()), "--json"])
    assert done.exit_code == 0
    assert not [item for item in json.loads(done.stdout) if item["severity"] == "error"]


def test_codes_of_errors_are_explained() -> None:
    from sms_resource.blocks.codes import CODES as blocks
    from sms_resource.classification.codes import CODES as classes
    from sms_resource.economics.codes import CODES as economics
    from sms_resource.geostatistics.codes import CODES as geostatistics
    from sms_resource.loaders.codes import CODES as loaders
    from sms_resource.samples.codes import CODES as samples
    from sms_resource.study.codes import CODES as study
    from sms_resource.workflow.codes import CODES as workflow

    known = {*samples, *blocks, *classes, *economics, *geostatistics, *loaders, *study, *workflow}
    assert {code for case in CASES for code, *_ in case.errors} <= known


def stopped_at(study: SmallStudy, last: str) -> Findings:
    """Findings of the stages up to one."""
    from sms_resource import load_study
    from sms_resource.workflow.stage import run_stages
    from sms_resource.workflow.stages import ESTIMATE_STAGES

    names = [stage.name for stage in ESTIMATE_STAGES]
    return run_stages(ESTIMATE_STAGES[: names.index(last) + 1], load_study(study.write())).findings


def test_an_outline_that_crosses_itself_is_mended_and_told(tmp_path: Path) -> None:
    import geopandas as gpd
    from shapely.geometry import Polygon

    from tests.end_to_end.small_study import CRS, SOUTH, WEST

    study = SmallStudy(tmp_path)
    corners = [(10, 10), (50, 50), (50, 10), (10, 50)]
    bow = Polygon([(WEST + x, SOUTH + y) for x, y in corners])
    study.outline = gpd.GeoDataFrame({"name": ["body"]}, geometry=[bow], crs=CRS)
    found = stopped_at(study, "check")
    assert not found.has_errors
    (item,) = [item for item in found if item.code == "geometry-repaired"]
    assert (item.severity, item.file, item.row) == ("warning", "outline.gpkg", 2)


def test_holes_that_all_end_in_sulphide_are_told_and_the_body_is_held(tmp_path: Path) -> None:
    study = SmallStudy(tmp_path)
    for row in study.rows["collars"]:
        row["ended_in"] = "sulphide"
    study.rows["lithology"] = [row for row in study.rows["lithology"] if row["code"] != "AV"]
    ends = {row["hole_id"]: row["length_m"] for row in study.rows["collars"]}
    for row in study.rows["lithology"]:
        row["to_m"] = ends[row["hole_id"]] if row["code"] == "MS" else row["to_m"]
    found = stopped_at(study, "body")
    assert not found.has_errors
    assert [item.severity for item in found if item.code == "contacts-all-open"] == ["warning"]


def test_collars_over_a_gap_of_the_grid_are_told(tmp_path: Path) -> None:
    import numpy as np

    from tests.end_to_end.small_study import SOUTH, WEST, seafloor_at

    study = SmallStudy(tmp_path)
    study.grid["values"] = lambda x, y: np.where(
        np.hypot(x - WEST - 13.5, y - SOUTH - 13.5) < 5, -9999.0, seafloor_at(x, y)
    )
    found = [item for item in stopped_at(study, "check") if item.code == "collar-on-nodata"]
    assert [(item.severity, item.file, item.row) for item in found] == [("warning", "collars.csv", 2)]
