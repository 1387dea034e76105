"""Contact analysis: whether grade jumps at a contact of two domains, or passes through it."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations, pairwise

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.samples.intervals import names, numbers
from sms_resource.units import chance

Floats = NDArray[np.float64]

LEAST_SIDE = 8


def contact_distances(samples: pd.DataFrame, domains: pd.DataFrame, first: str, second: str) -> Floats:
    """Distance along the hole from the middle of each sample to the nearest contact of two domains.

    Negative on the side of ``first``, positive on that of ``second``; NaN for samples of other domains, and where the hole
    has no such contact, or another domain lies between.

    Parameters
    ----------
    samples : DataFrame
        hole_id, from_m, to_m, domain.
    domains : DataFrame
        hole_id, from_m, to_m, domain, by hole and depth (`domains.domain_intervals`).
    """
    ordered = domains.sort_values(["hole_id", "from_m"], kind="stable", ignore_index=True)
    hole, domain = names(ordered["hole_id"]), names(ordered["domain"])
    start, end = numbers(ordered, "from_m"), numbers(ordered, "to_m")
    touch = (hole[1:] == hole[:-1]) & (np.abs(start[1:] - end[:-1]) < 1e-6)
    pair = np.array([{a, b} == {first, second} for a, b in pairwise(domain)], dtype=bool)
    contact = touch & pair if len(pair) else np.zeros(0, dtype=bool)
    # each domain interval knows the contact at its top and at its bottom, if that is one of the two domains'
    top = np.full(len(ordered), np.nan)
    low = np.full(len(ordered), np.nan)
    top[1:][contact] = start[1:][contact]
    low[:-1][contact] = end[:-1][contact]
    middle = (numbers(samples, "from_m") + numbers(samples, "to_m")) / 2
    codes, _ = pd.factorize(np.concatenate([hole, names(samples["hole_id"])]), sort=True)
    mine, theirs = codes[: len(hole)], codes[len(hole) :]
    levels = np.unique(start)
    width = len(levels) + 1
    key = mine * width + np.searchsorted(levels, start)
    at = (
        np.searchsorted(
            key,
            theirs * width + np.maximum(np.searchsorted(levels, middle, side="right") - 1, 0),
            side="right",
        )
        - 1
    )
    inside = (at >= 0) & (len(hole) > 0)
    at = np.where(inside, at, 0)
    own = names(samples["domain"])
    if not len(hole):
        return np.full(len(samples), np.nan)
    inside &= (mine[at] == theirs) & (middle <= end[at]) & (domain[at] == own)
    inside &= (own == first) | (own == second)
    with np.errstate(invalid="ignore"):
        distance = np.fmin(np.abs(middle - top[at]), np.abs(low[at] - middle))
    return np.where(inside, np.where(own == first, -distance, distance), np.nan)


def contact_analysis(
    samples: pd.DataFrame,
    domains: pd.DataFrame,
    metals: Sequence[str],
    *,
    pairs: Sequence[tuple[str, str]] | None = None,
    reach_m: float = 6.0,
    band_m: float = 1.0,
    significance: float = 0.05,
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Mean grade against distance from each contact, and whether the contact is hard or soft.

    Parameters
    ----------
    samples : DataFrame
        Composites or assays: hole_id, from_m, to_m, domain, metals.
    domains : DataFrame
    metals : sequence of str
    pairs : sequence of (domain, domain), optional
        Contacts to look at; by default every pair of domains that touch.
    reach_m, band_m : float
        How far from the contact to look, and the width of a band, in m.
    significance : float
        p-value of a two-sided Mann-Whitney test between the two sides, within twice ``band_m``.

    Returns
    -------
    profile : DataFrame
        contact ("massive | stockwork"), metal, distance_m (middle of the band, negative on the first side), n, mean, median.
    verdicts : DataFrame
        contact, metal, n_first, n_second, mean_first, mean_second (near the contact), ratio, p_value, verdict
        ("hard", "soft" or "undecided"), reason. Under 8 samples on a side nothing is decided.
    """
    from scipy.stats import mannwhitneyu

    if not (reach_m > 0 and band_m > 0):
        raise ValueError(f"reach_m and band_m must be positive, not {reach_m} and {band_m}")
    profile, verdicts = [], []
    for first, second in pairs if pairs is not None else _touching(domains):
        label = f"{first} | {second}"
        distance = contact_distances(samples, domains, first, second)
        for metal in metals:
            grade = numbers(samples, metal)
            use = np.isfinite(distance) & np.isfinite(grade) & (np.abs(distance) <= reach_m)
            d, g = distance[use], grade[use]
            band = np.floor(d / band_m)
            for k in np.unique(band):
                part = g[band == k]
                profile.append((label, metal, (k + 0.5) * band_m, len(part), part.mean(), np.median(part)))
            near = np.abs(d) <= 2.0 * band_m
            one, two = g[near & (d < 0)], g[near & (d >= 0)]
            mean_one = float(one.mean()) if len(one) else np.nan
            mean_two = float(two.mean()) if len(two) else np.nan
            ratio = mean_two / mean_one if len(one) and len(two) and mean_one > 0 else np.nan
            p, verdict = np.nan, "undecided"
            if min(len(one), len(two)) < LEAST_SIDE:
                reason = (
                    f"{len(one)} and {len(two)} samples within {2 * band_m:g} m of the contact are too few"
                )
            elif np.ptp(np.concatenate([one, two])) == 0:
                verdict, reason = "soft", "the grade is the same on both sides"
            else:
                p = float(mannwhitneyu(one, two).pvalue)
                verdict = "hard" if p < significance else "soft"
                reason = (
                    f"within {2 * band_m:g} m the grade {'jumps' if verdict == 'hard' else 'does not jump'}: "
                    f"{mean_one:.3g} against {mean_two:.3g}, {chance(p)}"
                )
            verdicts.append((label, metal, len(one), len(two), mean_one, mean_two, ratio, p, verdict, reason))
    return (
        pd.DataFrame(profile, columns=["contact", "metal", "distance_m", "n", "mean", "median"]),
        pd.DataFrame(
            verdicts,
            columns=[
                "contact", "metal", "n_first", "n_second", "mean_first", "mean_second", "ratio", "p_value", "verdict",
                "reason",
            ],
        ),
    )  # fmt: skip


def contact_findings(verdicts: pd.DataFrame) -> Findings:
    """One note for each contact and metal that the samples cannot decide."""
    findings = Findings()
    for row in verdicts.loc[verdicts["verdict"] == "undecided"].to_dict("records"):
        findings.note("contact-undecided", f"{row['contact']}, {row['metal']}: {row['reason']}")
    return findings


def _touching(domains: pd.DataFrame) -> list[tuple[str, str]]:
    """Pairs of domains that touch in some hole, upper one first where it more often lies above."""
    ordered = domains.sort_values(["hole_id", "from_m"], kind="stable", ignore_index=True)
    hole, domain = names(ordered["hole_id"]), names(ordered["domain"])
    touch = (hole[1:] == hole[:-1]) & (domain[1:] != domain[:-1])
    touch &= np.abs(numbers(ordered, "from_m")[1:] - numbers(ordered, "to_m")[:-1]) < 1e-6
    count: dict[tuple[str, str], int] = {}
    for above, below in zip(domain[:-1][touch], domain[1:][touch]):
        count[(str(above), str(below))] = count.get((str(above), str(below)), 0) + 1
    found = []
    for a, b in combinations(sorted({name for pair in count for name in pair}), 2):
        down, up = count.get((a, b), 0), count.get((b, a), 0)
        if down or up:
            found.append((a, b) if down >= up else (b, a))
    return found
