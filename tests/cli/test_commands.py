"""The commands: what they print, what they ask for, and the code they leave with."""

from __future__ import annotations

import json
import re
import subprocess
import sys
import time
from pathlib import Path

import geopandas as gpd
import pytest
import shapely
from typer.testing import CliRunner, Result

from sms_resource import __version__
from sms_resource.cli import app
from sms_resource.workflow.folder import ResultFolder
from tests.end_to_end.conftest import command
from tests.end_to_end.places import tree
from tests.end_to_end.small_study import CRS, SOUTH, WEST, SmallStudy

DEMO = Path(__file__).parents[2] / "demo_deposit"


def call(*arguments: object) -> Result:
    """Run a command in this process; anything but an exit is a fault."""
    done = CliRunner().invoke(app, [str(item) for item in arguments])
    assert done.exception is None or isinstance(done.exception, SystemExit), done.exception
    assert "Traceback" not in done.output
    return done


@pytest.fixture
def study(tmp_path: Path) -> SmallStudy:
    made = SmallStudy(tmp_path / "study")
    made.write()
    return made


@pytest.mark.parametrize("name", ["", "new", "check", "run", "scenarios", "view", "cache"])
def test_every_command_has_help(name: str) -> None:
    done = call(*filter(None, [name]), "--help")
    assert done.exit_code == 0
    assert "Usage" in done.output and len(done.output.splitlines()) > 5


def test_version() -> None:
    assert call("--version").output.strip() == __version__


def fastest(*arguments: str) -> float:
    """Best of three, in a process of its own."""
    times = []
    for _ in range(3):
        begun = time.perf_counter()
        subprocess.run([sys.executable, *arguments], check=True, capture_output=True)
        times.append(time.perf_counter() - begun)
    return min(times)


def test_import_and_help_take_less_than_half_a_second() -> None:
    """0.5 s on a machine that is not busy; the allowance is what an empty interpreter takes beyond 0.05 s."""
    slack = max(1.0, fastest("-c", "pass") / 0.05)
    assert fastest("-c", "import sms_resource") < 0.5 * slack
    assert fastest("-m", "sms_resource.cli", "--help") < 0.5 * slack


def test_heavy_libraries_wait_until_they_are_used() -> None:
    code = "import sys, sms_resource, sms_resource.cli; print(' '.join(sys.modules))"
    loaded = set(
        subprocess.run(
            [sys.executable, "-c", code], capture_output=True, text=True, check=True
        ).stdout.split()
    )
    heavy = {
        "numba",
        "scipy",
        "pandas",
        "matplotlib",
        "geopandas",
        "rasterio",
        "pyvista",
        "skgstat",
        "pyproj",
    }
    assert not heavy & loaded


