"""One whole run of the small study, made once and read by many tests."""

from __future__ import annotations

import os
import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest

from sms_resource import load_study, run_study
from sms_resource.cache import StageCache
from tests.end_to_end.small_study import SmallStudy

MARKUP = "<script>alert(1)</script>"
MATHS = "H$\\frac{1"
FORMULA = "=1+2"


def hostile(study: SmallStudy) -> SmallStudy:
    """Mark-up, mathematics and a formula in the texts that come from data files and the study."""
    for rows in study.rows.values():
        for row in rows:
            for old, new in (("H007", MARKUP), ("H008", MATHS), ("H009", FORMULA)):
                for name in ("hole_id", "sample_id", "original_sample_id"):
                    if str(row.get(name, "")).startswith(old):
                        row[name] = row[name].replace(old, new)
    study.rows["laboratory"][0]["material"] = "<b>RM1</b>"
    study.toml["study"]["name"] = 'Small <i>mound</i> & "co"'
    study.toml["study"]["prepared_by"] = "<img src=x onerror=alert(2)>"
    study.toml["cutoff"]["basis"] = "=1+1 <b>invented</b>"
    study.toml["reasons"] = {"composites.length_m": {"why": "<script>alert(3)</script>", "by": "a & b"}}
    return study


@dataclass(frozen=True)
class Run:
    """A run of the small study: its files, its results, and the cache that it filled."""

    study: SmallStudy
    out: Path
    result: Any
    store: StageCache


@pytest.fixture(scope="session")
def run(tmp_path_factory: pytest.TempPathFactory) -> Run:
    """The small study with hostile texts, run on one thread."""
    folder = tmp_path_factory.mktemp("run")
    study = hostile(SmallStudy(folder / "study"))
    store = StageCache(folder / "cache")
    result = run_study(load_study(study.write()), folder / "results", threads=1, cache=store)
    assert not result.findings.has_errors, result.findings.errors
    return Run(study, folder / "results", result, store)


def command(*arguments: object, environment: dict[str, str] | None = None, **options: Any) -> Any:
    """Run the command line in a process of its own."""
    return subprocess.run(
        [sys.executable, "-m", "sms_resource.cli", *map(str, arguments)],
        capture_output=True, text=True, check=False, env={**os.environ, **(environment or {})},
        **{"timeout": 600, **options},
    )  # fmt: skip
