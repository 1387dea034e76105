"""The section on the samples: where they are, what came back, what the laboratory says, what they are worth."""

from __future__ import annotations

import numpy as np
import pandas as pd

from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.elements import (
    Block,
    Bullets,
    Heading,
    Paragraph,
    Slot,
    column_label,
    number_text,
    with_table,
)
from sms_resource.reporting.sections_laboratory import laboratory
from sms_resource.reporting.summaries import associations_shown, chosen_cells, cuts_shown

QUANTILES = {"sd": "Standard deviation", "p10": "10th percentile", "p90": "90th percentile"}
LOGNORMAL = {
    "mean": "Mean, each alike", "sichel": "Sichel's mean", "land_low": "Land's limit, lower",
    "land_high": "Land's limit, upper", "log_sd": "Standard deviation of logs", "left_out": "Not positive, left out",
    "shapiro_p": "Shapiro-Wilk p of logs",
}  # fmt: skip
SURFACE = {
    "ratio": "Surface over nearest core", "ratio_low": "lower limit", "ratio_high": "upper limit",
    "top_ratio": "Surface over top metre", "top_ratio_low": "lower limit", "top_ratio_high": "upper limit",
    "holes": "Holes beside them",
}  # fmt: skip


def evidence(data: ReportData) -> list[Block]:
    """Positions, recovery, composites, extreme grades, surface samples, laboratory, density, logs."""
    return [
        *_places(data),
        *_recovery(data),
        *_composites(data),
        *_extremes(data),
        *_contacts_and_twins(data),
        *_surface(data),
        *laboratory(data),
        *_density_and_metals(data),
        Heading("Strip logs"),
        Slot(("strip_logs_*",)),
    ]


def _places(data: ReportData) -> list[Block]:
    e = data.evidence
    blocks: list[Block] = [Heading("Where the samples are"), Slot(("plan_holes",))]
    with_table(
        blocks, e.positions, "Positions by method", note="Sigma: horizontal standard error as delivered.",
        labels={"table": "Of", "sigma_min_m": "Sigma, least (m)", "sigma_median_m": "Sigma, median (m)",
                "sigma_max_m": "Sigma, greatest (m)"},
    )  # fmt: skip
    if e.collars is not None and has(e.collars, "assumed_vertical"):
        count = int(e.collars["assumed_vertical"].sum())
        if count:
            blocks.append(
                Paragraph(f"{count} of {len(e.collars)} holes have no survey and are assumed vertical.")
            )
    with_table(
        blocks, e.hole_ends, "How the holes ended",
        labels={"ended_in": "Ended in", "share_pct": "Share of the holes (%)", "length_m": "Drilled length (m)"},
    )  # fmt: skip
    blocks += [Heading("Collars against the seafloor"), Slot(("plan_collars",))]
    if e.collar_shift_m is not None:
        blocks.append(Paragraph(_collar_policy(e.collars, e.collar_shift_m)))
    with_table(
        blocks, _worded(e.collar_match), "Collars less seafloor, before and after",
        labels={"quantity": "Collar less seafloor", "before": "As delivered", "after": "As used"},
    )  # fmt: skip
    if e.collars is not None and has(e.collars, "dz_m"):
        off = (e.collars["dz_m"] - e.collars["dz_m"].median()).abs()
        worst = e.collars.loc[off.sort_values(ascending=False, kind="stable").index]
        shown, sigma_note = sigma_marked(_fixed(worst))
        with_table(
            blocks, shown, "Collars, furthest off the median first", most=20, digits=4,
            columns=("hole_id", "position_method", "position_sigma_m", "original_elevation", "seafloor_elevation", "dz_m",
                     "limit_m", "flagged_before", "elevation", "dz_after_m", "flagged"),
            labels={"original_elevation": "Elevation as delivered (m)", "seafloor_elevation": "Seafloor (m)",
                    "dz_m": "Delivered less seafloor (m)", "limit_m": "Limit (m)", "elevation": "Elevation in use (m)",
                    "flagged_before": "Beyond the limit as delivered", "flagged": "Beyond it as used",
                    "dz_after_m": "In use less seafloor (m)", "position_sigma_m": "Position sigma (m)"},
            note=sigma_note,
        )  # fmt: skip
    return blocks


def sigma_marked(collars: pd.DataFrame) -> tuple[pd.DataFrame, str]:
    """Standard errors of position, already texts, marked where the study's own was put for a missing one."""
    if not has(collars, "sigma_assumed", "position_sigma_m") or not collars["sigma_assumed"].any():
        return collars, ""
    marked = [
        f"{text} (assumed)" if assumed else text
        for text, assumed in zip(collars["position_sigma_m"], collars["sigma_assumed"])
    ]
    count = int(collars["sigma_assumed"].sum())
    note = f"Assumed: {count} of {len(collars)} collars came without a standard error and carry that of the study."
    return collars.assign(position_sigma_m=marked), note


