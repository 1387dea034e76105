"""Twin holes: which they are, how they cluster, and how well their grades agree."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from sms_resource.findings import Findings
from sms_resource.samples.intervals import lines, names, numbers, overlap_pairs
from sms_resource.units import column_element


@dataclass(frozen=True)
class TwinReport:
    """Twins and clusters of holes.

    Attributes
    ----------
    pairs : DataFrame
        hole_a, hole_b, distance_m, dz_m.
    clusters : DataFrame
        site, holes (count), hole_ids, spread_m; every hole belongs to one site.
    comparison : DataFrame
        hole_a, hole_b, metal, shared_m (depth where both have grades), mean_a, mean_b, difference, relative_pct
        (difference over the mean of both).
    findings : Findings
    """

    pairs: pd.DataFrame
    clusters: pd.DataFrame
    comparison: pd.DataFrame
    findings: Findings


def twin_report(
    collars: pd.DataFrame,
    composites: pd.DataFrame,
    distance_m: float = 3.0,
    *,
    metals: Sequence[str] | None = None,
) -> TwinReport:
    """Find holes whose collars stand within ``distance_m`` of one another and compare their grades.

    Grades are compared over the depths, below the seafloor, where both holes have them.

    Raises
    ------
    ValueError
        If the distance is negative.
    """
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components
    from scipy.spatial import cKDTree

    if not distance_m >= 0:
        raise ValueError(f"distance_m must not be negative: {distance_m}")
    findings = Findings()
    placed = collars.loc[
        np.isfinite(numbers(collars, "easting")) & np.isfinite(numbers(collars, "northing"))
    ].reset_index(drop=True)
    xy = placed[["easting", "northing"]].to_numpy(np.float64)
    elevation = numbers(placed, "elevation")
    holes = names(placed["hole_id"])
    near = cKDTree(xy).query_pairs(distance_m, output_type="ndarray") if len(xy) else np.empty((0, 2), int)
    near = near[np.lexsort((near[:, 1], near[:, 0]))]
    a, b = near[:, 0], near[:, 1]
    pairs = pd.DataFrame(
        {
            "hole_a": holes[a],
            "hole_b": holes[b],
            "distance_m": np.hypot(*(xy[a] - xy[b]).T),
            "dz_m": elevation[a] - elevation[b],
        }
    )
    count = len(xy)
    labels = np.zeros(0, dtype=int)
    if count:
        _, labels = connected_components(
            coo_array((np.ones(len(a)), (a, b)), shape=(count, count)), directed=False
        )
    clusters = []
    for site in range(labels.max(initial=-1) + 1):
        here = np.flatnonzero(labels == site)
        spread = float(np.linalg.norm(xy[here] - xy[here].mean(axis=0), axis=1).max())
        clusters.append((site + 1, len(here), ", ".join(str(h) for h in holes[here]), spread))
    sites = pd.DataFrame(clusters, columns=["site", "holes", "hole_ids", "spread_m"])
    columns: list[str] = (
        list(metals) if metals is not None else [str(c) for c in composites if column_element(str(c))]
    )
    comparison = _compare(pairs, composites, columns)
    twins = sites.loc[sites["holes"] > 1] if len(sites) else sites
    if len(twins):
        findings.note(
            "twin-holes",
            f"{int(twins['holes'].sum())} of {count} holes stand at {len(twins)} sites within {distance_m:g} m of "
            f"another: {count} holes at {len(sites)} sites",
            "Decluster means; limit the samples per hole and per sector.",
        )
    for metal, group in comparison.groupby("metal", sort=False):
        spread = float(group["relative_pct"].abs().median()) if len(group) else np.nan
        if spread > 50.0:
            findings.warning(
                "twin-differ",
                f"Twins differ in {metal} by {spread:.0f} % in the median of {len(group)} pairs",
                "Grades change within a few metres, or core loss and depth differ: expect a high nugget.",
            )
    return TwinReport(pairs, sites, comparison, findings)


def _compare(pairs: pd.DataFrame, composites: pd.DataFrame, metals: Sequence[str]) -> pd.DataFrame:
    rows = []
    needed = composites[[c for c in ("hole_id", "from_m", "to_m", *metals) if c in composites]]
    groups = dict(list(needed.groupby("hole_id", sort=False))) if len(pairs) else {}
    for pair in lines(pairs):
        first, second = groups.get(pair.hole_a), groups.get(pair.hole_b)
        if first is None or second is None:
            continue
        one, two, shared = overlap_pairs(
            first.assign(hole_id="x").reset_index(drop=True),
            second.assign(hole_id="x").reset_index(drop=True),
        )
        for metal in metals:
            left, right = numbers(first, metal)[one], numbers(second, metal)[two]
            both = np.isfinite(left) & np.isfinite(right)
            length = float(shared[both].sum())
            if length <= 0:
                continue
            mean_a = float(shared[both] @ left[both] / length)
            mean_b = float(shared[both] @ right[both] / length)
            middle = (mean_a + mean_b) / 2
            rows.append(
                (
                    pair.hole_a, pair.hole_b, metal, length, mean_a, mean_b, mean_a - mean_b,
                    100.0 * (mean_a - mean_b) / middle if middle > 0 else np.nan,
                )
            )  # fmt: skip
    return pd.DataFrame(
        rows,
        columns=["hole_a", "hole_b", "metal", "shared_m", "mean_a", "mean_b", "difference", "relative_pct"],
    )
