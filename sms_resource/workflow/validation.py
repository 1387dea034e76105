"""Stage validate: is the estimate what the samples say, and what would other choices have said?"""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd

from sms_resource.units import contained_tonnes, element_column
from sms_resource.workflow.estimation import companion_grades, neighbourhoods
from sms_resource.workflow.evidence import metal_columns
from sms_resource.workflow.lost_core import lost_core_runs, totals
from sms_resource.workflow.neighbourhood import neighbourhood_table
from sms_resource.workflow.stage import Context
from sms_resource.workflow.state import (
    BlockState,
    BodyState,
    EstimateState,
    ValidationState,
    VariogramState,
)


def validate(context: Context) -> ValidationState:
    """Means, swaths, leave one hole out, support, other estimators, lost core, and the geometry."""
    from sms_resource.geostatistics import ValidationLimits, validation_findings, validation_table

    blocks: BlockState = context.done["blocks"]
    body: BodyState = context.done["body"]
    variograms: VariogramState = context.done["variograms"]
    made: EstimateState = context.done["estimate"]
    config = context.config
    metals = metal_columns(config)
    hoods = {domain: neighbourhoods(variograms, domain, config) for domain in config.domains.sulphide}
    companions, companion_means = companion_grades(
        variograms.samples, blocks, hoods, context.done["density"], config, context.threads
    )
    made = replace(made, companions=companions)
    cross, summary = cross_validation(variograms, blocks, config, context.threads)
    _, by_sample = cross_validation(variograms, blocks, config, context.threads, "sample")
    swaths = swath_tables(made, variograms, blocks, metals, config)
    comparison = compare_estimators(made, metals, config)
    realised = realised_variances(made, variograms, blocks, config)
    table = validation_table(
        cross_validation=summary if len(summary) else None,
        means=mean_table(made, companion_means["nearest"], variograms, metals, config),
        swaths=swaths[swaths["domain"] != "all"],
        block_variance=realised,
        limits=ValidationLimits(mean_pct=config.validation.mean_flag_pct),
    )
    flagged = table[table["verdict"] == "flag"]
    for item in validation_findings(table):
        context.findings.extend([item])
    support = support_curves(made, variograms, blocks, config)
    bracket = lost_core_runs(context)
    geometry = geometry_table(body, made, config)
    context.detail = f"{len(table)} checks, {len(flagged)} flagged"
    summaries = pd.concat([summary.assign(leave="hole"), by_sample.assign(leave="sample")], ignore_index=True)
    return ValidationState(
        table=table,
        cross_validation=cross,
        cross_summary=summaries,
        swaths=swaths,
        support=support,
        bracket=bracket,
        comparison=comparison,
        geometry=geometry,
        neighbourhood=neighbourhood_table(context),
        facts={"support_variance": variance_table(realised), "frames_effect": frames_table(context)},
    )


def variance_table(realised: dict[tuple[str, str], dict[str, float]]) -> pd.DataFrame:
    """Realised and theoretical variance of block estimates by metal and domain."""
    rows = [
        {"metal": metal, "domain": domain, "realised": found["realised"],
         "theoretical": found["theoretical_estimates"], "ratio": found["ratio"]}
        for (domain, metal), found in realised.items()
    ]  # fmt: skip
    return pd.DataFrame(rows, columns=["metal", "domain", "realised", "theoretical", "ratio"])


def frames_table(context: Context) -> pd.DataFrame:
    """How well composites are estimated without their own hole in each vertical frame.

    Root mean square errors with the variograms of the study's frame: a smaller error speaks for a frame, because there
    neighbours are more alike.
    """
    from sms_resource.blocks.frames import VerticalFrame
    from sms_resource.geostatistics import leave_one_out

    config = context.config
    blocks: BlockState = context.done["blocks"]
    state: VariogramState = context.done["variograms"]
    metals = metal_columns(config)
    body = context.done["body"].body
    rows = []
    for kind in ("elevation", "depth", "proportional"):
        frame = VerticalFrame(kind, body.top, body.base)
        errors: dict[str, list[float]] = {metal: [] for metal in metals}
        for domain in config.domains.sulphide:
            part = state.samples[state.samples["domain"] == domain]
            if part["hole_id"].nunique() < 2:
                continue
            found = leave_one_out(
                frame.forward(part[["easting", "northing", "elevation"]].to_numpy(dtype=float)),
                part[metals].to_numpy(dtype=float),
                [state.inferences[(domain, metal)].model for metal in metals],
                neighbourhoods(state, domain, config)[-1],
                hole_ids=part["hole_id"].to_numpy(dtype=object),
                leave="hole",
                coincident=config.kriging.coincident,
                threads=context.threads,
            )
            for number, metal in enumerate(metals):
                errors[metal] += list(found.loc[found["column"] == number, "error"].dropna() ** 2)
        rms = {
            metal: float(np.sqrt(np.mean(values))) if values else np.nan for metal, values in errors.items()
        }
        rows.append({"frame": kind, "used": kind == blocks.frame.kind, **rms})
    return pd.DataFrame(rows)


