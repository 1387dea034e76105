"""Answers to the checklist on samples, holes and exploration results."""

from __future__ import annotations

from typing import Literal

import numpy as np

from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.elements import number_text
from sms_resource.reporting.summaries import cuts_in_use
from sms_resource.units import ELEMENTS, column_element, element_column, element_label

Status = Literal["answered", "not applicable", "for the Competent Person"]
Answer = tuple[Status, str]
ANSWERED: Status = "answered"
NONE: Status = "not applicable"
PERSON: Status = "for the Competent Person"


def _element(name: str) -> str:
    """An element as people write it, whichever way a table names it."""
    return _metal(element_column(name)) if name in ELEMENTS else _metal(name)


def _metal(column: str) -> str:
    return element_label(column).rpartition(" (")[0] if column_element(column) else str(column)


def sampling(data: ReportData) -> Answer:
    """Kinds and counts of samples."""
    e = data.evidence
    if e.composites is None or not len(e.composites):
        return PERSON, "Needed: nature and quality of sampling; the study holds no composites."
    kinds = ""
    if e.surface is not None and len(e.surface) and has(e.surface, "sample_type"):
        counts = e.surface["sample_type"].astype(str).value_counts().sort_index()
        use = e.surface_use.rstrip(". ") or "kept out of the estimate"
        said = ", ".join(f"{n} {str(k).replace('_', ' ')}" for k, n in counts.items())
        kinds = f"; surface samples: {said} ({use})"
    hand = (
        "Handheld readings entered the estimate."
        if e.handheld_used
        else "Handheld readings did not enter the estimate."
    )
    return ANSWERED, f"Drilled core, {len(e.composites)} composites{kinds}. {hand}"


def recovery(data: ReportData) -> Answer:
    """Mean recovery, its link with grade, and the treatment of lost core."""
    e = data.evidence
    if not has(e.runs, "recovery_pct", "from_m", "to_m") or e.runs is None:
        return (
            PERSON,
            "Needed: how recovery was measured, and whether grade goes with it; the study holds no runs.",
        )
    length = (e.runs["to_m"] - e.runs["from_m"]).to_numpy(float)
    known = e.runs["recovery_pct"].notna().to_numpy() & (length > 0)
    if not known.any():
        return PERSON, "Needed: recoveries; none of the runs carries one."
    values = e.runs["recovery_pct"].to_numpy(float)[known]
    text = (
        f"Mean recovery {np.average(values, weights=length[known]):.0f} % over {length[known].sum():.0f} m in"
        f" {known.sum()} runs; {100 * np.average(values < 50, weights=length[known]):.0f} % of the length is"
        " under 50 %."
    )
    bias = e.recovery_bias
    if bias is not None and has(bias, "metal", "p_adjusted", "spearman"):
        linked = bias[bias["p_adjusted"] < 0.05]
        text += f" Grade goes with recovery (adjusted p < 0.05) in {len(linked)} of {len(bias)} sets of metal and domain."
    return (
        ANSWERED,
        (
            f"{text} Treatment of lost core: {e.lost_core_default.replace('_', ' ')}; the other treatments"
            " are given as a bracket."
        ),
    )


def logging(data: ReportData) -> Answer:
    """What was logged."""
    rocks = data.evidence.lithology
    if rocks is None or not has(rocks, "hole_id", "from_m", "to_m", "code"):
        return PERSON, "Needed: whether core was logged to a detail that supports the estimate."
    length = float((rocks["to_m"] - rocks["from_m"]).sum())
    return (
        ANSWERED,
        (
            f"{rocks['hole_id'].nunique()} holes, {length:.0f} m logged with {rocks['code'].nunique()} codes."
            " Whether logging was qualitative, and photographs of core, are for the Competent Person."
        ),
    )


