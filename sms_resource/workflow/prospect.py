"""Stages of a study without drilling: an exploration target as ranges, and nothing that reads like an estimate."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd

from sms_resource.findings import Findings
from sms_resource.loaders.tables import LoadedData
from sms_resource.reporting.rounding import mass_text
from sms_resource.units import element_label
from sms_resource.workflow import load
from sms_resource.workflow.evidence import metal_columns, plain_grades
from sms_resource.workflow.stage import Context, Stage, StageStop
from sms_resource.workflow.stages import CHECK

FEW_SAMPLES = 4  # under so many the least and the greatest are the range, else the quartiles
COLUMNS = ["quantity", "low", "high", "samples", "basis"]


def check(context: Context) -> dict[str, int]:
    """The checks of the data, without what they miss of holes that were never drilled."""
    inner = replace(context, findings=Findings())
    counts = load.check(inner)
    context.findings.extend(item for item in inner.findings if item.code != "runs-missing")
    context.detail = inner.detail
    return counts


def target(context: Context) -> pd.DataFrame:
    """Ranges of area, thickness, density, dry tonnes and grades; ``low`` is NaN where it is left to a person.

    Returns
    -------
    DataFrame
        quantity, low, high, samples, basis.
    """
    from sms_resource.classification import exploration_target
    from sms_resource.samples.density_given import three_values

    data: LoadedData = context.done["load"]
    config = context.config
    if data.outline is None:
        raise StageStop  # what is wrong with the outline is told where it is read
    area, taken, zones = open_area(context, data.outline, data.exclusions)
    thickness = (float(config.exploration.thickness_low_m), float(config.exploration.thickness_high_m))
    given = {name: three_values(name, value) for name, value in config.density.assigned_dry_tpm3.items()}
    density = (float(min(v[0] for v in given.values())), float(max(v[2] for v in given.values())))
    grades = grade_rows(context, data.surface)
    stated = ", ".join(given)
    plan = "plan area of the outline" + (" without its exclusion zones" if taken > 0 else "")
    basis = f"{plan}, stated thickness and stated dry density of {stated}; every low times every low"
    made = exploration_target(
        area_m2=(area, area), thickness_m=thickness, dry_density_tpm3=density,
        grades={row[0]: (row[1], row[2]) for row in grades if np.isfinite(row[1])}, basis=basis,
    )  # fmt: skip
    rows: list[tuple[str, float, float, int, str]] = [
        (
            "volume_m3",
            area * thickness[0],
            area * thickness[1],
            0,
            f"outline of {area + taken:,.0f} m² in plan, {zones}, × stated thickness",
        ),
        ("thickness_m", *thickness, 0, "stated: exploration.thickness_low_m and thickness_high_m"),
        ("dry_density_tpm3", *density, 0, f"stated: density.assigned_dry_tpm3 of {stated}"),
        ("dry_tonnes", *made.dry_tonnes, 0, basis),
        *grades,
    ]
    file = context.study.path.name
    context.findings.note(
        "exploration-target",
        f"no hole was drilled: {mass_text(made.dry_tonnes[0], 'dry')} to {mass_text(made.dry_tonnes[1], 'dry')}, as an "
        f"exploration target. {made.caution}",
        "Drill it; it is no estimate.", file=file,
    )  # fmt: skip
    left = [element_label(row[0]).partition(" (")[0] for row in grades if not np.isfinite(row[1])]
    context.findings.warning(
        "exploration-surface-alone",
        "the grades are of surface samples, which are as a rule richer than the body below, and by how much no hole has "
        "measured" + (f"; the low end of {', '.join(left)} is left to the Competent Person" if left else ""),
        "State exploration.surface_divisor by element and why, or drill.", file=file,
    )  # fmt: skip
    context.detail = "ranges only"
    return pd.DataFrame(rows, columns=COLUMNS)


def open_area(context: Context, outline: Any, exclusions: Any) -> tuple[float, float, str]:
    """Plan area of the outline that no zone takes, the area that zones take (m²), and both in words.

    Zones go by ``screens.exclude_status`` and ``screens.vent_buffer_m``, as those of a study with drilling do.
    """
    from sms_resource.blocks.zones import prepare_zones

    choice = context.config.screens
    shape, found = outline.geometry.union_all(), Findings()
    zones = prepare_zones(
        exclusions, None, shape, outline.crs, found, choice.exclude_status, choice.vent_buffer_m
    )
    file = context.study.files().get("exclusions")
    context.findings.extend(replace(item, file=item.file or file) for item in found)
    if found.has_errors:
        raise StageStop
    whole, taken = float(shape.area), float(sum(zone.geometry.area for zone in zones))
    if whole - taken <= 1e-9 * whole:
        context.findings.error(
            "screen-all-taken", "exclusion zones take the whole outline: nothing is left to range a target over",
            "Check the zones, screens.exclude_status and screens.vent_buffer_m.", file=context.study.path.name,
            column="data.exclusions",
        )  # fmt: skip
        raise StageStop
    if exclusions is None:
        return whole, 0.0, "no zones given"
    names = "; ".join(zone.what for zone in zones if zone.geometry.area > 0)
    return whole - taken, taken, f"less {taken:,.0f} m² of zones ({names})" if names else "no zone reaches it"


def grade_rows(context: Context, surface: pd.DataFrame) -> list[tuple[str, float, float, int, str]]:
    """Range of each metal: the middle half of the surface samples, its low end divided as the study states."""
    table, _ = plain_grades(context, surface, "surface samples")
    divisors = context.config.exploration.surface_divisor
    rows = []
    for metal in metal_columns(context.config):
        values = table[metal].dropna().to_numpy(dtype=np.float64)
        if not len(values):
            continue
        few = len(values) < FEW_SAMPLES
        low, high = (float(v) for v in np.quantile(values, (0.0, 1.0) if few else (0.25, 0.75)))
        ends = ("least", "greatest") if few else ("lower quartile", "upper quartile")
        divisor = divisors.get(metal.partition("_")[0])
        basis = f"{ends[0]} to {ends[1]} of {len(values)} surface samples"
        if divisor is None:
            low, basis = (
                np.nan,
                f"{ends[1]} of {len(values)} surface samples; low end left to the Competent Person",
            )
        else:
            low, basis = low / divisor, f"{basis}, the low end divided by {divisor:g} as stated"
            if not low < high:
                low, basis = np.nan, f"{basis}; all samples are alike, so no range can be stated"
        rows.append((metal, low, high, len(values), basis))
    if not rows:
        context.findings.warning(
            "exploration-surface-alone", "no surface sample has a grade of a metal that is estimated",
            "Check metals.estimate and assays.methods.", file=context.study.path.name,
        )  # fmt: skip
    return rows


TARGET_STAGES: tuple[Any, ...] = (
    Stage(
        "load",
        "Reading the files",
        ("study", "data", "metals"),
        (),
        load.load_without_drilling,
        reads_files=True,
    ),
    replace(CHECK, work=check),
    Stage(
        "target",
        "Ranging the target",
        ("study", "metals", "assays", "density", "screens", "exploration"),
        ("load", "check"),
        target,
    ),
)
