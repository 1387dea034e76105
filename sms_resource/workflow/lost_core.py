"""What the treatments of lost core do to tonnes and grades of the whole estimate."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd

from sms_resource.units import element_column
from sms_resource.workflow.continuity import body_samples, cut_grades
from sms_resource.workflow.estimation import join_domains, krige_domains, neighbourhoods
from sms_resource.workflow.evidence import all_columns, composite_options, domain_table, metal_columns
from sms_resource.workflow.stage import Context
from sms_resource.workflow.state import BlockState, DensityState, EvidenceState, VariogramState

TREATMENTS = ("represented", "unknown", "neighbour_mean", "background")


def thinned(blocks: BlockState, most: int = 25_000) -> BlockState:
    """An even part of the blocks of a large model, for questions about means that need not ask every block."""
    frame = blocks.model.frame
    step = max(1, round(len(frame) / most))
    if step == 1:
        return blocks
    picked = (frame["i"] + 2 * frame["j"] + 3 * frame["k"]) % step == 0
    return replace(blocks, model=blocks.model.with_frame(frame[picked].reset_index(drop=True)))


def lost_core_runs(context: Context) -> pd.DataFrame:
    """Tonnes and grades of the whole estimate under each treatment of lost core.

    In a large model the treatments are run on an even part of the blocks, and their ratios to the treatment of the
    study are applied to its full result; the column ``blocks`` tells how many were run.
    """
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
    part = thinned(blocks)
    found: dict[str, tuple[int, dict[str, float]]] = {}
    for treatment in TREATMENTS:
        options = {**composite_options(config), "lost_core": treatment}
        made = make_composites(
            evidence.assays, data.drill.runs, intervals, evidence.paths, metals=all_columns(config),
            densities=data.drill.densities, **options,
        )  # fmt: skip
        samples = body_samples(with_surface(made.frame, evidence.composites), blocks.frame, config)
        samples, _ = cut_grades(samples, evidence.tables["top_cut_study"], config)
        grades, _, _ = krige_domains(samples, part, variograms, hoods, config, context.threads)
        found[treatment] = (len(samples), totals(join_domains(part, grades, density, config), metals, config))
    full = totals(context.done["estimate"].frame, metals, config)
    used = found[config.composites.lost_core][1]
    rows = []
    for treatment, (count, values) in found.items():
        scaled = {name: _ratio(value, used[name]) * full[name] for name, value in values.items()}
        rows.append({"treatment": treatment, "used": treatment == config.composites.lost_core, "composites": count,
                     "blocks": len(part.model.frame), **scaled})  # fmt: skip
    return pd.DataFrame(rows)


def with_surface(composites: pd.DataFrame, of_study: pd.DataFrame) -> pd.DataFrame:
    """Composites with the surface samples that the study lets estimate a cap; no treatment of lost core touches them."""
    cap = of_study[of_study["composite_id"].astype(str).str.startswith("surface-")]
    return pd.concat([composites, cap], ignore_index=True) if len(cap) else composites


def _ratio(value: float, base: float) -> float:
    """Value over base; 1 where both are zero."""
    if value == base:
        return 1.0
    return value / base if base else float("nan")


def totals(frame: pd.DataFrame, metals: list[str], config: Any) -> dict[str, float]:
    """Dry and wet tonnes and mean grades of all blocks, and of those at the study's cut-off where it is on a metal."""
    variable = config.cutoff.variable
    on_metal = variable in config.metals.estimate
    grade = frame[element_column(variable if on_metal else config.metals.estimate[0])].to_numpy(dtype=float)
    parts = [("", np.isfinite(grade))]
    if on_metal:  # treatments are run before blocks have a value or an equivalent
        parts.append(("_above_cutoff", grade >= config.cutoff.at))
    found: dict[str, float] = {}
    for suffix, chosen in parts:
        dry = frame.loc[chosen, "dry_tonnes"].to_numpy(dtype=float)
        found[f"dry_tonnes{suffix}"] = float(dry.sum())
        found[f"wet_tonnes{suffix}"] = float(frame.loc[chosen, "wet_tonnes"].sum(min_count=1))
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