def preparation(data: ReportData) -> Answer:
    """Duplicates by stage; the rest is left."""
    duplicates = data.evidence.laboratory.duplicates
    need = "Needed: splitting of core, preparation, and grain size against sample size."
    if duplicates is None or not has(duplicates, "element", "stage", "n"):
        return PERSON, need
    column = next((c for c in ("cv_avg_pct", "cv_pct") if c in duplicates), None)
    said = [
        f"{r['element']} {r['stage']}: {int(r['n'])} pairs" + (f", CVavg {r[column]:.1f} %" if column else "")
        for r in duplicates.to_dict("records")
    ]
    return PERSON, f"{need} From the study, duplicates: {'; '.join(said)}."


def quality(data: ReportData) -> Answer:
    """Verdicts of the laboratory inserts."""
    verdicts = data.evidence.laboratory.verdicts
    if verdicts is None or not has(verdicts, "element", "aspect", "verdict"):
        return (
            PERSON,
            "Needed: reference materials, blanks, duplicates and check assays; the study holds none.",
        )
    made = verdicts[verdicts["verdict"] != "missing"]
    lacking = verdicts[verdicts["verdict"] == "missing"]
    said = [
        f"{_element(r['element'])} {r['aspect']}: {r['verdict']}"
        + (f" ({r['figures']})" if str(r.get("figures") or "").strip() else "")
        for r in made.to_dict("records")
    ]
    said += [
        f"no {aspect} for {', '.join(_element(name) for name in part['element'])}"
        for aspect, part in lacking.groupby("aspect", sort=False)
    ]
    return (ANSWERED if len(made) else PERSON), "; ".join(said) + "."


def verification(data: ReportData) -> Answer:
    """Twins and below-detection treatment."""
    twins = data.evidence.twins
    text = (
        "Needed: independent verification of significant intersections, and how data were entered and kept."
    )
    if twins is not None and has(twins, "hole_a", "hole_b"):
        pairs = len(twins[["hole_a", "hole_b"]].drop_duplicates())
        text += f" From the study: {pairs} pairs of twin holes are compared in the report."
    return PERSON, text


def location(data: ReportData) -> Answer:
    """Position methods, sigma, match with the seafloor, CRS and datum."""
    collars, subject = data.evidence.collars, data.subject
    if collars is None or not len(collars):
        return PERSON, "Needed: accuracy of positions; the study holds no collars."
    text = (
        f"{subject.crs or 'Coordinate system not stated'}; vertical datum:"
        f" {subject.vertical_datum or 'not stated'}."
    )
    if has(collars, "position_method", "position_sigma_m"):
        counts = collars.groupby(collars["position_method"].astype(str))["position_sigma_m"].agg(
            ["size", "max"]
        )
        text += (
            " Collars: "
            + "; ".join(
                f"{int(r['size'])} by {str(k).strip() or 'a method that is not stated'}, "
                + (
                    f"sigma to {number_text(float(r['max']))} m"
                    if np.isfinite(float(r["max"]))
                    else "sigma not stated"
                )
                for k, r in counts.iterrows()
            )
            + "."
        )
    if has(collars, "dz_m"):
        text += (
            f" Collars against the seafloor as delivered: median {collars['dz_m'].median():+.2f} m; shift"
            f" applied {data.evidence.collar_shift_m or 0.0:+.2f} m."
        )
    return ANSWERED, text


def nearest_holes(data: ReportData) -> float:
    """Median distance (m) from a hole to the hole next to it; NaN where there are not two."""
    collars = data.evidence.collars
    if collars is None or len(collars) < 2:
        return float("nan")
    places = collars[["easting", "northing"]].to_numpy(float)
    places = places[np.isfinite(places).all(axis=1)]
    if len(places) < 2:
        return float("nan")
    nearest = [np.partition(np.hypot(*(places - place).T), 1)[1] for place in places]
    return float(np.median(nearest))


def spacing(data: ReportData) -> Answer:
    """Spacing of holes and continuity."""
    distance = nearest_holes(data)
    if not np.isfinite(distance):
        return PERSON, "Needed: spacing of the data, and whether it supports the classes."
    composites = data.evidence.composites
    length = (
        f"; composites of {number_text(float(composites['length_m'].median()))} m (median)"
        if composites is not None and has(composites, "length_m")
        else ""
    )
    return (
        ANSWERED,
        (
            f"Median distance from a hole to the next: {number_text(distance)} m{length}. Whether that"
            " supports the proposed classes is judged in the section on continuity and by the Competent"
            " Person."
        ),
    )


