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
    layers = None
    if config.domains.layout == "layered" and len(config.domains.sulphide) > 1:
        from sms_resource.blocks.domains import layered_domains

        layers = layered_domains(
            made, evidence.domain_intervals, evidence.collars, evidence.paths, config.domains.sulphide,
            thickness_m=dict(config.domains.thickness_m) or None, findings=context.findings,
        )  # fmt: skip
    context.detail = f"{made.volume_m3:,.0f} m3"
    return BodyState(
        seafloor=seafloor, outline=outline, contacts=contacts, body=made, domains=layers,
        facts={**facts, "outline_from": outline_from},
    )  # fmt: skip


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
    context.detail = f"{len(model.frame):,} blocks of {' x '.join(f'{size:g}' for size in grid.size)} m"
    return BlockState(model=model, proposal=proposal, frame=frame, seafloor=state.body.top)


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
