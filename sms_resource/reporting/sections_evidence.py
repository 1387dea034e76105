"""Sections on the body and the continuity."""

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
    number_text,
    with_table,
)
from sms_resource.reporting.figures_continuity import domain_slug
from sms_resource.reporting.parameters import (
    AT_BOUND,
    UNKNOWN,
    WIDEST_FACTOR,
    intervals_shown,
    range_text,
    undetermined_words,
)
from sms_resource.reporting.rounding import significant_text
from sms_resource.units import column_element, element_label

GEOMETRY_NOTE = (
    "One thing is moved at a time. An outline further in does not have to make the body smaller: the holes that are "
    "still inside keep their thickness, so the base falls more steeply from the edge, and the holes that fall outside "
    "no longer hold it up; what the outer strip itself is worth stands beside it as the body cut off. Together is "
    "the root of the sum of squares of the base as a whole, the seafloor and half the span of the outlines."
)
INTERVAL_NOTE = (
    f"{AT_BOUND[:1].upper()}{AT_BOUND[1:]}: the fit stopped at a limit set to it, so leaving out holes moves it little and"
    f" says nothing. {UNKNOWN[:1].upper()}{UNKNOWN[1:]}: the interval spans more than a factor of {WIDEST_FACTOR:g}, or for"
    " a nugget all from zero to the sill. Relative error: standard error, of a nugget over the total sill."
)


def body(data: ReportData) -> list[Block]:
    """Volume, contacts, extrapolation and the uncertainty of the geometry."""
    body = data.body
    blocks: list[Block] = []
    if body.method:
        blocks.append(Paragraph(f"Base: {body.method.rstrip('. ')}."))
    if body.volumes:
        whole = float(body.volumes.get("volume_m3", float("nan")))
        rows = [("Whole body", significant_text(whole, 3), "100")]
        for key, name in (
            ("drilled_m3", "Drilled"),
            ("sideways_m3", "Extrapolated sideways"),
            ("downwards_m3", "Extrapolated downwards"),
        ):
            if key in body.volumes:
                rows.append(
                    (
                        name,
                        significant_text(float(body.volumes[key]), 3),
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
    blocks.append(Slot(("plan_slope",)))
    with_table(
        blocks, body.slope_classes, f"The body by slope of the seafloor over {body.footprint_m:g} m",
        mass_digits=2,
    )  # fmt: skip
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
    moved = body.geometry_uncertainty
    if moved is not None and "what" in moved:
        moved = moved.drop(columns="case", errors="ignore")
    with_table(
        blocks, moved, "Uncertainty of the geometry", note=GEOMETRY_NOTE, labels={"what": "What is moved"}
    )
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
            shown.assign(metal=_metal(record))
            for record in records
            if (shown := intervals_shown(record)) is not None and len(shown)
        ]
        if intervals:
            frame = pd.concat(intervals, ignore_index=True)
            columns = ["metal", *(c for c in frame.columns if c != "metal")]
            title = "Uncertainty of the parameters (leaving out holes in turn)"
            with_table(blocks, frame, title, columns=columns, note=INTERVAL_NOTE)
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
    parts.append(undetermined_words(record))
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
        for number, structure in enumerate(model.structures, start=1):
            ranges = [range_text(record, axis, number, float(r)) for axis, r in enumerate(structure.ranges)]
            rows.append(("", str(structure.shape), number_text(float(structure.sill), 3), *ranges, ""))
    if not rows:
        return None
    head = ("Metal", "Structure", "Sill (squared grade)", "Range, major (m)", "Range, semi-major (m)",
            "Range, minor (m)", "Azimuth, plunge, tilt (°)")  # fmt: skip
    note = (
        "Ranges are practical ranges. A zonal structure varies only across the plane and so has no limit in it. A range"
        " at its bound, or not determined by the data, is where the fit came to rest, not what was measured."
    )
    return Table("Models", head, tuple(rows), (False, False, True, True, True, True, False), note)
