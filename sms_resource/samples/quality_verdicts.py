"""Verdicts on a laboratory, element by element, in words and findings."""

from __future__ import annotations

import numpy as np
import pandas as pd

from sms_resource.findings import Findings
from sms_resource.samples.intervals import numbers
from sms_resource.samples.reference_materials import BIAS_CAUTION_PCT, BIAS_FAILED_PCT, LEAST_RESULTS
from sms_resource.units import chance, element_column, unit_label

NAMED = {
    "references": "reference materials", "blanks": "blanks", "duplicates": "duplicates",
    "checks": "results of a check laboratory",
}  # fmt: skip
ASPECTS = ("references", "blanks", "duplicates", "checks")
FEW_BLANKS = 8  # under so many a rank correlation says nothing (common practice, no source)

Line = tuple[str, str, str, str]


def reference_verdict(name: str, materials: pd.DataFrame, batches: pd.DataFrame, findings: Findings) -> Line:
    """Verdict on an element from its reference materials and batches."""
    part = materials.loc[materials["element"] == name]
    own = batches.loc[batches["element"] == name]
    count = int(part["n"].sum())
    if not count:
        return name, ASPECTS[0], "missing", ""
    failures = int(part["failures"].sum())
    bias = numbers(part, "bias_pct")
    beyond = (numbers(part, "bias_low_pct") > 0) | (numbers(part, "bias_high_pct") < 0)
    worst = float(np.nanmax(np.abs(bias)))
    accused = [str(b) for b in own.loc[own["verdict"] == "accused", "batch"]]
    for batch in accused:
        row = own.loc[own["batch"] == batch].iloc[0]
        findings.warning(
            "quality-batch-bias",
            f"{name.capitalize()}: batch {batch} is biased by {row['mean_z']:+.1f} SD over {row['n']} reference results "
            f"({chance(row['p_adjusted'])} after allowing for all batches)",
            "Have the batch assayed again, or leave it out.",
        )
    if failures:
        findings.note(
            "quality-reference-fail",
            f"{name.capitalize()}: {failures} of {count} reference results fail (beyond 3 SD, or two in a row beyond 2)",
        )
    for off in part.loc[beyond & (np.abs(bias) > BIAS_CAUTION_PCT)].to_dict("records"):
        findings.warning(
            "quality-bias",
            f"{name.capitalize()}: the laboratory is {off['bias_pct']:+.1f} % off {off['material']} "
            f"({off['bias_low_pct']:+.1f} to {off['bias_high_pct']:+.1f} %)",
            "Ask the laboratory; a bias of grade is a bias of metal.",
        )
    serious = beyond & (np.abs(bias) > BIAS_FAILED_PCT) & (numbers(part, "n") >= LEAST_RESULTS)
    if accused or serious.any():
        verdict = "failed"
    elif (
        count < LEAST_RESULTS or (beyond & (np.abs(bias) > BIAS_CAUTION_PCT)).any() or failures > 0.05 * count
    ):
        verdict = "caution"
    else:
        verdict = "good"
    text = f"{count} results, {failures} failed, greatest bias {worst:.1f} %"
    if accused:
        text += f", biased batches: {', '.join(accused)}"
    return name, ASPECTS[0], verdict, text


def blank_verdict(name: str, blanks: pd.DataFrame, findings: Findings) -> Line:
    """Verdict on an element from its blanks, with carry-over from the sample before."""
    mine = blanks.loc[blanks["element"] == name]
    if not len(mine):
        return name, ASPECTS[1], "missing", ""
    part, unit = mine.loc[mine["judged"]], unit_label(element_column(name))
    carried, said = _carry_over(name, mine, findings)
    if not len(part):
        text = f"{len(mine)} blanks, and no detection limit to judge them by{said}"
        return name, ASPECTS[1], "caution" if carried else "missing", text
    failed = int(part["failed"].sum())
    for row in part.loc[part["failed"]].to_dict("records"):
        before = (
            f", after a sample of {row['grade_before']:.3g} {unit}"
            if np.isfinite(row["grade_before"])
            else ""
        )
        findings.warning(
            "quality-blank-fail",
            f"{name.capitalize()}: blank {row['sample_id']} holds {row['value']:.3g} {unit}, over {row['limit']:.3g} "
            f"{unit}{before}",
            "Look for carry-over from the sample before, and for mixed labels.",
            row=row.get("source_row"),
        )
    verdict = "failed" if failed / len(part) > 0.05 else "caution" if failed or carried else "good"
    text = f"{len(part)} blanks, {failed} over {part['limit'].iloc[0]:g} {unit}{said}"
    return name, ASPECTS[1], verdict, text


def _carry_over(name: str, blanks: pd.DataFrame, findings: Findings) -> tuple[bool, str]:
    """Whether blanks follow the grade of the sample before them, and the test in words; it needs no limit."""
    from scipy.stats import spearmanr

    pair = blanks.loc[np.isfinite(numbers(blanks, "grade_before")) & np.isfinite(numbers(blanks, "value"))]
    if len(pair) < FEW_BLANKS or pair["value"].nunique() < 2 or pair["grade_before"].nunique() < 2:
        return False, ""
    answer = spearmanr(pair["grade_before"], pair["value"])
    said = f"rank correlation with the grade before {answer.statistic:.2f} ({chance(answer.pvalue)})"
    if not (answer.pvalue < 0.01 and answer.statistic > 0):
        return False, f", {said}"
    findings.warning(
        "quality-carry-over",
        f"{name.capitalize()}: blanks follow the grade of the sample before: rank correlation "
        f"{answer.statistic:.2f}, {chance(answer.pvalue)}, {len(pair)} blanks",
        "Ask the laboratory to clean between samples.",
    )
    return True, f", carry-over: {said}"


def duplicate_verdict(name: str, duplicates: pd.DataFrame, findings: Findings) -> Line:
    """Verdict on an element from its duplicates, stage by stage."""
    part = duplicates.loc[duplicates["element"] == name]
    if not len(part):
        return name, ASPECTS[2], "missing", ""
    texts = []
    for row in part.to_dict("records"):
        texts.append(
            f"{row['stage'] or 'stage not given'}: CVavg {row['cv_avg_pct']:.1f} % of {row['n']} pairs"
        )
        if row["verdict"] == "failed":
            findings.warning(
                "quality-duplicate",
                f"{name.capitalize()}: {row['stage']} duplicates have a CVavg of {row['cv_avg_pct']:.1f} %, over the "
                f"acceptable {row['acceptable_pct']:g} %",
                "Look at sampling and preparation at that stage.",
            )
    found = set(part["verdict"])
    verdict = "failed" if "failed" in found else "caution" if "caution" in found else "good"
    return name, ASPECTS[2], verdict, "; ".join(texts)


def check_verdict(name: str, checks: pd.DataFrame, findings: Findings) -> Line:
    """Verdict on an element from the check laboratory."""
    part = checks.loc[checks["element"] == name]
    if not len(part) or not int(part["n"].iloc[0]):
        return name, ASPECTS[3], "missing", ""
    row = part.iloc[0].to_dict()
    text = (
        f"{row['n']} pairs, bias {row['bias_pct']:+.1f} %, reduced major axis slope {row['slope']:.3f} "
        f"({row['slope_low']:.3f} to {row['slope_high']:.3f})"
    )
    if row["verdict"] == "failed":
        findings.warning(
            "quality-check-laboratory",
            f"{name.capitalize()}: the check laboratory differs: {text}",
            "Find out which laboratory is right before the grades are used.",
        )
    return name, ASPECTS[3], str(row["verdict"]), text
