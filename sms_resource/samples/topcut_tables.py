"""Top cuts as a report shows them: the curves, and what is proposed beside what the study uses."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd

from sms_resource.samples.intervals import names, numbers
from sms_resource.samples.topcuts import cut_curve, where_they_lie

CURVE_POINTS = 60


def cut_curves(
    composites: pd.DataFrame, metals: Sequence[str], *, weight_column: str | None = "weight"
) -> pd.DataFrame:
    """Mean, coefficient of variation, metal removed and number cut against the top cut, by domain and metal.

    Parameters
    ----------
    composites : DataFrame
        domain, the metals, and the weights.
    metals : sequence of str
    weight_column : str or None

    Returns
    -------
    DataFrame
        domain, metal, and the columns of `topcuts.cut_curve`: at most 60 cuts each, from the 80th percentile up; the last
        of each cuts nothing.
    """
    frames = []
    domain = names(composites["domain"])
    for name in sorted(set(domain)):
        for metal in metals:
            values, weights = _known(composites[domain == name], metal, weight_column)
            if not len(values):
                continue
            upper = np.unique(values[values >= np.quantile(values, 0.8)])
            if len(upper) > CURVE_POINTS:
                upper = upper[np.unique(np.linspace(0, len(upper) - 1, CURVE_POINTS).round().astype(int))]
            curve = cut_curve(values, weights, upper)
            curve.insert(0, "metal", metal)
            curve.insert(0, "domain", name)
            frames.append(curve)
    columns = ["domain", "metal", "cut", "mean", "cv", "metal_removed_pct", "n_cut"]
    return pd.concat(frames, ignore_index=True) if frames else pd.DataFrame(columns=columns)


def cut_summary(
    composites: pd.DataFrame,
    study: pd.DataFrame,
    used: pd.DataFrame,
    *,
    weight_column: str | None = "weight",
) -> pd.DataFrame:
    """What is proposed beside what the study cuts, a row for each domain and metal.

    Parameters
    ----------
    composites : DataFrame
        Uncut composites: domain, hole_id, position, the metals, and the weights.
    study : DataFrame
        From `topcuts.top_cut_study`.
    used : DataFrame
        domain, metal, cut of the cuts in use; "all" stands for every domain without a cut of its own.

    Returns
    -------
    DataFrame
        domain, metal, n, cut (in use; NaN where none), proposed (NaN where none), effect_of ("cut in use", "proposed,
        not used" or "none": which cut the columns after it tell of), n_cut, mean_before, mean_after, cv_before,
        cv_after, metal_removed_pct, holes_cut, spacing_m, reason (of the proposal, or of none).
    """
    cuts = {(str(row["domain"]), str(row["metal"])): float(row["cut"]) for row in used.to_dict("records")}
    domain = names(composites["domain"])
    rows = []
    for item in study.to_dict("records"):
        name, metal = str(item["domain"]), str(item["metal"])
        in_use = cuts.get((name, metal), cuts.get(("all", metal), np.nan))
        proposed = float(item["cut"])
        part = composites[domain == name]
        values, weights = _known(part, metal, weight_column)
        effective = in_use if np.isfinite(in_use) else proposed
        row: dict[str, object] = {
            "domain": name, "metal": metal, "n": len(values), "cut": in_use, "proposed": proposed,
            "effect_of": "cut in use" if np.isfinite(in_use) else "proposed, not used" if np.isfinite(proposed) else "none",
            "n_cut": 0, "mean_before": np.nan, "mean_after": np.nan, "cv_before": np.nan, "cv_after": np.nan,
            "metal_removed_pct": 0.0, "holes_cut": "", "spacing_m": np.nan, "reason": item["reason"],
        }  # fmt: skip
        if len(values):
            whole = cut_curve(values, weights, [values.max()]).iloc[0]
            after = cut_curve(values, weights, [effective]).iloc[0] if np.isfinite(effective) else whole
            row.update(
                n_cut=int(after["n_cut"]), mean_before=float(whole["mean"]), mean_after=float(after["mean"]),
                cv_before=float(whole["cv"]), cv_after=float(after["cv"]),
                metal_removed_pct=float(after["metal_removed_pct"]),
            )  # fmt: skip
        if np.isfinite(effective):
            with np.errstate(invalid="ignore"):
                above = numbers(part, metal) > effective
            row["holes_cut"], row["spacing_m"], _ = where_they_lie(part, above)
        rows.append(row)
    return pd.DataFrame(rows)


def _known(part: pd.DataFrame, metal: str, weight_column: str | None) -> tuple[np.ndarray, np.ndarray]:
    values = numbers(part, metal)
    weights = numbers(part, weight_column) if weight_column and weight_column in part else np.ones(len(part))
    use = np.isfinite(values) & np.isfinite(weights) & (weights > 0)
    return values[use], weights[use]
