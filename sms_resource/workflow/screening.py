"""What practice takes from the body: screens block by block, then over-cut and under-cut, as one waterfall."""

from __future__ import annotations

from itertools import pairwise
from typing import Any

import numpy as np
import pandas as pd

from sms_resource.units import element_column
from sms_resource.workflow.stage import Context, StageStop
from sms_resource.workflow.state import DensityState

SLOPE_EDGES = (0.0, 10.0, 15.0, 20.0, 25.0, 30.0, 90.0)
SKIN_STEPS = {
    "cut": "above the cut-off",
    "loss": "under-cut loss",
    "dilution": "over-cut dilution",
    "delivered": "after loss and dilution",
}


def screened(
    context: Context, frame: pd.DataFrame, metals: list[str]
) -> tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame, pd.DataFrame]:
    """Mark what the screens take of each block.

    Returns
    -------
    frame : DataFrame
        With ``kept_share`` (of the block's volume in the body), ``screened_by`` and ``slope_deg`` of the seafloor
        above it, over the footprint of a machine.
    waterfall : DataFrame
        From the whole body to what remains.
    marks : DataFrame
        kept_share and the share that each screen takes of each block, in its order.
    slopes : DataFrame
        The body by class of slope.
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
    slope = frame[["i", "j"]].merge(found.columns[["i", "j", "slope_deg"]], on=["i", "j"], how="left")
    return (
        frame.assign(
            kept_share=marks["kept_share"].to_numpy(),
            screened_by=marks["screened_by"].to_numpy(),
            slope_deg=slope["slope_deg"].to_numpy(),
        ),
        found.waterfall,
        marks,
        slope_classes(frame, found.columns),
    )


def slope_classes(frame: pd.DataFrame, columns: pd.DataFrame) -> pd.DataFrame:
    """Area in plan and tonnes of the body, dry and wet, by class of the slope of the seafloor over a machine.

    Parameters
    ----------
    frame : DataFrame
        One row a block: i, j, dry_tonnes, wet_tonnes.
    columns : DataFrame
        One row a column of blocks: i, j, area_m2, slope_deg.

    Returns
    -------
    DataFrame
        slope, area_m2, dry_tonnes, wet_tonnes, share_pct (of the dry tonnes); columns without a slope are "not known".
    """
    held = frame.groupby(["i", "j"], as_index=False)[["dry_tonnes", "wet_tonnes"]].sum()
    held = held.merge(columns[["i", "j", "area_m2", "slope_deg"]], on=["i", "j"], how="left")
    names = [
        f"over {low:g}°" if high >= 90 else f"{low:g} to {high:g}°" for low, high in pairwise(SLOPE_EDGES)
    ]
    number = np.searchsorted(SLOPE_EDGES[1:-1], held["slope_deg"].to_numpy(dtype=float), side="left")
    words = np.array([*names, "not known"], dtype=object)
    held["slope"] = words[np.where(held["slope_deg"].notna(), number, len(names))]
    sums = held.groupby("slope")[["area_m2", "dry_tonnes", "wet_tonnes"]].sum()
    table = sums.reindex([name for name in words if name in sums.index]).reset_index()
    whole = table["dry_tonnes"].sum()
    return table.assign(share_pct=100.0 * table["dry_tonnes"] / whole if whole > 0 else np.nan)


def kept(frame: pd.DataFrame) -> pd.DataFrame:
    """The blocks with what the screens leave of their volume and tonnes."""
    left = frame[frame["kept_share"] > 0]
    share = left["kept_share"]
    return left.assign(
        volume_m3=left["volume_m3"] * share,
        dry_tonnes=left["dry_tonnes"] * share,
        wet_tonnes=left["wet_tonnes"] * share,
    )


def skinned(
    context: Context, frame: pd.DataFrame, variable: str, at: float, metals: list[str]
) -> tuple[pd.DataFrame | None, dict[str, Any]]:
    """What is above the cut-off before and after under-cut loss and over-cut dilution; None where neither is asked for.

    Returns
    -------
    table : DataFrame or None
        step ("above the cut-off", "under-cut loss", "over-cut dilution", "after loss and dilution"), volume_m3,
        dry_tonnes, wet_tonnes, and each metal's grade and contained tonnes.
    facts : dict
        "host": the densities of the host rock; empty without a table.
    """
    from sms_resource.blocks.skins import skins

    choice = context.config.screens
    if not (choice.over_cut_m > 0 or choice.under_cut_m > 0):
        return None, {}
    host = host_rock(context)
    above = (frame[variable] >= at).to_numpy()
    made = skins(
        context.done["blocks"].model.with_frame(frame),
        context.done["body"].body,
        np.where(above, frame["kept_share"].to_numpy(), 0.0),
        host=host,
        over_cut_m=choice.over_cut_m,
        under_cut_m=choice.under_cut_m,
        metals=metals,
        columns=context.done["propose"].columns,
    )
    densities = {"dry_density_tpm3": host.dry_density_tpm3, "wet_density_tpm3": host.wet_density_tpm3}
    return made.table.assign(step=made.table["step"].map(SKIN_STEPS)), {"host": densities}


def host_rock(context: Context) -> Any:
    """What over-cutting takes outside the body: as the study says, else as it is measured outside the sulphide."""
    from sms_resource.blocks.skins import Host

    choice = context.config.screens
    state: DensityState = context.done["density"]
    table = state.table
    outside = table[~table["domain"].isin(context.config.domains.sulphide)]
    found = {}
    for basis in ("dry", "wet"):
        name = f"{basis}_density_tpm3"
        stated = getattr(choice, f"host_{name}")
        measured = outside[name].dropna() if name in outside else pd.Series(dtype=float)
        found[name] = float(stated if stated is not None else measured.mean())
        if np.isnan(found[name]):
            context.findings.error(
                "host-density", f"the {basis} density of the rock that over-cutting takes is not known",
                f"Give screens.host_{name}: no density is measured outside the sulphide.",
                file=context.study.path.name, column=f"screens.host_{name}",
            )  # fmt: skip
        elif stated is None and choice.over_cut_m > 0:
            context.findings.note(
                "host-density-measured",
                f"the {basis} density of the rock that over-cutting takes is the mean of {len(measured)} measurements "
                f"outside the sulphide: {found[name]:.3g} t/m³",
                f"Give screens.host_{name} if the rock under the base is another.",
                file=context.study.path.name, column=f"screens.host_{name}",
            )  # fmt: skip
    if any(np.isnan(value) for value in found.values()):
        raise StageStop
    if found["wet_density_tpm3"] < found["dry_density_tpm3"]:
        context.findings.error(
            "host-density", "the rock that over-cutting takes would be lighter wet than dry: "
            f"{found['wet_density_tpm3']:.3g} and {found['dry_density_tpm3']:.3g} t/m³",
            "Give both screens.host_dry_density_tpm3 and screens.host_wet_density_tpm3.",
            file=context.study.path.name, column="screens.host_wet_density_tpm3",
        )  # fmt: skip
        raise StageStop
    grades = {element_column(name): grade for name, grade in choice.host_grades.items()}
    return Host(found["dry_density_tpm3"], found["wet_density_tpm3"], grades)


def on_to_delivery(waterfall: pd.DataFrame, skins: pd.DataFrame | None, cutoff: str) -> pd.DataFrame:
    """Go on from what no screen takes: the cut-off, then loss and dilution where the study asks for them.

    Parameters
    ----------
    waterfall : DataFrame
        Of the screens; taken and remaining quantities.
    skins : DataFrame or None
        Of :func:`skinned`.
    cutoff : str
        The cut-off in words.
    """
    if skins is None:
        return waterfall
    names = [str(name) for name in waterfall.columns]
    quantities = [name.removeprefix("taken_") for name in names if name.startswith("taken_")]
    left = {name: float(waterfall[f"remaining_{name}"].iloc[-1]) for name in quantities}
    steps = skins.set_index("step")[quantities]
    above = steps.loc[SKIN_STEPS["cut"]].to_dict()
    taken = {
        ("below_cutoff", "below the cut-off"): {name: left[name] - above[name] for name in quantities},
        ("above_cutoff", f"above the cut-off ({cutoff})"): None,
        ("loss", SKIN_STEPS["loss"]): steps.loc[SKIN_STEPS["loss"]].to_dict(),
        ("dilution", SKIN_STEPS["dilution"]): (-steps.loc[SKIN_STEPS["dilution"]]).to_dict(),
        ("delivered", SKIN_STEPS["delivered"]): None,
    }
    rows = []
    for (step, what), amount in taken.items():
        amount = amount or dict.fromkeys(quantities, 0.0)
        left = {name: left[name] - amount[name] for name in quantities}
        rows.append({"step": step, "what": what} | {f"taken_{name}": amount[name] for name in quantities}
                    | {f"remaining_{name}": left[name] for name in quantities})  # fmt: skip
    return pd.concat([waterfall, pd.DataFrame(rows)], ignore_index=True)
