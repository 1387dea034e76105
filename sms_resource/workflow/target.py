"""What no class takes in, as an exploration target: ranges of tonnes and grade, and never a number of its own."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from sms_resource.workflow.stage import Context
from sms_resource.workflow.state import BlockState, BodyState, EstimateState, EvidenceState

NORMAL_80 = 1.2815515655446004  # 80 % of a normal error lie within so many sigmas
FEW_HOLES = 4  # under so many the whole spread of holes is the range, else the middle half


def unclassified_target(context: Context, frame: pd.DataFrame, metals: list[str]) -> pd.DataFrame:
    """Material of the body that screens leave and no class takes in, as ranges, and a finding that says so.

    Tonnes run over the thickness of the body within 80 % of its error and over the low and high densities; grades over
    the means of holes (their middle half, or all where they are few). Every low goes with every low.

    Parameters
    ----------
    context : Context
    frame : DataFrame
        Blocks with proposed classes and kept_share.
    metals : list of str

    Returns
    -------
    DataFrame
        quantity, low, high, basis; empty where a class takes in everything, or no range can be stated.
    """
    from sms_resource.classification import exploration_target

    mine = ((frame["proposed_class"] == "unclassified") & (frame["kept_share"] > 0)).to_numpy()
    volume = (frame["volume_m3"] * frame["kept_share"]).to_numpy(dtype=np.float64)
    if not mine.any() or not volume[mine].sum() > 0:
        return pd.DataFrame(columns=["quantity", "low", "high", "basis"])
    blocks: BlockState = context.done["blocks"]
    estimate: EstimateState = context.done["estimate"]
    size = blocks.model.grid.size
    area = float(size[0] * size[1] * len(frame.loc[mine, ["i", "j"]].drop_duplicates()))
    spread = relative_error(context.done["body"], frame)
    low = float((volume * np.clip(1.0 - NORMAL_80 * spread, 0.0, 1.0))[mine].sum())
    high = float((volume * (1.0 + NORMAL_80 * spread))[mine].sum())
    share = frame["kept_share"].to_numpy(dtype=np.float64)
    density = [
        float((estimate.density_cases[case] * share)[mine].sum() / volume[mine].sum())
        for case in ("low", "high")
    ]
    grades, holes = grade_ranges(context.done["composite"], context.config.domains.sulphide, metals)
    part = "their middle half" if holes >= FEW_HOLES else "all of them"
    basis = (
        f"blocks of the body that no class takes in ({int(mine.sum()):,} of them, over {area:,.0f} m2 in plan); thickness "
        f"within 80 % of its error, low and high dry density of each domain, grades by the means of {holes} holes ({part})"
    )
    try:
        made = exploration_target(
            area_m2=(area, area), thickness_m=(low / area, high / area),
            dry_density_tpm3=(min(density), max(density)), grades=grades, basis=basis,
        )  # fmt: skip
    except ValueError:  # nothing is known of its spread, so no range can be stated
        return pd.DataFrame(columns=["quantity", "low", "high", "basis"])
    context.findings.note(
        "exploration-target",
        f"no class takes in {int(mine.sum()):,} blocks of the body: {made.dry_tonnes[0]:,.0f} to {made.dry_tonnes[1]:,.0f} "
        f"dry t at most, as an exploration target. {made.caution}",
        "Drill it, or leave it out; it is no part of an estimate.", file=context.study.path.name,
    )  # fmt: skip
    return made.to_frame().assign(basis=basis)


def relative_error(state: BodyState, frame: pd.DataFrame) -> Any:
    """One sigma of the thickness of the body as a share of it, at each block; 0 where it is not known, at most 1."""
    thickness, sigma = state.body.thickness, state.body.thickness_sigma
    if sigma is None:
        return np.zeros(len(frame))
    x, y = (frame[name].to_numpy(dtype=np.float64) for name in ("easting", "northing"))
    thick, wide = thickness.sample(x, y), sigma.sample(x, y)
    found = np.divide(wide, thick, out=np.full(len(frame), np.nan), where=thick > 0)
    return np.clip(np.nan_to_num(found, nan=1.0), 0.0, 1.0)


def grade_ranges(
    evidence: EvidenceState, sulphide: tuple[str, ...], metals: list[str]
) -> tuple[dict[str, tuple[float, float]], int]:
    """Low and high of the means of holes for each metal, where they differ, and how many holes there are."""
    inside = evidence.composites[evidence.composites["domain"].isin(sulphide)]
    found: dict[str, tuple[float, float]] = {}
    holes = int(inside["hole_id"].nunique())
    for metal in metals:
        known = inside[inside[metal].notna() & (inside["weight"] > 0)]
        if not len(known):
            continue
        content = (known[metal] * known["weight"]).groupby(known["hole_id"]).sum()
        means = (content / known["weight"].groupby(known["hole_id"]).sum()).to_numpy(dtype=np.float64)
        ends = (0.25, 0.75) if len(means) >= FEW_HOLES else (0.0, 1.0)
        low, high = (float(value) for value in np.quantile(means, ends))
        if low < high:
            found[metal] = (low, high)
    return found, holes