def orientation(data: ReportData) -> Answer:
    """Holes that are taken as vertical."""
    collars = data.evidence.collars
    if collars is None or not has(collars, "assumed_vertical"):
        return PERSON, "Needed: orientation of holes against structure."
    count = int(collars["assumed_vertical"].sum())
    return (
        ANSWERED,
        (
            f"{count} of {len(collars)} holes carry no survey and are assumed vertical."
            " Steep feeder structures may be missed by vertical holes; that is for the Competent Person to"
            " discuss."
        ),
    )


def tenure(data: ReportData) -> Answer:
    """Jurisdiction and zones; licences are left."""
    zones = data.body.exclusions
    known = f"Jurisdiction in the study: {data.subject.jurisdiction or 'not stated'}."
    if zones is not None and len(zones):
        known += f" {len(zones)} zones with a status are in the study."
    return PERSON, f"Needed: type, number and holder of the licence or contract. {known}"


def holes(data: ReportData) -> Answer:
    """Where the collar table stands."""
    collars = data.evidence.collars
    if collars is None or not len(collars):
        return PERSON, "Needed: the table of holes."
    return (
        ANSWERED,
        f"{len(collars)} holes"
        + (f", {collars['length_m'].sum():.0f} m drilled" if "length_m" in collars else "")
        + "; positions, lengths and grades stand in the data files and as strip logs in the report.",
    )


def aggregation(data: ReportData) -> Answer:
    """Compositing, cuts and equivalents."""
    rule = data.evidence.composite_rule.rstrip(". ") or "Composites by length inside domains"
    text = f"{rule}; lost core: {data.evidence.lost_core_default.replace('_', ' ')}."
    cuts = cuts_in_use(data.evidence.top_cuts)
    if cuts is None:
        text += " No top cut."
    else:
        said = [
            f"{_metal(r['metal'])} in {r['domain']} at {number_text(r['cut'])}"
            for r in cuts.to_dict("records")
        ]
        text += f" Top cuts: {'; '.join(said)}."
    equivalent = data.value.equivalent
    text += (
        f" Metal equivalent: {equivalent.get('formula')}." if equivalent else " No metal equivalent is used."
    )
    return ANSWERED, text


def widths(data: ReportData) -> Answer:
    """Down-hole lengths against true widths."""
    return (
        ANSWERED,
        (
            "Intercepts are down-hole lengths through a body that drapes the seafloor; for a vertical hole"
            " on slopes of 15 to 30 degrees the true thickness is 3 to 13 % less than that length."
        ),
    )


def diagrams(data: ReportData) -> Answer:
    """Plans and sections."""
    return (
        ANSWERED,
        (
            "Plans with scale and north, sections with their exaggeration, and strip logs stand in the report"
            " and as files in the folder figures."
        ),
    )


def balance(data: ReportData) -> Answer:
    """All results are shown."""
    return (
        ANSWERED,
        (
            "All holes are shown, with lost core left blank; tonnes are given by class over a range of"
            " cut-offs; nothing is selected."
        ),
    )


def other(data: ReportData) -> Answer:
    """Surface samples, deleterious elements."""
    bias = data.evidence.surface_bias
    text = "Needed: geophysics, geotechnics, metallurgical tests."
    if bias is not None and has(bias, "metal", "ratio"):
        rows = (
            bias[bias["sample_type"] == "all"]
            if "sample_type" in bias and (bias["sample_type"] == "all").any()
            else bias
        )
        rows = rows[rows["ratio"].notna()]
        if len(rows):
            text += (
                " From the study, surface samples against nearest core: "
                + "; ".join(f"{_metal(r['metal'])} x{r['ratio']:.1f}" for r in rows.to_dict("records"))
                + "."
            )
    if data.subject.deleterious:
        text += f" Deleterious elements summarised: {', '.join(_metal(c) for c in data.subject.deleterious)}."
    return PERSON, text
