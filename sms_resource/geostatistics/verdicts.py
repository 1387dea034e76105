"""One table of all checks of an estimate, each with its figures, its limit and its verdict."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from sms_resource.findings import Findings
from sms_resource.geostatistics.validation import TABLE_COLUMNS, ValidationLimits, percent

if TYPE_CHECKING:
    import pandas as pd


def validation_table(
    *,
    cross_validation: pd.DataFrame | None = None,
    means: pd.DataFrame | None = None,
    swaths: pd.DataFrame | None = None,
    swath_domain: str = "all",
    block_variance: Mapping[tuple[str, str], Mapping[str, float]] | None = None,
    estimators: pd.DataFrame | None = None,
    limits: ValidationLimits | None = None,
) -> pd.DataFrame:
    """Tidy rows: check, domain, metal, value, reference, difference_pct, limit, verdict, figures.

    Parameters
    ----------
    cross_validation : DataFrame, optional
        From :func:`cross_validation_summary`.
    means : DataFrame, optional
        ``domain metal block_mean declustered_mean`` and optionally ``sample_mean nearest_mean sample_count``.
    swaths : DataFrame, optional
        From :func:`swath` or :func:`swath_table`; a column ``domain`` takes the place of ``swath_domain``.
    block_variance : mapping, optional
        (domain, metal) to the figures of :func:`block_variance_check`.
    estimators : DataFrame, optional
        From :func:`compare_estimators`.
    limits : ValidationLimits, optional

    Returns
    -------
    DataFrame
        ``verdict`` is "within", "flag", or "not judged" where a figure is missing.
    """
    import pandas as pd

    limits = limits or ValidationLimits()
    rows: list[dict[str, Any]] = []
    if means is not None:
        rows += _mean_rows(means, limits)
    if cross_validation is not None:
        rows += _leave_one_out_rows(cross_validation, limits)
    if swaths is not None and len(swaths):
        rows += _swath_rows(swaths, swath_domain, limits)
    for (domain, metal), figures in (block_variance or {}).items():
        rows.append(_block_variance_row(domain, metal, figures, limits))
    if estimators is not None and len(estimators):
        rows += _estimator_rows(estimators, limits)
    return pd.DataFrame(rows, columns=list(TABLE_COLUMNS))


def validation_findings(table: pd.DataFrame) -> Findings:
    """One warning for each flagged row of a validation table."""
    findings = Findings()
    for row in table[table["verdict"] == "flag"].to_dict("records"):
        findings.warning(
            "validation-flag",
            f"{row['check']}, {row['metal']}, domain {row['domain']}: {row['figures']} (limit: {row['limit']}).",
            "Look at the swaths and at the estimate where it departs; say in the report why it stands.",
            column=str(row["metal"]),
        )
    return findings


def _row(
    check: str,
    domain: object,
    metal: object,
    value: float,
    reference: float,
    difference: float,
    limit: str,
    within: bool | None,
    figures: str,
) -> dict[str, Any]:
    verdict = "not judged" if within is None else "within" if within else "flag"
    cells = (check, str(domain), str(metal), value, reference, difference, limit, verdict, figures)
    return dict(zip(TABLE_COLUMNS, cells))


def _between(value: float, low: float, high: float) -> bool | None:
    return None if not math.isfinite(value) else low <= value <= high


def _mean_rows(means: pd.DataFrame, limits: ValidationLimits) -> list[dict[str, Any]]:
    rows = []
    for item in means.to_dict("records"):
        value, reference = float(item["block_mean"]), float(item["declustered_mean"])
        difference = percent(value, reference)
        text = f"block mean {value:.4g}, declustered mean {reference:.4g}, difference {difference:+.1f} %"
        for name, words in (("sample_mean", "plain sample mean"), ("nearest_mean", "nearest-sample mean")):
            if name in item and math.isfinite(float(item[name])):
                text += f", {words} {float(item[name]):.4g}"
        if "sample_count" in item:
            text += f", {int(item['sample_count'])} samples"
        within = _between(difference, -limits.mean_pct, limits.mean_pct)
        limit = f"within {limits.mean_pct:g} %"
        rows.append(
            _row(
                "global mean",
                item["domain"],
                item["metal"],
                value,
                reference,
                difference,
                limit,
                within,
                text,
            )
        )
    return rows


def _leave_one_out_rows(summary: pd.DataFrame, limits: ValidationLimits) -> list[dict[str, Any]]:
    rows = []
    for item in summary.to_dict("records"):
        place = (item["domain"], item["metal"])
        count = f"{int(item['count'])} samples, {int(item['missing'])} not estimated"
        error, relative = float(item["mean_error"]), float(item["mean_error_pct"])
        slope, spread = float(item["slope"]), float(item["variance_standardised_error"])
        rows.append(
            _row(
                "leave one out: mean error",
                *place,
                error,
                0.0,
                relative,
                f"within {limits.mean_error_pct:g} % of the mean",
                _between(relative, -limits.mean_error_pct, limits.mean_error_pct),
                f"mean error {error:.4g} ({relative:+.1f} % of the mean {float(item['mean_true']):.4g}), "
                f"root mean square error {float(item['rmse']):.4g}, {count}",
            )
        )
        rows.append(
            _row(
                "leave one out: slope",
                *place,
                slope,
                1.0,
                percent(slope, 1.0),
                f"{limits.slope_low:g} to {limits.slope_high:g}",
                _between(slope, limits.slope_low, limits.slope_high),
                f"slope of true on estimated {slope:.3f}, correlation {float(item['correlation']):.3f}, {count}",
            )
        )
        low, high = limits.standardised_variance_low, limits.standardised_variance_high
        rows.append(
            _row(
                "leave one out: standardised errors",
                *place,
                spread,
                1.0,
                percent(spread, 1.0),
                f"{low:g} to {high:g}",
                _between(spread, low, high),
                f"variance of standardised errors {spread:.3f}, mean "
                f"{float(item['mean_standardised_error']):+.3f}, {count}",
            )
        )
    return rows


def _swath_rows(swaths: pd.DataFrame, domain: str, limits: ValidationLimits) -> list[dict[str, Any]]:
    frame = swaths if "domain" in swaths.columns else swaths.assign(domain=domain)
    rows = []
    for (name, metal, axis), part in frame.groupby(["domain", "column", "axis"], sort=False):
        judged = part[(part["sample_count"] >= limits.swath_samples) & part["difference_pct"].notna()]
        off = int((judged["difference_pct"].abs() > limits.swath_pct).sum())
        share = off / len(judged) if len(judged) else math.nan
        few = len(part) - len(judged)
        if len(judged):
            text = (
                f"{off} of {len(judged)} slices with {limits.swath_samples} samples or more are off by over "
                f"{limits.swath_pct:g} %, the worst by {float(judged['difference_pct'].abs().max()):.1f} %; {few} slices "
                "not judged"
            )
        else:
            text = f"no slice has {limits.swath_samples} samples or more: none of {few} is judged"
        rows.append(
            _row(
                f"swath along {axis}",
                name,
                metal,
                share,
                limits.swath_share,
                math.nan,
                f"at most {limits.swath_share:.0%} of slices off by over {limits.swath_pct:g} %",
                None if not len(judged) else share <= limits.swath_share,
                text,
            )
        )
    return rows


def _block_variance_row(
    domain: str, metal: str, figures: Mapping[str, float], limits: ValidationLimits
) -> dict[str, Any]:
    realised, expected = figures["realised"], figures["theoretical_estimates"]
    low, high = limits.block_variance_low, limits.block_variance_high
    return _row(
        "block variance",
        domain,
        metal,
        realised,
        expected,
        percent(realised, expected),
        f"{low:g} to {high:g} of the theoretical",
        _between(figures["ratio"], low, high),
        f"variance of block estimates {_figure(realised)}, theoretical for estimates {_figure(expected)} and for true "
        f"blocks {_figure(figures['theoretical_blocks'])}: {_smoothing(figures['smoothing'])}",
    )


def _figure(value: float) -> str:
    return f"{value:.4g}" if math.isfinite(value) else "not known"


def _smoothing(share: float) -> str:
    """What the estimates lack against the variance of true blocks, in words."""
    if not math.isfinite(share):
        return "how much kriging smooths cannot be told"
    if share < 0.0:
        return f"the estimates vary {-100.0 * share:.0f} % more than true blocks should"
    return f"kriging smooths by {100.0 * share:.0f} %"


def _estimator_rows(estimators: pd.DataFrame, limits: ValidationLimits) -> list[dict[str, Any]]:
    base = {
        (item["domain"], item["metal"]): float(item["mean"])
        for item in estimators.to_dict("records")
        if item["estimator"] == "kriging"
    }
    rows = []
    for item in estimators.to_dict("records"):
        if item["estimator"] == "kriging":
            continue
        difference = float(item["difference_pct"])
        rows.append(
            _row(
                f"other estimator: {item['estimator']}",
                item["domain"],
                item["metal"],
                float(item["mean"]),
                base.get((item["domain"], item["metal"]), math.nan),
                difference,
                f"within {limits.estimator_pct:g} %",
                _between(difference, -limits.estimator_pct, limits.estimator_pct),
                f"mean {float(item['mean']):.4g} ({difference:+.1f} % from kriging), coefficient of variation "
                f"{float(item['cv']):.3f}, correlation with kriging {float(item['correlation']):.3f}",
            )
        )
    return rows
