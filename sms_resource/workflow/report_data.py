"""From the outputs of the stages to what the report is made of."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pandas as pd

from sms_resource.findings import Findings
from sms_resource.reporting.data import (
    BodyEvidence,
    Classes,
    Estimation,
    Evidence,
    LaboratoryEvidence,
    ReportData,
    RunRecord,
    Subject,
    ValueEvidence,
    VariogramRecord,
)
from sms_resource.samples.topcut_tables import cut_summary
from sms_resource.study import Study
from sms_resource.units import element_column, element_label
from sms_resource.workflow.estimation import search_text
from sms_resource.workflow.evidence import all_columns, metal_columns
from sms_resource.workflow.means import (
    beside_support,
    check_rows,
    mean_rows,
    named_axis,
    skins_rule,
    support_rows,
    waterfall_rows,
    with_equivalent,
)
from sms_resource.workflow.neighbourhood import recommendation, timeless
from sms_resource.workflow.stage import one_domain
from sms_resource.workflow.state import (
    BlockState,
    BodyState,
    ClassState,
    DensityState,
    EvidenceState,
    ValidationState,
    ValueState,
    VariogramState,
)

WEIGHTINGS = {
    "recovered_length": "recovered length",
    "length": "length",
    "recovered_length_density": "recovered length times density",
}
DELETERIOUS = ("as", "hg", "sb", "pb")


def report_data(
    study: Study, done: dict[str, Any], findings: Findings, ledger: pd.DataFrame, manifest: dict[str, Any],
    truth: dict[str, Any] | None, extra: dict[str, Any] | None = None,
) -> ReportData:  # fmt: skip
    """Everything that the report shows.

    Parameters
    ----------
    study : Study
    done : dict
        Outputs of all stages.
    findings : Findings
    ledger : DataFrame
        The decisions, one row each.
    manifest : dict
        Inputs, versions and seed.
    truth : dict, optional
        Page that puts the estimate of an invented deposit against its truth.
    extra : dict, optional
        Scenario tables and changes against another run.
    """
    extra = extra or {}
    return ReportData(
        subject=_subject(study, done),
        evidence=_evidence(study, done),
        body=_body(study, done),
        variograms=tuple(
            replace(
                VariogramRecord.from_inference(metal, domain, item),
                plane_map=done["variograms"].facts["plane_maps"].get((domain, metal)),
            )
            for (domain, metal), item in done["variograms"].inferences.items()
        ),
        estimation=_estimation(study, done),
        classes=_classes(study, done, findings),
        value=_value(study, done, extra),
        record=RunRecord(
            ledger=ledger,
            findings=findings,
            truth=truth,
            manifest=manifest,
            changes=extra.get("changes"),
            against=extra.get("against", ""),
        ),
    )


def _subject(study: Study, done: dict[str, Any]) -> Subject:
    config = study.config
    state: ClassState = done["classify"]
    about, prospects = config.study, config.prospects
    elements = all_columns(config)
    return Subject(
        title=about.name,
        deposit=about.name,
        author=about.prepared_by,
        competent_person=about.competent_person,
        effective_date=about.effective_date.isoformat(),
        reporting_standard=about.reporting_standard,
        jurisdiction=about.jurisdiction,
        crs=about.crs,
        vertical_datum=about.vertical_datum,
        metals=tuple(metal_columns(config)),
        deleterious=tuple(name for name in elements if name.partition("_")[0] in DELETERIOUS),
        deleterious_estimated=tuple(
            name for name in metal_columns(config) if name.partition("_")[0] in DELETERIOUS
        ),
        cutoff={
            "variable": state.facts["cutoff_variable"],
            "value": config.cutoff.at,
            "basis": config.cutoff.basis,
            "currency": config.value.currency if config.value.metals else "",
            "equivalent_in": element_column(config.value.equivalent_in) if config.value.metals else "",
            "date": "; ".join(sorted({m.price_date for m in config.value.metals.values() if m.price_date})),
        },
        prospects={"judged_by": prospects.by, "basis": prospects.basis} if prospects.judged else None,
        site_visit={"who": about.site_visit, "statement": about.site_visit} if about.site_visit else None,
        exaggeration=config.report.exaggeration,
        section_azimuth_deg=config.report.section_azimuth_deg,
        section_count=config.report.sections,
    )


def _evidence(study: Study, done: dict[str, Any]) -> Evidence:
    config = study.config
    data = done["load"]
    evidence: EvidenceState = done["composite"]
    density: DensityState = done["density"]
    variograms: VariogramState = done["variograms"]
    validation: ValidationState = done["validate"]
    tables = evidence.tables
    collars = evidence.collars.assign(
        assumed_vertical=evidence.collars["hole_id"].isin(evidence.facts["assumed_vertical"]),
        sigma_assumed=evidence.collars["position_sigma_m"].isna(),
        position_sigma_m=evidence.collars["position_sigma_m"].astype(float).fillna(config.position.sigma_m),
    )
    laboratory = evidence.laboratory
    weights = variograms.samples.set_index("composite_id")["declustering_weight"]
    sulphide = one_domain(config.domains).sulphide
    composites = evidence.composites[evidence.composites["domain"].isin(sulphide)]
    return Evidence(
        collars=collars,
        collar_shift_m=evidence.facts["collar_shift_m"],
        sticks=evidence.sticks,
        runs=data.drill.runs,
        lithology=data.drill.lithology,
        composites=composites.assign(weight=composites["composite_id"].map(weights)),
        weighting=WEIGHTINGS[config.composites.weighting],
        composite_audit=tables["composite_audit"],
        composite_rule=composite_rule(config),
        surface=evidence.surface,
        surface_use="" if config.surface_samples.use == "none" else evidence.facts["surface_use"],
        dredges=data.dredges,
        surface_bias=tables["surface_bias"],
        recovery_bias=tables["recovery_bias"],
        lost_core=validation.bracket,
        lost_core_default=config.composites.lost_core,
        densities=density.table,
        density_by_domain=density.by_domain,
        top_cuts=cut_summary(composites, tables["top_cut_study"], variograms.cuts),
        top_cut_curves=tables["top_cut_curves"],
        assay_summary=tables["assay_summary"],
        handheld_used=bool(evidence.facts["handheld_used"]),
        twins=tables["twins"],
        twin_pairs=tables["twin_pairs"],
        twin_clusters=tables["twin_clusters"],
        positions=tables["positions"],
        collar_match=tables["collar_match"],
        hole_ends=tables["hole_ends"],
        dredge_tracks=tables.get("dredge_tracks"),
        tracers=tables.get("tracers"),
        lost_core_composites=tables["lost_core"],
        contact_analysis=tables.get("contact_analysis"),
        contact_verdicts=tables.get("contact_verdicts"),
        deleterious=tables.get("deleterious"),
        associations=tables["associations"],
        lognormal=tables.get("lognormal"),
        statistics=tables["statistics"],
        declustering_scan=variograms.scans,
        laboratory=LaboratoryEvidence(
            table=data.laboratory,
            verdicts=laboratory.verdicts,
            references=laboratory.references,
            blanks=laboratory.blanks,
            duplicates=laboratory.duplicates,
            checks=laboratory.checks,
            pairs=laboratory.duplicate_pairs,
            check_pairs=laboratory.check_pairs,
            materials=laboratory.materials,
            batches=laboratory.batches,
            rates=laboratory.rates,
        ),
    )


def _body(study: Study, done: dict[str, Any]) -> BodyEvidence:
    from sms_resource.workflow.geometry import seafloor_sigma

    config = study.config
    data = done["load"]
    state: BodyState = done["body"]
    blocks: BlockState = done["blocks"]
    made = state.body
    volumes = {"volume_m3": made.volume_m3}
    for name, volume in zip(made.categories["category"], made.categories["volume_m3"]):
        volumes[f"{name}_m3"] = float(volume)
    extrapolated = 1.0 - volumes.get("drilled_m3", made.volume_m3) / made.volume_m3
    return BodyEvidence(
        seafloor=state.seafloor,
        base=made.base,
        thickness=made.thickness,
        thickness_sigma=made.thickness_sigma,
        outline=made.outline,
        exclusions=data.exclusions,
        volumes=volumes,
        extrapolation={
            "greatest_distance_m": float(done["value"].frame["nearest_distance_m"].max()),
            "share_pct": 100.0 * extrapolated,
            "basis": (
                f"drilled: within {config.body.drilled_within_m:g} m of a hole; below holes that ended in sulphide the "
                f"body goes on for at most {config.body.extrapolate_below_m:g} m; outline {state.facts['outline_from']}"
            ),
        },
        contacts=state.contacts,
        audit=made.audit,
        geometry_uncertainty=done["validate"].geometry,
        grid_proposal=blocks.proposal,
        method={
            "kriging": "Thickness below the seafloor, by kriging of the contacts in holes.",
            "spline": "Thickness below the seafloor, by a thin-plate spline through the contacts in holes.",
            "linear": "Thickness below the seafloor, by linear interpolation between the contacts in holes.",
        }[config.body.method],
        waterfall=waterfall_rows(done["classify"].waterfall, metal_columns(config)),
        sigma_seafloor_m=seafloor_sigma(state),
        sigma_seafloor_from=state.facts["sigma_from"],
        slope=state.facts["slope"],
        roughness=state.facts["roughness"],
        footprint_m=config.seafloor.footprint_m,
        slope_classes=done["classify"].tables["slope_classes"],
        splits={
            name: done["classify"].tables[f"grade_tonnage_by_{name}"]
            for name in ("domain", "bench", "screen")
        },
        skins=done["classify"].tables.get("dilution_and_loss"),
        skins_rule=skins_rule(config.screens, done["classify"].facts.get("host")),
    )


def _estimation(study: Study, done: dict[str, Any]) -> Estimation:
    config = study.config
    blocks: BlockState = done["blocks"]
    validation: ValidationState = done["validate"]
    metals = metal_columns(config)
    search = config.search
    frames = {
        "elevation": "elevation",
        "depth": "depth below seafloor",
        "proportional": "position between seafloor and base",
    }
    size = " × ".join(f"{value:g}" for value in blocks.model.grid.size)
    settings = {
        "Estimator of the table": config.kriging.estimator.replace("_", " "),
        "Blocks": f"{len(blocks.model.frame):,} of {size} m, rotated {blocks.model.grid.azimuth:g}°",
        "Vertical frame": frames[config.blocks.vertical_frame],
        "Points that stand for a block": " × ".join(str(value) for value in config.kriging.discretisation),
        "Search passes": search_text(done["variograms"], config),
        "Samples": f"{search.least_samples} to {search.most_samples}, at most {search.most_per_hole or 'any'} a hole",
        "Holes": f"at least {search.least_holes}; one in the last pass",
        "Domain boundaries": config.domains.boundaries,
    }
    comparison = validation.comparison.set_index("estimator")[metals].T.rename_axis("metal").reset_index()
    return Estimation(
        settings=settings,
        blocks=drawn_blocks(done["propose"].frame, metals),
        grid=blocks.model.grid.record(),
        means=mean_rows(done, metals),
        swaths=named_axis(validation.swaths, config.blocks.vertical_frame),
        support_variance=validation.facts["support_variance"],
        frames_effect=validation.facts["frames_effect"],
        leave_one_out=validation.cross_validation,
        leave_one_out_summary=validation.cross_summary,
        estimators=comparison,
        change_of_support=support_rows(validation.support, done, config),
        neighbourhood=timeless(validation.neighbourhood),
        neighbourhood_note=recommendation(validation.neighbourhood),
        checks=check_rows(validation.table),
    )


def drawn_blocks(frame: pd.DataFrame, metals: list[str]) -> pd.DataFrame:
    """Columns of the blocks that figures and words are made from; a change in any other redraws nothing."""
    wanted = {"i", "j", "k", "easting", "northing", "elevation", "volume_m3", "body_fraction", "domain",
              "dry_density_tpm3", "dry_tonnes", "wet_tonnes", "extrapolation", "nearest_distance_m", "proposed_class",
              *metals}  # fmt: skip
    return frame[[name for name in frame if name in wanted]]


def composite_rule(config: Any) -> str:
    """How samples became composites, in words."""
    choice = config.composites
    rests = {
        "merge": "is merged with its neighbour", "keep": "is kept", "drop": "is dropped",
        "spread": "is spread over all composites",
    }  # fmt: skip
    return (
        f"composites of {choice.length_m:g} m inside domains, weighted by {choice.weighting.replace('_', ' ')}; a rest "
        f"under {choice.shortest_m:g} m at a contact {rests[choice.short_rest]}"
    )


def _classes(study: Study, done: dict[str, Any], findings: Findings) -> Classes:
    state: ClassState = done["classify"]
    choice = study.config.classes
    criteria = {
        criterion_words(name): (
            ", ".join(map(str, value)) or "none" if isinstance(value, tuple)
            else element_label(element_column(value)).rpartition(" (")[0] if name == "judged_on" else value
        )
        for name, value in choice.model_dump().items()
    }  # fmt: skip
    steps = {"criteria": "by_criteria", "rules": "after_rules", "smoothed": "smoothed", "final": "final"}
    smoothing = state.smoothing[["proposed_class", *[f"dry_tonnes_{step}" for step in steps]]].rename(
        columns={f"dry_tonnes_{step}": f"{name}_dry_tonnes" for step, name in steps.items()}
    )
    told = ("class-inferred-richer", "class-domain-unknown")
    flags = tuple(item.message for item in findings if item.code in told)
    return Classes(
        criteria=criteria,
        reasons=state.reasons,
        before_after=smoothing,
        overrides=state.tables.get("overrides"),
        flags=flags,
        exploration_target=target_words(state.tables.get("exploration_target")),
    )


def criterion_words(name: str) -> str:
    """A key of the criteria in words with its unit: ``indicated_within_m`` becomes ``Indicated within (m)``."""
    endings = {"_m": " (m)", "_m3": " (m³)", "_pct": " (%)", "_share": ", share of a block"}
    for ending, words in endings.items():
        if name.endswith(ending):
            name = name.removesuffix(ending) + words
            break
    return name.replace("_", " ")


def target_words(table: pd.DataFrame | None) -> dict[str, Any] | None:
    """The exploration target as the report takes it: ranges, what they rest on, and nothing where there is none."""
    if table is None or not len(table):
        return None
    columns = (table[name] for name in ("quantity", "low", "high"))
    ranges = {str(name): (float(low), float(high)) for name, low, high in zip(*columns)}
    low, high = ranges.pop("dry_tonnes")
    return {
        "dry_tonnes_low": low,
        "dry_tonnes_high": high,
        "grades": ranges,
        "basis": str(table["basis"].iloc[0]),
    }


def _value(study: Study, done: dict[str, Any], extra: dict[str, Any]) -> ValueEvidence:
    state: ClassState = done["classify"]
    worth: ValueState = done["value"]
    return ValueEvidence(
        grade_tonnage=with_equivalent(state.grade_tonnage, worth.frame),
        beside_support=beside_support(done, study.config),
        by_value=worth.tables.get("value_against_grade"),
        mineable_shape=state.tables.get("mineable_shape"),
        equivalent=worth.facts.get("equivalent"),
        cutoff_costs=worth.tables.get("cutoffs"),
        scenarios=extra.get("scenarios"),
        tornado=extra.get("tornado"),
        heat_maps=tuple(extra.get("heat_maps", ())),
    )