def _collar_policy(collars: pd.DataFrame | None, shift_m: float) -> str:
    """What was done to the elevations of the collars."""
    kept = "the delivered elevations are kept in the data files."
    if collars is not None and has(collars, "dz_m", "dz_after_m") and not shift_m:
        known = collars["dz_m"].notna()
        if (collars.loc[known, "dz_after_m"].abs() < 1e-9).all() and (
            collars.loc[known, "dz_m"].abs() > 1e-9
        ).any():
            return f"Each collar was put on the seafloor below it; {kept}"
    return f"Shift applied to all collars: {shift_m:+.2f} m; {kept}"


def _recovery(data: ReportData) -> list[Block]:
    e = data.evidence
    blocks: list[Block] = [Heading("Core recovery and lost core"), Slot(("recovery",))]
    bias = e.recovery_bias
    if bias is not None and has(bias, "n") and not bias["n"].any():
        blocks.append(
            Paragraph("No recovery is given with the grades: whether grade goes with it cannot be judged.")
        )
    else:
        with_table(
            blocks, bias, "Grade against recovery: rank correlation", most=40,
            labels={"mean_low": "Mean where recovery is low", "mean_high": "Mean where recovery is high",
                    "biased": "Link seen, all tests together",
                    "not_excluded": "Bias not excluded by the test alone (classes go by this)"},
        )  # fmt: skip
    blocks.append(Slot(("lost_core",)))
    runs = _spaced(e.lost_core)
    if runs is not None and len(runs):
        above = [c for c in runs.columns if str(c).endswith("_above_cutoff")]
        with_table(
            blocks, runs.drop(columns=above), "Treatments of lost core, through to tonnes and block grades"
        )
        if above:
            part = runs[["treatment", *above]].rename(
                columns={c: c.removesuffix("_above_cutoff") for c in above}
            )
            with_table(blocks, part, f"Treatments of lost core, blocks at {data.cutoff_text}")
    made = e.lost_core_composites
    if made is not None and has(made, "treatment", "domain"):
        metals = [m for m in data.subject.metals if m in made]
        columns = ["treatment", "domain", "n", "length_m", *metals, *(f"{m}_cv" for m in metals)]
        labels = {f"{m}_cv": f"CV of {m.partition('_')[0].capitalize()}" for m in metals}
        title = "Treatments of lost core, composites (means by length)"
        with_table(blocks, _spaced(made), title, columns=columns, most=40, labels=labels)
    return blocks


def _composites(data: ReportData) -> list[Block]:
    e = data.evidence
    blocks: list[Block] = [Heading("Composites")]
    if e.composite_rule:
        rule = e.composite_rule.rstrip(". ")
        blocks.append(Paragraph(rule[:1].upper() + rule[1:] + "."))
    with_table(blocks, _worded(e.composite_audit), "From intervals to composites")
    with_table(
        blocks, e.statistics, f"Statistics of the composites, weighted by {e.weighting}",
        note="Percentiles and the median count each composite alike. Declustered means, which the estimate is held"
        " against, stand with its checks.",
        labels={"mean": f"Mean, by {e.weighting}", **QUANTILES},
    )  # fmt: skip
    blocks.append(Slot(("histograms",)))
    with_table(
        blocks, e.lognormal, "Lognormal estimators of the mean, each composite alike", labels=LOGNORMAL
    )
    with_table(
        blocks, chosen_cells(e.declustering_scan), "Declustering: cells chosen", most=16,
        labels={"mean": "Mean, declustered"},
    )  # fmt: skip
    return blocks


def _extremes(data: ReportData) -> list[Block]:
    e = data.evidence
    blocks: list[Block] = [Heading("Extreme grades"), Slot(("log_probability",)), Slot(("top_cuts",))]
    shown = cuts_shown(e.top_cuts)
    note = f"Means and spreads weighted by {e.weighting}; before and after the cut that the column names."
    with_table(blocks, shown, "Top cuts: proposed, and in use", most=60, note=note)
    return blocks


def _contacts_and_twins(data: ReportData) -> list[Block]:
    e = data.evidence
    blocks: list[Block] = [Heading("Contacts of domains"), Slot(("contacts",))]
    with_table(
        blocks, e.contact_verdicts, "Contacts of domains: hard or soft", most=40,
        labels={"n_first": "Count, first", "n_second": "Count, second", "ratio": "Second over first"},
    )  # fmt: skip
    blocks.append(Heading("Twins and clusters of holes"))
    with_table(blocks, e.twin_pairs, "Twin holes", most=20, labels={"dz_m": "Difference of elevation (m)"})
    with_table(
        blocks, e.twin_clusters, "Clusters: sites with more than one hole", most=20,
        labels={"holes": "Holes", "hole_ids": "Which", "spread_m": "Furthest from their middle (m)"},
    )  # fmt: skip
    if e.twins is not None and has(e.twins, "hole_a", "hole_b", "metal", "relative_pct"):
        wide = _twins_by_pair(e.twins, data.subject.metals)
        note = "First and second hole, and their difference over their mean (%), over the depths where both have grades."
        with_table(blocks, wide, "Twin holes: grades compared", most=20, note=note)
        blocks.append(Bullets(tuple(_spread(e.twins, metal) for metal in dict.fromkeys(e.twins["metal"]))))
    return blocks


