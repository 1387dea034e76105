"""Inference of a variogram model from few samples, with a plain statement of what could not be inferred."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike

from sms_resource.findings import Findings
from sms_resource.geostatistics.back_transform import raw_model
from sms_resource.geostatistics.evidence import gather_evidence
from sms_resource.geostatistics.inference_plan import (
    Plan,
    assumed_model,
    fit_plan,
    fixed_ranges,
    is_zonal,
    make_plan,
    shortest_in_plane,
    with_zonal,
)
from sms_resource.geostatistics.inference_words import (
    NUGGET_WORDS,
    alternatives,
    assumptions,
    inference_statement,
    nugget_words,
    report_findings,
    zonal_share,
)
from sms_resource.geostatistics.inferred import VariogramInference, search_ranges
from sms_resource.geostatistics.variogram_settings import VariogramSettings

if TYPE_CHECKING:
    pass

LEAST_HOLES_FOR_JACKKNIFE = 5


def infer_variogram(
    coordinates: ArrayLike,
    values: ArrayLike,
    hole_ids: Any,
    settings: VariogramSettings | None = None,
    *,
    weights: ArrayLike | None = None,
) -> VariogramInference:
    """Model of one metal in one domain: nugget from down the holes, then the ranges, then their uncertainty.

    Parameters
    ----------
    coordinates : (n, 3) array_like
        Easting, northing, elevation in m (or the coordinates of another vertical frame).
    values : (n,) array_like
        NaN is missing.
    hole_ids : (n,) array_like or None
        Hole of each sample; None makes each sample a hole of its own.
    settings : VariogramSettings, optional
    weights : (n,) array_like, optional
        Declustering weights, for the variance and for the pairs.

    Returns
    -------
    VariogramInference
        Also where nothing could be inferred: the model then rests on the assumptions, which it names.

    Raises
    ------
    ValueError
        If shapes do not agree, a coordinate is not finite, or no sample has a value.

    Notes
    -----
    The nugget is fitted to the down-hole variogram alone and kept; the ranges are then fitted to all
    experimental variograms together, through the mean separation of the pairs of each lag.
    """
    settings = settings or VariogramSettings()
    findings = Findings()
    data = np.asarray(values, dtype=float)
    if data.ndim == 1 and np.isfinite(data).sum() == 1 and not np.isinf(data).any():
        return _nothing(settings, "there is one sample", 1, 1)
    evidence = gather_evidence(coordinates, values, hole_ids, settings, weights)
    if evidence.variance == 0.0:
        text = f"all {len(evidence.values)} samples have the same value"
        return _nothing(settings, text, len(evidence.values), evidence.hole_count)
    settings = evidence.settings  # with the measure that "auto" led to
    plan = make_plan(evidence)
    plain = evidence
    if is_zonal(plan, evidence):
        evidence = with_zonal(evidence)
    fit = fit_plan(plan, evidence, evidence.variograms, evidence.variance_of_measure)
    shortest = shortest_in_plane(evidence)
    free_major = any(row[0] is None for row in fixed_ranges(settings))
    if plan.plane and free_major and search_ranges(fit.model)[0] <= shortest:
        plan = replace(plan, plane=False, short_holes=False, greatest_in_plane_m=shortest)
        if plan.nugget_from == "joint":
            plan = replace(plan, nugget_from="assumed")
        evidence = plain
        fit = fit_plan(plan, evidence, evidence.variograms, evidence.variance_of_measure)
    settings = evidence.settings
    model = raw_model(fit.model, evidence)
    intervals = None
    if (
        settings.jackknife
        and evidence.hole_count >= LEAST_HOLES_FOR_JACKKNIFE
        and (plan.upright or plan.plane)
    ):
        from sms_resource.geostatistics.jackknife import jackknife_intervals

        intervals = jackknife_intervals(evidence, plan, fit, model)
    assumed = assumptions(plan, evidence)
    statement = inference_statement(plan, evidence, fit.model)
    low, high = alternatives(model, intervals, plan, settings)
    report_findings(findings, plan, evidence, fit.bounds_hit, statement, zonal_share(model))
    return VariogramInference(
        model=model,
        experimental=evidence.variograms,
        fitted_model=fit.model,
        nugget_from=nugget_words(plan),
        assumed=assumed,
        bounds_hit=fit.bounds_hit,
        intervals=intervals,
        statement=statement,
        low=low,
        high=high,
        sample_count=len(evidence.values),
        hole_count=evidence.hole_count,
        measure=settings.measure,
        horizontal_from="user" if not free_major else "data" if plan.plane else "assumed",
        vertical_from=_vertical_from(plan, settings),
        findings=findings,
    )


def _vertical_from(plan: Plan, settings: VariogramSettings) -> str:
    if all(row[2] is not None for row in fixed_ranges(settings)):
        return "user"
    return "data" if plan.upright else "assumed"


def _nothing(settings: VariogramSettings, text: str, samples: int, holes: int) -> VariogramInference:
    """A model from the assumptions alone, with total sill 1, for values that do not vary."""
    findings = Findings()
    statement = (
        f"No variogram can be inferred: {text}. The model is assumed, with a total sill of 1: "
        "weights follow from it, kriging variances do not."
    )
    findings.warning(
        "variogram-no-variance",
        statement,
        "Join the domain to another one, or give the variogram in the study.",
    )
    sill = settings.total_sill if not isinstance(settings.total_sill, str) else 1.0
    share = settings.nugget_share if settings.nugget_share is not None else settings.assumed_nugget_share
    nugget = settings.nugget if settings.nugget is not None else share * sill
    model = assumed_model(settings, sill, nugget)
    return VariogramInference(
        model=model,
        experimental=(),
        fitted_model=model,
        nugget_from=NUGGET_WORDS[
            "user" if settings.nugget is not None or settings.nugget_share is not None else "assumed"
        ],
        assumed=("nugget, sill and ranges: assumed, because the values do not vary",),
        bounds_hit=(),
        intervals=None,
        statement=statement,
        low=model,
        high=model,
        sample_count=samples,
        hole_count=holes,
        measure="semivariogram" if settings.measure == "auto" else settings.measure,
        horizontal_from="assumed",
        vertical_from="assumed",
        findings=findings,
    )