def cross_validation(
    state: VariogramState, blocks: BlockState, config: Any, threads: int | None, leave: str = "hole"
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Estimate each composite without the composites of its own hole, or without itself alone."""
    from sms_resource.geostatistics import cross_validation_summary, leave_one_out

    domains = state.samples["domain"].to_numpy(dtype=object)

    metals = metal_columns(config)
    frames = []
    for domain in config.domains.sulphide:
        part = state.samples[state.samples["domain"] == domain]
        if part["hole_id"].nunique() < 2:
            continue
        hood = neighbourhoods(state, domain, config)[-1]
        frame = leave_one_out(
            part[["x", "y", "z"]].to_numpy(dtype=float),
            part[metals].to_numpy(dtype=float),
            [state.inferences[(domain, metal)].model for metal in metals],
            hood,
            hole_ids=part["hole_id"].to_numpy(dtype=object),
            leave=leave,
            coincident=config.kriging.coincident,
            threads=threads,
        )
        frames.append(frame.assign(index=part.index.to_numpy()[frame["index"].to_numpy()]))
    if not frames:
        return pd.DataFrame(), pd.DataFrame()
    cross = pd.concat(frames, ignore_index=True)
    summary = cross_validation_summary(cross, domains, names=dict(enumerate(metals)))
    rows = cross["index"].to_numpy()
    cross = cross.assign(
        column=np.array(metals, dtype=object)[cross["column"].to_numpy(dtype=int)],
        domain=domains[rows],
        hole_id=state.samples["hole_id"].to_numpy(dtype=object)[rows],
        composite_id=state.samples["composite_id"].to_numpy(dtype=object)[rows],
    )
    return cross, summary


def mean_table(
    made: EstimateState, nearest: pd.DataFrame, state: VariogramState, metals: list[str], config: Any
) -> pd.DataFrame:
    """Block, declustered, plain and nearest-sample means by domain and metal; of blocks the domain's own part."""
    rows = []
    block_means = made.domain_means.set_index(["domain", "metal"])["mean"]
    nearest_means = nearest.set_index(["domain", "metal"])["mean"]
    for domain in config.domains.sulphide:
        part = state.samples[state.samples["domain"] == domain]
        for metal in metals:
            known = part[metal].notna()
            block_mean = float(block_means[(domain, metal)])
            if not known.any() or np.isnan(block_mean):
                continue
            weights = part.loc[known, "declustering_weight"] * part.loc[known, "weight"]
            rows.append(
                {"domain": domain, "metal": metal,
                 "block_mean": block_mean,
                 "declustered_mean": weighted(part.loc[known, metal], weights),
                 "sample_mean": weighted(part.loc[known, metal], part.loc[known, "weight"]),
                 "nearest_mean": float(nearest_means[(domain, metal)]),
                 "sample_count": int(known.sum())}
            )  # fmt: skip
    return pd.DataFrame(rows)


def weighted(values: Any, weights: Any) -> float:
    """Weighted mean of what is known; NaN where nothing is."""
    values, weights = np.asarray(values, dtype=float), np.asarray(weights, dtype=float)
    known = np.isfinite(values) & (weights > 0)
    return float(np.average(values[known], weights=weights[known])) if known.any() else float("nan")


def realised_variances(
    made: EstimateState, state: VariogramState, blocks: BlockState, config: Any
) -> dict[tuple[str, str], dict[str, float]]:
    """Spread of the block grades against what kriging theory leaves of the blocks' variance."""
    from sms_resource.geostatistics import block_variance, block_variance_check, mean_covariance

    found = {}
    for (domain, metal), item in state.inferences.items():
        inside = (made.frame["domain"] == domain).to_numpy() & made.frame[
            f"{metal}_variance"
        ].notna().to_numpy()
        if inside.sum() < 20:
            continue
        size = tuple(blocks.model.grid.size)
        found[(domain, metal)] = block_variance_check(
            made.frame.loc[inside, metal].to_numpy(dtype=float),
            made.frame.loc[inside, f"{metal}_variance"].to_numpy(dtype=float),
            block_variance(item.model, size, config.kriging.discretisation),
            item.model.total_sill,
            weights=made.frame.loc[inside, "dry_tonnes"].to_numpy(dtype=float),
            lagrange=made.frame.loc[inside, f"{metal}_lagrange"].to_numpy(dtype=float),
            deposit_covariance=mean_covariance(item.model, made.targets[inside]),
        )
    return found


def swath_tables(
    made: EstimateState, state: VariogramState, blocks: BlockState, metals: list[str], config: Any
) -> pd.DataFrame:
    """Means of blocks, composites and nearest samples in slices along the three axes of the blocks."""
    from sms_resource.geostatistics import swath_table

    grid = blocks.model.grid
    nearest = made.companions["nearest"][metals].add_suffix("_nearest")
    frame = made.frame[["easting", "northing", *metals, "dry_tonnes"]].join(nearest)
    frame["elevation"] = made.targets[:, 2]
    samples = state.samples.assign(elevation=state.samples["z"])
    azimuth = float(grid.azimuth)
    level = config.validation.swath_m or max(2.0 * max(grid.size[:2]), 0.5 * state.facts["hole_spacing_m"])
    names = ("along", "across") if azimuth else ("northing", "easting")
    widths = {
        names[0]: level,
        names[1]: level,
        "elevation": max(2.0 * grid.size[2], config.composites.length_m),
    }
    tables = []
    for domain in ("all", *config.domains.sulphide):
        part = samples if domain == "all" else samples[samples["domain"] == domain]
        inside = frame if domain == "all" else frame[made.frame["domain"] == domain]
        if not len(part) or not len(inside):
            continue
        table = swath_table(
            part,
            inside,
            metals,
            axes=(*names, "elevation"),
            azimuth=azimuth,
            width_m=widths,
            companions={metal: {"nearest": f"{metal}_nearest"} for metal in metals},
            sample_weight="weight",
            decluster_weights="declustering_weight",
            block_weight="dry_tonnes",
        )
        tables.append(table.assign(domain=domain))
    return pd.concat(tables, ignore_index=True)


def support_curves(
    made: EstimateState, state: VariogramState, blocks: BlockState, config: Any
) -> pd.DataFrame:
    """What the blocks' grade-tonnage curve would be without smoothing, by two models of change of support."""
    from sms_resource.geostatistics import block_variance
    from sms_resource.geostatistics.support import change_of_support
    from sms_resource.workflow.estimation import frame_size
    from sms_resource.workflow.tonnage_tables import support_levels

    variable = config.cutoff.variable
    if variable not in config.metals.estimate:
        variable = config.metals.estimate[0]
    metal = element_column(variable)
    cuts = support_levels(config.cutoff, variable, state.samples[metal].dropna().to_numpy(dtype=float))
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
            factor,
            cuts,
            weights=part["declustering_weight"].to_numpy(dtype=float),
        ).curves.rename(columns={"metal": "content"})
        tonnes = made.frame.loc[made.frame["domain"] == domain, "dry_tonnes"].sum()
        tables.append(
            curves.assign(domain=domain, metal=metal, variance_factor=factor, domain_dry_tonnes=tonnes)
        )
    return pd.concat(tables, ignore_index=True) if tables else pd.DataFrame()


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
    """Volume and dry tonnes of the body when its surfaces, or its densities, move by what they are known to."""
    from sms_resource.blocks.uncertainty import geometry_uncertainty
    from sms_resource.workflow.geometry import seafloor_sigma

    volume = float(made.frame["volume_m3"].sum())
    base = float(made.frame["dry_tonnes"].sum())
    table = geometry_uncertainty(
        body.body, dry_density_tpm3=base / volume, seafloor_sigma_m=seafloor_sigma(body)
    )
    rows = []
    for case in ("low", "high"):
        tonnes = float(made.density_cases[case].sum())
        rows.append(
            {"case": f"density_{case}", "what": f"{case} dry density of each domain", "volume_m3": volume, "change_m3": 0.0,
             "change_pct": 100.0 * (tonnes / base - 1.0), "dry_tonnes": tonnes, "change_dry_tonnes": tonnes - base}
        )  # fmt: skip
    return pd.concat([table, pd.DataFrame(rows)], ignore_index=True)


def contained(frame: pd.DataFrame, metal: str) -> float:
    """Tonnes of a metal in all blocks."""
    return float(np.nansum(contained_tonnes(frame["dry_tonnes"].to_numpy(), frame[metal].to_numpy(), metal)))
