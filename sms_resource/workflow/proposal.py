"""Stage propose: proposed classes with their reasons, and what the screens take."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from sms_resource.units import element_column
from sms_resource.workflow.evidence import metal_columns
from sms_resource.workflow.screening import screened
from sms_resource.workflow.stage import Context
from sms_resource.workflow.state import (
    BlockState,
    DensityState,
    EstimateState,
    EvidenceState,
    ProposalState,
    VariogramState,
)
from sms_resource.workflow.target import unclassified_target


def propose(context: Context) -> ProposalState:
    """Propose classes with their reasons and mark what screens take; prices and cut-offs have no part in it."""
    from sms_resource.blocks.columns import plan_columns
    from sms_resource.classification import propose_classes

    config = context.config
    metals = metal_columns(config)
    made: EstimateState = context.done["estimate"]
    blocks: BlockState = context.done["blocks"]
    frame = made.frame.copy()
    judged = element_column(config.classes.judged_on)
    for name in ("sample_count", "hole_count", "nearest_distance_m", "pass_number"):
        frame[name] = frame[f"{judged}_{name}"]
    frame["holes_in_range"] = holes_in_range(context, frame)
    open_holes = context.done["body"].contacts.query("kind == 'open'")["hole_id"]
    frame["open_ended"] = below_open_holes(context, frame, set(open_holes))
    proposal = propose_classes(
        frame,
        criteria(config, blocks),
        class_context(context),
        overrides=class_overrides(context),
        metals=metals,
        columns=class_columns(judged),
        hole_cells=hole_cells(context.done["composite"], blocks),
    )
    context.findings.extend(proposal.findings)
    frame["proposed_class"] = proposal.classes
    frame["class_reasons"] = proposal.block_reasons
    frame, waterfall, marks, slopes = screened(context, frame, metals)
    context.detail = proposal.tally_label.split(" (")[0]
    return ProposalState(
        frame=frame,
        reasons=proposal.reasons,
        smoothing=proposal.before_after,
        waterfall=waterfall,
        marks=marks,
        tally_label=proposal.tally_label,
        columns=plan_columns(blocks.model, context.done["body"].body),
        tables={
            "overrides": proposal.overrides,
            "class_summary": proposal.summary,
            "moved": proposal.moved,
            "exploration_target": unclassified_target(context, frame, metals),
            "slope_classes": slopes,
        },
    )


def holes_in_range(context: Context, frame: pd.DataFrame) -> np.ndarray:
    """Holes within the variogram range of each block, in its leading domain, for the metal that classes go by."""
    from sms_resource.classification.reach import holes_in_reach

    config = context.config
    state: VariogramState = context.done["variograms"]
    targets = context.done["estimate"].targets
    judged = element_column(config.classes.judged_on)
    found = np.zeros(len(frame), dtype=np.int64)
    leading = frame["domain"].to_numpy(dtype=object)
    for domain in config.domains.sulphide:
        item, mine = state.inferences.get((domain, judged)), leading == domain
        part = state.samples[(state.samples["domain"] == domain) & state.samples[judged].notna()]
        if item is None or not item.model.structures or not mine.any() or not len(part):
            continue
        ranges = item.ranges
        reach = holes_in_reach(
            targets[mine], part[["x", "y", "z"]].to_numpy(dtype=float), part["hole_id"].to_numpy(dtype=object),
            ranges, axes=item.model.axes,
        )  # fmt: skip
        found[mine] = np.asarray(reach["holes_in_range"])
    return found


def below_open_holes(context: Context, frame: pd.DataFrame, open_holes: set[str]) -> np.ndarray:
    """Whether a hole that ended in sulphide stands in the column of the block."""
    cells = hole_cells(context.done["composite"], context.done["blocks"])
    cells = cells[cells["hole_id"].isin(open_holes)]
    marked = set(zip(cells["i"], cells["j"]))
    return np.fromiter(
        ((i, j) in marked for i, j in zip(frame["i"], frame["j"])), dtype=bool, count=len(frame)
    )


def class_columns(judged: str) -> Any:
    """Block columns that classes are judged on."""
    from sms_resource.classification import ClassColumns

    return ClassColumns(
        estimate=judged,
        slope=f"{judged}_slope",
        distance="nearest_distance_m",
        holes_in_range="holes_in_range",
    )


def criteria(config: Any, blocks: BlockState) -> Any:
    """The study's criteria as the classification room takes them."""
    from sms_resource.classification import ClassCriteria, LevelCriteria, Smoothing

    choice = config.classes
    volume = float(np.prod(blocks.model.grid.size))
    least = max(1, round(choice.least_volume_m3 / volume))
    measured = None
    if choice.allow_measured:
        measured = LevelCriteria(
            choice.measured_holes, choice.measured_samples, choice.measured_within_m, choice.measured_slope
        )
    return ClassCriteria(
        measured=measured,
        indicated=LevelCriteria(
            choice.indicated_holes,
            choice.indicated_samples,
            choice.indicated_within_m,
            choice.indicated_slope,
        ),
        inferred=LevelCriteria(choice.inferred_holes, choice.inferred_samples, choice.inferred_within_m),
        least_recovery_pct=choice.least_recovery_pct,
        caution_recovery_pct=choice.caution_recovery_pct,
        holes_in_range=choice.holes_in_range,
        least_densities=config.density.least_count,
        position_share=choice.position_share,
        least_slope=choice.least_slope,
        rules_off=choice.rules_off,
        floor=choice.floor,
        smoothing=Smoothing(least_blocks=least, island_blocks=least) if choice.smooth else None,
    )


