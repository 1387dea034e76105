"""Cautions that the grades, the continuity, the cut-off and the checks of the estimate set off."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
import pandas as pd

from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.elements import Caution, cell_text, number_text
from sms_resource.reporting.parameters import UNKNOWN, parameter_name, statuses
from sms_resource.reporting.tonnage import rows_at_cutoff
from sms_resource.units import column_element, element_label

ESTIMATORS_DIFFER_PCT = 5.0


def grades(data: ReportData) -> Iterator[Caution]:
    """Top cuts and deleterious elements."""
    cuts = data.evidence.top_cuts
    if cuts is not None and has(cuts, "metal", "domain", "cut") and cuts["cut"].notna().any():
        rows = cuts[cuts["cut"].notna()]
        said = "; ".join(
            f"{element_label(r['metal'])} in {r['domain']} cut at {number_text(r['cut'])}:"
            f" {int(r.get('n_cut', 0) or 0)} of {int(r.get('n', 0) or 0)} composites,"
            f" {number_text(r.get('metal_removed_pct', np.nan))} % of metal removed, mean"
            f" {number_text(r.get('mean_before', r.get('mean', np.nan)))} uncapped,"
            f" {number_text(r.get('mean_after', np.nan))} capped"
            for r in rows.head(12).to_dict("records")
        )
        yield Caution("top-cut", "Top cuts", "Extreme grades were cut before the estimate.", said + ".")
    missing = [c for c in data.subject.deleterious if c not in data.subject.deleterious_estimated]
    named = {"as", "hg", "sb", "pb"}
    known = {str(column_element(c)) for c in (*data.subject.deleterious_estimated, *data.subject.metals)}
    absent = sorted(named - known)
    if absent or missing:
        extra = (
            f" Summarised but not estimated: {', '.join(element_label(c) for c in missing)}."
            if missing
            else ""
        )
        yield Caution(
            "deleterious",
            "Deleterious elements not estimated",
            "Arsenic, mercury, antimony and lead can decide whether a concentrate sells.",
            f"Not estimated: {', '.join(name.capitalize() for name in absent) or 'none of these'}.{extra}",
        )


def cutoff_sensitivity(data: ReportData) -> str:
    """How dry tonnes move at cut-offs a quarter lower and higher, in words; empty where there is no cut-off."""
    table, given = data.value.grade_tonnage, data.subject.cutoff or {}
    rows = rows_at_cutoff(data)
    if table is None or given.get("value") is None or not len(rows) or not has(table, "cutoff"):
        return ""
    same = table[table["cutoff_variable"] == given.get("variable")] if "cutoff_variable" in table else table
    cutoffs = np.sort(same["cutoff"].astype(float).unique())
    here = float(given["value"])
    parts = []
    for wanted in (0.75 * here, 1.25 * here):
        if not len(cutoffs):
            continue
        near = float(cutoffs[np.argmin(np.abs(cutoffs - wanted))])
        if abs(near - here) < 1e-12:
            continue
        other = ReportData(subject=_with_cutoff(data, near), value=data.value)
        before, after = _all_tonnes(rows), _all_tonnes(rows_at_cutoff(other))
        if before:
            parts.append(
                f"at {near:g} instead of {here:g}, dry tonnes change by {100 * (after / before - 1):+.0f} %"
            )
    return (
        ("Cut-off " + data.cutoff_text + ": " + "; ".join(parts) + ".")
        if parts
        else f"Cut-off {data.cutoff_text}; no other cut-off was tabled."
    )


def _with_cutoff(data: ReportData, value: float) -> Any:
    from dataclasses import replace

    return replace(data.subject, cutoff={**(data.subject.cutoff or {}), "value": value})


def _all_tonnes(rows: pd.DataFrame) -> float:
    total = rows[rows["proposed_class"].astype(str).str.lower() == "all"]
    return float(total["dry_tonnes"].sum() if len(total) else rows["dry_tonnes"].sum())


def estimate(data: ReportData) -> Iterator[Caution]:
    """Smoothing, assumed continuity, other estimators, failed checks."""
    grid = data.estimation.grid
    size = " x ".join(f"{float(s):g}" for s in grid["size"]) + " m" if grid else "not stated"
    yield Caution(
        "smoothing",
        "Kriging smooths",
        "Block estimates are smoother than the rock. Tonnes and grade are at block support, without dilution"
        " or loss unless said.",
        f"Block size: {size}.",
        True,
    )
    assumed = [r for r in data.variograms if r.assumed or r.bounds_hit or statuses(r)]
    if assumed:
        lines = [
            f"{_named(record.metal)}, {record.domain}: "
            + "; ".join(
                (
                    *record.assumed,
                    *(f"bound hit: {bound}" for bound in record.bounds_hit),
                    *(
                        f"{parameter_name(name)} {UNKNOWN}"
                        for name, why in statuses(record).items()
                        if why == UNKNOWN
                    ),
                )
            )
            + f" ({record.sample_count} composites in {record.hole_count} holes)"
            for record in assumed
        ]
        yield Caution(
            "continuity-assumed",
            "Continuity partly assumed",
            "Part of the variograms is assumed, or stands where the fit stopped, rather than inferred from the samples.",
            f"{len(assumed)} of {len(data.variograms)} variograms. " + ". ".join(lines) + ".",
        )
    others = data.estimation.estimators
    if others is not None and has(others, "metal"):
        names = [
            c
            for c in others.columns
            if c not in ("metal", "domain") and pd.api.types.is_numeric_dtype(others[c])
        ]
        reference = "ordinary_kriging" if "ordinary_kriging" in names else (names[0] if names else "")
        found = []
        for row in others.to_dict("records"):
            for name in names:
                change = (
                    100 * (row[name] / row[reference] - 1) if reference and row[reference] else float("nan")
                )
                if name != reference and np.isfinite(change) and abs(change) > ESTIMATORS_DIFFER_PCT:
                    found.append(
                        f"{element_label(row['metal']) if column_element(str(row['metal'])) else row['metal']}"
                        f" by {name.replace('_', ' ')}: {change:+.1f} %"
                    )
        if found:
            yield Caution(
                "estimators-differ",
                "Another estimator differs",
                f"Another estimator of the same mean differs by more than {ESTIMATORS_DIFFER_PCT:.0f} %.",
                "; ".join(found) + ".",
            )
    checks = data.estimation.checks
    if checks is not None and has(checks, "check", "verdict"):
        bad = checks[checks["verdict"].isin(["fail", "failed", "flag"])]
        if len(bad):
            said = "; ".join(
                f"{name}: {len(part)} of {int((checks['check'] == name).sum())} ({flagged_subjects(part)})"
                for name, part in bad.groupby("check", sort=False)
            )
            yield Caution(
                "validation",
                "A check of the estimate failed or was flagged",
                "See the section on the estimate and its checks.",
                said + ".",
            )
    elif checks is None:
        yield Caution(
            "validation",
            "Checks of the estimate not shown",
            "No table of checks came with this estimate.",
            "Checks: 0.",
        )


def flagged_subjects(checks: pd.DataFrame) -> str:
    """What checks are about, metals by domain, with their values: ``cap: Cu 0.74, Au 0.54``."""
    found: dict[str, list[str]] = {}
    for row in checks.to_dict("records"):
        domain, _, metal = str(row.get("subject", "")).rpartition(", ")
        name = _named(metal).split(" ")[0].replace("\u00a0(", " (").split(" (")[0]
        found.setdefault(domain, []).append(f"{name} {cell_text(row.get('value', ''))}".strip())
    return "; ".join(
        f"{domain}: {', '.join(items)}" if domain else ", ".join(items) for domain, items in found.items()
    )


def _named(metal: str) -> str:
    return element_label(metal) if column_element(metal) else metal
