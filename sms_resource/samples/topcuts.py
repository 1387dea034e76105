"""Extreme grades: what a top cut would do, a proposal with its reason, and the cut itself."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from sms_resource.findings import Findings
from sms_resource.samples.intervals import lines, names, numbers

Floats = NDArray[np.float64]

LEAST_SAMPLES = 20
# Below this coefficient of variation a tail does no harm to linear estimation (common practice, no source).
TAME_CV = 1.2
# A step between neighbours in the tail is a break where a Pareto tail would show such a one with this probability (a
# lognormal one, being lighter, hardly ever), and where the next sample is at least a fifth richer.
BREAK_CHANCE = 0.2
LEAST_STEP = 0.2
TAIL_SHARE = 0.1
# A proposal never takes more than this share of the metal; beyond it the tail is a population, not an accident.
GREATEST_METAL_SHARE = 0.15
FEW_CUT, FEW_CUT_SHARE = 3, 0.02


def cut_curve(
    values: ArrayLike, weights: ArrayLike | None = None, cuts: ArrayLike | None = None
) -> pd.DataFrame:
    """Mean, coefficient of variation and metal removed against the top cut.

    Parameters
    ----------
    values : array-like, shape (n,)
    weights : array-like, shape (n,), optional
        Declustering weights or lengths.
    cuts : array-like, optional
        Cuts to try; by default the upper values themselves, from the 80th percentile up.

    Returns
    -------
    DataFrame
        cut, mean, cv, metal_removed_pct, n_cut; ascending; the last row cuts nothing.
    """
    value, weight = _clean(values, weights)
    if cuts is None:
        upper = np.unique(value[value >= np.quantile(value, 0.8)]) if len(value) else value
        cuts = upper if len(upper) <= 200 else np.quantile(upper, np.linspace(0, 1, 200))
    tried = np.unique(np.asarray(cuts, dtype=np.float64))
    columns = ["cut", "mean", "cv", "metal_removed_pct", "n_cut"]
    if not len(value):
        return pd.DataFrame(columns=columns, dtype=np.float64)
    # sums below each cut from running sums of the sorted values, about their mean so that squares keep their digits
    order = np.argsort(value, kind="stable")
    ordered, share = value[order], weight[order] / weight.sum()
    uncut = float(share @ ordered)
    off = ordered - uncut
    below = np.searchsorted(ordered, tried, side="right")
    sums = [np.concatenate([[0.0], np.cumsum(share * off**power)])[below] for power in (0, 1, 2)]
    rest, at = 1.0 - sums[0], tried - uncut
    shift = sums[1] + rest * at
    mean = uncut + shift
    deviation = np.sqrt(np.maximum(sums[2] + rest * at**2 - shift**2, 0.0))
    with np.errstate(divide="ignore", invalid="ignore"):
        cv = np.where(mean > 0, deviation / mean, np.nan)
        removed = (
            np.where(below == len(value), 0.0, -100.0 * shift / uncut) if uncut > 0 else np.zeros(len(tried))
        )
    return pd.DataFrame(
        {"cut": tried, "mean": mean, "cv": cv, "metal_removed_pct": removed, "n_cut": len(value) - below},
        columns=columns,
    )


def top_cut_study(
    composites: pd.DataFrame, metals: Sequence[str], *, weight_column: str | None = "length_m"
) -> pd.DataFrame:
    """A proposed top cut, or none, for each domain and metal, with its reason. The study decides.

    Parameters
    ----------
    composites : DataFrame
        domain, hole_id, easting, northing, elevation and the metals.
    weight_column : str or None
        Weights of mean and CV (composite length, or declustering weights joined to the frame).

    Returns
    -------
    DataFrame
        domain, metal, n, mean, cv, maximum, cut (NaN where none), n_cut, metal_removed_pct, mean_after,
        cv_cut, percentile, holes_cut (where they lie), spacing_m (median distance between cut samples), reason.

    Notes
    -----
    The rule: no cut below 20 samples or at a CV up to 1.2; else at the lowest break of the upper tenth (a step between
    ordered logarithms that a Pareto tail would show once in five, and a lognormal one hardly ever); else where the CV
    of the cut values falls to 1.2. No cut takes more than 15 % of the metal, unless a break parts off no more than 2 %
    of the samples. Parrish (1997), Mining Engineering 49(4), is among those who warn of cutting a population; where the
    cut samples lie together the reason says so.
    """
    rows = []
    domain = names(composites["domain"])
    for name in sorted(set(domain)):
        for metal in metals:
            known = np.isfinite(numbers(composites, metal))
            if weight_column and weight_column in composites:
                known &= numbers(composites, weight_column) > 0
            part = composites.loc[(domain == name) & known]
            rows.append(_proposal(name, metal, part, weight_column))
    return pd.DataFrame(rows)


def log_probability(values: ArrayLike, weights: ArrayLike | None = None) -> pd.DataFrame:
    """Points of a log-probability plot: value, cumulative (percent, weighted, at mid step), normal_score."""
    from scipy.special import ndtri

    value, weight = _clean(values, weights)
    order = np.argsort(value, kind="stable")
    weight = weight[order] / weight.sum()
    cumulative = np.cumsum(weight) - weight / 2
    return pd.DataFrame(
        {"value": value[order], "cumulative_pct": 100.0 * cumulative, "normal_score": ndtri(cumulative)}
    )


def apply_top_cuts(
    frame: pd.DataFrame, cuts: Mapping[tuple[str, str], float]
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Lower grades to the top cuts of the study.

    Parameters
    ----------
    frame : DataFrame
        Composites with domain and metals; means are weighted by ``weight``, or ``length_m`` without it.
    cuts : mapping
        (domain, metal) to the cut, in the unit of the metal's column. The domain "all" stands for every domain that
        has no cut of its own.

    Returns
    -------
    frame : DataFrame
        With lowered grades; the uncut ones in ``<metal>_uncut`` for every metal that has a cut.
    summary : DataFrame
        domain, metal, cut, n, n_cut, mean_before, mean_after, metal_removed_pct, maximum_uncut, unused
        (True where the cut names a domain or metal without samples).

    Raises
    ------
    ValueError
        If a cut is not a positive number.
    """
    result = frame.copy()
    domain = names(frame["domain"])
    columns_of_weight = [name for name in ("weight", "length_m") if name in frame]
    length = numbers(frame, columns_of_weight[0]) if columns_of_weight else np.ones(len(frame))
    rows = []
    own = {key for key in cuts if key[0] != "all"}
    for (name, metal), cut in cuts.items():
        if not (np.isfinite(cut) and cut > 0):
            raise ValueError(f"the top cut of {metal} in {name} must be a positive number, not {cut}")
        here = np.ones(len(frame), dtype=bool) if name == "all" else domain == name
        if name == "all":
            here &= ~np.isin(domain, [other for other, what in own if what == metal])
        values = numbers(frame, metal)
        here &= np.isfinite(values)
        row: dict[str, object] = {"domain": name, "metal": metal, "cut": float(cut), "n": int(here.sum())}
        if metal in frame.columns and f"{metal}_uncut" not in result:
            result[f"{metal}_uncut"] = values
        before, weight = values[here], length[here]
        after = np.minimum(before, cut)
        if metal in frame.columns:
            lowered = numbers(result, metal)
            lowered[here] = after
            result[metal] = lowered
        total = float(weight @ before)
        row.update(
            n_cut=int((before > cut).sum()),
            mean_before=float(np.average(before, weights=weight)) if len(before) else np.nan,
            mean_after=float(np.average(after, weights=weight)) if len(before) else np.nan,
            metal_removed_pct=100.0 * (1.0 - float(weight @ after) / total) if total > 0 else 0.0,
            maximum_uncut=float(before.max()) if len(before) else np.nan,
            unused=not len(before),
        )
        rows.append(row)
    columns = [
        "domain", "metal", "cut", "n", "n_cut", "mean_before", "mean_after", "metal_removed_pct",
        "maximum_uncut", "unused",
    ]  # fmt: skip
    return result, pd.DataFrame(rows, columns=columns)


