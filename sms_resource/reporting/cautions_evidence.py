"""Cautions that the samples, the positions and the body set off."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pandas as pd

from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.elements import Caution, number_text
from sms_resource.reporting.summaries import missing_checks
from sms_resource.units import chance, element_label

FEW_COMPOSITES = 50
FEW_HOLES = 10
FEW_DENSITIES = 10
LOW_RECOVERY_PCT = 80.0
SMALL_P = 0.05


def geometry(data: ReportData) -> Iterator[Caution]:
    """Extrapolation, open holes, surface samples, exclusions, and positions."""
    volumes, extrapolation = data.body.volumes or {}, data.body.extrapolation or {}
    whole = float(volumes.get("volume_m3", np.nan))
    sideways, downwards = (float(volumes.get(key, 0.0)) for key in ("sideways_m3", "downwards_m3"))
    if sideways + downwards > 0 or extrapolation:
        share = (
            100 * (sideways + downwards) / whole if whole else float(extrapolation.get("share_pct", np.nan))
        )
        yield Caution(
            "extrapolation",
            "Extrapolation",
            "Part of the body lies beyond the drilled part, sideways of the holes or below their ends.",
            f"{number_text(share)} % of the volume ({number_text(sideways)} m³ sideways,"
            f" {number_text(downwards)} m³ downwards); greatest distance"
            f" {number_text(extrapolation.get('greatest_distance_m'))} m; basis:"
            f" {extrapolation.get('basis') or 'not stated'}.",
        )
    collars = data.evidence.collars
    if collars is not None and has(collars, "ended_in"):
        open_holes = int((collars["ended_in"].astype(str) == "sulphide").sum())
        if open_holes:
            yield Caution(
                "open-holes",
                "Holes that ended in sulphide",
                "Where a hole ended in sulphide the base of the body was not reached, and its depth is a"
                " lower bound.",
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
            f"Use in this study: {data.evidence.surface_use.rstrip('. ')}; {len(surface) if surface is not None else 0}"
            " samples.",
        )
    yield from _position(data)
    zones = data.body.exclusions
    if zones is not None and len(zones):
        kinds = zones["status"].astype(str).value_counts().sort_index()
        yield Caution(
            "exclusions",
            "Vents and set-aside zones",
            "Tonnes inside active vents, their buffers, preservation or set-aside zones are shown as"
            " excluded, not dropped.",
            "; ".join(f"{kind.replace('_', ' ')}: {count}" for kind, count in kinds.items()) + ".",
        )


def _assumed_sigma(collars: pd.DataFrame) -> str:
    """How many collars carry the study's own standard error, in words; empty where none does."""
    count = int(collars["sigma_assumed"].sum()) if "sigma_assumed" in collars else 0
    return f" The sigma of {count} of {len(collars)} holes is the study's, assumed." if count else ""


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
                f"Largest position sigma {number_text(sigma)} m; half a block {number_text(half)} m."
                + _assumed_sigma(collars),
            )
    if collars is not None and has(collars, "dz_m"):
        dz = collars["dz_m"].dropna().abs()
        flagged = int(collars["flagged"].sum()) if "flagged" in collars else int((dz > 1).sum())
        shift = data.evidence.collar_shift_m or 0.0
        if flagged or abs(shift) > 0:
            yield Caution(
                "collars",
                "Collars off the seafloor",
                "Collars and bathymetry disagree; what was done about it is a decision of the study.",
                f"{flagged} of {len(collars)} collars flagged; median difference"
                f" {float(collars['dz_m'].median()):+.2f} m; shift applied to all collars {shift:+.2f} m.",
            )
    if collars is not None and has(collars, "assumed_vertical") and collars["assumed_vertical"].any():
        count = int(collars["assumed_vertical"].sum())
        yield Caution(
            "assumed-vertical",
            "Holes assumed vertical",
            "Holes without a survey are taken as vertical; strings up to 10 degrees off have been measured at"
            " sea, 3.5 m sideways at 20 m.",
            f"{count} of {len(collars)} holes.",
        )


def samples(data: ReportData) -> Iterator[Caution]:
    """Few samples, recovery, lost core, handheld readings."""
    composites, runs = data.evidence.composites, data.evidence.runs
    count = 0 if composites is None else len(composites)
    holes = 0 if composites is None or "hole_id" not in composites else int(composites["hole_id"].nunique())
    if count < FEW_COMPOSITES or holes < FEW_HOLES:
        yield Caution(
            "few-samples",
            "Few composites or holes",
            "With so few samples the horizontal continuity cannot be inferred, and the estimate leans on"
            " assumptions.",
            f"{count} composites in {holes} holes (limits of this caution: {FEW_COMPOSITES} and"
            f" {FEW_HOLES}).",
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
        bias[(bias["p_adjusted"] < SMALL_P)]
        if bias is not None and has(bias, "p_adjusted", "spearman", "metal")
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
                    f"{element_label(r['metal'])} in {r.get('domain', 'all')}: ρ {r['spearman']:+.2f}, "
                    f"{chance(r['p_adjusted'])} for all tests together"
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
                f"Mean of the blocks: {'; '.join(words)}. In use:"
                f" {data.evidence.lost_core_default.replace('_', ' ')}.",
            )
    if data.evidence.handheld_used:
        yield Caution(
            "handheld",
            "Handheld readings used",
            "Handheld X-ray readings are made for the deck, not for an estimate.",
            "The study lets them in.",
        )


def quality(data: ReportData) -> Iterator[Caution]:
    """Laboratory quality and density."""
    verdicts = data.evidence.laboratory.verdicts
    if verdicts is None or not has(verdicts, "element", "aspect", "verdict"):
        yield Caution(
            "quality-missing",
            "Laboratory quality not shown",
            "No reference materials, blanks or duplicates were given; the assays stand unproved.",
            "Laboratory inserts in the study: 0.",
        )
    else:
        bad = verdicts[verdicts["verdict"].isin(["failed", "caution"])]
        missing = missing_checks(verdicts)
        if len(bad) or missing:
            said = "; ".join(
                f"{str(r['element']).capitalize()} {r['aspect']}: {r['verdict']} ({r.get('figures', '')})"
                for r in bad.head(14).to_dict("records")
            )
            yield Caution(
                "quality",
                "Laboratory quality",
                "Some of the laboratory checks failed, need care, or are missing.",
                " ".join(
                    part
                    for part in (
                        said + ("." if len(bad) <= 14 else f"; and {len(bad) - 14} more.") if said else "",
                        *missing,
                    )
                    if part
                ),
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
                f"{r['domain']}: {int(r['n'] or 0)} measured, dry {number_text(r['dry_base'])} t/m³"
                f" ({r.get('basis', '')})"
                for r in few.to_dict("records")
            )
            yield Caution(
                "density",
                "Density assumed or few",
                f"Domains with fewer than {FEW_DENSITIES} measured densities carry their uncertainty straight"
                " into tonnes.",
                said + ".",
            )
