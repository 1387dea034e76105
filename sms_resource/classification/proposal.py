"""Proposed classes of a block model, with every reason counted. The Competent Person decides."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.classification.criteria import (
    CLASS_NAMES,
    UNCLASSIFIED,
    ClassColumns,
    ClassContext,
    ClassCriteria,
)
from sms_resource.classification.flags import flag_classes
from sms_resource.classification.overrides import ClassOverride, apply_overrides
from sms_resource.classification.rules import RuleHit, apply_rules, cap_hits, criteria_classes, downgrade_hits
from sms_resource.classification.smoothing import connected_volumes, smooth_classes
from sms_resource.classification.tables import (
    before_after,
    block_reasons,
    class_summary,
    moved_table,
    reason_table,
)
from sms_resource.findings import Findings

Strings = NDArray[np.object_]


@dataclass(frozen=True)
class ClassProposal:
    """What :func:`propose_classes` found.

    Attributes
    ----------
    classes, raw, criteria_only : (n,) object arrays of class names
        After smoothing and overrides; before smoothing; by the criteria alone, before caps and downgrades.
    block_reasons : (n,) object array of str
        Codes of the rules that hold for each block, joined by ";". Their meanings are in ``codes.REASONS``.
    reasons : DataFrame
        rule, kind, blocks, dry_tonnes, blocks_alone, dry_tonnes_alone, text. "Alone" counts the blocks that
        this rule alone keeps from a higher class.
    before_after : DataFrame
        proposed_class; blocks, dry_tonnes and wet_tonnes by the criteria, after the rules, smoothed, final.
    moved : DataFrame
        from_class, to_class, blocks, dry_tonnes: what the smoothing moved.
    volumes_before, volumes_after : DataFrame
        Connected volumes of each class or better.
    overrides : DataFrame
        What each polygon changed, with who and why.
    summary : DataFrame
        proposed_class (and "all"): blocks, dry_tonnes, wet_tonnes, each grade, extrapolated share of dry tonnes,
        greatest and mean nearest distance.
    findings : Findings
    tally_label : str
        What a table of these tonnes may be called.
    """

    classes: Strings
    raw: Strings
    criteria_only: Strings
    block_reasons: Strings
    reasons: pd.DataFrame
    before_after: pd.DataFrame
    moved: pd.DataFrame
    volumes_before: pd.DataFrame
    volumes_after: pd.DataFrame
    overrides: pd.DataFrame
    summary: pd.DataFrame
    findings: Findings
    tally_label: str


def propose_classes(
    frame: pd.DataFrame,
    criteria: ClassCriteria,
    context: ClassContext,
    *,
    overrides: Sequence[ClassOverride] = (),
    metals: Sequence[str] = (),
    columns: ClassColumns | None = None,
    hole_cells: pd.DataFrame | None = None,
) -> ClassProposal:
    """Propose a class for every block.

    In order: the criteria of each class; the downgrade rules, which together take a block down one class; the
    caps, which keep a block at Inferred; smoothing to connected volumes, which never raises a block that a rule
    lowered; overrides by polygon. Measured is proposed only where the criteria name it.

    Parameters
    ----------
    frame : DataFrame
        One row a block: i, j, k, easting, northing, elevation and the columns named in ``columns``.
    criteria, context : ClassCriteria, ClassContext
    overrides : sequence of ClassOverride
    metals : sequence of str
        Grade columns that Inferred and Indicated are compared on.
    columns : ClassColumns, optional
    hole_cells : DataFrame, optional
        hole_id, i, j of the columns of blocks that each hole pierces.

    Raises
    ------
    ValueError
        If a column that classes are judged on is missing.
    """
    columns = columns or ClassColumns()
    by_criteria, hits = criteria_classes(frame, criteria, context, columns)
    caps: list[RuleHit] = []
    downgrades: list[RuleHit] = []
    if context.hole_total > 0 and len(frame):
        off = set(criteria.rules_off)
        caps = [h for h in cap_hits(frame, criteria, context, columns) if h.rule not in off and h.mask.any()]
        downgrades = [
            h for h in downgrade_hits(frame, criteria, context, columns) if h.rule not in off and h.mask.any()
        ]
    raw, allowed = apply_rules(by_criteria, caps, downgrades, criteria.floor)
    for hit in hits:
        if hit.rule in ("not-estimated", "no-drilling"):
            allowed[hit.mask] = UNCLASSIFIED

    smoothed = raw
    if criteria.smoothing is not None and context.hole_total > 0:
        smoothed = smooth_classes(
            frame, raw, allowed, criteria.smoothing,
            dry_tonnes=columns.dry_tonnes, holes=columns.holes, hole_cells=hole_cells,
        )  # fmt: skip
    final, touched, override_table, findings = apply_overrides(
        frame, smoothed, overrides, criteria, dry_tonnes=columns.dry_tonnes
    )

    changes = [
        RuleHit("smoothed-up", "smoothing", smoothed > raw, "Raised to join the connected volume around it."),
        RuleHit(
            "smoothed-down", "smoothing", smoothed < raw, "Lowered: too small, or alone among lower blocks."
        ),
        RuleHit("override", "override", touched, "Replaced inside a polygon, with a reason."),
    ]
    everything = [*hits, *caps, *downgrades, *[hit for hit in changes if hit.mask.any()]]
    dry = frame[columns.dry_tonnes].to_numpy(dtype=np.float64)
    summary = class_summary(frame, final, metals, columns)
    flag_classes(findings, frame, summary, context, metals, columns, raw, smoothed, final)
    names = np.array(CLASS_NAMES, dtype=object)
    return ClassProposal(
        classes=names[final],
        raw=names[raw],
        criteria_only=names[by_criteria],
        block_reasons=block_reasons(everything, len(frame)),
        reasons=reason_table(everything, dry, by_criteria, caps, downgrades),
        before_after=before_after(frame, columns, by_criteria, raw, smoothed, final),
        moved=moved_table(raw, smoothed, dry),
        volumes_before=connected_volumes(frame, raw, dry_tonnes=columns.dry_tonnes),
        volumes_after=connected_volumes(frame, final, dry_tonnes=columns.dry_tonnes),
        overrides=override_table,
        summary=summary,
        findings=findings,
        tally_label=context.tally_label,
    )
