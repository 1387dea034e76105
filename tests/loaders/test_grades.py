"""Grades in whatever unit they come, with their limits, in each element's own unit."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from sms_resource.findings import Findings
from sms_resource.loaders.headers import element_of_header
from sms_resource.loaders.laboratory import load_laboratory
from sms_resource.loaders.source import TableSource
from sms_resource.loaders.table import load_table


def assays(
    folder: Path, header: str, cells: list[str], element: str, **options: Any
) -> tuple[pd.DataFrame, Findings]:
    path = folder / "assays.csv"
    rows = [f"H1,S{i},{i},{i + 1},laboratory,{cell}" for i, cell in enumerate(cells)]
    path.write_text("\n".join([f"hole_id,sample_id,from_m,to_m,method,{header}", *rows]) + "\n")
    return load_table(TableSource(path, **options), "assays", (element,))


@pytest.mark.parametrize(
    ("header", "declared", "cell", "element", "expected"),
    [
        ("cu_pct", None, "2.5", "cu", 2.5),
        ("Cu_ppm", None, "25000", "cu", 2.5),
        ("Au (ppb)", None, "1500", "au", 1.5),
        ("Au_gpt", None, "1.5", "au", 1.5),
        ("Gold", "oz/t", "1", "au", 31.1034768),  # grams in a troy ounce: NIST Handbook 44, appendix C
        ("Pb_pct", None, "0.3", "pb", 0.3),
        ("As %", None, "0.05", "as", 500.0),
        ("Ag g/t", None, "80", "ag", 80.0),
        ("silver", "ppm", "80", "ag", 80.0),
        ("SiO2 [wt%]", None, "31", "sio2", 31.0),
        ("zn", "permil", "45", "zn", 4.5),
    ],
)
def test_units(
    tmp_path: Path, header: str, declared: str | None, cell: str, element: str, expected: float
) -> None:
    units = {element: declared} if declared else {}
    frame, found = assays(tmp_path, header, [cell], element, units=units)
    column = next(
        name for name in frame if name.startswith(f"{element}_") and not name.endswith(("status", "limit"))
    )
    assert frame[column][0] == pytest.approx(expected, rel=1e-9)
    assert len(found) == 0


def test_limits_are_converted_with_the_values(tmp_path: Path) -> None:
    frame, found = assays(tmp_path, "Au_ppb", ["1200", "<5", ">10000", "", "-"], "au")
    assert list(frame["au_gpt_status"]) == [0, 1, 2, 3, 3]
    assert frame["au_gpt_status"].dtype == np.int8
    np.testing.assert_allclose(frame["au_gpt"], [1.2, np.nan, np.nan, np.nan, np.nan])
    np.testing.assert_allclose(frame["au_gpt_limit"], [np.nan, 0.005, 10.0, np.nan, np.nan])
    assert len(found) == 0


def test_the_study_may_give_the_detection_limit(tmp_path: Path) -> None:
    frame, found = assays(tmp_path, "Au_ppb", ["1200", "bdl", "<2"], "au", detection_limits={"au": 5.0})
    np.testing.assert_allclose(frame["au_gpt_limit"], [np.nan, 0.005, 0.002])
    assert not found.has_errors


def test_a_mapped_column_wins_over_a_name(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    path.write_text("hole_id,from_m,to_m,method,Cu_pct,Cu_final\nH1,0,1,laboratory,1.0,2.0\n")
    for key in ("cu", "cu_pct"):
        frame, found = load_table(
            TableSource(path, columns={key: "Cu_final"}, units={"cu": "%"}), "assays", ("cu",)
        )
        assert frame["cu_pct"][0] == 2.0 and not found.has_errors


def test_constants_fill_what_the_file_lacks(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    path.write_text("hole_id,from_m,to_m,cu_pct\nH1,0,1,1.0\n")
    frame, found = load_table(
        TableSource(path, constants={"method": "pXRF", "mo": 3.0}), "assays", ("cu",), ("mo",)
    )
    assert frame["method"][0] == "handheld" and frame["mo_ppm"][0] == 3.0 and frame["mo_ppm_status"][0] == 0
    assert len(found) == 0


@pytest.mark.parametrize(
    ("header", "meaning"),
    [
        ("Cu_pct", ("cu", "pct")),
        ("copper", ("cu", None)),
        ("AU", ("au", None)),
        ("Au g/t", ("au", "g/t")),
        ("Au_g_t", ("au", "g/t")),
        ("Zn%", ("zn", "pct")),
        ("AuPPB", ("au", "ppb")),
        ("SiO2%", ("sio2", "pct")),
        ("inppm", ("in", "ppm")),
        ("lippm", None),
        ("As_ppm_ICP", ("as", "ppm")),
        ("In hole", None),
        ("Comment", None),
        ("", None),
        ("Ag_grade", None),
    ],
)
def test_headers_of_elements(header: str, meaning: tuple[str, str | None] | None) -> None:
    assert element_of_header(header) == meaning


def laboratory(folder: Path, text: str, **options: Any) -> tuple[pd.DataFrame, Findings]:
    path = folder / "lab.csv"
    path.write_text(text)
    return load_laboratory(TableSource(path, **options))


def test_laboratory_results_in_their_own_units(tmp_path: Path) -> None:
    frame, found = laboratory(
        tmp_path,
        "kind,material,element,value,unit,expected,expected_sd\n"
        "CRM,A,Cu,21000,ppm,20500,300\nstd,A,gold,1500,ppb,1450,20\nblank,Q,Au,<5,ppb,,\n",
    )
    assert not found.has_errors
    assert list(frame["kind"]) == ["reference", "reference", "blank"]
    assert list(frame["element"]) == ["cu", "au", "au"]
    np.testing.assert_allclose(frame["value"], [2.1, 1.5, np.nan])
    np.testing.assert_allclose(frame["expected"], [2.05, 1.45, np.nan])
    np.testing.assert_allclose(frame["expected_sd"], [0.03, 0.02, np.nan])
    np.testing.assert_allclose(frame["value_limit"], [np.nan, np.nan, 0.005])
    assert list(frame["value_status"]) == [0, 0, 1]
    assert list(frame["sequence"]) == [1, 2, 3]


def test_detection_limits_of_the_study_are_in_the_unit_of_the_row(tmp_path: Path) -> None:
    frame, found = laboratory(
        tmp_path,
        "kind,element,value,unit\nblank,Cu,150,ppm\nblank,Cu,bdl,ppm\nblank,Cu,<80,ppm\nblank,Zn,9,ppm\n",
        detection_limits={"cu": 100.0},
    )
    assert not found.has_errors
    np.testing.assert_allclose(frame["value_limit"], [0.01, 0.01, 0.008, np.nan])


def test_the_unit_of_the_laboratory_may_stand_in_the_study_or_the_header(tmp_path: Path) -> None:
    frame, found = laboratory(tmp_path, "kind,element,value\nblank,Au,10\n", units={"au": "ppb"})
    assert frame["value"][0] == pytest.approx(0.01) and not found.has_errors
    frame, found = laboratory(
        tmp_path, "kind,element,value_ppb\nblank,Au,10\n", columns={"value": "value_ppb"}
    )
    assert frame["value"][0] == pytest.approx(0.01) and not found.has_errors


def test_the_result_of_the_original_may_stand_beside_it(tmp_path: Path) -> None:
    frame, _ = laboratory(
        tmp_path, "kind,element,value,unit,original_value,original_sample_id\ndup,Cu,10000,ppm,11000,S1\n"
    )
    assert frame["original_value"][0] == pytest.approx(1.1) and frame["value"][0] == pytest.approx(1.0)