@pytest.mark.parametrize(
    "arguments",
    [
        [], ["run"], ["runn", "study.toml"], ["run", "study.toml", "--colour"], ["run", "study.toml", "--threads", "0"],
        ["run", "study.toml", "--threads", "two"], ["check"], ["new"], ["new", "nowhere.csv"], ["scenarios"],
        ["run", "--verify", "nowhere"], ["run", "study.toml", "--against", "nowhere"], ["view", "a", "b"],
    ],
    ids=" ".join,
)  # fmt: skip
def test_wrong_usage_leaves_with_two(
    arguments: list[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    done = call(*arguments)
    assert done.exit_code == 2
    assert done.output.strip()
    assert list(tmp_path.iterdir()) == []


def test_check_of_a_sound_study_leaves_with_none(study: SmallStudy) -> None:
    done = call("check", study.path)
    assert done.exit_code == 0
    assert re.search(r"0 errors, \d+ warnings, \d+ notes", done.output)
    quiet = call("check", study.path, "--quiet")
    assert "warning" not in quiet.output.replace("warnings", "")


def test_check_lists_a_fault_with_its_place_and_remedy(study: SmallStudy) -> None:
    study.rows["assays"][3]["cu_pct"] = "high"
    done = call("check", study.write())
    assert done.exit_code == 1
    text = " ".join(done.output.split())
    assert "error [not-a-number] assays.csv" in text and "row 5" in text and "->" in text


def test_json_is_all_that_is_printed(study: SmallStudy) -> None:
    study.rows["assays"][3]["cu_pct"] = "high"
    path = study.write()
    for arguments in (["check", path, "--json"], ["run", path, "--json"]):
        done = CliRunner().invoke(app, [str(item) for item in arguments])
        (item,) = [item for item in json.loads(done.stdout) if item["severity"] == "error"]
        assert set(item) >= {"severity", "code", "message", "remedy", "file", "row", "column"}
        assert (item["code"], item["file"], item["row"], item["column"]) == (
            "not-a-number",
            "assays.csv",
            5,
            "cu_pct",
        )


def test_many_faults_of_a_kind_are_folded_and_json_has_every_one(study: SmallStudy) -> None:
    for row in study.rows["assays"][:20]:
        row["cu_pct"] = "high"
    path = study.write()
    assert "and 12 more; --json lists every one" in " ".join(call("check", path).output.split())
    found = json.loads(CliRunner().invoke(app, ["check", str(path), "--json"]).stdout)
    assert sum(item["code"] == "not-a-number" for item in found) == 20


def test_a_folder_of_something_else_is_never_replaced(study: SmallStudy, tmp_path: Path) -> None:
    thesis = tmp_path / "thesis"
    thesis.mkdir()
    (thesis / "chapter.txt").write_text("years of work")
    before = tree(thesis)
    done = call("run", study.path, "--out", thesis)
    assert done.exit_code == 2
    assert "--out" in done.output
    assert tree(thesis) == before


def test_a_folder_that_cannot_be_made_is_told(study: SmallStudy, tmp_path: Path) -> None:
    (tmp_path / "file").write_text("x")
    done = call("run", study.path, "--out", tmp_path / "file" / "results")
    assert done.exit_code == 2
    assert "cannot be written" in done.output


def test_verify_and_against_need_results(study: SmallStudy, tmp_path: Path) -> None:
    assert call("run", "--verify", tmp_path).exit_code == 2
    assert call("run", study.path, "--against", tmp_path).exit_code == 2


def test_view_of_no_results_is_told(tmp_path: Path) -> None:
    for command_name in ("view", "export"):  # wrong usage, and the same for both
        done = call(command_name, tmp_path / "nowhere")
        assert done.exit_code == 2
        assert "nowhere holds no results" in done.output.replace("\n", "")


def test_a_limit_of_the_cache_that_is_no_number_is_told_by_a_run(
    study: SmallStudy, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("SMS_RESOURCE_CACHE_GB", "lots")
    (tmp_path / "file").write_text("x")  # stops the run before it starts
    done = call("run", study.path, "--out", tmp_path / "file" / "results")
    said = [line for line in done.stderr.splitlines() if "SMS_RESOURCE_CACHE_GB" in line]
    assert said == [
        "sms-resource: SMS_RESOURCE_CACHE_GB is 'lots'; a number of gigabytes, zero or more, was wanted; 2 GB is taken"
    ]
    quiet = call("run", study.path, "--out", tmp_path / "file" / "results", "--no-cache")
    assert "SMS_RESOURCE_CACHE_GB" not in quiet.stderr


def test_check_sees_scenarios_and_overrides_that_a_run_refuses(study: SmallStudy) -> None:
    study.toml["scenarios"] = {"ledger": False, "single": [{"label": "a", "change": {"density.faktor": 1.1}}]}
    study.toml["data"]["class_overrides"] = {"file": "overrides.gpkg"}
    columns = {"class": ["Inferred", "Measured"], "reason": ["x", "y"], "by": ["A. Person"] * 2}
    square = shapely.box(WEST, SOUTH, WEST + 30.0, SOUTH + 30.0)
    study.after.append(
        lambda folder: gpd.GeoDataFrame(columns, geometry=[square] * 2, crs=CRS).to_file(
            folder / "overrides.gpkg"
        )
    )
    path = study.write()
    lines = path.read_text(encoding="utf-8").splitlines()
    row = 1 + next(number for number, line in enumerate(lines) if "faktor" in line)
    done = call("check", path, "--json")
    assert done.exit_code == 1
    errors = [item for item in json.loads(done.stdout) if item["severity"] == "error"]
    assert [(item["code"], item["file"], item["row"]) for item in errors] == [
        ("class-override-refused", "overrides.gpkg", 3),
        ("scenario-invalid", "study.toml", row),
    ]
    # a run without scenarios asks for the overrides alone, before its first stage
    done = call("run", path, "--json", "--out", path.parent / "results")
    assert done.exit_code == 1
    assert [item["code"] for item in json.loads(done.stdout)] == ["class-override-refused"]


def test_the_cache_is_shown_and_cleared(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    from sms_resource.cache import StageCache, cache_key

    monkeypatch.setenv("SMS_RESOURCE_CACHE", str(tmp_path / "kept"))
    assert call("cache").output.startswith("0 entries")
    StageCache().put(cache_key("one"), b"x" * 1000)
    shown = call("cache").output
    assert shown.startswith("1 entries") and str(tmp_path / "kept") in shown.replace("\n", "")
    assert call("cache", "--clear").output.startswith("Removed 1 entries")
    assert call("cache").output.startswith("0 entries")


def test_output_that_is_cut_off_is_no_fault(study: SmallStudy) -> None:
    line = f"{sys.executable} -m sms_resource.cli check {study.path} --json | head -c 1"
    done = subprocess.run(["bash", "-o", "pipefail", "-c", line], capture_output=True, text=True, check=False)
    assert "Traceback" not in done.stderr and "BrokenPipe" not in done.stderr


def test_new_writes_a_study_that_checks_and_runs_after_its_questions_are_answered(
    study: SmallStudy, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """From the data files alone to a table of tonnes, with what a person must answer filled in."""
    study.path.unlink()
    made = study.folder / "mine.toml"
    files = sorted(path for path in study.folder.iterdir())
    done = call("new", *files, "--out", made)
    assert done.exit_code == 0, done.output
    text = made.read_text(encoding="utf-8")
    assert "DECIDE" in text and "# guessed because" in text
    for role in ("collars", "surveys", "runs", "lithology", "assays", "densities", "surface_samples", "laboratory",
                 "bathymetry", "outline", "exclusions"):  # fmt: skip
        assert f"[data.{role}]" in text, role
    assert 'crs = "EPSG:32702"' in text
    # As it stands the domains are open: `check` says so and nothing is run on a guess.
    for code, domain in (("CP", "cap"), ("MS", "massive"), ("AV", "waste")):
        text = text.replace(f'{code} = "?"', f'{code} = "{domain}"')
    text = re.sub(r'sulphide = \["massive"\]', 'sulphide = ["cap", "massive"]', text)
    made.write_text(text, encoding="utf-8")
    checked = call("check", made, "--json")
    assert checked.exit_code == 0, checked.output
    monkeypatch.setattr("sms_resource.workflow.publish.write_report_files", lambda *_: [])
    ran = call("run", made, "--out", tmp_path / "results")
    assert ran.exit_code == 0, ran.output
    assert "all classes" in ran.output and "Dry tonnes" in ran.output
    assert (tmp_path / "results" / "grade_tonnage.csv").is_file()
    again = call("new", *files, "--out", made)
    assert again.exit_code == 2 and made.read_text(encoding="utf-8") == text
    assert call("new", *files, "--out", made, "--force").exit_code == 0


def test_an_open_question_of_a_new_study_is_an_error(study: SmallStudy) -> None:
    files = [path for path in study.folder.iterdir() if path.name != "study.toml"]
    made = study.folder / "mine.toml"
    call("new", *files, "--out", made)
    done = call("run", made, "--out", study.folder / "results")
    assert done.exit_code == 1
    assert "?" in done.output or "domain" in done.output
    assert not (study.folder / "results").exists()


def test_new_and_check_on_the_files_of_the_demo(tmp_path: Path) -> None:
    files = sorted(
        path
        for path in DEMO.iterdir()
        if path.suffix in (".csv", ".xlsx", ".tif", ".gpkg") and path.is_file()
    )
    made = tmp_path / "study.toml"
    done = call("new", *files, "--out", made)
    assert done.exit_code == 0, done.output
    text = made.read_text(encoding="utf-8")
    codes = {"CHR": "cap", "SSD": "cap", "MCU": "massive", "MPY": "massive", "MZN": "massive", "ANS": "massive",
             "STW": "stockwork", "AVO": "waste"}  # fmt: skip
    for code, domain in codes.items():
        text = text.replace(f'{code} = "?"', f'{code} = "{domain}"')
    made.write_text(text.replace('sulphide = ["massive"]', 'sulphide = ["cap", "massive", "stockwork"]'))
    assert '= "?"' not in text
    checked = call("check", made, "--json")
    errors = [item for item in json.loads(checked.stdout) if item["severity"] == "error"]
    assert not errors


def test_view_of_results_that_lack_their_layers_is_told(tmp_path: Path) -> None:
    out = tmp_path / "results"
    with ResultFolder(out) as folder:
        (folder.staging / "manifest.json").write_text("{}")
        folder.publish()
    done = command("view", out, "--screenshot", tmp_path / "a.png")
    assert done.returncode == 1
    assert "Traceback" not in done.stderr and done.stderr.strip()
    assert not (tmp_path / "a.png").exists()
