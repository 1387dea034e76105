"""The table of tonnes: the study's variable first, then any other that it asks for, at listed cut-offs or at all."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.units import element_column
from sms_resource.workflow.stage import Context

FEW = 40  # cut-offs of tables that multiply them by bench, domain or screen, where the study asks for all
SPECIAL = {"equivalent": "equivalent", "value": "value_per_dry_tonne"}


def variable_column(variable: str) -> str:
    """Block column of a cut-off variable: an element, "equivalent" or "value"."""
    return SPECIAL.get(variable) or element_column(variable)


def cutoff_column(config: Any) -> str:
    """Block column that the study's cut-off is on."""
    return variable_column(config.cutoff.variable)


def cut_on_worth(config: Any) -> bool:
    """Whether a table of tonnes is cut on value or on an equivalent, so that prices move it."""
    return any(variable in SPECIAL for variable in (config.cutoff.variable, *config.cutoff.curves))


def study_steps(choice: Any, values: NDArray[np.float64]) -> list[float]:
    """Cut-offs of tables that tell much apart: those of the study, or a few of all ``values``."""
    return levels(values, choice.steps, (0.0, choice.at), FEW)[0]


def levels(
    values: NDArray[np.float64], wanted: Any, must: Sequence[float], most: int
) -> tuple[list[float], int]:
    """Cut-offs of one curve.

    Parameters
    ----------
    values : (n,) array
        The variable in every block.
    wanted : sequence of float or "all"
        "all" takes every distinct value; where they are more than ``most``, so many of them evenly by rank.
    must : sequence of float
        Cut-offs that are in whatever is wanted.

    Returns
    -------
    list of float
        Rising.
    int
        Distinct values that there were, where they were thinned; else 0.
    """
    if not isinstance(wanted, str):
        return sorted({*must, *map(float, wanted)}), 0
    distinct = np.unique(values[~np.isnan(values)])
    if len(distinct) <= most:
        return sorted({*must, *distinct.tolist()}), 0
    chosen = distinct[np.unique(np.linspace(0, len(distinct) - 1, most).round().astype(int))]
    return sorted({*must, *chosen.tolist()}), len(distinct)


def tonnage_table(
    context: Context, left: pd.DataFrame, metals: Sequence[str]
) -> tuple[pd.DataFrame, list[float]]:
    """Tonnes, grades and metal above every cut-off by class, on every variable that the study asks for.

    Parameters
    ----------
    context : Context
    left : DataFrame
        Blocks with what the screens leave of them, valued.
    metals : sequence of str

    Returns
    -------
    DataFrame
        From ``grade_tonnage``; the rows of the study's own variable come first.
    list of float
        Cut-offs for tables that tell more apart: those of the study, or a few of all.
    """
    from sms_resource.economics import grade_tonnage

    choice = context.config.cutoff
    wanted = {
        choice.variable: choice.steps,
        **{k: v for k, v in choice.curves.items() if k != choice.variable},
    }
    tables = []
    for variable, steps in wanted.items():
        column = variable_column(variable)
        if variable != choice.variable and (
            column not in left or (len(left) and not left[column].notna().any())
        ):
            context.findings.warning(
                "curve-unknown", f"cutoff.curves asks for {variable}, which no block has",
                "Estimate the metal, or fill [value.metals].", file=context.study.path.name, column="cutoff.curves",
            )  # fmt: skip
            continue
        must = (0.0, choice.at) if variable == choice.variable else (0.0,)
        values = left[column].to_numpy(dtype=np.float64)
        cuts, thinned = levels(values, steps, must, choice.most_steps)
        if thinned:
            context.findings.note(
                "cutoffs-thinned",
                f"{variable} has {thinned:,} distinct values; the table of tonnes is cut at {len(cuts):,} of them, evenly "
                "by rank",
                "Raise cutoff.most_steps for more.", file=context.study.path.name, column="cutoff.most_steps",
            )  # fmt: skip
        tables.append(
            grade_tonnage(
                left, metals=metals, cutoff_variable=column, cutoffs=cuts, groups=("proposed_class",)
            )
        )
    own = left[variable_column(choice.variable)].to_numpy(dtype=np.float64)
    return pd.concat(tables, ignore_index=True), study_steps(choice, own)


def support_levels(choice: Any, variable: str, samples: NDArray[np.float64]) -> NDArray[np.float64]:
    """Cut-offs of the change-of-support curve of a metal: the study's where they are numbers on it, else an even row."""
    if choice.variable == variable and not isinstance(choice.steps, str):
        return np.asarray(sorted({0.0, choice.at, *choice.steps}), dtype=np.float64)
    top = float(np.quantile(samples, 0.95)) if len(samples) else 1.0
    row = np.linspace(0.0, max(top, 1e-6), 24)
    return np.unique(np.append(row, choice.at)) if choice.variable == variable else row
