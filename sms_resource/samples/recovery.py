"""Core recovery: runs joined to samples by depth, and whether grade goes with recovery."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.samples.bracket import lost_core_bracket
from sms_resource.samples.core_length import recovered_lengths, recovered_on_pieces
from sms_resource.samples.desurvey import HolePaths
from sms_resource.samples.intervals import counted, cut_holes, names, numbers, overlap_pairs, valid_intervals
from sms_resource.samples.reference_materials import holm
from sms_resource.units import chance

__all__ = [
    "join_recovery",
    "lost_core_bracket",
    "recovery_bias",
    "recovery_bias_findings",
    "recovery_summary",
    "sticks",
]

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]

# Bands of recovery (common practice, no source): lower edge in percent and what it means.
BANDS: tuple[tuple[float, str], ...] = (
    (90.0, "good"),
    (80.0, "caution"),
    (50.0, "flagged"),
    (0.0, "missing"),
)
LEAST_SAMPLES = 8
# Size of a correlation, in words, after Cohen (1988), Statistical Power Analysis, 2nd ed., p. 79-80: medium from 0.3,
# large from 0.5.
MEDIUM, LARGE = 0.3, 0.5


def join_recovery(intervals: pd.DataFrame, runs: pd.DataFrame) -> pd.DataFrame:
    """Give each interval the recovery of the runs that it lies in.

    Parameters
    ----------
    intervals : DataFrame
        hole_id, from_m, to_m and anything else.
    runs : DataFrame
        hole_id, from_m, to_m, recovered_length_m and/or recovery_pct.

    Returns
    -------
    DataFrame
        ``intervals`` with recovered_length_m (core in the interval, spread evenly over each run) and recovery_pct
        (of the part that lies in runs); NaN where no run with a known recovery covers it.
    """
    result = intervals.copy()
    result["recovered_length_m"] = np.nan
    result["recovery_pct"] = np.nan
    ours = valid_intervals(intervals.assign(_row=np.arange(len(intervals))), "intervals")
    known = valid_intervals(runs, "runs")
    got = recovered_lengths(known)
    known, got = known.loc[np.isfinite(got)].reset_index(drop=True), got[np.isfinite(got)]
    if ours.empty or known.empty:
        return result
    left, right, shared = overlap_pairs(ours, known)
    rate = got / (numbers(known, "to_m") - numbers(known, "from_m"))
    row = ours["_row"].to_numpy()[left]
    covered = np.bincount(row, shared, len(intervals))
    core = np.bincount(row, shared * rate[right], len(intervals))
    some = covered > 0
    result["recovered_length_m"] = np.where(some, core, np.nan)
    result["recovery_pct"] = np.divide(100.0 * core, covered, out=np.full(len(core), np.nan), where=some)
    return result


def recovery_bias(
    samples: pd.DataFrame, metals: Sequence[str], *, significance: float = 0.05
) -> pd.DataFrame:
    """Whether grade goes with recovery: Spearman's rank correlation by domain and metal.

    Parameters
    ----------
    samples : DataFrame
        Composites, or assays after `join_recovery`: domain (optional), recovery_pct and the metals.
    significance : float
        Chance of calling any correlation one where there is none, over all domains and metals together.

    Returns
    -------
    DataFrame
        domain, metal, n, spearman, p_value (of the test alone), p_adjusted (for the number of tests, by Holm's
        step-down), mean_low (grade where recovery is in its lower half), mean_high, biased (True where a link is seen at
        the adjusted p-value, or cannot be excluded for want of samples), not_excluded (the same by the p-value of the
        test alone: what rests on the absence of bias goes by this), verdict in plain words.

    Notes
    -----
    Adjustment: Holm (1979), Scandinavian Journal of Statistics 6, 65-70.

    Core loss is selective, and its sign is not known beforehand: Annels & Dominy (2003), Applied Earth Science 112(3).
    """
    from scipy.stats import spearmanr

    domain = names(samples["domain"]) if "domain" in samples else np.full(len(samples), "all", dtype=object)
    recovery = numbers(samples, "recovery_pct")
    rows = []
    for name in sorted(set(domain)):
        for metal in metals:
            grade = numbers(samples, metal)
            use = (domain == name) & np.isfinite(grade) & np.isfinite(recovery)
            n = int(use.sum())
            rho = p = low = high = np.nan
            if n >= 2:
                lower = recovery[use] <= np.median(recovery[use])
                low = float(grade[use][lower].mean())
                high = float(grade[use][~lower].mean()) if (~lower).any() else np.nan
            if n >= LEAST_SAMPLES and np.ptp(recovery[use]) > 0 and np.ptp(grade[use]) > 0:
                answer = spearmanr(recovery[use], grade[use])
                rho, p = float(answer.statistic), float(answer.pvalue)
            rows.append(
                {
                    "domain": name, "metal": metal, "n": n, "spearman": rho, "p_value": p,
                    "mean_low": low, "mean_high": high,
                }
            )  # fmt: skip
    table = pd.DataFrame(
        rows, columns=["domain", "metal", "n", "spearman", "p_value", "mean_low", "mean_high"]
    )
    raw = table["p_value"].to_numpy(np.float64)
    judged, adjusted = np.isfinite(raw), np.full(len(raw), np.nan)
    adjusted[judged] = holm(raw[judged])
    table.insert(5, "p_adjusted", adjusted)
    table["biased"] = ~(adjusted >= significance)
    table["not_excluded"] = ~(raw >= significance)
    table["verdict"] = [
        _verdict(n, rho, p, both, significance)
        for n, rho, p, both in zip(table["n"], table["spearman"], raw, adjusted)
    ]
    return table


def _verdict(n: int, rho: float, p: float, adjusted: float, significance: float) -> str:
    if not np.isfinite(rho):
        return f"cannot be judged on {n} samples"
    if adjusted >= significance:
        chance = " beyond what so many tests give by chance" if p < significance else ""
        return f"no link between grade and recovery is seen{chance}"
    size = abs(rho)
    how, sure = (
        ("weakly ", "may be") if size < MEDIUM else ("", "is probably" if size >= LARGE else "may well be")
    )
    if rho > 0:
        return f"grade rises {how}with recovery: lost core {sure} poorer, and recovered grade overstates{_share(size)}"
    return f"grade falls {how}with recovery: lost core {sure} richer, and recovered grade understates{_share(size)}"


def _share(size: float) -> str:
    return " a little" if size < MEDIUM else ""


def recovery_bias_findings(table: pd.DataFrame) -> Findings:
    """One warning for each domain and metal of `recovery_bias` whose grade goes with recovery."""
    findings = Findings()
    for row in table.loc[table["biased"].astype(bool) & table["p_value"].notna()].to_dict("records"):
        findings.warning(
            "recovery-bias",
            f"{row['metal']} in {row['domain']}: {row['verdict']} (rank correlation {row['spearman']:+.2f}, "
            f"{chance(row['p_adjusted'])} for all tests together, {chance(row['p_value'])} alone, {row['n']} samples)",
            "Compare the treatments of lost core.",
        )
    return findings


def recovery_summary(
    runs: pd.DataFrame, domains: pd.DataFrame | None = None
) -> tuple[pd.DataFrame, Findings]:
    """Recovery by domain, weighted by length, with the length in each band; findings on low and over-full runs."""
    from sms_resource.samples.domains import domain_at

    findings = Findings()
    good = valid_intervals(runs, "runs", findings)
    length = numbers(good, "to_m") - numbers(good, "from_m")
    core = recovered_lengths(good)
    percent = np.divide(100.0 * core, length, out=np.full(len(length), np.nan), where=length > 0)
    domain = (
        names(domain_at(good, domains))
        if domains is not None and len(domains)
        else np.full(len(good), "all", object)
    )
    for at in np.flatnonzero(percent > 110.0):
        findings.error(
            "recovery-over-100",
            f"Hole {good['hole_id'].iloc[at]}, {good['from_m'].iloc[at]:g} to {good['to_m'].iloc[at]:g} m has a "
            f"recovery of {percent[at]:.0f} %",
            "Check the run's depths and the length of its core; up to 110 % is accepted.",
            row=good["source_row"].iloc[at] if "source_row" in good else None,
        )
    some = int(((percent > 100.0 + 1e-6) & (percent <= 110.0)).sum())
    if some:
        findings.warning(
            "recovery-over-100",
            f"{counted(some, 'run')} with a recovery of 100 to 110 %",
            "Check their depths.",
        )
    rows = []
    for name in [*sorted(set(domain)), "all"] if set(domain) != {"all"} else ["all"]:
        here = ((domain == name) | (name == "all")) & np.isfinite(core)
        total = float(length[here].sum())
        row: dict[str, object] = {
            "domain": name, "runs": int(here.sum()), "length_m": total,
            "recovered_length_m": float(core[here].sum()),
            "recovery_pct": 100.0 * float(core[here].sum()) / total if total else np.nan,
            "lost_runs": int((here & (core <= 0)).sum()),
        }  # fmt: skip
        upper = np.inf
        for edge, label in BANDS:
            band = here & (percent >= edge) & (percent < upper)
            row[f"{label}_pct"] = 100.0 * float(length[band].sum()) / total if total else np.nan
            upper = edge
        rows.append(row)
        mean = float(row["recovery_pct"])  # type: ignore[arg-type]
        if np.isfinite(mean) and mean < 80.0:
            findings.warning(
                "recovery-low",
                f"Mean recovery of {'all holes' if name == 'all' else f'domain {name}'} is {mean:.0f} % over "
                f"{total:.0f} m",
                "Compare the treatments of lost core; under 80 % supports no more than Inferred unless no bias is shown.",
            )
    return pd.DataFrame(rows), findings


def sticks(
    assays: pd.DataFrame,
    runs: pd.DataFrame,
    domains: pd.DataFrame,
    paths: HolePaths,
    metals: Sequence[str],
) -> pd.DataFrame:
    """Holes as sticks for logs and sections, with a gap wherever core is lost.

    Each piece of hole between two boundaries of sample, run or domain is drawn in two parts: the share that was
    recovered, with its grade, and below it the share that was lost, with recovery 0 and no grade. Where in a run
    the loss happened is not known; the lengths are true, the order within a piece is a way of drawing.

    Returns
    -------
    DataFrame
        hole_id, from_m, to_m, recovery_pct (of the run; 0 where lost, NaN where not known), domain, metals,
        x_from, y_from, z_from, x_to, y_to, z_to.
    """
    good = [valid_intervals(table, "table") for table in (assays, runs, domains)]
    pieces = cut_holes(good)
    sample, run, logged = pieces.rows
    covered = (sample >= 0) | (run >= 0) | (logged >= 0)
    run_length = numbers(good[1], "to_m") - numbers(good[1], "from_m")
    core = recovered_on_pieces(pieces.length, run, sample >= 0, recovered_lengths(good[1]), run_length)
    share = np.clip(np.where(np.isfinite(core), core / pieces.length, 1.0), 0.0, 1.0)
    middle = np.where(
        share <= 0, pieces.start, np.where(share >= 1, pieces.end, pieces.start + share * pieces.length)
    )
    percent = np.append(100.0 * recovered_lengths(good[1]) / run_length, np.nan)[run]
    parts = []
    for lost, start, end in ((False, pieces.start, middle), (True, middle, pieces.end)):
        at = np.flatnonzero(covered & (end > start))
        frame = pd.DataFrame(
            {
                "hole_id": pieces.holes[pieces.hole[at]],
                "from_m": start[at],
                "to_m": end[at],
                "recovery_pct": 0.0 if lost else percent[at],
                "domain": np.append(names(good[2]["domain"]), "unlogged")[logged[at]],
            }
        )
        for metal in metals:
            frame[metal] = np.nan if lost else np.append(numbers(good[0], metal), np.nan)[sample[at]]
        parts.append(frame)
    result = pd.concat(parts, ignore_index=True).sort_values(
        ["hole_id", "from_m"], kind="stable", ignore_index=True
    )
    for ending, column in (("from", "from_m"), ("to", "to_m")):
        xyz = paths.positions(names(result["hole_id"]), result[column])
        for axis, name in enumerate("xyz"):
            result[f"{name}_{ending}"] = xyz[:, axis]
    return result
