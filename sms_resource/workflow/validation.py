"""Stage validate: is the estimate what the samples say, and what would other choices have said?"""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from sms_resource.units import contained_tonnes, element_column
from sms_resource.workflow.continuity import body_samples, cut_grades
from sms_resource.workflow.estimation import join_domains, krige_domains, neighbourhoods, turned, turned_axes
from sms_resource.workflow.evidence import all_columns, composite_options, domain_table, metal_columns
from sms_resource.workflow.stage import Context
from sms_resource.workflow.state import (
    BlockState,
    BodyState,
    DensityState,
    EstimateState,
    EvidenceState,
    ValidationState,
    VariogramState,
)

TREATMENTS = ("represented", "unknown", "neighbour_mean", "background")


def validate(context: Context) -> ValidationState:
    """Means, swaths, leave one hole out, support, other estimators, lost core, and the geometry."""
    from sms_resource.geostatistics import validation_table

    blocks: BlockState = context.done["blocks"]
    body: BodyState = context.done["body"]
    variograms: VariogramState = context.done["variograms"]
    made: EstimateState = context.done["estimate"]
    config = context.config
    metals = metal_columns(config)
    cross, summary = cross_validation(variograms, blocks, config, context.threads)
    table = validation_table(
        made.frame,
        variograms.samples,
        metals,
        companions=made.companions,
        cross_summary=summary,
        warn_pct=config.validation.mean_warn_pct,
        flag_pct=config.validation.mean_flag_pct,
        weight="declustering_weight",
    )
    flagged = table[table["verdict"] == "flag"]
    for row in flagged.itertuples():
        context.findings.warning(
            "validation-flag",
            f"{row.check}, {row.domain}, {row.metal}: {row.value:.3g} against {row.reference:.3g} ({row.difference_pct:+.1f} %)",
            "See the validation pages of the report.", file=context.study.path.name,
        )  # fmt: skip
    swaths = swath_tables(made, variograms, blocks, metals, config)
    support = support_curves(made, variograms, blocks, config)
    bracket = lost_core_runs(context)
    comparison = compare_estimators(made, metals, config)
    geometry = geometry_table(body, made, config)
    context.detail = f"{len(table)} checks, {len(flagged)} flagged"
    return ValidationState(
        table=table, cross_validation=cross, cross_summary=summary, swaths=swaths, support=support, bracket=bracket,
        comparison=comparison, geometry=geometry, neighbourhood=neighbourhood_table(context),
    )  # fmt: skip


