"""Stages value and classify: what the blocks are worth, and the tables of tonnes by proposed class."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from sms_resource.workflow.cheap import cutoff_words
from sms_resource.workflow.evidence import metal_columns
from sms_resource.workflow.screening import kept, on_to_delivery, skinned
from sms_resource.workflow.splits import CARRIED, split_tables
from sms_resource.workflow.stage import Context, StageStop
from sms_resource.workflow.state import (
    BlockState,
    ClassState,
    ProposalState,
    ValueState,
)
from sms_resource.workflow.tonnage_tables import (
    cut_on_worth,
    cutoff_column,
    study_steps,
    tonnage_table,
    variable_column,
)
from sms_resource.workflow.worth import valued


def value(context: Context) -> ValueState:
    """Value the blocks, where the study gives terms; nothing of it depends on what screens take of them but a table."""
    config = context.config
    proposal: ProposalState = context.done["propose"]
    frame, tables, facts = valued(context, proposal.frame.copy(deep=False))
    variable = cutoff_column(config)
    return ValueState(frame, facts, {"value_against_grade": by_value(frame, variable, config), **tables})


def classify(context: Context) -> ClassState:
    """Sum what screens and cut-offs leave of the blocks; what they are worth counts only where a cut-off is on it."""
    config = context.config
    metals = metal_columns(config)
    blocks: BlockState = context.done["blocks"]
    proposal: ProposalState = context.done["propose"]
    frame: pd.DataFrame = context.done["value"].frame if cut_on_worth(config) else proposal.frame
    variable, at = cutoff_column(config), config.cutoff.at
    if variable not in frame or not frame[variable].notna().any():
        context.findings.error(
            "cutoff-unknown", f"no block has a {config.cutoff.variable} to cut on",
            "Fill [value.metals], or cut on a metal.", file=context.study.path.name, column="cutoff.variable",
        )  # fmt: skip
        raise StageStop
    left = kept(frame[summed_columns(frame, metals, config)])
    tonnage, steps = tonnage_table(context, left, metals)
    split = split_tables(
        frame,
        proposal.marks,
        blocks.model,
        variable=variable,
        at=at,
        steps=steps,
        metals=metals,
        bench_m=config.screens.bench_m,
    )
    skins, skin_facts = skinned(context, frame, variable, at, metals)
    waterfall = on_to_delivery(proposal.waterfall, skins, cutoff_words(config))
    above = left.loc[left[variable] >= at, "dry_tonnes"]
    shape = shapes(frame, blocks, variable, at, metals, config)
    context.detail = f"{above.sum():,.0f} dry t above the cut-off"
    return ClassState(
        reasons=proposal.reasons,
        smoothing=proposal.smoothing,
        waterfall=waterfall,
        grade_tonnage=tonnage,
        facts={"tally_label": proposal.tally_label, "cutoff_variable": variable, **skin_facts},
        tables={
            **proposal.tables,
            **split,
            **({} if skins is None else {"dilution_and_loss": skins}),
            "mineable_shape": shape,
        },
    )


def summed_columns(frame: pd.DataFrame, metals: list[str], config: Any) -> list[str]:
    """Columns that tables of tonnes are summed from; a block has a hundred others, which are dear to select from."""
    wanted = {*CARRIED, *metals, "kept_share", "domain", "proposed_class",
              *map(variable_column, (config.cutoff.variable, *config.cutoff.curves))}  # fmt: skip
    return [name for name in frame if name in wanted]


def by_value(frame: pd.DataFrame, variable: str, config: Any) -> pd.DataFrame:
    """What choosing the same dry tonnes by value would gain over a grade cut-off; empty without value or grade."""
    from sms_resource.economics import value_against_grade

    worth = "value_per_dry_tonne"
    if variable == worth or variable not in frame or worth not in frame or not frame[worth].notna().any():
        return pd.DataFrame()
    left = kept(frame[[*CARRIED, "kept_share", variable, worth]])
    steps = study_steps(config.cutoff, left[variable].to_numpy(dtype=np.float64))
    table = value_against_grade(left, value=worth, grade=variable, cutoffs=steps)
    return table[table["dry_tonnes"] > 0].reset_index(drop=True)


def shapes(
    frame: pd.DataFrame, blocks: BlockState, variable: str, at: float, metals: list[str], config: Any
) -> pd.DataFrame:
    """The cut-off alone beside patches and full benches that meet it on average, with what they must take."""
    from sms_resource.economics import ShapeRules, mineable_shapes

    choice = config.screens
    size = blocks.model.grid.size
    benches = max(1, round((choice.bench_m or size[2]) / size[2]))
    made = mineable_shapes(
        frame,
        cutoff_variable=variable,
        cutoff=at,
        block_size=size,
        metals=tuple(metals),
        rules=ShapeRules(bench_blocks=benches, least_patch_m2=choice.least_patch_m2 or 0.0),
        allowed=(frame["kept_share"] > 0.5).to_numpy(),
    )
    return made.table
