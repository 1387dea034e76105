"""Stages composite and density: what the samples are worth before they are estimated."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from sms_resource.loaders.tables import LoadedData
from sms_resource.units import element_column
from sms_resource.workflow.stage import Context
from sms_resource.workflow.state import DensityState, EvidenceState


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
        "background": {element_column(name): value for name, value in choice.background.items()},
        "least_recovery_pct": choice.least_recovery_pct,
    }


def composite(context: Context) -> EvidenceState:
    """Position the holes, join assays to runs and logs, make composites, and describe the evidence."""
    from sms_resource.samples import (
        associations,
        desurvey,
        domains,
        position,
        quality,
        recovery,
        surface,
        topcuts,
        twins,
    )
    from sms_resource.samples.assays import resolve_assays
    from sms_resource.samples.composites import composite as make_composites

    data: LoadedData = context.done["load"]
    config = context.config
    metals, elements = metal_columns(config), all_columns(config)
    seed = config.study.seed

    match = position.match_collars(
        data.drill.collars,
        data.seafloor,
        policy=config.position.collars,
        sigma_grid_m=config.seafloor.sigma_m,
        flag_m=config.checks.collar_tolerance_m,
    )
    context.findings.extend(match.findings)
    paths = desurvey.hole_paths(match.collars, data.drill.surveys)
    assays, found, assay_summary = resolve_assays(
        data.drill.assays,
        elements,
        below_detection=config.assays.below_detection,
        over_limit=config.assays.over_limit,
        allowed_methods=config.assays.methods,
    )
    context.findings.extend(found)
    intervals = domain_table(data, config)
    made = make_composites(
        assays, data.drill.runs, intervals, paths, metals=elements, densities=data.drill.densities,
        **composite_options(config),
    )  # fmt: skip
    context.findings.extend(made.findings)
    composites = made.frame
    inside = composites[composites["domain"].isin(config.domains.sulphide)]
    surface_table, found, _ = resolve_assays(
        data.surface,
        elements,
        below_detection=config.assays.below_detection,
        over_limit=config.assays.over_limit,
        allowed_methods=config.assays.methods,
    )
    context.findings.extend(item for item in found if item.severity != "error")
    laboratory = quality.laboratory_quality(data.laboratory)
    context.findings.extend(laboratory.findings)
    tables = {
        "collar_match": match.table,
        "assay_summary": assay_summary,
        "composite_audit": made.audit,
        "recovery_bias": recovery.recovery_bias(inside, metals),
        "surface_bias": surface.surface_bias(surface_table, inside, metals, seed=seed),
        "top_cut_study": topcuts.top_cut_study(inside, metals),
        "twins": twins.twin_report(match.collars, inside, distance_m=config.checks.twin_distance_m),
        "associations": associations.metal_associations(inside, elements),
        "deleterious": _summary(inside, [name for name in elements if name not in metals]),
        "statistics": _statistics(inside, metals),
        "lost_core": recovery.lost_core_bracket(
            assays, data.drill.runs, intervals, paths, metals=metals, densities=data.drill.densities,
            options=composite_options(config), domains=config.domains.sulphide,
        ),
    }  # fmt: skip
    context.detail = f"{len(inside)} composites in sulphide of {len(composites)}"
    if inside[metals].notna().any(axis=None) is np.False_ or len(inside) == 0:
        context.findings.error(
            "no-composites", "no sample lies in a domain of the body",
            "Check domains.codes and domains.sulphide against the logged codes.", file=context.study.path.name,
        )  # fmt: skip
    return EvidenceState(
        collars=match.collars,
        paths=paths,
        domain_intervals=intervals,
        assays=assays,
        composites=composites,
        sticks=recovery.sticks(assays, data.drill.runs, intervals, paths, metals),
        surface=surface_table,
        laboratory=laboratory,
        tables=tables,
        facts={
            "collar_shift_m": float(match.shift_m),
            "assumed_vertical": list(paths.assumed_vertical),
            "handheld_used": any(method != "laboratory" for method in config.assays.methods),
        },
    )


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


def _statistics(composites: pd.DataFrame, metals: list[str]) -> pd.DataFrame:
    """Weighted mean, spread and quantiles of each metal in each domain."""
    rows = []
    groups = [("all", composites), *composites.groupby("domain", sort=True)]
    for domain, part in groups:
        for metal in metals:
            known = part[metal].notna() & (part["weight"] > 0)
            values, weights = part.loc[known, metal].to_numpy(), part.loc[known, "weight"].to_numpy()
            if not len(values):
                continue
            mean = float(np.average(values, weights=weights))
            spread = float(np.sqrt(np.average((values - mean) ** 2, weights=weights)))
            low, middle, high = np.quantile(values, [0.1, 0.5, 0.9])
            rows.append(
                {"domain": domain, "metal": metal, "n": len(values), "mean": mean, "sd": spread,
                 "cv": spread / mean if mean else np.nan, "minimum": values.min(), "p10": low, "median": middle,
                 "p90": high, "maximum": values.max()}
            )  # fmt: skip
    return pd.DataFrame(rows)


def _summary(composites: pd.DataFrame, columns: list[str]) -> pd.DataFrame:
    """Elements that are read but not estimated."""
    rows = [
        {"element": name, "n": int(composites[name].notna().sum()), "mean": composites[name].mean(),
         "median": composites[name].median(), "maximum": composites[name].max()}
        for name in columns
        if name in composites
    ]  # fmt: skip
    return pd.DataFrame(rows, columns=["element", "n", "mean", "median", "maximum"])


def density(context: Context) -> DensityState:
    """Dry and wet density of each domain, with its low and high."""
    from sms_resource.samples import density as room

    data: LoadedData = context.done["load"]
    evidence: EvidenceState = context.done["composite"]
    config = context.config
    choice = config.density
    table = room.density_table(
        data.drill.densities, evidence.assays, evidence.domain_intervals, salinity_gkg=choice.salinity_gkg
    )
    model = room.fit_density(
        table,
        method=choice.method,
        domains=config.domains.sulphide,
        metals=all_columns(config),
        assigned_dry_tpm3=dict(choice.assigned_dry_tpm3),
        porosity=dict(choice.porosity_fraction),
        salinity_gkg=choice.salinity_gkg,
        least_count=choice.least_count,
        factor=choice.factor,
        composites=evidence.composites,
    )
    context.findings.extend(model.findings)
    context.detail = f"{len(table)} measurements, {choice.method.replace('_', ' ')}"
    return DensityState(table=table, model=model, by_domain=model.by_domain)
