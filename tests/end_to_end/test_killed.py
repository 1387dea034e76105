"""Runs that are stopped or killed: the last whole results stand, the cache is sound, the next run is as any other."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
from collections import Counter
from pathlib import Path

import pytest

from tests.end_to_end.conftest import Run
from tests.end_to_end.places import tree
from tests.end_to_end.small_study import SmallStudy

# A shell shows 130 for both: Python ends by the signal itself where it came while a string was being executed.
STOPPED = (130, -signal.SIGINT)

posix = pytest.mark.skipif(os.name != "posix", reason="signals of POSIX")


@posix
@pytest.mark.slow
def test_fifty_kills_at_random_moments_lose_nothing(tmp_path: Path) -> None:
    environment = {**os.environ, "OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1"}
    done = subprocess.run(
        [sys.executable, "-m", "tests.end_to_end.killing", str(tmp_path), "50", "7"],
        capture_output=True, text=True, check=False, timeout=900, env=environment,
        cwd=Path(__file__).parents[2],
    )  # fmt: skip
    assert done.returncode == 0, done.stderr[-3000:]
    told = json.loads(done.stdout)
    assert told["faults"] == []
    killed = [moment for moment in told["moments"] if "ended" not in moment]
    assert len(told["moments"]) == 50 and len(killed) >= 35
    assert len(Counter(killed)) >= 6  # in many stages, not in one


def stop(study: Path, out: Path, after: str, *options: str, cache: Path) -> subprocess.CompletedProcess[str]:
    """Send the signal of Ctrl-C when the line of a stage has been printed."""
    process = subprocess.Popen(
        [sys.executable, "-u", "-m", "sms_resource.cli", "run", str(study), "--out", str(out), *options],
        stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
        env={**os.environ, "SMS_RESOURCE_CACHE": str(cache), "PYTHONUNBUFFERED": "1"},
    )  # fmt: skip
    assert process.stdout is not None
    lines = []
    for line in process.stdout:
        lines.append(line)
        if line.startswith(after):
            process.send_signal(signal.SIGINT)
            break
    rest, errors = process.communicate(timeout=300)
    return subprocess.CompletedProcess(process.args, process.returncode, "".join(lines) + rest, errors)


@posix
@pytest.mark.parametrize(("after", "options"), [("check", ["--no-cache"]), ("classify", [])])
def test_ctrl_c_leaves_the_last_results_and_nothing_half_written(
    after: str, options: list[str], run: Run, tmp_path: Path
) -> None:
    out = tmp_path / "results"
    out.mkdir()
    for name in ("manifest.json", "grade_tonnage.csv"):
        (out / name).write_bytes((run.out / name).read_bytes())
    before = tree(out)
    done = stop(run.study.path, out, after, *options, cache=run.store.folder)
    assert done.returncode in STOPPED
    assert "Traceback" not in done.stderr
    assert "earlier results are as they were" in done.stderr
    assert tree(out) == before
    assert [path.name for path in tmp_path.iterdir()] == ["results"]


@posix
def test_ctrl_c_of_a_first_run_leaves_no_folder(tmp_path: Path) -> None:
    study = SmallStudy(tmp_path / "study")
    done = stop(study.write(), tmp_path / "results", "load", cache=tmp_path / "cache")
    assert done.returncode in STOPPED
    assert sorted(path.name for path in tmp_path.iterdir()) == ["cache", "study"]
