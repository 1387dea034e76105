"""Metals together: rank correlations, log-ratios, tracers against depth, and the elements that spoil a concentrate."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from itertools import combinations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.samples.intervals import names, numbers
from sms_resource.units import column_element, element_column, grade_factor, unit_label

Floats = NDArray[np.float64]

DELETERIOUS = ("as", "hg", "sb", "pb", "s", "ba")
TRACERS = (("cu", "mo"), ("cu", "zn"))
LEAST_PAIRS = 5


def metal_associations(
    composites: pd.DataFrame, elements: Sequence[str], *, by_domain: bool = False
) -> pd.DataFrame:
    """How the metals go together, pair by pair.

    Parameters
    ----------
    composites : DataFrame
    elements : sequence of str
        Element columns, such as "cu_pct"; columns that are absent or empty are left out.
    by_domain : bool
        Add a block of rows for each domain.

    Returns
    -------
    DataFrame
        domain, metal_a, metal_b, n, spearman, p_value, log_ratio_mean and log_ratio_variance of ln(a/b) in equal mass
        units (a small variance means that the pair keeps its proportion, whatever dilutes it; Aitchison 1986), and
        ratio_geometric = exp(mean).
    """
    from scipy.stats import spearmanr

    columns = [
        name for name in elements if name in composites and np.isfinite(numbers(composites, name)).any()
    ]
    domain = (
        names(composites["domain"]) if "domain" in composites else np.full(len(composites), "all", object)
    )
    rows = []
    for where in ["all", *sorted(set(domain))] if by_domain else ["all"]:
        here = np.ones(len(domain), bool) if where == "all" else domain == where
        for one, two in combinations(columns, 2):
            a, b = numbers(composites, one)[here], numbers(composites, two)[here]
            both = np.isfinite(a) & np.isfinite(b)
            a, b = a[both], b[both]
            rho = p = np.nan
            if len(a) >= LEAST_PAIRS and np.ptp(a) > 0 and np.ptp(b) > 0:
                answer = spearmanr(a, b)
                rho, p = float(answer.statistic), float(answer.pvalue)
            ratio = log_ratio(a, b, one, two)
            ratio = ratio[np.isfinite(ratio)]
            mean = float(ratio.mean()) if len(ratio) else np.nan
            rows.append(
                (
                    where, one, two, len(a), rho, p, mean, float(ratio.var(ddof=1)) if len(ratio) > 1 else np.nan,
                    float(np.exp(mean)),
                )
            )  # fmt: skip
    return pd.DataFrame(
        rows,
        columns=[
            "domain", "metal_a", "metal_b", "n", "spearman", "p_value", "log_ratio_mean", "log_ratio_variance",
            "ratio_geometric",
        ],
    )  # fmt: skip


def log_ratio(a: Floats, b: Floats, column_a: str, column_b: str) -> Floats:
    """ln(a/b) in equal mass units; NaN where either is not positive."""
    factor = grade_factor(unit_label(column_a), unit_label(column_b))
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where((a > 0) & (b > 0), np.log(a * factor / b), np.nan)


def correlation_matrix(composites: pd.DataFrame, elements: Sequence[str]) -> pd.DataFrame:
    """Spearman's rank correlations as a square frame, pair by pair where both are known."""
    columns = [name for name in elements if name in composites]
    return composites[columns].apply(pd.to_numeric, errors="coerce").corr("spearman", min_periods=LEAST_PAIRS)


