"""From the outputs of the stages to what the report is made of."""

from __future__ import annotations

import json
from dataclasses import replace
from typing import Any

import numpy as np
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
from sms_resource.study import Study
from sms_resource.units import element_column, unit_label
from sms_resource.workflow.estimation import search_text
from sms_resource.workflow.evidence import all_columns, metal_columns
from sms_resource.workflow.stage import one_domain
from sms_resource.workflow.state import (
    BlockState,
    BodyState,
    ClassState,
    DensityState,
    EvidenceState,
    ValidationState,
    VariogramState,
)

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
        classes=_classes(study, done),
        value=_value(done, extra),
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
        position_sigma_m=evidence.collars["position_sigma_m"].astype(float).fillna(config.position.sigma_m),
    )
    laboratory = evidence.laboratory
    weights = variograms.samples.set_index("composite_id")["declustering_weight"]
    sulphide = one_domain(config.domains).sulphide
    composites = evidence.composites[evidence.composites["domain"].isin(sulphide)]
    composites = composites.assign(weight=composites["composite_id"].map(weights))
    return Evidence(
        collars=collars,
        collar_shift_m=evidence.facts["collar_shift_m"],
        sticks=evidence.sticks,
        runs=data.drill.runs,
        lithology=data.drill.lithology,
        composites=composites,
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
        top_cuts=variograms.cuts if len(variograms.cuts) else tables["top_cut_study"],
        assay_summary=tables["assay_summary"],
        handheld_used=bool(evidence.facts["handheld_used"]),
        twins=tables["twins"],
        contact_analysis=tables.get("contact_analysis"),
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
        ),
    )


def _body(study: Study, done: dict[str, Any]) -> BodyEvidence:
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
            "greatest_distance_m": float(done["classify"].frame["nearest_distance_m"].max()),
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
        waterfall=_waterfall(done["classify"].waterfall, metal_columns(config)),
        sigma_seafloor_m=config.seafloor.sigma_m,
    )


def _waterfall(table: pd.DataFrame, metals: list[str]) -> pd.DataFrame:
    """Screens as totals and what each takes (negative), dry tonnes and contained metal in tonnes."""
    rows = []
    last = len(table) - 1
    for number, row in enumerate(table.to_dict("records")):
        total = number in (0, last)
        sign, kind = (1.0, "remaining") if total else (-1.0, "taken")
        content = {metal: sign * row[f"{kind}_{metal.partition('_')[0]}_contained_t"] for metal in metals}
        rows.append({"step": row["what"], "kind": "total" if total else "taken",
                     "dry_tonnes": sign * row[f"{kind}_dry_tonnes"], **content})  # fmt: skip
    return pd.DataFrame(rows)


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
        blocks=done["classify"].frame,
        grid=blocks.model.grid.record(),
        means=_means(done, metals),
        swaths=_named_axis(validation.swaths, config.blocks.vertical_frame),
        support_variance=validation.facts["support_variance"],
        frames_effect=validation.facts["frames_effect"],
        leave_one_out=validation.cross_validation,
        leave_one_out_summary=validation.cross_summary,
        estimators=comparison,
        change_of_support=_support(validation.support, done, config),
        neighbourhood=_neighbourhood(validation.neighbourhood),
        neighbourhood_note=_recommendation(validation.neighbourhood),
        checks=_checks(validation.table),
    )


def _neighbourhood(table: pd.DataFrame) -> pd.DataFrame:
    """Quality of the estimate against the number of samples, as the figure wants it."""
    if not len(table):
        return table
    names = {
        "max_samples": "sample_number", "mean_slope": "slope", "mean_efficiency": "efficiency",
        "mean_negative_weight": "negative_weight_sum",
    }  # fmt: skip
    return table[table["varied"] == "samples"][list(names)].rename(columns=names)


def _recommendation(table: pd.DataFrame) -> str:
    """What the study of neighbourhoods recommends, and why."""
    return str(table["recommendation"].iloc[0]) if len(table) else ""


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


