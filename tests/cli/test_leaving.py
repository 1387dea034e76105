"""How a command ends where its reader has gone, its outputs are closed, or somebody asks it to stop."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from sms_resource import second
from sms_resource.cli.printing import Stoppable
from sms_resource.workflow.stage import Silent
from tests.end_to_end.small_study import SmallStudy
from tests.test_second import running

pytestmark = pytest.mark.skipif(sys.platform == "win32", reason="pipes and signals of this kind are POSIX")
COMMAND = [sys.executable, "-m", "sms_resource.cli"]


@pytest.fixture(scope="module")
def study(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return SmallStudy(tmp_path_factory.mktemp("study")).write()


@pytest.fixture(autouse=True)
def own_cache(tmp_path_factory: pytest.TempPathFactory, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("SMS_RESOURCE_CACHE", str(tmp_path_factory.getbasetemp() / "leaving"))


def test_a_reader_that_leaves_does_not_stop_the_run(study: Path, tmp_path: Path) -> None:
    command = [*COMMAND, "run", str(study), "--out", str(tmp_path / "results")]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True) as run:
        assert run.stdout is not None and run.stderr is not None
        assert run.stdout.readline().startswith("load")
        run.stdout.close()
        said = run.stderr.read()
    assert run.returncode == 0, said
    assert said == "" and (tmp_path / "results" / "report.pdf").is_file()


@pytest.mark.parametrize("closed", [1, 2])
def test_a_closed_output_is_no_fault(closed: int, study: Path) -> None:
    line = " ".join(f"'{part}'" for part in [*COMMAND, "check", str(study)])
    done = subprocess.run(f"{line} {closed}>&-", shell=True, capture_output=True, text=True, timeout=120)
    assert done.returncode == 0, done.stderr
    assert "Traceback" not in done.stderr + done.stdout


def test_a_wish_to_stop_that_a_library_swallowed_stops_the_run_at_the_next_stage() -> None:
    before = signal.getsignal(signal.SIGINT)
    progress = Stoppable(Silent())
    try:
        progress.started("load", "Reading")
        try:
            os.kill(os.getpid(), signal.SIGINT)
            time.sleep(1.0)
        except KeyboardInterrupt:
            pass  # as a library may do
        with pytest.raises(KeyboardInterrupt):
            progress.finished("load", 0.0, "", False)
    finally:
        progress.close()
    assert signal.getsignal(signal.SIGINT) is before


@pytest.mark.skipif(not Path("/proc/self/status").is_file(), reason="no /proc on this system")
def test_nothing_runs_on_after_a_stop_while_the_report_is_written(study: Path, tmp_path: Path) -> None:
    """The second interpreter, busy drawing, ends with the first."""
    command = [*COMMAND, "run", str(study), "--out", str(tmp_path / "results"), "--no-cache"]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True) as run:
        assert run.stdout is not None and run.stderr is not None
        for line in run.stdout:
            if line.startswith("classify"):
                break
        time.sleep(0.7)
        children = children_of(run.pid)
        run.send_signal(signal.SIGINT)
        said = run.stderr.read()
    assert run.returncode == 130 and "stopped" in said
    assert not (tmp_path / "results").exists()
    assert children or second.processors() < 2
    for _ in range(100):
        if not any(map(running, children)):
            return
        time.sleep(0.1)
    raise AssertionError(f"still at work: {children}")


def children_of(parent: int) -> list[int]:
    """Processes that a process has started."""
    status = Path("/proc").glob("[0-9]*/status")
    return [int(path.parent.name) for path in status if f"PPid:\t{parent}\n" in _text(path)]


def _text(path: Path) -> str:
    try:
        return path.read_text()
    except OSError:
        return ""  # it ended meanwhile
