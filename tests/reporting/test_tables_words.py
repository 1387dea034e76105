"""Numbers and names of report tables: rounded masses, small probabilities, names instead of column names."""

from __future__ import annotations

import math

import pandas as pd
import pytest

from sms_resource.geostatistics.verdicts import validation_table
from sms_resource.reporting.data import ReportData, Subject, ValueEvidence, cutoff_head
from sms_resource.reporting.elements import column_label, element_words, frame_table
from sms_resource.reporting.figures_validation import axis_start
from sms_resource.reporting.sections_estimate import price_note, scenarios_shown, value_labels
from sms_resource.reporting.sections_record import input_rows
from sms_resource.reporting.sections_samples import sigma_marked
from sms_resource.reporting.splits import small_text


def test_masses_are_rounded_and_the_note_says_so() -> None:
    frame = pd.DataFrame(
        {"step": ["a"], "dry_tonnes": [941248.0], "contained_pct": [12.345], "shapiro_p": [3e-12]}
    )
    table = frame_table(frame, "t")
    assert table.rows[0] == ("a", "941\u202f000", "12.3", "< 0.0001")
    assert "3 significant figures" in table.note and "unrounded" in table.note
    assert frame_table(frame, "t", mass_digits=2).rows[0][1] == "940\u202f000"
    assert frame_table(frame[["step", "contained_pct"]], "t").note == ""


def test_heads_carry_what_they_hold() -> None:
    assert column_label("cu_t") == "Cu contained (t)"
    assert column_label("au_oz") == "Au contained (troy oz)"
    assert column_label("cutoff").startswith("Cut-off (")
    assert (
        element_words("laboratory: au_gpt failed, zone_pct stays")
        == "laboratory: Au (g/t) failed, zone_pct stays"
    )


def _equivalent(**value: object) -> ReportData:
    cutoff = {"variable": "equivalent", "value": 2.0, "equivalent_in": "cu_pct", "currency": "US$"}
    return ReportData(subject=Subject(cutoff=cutoff), value=ValueEvidence(**value))  # type: ignore[arg-type]


def test_heads_of_value_name_money_and_mass() -> None:
    data = _equivalent()
    assert data.cutoff_text == "CuEq ≥ 2 %" and cutoff_head(data) == "CuEq (%)"
    assert value_labels(data)["value_by_grade"] == "Mean net value, chosen by CuEq (US$/t dry)"
    assert value_labels(data)["gain"] == "Gain of choosing by value (US$/t dry)"


def test_a_varied_price_explains_itself_on_an_equivalent_only() -> None:
    grid = {"label": "g", "x": "cutoff.at (Cu, %)", "y": "value.metals.cu.price (US$/t)", "frame": None}
    assert "higher price of Cu lowers the factor" in price_note(_equivalent(heat_maps=(grid,)))
    assert price_note(_equivalent()) == ""
    on_metal = ReportData(
        subject=Subject(cutoff={"variable": "cu_pct", "value": 2.0}), value=ValueEvidence(heat_maps=(grid,))
    )
    assert price_note(on_metal) == ""


def test_a_file_of_many_roles_is_one_row() -> None:
    inputs = [
        {"role": role, "path": "drilling.xlsx", "sha256": "ab" * 32, "bytes": 12000}
        for role in ("collars", "surveys", "assays")
    ] + [{"role": "bathymetry", "path": "grid.tif", "sha256": "cd" * 32, "bytes": 5}]
    rows = input_rows(inputs)
    assert [row[:2] for row in rows] == [
        ("drilling.xlsx", "collars, surveys, assays"),
        ("grid.tif", "bathymetry"),
    ]


def test_assumed_sigma_is_marked() -> None:
    collars = pd.DataFrame({"position_sigma_m": ["0.80", "5.00"], "sigma_assumed": [False, True]})
    shown, note = sigma_marked(collars)
    assert list(shown["position_sigma_m"]) == ["0.80", "5.00 (assumed)"]
    assert note.startswith("Assumed: 1 of 2 collars")


@pytest.mark.parametrize(
    ("smoothing", "words"),
    [(math.nan, "cannot be told"), (0.25, "smooths by 25 %"), (-0.5, "vary 50 % more")],
)
def test_no_check_prints_a_missing_number(smoothing: float, words: str) -> None:
    swaths = pd.DataFrame(
        {"column": ["cu_pct"], "axis": ["easting"], "sample_count": [1], "difference_pct": [40.0]}
    )
    figures = {
        "realised": 1.0, "theoretical_estimates": 1.0 if smoothing == smoothing else math.nan, "ratio": smoothing,
        "theoretical_blocks": smoothing, "smoothing": smoothing,
    }  # fmt: skip
    table = validation_table(swaths=swaths, block_variance={("all", "cu_pct"): figures})
    texts = " ".join(table["figures"])
    assert "nan" not in texts and words in texts and "no slice has" in texts
    assert table["verdict"].iloc[0] == "not judged"


def test_swath_axes_of_map_coordinates_start_near_their_data() -> None:
    frame = pd.DataFrame(
        {"axis": ["northing", "northing", "elevation"], "centre_m": [6293812.0, 6293905.0, -1640.0]}
    )
    assert axis_start(frame, "northing") == 6293800.0
    assert axis_start(frame, "elevation") == 0.0


def test_parts_too_small_to_report_are_named_as_small() -> None:
    assert small_text(1.7e-8, 2) == "< 0.001"
    assert small_text(0.0, 2) == "0"
    assert small_text(0.0123, 2) == "0.012"


def test_scenarios_are_shown_without_the_words_of_the_file() -> None:
    table = pd.DataFrame(
        {"label": ["a"], "origin": ["grid"], "state": ["run"], "changes": ['{"cutoff.at": 1}'], "dry_tonnes": [1e6],
         "cu_pct": [2.0], "cu_t": [2e4], "indicated_dry_tonnes": [0.0], "inferred_dry_tonnes": [1e6]}
    )  # fmt: skip
    shown = scenarios_shown(ReportData(subject=Subject(metals=("cu_pct",))), table)
    assert list(shown) == ["label", "origin", "dry_tonnes", "cu_pct", "inferred_dry_tonnes"]
