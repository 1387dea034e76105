"""What the report says of the laboratory: inserts, reference materials, blanks, duplicates, check assays, limits."""

from __future__ import annotations

import pandas as pd

from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.elements import Block, Bullets, Heading, Paragraph, Slot, with_table
from sms_resource.reporting.summaries import (
    batches_shown,
    blanks_by_element,
    elements_with_unit,
    missing_checks,
    rates_shown,
    references_by_material,
    verdicts_shown,
)

PAIRS = {
    "cv_avg_pct": "CVavg (%)", "hard_mean_pct": "HARD, mean (%)", "hard_p90_pct": "HARD, 90th percentile (%)",
    "hard_within_10_share": "Share with HARD up to 10 %", "good_pct": "CVavg, good up to (%)",
    "acceptable_pct": "CVavg, acceptable up to (%)",
}  # fmt: skip
AXIS = {
    "slope_low": "Slope, lower limit", "slope_high": "Slope, upper limit", "intercept_low": "Intercept, lower limit",
    "intercept_high": "Intercept, upper limit",
}  # fmt: skip


def laboratory(data: ReportData) -> list[Block]:
    """Verdicts first, then what each rests on; what was not inserted is one sentence an aspect."""
    lab = data.evidence.laboratory
    blocks: list[Block] = [Heading("Laboratory quality")]
    shown, missing = verdicts_shown(lab.verdicts), missing_checks(lab.verdicts)
    if lab.verdicts is None or (lab.table is not None and not len(lab.table)):
        blocks.append(Paragraph("No laboratory inserts were given with this study."))
    elif missing or _blind_to_carry_over(lab.blanks):
        blocks.append(Bullets((*missing, *_blind_to_carry_over(lab.blanks))))
    with_table(blocks, shown, "Verdicts")
    with_table(
        blocks, rates_shown(lab.rates), "Inserts: count, and share of the samples",
        note="In use: field duplicates 5 to 10 %, pulp duplicates and reference materials 3 to 5 % (Abzalov 2008).",
    )  # fmt: skip
    blocks.append(Slot(("control_charts",)))
    if lab.materials is not None and len(lab.materials):
        with_table(
            blocks, elements_with_unit(lab.materials), "Reference materials: bias and its interval", most=30,
            columns=("element", "material", "n", "expected", "mean", "bias_pct", "bias_low_pct", "bias_high_pct", "cv_pct",
                     "warnings", "failures"),
            labels={"bias_low_pct": "Bias, lower limit (%)", "bias_high_pct": "Bias, upper limit (%)", "cv_pct": "CV (%)",
                    "mean": "Mean of the results", "warnings": "Beyond 2 SD", "failures": "Failed by the rules"},
        )  # fmt: skip
    else:
        with_table(
            blocks, elements_with_unit(references_by_material(lab.references)), "Reference materials", most=30,
            labels={"mean": "Mean of the results"},
        )  # fmt: skip
    bad, said = batches_shown(lab.batches)
    if said:
        blocks.append(Paragraph(said))
    with_table(
        blocks, bad, "Batches that stand out", most=20,
        labels={"mean_z": "Mean deviation (SD)", "adjusted_p_value": "p after allowing for all"},
    )  # fmt: skip
    blocks.append(Slot(("blanks",)))
    with_table(blocks, elements_with_unit(blanks_by_element(lab.blanks)), "Blanks", most=20)
    blocks.append(Slot(("duplicates",)))
    with_table(
        blocks, elements_with_unit(lab.duplicates), "Duplicates (statistics named in the heads)", most=30, labels=PAIRS
    )  # fmt: skip
    with_table(
        blocks, elements_with_unit(lab.checks), "Check laboratory (reduced major axis)", most=20, labels=AXIS
    )  # fmt: skip
    with_table(
        blocks, data.evidence.assay_summary, "Assays: below detection, over limit, blank", most=30,
        labels={"column": "Element", "mean_half": "Mean, half the limit", "mean_zero": "Mean, zero",
                "mean_as_is": "Mean, the limit", "mean_ros": "Mean, order statistics (ROS)"},
        note="Means of the samples, each alike, under each treatment of results below detection.",
    )  # fmt: skip
    return blocks


def _blind_to_carry_over(blanks: pd.DataFrame | None) -> tuple[str, ...]:
    """A sentence where no blank, or none of some element, names a sample before it whose grade is known."""
    if blanks is None or not has(blanks, "grade_before", "element"):
        return ()
    known = blanks["grade_before"].notna().groupby(blanks["element"], sort=False).any()
    blind = [str(name).capitalize() for name in known.index[~known]]
    if not blind:
        return ()
    if len(blind) == len(known):
        return ("Carry-over is not judged: no blank names the sample before it.",)
    return (
        f"Carry-over is not judged for {', '.join(blind)}: no blank of it names a sample with a known grade.",
    )
