"""Findings that a reader of the proposed classes must see."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.classification.criteria import INFERRED, MEASURED, ClassColumns, ClassContext
from sms_resource.findings import Findings


def flag_classes(
    findings: Findings,
    frame: pd.DataFrame,
    summary: pd.DataFrame,
    context: ClassContext,
    metals: Sequence[str],
    columns: ClassColumns,
    raw: NDArray[np.int8],
    smoothed: NDArray[np.int8],
    final: NDArray[np.int8],
) -> None:
    """Append what a reader of the classes must know: prospects, drilling, richness, extrapolation, smoothing."""
    by_class = summary.set_index("proposed_class")
    if context.hole_total < 1:
        findings.warning(
            "class-no-drilling",
            "No hole informs the deposit, so no class is proposed.",
            "State at most an exploration target, as ranges of tonnes and grade.",
        )
    if not context.prospects_judged:
        findings.warning(
            "class-prospects-not-judged",
            "The study does not say who judged the reasonable prospects and on what: the table is a block-model tally.",
            "Name who judged the reasonable prospects for eventual economic extraction, and the basis.",
        )
    unknown = [
        str(name)
        for name in pd.unique(frame[columns.domain])
        if str(name) not in context.recovery_pct or str(name) not in context.density_count
    ]
    if unknown and context.hole_total > 0:
        findings.warning(
            "class-domain-unknown",
            f"Recovery or number of densities is unknown for {', '.join(sorted(unknown))}; the rules count it as poor.",
            "Give recovery by run and densities for every domain.",
        )
    for metal in metals:
        inferred, indicated = (by_class[metal].loc[name] for name in ("inferred", "indicated"))
        if inferred > indicated:
            tonnes = float(f"{by_class['dry_tonnes'].loc['inferred']:.2g}")  # as the report rounds them
            findings.warning(
                "class-inferred-richer",
                f"Inferred blocks are richer than Indicated in {metal}: {inferred:.3g} against {indicated:.3g}; "
                f"about {tonnes:,.0f} dry t are Inferred.",
                "Map the rich Inferred blocks: extrapolated tonnage lies in the best material.",
                column=metal,
            )
    dry = frame[columns.dry_tonnes].to_numpy(dtype=np.float64)
    classified = final >= INFERRED
    if columns.extrapolation in frame and dry[classified].sum() > 0:
        kind = frame[columns.extrapolation].astype(str).to_numpy()
        total = dry[classified].sum()
        parts = [
            f"{100.0 * dry[classified & (kind == name)].sum() / total:.0f} % {name}"
            for name in sorted(set(kind[classified]) - {"drilled"})
        ]
        far = frame.loc[classified, columns.distance].max()
        findings.note(
            "class-extrapolated",
            f"Of {total:,.0f} classified dry t, extrapolated: {', '.join(parts) or 'none'}; "
            f"greatest distance to a sample {far:.0f} m.",
        )
    if (smoothed != raw).any():
        moved = smoothed != raw
        findings.note(
            "class-smoothed",
            f"Smoothing to connected volumes moved {int(moved.sum())} blocks, {dry[moved].sum():,.0f} dry t.",
        )
    if (final == MEASURED).any():
        findings.note(
            "class-measured",
            f"{int((final == MEASURED).sum())} blocks meet every criterion that the study names for Measured.",
        )
