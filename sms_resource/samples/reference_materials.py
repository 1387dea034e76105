"""Reference materials: control charts, the bias of a laboratory, and batches that stand out.

Two questions are kept apart. A control chart asks of each result whether it passes (rules of thumb, which now and then
fail a good one). A batch is accused only where its mean stands out beyond chance, after allowing for how many batches
and elements were looked at: an accusation costs a re-assay.
"""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.samples.intervals import names, numbers

Floats = NDArray[np.float64]

WARN_SD = 2.0
FAIL_SD = 3.0
# Probability that any good batch of the whole study is accused.
FAMILY_ERROR = 0.001
# Bias of a laboratory against a reference material, relative, that is called caution and failed (common practice).
BIAS_CAUTION_PCT = 3.0
BIAS_FAILED_PCT = 5.0
LEAST_RESULTS = 5
# Bias of a batch, in certified standard deviations, that matters even where no single result fails.
BATCH_BIAS_SD = 1.5


def control_charts(references: pd.DataFrame, findings: Findings | None = None) -> pd.DataFrame:
    """Each result of a reference material against its expected value.

    Parameters
    ----------
    references : DataFrame
        element, material, batch, sequence, value, expected, expected_sd.

    Returns
    -------
    DataFrame
        The rows in order of element, material and sequence with z (deviations from the expected value in expected
        standard deviations), sd_from ("certificate" or "results"), rule: "pass", "warn" (beyond 2), "fail: beyond 3 SD"
        or "fail: two in a row beyond 2 SD on one side".
    """
    table = references.sort_values(["element", "material", "sequence"], kind="stable", ignore_index=True)
    value, expected, sd = (numbers(table, name) for name in ("value", "expected", "expected_sd"))
    group, groups = pd.factorize(pd.MultiIndex.from_frame(table[["element", "material"]]))
    source = np.full(len(table), "certificate", dtype=object)
    for code, (element, material) in enumerate(groups):
        here = group == code
        if not np.isfinite(expected[here]).any():
            if findings is not None:
                findings.warning(
                    "quality-no-expected",
                    f"Reference material {material} has no expected value for {element}: its results say nothing of bias",
                    "Give the certified value and standard deviation.",
                )
            continue
        lacking = here & ~(sd > 0)
        if lacking.any():
            known = value[here & np.isfinite(value)]
            # spread of the results themselves, robust against the bad ones it should reveal
            spread = 1.4826 * float(np.median(np.abs(known - np.median(known)))) if len(known) > 2 else np.nan
            sd[lacking], source[lacking] = (spread if spread > 0 else np.nan), "results"
            if findings is not None:
                findings.warning(
                    "quality-no-expected",
                    f"Reference material {material} has no standard deviation for {element}; that of its "
                    f"{len(known)} results is used",
                    "Give the certified standard deviation.",
                )
    z = (value - expected) / sd
    follows = np.append(False, group[1:] == group[:-1]) if len(group) else np.zeros(0, bool)
    before = np.where(follows, np.roll(z, 1), np.nan)
    with np.errstate(invalid="ignore"):
        pair = ((z > WARN_SD) & (before > WARN_SD)) | ((z < -WARN_SD) & (before < -WARN_SD))
        rule = np.select(
            [~np.isfinite(z), np.abs(z) > FAIL_SD, pair, np.abs(z) > WARN_SD],
            ["not judged", "fail: beyond 3 SD", "fail: two in a row beyond 2 SD on one side", "warn"],
            "pass",
        )
    return table.assign(z=z, used_sd=sd, sd_from=source, rule=rule)


