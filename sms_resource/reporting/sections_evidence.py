"""Sections on the evidence, the body and the continuity."""

from __future__ import annotations

import pandas as pd

from sms_resource.reporting.data import ReportData, VariogramRecord, has
from sms_resource.reporting.elements import (
    Block,
    Bullets,
    Heading,
    Paragraph,
    Slot,
    Table,
    frame_table,
    number_text,
    with_table,
)
from sms_resource.reporting.figures_continuity import domain_slug
from sms_resource.reporting.summaries import (
    associations_shown,
    blanks_by_element,
    chosen_cells,
    cuts_in_use,
    references_by_material,
)
from sms_resource.units import column_element, element_label


def evidence(data: ReportData) -> list[Block]:
    """Positions, recovery, composites, surface samples, laboratory, density, logs."""
    e, lab = data.evidence, data.evidence.laboratory
    blocks: list[Block] = [Heading("Where the samples are"), Slot(("plan_holes",))]
    if e.collars is not None and has(e.collars, "ended_in"):
        counts = e.collars["ended_in"].astype(str).value_counts().sort_index()
        words = ", ".join(f"{count} {name}" for name, count in counts.items())
        vertical = int(e.collars["assumed_vertical"].sum()) if "assumed_vertical" in e.collars else None
        blocks.append(
            Paragraph(
                f"How the {len(e.collars)} holes ended: {words}."
                + (f" {vertical} without survey are assumed vertical." if vertical is not None else "")
            )
        )
    blocks += [Heading("Collars against the seafloor"), Slot(("plan_collars",))]
    if e.collar_shift_m is not None:
        blocks.append(
            Paragraph(
                f"Shift applied to all collars: {e.collar_shift_m:+.2f} m; the delivered elevations are kept"
                " in the data files."
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
    with_table(blocks, e.recovery_bias, "Grade against recovery: rank correlation", most=40)
    blocks.append(Slot(("lost_core",)))
    with_table(blocks, e.lost_core, "Treatments of lost core (mean grade of composites)")
    blocks.append(Heading("Composites"))
    with_table(blocks, e.composite_audit, "From intervals to composites")
    with_table(blocks, e.statistics, "Statistics of the composites")
    blocks.append(Slot(("histograms", "log_probability")))
    with_table(blocks, e.lognormal, "Lognormal estimators of the mean")
    cuts = cuts_in_use(e.top_cuts)
    with_table(blocks, cuts, "Top cuts")
    if cuts is None and e.top_cuts is not None and len(e.top_cuts):
        blocks.append(
            Paragraph(f"Top cuts: {len(e.top_cuts)} sets of metal and domain studied, no cut in use.")
        )
    blocks.append(Slot(("top_cuts",)))
    with_table(blocks, chosen_cells(e.declustering_scan), "Declustering: cells chosen", most=16)
    blocks.append(Slot(("contacts",)))
    with_table(blocks, e.contact_verdicts, "Contacts of domains: hard or soft", most=40)
    with_table(blocks, e.twins, "Twin holes", most=20)
    blocks += [
        Heading("Surface samples"),
        Paragraph(f"Use of the surface samples: {e.surface_use.rstrip('. ') or 'kept out of the estimate'}."),
    ]
    with_table(blocks, e.surface_bias, "Surface samples against core")
    blocks.append(Slot(("surface_against_core",)))
    blocks.append(Heading("Laboratory quality"))
    if lab.verdicts is None:
        blocks.append(Paragraph("No laboratory inserts were given with this study."))
    with_table(blocks, lab.verdicts, "Verdicts")
    blocks.append(Slot(("control_charts",)))
    with_table(blocks, references_by_material(lab.references), "Reference materials", most=30)
    blocks.append(Slot(("blanks",)))
    with_table(blocks, blanks_by_element(lab.blanks), "Blanks", most=20)
    blocks.append(Slot(("duplicates",)))
    with_table(blocks, lab.duplicates, "Duplicates (statistics named in the heads)", most=30)
    with_table(blocks, lab.checks, "Check laboratory (reduced major axis)", most=20)
    with_table(blocks, e.assay_summary, "Assays: below detection, over limit, blank", most=30)
    blocks.append(Heading("Density"))
    with_table(blocks, e.density_by_domain, "Density by domain")
    blocks.append(Slot(("density",)))
    blocks.append(Heading("Metal associations"))
    with_table(
        blocks, associations_shown(e.associations, data.subject.metals), "Correlations and ratios", most=12
    )
    blocks.append(Slot(("tracers",)))
    with_table(blocks, e.deleterious, "Deleterious elements (composites in the body)", most=20)
    blocks += [Heading("Strip logs"), Slot(("strip_logs_*",))]
    return blocks


def body(data: ReportData) -> list[Block]:
    """Volume, contacts, extrapolation and the uncertainty of the geometry."""
    body = data.body
    blocks: list[Block] = []
    if body.method:
        blocks.append(Paragraph(f"Base: {body.method.rstrip('. ')}."))
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
                "Greatest distance of extrapolation:"
                f" {number_text(body.extrapolation.get('greatest_distance_m'))} m; basis:"
                f" {body.extrapolation.get('basis') or 'not stated'}."
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
    with_table(blocks, body.audit, "Audit of the body", most=12)
    with_table(blocks, body.geometry_uncertainty, "Uncertainty of the geometry")
    blocks.append(Slot(("geometry",)))
    with_table(blocks, body.grid_proposal, "Block grid: what is proposed, and why")
    return blocks if body.volumes or body.thickness is not None or body.method else []


def continuity(data: ReportData) -> list[Block]:
    """Each variogram with what was inferred and what was assumed, a domain at a time."""
    blocks: list[Block] = []
    for domain in dict.fromkeys(record.domain for record in data.variograms):
        records = [record for record in data.variograms if record.domain == domain]
        blocks += [Heading(f"Domain {domain}" if domain not in ("", "all") else "Variograms")]
        blocks.append(Bullets(tuple(f"{_metal(record)}: {_said(record)}" for record in records)))
        models = _models(records)
        if models is not None:
            blocks.append(models)
        blocks.append(Slot((f"variograms_{domain_slug(domain)}",)))
        intervals = [
            record.intervals.assign(metal=_metal(record))
            for record in records
            if record.intervals is not None and len(record.intervals)
        ]
        if intervals:
            frame = pd.concat(intervals, ignore_index=True)
            columns = ["metal", *(c for c in frame.columns if c != "metal")]
            title = "Uncertainty of the parameters (leaving out holes in turn)"
            with_table(blocks, frame, title, columns=columns)
    return blocks


def _metal(record: VariogramRecord) -> str:
    return element_label(record.metal) if column_element(record.metal) else record.metal


def _said(record: VariogramRecord) -> str:
    """What was inferred, what was assumed, which bounds were hit, from how many samples."""
    parts = [record.statement.strip()]
    if record.nugget_from:
        parts.append(f"Nugget from: {record.nugget_from}.")
    parts.append(
        f"Assumed: {'; '.join(record.assumed)}."
        if record.assumed
        else "Assumed: nothing beyond what the study fixes."
    )
    if record.bounds_hit:
        parts.append(f"Bounds hit by the fit: {'; '.join(record.bounds_hit)}.")
    parts.append(f"{record.sample_count} composites in {record.hole_count} holes.")
    return " ".join(part for part in parts if part)


def _models(records: list[VariogramRecord]) -> Table | None:
    rows: list[tuple[str, ...]] = []
    for record in records:
        model = record.model
        if model is None or not getattr(model, "structures", None):
            continue
        angles = f"{model.azimuth:g}, {model.plunge:g}, {model.tilt:g}"
        rows.append((_metal(record), "nugget", number_text(float(model.nugget), 3), "", "", "", angles))
        for structure in model.structures:
            ranges = [number_text(float(r), 3) for r in structure.ranges]
            rows.append(("", str(structure.shape), number_text(float(structure.sill), 3), *ranges, ""))
    if not rows:
        return None
    head = ("Metal", "Structure", "Sill (squared grade)", "Range, major (m)", "Range, semi-major (m)",
            "Range, minor (m)", "Azimuth, plunge, tilt (°)")  # fmt: skip
    note = "Ranges are practical ranges."
    return Table("Models", head, tuple(rows), (False, False, True, True, True, True, False), note)
