"""Answers to the checklist on the estimate itself."""

from __future__ import annotations

from typing import Literal

import numpy as np

from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.elements import cell_text, number_text
from sms_resource.reporting.rounding import mass_text
from sms_resource.reporting.tonnage import class_rows, rows_at_cutoff
from sms_resource.units import column_element, element_label

Status = Literal["answered", "not applicable", "for the Competent Person"]
Answer = tuple[Status, str]
ANSWERED: Status = "answered"
NONE: Status = "not applicable"
PERSON: Status = "for the Competent Person"


def _metal(column: str) -> str:
    return element_label(column).rpartition(" (")[0] if column_element(column) else str(column)


_UNIT_WORDS = {"m": "(m)", "m2": "(m²)", "m3": "(m³)", "pct": "(%)", "deg": "(°)"}


def _criterion(key: str) -> str:
    """A key of the study in words, its unit in brackets: ``indicated_within_m`` becomes ``indicated within (m)``."""
    words = str(key).split("_")
    return " ".join([*words[:-1], _UNIT_WORDS.get(words[-1], words[-1])])


def _chosen(value: object) -> str:
    """A chosen value as its person would write it: 0.6 and not 0.600; an empty list says so."""
    if isinstance(value, float) and np.isfinite(value):
        return f"{value:g}"
    return cell_text(value) or "none"


def database(data: ReportData) -> Answer:
    """What the checks found."""
    counts = data.record.findings.counts()
    inputs = (data.record.manifest or {}).get("inputs") or ()
    return (
        ANSWERED,
        (
            f"Every input was checked on reading: {counts['error']} errors, {counts['warning']} warnings,"
            f" {counts['note']} notes; {len(inputs)} input files are held by their hashes in the manifest."
        ),
    )


def visits(data: ReportData) -> Answer:
    """Site visit as the study states it."""
    visit = data.subject.site_visit
    if visit is None or not any(str(v).strip() for v in visit.values()):
        return PERSON, "Needed: a site visit, or why none was made; the study records none."
    return ANSWERED, "; ".join(dict.fromkeys(str(v) for v in visit.values() if str(v).strip()))


def interpretation(data: ReportData) -> Answer:
    """How the body and its domains were made, and other cases."""
    body = data.body
    if not body.method and not body.volumes:
        return PERSON, "Needed: confidence in the interpretation, and what another would do."
    text = f"{body.method.rstrip('. ')}." if body.method else ""
    if data.evidence.composites is not None and "domain" in data.evidence.composites:
        text += f" Domains: {', '.join(sorted(data.evidence.composites['domain'].astype(str).unique()))}."
    change = body.geometry_uncertainty
    if change is not None and has(change, "case", "change_pct"):
        text += (
            " Other positions of base, seafloor and outline change dry tonnes of the body by"
            f" {change['change_pct'].min():+.1f} to {change['change_pct'].max():+.1f} %."
        )
    return ANSWERED, text.strip()


def dimensions(data: ReportData) -> Answer:
    """Extent and thickness."""
    outline, thickness = data.body.outline, data.body.thickness
    if outline is None:
        return PERSON, "Needed: length, width and depth of the body."
    x0, y0, x1, y1 = outline.bounds
    text = f"{x1 - x0:.0f} m east to west, {y1 - y0:.0f} m north to south, {outline.area:.0f} m² in plan"
    if thickness is not None and np.isfinite(thickness.values).any():
        inside = thickness.values[np.isfinite(thickness.values) & (thickness.values > 0)]
        if inside.size:
            text += (
                f"; thickness {np.mean(inside):.1f} m in the mean, {np.max(inside):.1f} m at most; it crops"
                " out at the seafloor"
            )
    return ANSWERED, text + "."


def estimation(data: ReportData) -> Answer:
    """Settings, extrapolation, checks."""
    settings = data.estimation.settings
    if not settings:
        return PERSON, "Needed: the estimation technique and its parameters."
    text = "; ".join(f"{k.lower()}: {cell_text(v)}" for k, v in settings.items()) + "."
    greatest = (data.body.extrapolation or {}).get("greatest_distance_m")
    if greatest is not None:
        text += f" Greatest distance of extrapolation {number_text(greatest)} m."
    missing = [c for c in data.subject.deleterious if c not in data.subject.deleterious_estimated]
    if missing:
        text += f" Not estimated: {', '.join(_metal(c) for c in missing)}."
    checks = data.estimation.checks
    if checks is not None and has(checks, "verdict"):
        text += f" {len(checks)} checks, {int((checks['verdict'] == 'pass').sum())} passed."
    return ANSWERED, text


def moisture(data: ReportData) -> Answer:
    """Dry and wet."""
    rows = rows_at_cutoff(data)
    total = rows[rows["proposed_class"].astype(str).str.lower() == "all"]
    text = "Tonnes are given dry and wet; grades are on dry mass."
    if len(total) and has(total, "wet_tonnes") and float(total["wet_tonnes"].iloc[0]) > 0:
        dry, wet = float(total["dry_tonnes"].iloc[0]), float(total["wet_tonnes"].iloc[0])
        text += (
            f" At {data.cutoff_text}: {mass_text(dry, 'dry')}, {mass_text(wet, 'wet')}; water and salt are"
            f" {100 * (1 - dry / wet):.1f} % of the wet mass."
        )
    return ANSWERED, text


