"""Every caution of the reporting standard appears when its trigger is met, with the figures of the trigger."""

from dataclasses import replace

import numpy as np
import pandas as pd

from sms_resource.reporting.cautions import all_cautions
from sms_resource.reporting.data import Evidence, ReportData

ALWAYS = {
    "draft",
    "classes-proposed",
    "estimate-rounded",
    "no-economic-viability",
    "effective-date",
    "environment",
    "smoothing",
}
TRIGGERED = {
    "prospects-not-judged",
    "inferred",
    "extrapolation",
    "top-cut",
    "density",
    "recovery",
    "quality",
    "exclusions",
    "jurisdiction",
    "estimators-differ",
    "validation",
    "deleterious",
    "no-site-visit",
    "equivalent",
    "cutoff-sensitivity",
    "continuity-assumed",
    "lost-core",
    "open-holes",
    "collars",
    "assumed-vertical",
    "class-flag",
}


def keys(data):
    return {caution.key for caution in all_cautions(data)}


def figures(data, key):
    return next(caution.figures for caution in all_cautions(data) if caution.key == key)


def test_always_there_even_with_nothing():
    assert keys(ReportData()) >= ALWAYS


def test_all_triggers_of_the_full_data(data):
    assert keys(data) >= ALWAYS | TRIGGERED


def test_every_caution_prints_figures(data):
    for caution in all_cautions(data):
        assert caution.figures.strip(), caution.key
        assert caution.title and caution.text


def test_trigger_figures_are_those_of_the_data(data):
    assert "3 of 150 composites" in figures(data, "top-cut") and "2.60 uncapped" in figures(data, "top-cut")
    assert "28 m" in figures(data, "extrapolation") and "25.2 %" in figures(data, "extrapolation")
    assert "massive: 9 measured" in figures(data, "density")
    assert "1 of 30 collars flagged" in figures(data, "collars") and "−0.82" not in figures(data, "quality")
    assert "beyond 3 SD" in figures(data, "quality")
    assert "Pb" in figures(data, "deleterious") and "Hg" in figures(data, "deleterious")
    assert "nearest: +6.7 %" in figures(data, "estimators-differ")
    assert "0.73" in figures(data, "validation")


def test_judged_prospects_change_the_label(data):
    judged = replace(
        data, subject=replace(data.subject, prospects={"judged_by": "B. Person", "basis": "a scoping study"})
    )
    assert data.tally_label == "block-model tally"
    assert "prospects-not-judged" not in keys(judged) and "Mineral Resource" in judged.tally_label
    half = replace(data, subject=replace(data.subject, prospects={"judged_by": "B. Person", "basis": " "}))
    assert half.tally_label == "block-model tally"


def test_missing_evidence_is_a_caution_not_silence():
    assert keys(ReportData()) >= {
        "quality-missing",
        "density",
        "few-samples",
        "recovery",
        "validation",
        "jurisdiction",
        "no-site-visit",
    }


def test_triggers_that_the_full_data_do_not_meet(data):
    assert not keys(data) & {
        "no-drilling",
        "surface-used",
        "few-samples",
        "position",
        "handheld",
        "exploration-target",
    }
    grabs = pd.DataFrame({"sample_id": ["S1"], "easting": [0.0], "northing": [0.0]})
    assert "no-drilling" in keys(ReportData(evidence=Evidence(surface=grabs)))
    used = replace(data, evidence=replace(data.evidence, surface_use="a cap 1 m thick", handheld_used=True))
    assert keys(used) >= {"surface-used", "handheld"}
    loose = replace(
        data, evidence=replace(data.evidence, collars=data.evidence.collars.assign(position_sigma_m=25.0))
    )
    assert "position" in keys(loose) and "25 m" in figures(loose, "position")
    target = replace(
        data,
        classes=replace(data.classes, exploration_target={"dry_tonnes_low": 1e5, "dry_tonnes_high": 4e5}),
    )
    text = next(c for c in all_cautions(target) if c.key == "exploration-target")
    assert (
        "conceptual" in text.text
        and "insufficient exploration" in text.text
        and "100 kt dry to 400 kt dry" in text.figures
    )


def test_good_evidence_lifts_the_caution(data):
    e = data.evidence
    runs = e.runs.assign(recovery_pct=95.0)
    bias = e.recovery_bias.assign(p_value=0.03, p_adjusted=0.5)
    enough = e.density_by_domain.assign(n=40)
    verdicts = e.laboratory.verdicts.assign(verdict="good")
    good = replace(
        data,
        evidence=replace(
            e,
            runs=runs,
            recovery_bias=bias,
            density_by_domain=enough,
            laboratory=replace(e.laboratory, verdicts=verdicts),
        ),
    )
    assert not keys(good) & {"recovery", "density", "quality", "quality-missing"}


def test_recovery_mean_is_weighted_by_length(data):
    runs = pd.DataFrame({"from_m": [0.0, 1.0], "to_m": [1.0, 4.0], "recovery_pct": [90.0, 10.0]})
    low = replace(data, evidence=replace(data.evidence, runs=runs))
    assert f"{np.average([90, 10], weights=[1, 3]):.0f} %" in figures(low, "recovery")
