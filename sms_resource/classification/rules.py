"""Criteria, caps and downgrade rules, each as a mask over the blocks with a sentence that carries its figures."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.classification.criteria import (
    CLASS_NAMES,
    INDICATED,
    INFERRED,
    LABORATORY_RANK,
    MEASURED,
    ClassColumns,
    ClassContext,
    ClassCriteria,
    LevelCriteria,
)

Mask = NDArray[np.bool_]
Codes = NDArray[np.int8]


@dataclass(frozen=True)
class RuleHit:
    """One rule, the blocks that it holds for, and what it says.

    ``kind`` is "criterion" (a class is not reached), "cap" (not above Inferred) or "downgrade" (down one class).
    """

    rule: str
    kind: str
    mask: Mask
    text: str


def criteria_classes(
    frame: pd.DataFrame, criteria: ClassCriteria, context: ClassContext, columns: ClassColumns
) -> tuple[Codes, list[RuleHit]]:
    """Class of each block by the criteria alone, and which criterion kept it from the next class up."""
    count = len(frame)
    classes = np.zeros(count, dtype=np.int8)
    if context.hole_total < 1:
        text = "No hole informs the deposit: no class is proposed."
        return classes, [RuleHit("no-drilling", "criterion", np.ones(count, dtype=bool), text)]
    hits = []
    estimated = ~np.isnan(_numbers(frame, columns.estimate))
    if not estimated.all():
        text = f"{_plain(columns.estimate)} has no estimate."
        hits.append(RuleHit("not-estimated", "criterion", ~estimated, text))
    levels = [(INFERRED, criteria.inferred), (INDICATED, criteria.indicated), (MEASURED, criteria.measured)]
    for level, wanted in levels:
        if wanted is None:
            continue
        below = estimated & (classes == level - 1)
        meets = below.copy()
        for name, ok, text in _level_tests(frame, wanted, columns):
            failed = below & ~ok
            meets &= ok
            if failed.any():
                hits.append(RuleHit(f"{CLASS_NAMES[level]}-{name}", "criterion", failed, text))
        classes[meets] = level
    return classes, hits


def cap_hits(
    frame: pd.DataFrame, criteria: ClassCriteria, context: ClassContext, columns: ClassColumns
) -> Iterator[RuleHit]:
    """Rules that keep a block from more than Inferred."""
    if columns.extrapolation in frame:
        kinds = frame[columns.extrapolation].astype(str).to_numpy()
        text = "The block lies beyond drilling, sideways or downwards."
        yield RuleHit("extrapolated", "cap", kinds != "drilled", text)
    verdicts = dict(context.laboratory)
    bad = {name: verdict for name, verdict in verdicts.items() if verdict not in criteria.laboratory_accepted}
    if bad or not verdicts:
        worst = (
            sorted(bad.items(), key=lambda item: (LABORATORY_RANK[::-1].index(item[1]), item[0]))
            if bad
            else []
        )
        said = ", ".join(f"{name} {verdict}" for name, verdict in worst) or "no verdict for any metal"
        yield RuleHit("laboratory-quality", "cap", _everywhere(frame), f"Quality control of assays: {said}.")
    suspect = {
        domain: value
        for domain, value in context.recovery_pct.items()
        if value < criteria.caution_recovery_pct and domain not in context.domains_without_bias
    }
    if suspect:
        said = ", ".join(f"{domain} {value:.0f} %" for domain, value in sorted(suspect.items()))
        text = (
            f"Mean recovery under {criteria.caution_recovery_pct:g} % and absence of bias not shown: {said}."
        )
        yield RuleHit("recovery-caution", "cap", _in_domains(frame, columns, suspect), text)
    if context.variogram_assumed:
        text = (
            "The horizontal variogram of at least one estimated metal is assumed, not inferred from the data."
        )
        yield RuleHit("variogram-assumed", "cap", _everywhere(frame), text)


def downgrade_hits(
    frame: pd.DataFrame, criteria: ClassCriteria, context: ClassContext, columns: ClassColumns
) -> Iterator[RuleHit]:
    """Rules that take a block down one class, however many of them hold."""
    domains = [str(name) for name in pd.unique(frame[columns.domain])]
    # A domain without a figure fails the rule: unknown is not good.
    poor = {d: context.recovery_pct.get(d, math.nan) for d in domains}
    poor = {d: value for d, value in poor.items() if not value >= criteria.least_recovery_pct}
    if poor:
        said = ", ".join(f"{d} {_percent(value)}" for d, value in sorted(poor.items()))
        text = f"Mean core recovery under {criteria.least_recovery_pct:g} %: {said}."
        yield RuleHit("low-recovery", "downgrade", _in_domains(frame, columns, poor), text)

    few = _numbers(frame, columns.holes_in_range) < criteria.holes_in_range
    text = f"Fewer than {criteria.holes_in_range} holes within the range."
    yield RuleHit("few-holes-in-range", "downgrade", few, text)

    reach = _range_of(frame, context, columns)
    far = ~(_numbers(frame, columns.distance) <= reach)
    named = ", ".join(f"{value:.0f} m" if value == value else "unknown" for value in np.unique(reach))
    yield RuleHit("beyond-range", "downgrade", far, f"Nearest hole beyond the variogram range ({named}).")

    if columns.open_ended in frame:
        opened = frame[columns.open_ended].to_numpy(dtype=bool)
        yield RuleHit("open-ended", "downgrade", opened, "The hole of the column ended in sulphide.")
    elif columns.extrapolation in frame:
        down = (frame[columns.extrapolation].astype(str) == "downwards").to_numpy()
        yield RuleHit("open-ended", "downgrade", down, "Below a hole that ended in sulphide.")

    counts = {d: int(context.density_count.get(d, 0)) for d in domains}
    counts = {d: value for d, value in counts.items() if value < criteria.least_densities}
    if counts:
        said = ", ".join(f"{d} {value}" for d, value in sorted(counts.items()))
        text = f"Fewer than {criteria.least_densities} densities in the domain: {said}."
        yield RuleHit("few-densities", "downgrade", _in_domains(frame, columns, counts), text)

    limit = criteria.position_share * min(context.block_size[:2])
    if not context.position_sigma_m <= limit:
        sigma = context.position_sigma_m
        said = f"{sigma:.1f} m" if sigma == sigma else "not stated"
        text = f"Standard error of position {said}, limit {limit:.1f} m (block {min(context.block_size[:2]):g} m)."
        yield RuleHit("position-uncertain", "downgrade", _everywhere(frame), text)
    if context.surface_samples_used:
        yield RuleHit(
            "surface-samples-used", "downgrade", _everywhere(frame), "Surface samples inform the estimate."
        )
    if context.handheld_used:
        yield RuleHit(
            "handheld-used", "downgrade", _everywhere(frame), "Handheld assays inform the estimate."
        )

    low = ~(_numbers(frame, columns.slope) >= criteria.least_slope)
    yield RuleHit("low-slope", "downgrade", low, f"Slope of regression under {criteria.least_slope:g}.")


def apply_rules(
    classes: Codes, caps: list[RuleHit], downgrades: list[RuleHit], floor: str
) -> tuple[Codes, Codes]:
    """Classes after caps and downgrades, and the highest class that smoothing may give each block.

    A block goes down one class if any downgrade rule holds, and never above Inferred where a cap holds.
    """
    lowered = np.zeros(len(classes), dtype=bool)
    for hit in downgrades:
        lowered |= hit.mask
    capped = np.zeros(len(classes), dtype=bool)
    for hit in caps:
        capped |= hit.mask
    least = CLASS_NAMES.index(floor)
    down = np.where(lowered & (classes > least), classes - 1, classes)
    ceiling = np.where(capped, INFERRED, MEASURED)
    after = np.minimum(down, ceiling).astype(np.int8)
    # Smoothing must not hand back what a rule took, raises at most one class, and never spreads Measured.
    allowed = np.minimum(np.where(lowered, down, classes + 1), ceiling)
    allowed = np.where(after < MEASURED, np.minimum(allowed, INDICATED), allowed)
    return after, allowed.astype(np.int8)


def _level_tests(
    frame: pd.DataFrame, wanted: LevelCriteria, columns: ClassColumns
) -> Iterator[tuple[str, Mask, str]]:
    yield "holes", _numbers(frame, columns.holes) >= wanted.holes, f"Fewer than {wanted.holes} holes."
    yield (
        "samples",
        _numbers(frame, columns.samples) >= wanted.samples,
        f"Fewer than {wanted.samples} samples.",
    )
    near = _numbers(frame, columns.distance) <= wanted.within_m
    yield "distance", near, f"Nearest sample beyond {wanted.within_m:g} m."
    if wanted.slope > 0:
        steep = _numbers(frame, columns.slope) >= wanted.slope
        yield "slope", steep, f"Slope of regression under {wanted.slope:g}."


def _numbers(frame: pd.DataFrame, column: str) -> NDArray[np.float64]:
    if column not in frame:
        raise ValueError(f"the frame has no column {column!r}, which classes are judged on")
    return frame[column].to_numpy(dtype=np.float64)


def _range_of(frame: pd.DataFrame, context: ClassContext, columns: ClassColumns) -> NDArray[np.float64]:
    if isinstance(context.range_m, Mapping):
        ranges = frame[columns.domain].astype(str).map(dict(context.range_m))
        return np.asarray(ranges, dtype=np.float64)
    return np.full(len(frame), float(context.range_m))


def _everywhere(frame: pd.DataFrame) -> Mask:
    return np.ones(len(frame), dtype=bool)


def _in_domains(frame: pd.DataFrame, columns: ClassColumns, domains: Mapping[str, object]) -> Mask:
    return frame[columns.domain].astype(str).isin(list(domains)).to_numpy()


def _percent(value: float) -> str:
    return f"{value:.0f} %" if value == value else "unknown"


def _plain(column: str) -> str:
    return column.partition("_")[0].capitalize()
