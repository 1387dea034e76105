"""The samples room on the demo deposit, whose truth is known: what was planted is found."""

from __future__ import annotations

import json
from functools import cache
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest

from sms_resource.findings import Findings
from sms_resource.samples.assays import resolve_assays
from sms_resource.samples.bracket import lost_core_bracket
from sms_resource.samples.composites import composite
from sms_resource.samples.density import density_table, fit_density
from sms_resource.samples.desurvey import hole_paths
from sms_resource.samples.domains import domain_intervals
from sms_resource.samples.position import match_collars
from sms_resource.samples.quality import laboratory_quality
from sms_resource.samples.recovery import recovery_summary
from sms_resource.samples.surface import surface_bias
from sms_resource.samples.twins import twin_report

DEMO = Path(__file__).parents[2] / "demo_deposit"
METALS = ["cu_pct", "zn_pct", "au_gpt", "ag_gpt"]
BODY = ["cap", "massive", "stockwork"]

pytestmark = pytest.mark.skipif(
    not (DEMO / "truth" / "truth.json").exists(), reason="the demo deposit is not here"
)


@cache
def demo() -> SimpleNamespace:
    """Everything that the tests below share, read once by the loaders of the project."""
    from sms_resource import load_study
    from sms_resource.workflow.load import load
    from sms_resource.workflow.stage import Context

    study = load_study(DEMO / "study.toml")
    data = load(Context(study.config, {}, Findings(), study, 1))
    match = match_collars(data.drill.collars, data.seafloor, policy="shift_median")
    paths = hole_paths(match.collars, data.drill.surveys)
    assays, _, _ = resolve_assays(data.drill.assays, [*METALS, "fe_pct", "pb_pct", "as_ppm", "ba_pct"])
    log = domain_intervals(data.drill.lithology, dict(study.config.domains.codes))
    made = composite(assays, data.drill.runs, log, paths, metals=METALS)
    surface, _, _ = resolve_assays(data.surface, METALS)
    return SimpleNamespace(
        truth=json.loads((DEMO / "truth" / "truth.json").read_text(encoding="utf-8")), data=data, match=match, paths=paths,
        assays=assays, log=log, made=made, surface=surface, inside=made.frame.loc[made.frame["domain"].isin(BODY)],
    )  # fmt: skip


def test_the_planted_shift_of_the_collars_is_undone() -> None:
    case = demo()
    assert case.match.shift_m == pytest.approx(-case.truth["collar_shift_m"], abs=0.3)
    flagged = case.match.collars.loc[case.match.collars["flagged"], "hole_id"]
    assert set(flagged) == set(case.truth["collar_outliers_m"])


def test_mass_balance_of_the_composites() -> None:
    audit = demo().made.audit
    assert audit["difference"].dropna().abs().max() < 1e-9


def test_the_run_without_core_stays() -> None:
    case = demo()
    hole = case.truth["run_without_core"]["hole"]
    part = case.made.frame.loc[case.made.frame["hole_id"] == hole]
    assert ((part["recovery_pct"] == 0) & part["cu_pct"].isna()).any()


def test_the_bracket_of_lost_core_holds_the_truth() -> None:
    """Silver reads low in one batch of the demo, so its upper end is given the 2 % that this takes."""
    case = demo()
    table = lost_core_bracket(
        case.assays, case.data.drill.runs, case.log, case.paths, metals=METALS, domains=BODY
    )
    table = table.set_index(["treatment", "domain"])
    for domain, metals in case.truth["lost_core"].items():
        for metal, grades in metals.items():
            low, high = table.loc[("background", domain), metal], table.loc[("represented", domain), metal]
            slack = 1.02 if metal == "ag_gpt" else 1.0
            assert low <= grades["true_along_holes"] <= high * slack, (domain, metal)


def test_the_planted_ratios_of_the_surface_lie_in_their_intervals() -> None:
    case = demo()
    bias = surface_bias(case.surface, case.inside, METALS, 11).set_index("metal")
    for metal, ratio in case.truth["surface_ratio"].items():
        assert bias.loc[metal, "ratio_low"] <= ratio["planted"] <= bias.loc[metal, "ratio_high"], metal


def test_the_bad_batch_is_found_and_no_good_one_accused() -> None:
    case = demo()
    quality = laboratory_quality(case.data.laboratory, case.assays)
    accused = quality.batches.loc[
        quality.batches["verdict"] == "accused", ["element", "batch"]
    ].values.tolist()
    bad = case.truth["bad_batch"]
    assert accused == [[bad["column"].partition("_")[0], bad["batch"]]]
    assert quality.verdict(accused[0][0]) == "failed"
    assert set(quality.verdicts["verdict"]) <= {"good", "caution", "failed"}


def test_densities_come_within_three_percent_of_the_truth() -> None:
    case = demo()
    table = density_table(case.data.drill.densities, case.assays, case.log)
    model = fit_density(table, domains=BODY).by_domain.set_index("domain")
    for domain, truth in case.truth["by_domain"].items():
        assert model.loc[domain, "dry_base"] == pytest.approx(
            truth["dry_tonnes"] / truth["volume_m3"], rel=0.03
        ), domain
        assert model.loc[domain, "wet_base"] == pytest.approx(
            truth["wet_tonnes"] / truth["volume_m3"], rel=0.03
        ), domain


def test_recovery_and_twins_are_those_of_the_truth() -> None:
    case = demo()
    table, _ = recovery_summary(case.data.drill.runs)
    assert table["recovery_pct"].iloc[0] == pytest.approx(case.truth["mean_recovery_pct"], abs=1.0)
    twins = {hole for hole in case.match.collars["hole_id"] if str(hole).endswith("T")}
    report = twin_report(case.match.collars, case.inside, metals=METALS)
    assert twins <= set(report.pairs["hole_a"]) | set(report.pairs["hole_b"])
    assert np.isfinite(report.comparison["relative_pct"]).all()
