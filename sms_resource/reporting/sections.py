"""The sections of the report in their order."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import pandas as pd

from sms_resource.reporting.cautions import Caution, all_cautions
from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.elements import (
    Block,
    Bullets,
    CautionBox,
    Document,
    Facts,
    Heading,
    Paragraph,
    Picture,
    Section,
    Slot,
    Table,
    cell_text,
    facts_from,
    frame_table,
    number_text,
    plain_words,
)
from sms_resource.reporting.rounding import NO_VALUE, mass_text
from sms_resource.reporting.style import Drawing
from sms_resource.reporting.tonnage import class_rows, rows_at_cutoff, tonnage_table
from sms_resource.reporting.words import SECTION_INTRODUCTIONS, SOURCES
from sms_resource.units import column_element, element_label

TITLES: dict[str, str] = {
    "decisions": "The decisions behind it",
    "evidence": "The evidence",
    "body": "The body",
    "continuity": "Continuity",
    "estimate": "The estimate and its checks",
    "classes": "Proposed classes",
    "tonnes": "Tonnes and grade",
    "scenarios": "Scenarios and value",
    "ledger": "Decision ledger",
    "cautions": "Cautions",
    "findings": "Findings",
    "truth": "The estimate against the truth",
    "sources": "Sources",
    "manifest": "Manifest",
}
LEDGER_COLUMNS = ("key", "value", "origin", "reason", "by", "alternatives", "effect")
LEDGER_LABELS = {
    "key": "Decision",
    "origin": "Default or chosen",
    "by": "Who",
    "effect": "Effect of the alternatives",
}


def build_document(data: ReportData, drawings: Sequence[Drawing], absent: Sequence[str] = ()) -> Document:
    """Put tables, figures and words together; sections without anything to say are left out."""
    cautions = all_cautions(data)
    pictures: dict[str, list[Drawing]] = {}
    for drawing in drawings:
        pictures.setdefault(drawing.section, []).append(drawing)
    makers: dict[str, Callable[[ReportData], list[Block]]] = {
        "decisions": _decisions, "evidence": _evidence, "body": _body, "continuity": _continuity, "estimate": _estimate,
        "classes": _classes, "tonnes": _tonnes, "scenarios": _scenarios, "ledger": _ledger, "findings": _findings,
        "truth": _truth, "sources": _sources, "manifest": _manifest,
    }  # fmt: skip
    sections = []
    for key, title in TITLES.items():
        blocks: list[Block] = _cautions(cautions) if key == "cautions" else makers[key](data)
        blocks = _place_pictures(blocks, pictures.get(key, []))
        if key == "manifest" and absent:
            blocks.append(
                Paragraph(
                    f"Figures without data in this study, and so not drawn: {', '.join(absent)}.", "note"
                )
            )
        if blocks:
            sections.append(Section(key, title, (Paragraph(SECTION_INTRODUCTIONS[key], "lead"), *blocks)))
    subject = data.subject
    label = data.tally_label
    subtitle = " · ".join(
        part
        for part in (
            subject.deposit,
            f"effective {subject.effective_date}" if subject.effective_date else "",
            subject.crs,
        )
        if part
    )
    return Document(
        plain_words(subject.title),
        plain_words(subtitle),
        label[0].upper() + label[1:],
        tuple(_summary(data, cautions)),
        tuple(sections),
    )


def _place_pictures(blocks: list[Block], drawings: list[Drawing]) -> list[Block]:
    """Put each figure after the heading that names it (a ``Heading`` ending in its keys), others at the end."""
    left = {drawing.key: drawing for drawing in drawings}
    placed: list[Block] = []
    for block in blocks:
        if isinstance(block, Slot):
            for key in [k for k in left if any(k == want or k.startswith(f"{want}_") for want in block.keys)]:
                placed.append(Picture(left.pop(key)))
        else:
            placed.append(block)
    return placed + [Picture(drawing) for drawing in left.values()]


def _with_table(blocks: list[Block], frame: pd.DataFrame | None, title: str, **options: object) -> None:
    if frame is not None and len(frame):
        blocks.append(frame_table(frame, title, **options))  # type: ignore[arg-type]


def untimed(frame: pd.DataFrame | None) -> pd.DataFrame | None:
    """A frame without measured times: the same study gives the same bytes."""
    return frame if frame is None else frame.drop(columns=[c for c in ("seconds", "time_s") if c in frame])


def _summary(data: ReportData, cautions: Sequence[Caution]) -> list[Block]:
    rows = rows_at_cutoff(data)
    blocks: list[Block] = []
    label = data.tally_label
    if len(rows):
        blocks.append(tonnage_table(data, rows, f"{label[0].upper()}{label[1:]} at {data.cutoff_text}"))
    else:
        blocks.append(Paragraph("No table of tonnes came with this run.", "lead"))
    if not data.prospects_judged:
        blocks.append(
            Paragraph(
                "Block-model tally: the study does not say who judged the reasonable prospects for eventual economic extraction, and on what. It is not a statement of a resource.",
                "note",
            )
        )
    if data.classes.exploration_target:
        blocks.append(_target(data))
    blocks.append(Facts(tuple(_basis(data))))
    triggered = [c.title for c in cautions if not c.always]
    blocks.append(
        Paragraph(
            f"Read with the {len(cautions)} cautions of this report; set off by this study: {', '.join(triggered).lower() or 'none'}.",
            "note",
        )
    )
    return blocks


def _target(data: ReportData) -> Paragraph:
    target = data.classes.exploration_target or {}
    low, high = (
        float(target.get("dry_tonnes_low", float("nan"))),
        float(target.get("dry_tonnes_high", float("nan"))),
    )
    grades = "; ".join(
        f"{element_label(m)} {number_text(v[0], 2)} to {number_text(v[1], 2)}"
        for m, v in (target.get("grades") or {}).items()
    )
    return Paragraph(
        f"Exploration target (conceptual; insufficient exploration to estimate a resource; uncertain whether further exploration will result in one): {mass_text(low, 'dry')} to {mass_text(high, 'dry')}; {grades}.",
        "note",
    )


def _basis(data: ReportData) -> list[tuple[str, str]]:
    subject, evidence = data.subject, data.evidence
    cutoff = subject.cutoff or {}
    pairs = [("Effective date", subject.effective_date or "not stated"), ("Prepared by", subject.author or "not stated"),
             ("Competent Person", subject.competent_person or "not named; this draft is for one to judge"),
             ("Reporting standard", subject.reporting_standard or "not stated")]  # fmt: skip
    pairs.append(
        (
            "Cut-off",
            f"{data.cutoff_text}; basis: {cutoff.get('basis') or 'not stated'}"
            + (f"; {cutoff['currency']}" if cutoff.get("currency") else "")
            + (f", {cutoff['date']}" if cutoff.get("date") else ""),
        )
    )
    if data.prospects_judged and subject.prospects:
        pairs.append(
            (
                "Reasonable prospects",
                f"judged by {subject.prospects['judged_by']} on: {subject.prospects['basis']}",
            )
        )
    else:
        pairs.append(("Reasonable prospects", "not judged"))
    holes = len(evidence.collars) if evidence.collars is not None else 0
    count = len(evidence.composites) if evidence.composites is not None else 0
    pairs.append(
        (
            "Samples",
            f"{holes} holes, {count} composites; {len(evidence.surface) if evidence.surface is not None else 0} surface samples ({evidence.surface_use or 'kept out of the estimate'})",
        )
    )
    if evidence.density_by_domain is not None and has(evidence.density_by_domain, "domain", "dry_base"):
        pairs.append(
            (
                "Density (dry; wet)",
                "; ".join(
                    f"{r['domain']} {number_text(r['dry_base'])}; {number_text(r.get('wet_base', float('nan')))} t/m³"
                    for r in evidence.density_by_domain.to_dict("records")
                ),
            )
        )
    if data.body.volumes:
        volume = data.body.volumes
        whole = float(volume.get("volume_m3", float("nan")))
        beyond = float(volume.get("sideways_m3", 0.0)) + float(volume.get("downwards_m3", 0.0))
        pairs.append(
            (
                "Body",
                f"{number_text(whole)} m³ in place, {100 * beyond / whole:.0f} % of it extrapolated; {data.body.method}".rstrip(
                    "; "
                ),
            )
        )
    if data.estimation.settings:
        pairs.append(
            (
                "Method",
                "; ".join(
                    f"{k.lower()}: {cell_text(v)}" for k, v in list(data.estimation.settings.items())[:3]
                ),
            )
        )
    pairs.append(("Lost core", f"{evidence.lost_core_default.replace('_', ' ')} (see the bracket)"))
    pairs.append(
        (
            "Coordinates",
            f"{subject.crs or 'not stated'}; vertical datum: {subject.vertical_datum or 'not stated'}",
        )
    )
    return [(name, plain_words(text)) for name, text in pairs]


def ledger_frame(data: ReportData) -> pd.DataFrame | None:
    """The ledger with the columns that the report shows; None where there is none."""
    ledger = data.record.ledger
    if ledger is None or not len(ledger):
        return None
    frame = ledger.rename(columns={"who": "by"})
    for column in ("reason", "by", "alternatives", "effect"):
        if column not in frame:
            frame = frame.assign(**{column: ""})
    effect = (
        frame["effect"]
        .astype(object)
        .where(frame["effect"].notna() & (frame["effect"].astype(str) != ""), "not run")
    )
    return frame.assign(effect=effect)


def _decisions(data: ReportData) -> list[Block]:
    frame = ledger_frame(data)
    if frame is None:
        return []
    size = (
        pd.to_numeric(frame["effect_pct"], errors="coerce").abs().fillna(0.0)
        if "effect_pct" in frame
        else pd.Series(0.0, index=frame.index)
    )
    chosen = (
        (frame["origin"].astype(str) != "default").astype(int)
        if "origin" in frame
        else pd.Series(0, index=frame.index)
    )
    order = (
        pd.DataFrame({"size": size, "chosen": chosen})
        .sort_values(["size", "chosen"], ascending=False, kind="stable")
        .index
    )
    counts = (
        frame["origin"].astype(str).value_counts().sort_index() if "origin" in frame else pd.Series(dtype=int)
    )
    words = ", ".join(f"{count} {name}" for name, count in counts.items())
    return [frame_table(frame.loc[order].head(8), "Decisions with most effect, or chosen", columns=LEDGER_COLUMNS, labels=LEDGER_LABELS),
            Paragraph(f"{len(frame)} decisions in all: {words}. The full ledger stands further on.", "note")]  # fmt: skip


def _evidence(data: ReportData) -> list[Block]:
    e, lab = data.evidence, data.evidence.laboratory
    blocks: list[Block] = [Heading("Where the samples are"), Slot(("plan_holes",))]
    if e.collars is not None and has(e.collars, "ended_in"):
        counts = e.collars["ended_in"].astype(str).value_counts().sort_index()
        words = "; ".join(f"{name}: {count}" for name, count in counts.items())
        vertical = int(e.collars["assumed_vertical"].sum()) if "assumed_vertical" in e.collars else None
        blocks.append(
            Paragraph(
                f"{len(e.collars)} holes ended in {words}."
                + (f" {vertical} without survey are assumed vertical." if vertical is not None else "")
            )
        )
    blocks += [Heading("Collars against the seafloor"), Slot(("plan_collars",))]
    if e.collar_shift_m is not None:
        blocks.append(
            Paragraph(
                f"Shift applied to all collars: {e.collar_shift_m:+.2f} m; the delivered elevations are kept in the data files."
            )
        )
    if e.collars is not None and has(e.collars, "flagged", "dz_m") and e.collars["flagged"].any():
        bad = e.collars[e.collars["flagged"].astype(bool)]
        blocks.append(
            frame_table(
                bad,
                "Flagged collars",
                columns=(
                    "hole_id",
                    "easting",
                    "northing",
                    "original_elevation",
                    "elevation",
                    "dz_m",
                    "position_method",
                    "position_sigma_m",
                ),
                most=20,
            )
        )
    blocks += [Heading("Core recovery and lost core"), Slot(("recovery",))]
    _with_table(blocks, e.recovery_bias, "Grade against recovery: rank correlation", most=40)
    blocks.append(Slot(("lost_core",)))
    _with_table(blocks, e.lost_core, "Treatments of lost core (mean grade of composites)")
    blocks.append(Heading("Composites"))
    _with_table(blocks, e.composite_audit, "From intervals to composites")
    _with_table(blocks, e.statistics, "Statistics of the composites")
    blocks.append(Slot(("histograms", "log_probability")))
    _with_table(blocks, e.lognormal, "Lognormal estimators of the mean")
    _with_table(blocks, e.top_cuts, "Top cuts")
    blocks.append(Slot(("top_cuts",)))
    _with_table(blocks, e.declustering_scan, "Declustered mean by cell size", most=24)
    _with_table(blocks, e.contact_analysis, "Grade against distance from the contact", most=24)
    _with_table(blocks, e.twins, "Twin holes", most=20)
    blocks += [
        Heading("Surface samples"),
        Paragraph(f"Use of the surface samples: {e.surface_use or 'kept out of the estimate'}."),
    ]
    _with_table(blocks, e.surface_bias, "Surface samples against core")
    blocks.append(Slot(("surface_against_core",)))
    blocks.append(Heading("Laboratory quality"))
    if lab.verdicts is None:
        blocks.append(Paragraph("No laboratory inserts were given with this study."))
    _with_table(blocks, lab.verdicts, "Verdicts")
    blocks.append(Slot(("control_charts",)))
    _with_table(blocks, lab.references, "Reference materials", most=30)
    blocks.append(Slot(("blanks",)))
    _with_table(blocks, lab.blanks, "Blanks", most=20)
    blocks.append(Slot(("duplicates",)))
    _with_table(blocks, lab.duplicates, "Duplicates (statistics named in the heads)", most=30)
    _with_table(blocks, lab.checks, "Check laboratory (reduced major axis)", most=20)
    _with_table(blocks, e.assay_summary, "Assays: below detection, over limit, blank", most=30)
    blocks.append(Heading("Density"))
    _with_table(blocks, e.density_by_domain, "Density by domain")
    blocks.append(Slot(("density",)))
    if e.associations is not None and len(e.associations):
        blocks += [
            Heading("Metal associations"),
            frame_table(e.associations, "Correlations and ratios", most=24),
        ]
    blocks += [Heading("Strip logs"), Slot(("strip_logs",))]
    return _drop_empty_headings(blocks)


def _drop_empty_headings(blocks: list[Block]) -> list[Block]:
    """Headings stay only if something follows them; slots count, since figures may fill them later."""
    return [
        b
        for n, b in enumerate(blocks)
        if not (isinstance(b, Heading) and (n + 1 == len(blocks) or isinstance(blocks[n + 1], Heading)))
    ]


def _body(data: ReportData) -> list[Block]:
    body = data.body
    blocks: list[Block] = []
    if body.method:
        blocks.append(Paragraph(f"Base: {body.method}."))
    if body.volumes:
        whole = float(body.volumes.get("volume_m3", float("nan")))
        rows = [("Whole body", number_text(whole, 4), "100")]
        for key, name in (
            ("drilled_m3", "Drilled"),
            ("sideways_m3", "Extrapolated sideways"),
            ("downwards_m3", "Extrapolated downwards"),
        ):
            if key in body.volumes:
                rows.append(
                    (
                        name,
                        number_text(float(body.volumes[key]), 4),
                        f"{100 * float(body.volumes[key]) / whole:.1f}",
                    )
                )
        blocks.append(
            Table(
                "Volume of the body",
                ("Part", "Volume (m³)", "Share (%)"),
                tuple(rows),
                (False, True, True),
                strong=(0,),
            )
        )
    if body.extrapolation:
        blocks.append(
            Paragraph(
                f"Greatest distance of extrapolation: {number_text(body.extrapolation.get('greatest_distance_m'))} m; basis: {body.extrapolation.get('basis') or 'not stated'}."
            )
        )
    blocks.append(Slot(("plan_thickness", "plan_extrapolation")))
    if body.contacts is not None and has(body.contacts, "kind"):
        counts = body.contacts["kind"].astype(str).value_counts().sort_index()
        blocks.append(
            Paragraph(
                "Base contacts: "
                + "; ".join(
                    f"{n} {'reached the base' if k == 'reached' else 'ended above it' if k == 'open' else k}"
                    for k, n in counts.items()
                )
                + "."
            )
        )
    _with_table(blocks, body.audit, "Audit of the body", most=20)
    _with_table(blocks, body.geometry_uncertainty, "Uncertainty of the geometry")
    blocks.append(Slot(("geometry",)))
    _with_table(blocks, body.grid_proposal, "Block grid: what is proposed, and why")
    return blocks if body.volumes or body.thickness is not None or body.method else []


def _continuity(data: ReportData) -> list[Block]:
    blocks: list[Block] = []
    for record in data.variograms:
        name = element_label(record.metal) if column_element(record.metal) else record.metal
        blocks.append(Heading(f"{name}, domain {record.domain}"))
        said = [record.statement.strip()]
        if record.nugget_from:
            said.append(f"Nugget from: {record.nugget_from}.")
        said.append(f"Assumed: {'; '.join(record.assumed)}." if record.assumed else "Nothing was assumed.")
        if record.bounds_hit:
            said.append(f"Bounds hit by the fit: {'; '.join(record.bounds_hit)}.")
        said.append(f"{record.sample_count} composites in {record.hole_count} holes.")
        blocks.append(Paragraph(" ".join(part for part in said if part)))
        model = record.model
        if model is not None and getattr(model, "structures", None):
            rows = [("Nugget", number_text(float(model.nugget), 3), "", "", "")]
            rows += [
                (str(s.shape), number_text(float(s.sill), 3), *(number_text(float(r), 3) for r in s.ranges))
                for s in model.structures
            ]
            note = f"Azimuth {model.azimuth:g}°, plunge {model.plunge:g}°, tilt {model.tilt:g}°; ranges are practical ranges."
            blocks.append(
                Table(
                    "Model",
                    (
                        "Structure",
                        "Sill (squared grade)",
                        "Range, major (m)",
                        "Range, semi-major (m)",
                        "Range, minor (m)",
                    ),
                    tuple(rows),
                    (False, True, True, True, True),
                    note,
                )
            )  # type: ignore[arg-type]
        _with_table(blocks, record.intervals, "Uncertainty of the parameters (leaving out holes in turn)")
        slug = "".join(c if c.isalnum() else "_" for c in f"{record.metal}_{record.domain}".lower())
        blocks.append(Slot((f"variogram_{slug}",)))
    return blocks


def _estimate(data: ReportData) -> list[Block]:
    s = data.estimation
    blocks: list[Block] = [Heading("Method")]
    facts = facts_from(s.settings)
    if facts:
        blocks.append(facts)
    blocks += [Heading("Grades in plan and section"), Slot(("plan_grades", "section")), Heading("Checks")]
    _with_table(blocks, s.checks, "Checks and their verdicts")
    _with_table(blocks, s.means, "Global means: composites, declustered, blocks")
    _with_table(blocks, s.estimators, "Mean grade by estimator")
    blocks.append(Slot(("estimators",)))
    blocks.append(Slot(("swaths",)))
    _with_table(blocks, s.leave_one_out_summary, "Leave one hole out")
    blocks.append(Slot(("leave_one_out",)))
    _with_table(blocks, s.support_variance, "Realised against theoretical block variance")
    blocks.append(Slot(("change_of_support",)))
    _with_table(blocks, s.frames_effect, "Effect of the vertical frame")
    _with_table(blocks, untimed(s.neighbourhood), "Neighbourhood study", note=s.neighbourhood_note, most=30)
    blocks.append(Slot(("neighbourhood",)))
    return _drop_empty_headings(blocks) if s.blocks is not None or s.settings else []


def _classes(data: ReportData) -> list[Block]:
    c = data.classes
    blocks: list[Block] = []
    facts = facts_from(c.criteria)
    if facts:
        blocks += [Heading("Criteria of the study"), facts]
    if c.flags:
        blocks.append(Bullets(tuple(c.flags)))
    _with_table(blocks, c.reasons, "Why blocks have their proposed class", most=40)
    _with_table(blocks, c.before_after, "Before and after smoothing to connected volumes")
    _with_table(blocks, c.overrides, "Overrides by polygon")
    if c.exploration_target:
        blocks.append(_target(data))
    return blocks


def _tonnes(data: ReportData) -> list[Block]:
    blocks: list[Block] = []
    rows = rows_at_cutoff(data)
    label = data.tally_label
    if len(rows):
        blocks.append(
            tonnage_table(
                data, rows, f"{label[0].upper()}{label[1:]} at {data.cutoff_text}, by proposed class"
            )
        )
    blocks.append(Slot(("grade_tonnage",)))
    shape = rows_at_cutoff(data, data.value.mineable_shape) if data.value.mineable_shape is not None else None
    if shape is not None and len(shape):
        blocks.append(
            tonnage_table(
                data,
                shape,
                f"Connected shapes with their must-take material, at {data.cutoff_text} ({label})",
            )
        )
    if data.body.waterfall is not None and len(data.body.waterfall):
        blocks += [
            frame_table(
                data.body.waterfall,
                f"What the screens take ({label})",
                labels={"dry_tonnes": "Dry tonnes (t dry)"},
            ),
            Slot(("waterfall",)),
        ]
    return blocks if len(class_rows(rows)) or len(blocks) > 1 else []


def _scenarios(data: ReportData) -> list[Block]:
    v = data.value
    blocks: list[Block] = []
    if v.equivalent:
        blocks.append(Heading("Metal equivalent"))
        blocks.append(
            Paragraph(
                f"{v.equivalent.get('formula', '')}. {v.equivalent.get('statement', '')}".strip(". ") + "."
            )
        )
        table = v.equivalent.get("table")
        _with_table(blocks, table, "Prices, recoveries and payabilities")
    _with_table(blocks, v.cutoff_costs, "Costs inside the cut-off")
    if v.scenarios is not None and len(v.scenarios):
        blocks += [
            Heading("Scenarios"),
            frame_table(v.scenarios, f"Scenarios at the study's cut-off ({data.tally_label})", most=40),
        ]
    blocks.append(Slot(("tornado", "heat_map")))
    return (
        blocks
        if v.equivalent
        or v.cutoff_costs is not None
        or v.scenarios is not None
        or v.tornado is not None
        or v.heat_map is not None
        else []
    )


def _ledger(data: ReportData) -> list[Block]:
    frame = ledger_frame(data)
    if frame is None:
        return []
    columns = ("key", "value", "origin", "meaning", *LEDGER_COLUMNS[3:])
    blocks: list[Block] = [
        frame_table(frame, "All decisions", columns=columns, labels=LEDGER_LABELS, most=400)
    ]
    _with_table(blocks, data.record.changes, f"What changed since {data.record.against or 'the other run'}")
    return blocks


def _cautions(cautions: Sequence[Caution]) -> list[Block]:
    return [CautionBox(c.title, plain_words(c.text), plain_words(c.figures), c.always) for c in cautions]


def _findings(data: ReportData) -> list[Block]:
    findings = data.record.findings
    counts = findings.counts()
    blocks: list[Block] = [
        Paragraph(f"{counts['error']} errors, {counts['warning']} warnings, {counts['note']} notes.")
    ]
    if len(findings):
        rows = [
            (f.severity, f.code, f.where or NO_VALUE, plain_words(f.message), plain_words(f.remedy))
            for f in findings
        ]
        order = sorted(range(len(rows)), key=lambda n: ("error", "warning", "note").index(rows[n][0]))
        shown = tuple(rows[n] for n in order[:200])
        note = f"The first 200 of {len(rows)}; findings.json holds all." if len(rows) > 200 else ""
        blocks.append(
            Table("Findings", ("Severity", "Code", "Where", "What", "Remedy"), shown, (False,) * 5, note)
        )
    return blocks


def _truth(data: ReportData) -> list[Block]:
    truth = data.record.truth
    if not truth:
        return []
    blocks: list[Block] = [Paragraph(f"Truth from {truth.get('file', 'a file named in the study')}.")]
    _with_table(blocks, truth.get("table"), "Estimate against truth, with what causes the difference")
    if truth.get("notes"):
        blocks.append(Bullets(tuple(str(n) for n in truth["notes"])))
    return blocks


def _sources(data: ReportData) -> list[Block]:
    return [Bullets(tuple(dict.fromkeys((*data.record.sources, *SOURCES))))]


def _manifest(data: ReportData) -> list[Block]:
    manifest = data.record.manifest
    if not manifest:
        return []
    blocks: list[Block] = []
    inputs = [i for i in manifest.get("inputs") or () if isinstance(i, dict)]
    if inputs:
        rows = tuple(
            (str(i.get("path", "")), str(i.get("sha256", ""))[:16], cell_text(i.get("bytes"))) for i in inputs
        )
        blocks.append(
            Table(
                "Input files",
                ("File", "SHA-256 (first 16)", "Bytes"),
                rows,
                (False, False, True),
                "Full hashes are in manifest.json.",
            )
        )
    pairs = [("Seed", str(manifest.get("seed", "not stated")))]
    pairs += [(str(name), str(version)) for name, version in sorted((manifest.get("versions") or {}).items())]
    blocks.append(Facts(tuple(pairs)))
    return blocks
