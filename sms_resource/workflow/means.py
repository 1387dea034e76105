"""Tables of the stages in the form that the report wants."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from sms_resource.units import column_element, element_label
from sms_resource.workflow.splits import CARRIED


def waterfall_rows(table: pd.DataFrame, metals: list[str]) -> pd.DataFrame:
    """Waterfall in the report's form: totals, and what each step takes (negative) or adds.

    Returns
    -------
    DataFrame
        step, kind ("total", "taken" by a screen, "cut-off", "skin"), dry_tonnes, wet_tonnes, and contained metal in
        tonnes under each metal's name.
    """
    totals = ("body", "remains", "above_cutoff", "delivered")
    kinds = {"below_cutoff": "cut-off", "loss": "skin", "dilution": "skin"}
    rows = []
    for row in table.to_dict("records"):
        total = row["step"] in totals
        sign, of = (1.0, "remaining") if total else (-1.0, "taken")
        kind = "total" if total else kinds.get(row["step"], "taken")
        masses = {
            name: sign * row[f"{of}_{name}"] for name in ("dry_tonnes", "wet_tonnes") if f"{of}_{name}" in row
        }
        content = {metal: sign * row[f"{of}_{metal.partition('_')[0]}_contained_t"] for metal in metals}
        rows.append({"step": row["what"], "kind": kind, **masses, **content})
    return pd.DataFrame(rows)


def skins_rule(screens: Any, host: dict[str, float] | None) -> str:
    """Depths of loss and dilution and the host rock, in words; empty where there are none."""
    if host is None:
        return ""
    return (
        f"Under-cut {screens.under_cut_m:g} m, over-cut {screens.over_cut_m:g} m, times the area of the faces between "
        "what is above the cut-off and what is not (floor, sides, and roof under material left on top; not the "
        "seafloor). Over-cutting takes what is there: sulphide under the cut-off or in a screen with its own grade, "
        f"beyond the body host rock of {host['dry_density_tpm3']:.3g} t/m³ dry and {host['wet_density_tpm3']:.3g} t/m³ "
        "wet" + (" with the grades of the study." if screens.host_grades else " without metal.")
    )


def named_axis(swaths: pd.DataFrame, frame: str) -> pd.DataFrame:
    """Swaths of all domains, with the upright axis called what it is in the vertical frame."""
    names = {
        "depth": "Height against the seafloor",
        "proportional": "Height in the body, by its mean thickness",
    }
    chosen = swaths[swaths["domain"] == "all"]
    return chosen.assign(axis=chosen["axis"].replace({"elevation": names[frame]} if frame in names else {}))


def mean_rows(done: dict[str, Any], metals: list[str]) -> pd.DataFrame:
    """Plain, declustered and block means by metal and domain; the plain mean of composites and surface samples too.

    The last is over the composites inside the body's domains and the surface samples, each sample alike: what a mean
    would be that took both for the same.
    """
    samples = done["variograms"].samples
    frame = done["value"].frame[["dry_tonnes", *metals]]
    by_domain = done["estimate"].domain_means.set_index(["domain", "metal"])["mean"]
    surface = done["composite"].surface
    rows = []
    for metal in metals:
        for domain in ("all", *sorted(samples["domain"].unique())):
            part = samples if domain == "all" else samples[samples["domain"] == domain]
            known, filled = part[metal].notna(), frame[metal].notna()
            if domain == "all":
                block = np.average(frame.loc[filled, metal], weights=frame.loc[filled, "dry_tonnes"])
            else:
                block = by_domain.get((domain, metal), np.nan)
            if not known.any() or np.isnan(block):
                continue
            declustered = np.average(part.loc[known, metal], weights=part.loc[known, "declustering_weight"])
            row = {
                "metal": metal, "domain": domain, "composite_mean": part.loc[known, metal].mean(),
                "declustered_mean": declustered, "block_mean": block,
                "difference_pct": 100.0 * (block / declustered - 1.0) if declustered else np.nan,
            }  # fmt: skip
            if domain == "all" and len(surface):
                every = pd.concat([part[metal], surface[metal]]) if metal in surface else part[metal]
                row["mean_with_surface"] = every.mean()
            rows.append(row)
    return pd.DataFrame(rows)


def with_equivalent(table: pd.DataFrame, frame: pd.DataFrame) -> pd.DataFrame:
    """The table of tonnes with the mean equivalent of what is above each cut-off, where the cut-off is on it.

    Parameters
    ----------
    table : DataFrame
        From ``grade_tonnage``, by class.
    frame : DataFrame
        The blocks, with what screens leave of them.

    Returns
    -------
    DataFrame
        With a column ``equivalent`` in the unit of the equivalent; rows of other variables have none.
    """
    from sms_resource.economics import grade_tonnage
    from sms_resource.workflow.screening import kept

    own = table[table["cutoff_variable"] == "equivalent"]
    if "equivalent" not in frame or not len(own):
        return table
    columns = [*CARRIED, "kept_share", "proposed_class", "equivalent"]
    blocks = kept(frame[[name for name in dict.fromkeys(columns) if name in frame]])
    made = grade_tonnage(
        blocks.rename(columns={"equivalent": "equivalent_pct"}), metals=["equivalent_pct"],
        cutoff_variable="equivalent_pct", cutoffs=sorted(own["cutoff"].unique()),
    )  # fmt: skip
    means = made[["cutoff", "proposed_class", "equivalent_pct"]].rename(
        columns={"equivalent_pct": "equivalent"}
    )
    means["cutoff_variable"] = "equivalent"
    return table.merge(means, on=["cutoff_variable", "cutoff", "proposed_class"], how="left")


def check_rows(table: pd.DataFrame) -> pd.DataFrame:
    """Validation table in the report's words."""
    if not len(table):
        return pd.DataFrame(columns=["check", "subject", "value", "limit", "verdict"])
    verdict = table["verdict"].map({"within": "pass", "flag": "flag"}).fillna(table["verdict"])
    named = [element_label(str(name)) if column_element(str(name)) else str(name) for name in table["metal"]]
    subject = table["domain"].astype(str) + ", " + pd.Series(named, index=table.index)
    return table.assign(subject=subject, verdict=verdict)[
        ["check", "subject", "value", "limit", "verdict", "figures"]
    ]