def material_bias(charts: pd.DataFrame) -> pd.DataFrame:
    """Bias of the laboratory by element and material.

    Returns
    -------
    DataFrame
        element, material, n, expected, mean, bias_pct, bias_low_pct, bias_high_pct (95 %, t), cv_pct, warnings, failures,
        failure_pct.
    """
    from scipy.special import stdtrit

    rows = []
    for (element, material), part in charts.groupby(["element", "material"], sort=True):
        value, expected = numbers(part, "value"), numbers(part, "expected")
        use = np.isfinite(value) & np.isfinite(expected) & (expected > 0)
        n = int(use.sum())
        relative = 100.0 * (value[use] / expected[use] - 1.0) if n else np.empty(0)
        mean = float(relative.mean()) if n else np.nan
        sd = float(relative.std(ddof=1)) if n > 1 else np.nan
        half = float(stdtrit(n - 1, 0.975)) * sd / np.sqrt(n) if n > 1 else np.nan
        rule = part["rule"].astype(str)
        failed = int(rule.str.startswith("fail").sum())
        rows.append(
            {
                "element": element, "material": material, "n": n,
                "expected": float(expected[use].mean()) if n else np.nan,
                "mean": float(value[use].mean()) if n else np.nan,
                "bias_pct": mean, "bias_low_pct": mean - half, "bias_high_pct": mean + half,
                "cv_pct": 100.0 * float(value[use].std(ddof=1) / value[use].mean()) if n > 1 else np.nan,
                "warnings": int((rule == "warn").sum()), "failures": failed,
                "failure_pct": 100.0 * failed / n if n else np.nan,
            }
        )  # fmt: skip
    columns = [
        "element", "material", "n", "expected", "mean", "bias_pct", "bias_low_pct", "bias_high_pct", "cv_pct",
        "warnings", "failures", "failure_pct",
    ]  # fmt: skip
    return pd.DataFrame(rows, columns=columns)


def batch_bias(charts: pd.DataFrame, *, family_error: float = FAMILY_ERROR) -> pd.DataFrame:
    """Which batches are biased, by element, with the error of all looks together held at ``family_error``.

    The mean z of a batch is taken against the median of the batch means (so that a bias of the whole laboratory, which
    `material_bias` shows, accuses no single batch), divided by its standard error from the spread within batches (never
    taken below the certified one, wider where it is estimated from few), and its p-value from Student's t is adjusted by
    Holm's (1979) step-down for the number of batches and elements. A batch is accused where the adjusted p-value is
    below ``family_error`` and the bias matters: a result fails a control rule, or the mean is off by 1.5.

    Returns
    -------
    DataFrame
        element, batch, n, mean_z, excess_z (over the median batch), p_value, p_adjusted, failures, verdict ("good",
        "suspect" at an adjusted 5 %, "accused").
    """
    from scipy.special import stdtr

    rows = []
    for element, part in charts.groupby("element", sort=True):
        z = numbers(part, "z")
        part, z = part.loc[np.isfinite(z)], z[np.isfinite(z)]
        if not len(part):
            continue
        code, batches = pd.factorize(names(part["batch"]), sort=True)
        count = np.bincount(code)
        mean = np.bincount(code, z) / count
        failed = np.bincount(code, part["rule"].astype(str).str.startswith("fail").to_numpy(float))
        middle = float(np.median(mean)) if len(batches) >= 4 else 0.0
        inside = z - mean[code]
        freedom = int(np.maximum(count - 1, 0).sum())
        # the pooled spread of batches; a certificate's deviation is taken where the results are tighter
        pooled = float(np.sqrt((inside**2).sum() / freedom)) if freedom >= 5 else 1.0
        sd = max(pooled, 1.0)
        for at, batch in enumerate(batches):
            excess = float(mean[at] - middle)
            t = abs(excess) * np.sqrt(count[at]) / sd
            p = 2.0 * float(stdtr(max(freedom, 5), -t)) if sd > 1.0 else 2.0 * float(_normal_tail(t))
            rows.append((element, batch, int(count[at]), float(mean[at]), excess, p, int(failed[at])))
    table = pd.DataFrame(rows, columns=["element", "batch", "n", "mean_z", "excess_z", "p_value", "failures"])
    adjusted = holm(table["p_value"].to_numpy(np.float64))
    table.insert(6, "p_adjusted", adjusted)
    matters = (table["failures"].to_numpy() > 0) | (table["excess_z"].abs().to_numpy() >= BATCH_BIAS_SD)
    accused = (adjusted < family_error) & matters
    table["verdict"] = np.select([accused, adjusted < 0.05], ["accused", "suspect"], "good")
    return table


def holm(p_values: Floats) -> Floats:
    """p-values adjusted for their number by Holm's step-down (Scandinavian Journal of Statistics 6, 65-70, 1979)."""
    count = len(p_values)
    order = np.argsort(p_values, kind="stable")
    scaled = np.minimum(np.maximum.accumulate(p_values[order] * (count - np.arange(count))), 1.0)
    result = np.empty(count)
    result[order] = scaled
    return result


def _normal_tail(t: float) -> float:
    from scipy.special import ndtr

    return float(ndtr(-t))
