"""What the samples of a study are worth: bias, laboratory, twins, extreme grades, associations, positions."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import pandas as pd

from sms_resource import second
from sms_resource.findings import Findings
from sms_resource.loaders.tables import LoadedData
from sms_resource.workflow.stage import Context


@dataclass(frozen=True, eq=False)
class JoinedSamples:
    """Samples as the stage composite has joined them.

    Attributes
    ----------
    assays, surface : DataFrame
        Accepted assays and surface samples as plain numbers.
    intervals : DataFrame
        hole_id, from_m, to_m, domain.
    collars : DataFrame
        Collars after the match with the seafloor.
    composites : DataFrame
        All domains, uncut.
    paths : HolePaths
    metals, elements : tuple of str
        Columns that are estimated, and all that are read.
    """

    assays: pd.DataFrame
    surface: pd.DataFrame
    intervals: pd.DataFrame
    collars: pd.DataFrame
    composites: pd.DataFrame
    paths: Any
    metals: tuple[str, ...]
    elements: tuple[str, ...]


# The table that a finding of the samples room is about, by the start of its code; the room knows no files.
TABLE_OF = (
    ("collar-", "collars"), ("hole-end-", "collars"), ("survey-", "surveys"), ("assay-in-", "assays"),
    ("assay-without-", "assays"), ("composite-none", "assays"), ("recovery-over-", "runs"),
    ("density-impossible", "densities"),
)  # fmt: skip


def add_findings(context: Context, *found: Any) -> None:
    """Take over findings of a room, with the file of the table, or the study, that each is about."""
    files = context.done["load"].files
    for part in found:
        context.findings.extend(
            item if item.file else replace(item, file=_file_of(item, files, context.study.path.name))
            for item in part
        )


def _file_of(item: Any, files: dict[str, str], study: str) -> str | None:
    if item.column and "." in item.column:  # a dotted key
        return study
    role = next((role for start, role in TABLE_OF if item.code.startswith(start)), "")
    return files.get(role)


def describe(
    context: Context, joined: JoinedSamples, options: dict[str, Any]
) -> tuple[Any, dict[str, pd.DataFrame]]:
    """The verdicts on the laboratory, and the tables of the evidence; ``options`` are those of compositing."""
    from sms_resource.samples import bracket, contacts, lognormal, topcut_tables, topcuts
    from sms_resource.samples import surface as floor

    data: LoadedData = context.done["load"]
    metals = list(joined.metals)
    sulphide = context.config.domains.sulphide
    inside = joined.composites[joined.composites["domain"].isin(sulphide)]
    aside = second.Aside(tests_of(context, joined, inside))
    tables = {
        "top_cut_study": topcuts.top_cut_study(inside, metals, weight_column="weight"),
        "top_cut_curves": topcut_tables.cut_curves(inside, metals),
        "statistics": statistics(inside, metals),
        "lost_core": bracket.lost_core_bracket(
            joined.assays, data.drill.runs, joined.intervals, joined.paths, metals=metals,
            densities=data.drill.densities, options=options, domains=sulphide,
        ),
    }  # fmt: skip
    places, found_of_places = _places(context, joined, inside, metals)
    told = aside.results()
    laboratory, logs = told["laboratory"], told["lognormal"]
    profile, contact_verdicts = told["contacts"]
    bias = told["surface"] if len(joined.surface) else told["surface"].iloc[:0]
    deleterious, found_of_deleterious = told["deleterious"]
    add_findings(
        context,
        laboratory.findings,
        lognormal.lognormal_findings(logs),
        contacts.contact_findings(contact_verdicts),
        floor.surface_findings(bias),
    )
    if len(data.dredges):
        tables["dredge_tracks"], found = floor.dredge_tracks(data.dredges)
        add_findings(context, found)
    add_findings(context, *found_of_places, found_of_deleterious)
    return laboratory, {
        **tables,
        **places,
        "recovery_bias": told["recovery"],
        "lognormal": logs,
        "contact_analysis": profile,
        "contact_verdicts": contact_verdicts,
        "surface_bias": bias,
        "deleterious": deleterious,
        "associations": told["associations"],
        "tracers": told["tracers"],
    }


def tests_of(context: Context, joined: JoinedSamples, inside: pd.DataFrame) -> dict[str, second.Call]:
    """The tests and comparisons of the evidence, which need none of each other: the second interpreter makes them."""
    config = context.config
    metals = list(joined.metals)
    limits = {element: dict(pair) for element, pair in config.laboratory.pair_limits.items()}
    laboratory = {
        "elements": tuple(config.metals.estimate),
        "blank_limits": config.laboratory.blank_limits,
        "family_error": config.laboratory.family_error,
        "pair_limits": limits or None,
        "confidence": config.laboratory.confidence,
    }
    bias = {
        "domains": config.domains.sulphide,
        "distance_m": config.surface_samples.compare_within_m,
        "by_type": True,
    }
    room = "sms_resource.samples"
    table = context.done["load"].laboratory
    return {
        "laboratory": second.Call(f"{room}.quality:laboratory_quality", (table, joined.assays), laboratory),
        "lognormal": second.Call(f"{room}.lognormal:lognormal_table", (inside, metals)),
        "contacts": second.Call(
            f"{room}.contacts:contact_analysis", (joined.composites, joined.intervals, metals)
        ),
        "recovery": second.Call(f"{room}.recovery:recovery_bias", (inside, metals)),
        "surface": second.Call(
            f"{room}.surface:surface_bias",
            (joined.surface, joined.composites, metals, config.study.seed),
            bias,
        ),
        "deleterious": second.Call(f"{room}.associations:deleterious_summary", (inside,)),
        "associations": second.Call(
            f"{room}.associations:metal_associations",
            (inside, list(joined.elements)),
            {"by_domain": True},
        ),
        "tracers": second.Call(
            f"{room}.associations:tracer_ratios",
            (inside,),
            {"thresholds": dict(config.associations.tracer_thresholds)},
        ),
    }


def _places(
    context: Context, joined: JoinedSamples, inside: pd.DataFrame, metals: list[str]
) -> tuple[dict[str, pd.DataFrame], list[Findings]]:
    """Twins and clusters of holes, positions by method, and whether collars would fit better elsewhere in plan."""
    from sms_resource.samples import position, twins
    from sms_resource.samples.plan_shift import plan_shift

    data: LoadedData = context.done["load"]
    pairs = twins.twin_report(joined.collars, inside, context.config.checks.twin_distance_m, metals=metals)
    assert data.seafloor is not None  # its absence is an error of the stage load
    told = [pairs.findings, plan_shift(joined.collars, data.seafloor, context.config.study.seed).findings]
    by_method = []
    for table, label in ((joined.collars, "collars"), (joined.surface, "surface samples")):
        if len(table):
            placed, found = position.position_table(table, label)
            by_method.append(placed)
            told.append(found)
    return {
        "twin_pairs": pairs.pairs,
        "twin_clusters": pairs.clusters[pairs.clusters["holes"] > 1].reset_index(drop=True),
        "twins": pairs.comparison,
        "positions": pd.concat(by_method, ignore_index=True) if by_method else pd.DataFrame(),
    }, told


def statistics(composites: pd.DataFrame, metals: list[str]) -> pd.DataFrame:
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
