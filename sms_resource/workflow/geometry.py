"""Stages body and blocks: the sulphide between its surfaces, and the blocks that hold it."""

from __future__ import annotations

from typing import Any

import numpy as np

from sms_resource.loaders.tables import LoadedData
from sms_resource.workflow.stage import Context, StageStop
from sms_resource.workflow.state import BlockState, BodyState, EvidenceState


def body(context: Context) -> BodyState:
    """Bound the body: seafloor above, outline around, interpolated base below."""
    import shapely

    from sms_resource.blocks import body as room
    from sms_resource.blocks.contacts import base_contacts
    from sms_resource.blocks.relief import roughness, slope
    from sms_resource.blocks.seafloor import prepare_seafloor

    data: LoadedData = context.done["load"]
    evidence: EvidenceState = context.done["composite"]
    config = context.config
    choice = config.body
    assert data.seafloor is not None  # its absence is an error of the stage load
    seafloor, found, facts = prepare_seafloor(
        data.seafloor, mend_within_m=config.seafloor.mend_within_m, sigma_m=config.seafloor.sigma_m
    )
    context.findings.extend(found)
    contacts = base_contacts(
        evidence.collars, evidence.domain_intervals, evidence.paths, config.domains.sulphide, seafloor,
        findings=context.findings,
    )  # fmt: skip
    if choice.outline == "given" and data.outline is not None and len(data.outline):
        outline = shapely.union_all(data.outline.geometry.to_numpy())
        outline_from = "given"
    else:
        from sms_resource.blocks.outline import propose_outline

        surface = evidence.surface if config.surface_samples.use == "outline" else None
        outline = propose_outline(contacts, seafloor, surface=surface)
        outline_from = "proposed from the holes" + (" and surface samples" if surface is not None else "")
        context.findings.warning(
            "outline-proposed", "the outline of the body is proposed from the holes, not given",
            "Draw an outline, or accept it with a reason in [reasons].", file=context.study.path.name,
        )  # fmt: skip
    made = room.build_body(
        seafloor,
        outline,
        contacts,
        method=choice.method,
        base_points=data.base_points,
        base_grid=data.base_grid,
        cell_m=choice.cell_m,
        edge_thickness_m=choice.edge_thickness_m,
        extrapolate_below_m=choice.extrapolate_below_m,
        drilled_within_m=choice.drilled_within_m,
    )
    context.findings.extend(made.findings)
    if choice.base_shift_m or choice.seafloor_shift_m or choice.outline_shift_m:
        made = made.shifted(
            base_m=choice.base_shift_m, top_m=choice.seafloor_shift_m, outline_m=choice.outline_shift_m
        )
    layers = domain_layers(context, made)
    context.detail = f"{made.volume_m3:,.0f} m3"
    return BodyState(
        seafloor=seafloor, outline=outline, contacts=contacts, body=made, domains=layers,
        facts={**facts, "outline_from": outline_from,
               "slope": slope(seafloor, config.seafloor.footprint_m),
               "roughness": roughness(seafloor, config.seafloor.footprint_m)},
    )  # fmt: skip


def seafloor_sigma(state: BodyState) -> float:
    """One sigma of the seafloor over the body: the median of the file's own uncertainty, or the study's number."""
    import shapely

    top = state.body.top
    if top.uncertainty is None:
        return float(state.facts["sigma_median_m"])
    x, y = top.mesh()
    inside = top.uncertainty[shapely.contains_xy(state.outline, x, y) & np.isfinite(top.uncertainty)]
    return float(np.median(inside)) if inside.size else float(state.facts["sigma_median_m"])


