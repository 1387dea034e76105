"""Laboratory quality control: reference materials, blanks, duplicates and the check laboratory, with a verdict each."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.samples.intervals import names, numbers
from sms_resource.samples.pairs import cv_average, half_absolute_relative_difference, reduced_major_axis
from sms_resource.samples.quality_verdicts import (
    ASPECTS,
    NAMED,
    blank_verdict,
    check_verdict,
    duplicate_verdict,
    reference_verdict,
)
from sms_resource.samples.reference_materials import (
    FAMILY_ERROR,
    batch_bias,
    control_charts,
    material_bias,
)
from sms_resource.units import element_column

Floats = NDArray[np.float64]

# CVavg in percent that is good, and that is still acceptable, by element and stage (values recalled from memory).
# Field duplicates carry the deposit's own variation and take the limits of coarse ones times 1.5 (common practice).
PAIR_LIMITS: dict[str, dict[str, tuple[float, float]]] = {
    "base": {"field": (15.0, 22.5), "coarse": (10.0, 15.0), "pulp": (5.0, 10.0)},
    "precious": {"field": (22.5, 37.5), "coarse": (15.0, 25.0), "pulp": (7.5, 15.0)},
}
PRECIOUS = ("au", "ag")
STAGES = ("field", "coarse", "pulp")
BLANK_LIMITS = 5.0
LEAST_PAIRS = 10
SLOPE_TOLERANCE = 0.05


@dataclass(frozen=True)
class LaboratoryQuality:
    """What the inserts of the laboratory say.

    Attributes
    ----------
    references : DataFrame
        Control charts (`reference_materials.control_charts`).
    materials : DataFrame
        Bias by material.
    batches : DataFrame
        Bias by batch, with the verdict.
    blanks : DataFrame
        Each blank with its limit, grade_before and failed.
    duplicates : DataFrame
        Statistics by element and stage.
    duplicate_pairs, check_pairs : DataFrame
        element, stage, batch, original, repeat.
    checks : DataFrame
        Reduced major axis by element.
    rates : DataFrame
        Inserts by kind and element: count, and share of samples in percent where assays are known.
    verdicts : DataFrame
        element, aspect, verdict ("good", "caution", "failed", "missing"), figures.
    findings : Findings
    """

    references: pd.DataFrame
    materials: pd.DataFrame
    batches: pd.DataFrame
    blanks: pd.DataFrame
    duplicates: pd.DataFrame
    duplicate_pairs: pd.DataFrame
    checks: pd.DataFrame
    check_pairs: pd.DataFrame
    rates: pd.DataFrame
    verdicts: pd.DataFrame
    findings: Findings

    def verdict(self, element: str) -> str:
        """The worst verdict of an element over its aspects, missing counting as caution."""
        found = set(self.verdicts.loc[self.verdicts["element"] == element, "verdict"])
        if "failed" in found:
            return "failed"
        return "caution" if found & {"caution", "missing"} or not found else "good"


def laboratory_quality(
    laboratory: pd.DataFrame,
    assays: pd.DataFrame | None = None,
    *,
    elements: tuple[str, ...] | None = None,
    detection_limits: Mapping[str, float] | None = None,
    blank_limits: float = BLANK_LIMITS,
    family_error: float = FAMILY_ERROR,
    pair_limits: Mapping[str, Mapping[str, tuple[float, float]]] | None = None,
    confidence: float = 0.95,
) -> LaboratoryQuality:
    """Judge the laboratory by its inserts.

    Parameters
    ----------
    laboratory : DataFrame
        kind ("reference", "blank", "duplicate", "check"), batch, sequence, sample_id, original_sample_id, material,
        stage, element, value, value_status, value_limit, expected, expected_sd.
        The original result of a duplicate or check is ``original_value`` where the table has it, else that of
        ``original_sample_id`` in ``assays`` or among the rows of this table, else ``expected``.
    assays : DataFrame, optional
        sample_id and element columns: originals of pairs, the grade before a blank (``original_sample_id`` of the blank
        names the sample before it), and the rate of inserts.
    elements : tuple of str, optional
        Elements to judge, such as "cu"; by default those of ``laboratory``. An aspect without rows is "missing".
    detection_limits : mapping of element to value, optional
        For blanks; by default the greatest limit that the element's rows below detection name.
    blank_limits : float
        A blank fails beyond this many detection limits.
    family_error : float
        See `reference_materials.batch_bias`.
    pair_limits : mapping, optional
        element to stage to (good, acceptable) CVavg in percent, in place of `PAIR_LIMITS`.
    """
    findings = Findings()
    table = laboratory.reset_index(drop=True)
    element = table["element"].astype(str).str.lower()
    table = table.assign(element=element, value=_plain(table))
    wanted = elements if elements is not None else tuple(dict.fromkeys(element))
    table = table.loc[table["element"].isin(wanted)]
    kinds = {kind: table.loc[table["kind"] == kind] for kind in ("reference", "blank", "duplicate", "check")}

    charts = control_charts(kinds["reference"], findings)
    materials, batches = material_bias(charts), batch_bias(charts, family_error=family_error)
    blanks = _blanks(kinds["blank"], table, assays, detection_limits or {}, blank_limits)
    originals = _originals(table, assays)
    duplicate_pairs = _pairs(kinds["duplicate"], originals, "duplicate", findings)
    check_pairs = _pairs(kinds["check"], originals, "check", findings)
    duplicates = _duplicates(duplicate_pairs, pair_limits or {})
    checks = _checks(check_pairs, confidence)
    verdicts = pd.DataFrame(
        [
            line
            for name in wanted
            for line in (
                reference_verdict(name, materials, batches, findings),
                blank_verdict(name, blanks, findings),
                duplicate_verdict(name, duplicates, findings),
                check_verdict(name, checks, findings),
            )
        ],
        columns=["element", "aspect", "verdict", "figures"],
    )
    for aspect in ASPECTS:
        gone = verdicts.loc[(verdicts["aspect"] == aspect) & (verdicts["verdict"] == "missing")]
        for row in gone.loc[gone["figures"] != ""].to_dict("records"):
            findings.warning(
                "quality-missing",
                f"{row['element'].capitalize()}: {row['figures']}",
                "State detection_limits in [data.laboratory].",
            )
        none = gone.loc[gone["figures"] == "", "element"]
        if len(none):
            findings.warning(
                "quality-missing",
                f"No {NAMED[aspect]} for {', '.join(none)}",
                "Bring the inserts of the laboratory, or say in the report why there are none.",
            )
    return LaboratoryQuality(
        charts, materials, batches, blanks, duplicates, duplicate_pairs, checks, check_pairs,
        _rates(kinds, assays, wanted), verdicts, findings,
    )  # fmt: skip


def _plain(table: pd.DataFrame) -> Floats:
    """Values with half the limit below detection and the limit above it."""
    value = numbers(table, "value")
    if "value_status" in table and "value_limit" in table:
        status, limit = np.nan_to_num(numbers(table, "value_status"), nan=3.0), numbers(table, "value_limit")
        value = np.where(status == 1, limit / 2, np.where(status == 2, limit, value))
    return value


def _originals(table: pd.DataFrame, assays: pd.DataFrame | None) -> dict[tuple[str, str], float]:
    found: dict[tuple[str, str], float] = {}
    for name, sample, value in zip(table["element"], table["sample_id"], table["value"]):
        if str(sample):
            found[(str(name), str(sample))] = float(value)
    if assays is not None and "sample_id" in assays:
        identifiers = [str(s) for s in assays["sample_id"]]
        for name in dict.fromkeys(table["element"]):
            column = element_column(str(name))
            if column in assays:
                found.update(zip(((str(name), s) for s in identifiers), numbers(assays, column).tolist()))
    return found


def _pairs(
    rows: pd.DataFrame, originals: Mapping[tuple[str, str], float], kind: str, findings: Findings
) -> pd.DataFrame:
    fallback = numbers(rows, "expected")
    first = np.array(
        [
            originals.get((str(e), str(o)), np.nan)
            for e, o in zip(rows["element"], rows["original_sample_id"])
        ],
        dtype=np.float64,
    )
    given = numbers(rows, "original_value")
    first = np.where(np.isfinite(given), given, np.where(np.isfinite(first), first, fallback))
    lost = ~np.isfinite(first)
    if lost.any():
        which = rows.loc[lost, "original_sample_id"].astype(str).iloc[0]
        findings.warning(
            "quality-unmatched",
            f"{int(lost.sum())} of {len(rows)} {kind} results name an original that has no result, the first {which!r}",
            "Check the names of the original samples.",
            row=rows["source_row"].loc[lost].iloc[0] if "source_row" in rows else None,
        )
    return pd.DataFrame(
        {
            "element": names(rows["element"]), "stage": names(rows["stage"]), "batch": names(rows["batch"]),
            "sample_id": names(rows["sample_id"]), "original": first, "repeat": numbers(rows, "value"),
        }
    ).loc[~lost].reset_index(drop=True)  # fmt: skip


def _blanks(
    rows: pd.DataFrame,
    table: pd.DataFrame,
    assays: pd.DataFrame | None,
    given: Mapping[str, float],
    factor: float,
) -> pd.DataFrame:
    limits = {}
    for name in dict.fromkeys(rows["element"]):
        known = numbers(table.loc[table["element"] == name], "value_limit")
        status = numbers(table.loc[table["element"] == name], "value_status")
        below, stated = known[(status == 1) & np.isfinite(known)], known[(status != 2) & np.isfinite(known)]
        known = (
            below if len(below) else stated
        )  # the study may state a limit for results that are all above it
        limits[name] = float(given.get(name, known.max() if len(known) else np.nan))
    detection = np.array([limits[name] for name in rows["element"]], dtype=np.float64)
    originals = _originals(table, assays)
    before = np.array(
        [
            originals.get((str(e), str(o)), np.nan)
            for e, o in zip(rows["element"], rows["original_sample_id"])
        ],
        dtype=np.float64,
    )
    value = numbers(rows, "value")
    with np.errstate(invalid="ignore"):
        failed = value > factor * detection
    columns = [
        c for c in ("element", "material", "batch", "sequence", "sample_id", "source_row") if c in rows
    ]
    return rows[columns].assign(
        value=value, detection_limit=detection, limit=factor * detection, grade_before=before, failed=failed,
        judged=np.isfinite(value) & np.isfinite(detection),
    ).reset_index(drop=True)  # fmt: skip


def _duplicates(pairs: pd.DataFrame, given: Mapping[str, Mapping[str, tuple[float, float]]]) -> pd.DataFrame:
    rows = []
    for (name, stage), part in pairs.groupby(["element", "stage"], sort=True):
        a, b = numbers(part, "original"), numbers(part, "repeat")
        hard = half_absolute_relative_difference(a, b)
        n = len(hard)
        default = PAIR_LIMITS["precious" if name in PRECIOUS else "base"]
        good, acceptable = given.get(str(name), {}).get(str(stage), default.get(str(stage), default["field"]))
        cv = cv_average(a, b)
        rows.append(
            {
                "element": name, "stage": stage, "n": n, "cv_avg_pct": cv,
                "hard_mean_pct": float(hard.mean()) if n else np.nan,
                "hard_p90_pct": float(np.quantile(hard, 0.9)) if n else np.nan,
                "hard_within_10_share": float(np.mean(hard <= 10.0)) if n else np.nan,
                "mean_original": float(np.nanmean(a)) if n else np.nan,
                "mean_repeat": float(np.nanmean(b)) if n else np.nan,
                "good_pct": good, "acceptable_pct": acceptable, "verdict": _pair_verdict(n, cv, good, acceptable),
            }
        )  # fmt: skip
    columns = [
        "element", "stage", "n", "cv_avg_pct", "hard_mean_pct", "hard_p90_pct", "hard_within_10_share",
        "mean_original", "mean_repeat", "good_pct", "acceptable_pct", "verdict",
    ]  # fmt: skip
    return pd.DataFrame(rows, columns=columns)


def _pair_verdict(n: int, cv: float, good: float, acceptable: float) -> str:
    if n < LEAST_PAIRS or not np.isfinite(cv):
        return "caution"
    if cv <= good:
        return "good"
    return "caution" if cv <= acceptable else "failed"


def _checks(pairs: pd.DataFrame, confidence: float) -> pd.DataFrame:
    rows = []
    for name, part in pairs.groupby("element", sort=True):
        a, b = numbers(part, "original"), numbers(part, "repeat")
        use = np.isfinite(a) & np.isfinite(b)
        row: dict[str, object] = {"element": name, "n": int(use.sum())}
        if use.any():
            row["mean_original"], row["mean_check"] = float(a[use].mean()), float(b[use].mean())
            row["bias_pct"] = (
                100.0 * (float(b[use].mean() / a[use].mean()) - 1.0) if a[use].mean() > 0 else np.nan
            )
        try:
            fit = reduced_major_axis(a, b, confidence=confidence)
        except ValueError:
            row["verdict"] = "caution"
        else:
            row.update(
                slope=fit.slope, slope_low=fit.slope_low, slope_high=fit.slope_high, intercept=fit.intercept,
                intercept_low=fit.intercept_low, intercept_high=fit.intercept_high, correlation=fit.correlation,
            )  # fmt: skip
            # with precise pairs the interval may miss 1 by less than anyone can care about
            one = fit.slope_low <= 1.0 + SLOPE_TOLERANCE and fit.slope_high >= 1.0 - SLOPE_TOLERANCE
            bias = abs(float(row["bias_pct"]))  # type: ignore[arg-type]
            row["verdict"] = (
                "caution" if fit.count < LEAST_PAIRS else
                "failed" if bias > 10.0 and not one else
                "good" if one and bias <= 5.0 else "caution"
            )  # fmt: skip
        rows.append(row)
    columns = [
        "element", "n", "mean_original", "mean_check", "bias_pct", "slope", "slope_low", "slope_high", "intercept",
        "intercept_low", "intercept_high", "correlation", "verdict",
    ]  # fmt: skip
    return pd.DataFrame(rows).reindex(columns=columns)


def _rates(
    kinds: Mapping[str, pd.DataFrame], assays: pd.DataFrame | None, elements: tuple[str, ...]
) -> pd.DataFrame:
    rows = []
    for kind, part in kinds.items():
        for name in elements:
            own = part.loc[part["element"] == name]
            column = element_column(name)
            samples = (
                int(np.isfinite(numbers(assays, column)).sum())
                if assays is not None and column in assays
                else 0
            )
            for stage in dict.fromkeys(own["stage"]) if kind == "duplicate" else [""]:
                count = int((own["stage"] == stage).sum()) if kind == "duplicate" else len(own)
                rows.append((kind, stage, name, count, 100.0 * count / samples if samples else np.nan))
    return pd.DataFrame(rows, columns=["kind", "stage", "element", "inserts", "share_pct"])
