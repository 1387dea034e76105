"""Sections on the evidence, the body and the continuity."""

from __future__ import annotations

from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.elements import (
    Block,
    Heading,
    Paragraph,
    Slot,
    Table,
    drop_empty_headings,
    frame_table,
    number_text,
    with_table,
)
from sms_resource.units import column_element, element_label


def evidence(data: ReportData) -> list[Block]:
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
    with_table(blocks, e.top_cuts, "Top cuts")
    blocks.append(Slot(("top_cuts",)))
    with_table(blocks, e.declustering_scan, "Declustered mean by cell size", most=24)
    with_table(blocks, e.contact_analysis, "Grade against distance from the contact", most=24)
    with_table(blocks, e.twins, "Twin holes", most=20)
    blocks += [
        Heading("Surface samples"),
        Paragraph(f"Use of the surface samples: {e.surface_use or 'kept out of the estimate'}."),
    ]
    with_table(blocks, e.surface_bias, "Surface samples against core")
    blocks.append(Slot(("surface_against_core",)))
    blocks.append(Heading("Laboratory quality"))
    if lab.verdicts is None:
        blocks.append(Paragraph("No laboratory inserts were given with this study."))
    with_table(blocks, lab.verdicts, "Verdicts")
    blocks.append(Slot(("control_charts",)))
    with_table(blocks, lab.references, "Reference materials", most=30)
    blocks.append(Slot(("blanks",)))
    with_table(blocks, lab.blanks, "Blanks", most=20)
    blocks.append(Slot(("duplicates",)))
    with_table(blocks, lab.duplicates, "Duplicates (statistics named in the heads)", most=30)
    with_table(blocks, lab.checks, "Check laboratory (reduced major axis)", most=20)
    with_table(blocks, e.assay_summary, "Assays: below detection, over limit, blank", most=30)
    blocks.append(Heading("Density"))
    with_table(blocks, e.density_by_domain, "Density by domain")
    blocks.append(Slot(("density",)))
    if e.associations is not None and len(e.associations):
        blocks += [
            Heading("Metal associations"),
            frame_table(e.associations, "Correlations and ratios", most=24),
        ]
    blocks += [Heading("Strip logs"), Slot(("strip_logs",))]
    return drop_empty_headings(blocks)


def body(data: ReportData) -> list[Block]:
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
    with_table(blocks, body.audit, "Audit of the body", most=20)
    with_table(blocks, body.geometry_uncertainty, "Uncertainty of the geometry")
    blocks.append(Slot(("geometry",)))
    with_table(blocks, body.grid_proposal, "Block grid: what is proposed, and why")
    return blocks if body.volumes or body.thickness is not None or body.method else []


def continuity(data: ReportData) -> list[Block]:
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
            rows: list[tuple[str, ...]] = [("Nugget", number_text(float(model.nugget), 3), "", "", "")]
            rows += [
                (str(s.shape), number_text(float(s.sill), 3), *(number_text(float(r), 3) for r in s.ranges))
                for s in model.structures
            ]
            note = (
                f"Azimuth {model.azimuth:g}°, plunge {model.plunge:g}°, tilt {model.tilt:g}°; ranges are"
                " practical ranges."
            )
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
        with_table(blocks, record.intervals, "Uncertainty of the parameters (leaving out holes in turn)")
        slug = "".join(c if c.isalnum() else "_" for c in f"{record.metal}_{record.domain}".lower())
        blocks.append(Slot((f"variogram_{slug}",)))
    return blocks