def class_context(context: Context) -> Any:
    """What is known of the data behind the blocks."""
    from sms_resource.classification import ClassContext

    config = context.config
    evidence: EvidenceState = context.done["composite"]
    density: DensityState = context.done["density"]
    state: VariogramState = context.done["variograms"]
    blocks: BlockState = context.done["blocks"]
    judged = element_column(config.classes.judged_on)
    ranges: dict[str, float] = {}
    for domain in config.domains.sulphide:
        item = state.inferences.get((domain, judged))
        ranges[domain] = float(item.ranges[0]) if item and item.model.structures else float("nan")
    recovery = {
        str(domain): float(100.0 * part["recovered_length_m"].sum() / part["length_m"].sum())
        for domain, part in evidence.composites.groupby("domain")
        if domain in config.domains.sulphide and part["length_m"].sum() > 0
    }
    sigma = evidence.collars["position_sigma_m"].astype(float).fillna(config.position.sigma_m)
    bias = evidence.tables["recovery_bias"]
    # What asks for the absence of bias goes by each test alone: many tests must not hide one.
    biased = set(bias.loc[bias["not_excluded"], "domain"]) if len(bias) else set(config.domains.sulphide)
    verdicts = evidence.laboratory.verdicts
    worst: dict[str, str] = {}
    rank = {"good": 0, "caution": 1, "failed": 2, "missing": 3}
    for element, verdict in zip(verdicts["element"].astype(str), verdicts["verdict"].astype(str)):
        if element in config.metals.estimate:
            worst[element] = max(worst.get(element, "good"), verdict, key=lambda name: rank.get(name, 3))
    return ClassContext(
        hole_total=int(state.samples["hole_id"].nunique()),
        range_m=ranges,
        block_size=tuple(blocks.model.grid.size),
        position_sigma_m=float(sigma.median()) if len(sigma) else float("nan"),
        recovery_pct=recovery,
        density_count=dict(zip(density.by_domain["domain"].astype(str), density.by_domain["n"].astype(int))),
        domains_without_bias=frozenset(set(config.domains.sulphide) - biased),
        surface_samples_used=config.surface_samples.use != "none",
        handheld_used=bool(evidence.facts["handheld_used"]),
        variogram_assumed=any(item.horizontal_from == "assumed" for item in state.inferences.values()),
        laboratory={element_column(name): verdict for name, verdict in worst.items()},
        prospects_by=config.prospects.by if config.prospects.judged else "",
        prospects_basis=config.prospects.basis if config.prospects.judged else "",
    )


def class_overrides(context: Context) -> list[Any]:
    """Polygons in which a person sets the class."""
    layer = context.config.data.class_overrides
    if layer is None:
        return []
    from sms_resource.classification import ClassOverride
    from sms_resource.workflow.load import read_layer

    frame = read_layer(context, layer, "class_overrides")
    if frame is None:
        return []
    overrides = []
    for number, row in enumerate(frame.to_dict("records")):
        overrides.append(
            ClassOverride(
                polygon=row["geometry"],
                proposed_class=str(row["class"]).lower(),
                reason=str(row["reason"]),
                by=str(row["by"]),
                name=f"polygon {number + 1}",
            )
        )
    return overrides


def hole_cells(evidence: EvidenceState, blocks: BlockState) -> pd.DataFrame:
    """Columns of blocks that each hole starts in."""
    collars = evidence.collars
    local = blocks.model.grid.to_local(collars[["easting", "northing", "elevation"]].to_numpy(dtype=float))
    cells = np.floor(local[:, :2] / np.asarray(blocks.model.grid.size[:2])).astype(int)
    return pd.DataFrame({"hole_id": collars["hole_id"].to_numpy(), "i": cells[:, 0], "j": cells[:, 1]})
