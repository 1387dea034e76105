"""The four treatments of lost core run side by side: composite statistics and the bracket they make."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import pandas as pd

from sms_resource.samples.composites import Composites, composite
from sms_resource.samples.desurvey import HolePaths
from sms_resource.samples.intervals import names, numbers
from sms_resource.samples.lost_core import TREATMENTS


def composites_by_treatment(
    assays: pd.DataFrame,
    runs: pd.DataFrame,
    domains: pd.DataFrame | None,
    paths: HolePaths,
    *,
    metals: Sequence[str],
    **options: Any,
) -> dict[str, Composites]:
    """Composites under each treatment, by its name; ``options`` are those of `composites.composite`."""
    options.pop("lost_core", None)
    return {
        name: composite(assays, runs, domains, paths, metals=metals, lost_core=name, **options)  # type: ignore[arg-type]
        for name in TREATMENTS
    }


def lost_core_bracket(
    assays: pd.DataFrame,
    runs: pd.DataFrame,
    domains: pd.DataFrame | None,
    paths: HolePaths,
    *,
    metals: Sequence[str],
    **options: Any,
) -> pd.DataFrame:
    """Statistics of the composites under all four treatments of lost core.

    Returns
    -------
    DataFrame
        treatment, meaning, domain (and "all"), metal, n (composites with a grade), length_m, mean (by length), sd, cv,
        p10, p50, p90, ratio_to_default.
    """
    runs_of = composites_by_treatment(assays, runs, domains, paths, metals=metals, **options)
    return bracket_table({name: item.frame for name, item in runs_of.items()}, metals)


def bracket_table(frames: dict[str, pd.DataFrame], metals: Sequence[str]) -> pd.DataFrame:
    """The table of `lost_core_bracket` from composites that are already made, by treatment."""
    rows = []
    for treatment, frame in frames.items():
        domain = names(frame["domain"])
        for name in [*sorted(set(domain)), "all"]:
            for metal in metals:
                grade = numbers(frame, metal)
                use = np.isfinite(grade) & ((domain == name) | (name == "all"))
                length, values = numbers(frame, "length_m")[use], grade[use]
                some = len(values) > 0
                mean = float(np.average(values, weights=length)) if some else np.nan
                sd = float(np.sqrt(np.average((values - mean) ** 2, weights=length))) if some else np.nan
                quantiles = np.quantile(values, [0.1, 0.5, 0.9]) if some else np.full(3, np.nan)
                rows.append(
                    {
                        "treatment": treatment, "meaning": TREATMENTS[treatment], "domain": name, "metal": metal,
                        "n": len(values), "length_m": float(length.sum()), "mean": mean, "sd": sd,
                        "cv": sd / mean if some and mean > 0 else np.nan,
                        "p10": quantiles[0], "p50": quantiles[1], "p90": quantiles[2],
                    }
                )  # fmt: skip
    table = pd.DataFrame(rows)
    default = table.loc[table["treatment"] == "unknown"].set_index(["domain", "metal"])["mean"]
    base = default.reindex(pd.MultiIndex.from_frame(table[["domain", "metal"]])).to_numpy()
    table["ratio_to_default"] = table["mean"].to_numpy() / base
    return table
