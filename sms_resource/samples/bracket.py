"""The four treatments of lost core run side by side: composite statistics and the bracket they make."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any, cast

import numpy as np
import pandas as pd

from sms_resource.samples.composites import Composites, composite
from sms_resource.samples.desurvey import HolePaths
from sms_resource.samples.intervals import names, numbers
from sms_resource.samples.lost_core import TREATMENTS, Treatment


def composites_by_treatment(
    assays: pd.DataFrame,
    runs: pd.DataFrame | None,
    domain_intervals: pd.DataFrame | None,
    paths: HolePaths,
    *,
    metals: Sequence[str],
    densities: pd.DataFrame | None = None,
    options: Mapping[str, Any] | None = None,
) -> dict[str, Composites]:
    """Composites under each treatment of lost core, by its name.

    ``options`` are those of `composites.composite`; its ``lost_core`` is replaced by each treatment in turn.
    """
    chosen = {key: value for key, value in (options or {}).items() if key not in ("lost_core", "densities")}
    return {
        name: composite(
            assays,
            runs,
            domain_intervals,
            paths,
            metals=metals,
            densities=densities,
            lost_core=cast(Treatment, name),
            **chosen,
        )
        for name in TREATMENTS
    }


def lost_core_bracket(
    assays: pd.DataFrame,
    runs: pd.DataFrame | None,
    domain_intervals: pd.DataFrame | None,
    paths: HolePaths,
    *,
    metals: Sequence[str],
    densities: pd.DataFrame | None = None,
    options: Mapping[str, Any] | None = None,
    domains: Sequence[str] | None = None,
) -> pd.DataFrame:
    """Mean grades of the composites under all four treatments of lost core.

    Parameters
    ----------
    assays, runs, domain_intervals, paths, metals, densities
        As for `composites.composite`.
    options : mapping, optional
        Other options of `composites.composite`.
    domains : sequence of str, optional
        Domains to report; all by default. "all" stands for these together.

    Returns
    -------
    DataFrame
        treatment, meaning, domain, n (composites with a grade), length_m, each metal (mean by length) and its
        coefficient of variation in ``<metal>_cv``.
    """
    made = composites_by_treatment(
        assays, runs, domain_intervals, paths, metals=metals, densities=densities, options=options
    )
    long = bracket_table({name: item.frame for name, item in made.items()}, metals, domains=domains)
    keys = ["treatment", "meaning", "domain"]
    order = long[keys].drop_duplicates()
    wide = order.set_index(keys)
    grouped = long.groupby(keys, sort=False)
    wide["n"], wide["length_m"] = grouped["n"].max(), grouped["length_m"].max()
    for metal in metals:
        own = long.loc[long["metal"] == metal].set_index(keys)
        wide[metal], wide[f"{metal}_cv"] = own["mean"], own["cv"]
    return wide.reset_index()


def bracket_table(
    frames: Mapping[str, pd.DataFrame], metals: Sequence[str], *, domains: Sequence[str] | None = None
) -> pd.DataFrame:
    """Statistics of composites that are already made, by treatment, domain and metal.

    Returns
    -------
    DataFrame
        treatment, meaning, domain (and "all"), metal, n, length_m, mean (by length), sd, cv, p10, p50, p90,
        ratio_to_default.
    """
    rows = []
    for treatment, frame in frames.items():
        domain = names(frame["domain"])
        wanted = list(domains) if domains is not None else sorted(set(domain))
        for name in [*wanted, "all"]:
            here = np.isin(domain, wanted) if name == "all" else domain == name
            for metal in metals:
                grade = numbers(frame, metal)
                use = np.isfinite(grade) & here
                length, values = numbers(frame, "length_m")[use], grade[use]
                some = len(values) > 0
                mean = float(np.average(values, weights=length)) if some else np.nan
                sd = float(np.sqrt(np.average((values - mean) ** 2, weights=length))) if some else np.nan
                quantiles = np.quantile(values, [0.1, 0.5, 0.9]) if some else np.full(3, np.nan)
                rows.append(
                    {
                        "treatment": treatment, "meaning": TREATMENTS.get(treatment, ""), "domain": name,
                        "metal": metal, "n": len(values), "length_m": float(length.sum()), "mean": mean, "sd": sd,
                        "cv": sd / mean if some and mean > 0 else np.nan,
                        "p10": quantiles[0], "p50": quantiles[1], "p90": quantiles[2],
                    }
                )  # fmt: skip
    table = pd.DataFrame(rows)
    default = table.loc[table["treatment"] == "unknown"].set_index(["domain", "metal"])["mean"]
    base = default.reindex(pd.MultiIndex.from_frame(table[["domain", "metal"]])).to_numpy()
    table["ratio_to_default"] = table["mean"].to_numpy() / base
    return table