def top_cut_findings(summary: pd.DataFrame) -> Findings:
    """What the summary of `apply_top_cuts` has to say: cuts that took metal, cuts that name nothing."""
    findings = Findings()
    for row in lines(summary):
        if row.unused:
            findings.warning(
                "top-cut-unused",
                f"The top cut of {row.metal} in {row.domain} meets no sample",
                "Check the names of domain and metal.",
            )
        elif row.n_cut:
            findings.note(
                "top-cut-applied",
                f"{row.metal} in {row.domain} is cut at {row.cut:g}: {row.n_cut} of {row.n} composites, "
                f"{row.metal_removed_pct:.1f} % of the metal; mean {row.mean_before:.3g} becomes {row.mean_after:.3g}",
            )
    return findings


def _proposal(name: str, metal: str, part: pd.DataFrame, weight_column: str | None) -> dict[str, object]:
    values = numbers(part, metal)
    weights = numbers(part, weight_column) if weight_column and weight_column in part else np.ones(len(part))
    n = len(values)
    row: dict[str, object] = {"domain": name, "metal": metal, "n": n}
    if n:
        mean = float(np.average(values, weights=weights))
        deviation = float(np.sqrt(np.average((values - mean) ** 2, weights=weights)))
        cv = deviation / mean if mean > 0 else np.nan
        row.update(mean=mean, cv=cv, maximum=float(values.max()))
    cut, reason = np.nan, ""
    if n < LEAST_SAMPLES:
        reason = f"only {n} samples: too few to tell a tail from an accident"
    elif not row["cv"] > TAME_CV:  # type: ignore[operator]
        reason = f"CV {row['cv']:.2f}, at most {TAME_CV}: no cut is needed"
    else:
        cut, reason = _find_cut(values, weights, float(row["cv"]))  # type: ignore[arg-type]
    row.update(
        cut=cut, n_cut=0, metal_removed_pct=0.0, mean_after=row.get("mean", np.nan),
        cv_cut=row.get("cv", np.nan), percentile=np.nan, holes_cut="", spacing_m=np.nan,
    )  # fmt: skip
    if np.isfinite(cut):
        line = cut_curve(values, weights, [cut]).iloc[0]
        above = values > cut
        row.update(
            n_cut=int(line["n_cut"]), metal_removed_pct=float(line["metal_removed_pct"]),
            mean_after=float(line["mean"]), cv_cut=float(line["cv"]), percentile=100.0 * float(np.mean(~above)),
        )  # fmt: skip
        holes, spacing, together = where_they_lie(part, above)
        row.update(holes_cut=holes, spacing_m=spacing)
        if together:
            reason += "; the cut samples lie together, so look whether they are a domain of their own before cutting"
    row["reason"] = reason
    return row


