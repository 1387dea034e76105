"""What a run would refuse or leave out at its end is named when the study is read."""

from __future__ import annotations

import pytest

from sms_resource.study import StudyError
from tests.study.test_sense_evidence import demo

CU = {"price": 9000.0, "recovery_pct": 88.0, "payable_pct": 96.0}
EQUIVALENT = {"cutoff.variable": "equivalent", "value.equivalent_in": "cu"}
WRONG = [
    (
        {"value.costs.slope_factors": [[20, 1.2], [0, 1.0]]},
        "value.costs.slope_factors",
        "from the flattest up",
    ),
    ({"value.costs.slope_factors": [[0, 0.0]]}, "value.costs.slope_factors", "not above zero"),
    ({"data.bathymetry.uncertainty_band": 1}, "data.bathymetry.uncertainty_band", "Name two bands"),
    (
        {**EQUIVALENT, "value.equivalent_in": "pb", "value.metals": {"cu": CU}},
        "value.equivalent_in",
        "not among",
    ),
    (
        {**EQUIVALENT, "value.metals": {"cu": CU, "zn": {"recovery_pct": 70.0}}},
        "value.metals.zn",
        "no price and no payability",
    ),
    (
        {**EQUIVALENT, "value.metals": {"cu": {**CU, "recovery_pct": None}}},
        "value.metals.cu",
        "no recovery",
    ),
]
SOUND = [
    {**EQUIVALENT, "value.metals": {"cu": CU, "pb": {"payable_pct": 0.0}}},
    {"value.costs.slope_factors": [[0, 1.0], [20, 1.2]]},
    {"cutoff.variable": "cu", "value.metals": {"cu": {"price": 9000.0}}},
    {"data.bathymetry.uncertainty_band": 2},
]


@pytest.mark.parametrize(("change", "key", "words"), WRONG)
def test_a_wrong_value_is_named_with_its_key(change: dict, key: str, words: str) -> None:
    with pytest.raises(StudyError) as caught:
        demo().with_overrides(change)
    found = [item for item in caught.value.findings.errors if item.column == key]
    assert len(found) == 1 and words in f"{found[0].message} {found[0].remedy}"


@pytest.mark.parametrize("change", SOUND, ids=str)
def test_a_sound_value_passes(change: dict) -> None:
    assert demo().with_overrides(change).config is not None
