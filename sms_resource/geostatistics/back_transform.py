"""From a variogram model of normal scores, logs or relative differences to one in the unit of the values."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from sms_resource.geostatistics.experimental import ExperimentalVariogram
from sms_resource.geostatistics.fit import FitStart, fit_variogram
from sms_resource.geostatistics.fit_settings import FitSettings
from sms_resource.geostatistics.model import VariogramModel
from sms_resource.geostatistics.transforms import RawCorrelation
from sms_resource.geostatistics.variogram_settings import ZONAL_RANGE_M

if TYPE_CHECKING:
    from sms_resource.geostatistics.evidence import Evidence

Array = NDArray[np.float64]
POINTS = 40


def back_transform_model(
    model: VariogramModel, measure: str, total_sill: float, correlation: RawCorrelation | None = None
) -> VariogramModel:
    """Model in squared units of the values, from a model of a transformed measure.

    Parameters
    ----------
    model : VariogramModel
        Of normal scores, logs, a correlogram or pairwise relative differences.
    measure : str
    total_sill : float
        Total sill of the result, in squared units of the values.
    correlation : RawCorrelation, optional
        From the samples that were transformed, for normal scores and logs.

    Returns
    -------
    VariogramModel
        With the same shapes and rotation. For normal scores and logs the correlation of the values is worked out
        along each axis from the correlation of the model, pair by pair normal, and structures of the same shapes
        are fitted to it; the nugget follows exactly from the correlation just above zero distance. A correlogram
        and a relative variogram are scaled to the total sill.

    References
    ----------
    Journel, A. G., & Huijbregts, C. J. (1978). Mining Geostatistics, chapter 6. Guibal, D. (1987).
    Recoverable reserves estimation at an Australian gold project. Geostatistical Case Studies, 149-168 (from
    memory).
    """
    if measure == "semivariogram":
        return model
    if measure in ("correlogram", "pairwise_relative"):
        return model.scaled(total_sill / model.total_sill)
    if correlation is None:
        raise ValueError(f"correlation is needed to turn back a model of {measure}")
    curves = []
    for axis in range(3):
        reach = 1.3 * max(r for r in (s.ranges[axis] for s in model.structures) if r < ZONAL_RANGE_M)
        distance = reach * (np.arange(POINTS) + 1.0) / POINTS
        separations = distance[:, None] * model.axes[axis]
        rho = 1.0 - model.variogram(separations) / model.total_sill
        raw = correlation(rho)
        curves.append(_curve(distance, separations, total_sill * (1.0 - raw)))
    above_zero = np.array([1.0 - model.nugget / model.total_sill])
    nugget = total_sill * float(1.0 - correlation(above_zero)[0])
    sills = [structure.sill for structure in model.structures]
    if not sum(sills) > 0.0:
        return model.scaled(total_sill / model.total_sill)
    limits = []
    for axis in range(3):
        own = [r for r in (s.ranges[axis] for s in model.structures) if r < ZONAL_RANGE_M]
        limits.append((0.2 * min(own), 1.5 * max(own)))
    level = all(math.isclose(s.ranges[0], s.ranges[1], rel_tol=1e-9) for s in model.structures)
    zonal = [s.ranges[0] >= ZONAL_RANGE_M for s in model.structures]
    fixed = tuple((ZONAL_RANGE_M, ZONAL_RANGE_M, None) if z else (None, None, None) for z in zonal)
    free = [
        structure.ranges[axis]
        for structure, z in zip(model.structures, zonal)
        for axis in ((2,) if z else (0, 2) if level else (0, 1, 2))
    ]
    fit = fit_variogram(
        curves,
        FitSettings(
            shapes=tuple(structure.shape for structure in model.structures),
            nugget=min(max(nugget, 0.0), total_sill),
            total_sill=total_sill,
            ranges=fixed if any(zonal) else None,
            links=(0, 0, 2) if level else (0, 1, 2),
            azimuth=model.azimuth,
            plunge=model.plunge,
            tilt=model.tilt,
            weighting="equal",
            range_limits=(limits[0], limits[1], limits[2]),
        ),
        start=FitStart(np.log(free), np.empty(0)),
    )
    return fit.model


def raw_model(model: VariogramModel, evidence: Evidence, variance: float | None = None) -> VariogramModel:
    """Model in squared units of the values, with what the user fixed in its place.

    ``variance`` is that of the values; by default of all samples.
    """
    settings = evidence.settings
    if settings.measure == "semivariogram":
        return model
    total = evidence.variance if variance is None else variance
    if not isinstance(settings.total_sill, str):
        total = float(settings.total_sill)
    elif settings.total_sill == "over_pairs" and settings.measure == "normal_scores":
        total *= model.total_sill / evidence.variance_of_measure
    raw = back_transform_model(model, settings.measure, total, evidence.raw_correlation)
    nugget = settings.nugget if settings.nugget_share is None else settings.nugget_share * total
    return with_fixed(raw, nugget, settings.sills, settings.ranges)


def _curve(distance: Array, separations: Array, gamma: Array) -> ExperimentalVariogram:
    count = len(distance)
    return ExperimentalVariogram(
        label="model",
        azimuth=math.nan,
        plunge=math.nan,
        kind="directional",
        measure="semivariogram",
        lag_from=distance,
        lag_to=distance,
        distance=distance,
        gamma=gamma,
        pairs=np.ones(count, dtype=np.int64),
        separations=separations,
    )


def with_fixed(
    model: VariogramModel,
    nugget: float | None,
    sills: tuple[float | None, ...] | None,
    ranges: tuple[tuple[float | None, float | None, float | None], ...] | None,
) -> VariogramModel:
    """The model with what the user fixed put in its place; free sills share what is left of the total sill."""
    total = model.total_sill
    result = model
    if ranges is not None:
        structures = []
        for structure, fixed in zip(model.structures, ranges):
            triple = [given if given is not None else own for given, own in zip(fixed, structure.ranges)]
            structures.append(replace(structure, ranges=(triple[0], triple[1], triple[2])))
        result = replace(result, structures=tuple(structures))
    if nugget is None and sills is None:
        return result
    firm = nugget if nugget is not None else result.nugget
    given = sills or (None,) * len(result.structures)
    left = max(0.0, total - firm - sum(value for value in given if value is not None))
    own = sum(s.sill for s, value in zip(result.structures, given) if value is None)
    structures = [
        replace(s, sill=value if value is not None else (left * s.sill / own if own > 0.0 else 0.0))
        for s, value in zip(result.structures, given)
    ]
    return replace(result, nugget=firm, structures=tuple(structures))
