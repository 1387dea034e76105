"""Cautions that a report carries: what always holds, and what the figures of this run set off.

Every caution prints the figures of its trigger. Where the data do not say, the caution is given, not withheld.
The list follows the CRIRSCO template (2019) and common practice; words are our own.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.elements import number_text
from sms_resource.reporting.rounding import is_inferred, mass_text
from sms_resource.reporting.tonnage import class_rows, rows_at_cutoff
from sms_resource.units import column_element, element_label

FEW_COMPOSITES = 50
FEW_HOLES = 10
FEW_DENSITIES = 10
LOW_RECOVERY_PCT = 80.0
SMALL_P = 0.05
ESTIMATORS_DIFFER_PCT = 5.0


@dataclass(frozen=True)
class Caution:
    """One caution. ``figures`` are the numbers of its trigger; ``always`` marks those that need none."""

    key: str
    title: str
    text: str
    figures: str
    always: bool = False


def all_cautions(data: ReportData) -> list[Caution]:
    """Cautions of this run in their order: what always holds first."""
    makers = (_always, _labels, _geometry, _samples, _quality, _grades, _estimate)
    return [caution for maker in makers for caution in maker(data)]


def _always(data: ReportData) -> Iterator[Caution]:
    subject = data.subject
    person = subject.competent_person.strip()
    signed = (
        f"Competent Person named in the study: {person}."
        if person and person != "not named"
        else "The study names no Competent Person."
    )
    yield Caution("draft", "Draft for a Competent Person",
                  "This is a draft prepared for a Competent Person, who signs and cannot delegate that. It certifies nothing.", signed, True)  # fmt: skip
    names = [str(name) for name in class_rows(rows_at_cutoff(data))["proposed_class"]]
    yield Caution("classes-proposed", "Classes are proposed", "Classes are suggested by the criteria of the study. The Competent Person decides, and may override them with a reason.",
                  f"Classes proposed: {', '.join(names) or 'none'}.", True)  # fmt: skip
    yield Caution("estimate-rounded", "An estimate, rounded", "All tonnes and grades are estimates, rounded to their confidence; totals may not add. Unrounded values are in the data files.",
                  f"{subject.significant_figures} significant figures; Inferred {subject.inferred_figures}, marked approximate.", True)  # fmt: skip
    yield Caution("no-economic-viability", "No demonstrated economic viability",
                  "Nothing here demonstrates economic viability. Lifting sulphide from the deep seabed is not an established practice at commercial scale, and that has to be disclosed.",
                  "The study contains no engineering study of lifting, processing or closure.", True)  # fmt: skip
    inputs = (data.record.manifest or {}).get("inputs") or ()
    yield Caution("effective-date", "Effective date and data", "The estimate holds for its effective date and for the data files whose hashes the manifest lists.",
                  f"Effective date: {subject.effective_date or 'not stated'}; {len(inputs)} input files hashed.", True)  # fmt: skip
    yield Caution("environment", "Environmental and social factors", "Environmental and social factors, and the conditions of any licence, are to be disclosed by the Competent Person; this tool does not judge them.",
                  f"Exclusion zones in the study: {len(data.body.exclusions) if data.body.exclusions is not None else 0}.", True)  # fmt: skip


def _labels(data: ReportData) -> Iterator[Caution]:
    subject = data.subject
    if not data.prospects_judged:
        given = subject.prospects or {}
        said = [key for key in ("judged_by", "basis") if str(given.get(key) or "").strip()]
        yield Caution("prospects-not-judged", "Reasonable prospects not judged",
                      "Nobody is named who judged the reasonable prospects for eventual economic extraction, and on what. Every table and figure of tonnes is a block-model tally.",
                      f"Of judge and basis, the study gives: {', '.join(said).replace('judged_by', 'judge') or 'neither'}.")  # fmt: skip
    rows = rows_at_cutoff(data)
    inferred = rows[rows["proposed_class"].map(is_inferred)]
    total = float(class_rows(rows)["dry_tonnes"].sum())
    if len(inferred) and float(inferred["dry_tonnes"].sum()) > 0:
        tonnes = float(inferred["dry_tonnes"].sum())
        share = 100 * tonnes / total if total else float("nan")
        yield Caution("inferred", "Inferred material", "For Inferred material continuity is only implied by limited sampling. It may not become Indicated with further work, and it should not carry an economic study.",
                      f"{mass_text(tonnes, 'dry', figures=subject.inferred_figures, approximate=True)}, {share:.0f} % of the dry tonnes at {data.cutoff_text}.")  # fmt: skip
    for flag in data.classes.flags:
        yield Caution("class-flag", "About the proposed classes", flag, "See the table of proposed classes.")
    if data.classes.exploration_target:
        target = data.classes.exploration_target
        low, high = float(target.get("dry_tonnes_low", np.nan)), float(target.get("dry_tonnes_high", np.nan))
        yield Caution("exploration-target", "Exploration target",
                      "The quantity and grade of an exploration target are conceptual. There has been insufficient exploration to estimate a resource, and it is uncertain whether further exploration will result in one.",
                      f"{mass_text(low, 'dry')} to {mass_text(high, 'dry')}.")  # fmt: skip
    if subject.jurisdiction:
        area = subject.jurisdiction == "area"
        words = ("The site is taken to lie in the Area: the reporting standard of the International Seabed Authority applies (ISBA/21/LTC/15, annex V)." if area else
                 "The site is taken to lie in waters under national jurisdiction: the rules of the coastal State and of any exchange apply.")  # fmt: skip
        yield Caution(
            "jurisdiction",
            "Jurisdiction",
            words,
            f"Jurisdiction in the study: {subject.jurisdiction}; standard: {subject.reporting_standard or 'not stated'}.",
        )
    else:
        yield Caution(
            "jurisdiction",
            "Jurisdiction not stated",
            "Whether the site lies in the Area or in national waters changes which standard rules; the study does not say.",
            "Jurisdiction in the study: not stated.",
        )
    if subject.site_visit is None or not any(str(v).strip() for v in subject.site_visit.values()):
        yield Caution(
            "no-site-visit",
            "No site visit",
            "The study records no site visit. A reason, or a visit to the vessel, the core and the laboratory, is for the Competent Person to give.",
            "Site visits recorded: 0.",
        )
    equivalent = data.value.equivalent
    if equivalent:
        yield Caution("equivalent", "Metal equivalent", "A metal equivalent stands on the prices, recoveries and payabilities printed with it, and on the statement that each metal can be recovered and sold.",
                      f"Formula: {equivalent.get('formula', 'not stated')}.")  # fmt: skip
    sensitivity = _cutoff_sensitivity(data)
    if sensitivity:
        yield Caution(
            "cutoff-sensitivity",
            "Sensitivity to the cut-off",
            "Tonnes and grade depend on the cut-off, and a cut-off alone selects as if every block could be lifted by itself.",
            sensitivity,
        )


def _cutoff_sensitivity(data: ReportData) -> str:
    table, given = data.value.grade_tonnage, data.subject.cutoff or {}
    rows = rows_at_cutoff(data)
    if table is None or given.get("value") is None or not len(rows) or not has(table, "cutoff"):
        return ""
    same = table[table["cutoff_variable"] == given.get("variable")] if "cutoff_variable" in table else table
    cutoffs = np.sort(same["cutoff"].astype(float).unique())
    here = float(given["value"])
    parts = []
    for wanted in (0.75 * here, 1.25 * here):
        if not len(cutoffs):
            continue
        near = float(cutoffs[np.argmin(np.abs(cutoffs - wanted))])
        if abs(near - here) < 1e-12:
            continue
        other = ReportData(subject=_with_cutoff(data, near), value=data.value)
        before, after = _all_tonnes(rows), _all_tonnes(rows_at_cutoff(other))
        if before:
            parts.append(
                f"at {near:g} instead of {here:g}, dry tonnes change by {100 * (after / before - 1):+.0f} %"
            )
    return (
        ("Cut-off " + data.cutoff_text + ": " + "; ".join(parts) + ".")
        if parts
        else f"Cut-off {data.cutoff_text}; no other cut-off was tabled."
    )


def _with_cutoff(data: ReportData, value: float) -> Any:
    from dataclasses import replace

    return replace(data.subject, cutoff={**(data.subject.cutoff or {}), "value": value})


def _all_tonnes(rows: pd.DataFrame) -> float:
    total = rows[rows["proposed_class"].astype(str).str.lower() == "all"]
    return float(total["dry_tonnes"].sum() if len(total) else rows["dry_tonnes"].sum())


def _geometry(data: ReportData) -> Iterator[Caution]:
    volumes, extrapolation = data.body.volumes or {}, data.body.extrapolation or {}
    whole = float(volumes.get("volume_m3", np.nan))
    sideways, downwards = (float(volumes.get(key, 0.0)) for key in ("sideways_m3", "downwards_m3"))
    if sideways + downwards > 0 or extrapolation:
        share = (
            100 * (sideways + downwards) / whole if whole else float(extrapolation.get("share_pct", np.nan))
        )
        yield Caution("extrapolation", "Extrapolation", "Part of the body lies beyond the drilled part, sideways of the holes or below their ends.",
                      f"{number_text(share)} % of the volume ({number_text(sideways)} m³ sideways, {number_text(downwards)} m³ downwards); greatest distance "
                      f"{number_text(extrapolation.get('greatest_distance_m'))} m; basis: {extrapolation.get('basis') or 'not stated'}.")  # fmt: skip
    collars = data.evidence.collars
    if collars is not None and has(collars, "ended_in"):
        open_holes = int((collars["ended_in"].astype(str) == "sulphide").sum())
        if open_holes:
            yield Caution(
                "open-holes",
                "Holes that ended in sulphide",
                "Where a hole ended in sulphide the base of the body was not reached, and its depth is a lower bound.",
                f"{open_holes} of {len(collars)} holes ({100 * open_holes / len(collars):.0f} %).",
            )
    surface = data.evidence.surface
    if surface is not None and len(surface) and (collars is None or not len(collars)):
        yield Caution(
            "no-drilling",
            "No drilling below surface samples",
            "Surface samples without drilling beneath them can support no more than an exploration target.",
            f"{len(surface)} surface samples, 0 holes.",
        )
    if data.evidence.surface_use:
        yield Caution(
            "surface-used",
            "Surface samples used",
            "Surface samples are commonly richer than the body below them.",
            f"Use in this study: {data.evidence.surface_use}; {len(surface) if surface is not None else 0} samples.",
        )
    yield from _position(data)
    zones = data.body.exclusions
    if zones is not None and len(zones):
        kinds = zones["status"].astype(str).value_counts().sort_index()
        yield Caution(
            "exclusions",
            "Vents and set-aside zones",
            "Tonnes inside active vents, their buffers, preservation or set-aside zones are shown as excluded, not dropped.",
            "; ".join(f"{kind.replace('_', ' ')}: {count}" for kind, count in kinds.items()) + ".",
        )


def _position(data: ReportData) -> Iterator[Caution]:
    collars, grid = data.evidence.collars, data.estimation.grid
    if collars is not None and has(collars, "position_sigma_m") and grid is not None:
        sigma = float(collars["position_sigma_m"].max())
        half = 0.5 * float(min(grid["size"][0], grid["size"][1]))
        if not np.isfinite(sigma):
            yield Caution(
                "position",
                "Position not stated",
                "The standard error of the collar positions is not stated.",
                f"Half a block: {number_text(half)} m; sigma: not stated.",
            )
        elif sigma > half:
            yield Caution(
                "position",
                "Position uncertain against the blocks",
                "Holes may lie in a neighbouring block.",
                f"Largest position sigma {number_text(sigma)} m; half a block {number_text(half)} m.",
            )
    if collars is not None and has(collars, "dz_m"):
        dz = collars["dz_m"].dropna().abs()
        flagged = int(collars["flagged"].sum()) if "flagged" in collars else int((dz > 1).sum())
        shift = data.evidence.collar_shift_m or 0.0
        if flagged or abs(shift) > 0:
            yield Caution("collars", "Collars off the seafloor", "Collars and bathymetry disagree; what was done about it is a decision of the study.",
                          f"{flagged} of {len(collars)} collars flagged; median difference {float(collars['dz_m'].median()):+.2f} m; shift applied to all collars {shift:+.2f} m.")  # fmt: skip
    if collars is not None and has(collars, "assumed_vertical") and collars["assumed_vertical"].any():
        count = int(collars["assumed_vertical"].sum())
        yield Caution(
            "assumed-vertical",
            "Holes assumed vertical",
            "Holes without a survey are taken as vertical; strings up to 10 degrees off have been measured at sea, 3.5 m sideways at 20 m.",
            f"{count} of {len(collars)} holes.",
        )


def _samples(data: ReportData) -> Iterator[Caution]:
    composites, runs = data.evidence.composites, data.evidence.runs
    count = 0 if composites is None else len(composites)
    holes = 0 if composites is None or "hole_id" not in composites else int(composites["hole_id"].nunique())
    if count < FEW_COMPOSITES or holes < FEW_HOLES:
        yield Caution(
            "few-samples",
            "Few composites or holes",
            "With so few samples the horizontal continuity cannot be inferred, and the estimate leans on assumptions.",
            f"{count} composites in {holes} holes (limits of this caution: {FEW_COMPOSITES} and {FEW_HOLES}).",
        )
    mean = float("nan")
    if runs is not None and has(runs, "recovery_pct", "from_m", "to_m"):
        length = (runs["to_m"] - runs["from_m"]).to_numpy(float)
        known = runs["recovery_pct"].notna().to_numpy() & (length > 0)
        mean = (
            float(np.average(runs["recovery_pct"].to_numpy(float)[known], weights=length[known]))
            if known.any()
            else mean
        )
    elif composites is not None and has(composites, "recovery_pct"):
        mean = float(composites["recovery_pct"].mean())
    bias = data.evidence.recovery_bias
    linked = (
        bias[(bias["p_value"] < SMALL_P)]
        if bias is not None and has(bias, "p_value", "spearman", "metal")
        else None
    )
    low = np.isfinite(mean) and mean < LOW_RECOVERY_PCT
    if low or not np.isfinite(mean) or (linked is not None and len(linked)):
        said = (
            f"Mean recovery, weighted by length: {mean:.0f} % (limit {LOW_RECOVERY_PCT:.0f} %)."
            if np.isfinite(mean)
            else "Recovery was not recorded."
        )
        if linked is not None and len(linked):
            said += (
                " Grade goes with recovery: "
                + "; ".join(
                    f"{element_label(r['metal'])} in {r.get('domain', 'all')}: ρ {r['spearman']:+.2f}, p {r['p_value']:.2g}"
                    for r in linked.head(6).to_dict("records")
                )
                + "."
            )
        yield Caution(
            "recovery",
            "Core recovery",
            "Core is lost selectively, and the sign of the bias is not known beforehand.",
            said,
        )
    bracket = data.evidence.lost_core
    if bracket is not None and has(bracket, "treatment"):
        rows = (
            bracket[bracket["domain"] == "all"]
            if "domain" in bracket and (bracket["domain"] == "all").any()
            else bracket
        )
        words = [
            f"{element_label(m)} {number_text(rows[m].min())} to {number_text(rows[m].max())}"
            for m in data.subject.metals
            if m in rows and rows[m].notna().any()
        ]
        if words:
            yield Caution(
                "lost-core",
                "What lost core may hold",
                "The treatments of lost core give a bracket of mean grade; the estimate uses one of them.",
                f"Mean of composites: {'; '.join(words)}. In use: {data.evidence.lost_core_default.replace('_', ' ')}.",
            )
    if data.evidence.handheld_used:
        yield Caution(
            "handheld",
            "Handheld readings used",
            "Handheld X-ray readings are made for the deck, not for an estimate.",
            "The study lets them in.",
        )


def _quality(data: ReportData) -> Iterator[Caution]:
    verdicts = data.evidence.laboratory.verdicts
    if verdicts is None or not has(verdicts, "element", "aspect", "verdict"):
        yield Caution(
            "quality-missing",
            "Laboratory quality not shown",
            "No reference materials, blanks or duplicates were given; the assays stand unproved.",
            "Laboratory inserts in the study: 0.",
        )
    else:
        bad = verdicts[verdicts["verdict"].isin(["failed", "missing", "caution"])]
        if len(bad):
            said = "; ".join(
                f"{r['element']} {r['aspect']}: {r['verdict']} ({r.get('figures', '')})"
                for r in bad.head(14).to_dict("records")
            )
            yield Caution(
                "quality",
                "Laboratory quality",
                "Some of the laboratory checks failed, need care, or are missing.",
                said + ("." if len(bad) <= 14 else f"; and {len(bad) - 14} more."),
            )
    density = data.evidence.density_by_domain
    if density is None or not has(density, "domain", "dry_base"):
        yield Caution(
            "density",
            "Density not shown",
            "No measured densities are shown; tonnes stand on assumed densities.",
            "Densities measured: not stated.",
        )
    elif "n" in density:
        few = density[density["n"].fillna(0) < FEW_DENSITIES]
        if len(few):
            said = "; ".join(
                f"{r['domain']}: {int(r['n'] or 0)} measured, dry {number_text(r['dry_base'])} t/m³ ({r.get('basis', '')})"
                for r in few.to_dict("records")
            )
            yield Caution(
                "density",
                "Density assumed or few",
                f"Domains with fewer than {FEW_DENSITIES} measured densities carry their uncertainty straight into tonnes.",
                said + ".",
            )


def _grades(data: ReportData) -> Iterator[Caution]:
    cuts = data.evidence.top_cuts
    if cuts is not None and has(cuts, "metal", "domain", "cut") and cuts["cut"].notna().any():
        rows = cuts[cuts["cut"].notna()]
        said = "; ".join(f"{element_label(r['metal'])} in {r['domain']} cut at {number_text(r['cut'])}: {int(r.get('n_cut', 0) or 0)} of {int(r.get('n', 0) or 0)} composites, "
                         f"{number_text(r.get('metal_removed_pct', np.nan))} % of metal removed, mean {number_text(r.get('mean_before', np.nan))} uncapped, {number_text(r.get('mean_after', np.nan))} capped"
                         for r in rows.head(12).to_dict("records"))  # fmt: skip
        yield Caution("top-cut", "Top cuts", "Extreme grades were cut before the estimate.", said + ".")
    missing = [c for c in data.subject.deleterious if c not in data.subject.deleterious_estimated]
    named = {"as", "hg", "sb", "pb"}
    known = {str(column_element(c)) for c in (*data.subject.deleterious_estimated, *data.subject.metals)}
    absent = sorted(named - known)
    if absent or missing:
        extra = (
            f" Summarised but not estimated: {', '.join(element_label(c) for c in missing)}."
            if missing
            else ""
        )
        yield Caution(
            "deleterious",
            "Deleterious elements not estimated",
            "Arsenic, mercury, antimony and lead can decide whether a concentrate sells.",
            f"Not estimated: {', '.join(name.capitalize() for name in absent) or 'none of these'}.{extra}",
        )


def _estimate(data: ReportData) -> Iterator[Caution]:
    grid = data.estimation.grid
    size = " x ".join(f"{float(s):g}" for s in grid["size"]) + " m" if grid else "not stated"
    yield Caution(
        "smoothing",
        "Kriging smooths",
        "Block estimates are smoother than the rock. Tonnes and grade are at block support, without dilution or loss unless said.",
        f"Block size: {size}.",
        True,
    )
    for record in data.variograms:
        if record.assumed or record.bounds_hit:
            said = "; ".join((*record.assumed, *(f"bound hit: {b}" for b in record.bounds_hit)))
            yield Caution("continuity-assumed", f"Continuity partly assumed: {element_label(record.metal) if column_element(record.metal) else record.metal}, {record.domain}",
                          "Part of the variogram is assumed rather than inferred from the samples.", f"{said} ({record.sample_count} composites in {record.hole_count} holes).")  # fmt: skip
    others = data.estimation.estimators
    if others is not None and has(others, "metal"):
        names = [
            c
            for c in others.columns
            if c not in ("metal", "domain") and pd.api.types.is_numeric_dtype(others[c])
        ]
        reference = "ordinary_kriging" if "ordinary_kriging" in names else (names[0] if names else "")
        found = []
        for row in others.to_dict("records"):
            for name in names:
                change = (
                    100 * (row[name] / row[reference] - 1) if reference and row[reference] else float("nan")
                )
                if name != reference and np.isfinite(change) and abs(change) > ESTIMATORS_DIFFER_PCT:
                    found.append(
                        f"{element_label(row['metal']) if column_element(str(row['metal'])) else row['metal']} by {name.replace('_', ' ')}: {change:+.1f} %"
                    )
        if found:
            yield Caution(
                "estimators-differ",
                "Another estimator differs",
                f"Another estimator of the same mean differs by more than {ESTIMATORS_DIFFER_PCT:.0f} %.",
                "; ".join(found) + ".",
            )
    checks = data.estimation.checks
    if checks is not None and has(checks, "check", "verdict"):
        bad = checks[checks["verdict"].isin(["fail", "failed", "flag"])]
        if len(bad):
            said = "; ".join(
                f"{r['check']} ({r.get('subject', '')}): {r.get('value', '')}, limit {r.get('limit', '')}: {r['verdict']}"
                for r in bad.to_dict("records")
            )
            yield Caution(
                "validation",
                "A check of the estimate failed or was flagged",
                "See the section on the estimate and its checks.",
                said + ".",
            )
    elif checks is None:
        yield Caution(
            "validation",
            "Checks of the estimate not shown",
            "No table of checks came with this estimate.",
            "Checks: 0.",
        )