def domain_layers(context: Context, made: Any) -> Any:
    """Contact surfaces between the layers of the body, chimneys on top; None where one domain fills it."""
    from sms_resource.blocks.domains import layered_domains
    from sms_resource.blocks.layers import LayeredDomains

    config = context.config
    evidence: EvidenceState = context.done["composite"]
    chimneys = config.chimneys
    names = config.domains.sulphide[1:] if chimneys.source != "none" else config.domains.sulphide
    layers = None
    if config.domains.layout == "layered" and len(names) > 1:
        layers = layered_domains(
            made, evidence.domain_intervals, evidence.collars, evidence.paths, names,
            thickness_m=dict(config.domains.thickness_m) or None, findings=context.findings,
        )  # fmt: skip
    if chimneys.source == "none" or not names:
        return layers
    from sms_resource.blocks.chimneys import chimneys_from_polygons, chimneys_from_relief, with_chimneys

    if chimneys.source == "polygons":
        from sms_resource.workflow.load import read_layer

        polygons = read_layer(context, config.data.chimneys, "chimneys")
        if polygons is None or "height_m" not in polygons:
            context.findings.error(
                "chimney-height", "the polygons of chimneys have no height", "Give each a column height_m, above zero.",
                file=config.data.chimneys.file, column="height_m",
            )  # fmt: skip
            return layers
        depth = chimneys_from_polygons(made.top, polygons)
    else:
        depth = chimneys_from_relief(
            made.top, width_m=chimneys.width_m, least_height_m=chimneys.least_height_m
        )
    return with_chimneys(layers or LayeredDomains((names[0],)), depth, chimneys.domain)


def blocks(context: Context) -> BlockState:
    """Lay the block model over the body and take each block's share of it."""
    from sms_resource.blocks.frames import VerticalFrame
    from sms_resource.blocks.model import fill_blocks, propose_grid

    evidence: EvidenceState = context.done["composite"]
    state: BodyState = context.done["body"]
    config = context.config
    choice = config.blocks
    collars = evidence.collars[["easting", "northing"]].to_numpy(dtype=float)
    grid, proposal = propose_grid(
        state.body, collars, size=choice.size_m, azimuth=choice.azimuth_deg, origin=choice.origin_m
    )
    try:
        model = fill_blocks(state.body, grid, domains=state.domains, single_domain=config.domains.sulphide[0])
    except ValueError as error:
        context.findings.error("blocks-too-many", f"the {error}", "Choose larger blocks in blocks.size_m.",
                               file=context.study.path.name, column="blocks.size_m")  # fmt: skip
        raise StageStop from None
    context.findings.extend(model.findings)
    if not len(model.frame):
        context.findings.error(
            "blocks-empty", "no block touches the body",
            "Check blocks.origin_m against the outline, or leave it out: a grid is proposed then.",
            file=context.study.path.name, column="blocks.origin_m",
        )  # fmt: skip
        raise StageStop
    frame = VerticalFrame(choice.vertical_frame, state.body.top, state.body.base)
    if config.domains.layout in ("indicator", "signed_distance"):
        model = logged_domains(model, evidence, frame, config)
    context.detail = f"{len(model.frame):,} blocks of {' x '.join(f'{size:g}' for size in grid.size)} m"
    return BlockState(model=model, proposal=proposal, frame=frame, seafloor=state.body.top)


def logged_domains(model: Any, evidence: EvidenceState, frame: Any, config: Any) -> Any:
    """Blocks with the likeliest of the logged domains, and its probability."""
    from sms_resource.blocks.logged_domains import interpolate_domains

    inside = evidence.composites[evidence.composites["domain"].isin(config.domains.sulphide)]
    return interpolate_domains(
        model,
        inside[["easting", "northing", "elevation"]].to_numpy(dtype=float),
        list(inside["domain"]),
        method=config.domains.layout,
        range_m=config.domains.logged_range_m,
        vertical_range_m=config.domains.logged_vertical_range_m,
        frame=frame,
    )


def domain_shares(frame: Any, domains: tuple[str, ...]) -> dict[str, np.ndarray]:
    """Share of each domain in the body's part of each block."""
    shares = {}
    for domain in domains:
        column = f"share_{domain}"
        shares[domain] = (
            frame[column].to_numpy(dtype=float)
            if column in frame
            else (frame["domain"] == domain).to_numpy(float)
        )
    return shares