def _twins_by_pair(twins: pd.DataFrame, metals: tuple[str, ...]) -> pd.DataFrame:
    """One row a pair, the metals beside one another as ``a | b (difference)``."""
    rows = []
    for (one, two), part in twins.groupby(["hole_a", "hole_b"], sort=False):
        by = part.set_index("metal")
        row = {"hole_a": one, "hole_b": two, "shared_m": float(part["shared_m"].max())}
        for metal in metals:
            if metal in by.index:
                item = by.loc[metal]
                off = f"{item['relative_pct']:+.0f} %".replace("-", "−")
                row[metal] = f"{number_text(item['mean_a'])} and {number_text(item['mean_b'])} ({off})"
        rows.append(row)
    return pd.DataFrame(rows)


def _spread(twins: pd.DataFrame, metal: str) -> str:
    from sms_resource.units import column_element, element_label

    off = twins.loc[twins["metal"] == metal, "relative_pct"].dropna().abs()
    name = element_label(metal) if column_element(metal) else metal
    middle = float(np.median(off)) if len(off) else float("nan")
    return f"{name}: twins differ by {number_text(middle, 2)} % in the median of {len(off)} pairs."


def _surface(data: ReportData) -> list[Block]:
    e = data.evidence
    blocks: list[Block] = [
        Heading("Surface samples"),
        Paragraph(f"Use of the surface samples: {e.surface_use.rstrip('. ') or 'kept out of the estimate'}."),
    ]
    with_table(
        blocks,
        _spaced(e.surface_bias, "sample_type"),
        "Surface samples against core",
        most=40,
        labels=SURFACE,
    )
    blocks.append(Slot(("surface_against_core",)))
    with_table(
        blocks, e.dredge_tracks, "Dredges: tracks, never points", digits=4,
        columns=("dredge_id", "length_m", "azimuth", "rise_m", "half_length_m"),
        labels={"dredge_id": "Dredge", "length_m": "Length of the track (m)", "azimuth": "Azimuth (°)",
                "rise_m": "Rise (m)", "half_length_m": "Spread to each side of its middle (m)"},
        note="The rock of a dredge may come from anywhere along its track; no dredge is compared with core or estimated"
        " from.",
    )  # fmt: skip
    return blocks


def _density_and_metals(data: ReportData) -> list[Block]:
    e = data.evidence
    blocks: list[Block] = [Heading("Density")]
    with_table(
        blocks, e.density_by_domain, "Density by domain",
        labels={"n": "Measured", "water_tpm3": "Water in the pores (t/m³)"},
    )  # fmt: skip
    blocks.append(Slot(("density",)))
    blocks.append(Heading("Metal associations"))
    with_table(
        blocks, associations_shown(e.associations, data.subject.metals), "Correlations and ratios", most=12
    )
    blocks.append(Slot(("tracers",)))
    if e.tracers is not None and has(e.tracers, "ratio", "whole"):
        whole = e.tracers[e.tracers["whole"].astype(bool)].drop(columns="whole")
        with_table(
            blocks, whole.assign(ratio=[_ratio_name(name) for name in whole["ratio"]]), "Tracers over the whole depth",
            labels={"p25": "25th percentile", "p75": "75th percentile", "spearman": "Rank correlation with depth",
                    "geometric_mean": "Geometric mean (ratio by mass)", "threshold": "Threshold of the study",
                    "share_above_pct": "Share above it (%)"},
        )  # fmt: skip
    with_table(
        blocks, e.deleterious, "Deleterious elements (composites in the body)", most=20,
        labels={"mean": "Mean, by length", "p90": "90th percentile"},
    )  # fmt: skip
    return blocks


def _ratio_name(name: str) -> str:
    return "/".join(part.capitalize() for part in str(name).split("/"))


def _worded(frame: pd.DataFrame | None) -> pd.DataFrame | None:
    """Quantities as a person reads them: ``cu_pct x length_m`` becomes ``Cu (%) x length (m)``."""
    if frame is None or not has(frame, "quantity"):
        return frame
    words = [
        " x ".join(_lower(column_label(part), number) for number, part in enumerate(str(name).split(" x ")))
        for name in frame["quantity"]
    ]
    return frame.assign(quantity=words)


def _lower(text: str, number: int) -> str:
    return text[:1].lower() + text[1:] if number else text


def _fixed(frame: pd.DataFrame) -> pd.DataFrame:
    """Metres to the centimetre, as text: three figures of an elevation would hide what is compared."""
    named = [c for c in frame.columns if c.endswith("_m") or c.endswith("elevation")]
    made = {
        c: [f"{v:.2f}".replace("-", "−") if np.isfinite(v) else "–" for v in frame[c].astype(float)]
        for c in named
    }
    return frame.assign(**made)


def _spaced(frame: pd.DataFrame | None, column: str = "treatment") -> pd.DataFrame | None:
    """Names of a column without their underscores."""
    if frame is None or not has(frame, column):
        return frame
    return frame.assign(**{column: [str(name).replace("_", " ") for name in frame[column]]})
