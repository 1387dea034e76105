"""Stage classify: value, and the tables of tonnes by proposed class."""

from __future__ import annotations

from typing import Any

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
)
from sms_resource.workflow.tonnage_tables import cutoff_column, tonnage_table, variable_column
from sms_resource.workflow.worth import valued


def classify(context: Context) -> ClassState:
    """Value the blocks, and sum what screens and cut-offs leave of them."""
    config = context.config
    metals = metal_columns(config)
    blocks: BlockState = context.done["blocks"]
    proposal: ProposalState = context.done["propose"]
    frame, value_tables, value_facts = valued(context, proposal.frame.copy(deep=False))
    variable, at = cutoff_column(config), config.cutoff.at
    if variable not in frame or not frame[variable].notna().any():
        if not context.findings.has_errors:
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
        frame=frame,
        reasons=proposal.reasons,
        smoothing=proposal.smoothing,
        waterfall=waterfall,
        grade_tonnage=tonnage,
        facts={"tally_label": proposal.tally_label, "cutoff_variable": variable, **skin_facts, **value_facts},
        tables={
            **proposal.tables,
            **split,
            **({} if skins is None else {"dilution_and_loss": skins}),
            "mineable_shape": shape,
            "value_against_grade": by_value(left, variable, steps),
            **value_tables,
        },
    )


def summed_columns(frame: pd.DataFrame, metals: list[str], config: Any) -> list[str]:
    """Columns that tables of tonnes are summed from; a block has a hundred others, which are dear to select from."""
    wanted = {*CARRIED, *metals, "kept_share", "domain", "proposed_class", "value_per_dry_tonne", "equivalent",
              *map(variable_column, (config.cutoff.variable, *config.cutoff.curves))}  # fmt: skip
    return [name for name in frame if name in wanted]


def by_value(left: pd.DataFrame, variable: str, steps: list[float]) -> pd.DataFrame:
    """What choosing the same dry tonnes by value would gain over a grade cut-off; empty without value or grade."""
    from sms_resource.economics import value_against_grade

    if "value_per_dry_tonne" not in left or variable == "value_per_dry_tonne":
        return pd.DataFrame()
    if not left["value_per_dry_tonne"].notna().any():
        return pd.DataFrame()
    table = value_against_grade(left, value="value_per_dry_tonne", grade=variable, cutoffs=steps)
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
