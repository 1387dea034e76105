"""The study of neighbourhoods: what more samples, larger blocks or more points would bring, and cost."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from sms_resource.units import element_column
from sms_resource.workflow.estimation import neighbourhoods
from sms_resource.workflow.stage import Context
from sms_resource.workflow.state import BlockState, EstimateState, VariogramState

MOST_TARGETS = 2000
_NAMES = {
    "mean_slope": "slope", "mean_efficiency": "efficiency", "mean_negative_weight": "negative_weight_sum",
    "operations_per_target": "operations_per_target", "microseconds_per_target": "microseconds_per_target",
}  # fmt: skip


def neighbourhood_table(context: Context) -> pd.DataFrame:
    """Quality and cost of the estimate against samples, block size and points, where the study asks for it."""
    config = context.config
    if not config.validation.neighbourhood_study:
        return pd.DataFrame()
    from sms_resource.geostatistics.search_study import neighbourhood_study

    blocks: BlockState = context.done["blocks"]
    state: VariogramState = context.done["variograms"]
    made: EstimateState = context.done["estimate"]
    metal = element_column(config.classes.judged_on)
    tonnes = made.frame.groupby("domain")["dry_tonnes"].sum()
    domain = str(tonnes.reindex(config.domains.sulphide).idxmax())
    part = state.samples[(state.samples["domain"] == domain) & state.samples[metal].notna()]
    chosen = np.flatnonzero((made.frame["domain"] == domain).to_numpy())
    picked = chosen[:: max(1, len(chosen) // MOST_TARGETS)]
    size = blocks.model.grid.size
    found = neighbourhood_study(
        part[["x", "y", "z"]].to_numpy(dtype=float),
        part[metal].to_numpy(dtype=float),
        made.targets[picked],
        state.inferences[(domain, metal)].model,
        neighbourhoods(state, domain, config)[-1],
        block_size=size,
        discretisation=config.kriging.discretisation,
        hole_ids=part["hole_id"].to_numpy(dtype=object),
        block_sizes=[tuple(f * s for s in size) for f in (1.0, 2.0, 4.0)],
        coincident=config.kriging.coincident,
        threads=context.threads,
    )
    context.findings.note("neighbourhood-study", found.recommendation, "Set search.most_samples.")
    return neighbourhood_rows(found.table, size, config).assign(
        domain=domain, metal=metal, recommendation=found.recommendation
    )


def neighbourhood_rows(table: pd.DataFrame, size: Any, config: Any) -> pd.DataFrame:
    """The trials as report and figure want them: varied, setting, used, and the measures."""
    sides, points = ["block_x_m", "block_y_m", "block_z_m"], ["points_x", "points_y", "points_z"]
    rows = []
    for row in table.to_dict("records"):
        settings = {
            "samples": f"{row['max_samples']}",
            "block_size": " × ".join(f"{row[name]:g}" for name in sides),
            "discretisation": " × ".join(str(row[name]) for name in points),
        }
        used = {
            "samples": row["max_samples"] == config.search.most_samples,
            "block_size": bool(np.allclose([row[name] for name in sides], size)),
            "discretisation": tuple(row[name] for name in points) == tuple(config.kriging.discretisation),
        }
        varied = str(row["varied"])
        rows.append(
            {"varied": varied, "setting": settings[varied], "used": used[varied]}
            | {short: row[name] for name, short in _NAMES.items()}
        )
    return pd.DataFrame(rows)


def timeless(table: pd.DataFrame) -> pd.DataFrame:
    """The study without what differs between two runs and between two machines."""
    return table.drop(columns=[c for c in ("microseconds_per_target", "recommendation") if c in table])


def recommendation(table: pd.DataFrame) -> str:
    """What the study recommends, and why."""
    return str(table["recommendation"].iloc[0]) if len(table) else ""
