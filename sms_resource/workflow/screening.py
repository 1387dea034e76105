"""What practice takes from the body, block by block and as a waterfall."""

from __future__ import annotations

import pandas as pd

from sms_resource.units import element_column
from sms_resource.workflow.stage import Context


def screened(context: Context, frame: pd.DataFrame, metals: list[str]) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Mark what the screens take of each block.

    Returns
    -------
    frame : DataFrame
        With ``kept_share`` (of the block's volume in the body) and ``screened_by``.
    waterfall : DataFrame
        From the whole body to what remains.
    """
    from sms_resource.blocks.screens import ScreenSettings, apply_screens

    config = context.config
    choice = config.screens
    settings = ScreenSettings(
        slope_max_deg=choice.slope_max_deg,
        footprint_m=config.seafloor.footprint_m,
        least_thickness_m=choice.least_thickness_m,
        least_thickness_grade=choice.least_thickness_grade,
        thickness_grade_column=element_column(choice.thickness_grade_of),
        least_patch_m2=choice.least_patch_m2,
        exclude_status=choice.exclude_status,
        vent_buffer_m=choice.vent_buffer_m,
    )
    found = apply_screens(
        context.done["blocks"].model.with_frame(frame),
        context.done["body"].body,
        settings=settings,
        zones=context.done["load"].exclusions,
        metals=metals,
    )
    context.findings.extend(found.findings)
    marks = found.blocks
    return (
        frame.assign(kept_share=marks["kept_share"].to_numpy(), screened_by=marks["screened_by"].to_numpy()),
        found.waterfall,
    )


def kept(frame: pd.DataFrame) -> pd.DataFrame:
    """The blocks with what the screens leave of their volume and tonnes."""
    left = frame[frame["kept_share"] > 0]
    share = left["kept_share"]
    return left.assign(
        volume_m3=left["volume_m3"] * share,
        dry_tonnes=left["dry_tonnes"] * share,
        wet_tonnes=left["wet_tonnes"] * share,
    )
