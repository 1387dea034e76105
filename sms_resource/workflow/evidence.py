"""Stages composite and density: what the samples are worth before they are estimated."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pandas as pd

from sms_resource.loaders.tables import LoadedData
from sms_resource.units import element_column
from sms_resource.workflow.stage import Context, StageStop
from sms_resource.workflow.state import DensityState, EvidenceState
from sms_resource.workflow.worth_of_samples import JoinedSamples, add_findings, describe


def metal_columns(config: Any) -> list[str]:
    """Columns of the metals that are estimated."""
    return [element_column(name) for name in config.metals.estimate]


def all_columns(config: Any) -> list[str]:
    """Columns of every element that the study reads."""
    others = [element_column(name) for name in config.metals.summarise]
    metals = metal_columns(config)
    return metals + [name for name in others if name not in metals]


def composite_options(config: Any) -> dict[str, Any]:
    """Options of compositing, as the study has them."""
    choice = config.composites
    return {
        "length_m": choice.length_m,
        "shortest_m": choice.shortest_m,
        "short_rest": choice.short_rest,
        "weighting": choice.weighting,
        "lost_core": choice.lost_core,
        "background": background_grades(choice.background),
        "neighbour_recovery_pct": choice.neighbour_recovery_pct,
        "neighbour_distance_m": choice.neighbour_distance_m,
        "least_recovery_pct": choice.least_recovery_pct,
    }


def background_grades(given: dict[str, Any]) -> dict[str, Any] | None:
    """Background grades by column, or by domain and column."""
    made: dict[str, Any] = {}
    for name, value in given.items():
        if isinstance(value, dict):
            made[name] = {element_column(element): grade for element, grade in value.items()}
        else:
            made[element_column(name)] = value
    return made or None


def composite(context: Context) -> EvidenceState:
    """Position the holes, join assays to runs and logs, make composites, and describe the evidence."""
    from sms_resource.samples import desurvey, domains, position, recovery
    from sms_resource.samples.composites import composite as make_composites
    from sms_resource.samples.surface import surface_use

    data: LoadedData = context.done["load"]
    config = context.config
    elements = all_columns(config)
    assert data.seafloor is not None  # its absence is an error of the stage load
    match = position.match_collars(
        data.drill.collars,
        data.seafloor,
        policy=config.position.collars,
        sigma_grid_m=config.seafloor.sigma_m,
        flag_m=config.checks.collar_tolerance_m,
    )
    ends, found = position.hole_ends(match.collars)
    paths = desurvey.hole_paths(match.collars, data.drill.surveys)
    add_findings(context, match.findings, found, paths.findings)
    assays, assay_summary = plain_grades(context, data.drill.assays, "assays")
    surface, _ = plain_grades(context, data.surface, "surface samples")
    intervals = domain_table(data, config)
    made = make_composites(
        assays,
        data.drill.runs,
        intervals,
        paths,
        metals=elements,
        densities=data.drill.densities,
        **composite_options(config),
    )
    add_findings(context, made.findings)
    inside = made.frame[made.frame["domain"].isin(config.domains.sulphide)]
    empty = not len(inside) or not inside[metal_columns(config)].notna().any(axis=None)
    if empty and not made.findings.has_errors:
        context.findings.error(
            "no-composites", "no sample lies in a domain of the body",
            "Check domains.codes and domains.sulphide against the logged codes.", file=context.study.path.name,
        )  # fmt: skip
    if empty:
        raise StageStop
    # a run belongs to the domain that holds most of it; what the host rock gave is no evidence of the sulphide
    of_body = domains.domain_at(data.drill.runs, intervals).isin(config.domains.sulphide)
    recovered, found = recovery.recovery_summary(data.drill.runs[of_body.to_numpy()], intervals)
    add_findings(context, found)
    used, found = surface_use(surface, config.surface_samples.use, config.surface_samples.cap_types)
    add_findings(context, found)
    joined = JoinedSamples(
        assays,
        surface,
        intervals,
        match.collars,
        made.frame,
        paths,
        tuple(metal_columns(config)),
        tuple(elements),
    )
    laboratory, tables = describe(context, joined, composite_options(config))
    context.detail = f"{len(inside)} composites in sulphide of {len(made.frame)}"
    return EvidenceState(
        collars=match.collars,
        paths=paths,
        domain_intervals=intervals,
        assays=assays,
        composites=with_cap(context, made.frame, surface, elements),
        sticks=recovery.sticks(assays, data.drill.runs, intervals, paths, elements),
        surface=surface,
        laboratory=laboratory,
        tables={
            "collar_match": match.table,
            "hole_ends": ends,
            "assay_summary": assay_summary,
            "composite_audit": made.audit,
            "recovery": recovered,
            **tables,
        },
        facts={
            "collar_shift_m": float(match.shift_m),
            "assumed_vertical": list(paths.assumed_vertical),
            "handheld_used": any(method != "laboratory" for method in config.assays.methods),
            "surface_use": used,
        },
    )


def with_cap(
    context: Context, composites: pd.DataFrame, surface: pd.DataFrame, elements: list[str]
) -> pd.DataFrame:
    """Composites, with surface samples as the samples of a thin cap where the study lets them in."""
    from sms_resource.samples.surface import cap_samples

    choice = context.config.surface_samples
    if choice.use != "cap":
        return composites
    cap, found = cap_samples(
        surface,
        elements,
        thickness_m=choice.cap_thickness_m,
        types=choice.cap_types,
        domain=choice.cap_domain,
        core=composites,
    )
    add_findings(context, found)
    joined = pd.concat([composites, cap], ignore_index=True)
    joined["shared_assay"] = joined["shared_assay"].fillna(0).astype(int)  # a surface sample is its own assay
    return joined


def plain_grades(context: Context, table: pd.DataFrame, label: str) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Grades as plain numbers: limits resolved, methods that are not accepted left out."""
    from sms_resource.samples.assays import resolve_assays

    choice = context.config.assays
    frame, found, summary = resolve_assays(
        table,
        all_columns(context.config),
        below_detection=choice.below_detection,
        over_limit=choice.over_limit,
        allowed_methods=choice.methods,
        label=label,
    )
    if len(table):  # a table that was not given lacks nothing
        file = context.done["load"].files.get(label.replace(" ", "_"))
        add_findings(context, [replace(item, file=file) for item in found])
    return frame, summary


