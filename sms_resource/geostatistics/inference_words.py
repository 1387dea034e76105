"""What an inferred variogram says about itself: statement, assumptions, alternatives and findings."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import TYPE_CHECKING

from sms_resource.findings import Findings
from sms_resource.geostatistics.evidence import Evidence
from sms_resource.geostatistics.experimental import ExperimentalVariogram
from sms_resource.geostatistics.inference_plan import Plan, fixed_ranges, in_plane
from sms_resource.geostatistics.model import VariogramModel
from sms_resource.geostatistics.transforms import weighted_skewness
from sms_resource.geostatistics.variogram_settings import ZONAL_RANGE_M, VariogramSettings

if TYPE_CHECKING:
    import pandas as pd

NUGGET_WORDS = {
    "user": "fixed by the user",
    "down-hole": "down-hole variogram",
    "joint": "variogram in the plane, extrapolated to zero distance",
    "assumed": "assumed",
}


def nugget_words(plan: Plan) -> str:
    """Where the nugget comes from, in words."""
    if plan.nugget_from == "joint" and plan.short_holes:
        return "short down-hole variogram and variogram in the plane, fitted together"
    return NUGGET_WORDS[plan.nugget_from]


def zonal_share(model: VariogramModel) -> float:
    """Share of the total sill that varies across the plane alone."""
    sills = [s.sill for s in model.structures if s.ranges[0] >= ZONAL_RANGE_M]
    return sum(sills) / model.total_sill


def assumptions(plan: Plan, evidence: Evidence) -> tuple[str, ...]:
    """Parameters that neither the data nor the user gave, in words."""
    settings = evidence.settings
    fixed = fixed_ranges(settings)
    ratio = settings.assumed_ratio[1]
    result = []
    if plan.nugget_from == "assumed":
        result.append(f"nugget: {settings.assumed_nugget_share:.0%} of the total sill, assumed")
    no_minor = not plan.upright and any(row[2] is None for row in fixed)
    no_major = not plan.plane and any(row[0] is None for row in fixed)
    if no_minor and (plan.plane or any(row[0] is not None for row in fixed)):
        result.append(f"minor (upright) range: the range in the plane divided by {ratio:g}, assumed")
    elif no_minor:
        result.append(f"minor (upright) range: {settings.assumed_vertical_range_m:g} m, assumed")
    if no_major:
        text = f"range in the plane: {ratio:g} times the upright range, assumed"
        if math.isfinite(plan.greatest_in_plane_m):
            text += f", and at most {plan.greatest_in_plane_m:.3g} m"
        result.append(text)
    elif plan.plane and evidence.in_line:
        result.append(
            f"range across the line of holes (azimuth {evidence.line_azimuth:.0f}): that along it, assumed"
        )
    return tuple(result)


def _pairs(variogram: ExperimentalVariogram | None, most: int = 8) -> str:
    if variogram is None:
        return "there are none"
    numbers = [str(int(pairs)) for pairs in variogram.pairs[:most]]
    return ", ".join(numbers) + (" ..." if len(variogram.pairs) > most else "")


def inference_statement(plan: Plan, evidence: Evidence, model: VariogramModel) -> str:
    """What was inferred and what was not, with the pairs per lag."""
    settings = evidence.settings
    samples = f"{len(evidence.values)} samples in {evidence.hole_count} holes"
    rule = f"{settings.min_pairs} pairs in at least {settings.min_lags} lags are needed"
    down = evidence.of("down_hole")
    parts = []
    if settings.measure != "semivariogram":
        words = settings.measure.replace("_", " ")
        skewness = weighted_skewness(evidence.values, evidence.weights)
        parts.append(
            f"Fitted to {words} (skewness of the values {skewness:.2g}) and turned back to the values."
        )
    if plan.upright:
        parts.append(f"Down-hole variogram fitted ({samples}; pairs per lag are {_pairs(down)}).")
    elif down is None:
        parts.append(f"The down-hole variogram cannot be inferred: no hole has two samples ({samples}).")
    else:
        parts.append(
            f"The down-hole variogram cannot be inferred: pairs per lag are {_pairs(down)}; {rule} ({samples})."
        )
    counts = "; ".join(_pairs(evidence.of(role)) for role in in_plane(evidence)) or "none"
    if plan.plane:
        parts.append(f"Variogram in the plane fitted (pairs per lag are {counts}).")
        if plan.short_holes:
            parts.append("The few down-hole lags were fitted with it, at the assumed ratio of the ranges.")
        if zonal_share(model) > 0.0:
            parts.append(
                f"Pairs in the plane level out below the total sill: {zonal_share(model):.0%} of it varies only across "
                "the plane (zonal), as with a trend in depth."
            )
        if evidence.in_line:
            parts.append(
                f"The holes lie in one line (azimuth {evidence.line_azimuth:.0f}): the range across it cannot be "
                "inferred and is assumed to be that along it."
            )
        return " ".join(parts)
    if math.isfinite(plan.greatest_in_plane_m):
        parts.append(
            f"The variogram in the plane shows no continuity: pairs {plan.greatest_in_plane_m:.3g} m apart already "
            f"stand at the sill, so the range is shorter than the data can tell (pairs per lag are {counts})."
        )
        return " ".join(parts)
    reasons = []
    if len(evidence.values) < settings.min_composites_horizontal:
        reasons.append(f"{len(evidence.values)} samples ({settings.min_composites_horizontal} are needed)")
    if evidence.hole_count < settings.min_holes_horizontal:
        reasons.append(f"{evidence.hole_count} holes ({settings.min_holes_horizontal} are needed)")
    if not all(evidence.enough(role) for role in in_plane(evidence)):
        reasons.append(rule)
    parts.append(
        f"The variogram in the plane cannot be inferred: pairs per lag are {counts}; "
        + "; ".join(reasons)
        + "."
    )
    return " ".join(parts)


def alternatives(
    model: VariogramModel, intervals: pd.DataFrame | None, plan: Plan, settings: VariogramSettings
) -> tuple[VariogramModel, VariogramModel]:
    """Less and more continuous models: ends of the intervals of the ranges, or the low and high assumed ratio."""
    low, base, high = settings.assumed_ratio
    bounds: dict[str, tuple[float, float]] = {}
    if intervals is not None:
        bounds = dict(zip(intervals["parameter"], zip(intervals["low"], intervals["high"])))
    results = []
    for end, ratio in ((0, low), (1, high)):
        structures = []
        for number, (structure, fixed) in enumerate(zip(model.structures, fixed_ranges(settings)), start=1):
            ranges = list(structure.ranges)
            for axis, name in enumerate(("major", "semi_major", "minor")):
                bound = bounds.get(f"{name}_range_{number}_m")
                if fixed[axis] is not None:
                    continue
                if bound is not None:
                    ranges[axis] = float(bound[end])
                elif axis < 2 and not plan.plane:
                    ranges[axis] *= ratio / base
                elif axis == 2 and not plan.upright and plan.plane:
                    ranges[axis] *= base / ratio if end == 0 else ratio / base
            structures.append(replace(structure, ranges=(ranges[0], ranges[1], ranges[2])))
        results.append(replace(model, structures=tuple(structures)))
    return results[0], results[1]


def report_findings(
    findings: Findings,
    plan: Plan,
    evidence: Evidence,
    bounds_hit: tuple[str, ...],
    statement: str,
    zonal: float,
) -> None:
    """Add what a reader of the report must know to ``findings``."""
    remedy = "Say in the study which ranges you take and why, or run the low and high alternatives."
    fixed = fixed_ranges(evidence.settings)
    if not plan.plane and any(row[0] is None for row in fixed):
        code = (
            "variogram-no-continuity" if math.isfinite(plan.greatest_in_plane_m) else "variogram-not-inferred"
        )
        findings.warning(code, statement, remedy)
    elif not plan.upright and (plan.nugget_from == "joint" or any(row[2] is None for row in fixed)):
        findings.warning("variogram-not-inferred", statement, remedy)
    if zonal > 0.0:
        findings.note(
            "variogram-zonal",
            f"{zonal:.0%} of the total sill varies only across the plane of continuity, as with a trend in depth.",
            "Look for a trend or a boundary; another vertical frame or a further domain may take it up.",
        )
    if plan.plane and evidence.in_line:
        findings.warning(
            "variogram-holes-in-line",
            f"All {evidence.hole_count} holes lie in one line of azimuth {evidence.line_azimuth:.0f}: nothing is "
            "known of the range across it.",
            "Give the range across the line in the study.",
        )
    for text in bounds_hit:
        findings.warning(
            "variogram-bound-hit",
            f"Variogram fit: {text}.",
            "A parameter at a limit is no result: look at the lags, or fix it in the study.",
        )
