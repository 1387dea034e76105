"""Fitted parameters that the data did not determine are told as such, in table, model and statement."""

from __future__ import annotations

from types import SimpleNamespace

import pandas as pd

from sms_resource.geostatistics.variogram_settings import ZONAL_RANGE_M as ZONAL_OF_THE_FIT
from sms_resource.reporting import parameters as p
from sms_resource.reporting.data import VariogramRecord


def _record() -> VariogramRecord:
    rows = [
        ("nugget", 0.0, 0.2, 0.5, 0.1), ("total_sill", 0.8, 1.0, 1.3, 0.1), ("major_range_1_m", 361.0, 365.0, 369.0, 0.007),
        ("semi_major_range_1_m", 361.0, 365.0, 369.0, 0.007), ("minor_range_1_m", 0.0266, 14.8, 8212.0, 4.0),
        ("minor_range_2_m", 5.0, 6.0, 7.5, 0.1),
    ]  # fmt: skip
    structures = [
        SimpleNamespace(shape="spherical", sill=0.5, ranges=(365.0, 365.0, 14.8)),
        SimpleNamespace(shape="spherical", sill=0.3, ranges=(p.ZONAL_RANGE_M, p.ZONAL_RANGE_M, 6.0)),
    ]
    return VariogramRecord(
        "cu_pct", model=SimpleNamespace(nugget=0.2, structures=structures),
        bounds_hit=("the major and semi-major range of structure 1 is at its upper limit, 365 m",),
        intervals=pd.DataFrame(rows, columns=["parameter", "low", "best", "high", "relative_error"]).assign(holes=49),
    )  # fmt: skip


def test_a_bound_and_a_wide_interval_are_not_measurements() -> None:
    assert p.statuses(_record()) == {
        "major_range_1_m": p.AT_BOUND, "semi_major_range_1_m": p.AT_BOUND, "minor_range_1_m": p.UNKNOWN,
    }  # fmt: skip
    shown = p.intervals_shown(_record()).set_index("Parameter")
    assert shown.loc["Range, major, structure 1 (m)", ["Low", "Best", "High"]].tolist() == [
        p.AT_BOUND,
        "365",
        p.AT_BOUND,
    ]
    assert shown.loc["Range, minor, structure 1 (m)", "Relative error (%)"] == "–"
    assert shown.loc["Range, minor, structure 2 (m)", "Low"] == "5"
    assert shown.loc["Total sill (squared grade)", "High"] == "1.30"


def test_models_and_statement_say_it_too() -> None:
    record = _record()
    assert p.range_text(record, 0, 1, 365.0) == "365 (at its bound)"
    assert p.range_text(record, 2, 1, 14.8) == "14.8 (not determined by the data)"
    assert p.range_text(record, 0, 2, p.ZONAL_RANGE_M) == "no limit (zonal)"
    assert p.range_text(record, 2, 2, 6.0) == "6"
    words = p.undetermined_words(record)
    assert "range, major, structure 1 (at its bound)" in words and "structure 2" not in words
    assert p.undetermined_words(VariogramRecord("cu_pct")) == ""


def test_zonal_is_what_the_fit_calls_zonal() -> None:
    assert p.ZONAL_RANGE_M == ZONAL_OF_THE_FIT
