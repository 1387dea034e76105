"""A value that does not fit is named with its row, as the file spells it, with what was wanted; never a raw table."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest

from sms_resource import StudyError, load_study
from sms_resource.study.faults import shown
from tests.end_to_end.small_study import SmallStudy

CASES: list[tuple[str, str, Any, str]] = [
    ("blocks", "size_m", [5.0, 0.0, 2.0], "[5.0, 0.0, 2.0] holds a number that is not above zero"),
    ("blocks", "size_m", [5.0, -1.0, 2.0], "not above zero"),
    ("blocks", "size_m", 2.0, "'blocks.size_m' is 2.0: a list was wanted"),
    ("blocks", "origin_m", [1.0, 2.0], "'blocks.origin_m' is [1.0, 2.0]: it has too few values (2)"),
    ("blocks", "origin_m", [1.0, 2.0, 3.0, 4.0], "at most 3 values were wanted, 4 came"),
    ("blocks", "origin_m", [1.0, 2.0, "x"], "value 3 of 'blocks.origin_m' is \"x\": a number was wanted"),
    ("blocks", "azimuth_deg", "north", "'blocks.azimuth_deg' is \"north\": a number was wanted"),
    ("blocks", "vertical_frame", "up", "one of 'elevation', 'depth' or 'proportional' was wanted"),
    (
        "kriging",
        "discretisation",
        [2, 2.5, 2],
        "value 2 of 'kriging.discretisation' is 2.5: a whole number was wanted",
    ),
    ("search", "passes", [], "at least 1 value was wanted, 0 came"),
    ("screens", "over_cut_m", -0.1, "'screens.over_cut_m' is -0.1: it must be at least 0"),
    ("screens", "slope_max_deg", 95.0, "it must be below 90"),
    ("screens", "exclude_status", "active_vent", "a list was wanted"),
    ("variograms", "intervals", "maybe", "true or false was wanted"),
    ("study", "effective_date", "soon", "a date was wanted, such as 2026-06-30"),
    ("domains", "codes", {"CP": 3}, "'domains.codes.CP' is 3: text was wanted, in quotation marks"),
    (
        "density",
        "assigned_dry_tpm3",
        {"cap": "x"},
        "'density.assigned_dry_tpm3.cap' is \"x\": a number was wanted",
    ),
    ("density", "assigned_dry_tpm3", {"cap": [1.0, 2.0]}, "it has too few values (2)"),
    ("search", "radii_m", {"a": 1.0}, "'search.radii_m' is a table: a list was wanted"),
    ("top_cuts", "cuts", 3.0, "'top_cuts.cuts' is 3.0: a table was wanted, such as { name = 1 }"),
]


@pytest.mark.parametrize(("section", "key", "value", "said"), CASES)
def test_the_message_says_what_came_and_what_was_wanted(
    tmp_path: Path, section: str, key: str, value: Any, said: str
) -> None:
    study = SmallStudy(tmp_path)
    study.toml.setdefault(section, {})[key] = value
    path = study.write()
    with pytest.raises(StudyError) as caught:
        load_study(path)
    mine = [
        item for item in caught.value.findings.errors if (item.column or "").startswith(f"{section}.{key}")
    ]
    assert len(mine) == 1, caught.value.findings.errors
    assert said in mine[0].message and "{'" not in mine[0].message
    assert mine[0].row == study.row_of(f"{key} =") if not isinstance(value, dict) else mine[0].row is not None
    assert mine[0].remedy


def test_long_values_are_only_named() -> None:
    assert shown(list(range(9))) == "a list of 9"
    assert shown({"a": 1}) == "a table" and shown(True) == "true" and shown([1, [2, "x"]]) == '[1, [2, "x"]]'
    assert len(shown("x" * 500)) == 60
