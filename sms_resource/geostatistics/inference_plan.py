"""What a set of samples is asked for its variogram, and the fits in their order."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sms_resource.geostatistics.evidence import Evidence
from sms_resource.geostatistics.experimental import ExperimentalVariogram
from sms_resource.geostatistics.fit import FitStart, VariogramFit, fit_variogram
from sms_resource.geostatistics.fit_settings import FitSettings
from sms_resource.geostatistics.model import Structure, VariogramModel
from sms_resource.geostatistics.variogram_settings import ZONAL_RANGE_M, VariogramSettings

Array = NDArray[np.float64]
ZONAL_SHARE = 0.8
MOST_NUGGET = 0.95  # share of the total sill that a fitted nugget may take
Triple = tuple[float | None, float | None, float | None]


@dataclass(frozen=True)
class Plan:
    """What the data are asked and what is assumed.

    Attributes
    ----------
    upright, plane : bool
        The down-hole variogram, and those in the plane, are fitted.
    short_holes : bool
        The down-hole variogram has too few lags to be fitted by itself; those it has are fitted with the plane,
        at the assumed ratio of the ranges.
    nugget_from : "user" | "down-hole" | "joint" | "assumed"
    greatest_in_plane_m : float
        Where the plane is not fitted because its shortest pairs stand at the sill already: their distance.
    """

    upright: bool
    plane: bool
    short_holes: bool
    nugget_from: str
    greatest_in_plane_m: float = math.inf


@dataclass(frozen=True)
class PlanFit:
    """Model in the unit of the measure, limits that were hit, and starts for a fit of nearly the same data."""

    model: VariogramModel
    bounds_hit: tuple[str, ...]
    starts: tuple[FitStart | None, FitStart | None]


def make_plan(evidence: Evidence) -> Plan:
    """Decide what the data can be asked: lags with enough pairs, enough samples and enough holes."""
    settings = evidence.settings
    upright = evidence.enough("down_hole")
    plane = (
        bool(in_plane(evidence))
        and all(evidence.enough(role) for role in in_plane(evidence))
        and len(evidence.values) >= settings.min_composites_horizontal
        and evidence.hole_count >= settings.min_holes_horizontal
    )
    short = (
        plane and not upright and "down_hole" in evidence.roles and bool(evidence.usable("down_hole").any())
    )
    if settings.nugget is not None or settings.nugget_share is not None:
        nugget_from = "user"
    else:
        nugget_from = "down-hole" if upright else "joint" if plane else "assumed"
    return Plan(upright, plane, short, nugget_from)


def in_plane(evidence: Evidence) -> tuple[str, ...]:
    """Roles of the experimental variograms in the plane."""
    return tuple(role for role in evidence.roles if role != "down_hole")


def shortest_in_plane(evidence: Evidence) -> float:
    """Mean distance of the first lag in the plane that is fitted; infinite where there is none."""
    firsts = [float(d) for role in in_plane(evidence) for d in evidence.distances(role)[:1]]
    return min(firsts, default=math.inf)


def is_zonal(plan: Plan, evidence: Evidence) -> bool:
    """Whether pairs in the plane level out well below the total sill, within the lags that were fitted.

    The plane is fitted alone with the nugget of the holes and a sill of its own: at ZONAL_SHARE of the total sill
    or less, with a range that the lags reach, the rest varies across the plane only.
    """
    settings = evidence.settings
    allowed = settings.zonal and settings.ranges is None and settings.sills is None
    if not (allowed and plan.plane and plan.upright and settings.total_sill != "free"):
        return False
    roles = evidence.fitted_lags(evidence.variograms)
    sill = _sill(_total(settings, evidence, evidence.variance_of_measure), evidence.variance_of_measure)
    nugget, _, _ = _nugget(plan, evidence, roles, sill, None)
    greatest = max(float(evidence.distances(role).max()) for role in in_plane(evidence))
    alone = fit_variogram(
        [roles[role] for role in in_plane(evidence)],
        FitSettings(
            shapes=settings.shapes[:1],
            nugget=min(float(nugget or 0.0), ZONAL_SHARE * sill),
            azimuth=settings.azimuth,
            plunge=settings.plunge,
            tilt=settings.tilt,
            weighting=settings.weighting,
            range_limits=((0.3 * shortest_in_plane(evidence), 2.0 * greatest),) * 3,
        ),
    ).model
    return alone.total_sill <= ZONAL_SHARE * sill and alone.structures[0].ranges[0] <= 0.7 * greatest


def with_zonal(evidence: Evidence) -> Evidence:
    """The same evidence with a last structure asked for that varies across the plane alone."""
    settings = evidence.settings
    ranges = (*fixed_ranges(settings), (ZONAL_RANGE_M, ZONAL_RANGE_M, None))
    return replace(
        evidence, settings=replace(settings, shapes=(*settings.shapes, settings.shapes[0]), ranges=ranges)
    )


def fixed_ranges(settings: VariogramSettings) -> tuple[Triple, ...]:
    """Ranges that the user fixed, one triple a structure."""
    return settings.ranges or ((None, None, None),) * len(settings.shapes)


def fit_plan(
    plan: Plan,
    evidence: Evidence,
    variograms: Sequence[ExperimentalVariogram],
    variance: float,
    starts: tuple[FitStart | None, FitStart | None] = (None, None),
) -> PlanFit:
    """Fit the nugget, then the rest, as planned.

    Parameters
    ----------
    variograms : sequence
        In the order of ``evidence.roles``; for a jackknife without one hole.
    variance : float
        Total sill in the unit of the measure.
    starts : pair of FitStart, optional
        From an earlier :class:`PlanFit`.
    """
    settings = evidence.settings
    total = _total(settings, evidence, variance)
    roles = evidence.fitted_lags(variograms)
    sill = _sill(total, variance)
    nugget, hits, first = _nugget(plan, evidence, roles, sill, starts[0])
    if not (plan.upright or plan.plane):
        return PlanFit(assumed_model(settings, sill, float(nugget or 0.0)), (), (None, None))
    used = [
        variogram
        for role, variogram in roles.items()
        if (plan.upright if role == "down_hole" else plan.plane)
    ]
    fit = fit_variogram(used, _joint_settings(plan, evidence, nugget, total), start=starts[1])
    model = _within_reach(fit.model, plan.greatest_in_plane_m, settings)
    return PlanFit(model, (*hits, *_own_hits(fit, plan)), (first, fit.start))


def _sill(total: dict[str, Any], variance: float) -> float:
    return float(total.get("total_sill") or total.get("mean_over_pairs") or variance)


def _total(settings: VariogramSettings, evidence: Evidence, variance: float) -> dict[str, Any]:
    """How the total sill is held in the fit, as arguments of FitSettings."""
    if settings.measure == "pairwise_relative" or settings.total_sill == "free":
        return {}
    if settings.measure == "semivariogram" and not isinstance(settings.total_sill, str):
        return {"total_sill": float(settings.total_sill)}
    if settings.measure != "correlogram" and settings.total_sill == "over_pairs":
        return {"mean_over_pairs": variance, "pair_separations": evidence.pair_separations()}
    return {"total_sill": variance}


def _nugget(
    plan: Plan,
    evidence: Evidence,
    roles: dict[str, ExperimentalVariogram],
    sill: float,
    start: FitStart | None,
) -> tuple[float | None, tuple[str, ...], FitStart | None]:
    """Nugget (None where the joint fit finds it), limits that were hit, and the start for next time."""
    settings = evidence.settings
    if plan.nugget_from == "user":
        if settings.nugget is None:
            return float(settings.nugget_share or 0.0) * sill, (), None
        if settings.measure == "semivariogram":
            return settings.nugget, (), None
        given = settings.total_sill
        return settings.nugget * sill / (evidence.variance if isinstance(given, str) else given), (), None
    if plan.nugget_from == "assumed":
        return settings.assumed_nugget_share * sill, (), None
    if plan.nugget_from == "joint":
        return None, (), None
    variogram = roles["down_hole"]
    low, high = _upright_limits(evidence)
    # a structure that varies across the plane alone is one with the others down the holes
    own = [row[2] for row in fixed_ranges(settings) if row[0] != ZONAL_RANGE_M]
    ranges = tuple((minor, minor, minor) for minor in own)
    fit = fit_variogram(
        variogram,
        FitSettings(
            shapes=settings.shapes[: len(ranges)],
            ranges=ranges,
            weighting=settings.weighting,
            range_limits=((low, high),) * 3,
        ),
        start=start,
    )
    hits = tuple(f"down-hole fit: {text}" for text in fit.bounds_hit if "nugget" in text)
    most = MOST_NUGGET * sill
    if fit.model.nugget > most:
        hits = (*hits, f"the down-hole nugget is held at {MOST_NUGGET:.0%} of the total sill")
    return min(fit.model.nugget, most), hits, fit.start


def _upright_limits(evidence: Evidence) -> tuple[float, float]:
    """Least and greatest upright range that a down-hole variogram can tell from a nugget and from a trend."""
    distance = evidence.distances("down_hole")
    return 1.5 * float(distance.min()), 3.0 * float(distance.max())


def _joint_settings(
    plan: Plan, evidence: Evidence, nugget: float | None, total: dict[str, Any]
) -> FitSettings:
    settings = evidence.settings
    ratio = settings.assumed_ratio[1]
    fixed = fixed_ranges(settings)
    minor_ratio: float | None = 1.0 / ratio
    if (plan.upright and plan.plane) or (plan.upright and all(row[0] is not None for row in fixed)):
        minor_ratio = None
    upright = plane = (1e-6, math.inf)
    if plan.upright:
        upright = _upright_limits(evidence)
    if plan.plane:
        low = shortest_in_plane(evidence)
        high = max(float(evidence.distances(role).max()) for role in in_plane(evidence))
        bare = (
            plan.nugget_from == "joint" and not plan.short_holes
        )  # nothing else tells nugget from structure
        plane = ((1.5 if bare else 0.3) * low, 2.0 * high)
    elif minor_ratio is not None:
        plane = (upright[0] * ratio, upright[1] * ratio)
        fixed = tuple(row if row[2] is None or row[0] else (ratio * row[2], row[1], row[2]) for row in fixed)
    level = settings.continuity == "level"
    return FitSettings(
        shapes=settings.shapes,
        nugget=nugget,
        sills=settings.sills if settings.measure == "semivariogram" else None,
        ranges=fixed,
        links=(0, 0, 2) if level else (0, 1, 2),
        semi_ratio=1.0 if not level and not plan.plane else None,
        minor_ratio=minor_ratio,
        azimuth=settings.azimuth,
        plunge=settings.plunge,
        tilt=settings.tilt,
        weighting=settings.weighting,
        range_limits=(plane, plane, upright),
        **total,
    )


def _own_hits(fit: VariogramFit, plan: Plan) -> tuple[str, ...]:
    """Limits hit in the joint fit; a nugget of zero is told once, by the fit that found it."""
    return tuple(text for text in fit.bounds_hit if plan.nugget_from == "joint" or "nugget" not in text)


def _within_reach(model: VariogramModel, greatest: float, settings: VariogramSettings) -> VariogramModel:
    """The model with its assumed ranges in the plane held below the distance at which pairs stand at the sill."""
    if not math.isfinite(greatest):
        return model
    structures = []
    for structure, fixed in zip(model.structures, fixed_ranges(settings)):
        ranges = [
            value if axis == 2 or fixed[axis] is not None else min(value, greatest)
            for axis, value in enumerate(structure.ranges)
        ]
        structures.append(replace(structure, ranges=(ranges[0], ranges[1], ranges[2])))
    return replace(model, structures=tuple(structures))


def assumed_model(settings: VariogramSettings, sill: float, nugget: float) -> VariogramModel:
    """A model from the assumptions alone, and from what the user fixed."""
    count = len(settings.shapes)
    sills = settings.sills or (None,) * count
    if settings.measure != "semivariogram":
        sills = (None,) * count
    left = max(0.0, sill - nugget - sum(value for value in sills if value is not None))
    share = left / max(1, sum(value is None for value in sills))
    structures = []
    for number, (shape, given, fixed) in enumerate(
        zip(settings.shapes, sills, fixed_ranges(settings)), start=1
    ):
        minor = fixed[2]
        if minor is None:
            minor = settings.assumed_vertical_range_m * number / count
            if fixed[0] is not None:
                minor = fixed[0] / settings.assumed_ratio[1]
        major = fixed[0] if fixed[0] is not None else minor * settings.assumed_ratio[1]
        semi = fixed[1] if fixed[1] is not None else major
        structures.append(Structure(shape, share if given is None else given, (major, semi, minor)))  # type: ignore[arg-type]
    if not nugget + sum(structure.sill for structure in structures) > 0.0:
        nugget = sill
    return VariogramModel(nugget, tuple(structures), settings.azimuth, settings.plunge, settings.tilt)
