"""The samples in the report: every table of them, means named by their weights, cuts proposed and in use."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from sms_resource.reporting.cautions import all_cautions
from sms_resource.reporting.data import Evidence, LaboratoryEvidence, ReportData
from sms_resource.reporting.elements import Bullets, Paragraph, Table
from sms_resource.reporting.figures_quality import duplicates
from sms_resource.reporting.figures_topcuts import top_cuts
from sms_resource.reporting.sections_samples import evidence
from sms_resource.reporting.style import borrowed_settings
from sms_resource.reporting.summaries import missing_checks, verdicts_shown


def tables(data: ReportData) -> dict[str, Table]:
    return {block.title: block for block in evidence(data) if isinstance(block, Table)}


def column(table: Table, name: str) -> list[str]:
    return [row[table.columns.index(name)] for row in table.rows]


def with_evidence(given: ReportData, **changes: object) -> ReportData:
    return replace(given, evidence=replace(given.evidence, **changes))  # type: ignore[arg-type]


@pytest.mark.parametrize(
    "title",
    [
        "Positions by method",
        "How the holes ended",
        "Collars less seafloor, before and after",
        "Twin holes",
        "Clusters: sites with more than one hole",
        "Twin holes: grades compared",
        "Dredges: tracks, never points",
        "Top cuts: proposed, and in use",
        "Check laboratory (reduced major axis)",
    ],
)
def test_each_part_of_the_evidence_has_its_table(data: ReportData, title: str) -> None:
    assert title in tables(data)


def test_twins_are_shown_in_pairs_in_clusters_and_by_grade(data: ReportData) -> None:
    shown = tables(data)["Twin holes: grades compared"]
    assert shown.rows[0][:3] == ("H01", "H02", "9") and shown.rows[0][3] == "3 and 3.30 (−10 %)"
    assert any(
        "twins differ by 9.5 % in the median of 1 pairs" in item
        for block in evidence(data)
        if isinstance(block, Bullets)
        for item in block.items
    )


def test_where_no_cut_is_used_the_table_says_so(data: ReportData) -> None:
    cuts = data.evidence.top_cuts
    assert cuts is not None
    used = tables(data)["Top cuts: proposed, and in use"]
    assert column(used, "Cut in use") == ["9", "150"] and column(used, "Proposed cut") == ["none", "160"]
    none = cuts.assign(cut=np.nan, proposed=[np.nan, 160.0], effect_of=["none", "proposed, not used"])
    shown = tables(with_evidence(data, top_cuts=none))["Top cuts: proposed, and in use"]
    assert column(shown, "Cut in use") == ["none used", "none used"]
    assert column(shown, "Effect shown of") == ["none", "proposed, not used"]
    keys = {caution.key for caution in all_cautions(with_evidence(data, top_cuts=none))}
    assert "top-cut" not in keys and "top-cut" in {caution.key for caution in all_cautions(data)}


def test_every_domain_and_metal_has_a_panel_with_its_cuts(data: ReportData) -> None:
    with borrowed_settings():
        drawing = top_cuts(data)
    assert drawing is not None and drawing.figure is not None
    curves = data.evidence.top_cut_curves
    assert curves is not None
    pairs = curves[["domain", "metal"]].drop_duplicates()
    titled = {axis.get_title(loc="left"): axis for axis in drawing.figure.axes}
    assert len(titled) == len(pairs) == 8
    upright = {
        title: sorted(
            float(line.get_xdata()[0])
            for line in axis.get_lines()
            if len(line.get_xdata()) == 2 and line.get_xdata()[0] == line.get_xdata()[1]
        )
        for title, axis in titled.items()
    }
    assert upright["massive, Au (g/t)"] == [9.0]
    assert upright["massive, Ag (g/t)"] == [150.0, 160.0]
    assert upright["cap, Cu (%)"] == []
    assert any("none used, none proposed" in text.get_text() for text in titled["cap, Cu (%)"].texts)
    pd.testing.assert_frame_equal(drawing.table, curves)


def test_what_was_not_inserted_is_one_sentence_an_aspect() -> None:
    verdicts = pd.DataFrame(
        [
            ("cu", "references", "good", "40 results"),
            ("zn", "references", "missing", ""),
            ("cu", "blanks", "missing", "12 blanks, and no detection limit to judge them by"),
            ("zn", "blanks", "missing", ""),
            ("cu", "checks", "missing", ""),
            ("zn", "checks", "missing", ""),
        ],
        columns=["element", "aspect", "verdict", "figures"],
    )
    assert missing_checks(verdicts) == (
        "No reference materials that can be judged for Zn.",
        "No blanks that can be judged for any element (Cu: 12 blanks, and no detection limit to judge them by).",
        "No results of a check laboratory for any element.",
    )
    kept = verdicts_shown(verdicts)
    assert kept is not None and kept["element"].tolist() == ["Cu"]
    data = ReportData(evidence=Evidence(laboratory=LaboratoryEvidence(verdicts=verdicts)))
    said = next(caution for caution in all_cautions(data) if caution.key == "quality").figures
    assert said.count("No ") == 3 and "missing" not in said


def test_means_carry_their_weights_in_their_names(data: ReportData) -> None:
    statistics = pd.DataFrame({"domain": ["all"], "metal": ["cu_pct"], "n": [9], "mean": [3.0], "sd": [1.0]})
    lognormal = pd.DataFrame(
        {"domain": ["cap"], "metal": ["cu_pct"], "n": [9], "mean": [3.1], "sichel": [3.2]}
    )
    shown = tables(with_evidence(data, statistics=statistics, lognormal=lognormal))
    assert (
        "Mean, by recovered length"
        in shown["Statistics of the composites, weighted by recovered length"].columns
    )
    assert "Mean, each alike" in shown["Lognormal estimators of the mean, each composite alike"].columns
    for table in shown.values():
        assert "Mean" not in table.columns, table.title


def test_the_check_laboratory_is_drawn_with_its_axis_and_interval(data: ReportData) -> None:
    with borrowed_settings():
        drawing = duplicates(data)
    assert drawing is not None and drawing.figure is not None
    labels = [text.get_text() for text in drawing.figure.legends[0].get_texts()]
    assert {"reduced major axis", "interval of its slope", "check laboratory", "coarse", "pulp"} <= set(
        labels
    )
    assert any("1.010 (0.990 to 1.030)" in axis.get_title(loc="left") for axis in drawing.figure.axes)
    assert set(drawing.table["kind"]) == {"duplicates", "check laboratory"}


def test_collars_are_shown_to_the_centimetre_worst_first(data: ReportData) -> None:
    collars = data.evidence.collars
    assert collars is not None
    made = collars.assign(
        dz_m=0.8,
        original_elevation=-1600.25,
        limit_m=1.0,
        flagged_before=False,
        dz_after_m=0.0,
        flagged=False,
    )
    made.loc[made.index[3], ["dz_m", "original_elevation"]] = [4.125, -1596.5]
    shown = tables(with_evidence(data, collars=made))["Collars, furthest off the median first"]
    assert column(shown, "Elevation as delivered (m)")[:2] == ["−1596.50", "−1600.25"]
    assert len(shown.rows) == min(20, len(made))


def test_an_empty_study_shows_no_table_of_samples() -> None:
    blocks = evidence(ReportData())
    assert not [block for block in blocks if isinstance(block, Table)]
    said = [block.text for block in blocks if isinstance(block, Paragraph)]
    assert any("No laboratory inserts" in text for text in said)


def test_reference_materials_carry_their_interval_and_bad_batches_are_named(data: ReportData) -> None:
    lab = data.evidence.laboratory
    materials = pd.DataFrame(
        {"element": ["au"], "material": ["RM"], "n": [24], "expected": [0.85], "mean": [0.83], "bias_pct": [-2.4],
         "bias_low_pct": [-4.7], "bias_high_pct": [-0.04], "cv_pct": [5.6], "warnings": [0], "failures": [3]}
    )  # fmt: skip
    batches = pd.DataFrame(
        {"element": ["au", "au"], "batch": ["B1", "B2"], "n": [6, 6], "mean_z": [-4.9, 0.1], "p_adjusted": [1e-9, 1.0],
         "failures": [6, 0], "verdict": ["accused", "good"]}
    )  # fmt: skip
    rates = pd.DataFrame(
        {"kind": ["reference", "duplicate"], "stage": ["", "pulp"], "element": "au", "inserts": [48, 0],
         "share_pct": [4.73, 0.0]}
    )  # fmt: skip
    changed = replace(lab, materials=materials, batches=batches, rates=rates)
    given = with_evidence(data, laboratory=changed)
    shown = tables(given)
    table = shown["Reference materials: bias and its interval"]
    assert column(table, "Bias, lower limit (%)") == ["−4.70"] and column(table, "Failed by the rules") == [
        "3"
    ]
    assert column(shown["Batches that stand out"], "Batch") == ["B1"]
    assert column(shown["Batches that stand out"], "p after allowing for all") == ["< 0.0001"]
    assert shown["Inserts: count, and share of the samples"].rows == (
        ("reference", "48 (4.7 %)"),
        ("duplicate, pulp", "0"),
    )
    said = [block.text for block in evidence(given) if isinstance(block, Paragraph)]
    assert any("1 accused, 1 good" in text for text in said)


@pytest.mark.parametrize(("before", "told"), [([np.nan, np.nan], 1), ([3.0, np.nan], 1), ([3.0, 2.0], 0)])
def test_carry_over_that_cannot_be_judged_is_told_once(
    data: ReportData, before: list[float], told: int
) -> None:
    blanks = pd.DataFrame({"element": ["cu", "zn"], "value": 0.01, "failed": False, "grade_before": before})
    given = with_evidence(data, laboratory=replace(data.evidence.laboratory, blanks=blanks))
    said = [item for block in evidence(given) if isinstance(block, Bullets) for item in block.items]
    assert sum("Carry-over" in item for item in said) == told


def test_blanks_are_drawn_against_their_own_limit_and_the_grade_before(data: ReportData) -> None:
    from sms_resource.reporting.figures_blanks import blank_frame, blanks

    lab = data.evidence.laboratory
    table = lab.table[lab.table["kind"] == "blank"]
    judged = table[["element", "sample_id"]].assign(limit=0.07, detection_limit=0.01, grade_before=3.0)
    given = with_evidence(data, laboratory=replace(lab, blanks=judged))
    frame = blank_frame(given)
    assert frame is not None and set(frame["limit"]) == {0.07} and set(frame["grade_before"]) == {3.0}
    drawn, alone = blanks(given), blanks(with_evidence(data, laboratory=replace(lab, blanks=None)))
    assert drawn is not None and drawn.figure is not None and alone is not None and alone.figure is not None
    labels = [text.get_text() for text in drawn.figure.legends[0].get_texts()]
    assert "7 detection limits" in labels
    assert len(drawn.figure.axes) == 2 * len(alone.figure.axes)
    assert "sample before" in drawn.caption and "sample before" not in alone.caption