def tracer_ratios(
    composites: pd.DataFrame,
    *,
    pairs: Sequence[tuple[str, str]] = TRACERS,
    thresholds: Mapping[str, float] | None = None,
    depth_column: str = "mid_depth_m",
    band_m: float = 2.0,
) -> pd.DataFrame:
    """Ratios of metals against depth below the seafloor, as tracers of how the metal was supplied.

    High Cu/Mo and Cu/Zn speak for hot, deep or magmatic-fluid-influenced supply against supply leached from rock;
    what is high is a setting of the study, shown as a line in a plot and never a verdict.

    Parameters
    ----------
    composites : DataFrame
    pairs : sequence of (element, element)
    thresholds : mapping, optional
        "cu/mo" to a ratio by mass; its share above is counted.
    depth_column : str
        Depth below the seafloor in m.
    band_m : float
        Height of a band of depth.

    Returns
    -------
    DataFrame
        ratio ("cu/mo"), depth_from_m, depth_to_m, n, geometric_mean, p25, p75 (ratios by mass), threshold, share_above_pct;
        the last row of each ratio is the whole column of depth, with spearman and p_value of ratio against depth.
    """
    from scipy.stats import spearmanr

    if not band_m > 0:
        raise ValueError(f"band_m must be positive, not {band_m}")
    rows = []
    depth = numbers(composites, depth_column)
    for one, two in pairs:
        column_a, column_b = element_column(one), element_column(two)
        ratio = log_ratio(numbers(composites, column_a), numbers(composites, column_b), column_a, column_b)
        known = np.isfinite(ratio) & np.isfinite(depth)
        value, below = ratio[known], depth[known]
        threshold = float((thresholds or {}).get(f"{one}/{two}", np.nan))
        band = np.floor(below / band_m).astype(int)
        groups = [(k * band_m, (k + 1) * band_m, value[band == k]) for k in np.unique(band)]
        if len(value):
            groups.append((float(below.min()), float(below.max()), value))
        for number, (top, low, part) in enumerate(groups):
            whole = number == len(groups) - 1
            rho = p = np.nan
            if whole and len(part) >= LEAST_PAIRS and np.ptp(part) > 0 and np.ptp(below) > 0:
                answer = spearmanr(below, part)
                rho, p = float(answer.statistic), float(answer.pvalue)
            quartiles = np.exp(np.quantile(part, [0.25, 0.75]))
            above = 100.0 * float(np.mean(np.exp(part) > threshold)) if np.isfinite(threshold) else np.nan
            rows.append(
                (
                    f"{one}/{two}", top, low, len(part), float(np.exp(part.mean())), *quartiles, threshold, above,
                    rho, p, whole,
                )
            )  # fmt: skip
    return pd.DataFrame(
        rows,
        columns=[
            "ratio", "depth_from_m", "depth_to_m", "n", "geometric_mean", "p25", "p75", "threshold",
            "share_above_pct", "spearman", "p_value", "whole",
        ],
    )  # fmt: skip


def deleterious_summary(
    composites: pd.DataFrame, *, elements: Sequence[str] = DELETERIOUS, weight_column: str = "length_m"
) -> tuple[pd.DataFrame, Findings]:
    """As, Hg, Sb, Pb, S and Ba by domain, whether or not they are estimated.

    Returns
    -------
    table : DataFrame
        domain, element (column), unit, n, share_assayed_pct, mean (by length), median, p90, maximum.
    findings : Findings
        One note for each element that was not assayed.
    """
    findings = Findings()
    rows = []
    domain = names(composites["domain"])
    weight = numbers(composites, weight_column) if weight_column in composites else np.ones(len(composites))
    for element in elements:
        column = element_column(element)
        values = numbers(composites, column)
        if not np.isfinite(values).any():
            findings.note(
                "deleterious-not-assayed",
                f"{element.capitalize()} was not assayed",
                "Smelters pay less, or nothing, for it: have some samples assayed.",
                column=column,
            )
            continue
        for name in ["all", *sorted(set(domain))]:
            here = np.ones(len(domain), bool) if name == "all" else domain == name
            known = here & np.isfinite(values) & (weight > 0)
            part = values[known]
            some = len(part) > 0
            rows.append(
                (
                    name, column, unit_label(column), len(part), 100.0 * len(part) / max(int(here.sum()), 1),
                    float(np.average(part, weights=weight[known])) if some else np.nan,
                    *(np.quantile(part, [0.5, 0.9, 1.0]) if some else np.full(3, np.nan)),
                )
            )  # fmt: skip
    columns = [
        "domain", "element", "unit", "n", "share_assayed_pct", "mean", "median", "p90", "maximum",
    ]  # fmt: skip
    return pd.DataFrame(rows, columns=columns), findings


def element_columns(frame: pd.DataFrame) -> list[str]:
    """Columns of a frame that are elements in their own unit."""
    return [str(name) for name in frame.columns if column_element(str(name))]
