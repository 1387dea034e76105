"""What all tests share: a cache of their own, kernels that are compiled once, and word of what was skipped."""

from __future__ import annotations

import os
import shutil
import subprocess
from collections import Counter
from collections.abc import Iterator
from functools import cache
from pathlib import Path

import pytest

# Parts that a machine may lack: what it is called, and words by which a skipped test names it.
EXTRAS = {
    "R with gstat": ("gstat", "rscript"),
    "chromium": ("chromium",),
    "Xvfb or OpenGL": ("xvfb", "opengl", "display"),
    "pdftoppm": ("pdftoppm", "poppler"),
}


@pytest.fixture(scope="session", autouse=True)
def own_cache(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Path]:
    """Stages are kept in a folder of the tests, never in the user's."""
    folder = tmp_path_factory.mktemp("cache")
    before = os.environ.get("SMS_RESOURCE_CACHE")
    os.environ["SMS_RESOURCE_CACHE"] = str(folder)
    yield folder
    if before is None:
        del os.environ["SMS_RESOURCE_CACHE"]
    else:
        os.environ["SMS_RESOURCE_CACHE"] = before


@pytest.fixture(scope="session")
def kernels(tmp_path_factory: pytest.TempPathFactory) -> None:
    """All kernels compiled and loaded, so that a time measured afterwards is that of the work."""
    from sms_resource import load_study, run_study
    from tests.end_to_end.small_study import SmallStudy

    study = load_study(SmallStudy(tmp_path_factory.mktemp("kernels")).write())
    assert not run_study(study, None, cache=False).findings.has_errors


@cache
def missing_extras() -> tuple[str, ...]:
    """Parts that this machine lacks."""
    found = {
        "R with gstat": _has_gstat(),
        "chromium": any(map(shutil.which, ("chromium", "chromium-browser", "google-chrome"))),
        "Xvfb or OpenGL": shutil.which("xvfb-run") is not None,
        "pdftoppm": shutil.which("pdftoppm") is not None,
    }
    return tuple(name for name, there in found.items() if not there)


def _has_gstat() -> bool:
    if shutil.which("Rscript") is None:
        return False
    try:
        done = subprocess.run(
            ["Rscript", "-e", "library(gstat)"], capture_output=True, timeout=60, check=False
        )
    except (OSError, subprocess.TimeoutExpired):
        return False
    return done.returncode == 0


def pytest_terminal_summary(terminalreporter: pytest.TerminalReporter) -> None:
    """Say which parts this machine lacks, and how many tests were skipped for each."""
    skipped: Counter[str] = Counter()
    for report in terminalreporter.stats.get("skipped", []):
        reason = str(report.longrepr).lower()
        names = [name for name, words in EXTRAS.items() if any(word in reason for word in words)]
        skipped[names[0] if names else "another reason"] += 1
    if not skipped:
        return
    missing = missing_extras()
    for name in dict.fromkeys((*missing, *skipped)):
        state = "missing on this machine" if name in missing else "skipped"
        terminalreporter.write_line(f"{name}: {state}; {skipped[name]} tests skipped for it")