def _named_axis(swaths: pd.DataFrame, frame: str) -> pd.DataFrame:
    """Swaths of all domains, with the upright axis called what it is in the vertical frame."""
    names = {
        "depth": "Height against the seafloor",
        "proportional": "Height in the body, by its mean thickness",
    }
    chosen = swaths[swaths["domain"] == "all"]
    return chosen.assign(axis=chosen["axis"].replace({"elevation": names[frame]} if frame in names else {}))


def _means(done: dict[str, Any], metals: list[str]) -> pd.DataFrame:
    """Plain, declustered and block means by metal and domain; the plain mean of everything, surface included."""
    samples = done["variograms"].samples
    frame = done["classify"].frame
    surface = done["composite"].surface
    rows = []
    for metal in metals:
        for domain in ("all", *sorted(samples["domain"].unique())):
            part = samples if domain == "all" else samples[samples["domain"] == domain]
            blocks = frame if domain == "all" else frame[frame["domain"] == domain]
            known, filled = part[metal].notna(), blocks[metal].notna()
            if not known.any() or not filled.any():
                continue
            declustered = np.average(part.loc[known, metal], weights=part.loc[known, "declustering_weight"])
            block = np.average(blocks.loc[filled, metal], weights=blocks.loc[filled, "dry_tonnes"])
            row = {
                "metal": metal, "domain": domain, "composite_mean": part.loc[known, metal].mean(),
                "declustered_mean": declustered, "block_mean": block,
                "difference_pct": 100.0 * (block / declustered - 1.0) if declustered else np.nan,
            }  # fmt: skip
            if domain == "all" and len(surface):
                every = pd.concat([done["composite"].assays[metal], surface.get(metal)])
                row["plain_mean_with_surface"] = every.mean()
            rows.append(row)
    return pd.DataFrame(rows)


def _checks(table: pd.DataFrame) -> pd.DataFrame:
    """Validation table in the report's words."""
    if not len(table):
        return pd.DataFrame(columns=["check", "subject", "value", "limit", "verdict"])
    verdict = table["verdict"].map({"within": "pass", "flag": "flag"}).fillna(table["verdict"])
    subject = table["domain"].astype(str) + ", " + table["metal"].astype(str)
    return table.assign(subject=subject, verdict=verdict)[
        ["check", "subject", "value", "limit", "verdict", "figures"]
    ]


def _support(curves: pd.DataFrame, done: dict[str, Any], config: Any) -> pd.DataFrame:
    """Share of dry tonnes and grade above cut-offs: blocks as estimated against the models of change of support."""
    if not len(curves):
        return pd.DataFrame(columns=["metal", "cutoff", "support", "proportion", "grade"])
    frame = done["classify"].frame
    metal = str(curves["metal"].iloc[0])
    rows = []
    domains = curves["domain"].unique()
    inside = frame[frame["domain"].isin(domains) & frame[metal].notna()]
    total = inside["dry_tonnes"].sum()
    for cutoff in sorted(curves["cutoff"].unique()):
        above = inside[inside[metal] >= cutoff]
        tonnes = above["dry_tonnes"].sum()
        grade = np.average(above[metal], weights=above["dry_tonnes"]) if tonnes > 0 else np.nan
        rows.append(
            {
                "metal": metal,
                "cutoff": cutoff,
                "support": "blocks",
                "proportion": tonnes / total,
                "grade": grade,
            }
        )
    names = {"points": "composites", "discrete_gaussian": "discrete gaussian", "affine": "affine"}
    for (method, cutoff), part in curves.groupby(["method", "cutoff"], sort=True):
        weights = part["domain_dry_tonnes"].to_numpy()
        share = np.average(part["proportion"], weights=weights)
        content = np.average(part["content"], weights=weights)
        rows.append(
            {"metal": metal, "cutoff": cutoff, "support": names.get(str(method), str(method)), "proportion": share,
             "grade": content / share if share > 1e-9 else np.nan}
        )  # fmt: skip
    return pd.DataFrame(rows)