def support_rows(curves: pd.DataFrame, done: dict[str, Any], config: Any) -> pd.DataFrame:
    """Share of dry tonnes and grade above cut-offs: blocks as estimated against the models of change of support."""
    if not len(curves):
        return pd.DataFrame(columns=["metal", "cutoff", "support", "proportion", "grade"])
    metal = str(curves["metal"].iloc[0])
    frame = done["value"].frame[["domain", "dry_tonnes", metal]]
    rows = []
    domains = curves["domain"].unique()
    inside = frame[frame["domain"].isin(domains) & frame[metal].notna()]
    total = inside["dry_tonnes"].sum()
    for cutoff in sorted(curves["cutoff"].unique()):
        above = inside[inside[metal] >= cutoff]
        tonnes = above["dry_tonnes"].sum()
        grade = np.average(above[metal], weights=above["dry_tonnes"]) if tonnes > 0 else np.nan
        rows.append(
            {
                "metal": metal,
                "cutoff": cutoff,
                "support": "blocks",
                "proportion": tonnes / total,
                "grade": grade,
            }
        )
    names = {"points": "composites", "discrete_gaussian": "discrete gaussian", "affine": "affine"}
    for (method, cutoff), part in curves.groupby(["method", "cutoff"], sort=True):
        weights = part["domain_dry_tonnes"].to_numpy()
        share = np.average(part["proportion"], weights=weights)
        content = np.average(part["content"], weights=weights)
        rows.append(
            {"metal": metal, "cutoff": cutoff, "support": names.get(str(method), str(method)), "proportion": share,
             "grade": content / share if share > 1e-9 else np.nan}
        )  # fmt: skip
    return pd.DataFrame(rows)


def beside_support(done: dict[str, Any], config: Any) -> pd.DataFrame:
    """Tonnes and grade of the blocks beside those of the discrete Gaussian model, at the cut-offs of the study's metal.

    Empty where the cut-off is not on a metal, or no curve could be made.
    """
    from sms_resource.economics import beside_change_of_support

    table, variable = done["classify"].grade_tonnage, done["classify"].facts["cutoff_variable"]
    rows = support_rows(done["validate"].support, done, config)
    curve = rows[(rows["support"] == "discrete gaussian") & (rows["metal"] == variable)]
    if not len(curve):
        return pd.DataFrame()
    own = table[table["cutoff_variable"] == variable]
    return beside_change_of_support(own, curve, metal=variable)
