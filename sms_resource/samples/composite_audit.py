"""The account of compositing: where every metre of hole, core and metal went."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.samples.core_length import recovered_lengths
from sms_resource.samples.desurvey import HolePaths
from sms_resource.samples.intervals import Pieces, lengths, numbers, take
from sms_resource.samples.shared_assays import TOLD_FROM

Floats = NDArray[np.float64]


def audit_table(
    assays: pd.DataFrame,
    runs: pd.DataFrame,
    first: Pieces,
    pieces: Pieces,
    kept: NDArray[np.bool_],
    grades: Floats,
    recovered: Floats,
    metals: Sequence[str],
    poor: NDArray[np.bool_],
) -> pd.DataFrame:
    """Length, core and metal before and after; ``before`` comes from the tables as they were given."""
    covered = (np.stack(first.rows) >= 0).any(axis=0) if len(first) else np.zeros(0, dtype=bool)
    length = pieces.length
    any_grade = np.isfinite(np.column_stack([numbers(assays, metal) for metal in metals])).any(axis=1)
    known_run = recovered_lengths(runs)
    core = np.where(np.isfinite(recovered), recovered, 0.0)
    assayed = np.isfinite(grades).any(axis=1)
    had = np.column_stack([np.isfinite(take(numbers(assays, metal), pieces.rows[0])) for metal in metals])
    refused = np.where(poor & had.any(axis=1), length, 0.0)
    rows: list[tuple[str, float, float, float]] = [
        (
            "length_m",
            float(first.length[covered].sum()),
            float(length[kept].sum()),
            _rest(length, pieces, kept),
        ),
        (
            "recovered_length_m",
            float(np.nansum(known_run)),
            float(core[kept].sum()),
            _rest(core, pieces, kept),
        ),
        (
            "assayed_length_m",
            float(lengths(assays)[any_grade].sum()),
            float(length[kept & assayed].sum()),
            _rest(np.where(assayed, length, refused), pieces, kept) + float(refused[kept].sum()),
        ),
        ("length_without_assay_m", np.nan, float(length[kept & ~assayed].sum()), np.nan),
    ]
    for at, metal in enumerate(metals):
        product = np.nan_to_num(numbers(assays, metal)) * lengths(assays)
        value = np.nan_to_num(grades[:, at]) * length
        lost = np.nan_to_num(take(numbers(assays, metal), pieces.rows[0])) * length * poor
        rows.append(
            (
                f"{metal} x length_m",
                float(product.sum()),
                float(value[kept].sum()),
                _rest(value + lost, pieces, kept) + float(lost[kept].sum()),
            )
        )
    table = pd.DataFrame(rows, columns=["quantity", "before", "in_composites", "dropped"])
    table["difference"] = table["in_composites"] + table["dropped"] - table["before"]
    return table


def _rest(amount: Floats, pieces: Pieces, kept: NDArray[np.bool_]) -> float:
    """Sum over the pieces of composites that were dropped."""
    return float(amount[(pieces.rows[2] >= 0) & ~kept].sum())


def report_composites(
    frame: pd.DataFrame,
    audit: pd.DataFrame,
    assays: pd.DataFrame,
    runs: pd.DataFrame,
    paths: HolePaths,
    pieces: Pieces,
    assayed: NDArray[np.bool_],
    with_run: NDArray[np.bool_],
    recovered: Floats,
    metal_weights: pd.DataFrame,
    findings: Findings,
) -> None:
    """Findings on compositing: holes without collar, unknown recovery, samples in lost core, dropped rests."""
    for hole in sorted({str(name) for name in frame["hole_id"]} - {str(name) for name in paths.holes}):
        findings.error(
            "assay-without-hole",
            f"Hole {hole} has intervals but no collar",
            "Add the collar or correct its name.",
        )
    loose = float(pieces.length[assayed & ~with_run].sum())
    if loose > 0 and len(runs):
        findings.warning(
            "recovery-unknown",
            f"{loose:.1f} m of assayed core lie in no run with a recovery; they weigh their whole length",
            "Complete the table of runs.",
        )
    elif loose > 0:
        findings.warning(
            "recovery-unknown",
            "No recovery is given: every sample weighs its whole length and lost core cannot be treated",
            "Give the table of runs with recovered lengths.",
        )
    empty = assayed & with_run & (np.nan_to_num(recovered) <= 0)
    for row in np.unique(pieces.rows[0][empty]):
        line = assays.iloc[int(row)]
        findings.warning(
            "assay-in-lost-core",
            f"Hole {line['hole_id']}, {line['from_m']:g} to {line['to_m']:g} m is assayed where no core was recovered",
            "Correct the recovery or the depths; where core is weighed, this sample weighs nothing there.",
            row=line.get("source_row"),
        )
    dropped = float(audit.loc[audit["quantity"] == "length_m", "dropped"].iloc[0])
    if dropped > 0:
        findings.note("composite-dropped", f"{dropped:.2f} m were dropped as rests that are too short")
    graded = metal_weights.to_numpy().max(axis=1, initial=0.0) > 0
    shared = int((frame["shared_assay"].to_numpy()[graded] > 0).sum())
    if shared >= TOLD_FROM * max(int(graded.sum()), 1) and shared:
        usual = float(np.median(lengths(assays)))
        findings.warning(
            "composite-cut",
            f"{shared} of {int(graded.sum())} composites ({100.0 * shared / graded.sum():.0f} %) are cut out of longer "
            f"assays and repeat the grade of one beside them; half the assays are {usual:.2g} m and longer",
            "Set composites.length_m to the length of most assays; the variogram takes those of one assay as one sample.",
            column="composites.length_m",
        )
    if not (metal_weights.to_numpy() > 0).any():
        findings.error(
            "composite-none",
            "No composite carries a grade",
            "Check hole names and depths of assays and runs, and the least recovery.",
        )
