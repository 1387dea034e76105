"""Wrong values of the samples' sections are named with their key before anything is run."""

from __future__ import annotations

from functools import cache
from pathlib import Path

import pytest

from sms_resource import load_study
from sms_resource.samples.associations import TRACERS
from sms_resource.samples.mineralogy import MINERALS
from sms_resource.study import Study, StudyError, sense_evidence

DEMO = Path(__file__).parents[2] / "demo_deposit" / "study.toml"
pytestmark = pytest.mark.skipif(not DEMO.exists(), reason="the demo deposit is not here")

WRONG = [
    (
        {"density.porosity_fraction": {"massive": [0.3, 0.1, 0.2]}},
        "density.porosity_fraction.massive",
        "does not rise",
    ),
    (
        {"density.assigned_dry_tpm3": {"cap": [2.0, 1.9, 2.1]}},
        "density.assigned_dry_tpm3.cap",
        "does not rise",
    ),
    ({"density.predictors": ["xx"]}, "density.predictors", "not an element"),
    ({"density.method": "regression", "density.predictors": []}, "density.predictors", "at least one"),
    ({"density.rest_mineral": "granite"}, "density.rest_mineral", "granite"),
    ({"density.rest_by_domain": {"massive": "granite"}}, "density.rest_by_domain.massive", "granite"),
    ({"density.rest_by_domain": {"nowhere": "quartz"}}, "density.rest_by_domain.nowhere", "domains.sulphide"),
    (
        {"associations.tracer_thresholds": {"cu/au": 5.0}},
        "associations.tracer_thresholds.cu/au",
        "cu/mo and cu/zn",
    ),
    (
        {"associations.tracer_thresholds": {"cu/zn": 0.0}},
        "associations.tracer_thresholds.cu/zn",
        "above zero",
    ),
    ({"laboratory.pair_limits": {"cu": {"field": [15, 10]}}}, "laboratory.pair_limits.cu.field", "rising"),
    ({"laboratory.pair_limits": {"xx": {"field": [5, 10]}}}, "laboratory.pair_limits.xx", "not an element"),
    (
        {"surface_samples.use": "cap", "surface_samples.cap_domain": "crust"},
        "surface_samples.cap_domain",
        "no block would take the cap",
    ),
    ({"composites.background": {"cu": -1.0}}, "composites.background.cu", "at least 0"),
    ({"composites.background": {"nowhere": {"cu": 1.0}}}, "composites.background.nowhere", "not a domain"),
    (
        {"composites.background": {"massive": {"xx": 1.0}}},
        "composites.background.massive.xx",
        "not an element",
    ),
    ({"composites.background": {"massive": {"cu": -1.0}}}, "composites.background.massive.cu", "at least 0"),
    ({"assays.methods": []}, "assays.methods", "no method"),
]
SOUND = [
    {"density.porosity_fraction": {"massive": [0.1, 0.2, 0.3], "cap": 0.4}},
    {"density.rest_by_domain": {"stockwork": "quartz"}},
    {"associations.tracer_thresholds": {"cu/mo": 800.0, "cu/zn": 5.0}},
    {"laboratory.pair_limits": {"cu": {"field": [10, 10]}}},
    {"surface_samples.use": "cap", "surface_samples.cap_domain": "cap"},
    {"surface_samples.cap_domain": "crust"},  # not used
    {"composites.background": {"cu": 0.1, "waste": {"zn": 0.0}}},
    {"domains.layout": "single", "composites.background": {"sulphide": {"cu": 0.1}}},
]


@cache
def demo() -> Study:
    return load_study(DEMO)


@pytest.mark.parametrize(("change", "key", "words"), WRONG, ids=[key for _, key, _ in WRONG])
def test_a_wrong_value_is_named_with_its_key(change: dict, key: str, words: str) -> None:
    with pytest.raises(StudyError) as caught:
        demo().with_overrides(change)
    found = [item for item in caught.value.findings if item.column == key]
    assert len(found) == 1
    assert words in f"{found[0].message} {found[0].remedy}" and found[0].code == "study-value"


@pytest.mark.parametrize("change", SOUND, ids=str)
def test_a_sound_value_passes(change: dict) -> None:
    assert demo().with_overrides(change).config is not None


def test_names_are_those_of_the_samples_room() -> None:
    assert set(sense_evidence.MINERALS) == set(MINERALS)
    assert {f"{one}/{two}" for one, two in TRACERS} == set(sense_evidence.TRACERS)