def domain_table(data: LoadedData, config: Any) -> pd.DataFrame:
    """Domains down the holes; without codes in the study every depth is the first sulphide domain."""
    from sms_resource.samples.domains import domain_intervals

    if config.domains.codes:
        return domain_intervals(
            data.drill.lithology, dict(config.domains.codes), default=config.domains.unlogged
        )
    collars = data.drill.collars
    return pd.DataFrame(
        {
            "hole_id": collars["hole_id"],
            "from_m": 0.0,
            "to_m": collars["length_m"],
            "domain": config.domains.sulphide[0],
        }
    )


def density(context: Context) -> DensityState:
    """Dry and wet density of each domain, with its low and high."""
    from sms_resource.samples import density as room
    from sms_resource.samples.density_model import fit_density
    from sms_resource.samples.mineralogy import NormSettings

    data: LoadedData = context.done["load"]
    evidence: EvidenceState = context.done["composite"]
    config = context.config
    choice = config.density
    table = room.density_table(
        data.drill.densities,
        evidence.assays,
        evidence.domain_intervals,
        salinity_gkg=choice.salinity_gkg,
        pore_water_tpm3=choice.pore_water_tpm3,
        dry_contains_salt=choice.dry_contains_salt,
        porosity=dict(choice.porosity_fraction) or None,
    )
    model = fit_density(
        table,
        choice.method,
        domains=config.domains.sulphide,
        metals=metal_columns(config),
        assigned_dry_tpm3=dict(choice.assigned_dry_tpm3) or None,
        porosity=dict(choice.porosity_fraction) or None,
        composites=evidence.composites[evidence.composites["domain"].isin(config.domains.sulphide)],
        salinity_gkg=choice.salinity_gkg,
        pore_water_tpm3=choice.pore_water_tpm3,
        predictors=[element_column(name) for name in choice.predictors],
        confidence=choice.confidence,
        norm_settings=NormSettings(
            copper_mineral=choice.copper_mineral,
            rest=choice.rest_mineral,
            rest_by_domain=dict(choice.rest_by_domain),
        ),
        least_count=choice.least_count,
        factor=choice.factor,
    )
    add_findings(context, model.findings)
    context.detail = f"{len(table)} measurements, {choice.method.replace('_', ' ')}"
    return DensityState(table=table, model=model, by_domain=model.by_domain)
