"""Tables that tell how the proposed classes came about."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.classification.criteria import CLASS_NAMES, INFERRED, ClassColumns
from sms_resource.classification.rules import RuleHit


def block_reasons(hits: Sequence[RuleHit], count: int) -> NDArray[np.object_]:
    """One string a block; few distinct combinations exist, so each is built once."""
    bits = np.zeros(count, dtype=np.int64)
    for position, hit in enumerate(hits):
        bits |= hit.mask.astype(np.int64) << position
    distinct, inverse = np.unique(bits, return_inverse=True)
    texts = np.array(
        [";".join(hit.rule for p, hit in enumerate(hits) if int(code) >> p & 1) for code in distinct],
        dtype=object,
    )
    return texts[inverse] if count else np.empty(0, dtype=object)


def reason_table(
    hits: Sequence[RuleHit],
    dry: NDArray[np.float64],
    by_criteria: NDArray[np.int8],
    caps: Sequence[RuleHit],
    downgrades: Sequence[RuleHit],
) -> pd.DataFrame:
    """One row a rule: how many blocks and dry tonnes it holds, and how many it alone decides."""
    lowered_by = np.sum([hit.mask for hit in downgrades], axis=0) if downgrades else np.zeros(len(dry))
    capped_by = np.sum([hit.mask for hit in caps], axis=0) if caps else np.zeros(len(dry))
    rows = []
    for hit in hits:
        # A rule counts where there is a class to lose: elsewhere it changes nothing.
        mask = hit.mask
        if hit.kind == "downgrade":
            mask = hit.mask & (by_criteria >= INFERRED)
            alone = mask & (lowered_by == 1)
        elif hit.kind == "cap":
            mask = hit.mask & (by_criteria > INFERRED)
            alone = mask & (capped_by == 1) & (lowered_by == 0)
        else:
            alone = mask
        rows.append(
            {
                "rule": hit.rule,
                "kind": hit.kind,
                "blocks": int(mask.sum()),
                "dry_tonnes": float(dry[mask].sum()),
                "blocks_alone": int(alone.sum()),
                "dry_tonnes_alone": float(dry[alone].sum()),
                "text": hit.text,
            }
        )
    names = ["rule", "kind", "blocks", "dry_tonnes", "blocks_alone", "dry_tonnes_alone", "text"]
    return pd.DataFrame(rows, columns=names)


def before_after(frame: pd.DataFrame, columns: ClassColumns, *steps: NDArray[np.int8]) -> pd.DataFrame:
    """Blocks and tonnes of each class by the criteria, after the rules, smoothed, and final."""
    out = pd.DataFrame({"proposed_class": list(CLASS_NAMES[::-1])})
    for name, step in zip(("criteria", "rules", "smoothed", "final"), steps):
        out[f"blocks_{name}"] = np.bincount(step, minlength=4)[::-1]
        for basis, column in (("dry", columns.dry_tonnes), ("wet", columns.wet_tonnes)):
            weights = frame[column].to_numpy(dtype=np.float64)
            out[f"{basis}_tonnes_{name}"] = np.bincount(step, weights=weights, minlength=4)[::-1]
    return out


def moved_table(before: NDArray[np.int8], after: NDArray[np.int8], dry: NDArray[np.float64]) -> pd.DataFrame:
    """What smoothing moved from which class to which."""
    rows = []
    for start in range(len(CLASS_NAMES)):
        for end in range(len(CLASS_NAMES)):
            mask = (before == start) & (after == end)
            if start != end and mask.any():
                rows.append((CLASS_NAMES[start], CLASS_NAMES[end], int(mask.sum()), float(dry[mask].sum())))
    return pd.DataFrame(rows, columns=["from_class", "to_class", "blocks", "dry_tonnes"])


def class_summary(
    frame: pd.DataFrame, final: NDArray[np.int8], metals: Sequence[str], columns: ClassColumns
) -> pd.DataFrame:
    """Tonnes, grades, extrapolated share and distances of each proposed class and of all blocks."""
    dry = frame[columns.dry_tonnes].to_numpy(dtype=np.float64)
    wet = frame[columns.wet_tonnes].to_numpy(dtype=np.float64)
    distance = frame[columns.distance].to_numpy(dtype=np.float64)
    beyond = np.zeros(len(frame), dtype=bool)
    if columns.extrapolation in frame:
        beyond = (frame[columns.extrapolation].astype(str) != "drilled").to_numpy()
    rows = []
    for name in (*CLASS_NAMES[::-1], "all"):
        mask = np.ones(len(frame), dtype=bool) if name == "all" else final == CLASS_NAMES.index(name)
        total = float(dry[mask].sum())
        row: dict[str, object] = {
            "proposed_class": name,
            "blocks": int(mask.sum()),
            "dry_tonnes": total,
            "wet_tonnes": float(wet[mask].sum()),
        }
        for metal in metals:
            grade = frame[metal].to_numpy(dtype=np.float64)
            known = mask & ~np.isnan(grade)
            weight = dry[known].sum()
            row[metal] = float((dry[known] * grade[known]).sum() / weight) if weight > 0 else np.nan
        row["extrapolated_share"] = float(dry[mask & beyond].sum() / total) if total > 0 else np.nan
        near = distance[mask & ~np.isnan(distance)]
        row["greatest_distance_m"] = float(near.max()) if len(near) else np.nan
        row["mean_distance_m"] = float(near.mean()) if len(near) else np.nan
        rows.append(row)
    return pd.DataFrame(rows)