def cross_validation(
    state: VariogramState, blocks: BlockState, config: Any, threads: int | None
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Estimate each composite without the composites of its own hole."""
    from sms_resource.geostatistics import cross_validation_summary, leave_one_out

    metals = metal_columns(config)
    frames = []
    for domain in config.domains.sulphide:
        part = state.samples[state.samples["domain"] == domain]
        if part["hole_id"].nunique() < 2:
            continue
        hood = neighbourhoods(state, domain, config)[-1]
        frame = leave_one_out(
            turned(part[["x", "y", "z"]].to_numpy(dtype=float), blocks),
            part[metals].to_numpy(dtype=float),
            [turned_axes(state.inferences[(domain, metal)].model, blocks) for metal in metals],
            turned_axes(hood, blocks),
            hole_ids=part["hole_id"].to_numpy(dtype=object),
            leave="hole",
            threads=threads,
        )
        index = part.index.to_numpy()[frame["index"].to_numpy()]
        frames.append(
            frame.assign(
                domain=domain,
                metal=np.array(metals, dtype=object)[frame["column"].to_numpy()],
                hole_id=state.samples["hole_id"].to_numpy(dtype=object)[index],
                composite_id=state.samples["composite_id"].to_numpy(dtype=object)[index],
            ).drop(columns=["index", "column"])
        )
    if not frames:
        empty = pd.DataFrame(columns=["domain", "metal", "hole_id", "true", "estimate", "error"])
        return empty, pd.DataFrame(columns=["domain", "metal", "n"])
    cross = pd.concat(frames, ignore_index=True)
    return cross, cross_validation_summary(cross)


def swath_tables(
    made: EstimateState, state: VariogramState, blocks: BlockState, metals: list[str], config: Any
) -> pd.DataFrame:
    """Means of blocks, composites and nearest samples in slices along the three axes of the blocks."""
    from sms_resource.geostatistics import swath

    grid = blocks.model.grid
    frame = made.frame
    block_places = turned(made.targets, blocks)
    sample_places = turned(state.samples[["x", "y", "z"]].to_numpy(dtype=float), blocks)
    tables = []
    for number, axis in enumerate(("easting", "northing", "height")):
        width = (
            config.validation.swath_m if config.validation.swath_m and number < 2 else 2.0 * grid.size[number]
        )
        for metal in metals:
            table = swath(
                block_places[:, number],
                frame[metal].to_numpy(dtype=float),
                frame["dry_tonnes"].to_numpy(dtype=float),
                sample_places[:, number],
                state.samples[metal].to_numpy(dtype=float),
                state.samples["declustering_weight"].to_numpy(dtype=float),
                width=width,
                nearest=made.companions["nearest"][metal].to_numpy(dtype=float),
            )
            tables.append(table.assign(axis=axis, metal=metal))
    return pd.concat(tables, ignore_index=True)


def support_curves(
    made: EstimateState, state: VariogramState, blocks: BlockState, config: Any
) -> pd.DataFrame:
    """What the blocks' grade-tonnage curve would be without smoothing, by two models of change of support."""
    from sms_resource.geostatistics import block_variance, change_of_support
    from sms_resource.workflow.estimation import frame_size

    variable = config.cutoff.variable
    if variable not in config.metals.estimate:
        variable = config.metals.estimate[0]
    metal = element_column(variable)
    tables = []
    for domain in config.domains.sulphide:
        item = state.inferences.get((domain, metal))
        part = state.samples[(state.samples["domain"] == domain) & state.samples[metal].notna()]
        if item is None or len(part) < 10 or part[metal].nunique() < 5:
            continue
        inside = block_variance(item.model, frame_size(blocks, config), config.kriging.discretisation)
        factor = min(max(inside / item.model.total_sill, 0.0), 1.0)
        curves = change_of_support(
            part[metal].to_numpy(dtype=float),
            variance_ratio=factor,
            cutoffs=np.asarray(config.cutoff.steps, dtype=float),
            weights=part["declustering_weight"].to_numpy(dtype=float),
        )
        tonnes = made.frame.loc[made.frame["domain"] == domain, "dry_tonnes"].sum()
        tables.append(
            curves.assign(domain=domain, metal=metal, variance_ratio=factor, domain_dry_tonnes=tonnes)
        )
    return pd.concat(tables, ignore_index=True) if tables else pd.DataFrame()


def lost_core_runs(context: Context) -> pd.DataFrame:
    """Tonnes and grades of the whole estimate under each treatment of lost core."""
    from sms_resource.samples.composites import composite as make_composites

    data = context.done["load"]
    evidence: EvidenceState = context.done["composite"]
    blocks: BlockState = context.done["blocks"]
    density: DensityState = context.done["density"]
    variograms: VariogramState = context.done["variograms"]
    config = context.config
    metals = metal_columns(config)
    intervals = domain_table(data, config)
    hoods = {domain: neighbourhoods(variograms, domain, config) for domain in config.domains.sulphide}
    rows = []
    for treatment in TREATMENTS:
        options = {**composite_options(config), "lost_core": treatment}
        made = make_composites(
            evidence.assays, data.drill.runs, intervals, evidence.paths, metals=all_columns(config),
            densities=data.drill.densities, **options,
        )  # fmt: skip
        samples = body_samples(made.frame, blocks.frame, config)
        samples, _ = cut_grades(samples, evidence.tables["top_cut_study"], config)
        grades, _, _ = krige_domains(samples, blocks, variograms, hoods, config, context.threads)
        frame = join_domains(blocks, grades, density, config)
        rows.append({"treatment": treatment, "used": treatment == config.composites.lost_core,
                     "composites": len(samples), **totals(frame, metals, config)})  # fmt: skip
    return pd.DataFrame(rows)


def totals(frame: pd.DataFrame, metals: list[str], config: Any) -> dict[str, float]:
    """Dry and wet tonnes and mean grades of all blocks, and of those above the study's cut-off on a metal."""
    variable = config.cutoff.variable
    variable = variable if variable in config.metals.estimate else config.metals.estimate[0]
    grade = frame[element_column(variable)].to_numpy(dtype=float)
    at = config.cutoff.at if config.cutoff.variable == variable else 0.0
    found: dict[str, float] = {}
    for suffix, chosen in (("", np.isfinite(grade)), ("_above_cutoff", grade >= at)):
        dry = frame.loc[chosen, "dry_tonnes"].to_numpy(dtype=float)
        found[f"dry_tonnes{suffix}"] = float(dry.sum())
        found[f"wet_tonnes{suffix}"] = float(frame.loc[chosen, "wet_tonnes"].sum())
        for metal in metals:
            values = frame.loc[chosen, metal].to_numpy(dtype=float)
            known = np.isfinite(values)
            mean = (
                float(np.average(values[known], weights=dry[known]))
                if known.any() and dry[known].sum()
                else np.nan
            )
            found[f"{metal}{suffix}"] = mean
    return found


def compare_estimators(made: EstimateState, metals: list[str], config: Any) -> pd.DataFrame:
    """The same blocks by kriging, inverse distance, nearest sample and moving average."""
    rows = [{"estimator": config.kriging.estimator, "used": True, **totals(made.frame, metals, config)}]
    for name, grades in made.companions.items():
        if name == config.kriging.estimator:
            continue
        frame = made.frame[["dry_tonnes", "wet_tonnes"]].join(grades[metals])
        rows.append({"estimator": name, "used": False, **totals(frame, metals, config)})
    return pd.DataFrame(rows)


def geometry_table(body: BodyState, made: EstimateState, config: Any) -> pd.DataFrame:
    """Volume and dry tonnes of the body when its surfaces move by what they are known to."""
    from sms_resource.blocks.uncertainty import geometry_uncertainty

    mean_density = float(made.frame["dry_tonnes"].sum() / made.frame["volume_m3"].sum())
    return geometry_uncertainty(
        body.body, dry_density_tpm3=mean_density, seafloor_sigma_m=config.seafloor.sigma_m
    )


def neighbourhood_table(context: Context) -> pd.DataFrame:
    """Quality of the estimate against the number of samples, where the study asks for it."""
    config = context.config
    if not config.validation.neighbourhood_study:
        return pd.DataFrame()
    from sms_resource.geostatistics import neighbourhood_study

    blocks: BlockState = context.done["blocks"]
    state: VariogramState = context.done["variograms"]
    made: EstimateState = context.done["estimate"]
    domain, metal = config.domains.sulphide[0], element_column(config.classes.judged_on)
    tonnes = made.frame.groupby("domain")["dry_tonnes"].sum()
    domain = str(tonnes.reindex(config.domains.sulphide).idxmax())
    part = state.samples[(state.samples["domain"] == domain) & state.samples[metal].notna()]
    chosen = np.flatnonzero((made.frame["domain"] == domain).to_numpy())
    picked = chosen[:: max(1, len(chosen) // 400)]
    size = blocks.model.grid.size
    found = neighbourhood_study(
        turned(part[["x", "y", "z"]].to_numpy(dtype=float), blocks),
        part[metal].to_numpy(dtype=float),
        turned(made.targets[picked], blocks),
        turned_axes(state.inferences[(domain, metal)].model, blocks),
        turned_axes(neighbourhoods(state, domain, config)[-1], blocks),
        hole_ids=part["hole_id"].to_numpy(dtype=object),
        block_sizes=[tuple(f * s for s in size) for f in (1.0, 2.0)],
    )
    context.findings.note("neighbourhood-study", found.recommendation, "Set search.most_samples.")
    return found.table


def contained(frame: pd.DataFrame, metal: str) -> float:
    """Tonnes of a metal in all blocks."""
    return float(np.nansum(contained_tonnes(frame["dry_tonnes"].to_numpy(), frame[metal].to_numpy(), metal)))