def _classes(study: Study, done: dict[str, Any]) -> Classes:
    state: ClassState = done["classify"]
    choice = study.config.classes
    criteria = {
        name.replace("_", " "): ", ".join(map(str, value)) if isinstance(value, tuple) else value
        for name, value in choice.model_dump().items()
    }
    smoothing = state.smoothing.rename(
        columns={"after_rules_dry_tonnes": "before_dry_tonnes", "final_dry_tonnes": "after_dry_tonnes"}
    )
    flags = tuple(state.facts.get("flags", ()))
    return Classes(
        criteria=criteria,
        reasons=state.reasons,
        before_after=smoothing,
        overrides=state.tables.get("overrides"),
        flags=flags,
    )


def _value(done: dict[str, Any], extra: dict[str, Any]) -> ValueEvidence:
    state: ClassState = done["classify"]
    costs = state.tables.get("cutoffs")
    return ValueEvidence(
        grade_tonnage=state.grade_tonnage,
        mineable_shape=state.tables.get("mineable_shape"),
        equivalent=state.facts.get("equivalent_page"),
        cutoff_costs=costs,
        scenarios=extra.get("scenarios"),
        tornado=extra.get("tornado"),
        heat_map=extra.get("heat_map"),
        heat_map_labels=extra.get("heat_map_labels", ("x", "y", "value")),
    )


def truth_page(study: Study, done: dict[str, Any]) -> dict[str, Any] | None:
    """The estimate against the known truth of an invented deposit, with what explains the difference."""
    config = study.config
    named = config.data.truth
    if not named:
        return None
    truth = json.loads(study.resolve(named).read_text(encoding="utf-8"))
    known = truth["body"]
    frame = done["classify"].frame
    metals = metal_columns(config)
    dry = float(frame["dry_tonnes"].sum())
    rows = [
        _truth_row("volume", "m³", known["volume_m3"], float(frame["volume_m3"].sum()), ""),
        _truth_row(
            "dry tonnes of the body", "t dry", known["dry_tonnes"], dry, _tonnage_cause(known, frame, done)
        ),
        _truth_row(
            "wet tonnes of the body", "t wet", known["wet_tonnes"], float(frame["wet_tonnes"].sum()), ""
        ),
    ]
    plain = _means(done, metals).query("domain == 'all'").set_index("metal")
    for metal in metals:
        filled = frame[metal].notna()
        block = float(np.average(frame.loc[filled, metal], weights=frame.loc[filled, "dry_tonnes"]))
        rows.append(
            _truth_row(f"mean {metal.partition('_')[0]} of the body", unit_label(metal), known[metal], block,
                       "selective loss of core, smoothing and the few holes")
        )  # fmt: skip
    for metal in metals:
        naive = float(np.asarray(plain.loc[metal, "plain_mean_with_surface"]))
        rows.append(
            _truth_row(f"plain mean of all samples, surface included: {metal.partition('_')[0]}",
                       unit_label(metal), known[metal], naive,
                       "surface samples are richer than the body, and clusters count many times")
        )  # fmt: skip
    return {
        "file": config.data.truth,
        "table": pd.DataFrame(rows),
        "notes": ("The truth is known because the deposit is invented; a real study has no such page.",),
    }


def _truth_row(quantity: str, unit: str, truth: float, estimate: float, cause: str) -> dict[str, Any]:
    difference = 100.0 * (estimate / truth - 1.0) if truth else np.nan
    return {"quantity": quantity, "unit": unit, "truth": truth, "estimate": estimate,
            "difference_pct": difference, "cause": cause}  # fmt: skip


def _tonnage_cause(known: dict[str, float], frame: pd.DataFrame, done: dict[str, Any]) -> str:
    """Split the difference in dry tonnes into volume and density, and name the limit on extrapolation."""
    volume = float(frame["volume_m3"].sum())
    density = (frame["dry_tonnes"].sum() / volume) / (known["dry_tonnes"] / known["volume_m3"]) - 1.0
    cut = float(done["body"].body.record.get("volume_cut_by_limit_m3", 0.0)) / known["volume_m3"]
    return (
        f"volume {100 * (volume / known['volume_m3'] - 1.0):+.1f} %, of which the limit on extrapolation below holes "
        f"that ended in sulphide takes {100 * cut:.1f} %; mean dry density {100 * density:+.1f} %"
    )


def judged_metal(config: Any) -> str:
    """Column of the metal that classes are judged on."""
    return element_column(config.classes.judged_on)