def cutoff(data: ReportData) -> Answer:
    """The cut-off and its basis."""
    given = data.subject.cutoff or {}
    basis = str(given.get("basis") or "").strip()
    if not basis:
        return PERSON, f"Needed: the basis of the cut-off. In the study: {data.cutoff_text}, no basis stated."
    return (
        ANSWERED,
        (
            f"{data.cutoff_text}; basis: {basis}; {given.get('currency') or 'no currency'},"
            f" {given.get('date') or 'no date'}. Tonnes over a range of cut-offs stand in the report."
        ),
    )


def mining(data: ReportData) -> Answer:
    """Screens; method and dilution are left."""
    steps = data.body.waterfall
    text = (
        "Needed: lifting method, least mining dimensions, dilution and loss, and that the practice is"
        " untested at commercial scale."
    )
    if steps is not None and has(steps, "step", "dry_tonnes", "kind"):
        taken = steps[steps["kind"].astype(str) == "taken"]
        said = "; ".join(
            f"{r['step']} {mass_text(abs(r['dry_tonnes']), 'dry')}" for r in taken.to_dict("records")
        )
        text += f" Screens in the study: {said or 'none'}."
        skins = steps[steps["kind"].astype(str) == "skin"]
        said = "; ".join(
            f"{r['step']} {mass_text(abs(r['dry_tonnes']), 'dry')}" for r in skins.to_dict("records")
        )
        text += f" Loss and dilution in the study: {said or 'none'}."
    return PERSON, text


def metallurgy(data: ReportData) -> Answer:
    """Recoveries as the study states them."""
    table = (data.value.equivalent or {}).get("table")
    text = "Needed: metallurgical test work."
    if table is not None and has(table, "metal", "recovery_pct"):
        text += (
            " Recoveries in the study: "
            + "; ".join(
                f"{_metal(r['metal'])} {number_text(r['recovery_pct'])} %"
                + (f" ({r['recovery_basis']})" if r.get("recovery_basis") else "")
                for r in table.to_dict("records")
            )
            + "."
        )
    return PERSON, text


def environment(data: ReportData) -> Answer:
    """Zones; impact assessment is left."""
    zones = data.body.exclusions
    text = "Needed: plume, fauna and waste assumptions, and the state of any impact assessment."
    if zones is not None and len(zones):
        counts = zones["status"].astype(str).value_counts().sort_index()
        text += (
            " Zones in the study: " + "; ".join(f"{n} {k.replace('_', ' ')}" for k, n in counts.items()) + "."
        )
    return PERSON, text


def density(data: ReportData) -> Answer:
    """Densities by domain with counts and basis."""
    used = data.evidence.density_by_domain
    if used is None or not has(used, "domain", "dry_base"):
        return PERSON, "Needed: measured bulk densities and how pores were filled when they were measured."
    said = "; ".join(
        f"{r['domain']}: dry {number_text(r['dry_base'])} t/m³, wet {number_text(r.get('wet_base', np.nan))}"
        f" t/m³, {int(r.get('n', 0) or 0)} measured ({r.get('basis', 'basis not stated')})"
        for r in used.to_dict("records")
    )
    return ANSWERED, said + "."


def classification(data: ReportData) -> Answer:
    """Criteria; the judgement is left."""
    criteria = data.classes.criteria
    said = (
        "; ".join(f"{_criterion(k)}: {_chosen(v)}" for k, v in criteria.items())
        if criteria
        else "none in the study"
    )
    rows = class_rows(rows_at_cutoff(data))
    names = ", ".join(str(n) for n in rows["proposed_class"]) or "none"
    judged = "" if data.prospects_judged else " Reasonable prospects were not judged."
    return (
        PERSON,
        (
            f"Needed: whether the result reflects the Competent Person's view.{judged} Proposed: {names}."
            f" Criteria: {said}.{_target(data)}"
        ),
    )


def _target(data: ReportData) -> str:
    """The exploration target as ranges, with its caution."""
    target = data.classes.exploration_target
    if not target:
        return ""
    low, high = (mass_text(float(target[f"dry_tonnes_{end}"]), "dry") for end in ("low", "high"))
    return (
        f" Exploration target, not part of the estimate: {low} to {high}; conceptual, insufficient exploration to estimate"
        " a resource, and uncertain whether further exploration will result in one."
    )


def confidence(data: ReportData) -> Answer:
    """Geometry, lost core, leave-one-hole-out."""
    parts = []
    change = data.body.geometry_uncertainty
    if change is not None and has(change, "case", "change_pct"):
        parts.append(
            f"geometry moves dry tonnes of the body by {change['change_pct'].min():+.1f} to"
            f" {change['change_pct'].max():+.1f} %"
        )
    bracket = data.evidence.lost_core
    if bracket is not None and has(bracket, "treatment"):
        parts += [
            f"treatments of lost core put mean {element_label(m)} between {number_text(bracket[m].min())} and"
            f" {number_text(bracket[m].max())}"
            for m in data.subject.metals
            if m in bracket and bracket[m].notna().any()
        ]
    summary = data.estimation.leave_one_out_summary
    if summary is not None and has(summary, "metal", "slope"):
        rows = (
            summary[summary["domain"] == "all"]
            if "domain" in summary and (summary["domain"] == "all").any()
            else summary
        )
        parts.append(
            "slope of truth on estimate, own hole left out: "
            + ", ".join(f"{_metal(r['metal'])} {r['slope']:.2f}" for r in rows.head(8).to_dict("records"))
        )
    need = "Needed: the Competent Person's statement of relative accuracy."
    return PERSON, f"{need} From the study: {'; '.join(parts)}." if parts else need
