"""Uncertainty of a fitted variogram by leaving out one hole at a time."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from sms_resource.geostatistics.back_transform import raw_model
from sms_resource.geostatistics.evidence import Evidence
from sms_resource.geostatistics.experimental import experimental_variograms
from sms_resource.geostatistics.inference_plan import Plan, PlanFit, fit_plan, fixed_ranges
from sms_resource.geostatistics.model import VariogramModel
from sms_resource.geostatistics.transforms import weighted_variance

if TYPE_CHECKING:
    import pandas as pd

Array = NDArray[np.float64]
MOST_SAMPLES_FOR_CLUSTERING = 400
CALIBRATION = 1.05  # of the error of sill and ranges: 200 fields simulated on 49 holes, see the tests


def leave_out_holes(evidence: Evidence, plan: Plan, fit: PlanFit) -> list[VariogramModel]:
    """Models without each hole in turn; the pairs of a hole are taken off the sums, not counted again."""
    settings = evidence.settings
    by_sums = settings.estimator == "matheron"
    order, holes = evidence.prepared.order, evidence.prepared.holes
    models = []
    for hole in range(len(evidence.prepared.hole_names)):
        left = order[holes != hole]
        variance = evidence.variance_of_measure
        if settings.measure not in ("correlogram", "pairwise_relative"):
            variance = weighted_variance(evidence.measured[left], evidence.weights[left])
        raw_variance = weighted_variance(evidence.values[left], evidence.weights[left])
        if not (variance > 0.0 and raw_variance > 0.0):
            continue
        if by_sums:
            variograms = evidence.without_hole(hole)
        else:
            variograms = experimental_variograms(
                evidence.coordinates[left], evidence.values[left], evidence.requests,
                hole_ids=evidence.hole_names[left], measure=settings.measure, estimator=settings.estimator,
            )  # fmt: skip
        own = fit_plan(plan, evidence, variograms, variance, fit.starts)
        models.append(raw_model(own.model, evidence, raw_variance))
    return models


def clustering_factor(evidence: Evidence, model: VariogramModel) -> float:
    """How much more a variance varies because holes are alike: sum of squared correlations, all over own hole.

    The variance of a sample variance of normal values is proportional to the sum of the squared correlations of
    all pairs. A jackknife over holes sees only the part inside holes; this is the ratio of the two, 1 or more.
    """
    count = len(evidence.values)
    step = -(-count // MOST_SAMPLES_FOR_CLUSTERING)
    xyz = evidence.coordinates[::step]
    _, codes = np.unique(evidence.hole_names[::step].astype(str), return_inverse=True)
    whole = own = 0.0
    for start in range(0, len(xyz), 256):
        part = slice(start, start + 256)
        rho = model.covariance(xyz[part, None, :] - xyz[None, :, :]) / model.total_sill
        squares = rho**2
        whole += float(squares.sum())
        own += float(squares[codes[part, None] == codes[None, :]].sum())
    return max(1.0, whole / own) if own > 0.0 else 1.0


def parameter_table(model: VariogramModel, plan: Plan, evidence: Evidence) -> dict[str, float]:
    """Parameters that the data gave: nugget, total sill, and the ranges of each structure."""
    settings = evidence.settings
    table = {}
    if plan.nugget_from in ("down-hole", "joint"):
        table["nugget"] = model.nugget
    if isinstance(settings.total_sill, str) and not (settings.sills and None not in settings.sills):
        table["total_sill"] = model.total_sill
    for number, (structure, fixed) in enumerate(zip(model.structures, fixed_ranges(settings)), start=1):
        if plan.plane and fixed[0] is None:
            table[f"major_range_{number}_m"] = structure.ranges[0]
        if plan.plane and fixed[1] is None and (settings.continuity == "directional" or fixed[0] is None):
            table[f"semi_major_range_{number}_m"] = structure.ranges[1]
        if plan.upright and fixed[2] is None:
            table[f"minor_range_{number}_m"] = structure.ranges[2]
    return table


def jackknife_intervals(evidence: Evidence, plan: Plan, fit: PlanFit, model: VariogramModel) -> pd.DataFrame:
    """Intervals of nugget, total sill and ranges from leaving out one hole at a time.

    Returns
    -------
    DataFrame
        parameter, low, best, high, relative_error (standard error of the log; for the nugget over the total
        sill), holes.

    Notes
    -----
    Variance (n - 1)/n times the sum of squares about the mean of the leave-one-out values (Tukey 1958; Efron &
    Stein 1981), on logs for sill and ranges, with Student's t of n - 1 holes. The jackknife takes holes for
    independent: where neighbours are alike it gives the sill too little spread. So the error of the sill is
    widened by the root of :func:`clustering_factor`, and that of the other parameters by the part of it that
    moves with the sill from hole to hole (calibrated on simulated fields, see the tests).
    """
    import pandas as pd
    from scipy.special import stdtrit

    best = parameter_table(model, plan, evidence)
    left = [parameter_table(item, plan, evidence) for item in leave_out_holes(evidence, plan, fit)]
    count = len(left)
    columns = ["parameter", "low", "best", "high", "relative_error", "holes"]
    if count < 3 or not best:
        return pd.DataFrame(columns=columns)
    factor = clustering_factor(evidence, model)
    quantile = float(stdtrit(count - 1, 0.5 + 0.5 * evidence.settings.confidence))
    sills = np.log([row.get("total_sill", model.total_sill) for row in left])
    sills = sills - sills.mean()
    rows = []
    for name, value in best.items():
        on_log = name != "nugget"
        scale = 1.0 if on_log else model.total_sill
        numbers = np.array([row[name] for row in left])
        moved = np.log(numbers) if on_log else numbers / scale
        moved = moved - moved.mean()
        slope = float(moved @ sills / (sills @ sills)) if float(sills @ sills) > 1e-20 else 0.0
        variance = float(moved @ moved + (factor - 1.0) * slope**2 * (sills @ sills)) * (count - 1) / count
        error = variance**0.5
        if on_log:
            error *= CALIBRATION
            low, high = value * np.exp(-quantile * error), value * np.exp(quantile * error)
        else:
            low, high = max(0.0, value - quantile * error * scale), value + quantile * error * scale
        rows.append((name, float(low), float(value), float(high), error, count))
    return pd.DataFrame(rows, columns=columns)
