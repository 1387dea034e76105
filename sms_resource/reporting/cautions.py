"""Cautions that a report carries: what always holds, and what the figures of this run set off.

Every caution prints the figures of its trigger. Where the data do not say, the caution is given, not withheld.
The list follows the CRIRSCO template (2019) and common practice; words are our own.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from sms_resource.reporting import cautions_estimate, cautions_evidence
from sms_resource.reporting.data import ReportData
from sms_resource.reporting.elements import Caution, element_words
from sms_resource.reporting.rounding import is_inferred, mass_text
from sms_resource.reporting.style import class_name
from sms_resource.reporting.tonnage import class_rows, rows_at_cutoff


def all_cautions(data: ReportData) -> list[Caution]:
    """Cautions of this run in their order: what always holds first."""
    makers = (
        _always,
        _labels,
        cautions_evidence.geometry,
        cautions_evidence.samples,
        cautions_evidence.quality,
        cautions_estimate.grades,
        cautions_estimate.estimate,
    )
    return [caution for maker in makers for caution in maker(data)]


def _always(data: ReportData) -> Iterator[Caution]:
    subject = data.subject
    person = subject.competent_person.strip()
    signed = (
        f"Competent Person named in the study: {person}."
        if person and person != "not named"
        else "The study names no Competent Person."
    )
    yield Caution(
        "draft",
        "Draft for a Competent Person",
        "This is a draft prepared for a Competent Person, who signs and cannot delegate that. It certifies"
        " nothing.",
        signed,
        True,
    )
    names = [class_name(name) for name in class_rows(rows_at_cutoff(data))["proposed_class"]]
    yield Caution(
        "classes-proposed",
        "Classes are proposed",
        "Classes are suggested by the criteria of the study. The Competent Person decides, and may override"
        " them with a reason.",
        f"Classes proposed: {', '.join(names) or 'none'}.",
        True,
    )
    yield Caution(
        "estimate-rounded",
        "An estimate, rounded",
        "All tonnes and grades are estimates, rounded to their confidence; totals may not add. Unrounded"
        " values are in the data files.",
        f"{subject.significant_figures} significant figures; Inferred {subject.inferred_figures}, marked"
        " approximate.",
        True,
    )
    yield Caution(
        "no-economic-viability",
        "No demonstrated economic viability",
        "Nothing here demonstrates economic viability. Lifting sulphide from the deep seabed is not an"
        " established practice at commercial scale, and that has to be disclosed.",
        "The study contains no engineering study of lifting, processing or closure.",
        True,
    )
    inputs = (data.record.manifest or {}).get("inputs") or ()
    yield Caution(
        "effective-date",
        "Effective date and data",
        "The estimate holds for its effective date and for the data files whose hashes the manifest lists.",
        f"Effective date: {subject.effective_date or 'not stated'}; {len(inputs)} input files hashed.",
        True,
    )
    yield Caution(
        "environment",
        "Environmental and social factors",
        "Environmental and social factors, and the conditions of any licence, are to be disclosed by the"
        " Competent Person; this tool does not judge them.",
        "Exclusion zones in the study:"
        f" {len(data.body.exclusions) if data.body.exclusions is not None else 0}.",
        True,
    )


def _labels(data: ReportData) -> Iterator[Caution]:
    subject = data.subject
    if not data.prospects_judged:
        given = subject.prospects or {}
        said = [key for key in ("judged_by", "basis") if str(given.get(key) or "").strip()]
        yield Caution(
            "prospects-not-judged",
            "Reasonable prospects not judged",
            "Nobody is named who judged the reasonable prospects for eventual economic extraction, and on"
            " what. Every table and figure of tonnes is a block-model tally.",
            "Of judge and basis, the study gives:"
            f" {', '.join(said).replace('judged_by', 'judge') or 'neither'}.",
        )
    rows = rows_at_cutoff(data)
    inferred = rows[rows["proposed_class"].map(is_inferred)]
    total = float(class_rows(rows)["dry_tonnes"].sum())
    if len(inferred) and float(inferred["dry_tonnes"].sum()) > 0:
        tonnes = float(inferred["dry_tonnes"].sum())
        share = 100 * tonnes / total if total else float("nan")
        yield Caution(
            "inferred",
            "Inferred material",
            "For Inferred material continuity is only implied by limited sampling. It may not become"
            " Indicated with further work, and it should not carry an economic study.",
            f"{mass_text(tonnes, 'dry', figures=subject.inferred_figures, approximate=True)}, {share:.0f} %"
            f" of the dry tonnes at {data.cutoff_text}.",
        )
    if data.classes.flags:
        flagged = " ".join(f"{element_words(flag).rstrip('. ')}." for flag in data.classes.flags)
        yield Caution(
            "class-flag", "About the proposed classes", flagged, "See the table of proposed classes."
        )
    if data.classes.exploration_target:
        target = data.classes.exploration_target
        low, high = float(target.get("dry_tonnes_low", np.nan)), float(target.get("dry_tonnes_high", np.nan))
        yield Caution(
            "exploration-target",
            "Exploration target",
            "The quantity and grade of an exploration target are conceptual. There has been insufficient"
            " exploration to estimate a resource, and it is uncertain whether further exploration will result"
            " in one.",
            f"{mass_text(low, 'dry')} to {mass_text(high, 'dry')}.",
        )
    if subject.jurisdiction:
        area = subject.jurisdiction == "area"
        words = (
            "The site is taken to lie in the Area: the reporting standard of the International Seabed"
            " Authority applies (ISBA/21/LTC/15, annex V)."
            if area
            else (
                "The site is taken to lie in waters under national jurisdiction: the rules of the coastal"
                " State and of any exchange apply."
            )
        )
        yield Caution(
            "jurisdiction",
            "Jurisdiction",
            words,
            f"Jurisdiction in the study: {subject.jurisdiction}; standard:"
            f" {subject.reporting_standard or 'not stated'}.",
        )
    else:
        yield Caution(
            "jurisdiction",
            "Jurisdiction not stated",
            "Whether the site lies in the Area or in national waters changes which standard rules; the study"
            " does not say.",
            "Jurisdiction in the study: not stated.",
        )
    if subject.site_visit is None or not any(str(v).strip() for v in subject.site_visit.values()):
        yield Caution(
            "no-site-visit",
            "No site visit",
            "The study records no site visit. A reason, or a visit to the vessel, the core and the"
            " laboratory, is for the Competent Person to give.",
            "Site visits recorded: 0.",
        )
    equivalent = data.value.equivalent
    if equivalent:
        yield Caution(
            "equivalent",
            "Metal equivalent",
            "A metal equivalent stands on the prices, recoveries and payabilities printed with it, and on the"
            " statement that each metal can be recovered and sold.",
            f"Formula: {equivalent.get('formula', 'not stated')}.",
        )
    sensitivity = cautions_estimate.cutoff_sensitivity(data)
    if sensitivity:
        yield Caution(
            "cutoff-sensitivity",
            "Sensitivity to the cut-off",
            "Tonnes and grade depend on the cut-off, and a cut-off alone selects as if every block could be"
            " lifted by itself.",
            sensitivity,
        )
