"""Broken input, one kind a case: each gives its finding at its file, row and column, and never a traceback."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from sms_resource.loaders.codes import CODES
from tests.loaders.broken_holes import HOLES, VALUES
from tests.loaders.broken_places import GRIDS, PLACES
from tests.loaders.broken_tables import CELLS, COLUMNS, FILES
from tests.loaders.small_study import Study, matching
from tests.loaders.spoiling import Case, cell

CASES = [*FILES, *COLUMNS, *CELLS, *HOLES, *VALUES, *PLACES, *GRIDS]


@pytest.mark.parametrize("case", CASES, ids=[case.label for case in CASES])
def test_broken_input_has_its_finding(case: Case, tmp_path: Path) -> None:
    study = Study(tmp_path)
    case.spoil(study)
    _, found = study.load()
    assert {item.code for item in found} <= set(CODES)
    here = matching(found, code=case.code)
    assert here, f"no {case.code} among {[(f.code, f.where) for f in found if f.severity != 'note']}"
    wanted: dict[str, Any] = {"severity": case.severity, "file": case.file}
    wanted |= {key: value for key in ("row", "column") if (value := getattr(case, key)) is not None}
    exact = matching(found, code=case.code, **wanted)
    assert exact, here
    assert case.says in f"{exact[0].message} {exact[0].remedy}", exact[0]
    assert exact[0].message.endswith(".")
    if case.severity == "error":
        assert exact[0].remedy


def test_labels_are_unlike_each_other() -> None:
    assert len({case.label for case in CASES}) == len(CASES) >= 45


def test_all_findings_are_listed_not_only_the_first(tmp_path: Path) -> None:
    study = Study(tmp_path)
    cell("assays", 5, "cu_pct", "high")(study)
    cell("assays", 9, "zn_pct", "low")(study)
    cell("collars", 3, "easting", "")(study)
    cell("runs", 4, "from_m", 1.5)(study)
    study.layer_crs = None
    _, found = study.load()
    codes = {item.code for item in found.errors}
    assert {"not-a-number", "collar-incomplete", "interval-overlap", "crs-missing"} <= codes
    assert len(matching(found, code="not-a-number")) == 2


def test_many_of_a_kind_share_one_finding_that_lists_their_rows(tmp_path: Path) -> None:
    study = Study(tmp_path)
    for row in range(2, 62):
        cell("assays", row, "cu_pct", "x")(study)
    _, found = study.load()
    items = matching(found, code="not-a-number")
    assert len(items) == 26
    assert "rows" in items[-1].message and "27-61" in items[-1].message


def test_a_cell_that_is_no_number_has_one_finding(tmp_path: Path) -> None:
    study = Study(tmp_path)
    cell("runs", 5, "to_m", "four")(study)
    cell("collars", 3, "easting", "far")(study)
    _, found = study.load()
    for file, row in (("runs.csv", 5), ("collars.csv", 3)):
        assert [item.code for item in found.errors if item.file == file and item.row == row] == [
            "not-a-number"
        ]


def test_the_settings_move_the_guards(tmp_path: Path) -> None:
    study = Study(tmp_path)
    study.settings = replace(study.settings, warn_above={"cu": 2.5}, error_above={"cu": 3.1})
    _, found = study.load()
    assert matching(found, code="grade-guard") and matching(found, code="grade-impossible")
