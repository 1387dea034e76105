"""Results are whole or untouched."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest

from sms_resource.workflow.folder import NotResultsError, ResultFolder, is_results, recover


def publish(out: Path, text: str) -> None:
    with ResultFolder(out) as folder:
        (folder.staging / "manifest.json").write_text("{}")
        (folder.staging / "table.csv").write_text(text)
        folder.publish()


def test_new_results_take_the_place_of_the_last(tmp_path: Path) -> None:
    out = tmp_path / "results"
    publish(out, "one")
    publish(out, "two")
    assert (out / "table.csv").read_text() == "two"
    assert [path.name for path in tmp_path.iterdir()] == ["results"]


def test_without_an_exchange_in_one_step_the_result_is_the_same(tmp_path: Path, monkeypatch) -> None:
    monkeypatch.setattr("sms_resource.workflow.folder._exchange", lambda one, other: False)
    out = tmp_path / "results"
    publish(out, "one")
    publish(out, "two")
    assert (out / "table.csv").read_text() == "two"
    assert [path.name for path in tmp_path.iterdir()] == ["results"]


def test_a_run_that_breaks_leaves_the_last_results(tmp_path: Path) -> None:
    out = tmp_path / "results"
    publish(out, "one")
    with pytest.raises(KeyboardInterrupt), ResultFolder(out) as folder:
        (folder.staging / "table.csv").write_text("half")
        raise KeyboardInterrupt
    assert (out / "table.csv").read_text() == "one"
    assert [path.name for path in tmp_path.iterdir()] == ["results"]


def test_a_killed_run_leaves_the_last_results_and_the_next_run_sweeps(tmp_path: Path) -> None:
    out = tmp_path / "results"
    publish(out, "one")
    code = (
        "import os, signal, sys\n"
        "from sms_resource.workflow.folder import ResultFolder\n"
        "folder = ResultFolder(sys.argv[1]).__enter__()\n"
        "(folder.staging / 'table.csv').write_text('half')\n"
        "os.kill(os.getpid(), signal.SIGKILL)\n"
    )
    subprocess.run([sys.executable, "-c", code, str(out)], check=False)
    assert (out / "table.csv").read_text() == "one"
    assert len(list(tmp_path.iterdir())) == 2
    publish(out, "two")
    assert [path.name for path in tmp_path.iterdir()] == ["results"]


def test_a_folder_that_holds_something_else_is_left_alone(tmp_path: Path) -> None:
    out = tmp_path / "thesis"
    out.mkdir()
    (out / "chapter.txt").write_text("years of work")
    with pytest.raises(NotResultsError, match="holds no results"):
        publish(out, "one")
    assert (out / "chapter.txt").read_text() == "years of work"
    file = tmp_path / "file"
    file.write_text("x")
    with pytest.raises(NotResultsError):
        publish(file, "one")


def test_a_death_between_two_renames_is_mended(tmp_path: Path) -> None:
    out = tmp_path / "results"
    publish(out, "one")
    os.replace(out, tmp_path / ".results.previous")
    recover(out)
    assert is_results(out)
    assert (out / "table.csv").read_text() == "one"