def _find_cut(values: Floats, weights: Floats, cv: float) -> tuple[float, str]:
    ordered = np.sort(values)
    n = len(ordered)
    curve = cut_curve(values, weights, np.unique(ordered[ordered >= np.quantile(ordered, 0.8)]))
    allowed = curve.loc[curve["metal_removed_pct"] <= 100.0 * GREATEST_METAL_SHARE]
    # beyond a break a few samples may be cut whatever they carry: they are what the estimate must not smear
    few = curve["n_cut"] <= max(FEW_CUT, FEW_CUT_SHARE * n)
    at_break = curve.loc[few | (curve["metal_removed_pct"] <= 100.0 * GREATEST_METAL_SHARE), "cut"]
    start = max(int(np.floor(n * (1.0 - TAIL_SHARE))), 1)
    logs = np.log(np.maximum(ordered, np.finfo(float).tiny))
    steps = np.diff(logs)
    # In an even tail, rank x step of the logarithms scatters like one exponential variable (Renyi 1953), so the
    # greatest of m such steps passes mean x ln(m / p) by chance with probability p.
    level = steps * (n - 1 - np.arange(n - 1))
    usual = float(level[n // 2 : start].mean()) if start > n // 2 else np.nan
    limit = usual * np.log(max(n - start, 1) / BREAK_CHANCE)
    for at in range(start - 1, n - 1):
        if level[at] > limit and steps[at] > LEAST_STEP and np.any(np.isclose(at_break, ordered[at])):
            return float(ordered[at]), (
                f"the coefficient of variation is {cv:.2f} and the tail breaks at this value: the next sample is "
                f"{np.exp(steps[at]):.2f} times as rich"
            )
    tame = allowed.loc[allowed["cv"] <= TAME_CV]
    if len(tame):
        return float(tame["cut"].iloc[-1]), (
            f"the tail has no break; here the coefficient of variation falls from {cv:.2f} to {TAME_CV}"
        )
    if len(allowed) and allowed["n_cut"].iloc[0] > 0:
        return float(allowed["cut"].iloc[0]), (
            f"the tail has no break and the coefficient of variation stays above {TAME_CV}; this is as low as a cut "
            f"goes before it takes {100 * GREATEST_METAL_SHARE:.0f} % of the metal: look for more than one population"
        )
    return np.nan, (
        f"the coefficient of variation is {cv:.2f}, but any cut takes over {100 * GREATEST_METAL_SHARE:.0f} % of the "
        "metal: this is more than one population, so divide the domain or restrain the reach of high grades"
    )


def where_they_lie(part: pd.DataFrame, above: NDArray[np.bool_]) -> tuple[str, float, bool]:
    """Holes of the cut samples, median distance to the nearest other one, and whether they lie together."""
    from scipy.spatial import cKDTree

    holes = (
        pd.Series(names(part["hole_id"])[above]).value_counts().sort_index()
        if "hole_id" in part
        else pd.Series()
    )
    text = ", ".join(f"{hole} ({count})" for hole, count in holes.items())
    if int(above.sum()) < 3 or "easting" not in part:
        return text, np.nan, False
    xyz = part[["easting", "northing", "elevation"]].to_numpy(np.float64)
    xyz = xyz[np.isfinite(xyz).all(axis=1) & above]
    everything = part[["easting", "northing", "elevation"]].to_numpy(np.float64)
    if len(xyz) < 3:
        return text, np.nan, False
    centre_spread = float(np.median(np.linalg.norm(xyz - np.median(xyz, axis=0), axis=1)))
    all_spread = float(np.nanmedian(np.linalg.norm(everything - np.nanmedian(everything, axis=0), axis=1)))
    near = float(np.median(cKDTree(xyz).query(xyz, k=2)[0][:, 1]))
    return text, near, all_spread > 0 and centre_spread < 0.4 * all_spread


def _clean(values: ArrayLike, weights: ArrayLike | None) -> tuple[Floats, Floats]:
    value = np.asarray(values, dtype=np.float64)
    weight = np.ones(len(value)) if weights is None else np.asarray(weights, dtype=np.float64)
    if weight.shape != value.shape:
        raise ValueError(f"values have {len(value)} entries, weights {len(weight)}")
    keep = np.isfinite(value) & np.isfinite(weight) & (weight > 0)
    return value[keep], weight[keep]
