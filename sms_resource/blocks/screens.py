"""Screens: what slope, thickness, zones and patch size take from the body, shown step by step."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.blocks.body import Body
from sms_resource.blocks.columns import Columns, plan_columns
from sms_resource.blocks.model import BlockModel
from sms_resource.blocks.relief import slope
from sms_resource.blocks.zones import prepare_zones
from sms_resource.findings import Findings
from sms_resource.units import contained_tonnes

Array = NDArray[Any]


@dataclass(frozen=True)
class ScreenSettings:
    """Limits of the screens; None leaves a screen out.

    Parameters
    ----------
    slope_max_deg, footprint_m : float
        Steepest seafloor a machine works on, and the edge of the square it stands on.
    least_thickness_m : float
        Least thickness of the body in a column of blocks (volume over area).
    least_thickness_grade : float
        Least thickness times mean grade of ``thickness_grade_column``, in m times the grade's unit.
    thickness_grade_column : str
        Grade column.
    least_patch_m2 : float
        Least area of a connected patch of columns (sides in common) that is left by the other screens.
    exclude_status : tuple of str, optional
        Only zones with these statuses are taken; None takes all.
    vent_buffer_m : float, optional
        Buffer round zones with the status "active_vent", in place of their own.
    """

    slope_max_deg: float | None = None
    footprint_m: float = 5.0
    least_thickness_m: float | None = None
    least_thickness_grade: float | None = None
    thickness_grade_column: str | None = None
    least_patch_m2: float | None = None
    exclude_status: tuple[str, ...] | None = None
    vent_buffer_m: float | None = None

    def __post_init__(self) -> None:
        for name in (
            "slope_max_deg",
            "least_thickness_m",
            "least_thickness_grade",
            "least_patch_m2",
            "vent_buffer_m",
        ):
            value = getattr(self, name)
            if value is not None and not (math.isfinite(value) and value >= 0):
                raise ValueError(f"{name} must be at least 0 or None, not {value!r}")
        if self.footprint_m <= 0:
            raise ValueError(f"footprint_m must be a positive length in m, not {self.footprint_m!r}")
        if self.least_thickness_grade is not None and not self.thickness_grade_column:
            raise ValueError("thickness_grade_column must name a grade for least_thickness_grade")


@dataclass(frozen=True, eq=False)
class ScreenResult:
    """What the screens took.

    Attributes
    ----------
    blocks : DataFrame
        One row a block of the model, in its order: kept_share of the volume in the body that no screen takes,
        screened_by (the screen that takes most, or "" where nothing is taken), and taken_<screen> shares; all
        shares of one block add to 1.
    waterfall : DataFrame
        From the whole body to what remains, in the order of the screens: step, what, taken and remaining
        volume_m3, dry_tonnes, wet_tonnes where the model has them, and contained tonnes of each metal.
    columns : DataFrame
        One row a column of blocks: i, j, easting, northing, area_m2 (inside the outline), thickness_m,
        slope_deg, kept_share.
    findings : Findings
    """

    blocks: pd.DataFrame
    waterfall: pd.DataFrame
    columns: pd.DataFrame
    findings: Findings


def apply_screens(
    model: BlockModel,
    body: Body,
    *,
    settings: ScreenSettings | None = None,
    zones: Any = None,
    tenure: Any = None,
    metals: Sequence[str] = (),
    density_column: str = "dry_density_tpm3",
) -> ScreenResult:
    """Take from the body what cannot be worked, step by step, and account for all of it.

    Zones cut blocks exactly in plan: a block half inside a buffer loses the half of its body that is there.
    The other screens judge whole columns of blocks, because a machine works a column from the top.

    Parameters
    ----------
    model : BlockModel
        Its frame may hold ``dry_tonnes``, or ``density_column``, and the grades in ``metals``.
    body : Body
    settings : ScreenSettings, optional
    zones : GeoDataFrame, optional
        name, status, buffer_m, geometry: exclusion zones. Zones with the status "tenure" are the area held;
        what lies outside all of them is taken.
    tenure : shapely geometry, optional
        Area held, if it comes apart from ``zones``.
    metals : sequence of str
        Grade columns to account for.

    Returns
    -------
    ScreenResult

    Raises
    ------
    ValueError
        If a named column is not in the model.
    """
    settings = settings or ScreenSettings()
    frame = model.frame
    needed = [
        *metals,
        *([settings.thickness_grade_column] if settings.least_thickness_grade is not None else []),
    ]
    missing = [column for column in needed if column not in frame]
    if missing:
        raise ValueError(f"model has no column {', '.join(map(str, missing))}")
    findings = Findings()
    columns = plan_columns(model, body)
    steps: list[tuple[str, str, Array]] = []  # name, what, share of each column taken
    left = np.ones(len(columns))
    crs, status, buffer_m = body.top.crs, settings.exclude_status, settings.vent_buffer_m
    for zone in prepare_zones(zones, tenure, body.outline, crs, findings, status, buffer_m):
        share = np.minimum(columns.inside_share(zone.geometry), left)
        steps.append((zone.key, zone.what, share))
        left = left - share
    rules = [
        _slope_rule(columns, body, settings),
        _thickness_rule(columns, settings),
        _grade_rule(columns, frame, settings, density_column),
    ]
    for rule in rules:
        if rule is None:
            continue
        name, what, taken = rule
        share = np.where(taken, left, 0.0)
        steps.append((name, what, share))
        left = left - share
    if settings.least_patch_m2 is not None:
        share = np.where(_small_patch(columns, left, settings.least_patch_m2), left, 0.0)
        steps.append(("patch", f"connected patch under {settings.least_patch_m2:g} m²", share))
        left = left - share
    left = np.where(left < 1e-12, 0.0, left)
    if len(frame) and not (left > 0).any():
        findings.warning("screen-all-taken", "the screens leave nothing of the body",
                         "look at the waterfall for the screen that takes most")  # fmt: skip
    return ScreenResult(
        _per_block(columns, steps, left),
        _waterfall(frame, columns, steps, metals, density_column),
        columns.to_frame(left),
        findings,
    )


def _slope_rule(columns: Columns, body: Body, settings: ScreenSettings) -> tuple[str, str, Array] | None:
    seafloor = body.recipe.get("seafloor", body.top)
    steep = slope(seafloor, settings.footprint_m)
    columns.slope_deg[:] = steep.sample(columns.easting, columns.northing)
    limit = settings.slope_max_deg
    if limit is None:
        return None
    what = f"seafloor steeper than {limit:g}° over {settings.footprint_m:g} m"
    return "slope", what, np.nan_to_num(columns.slope_deg, nan=0.0) > limit


def _thickness_rule(columns: Columns, settings: ScreenSettings) -> tuple[str, str, Array] | None:
    limit = settings.least_thickness_m
    if limit is None:
        return None
    return "thickness", f"body thinner than {limit:g} m", columns.thickness_m < limit


def _grade_rule(
    columns: Columns, frame: pd.DataFrame, settings: ScreenSettings, density_column: str
) -> tuple[str, str, Array] | None:
    limit, name = settings.least_thickness_grade, settings.thickness_grade_column
    if limit is None or name is None:
        return None
    tonnes = dry_tonnes(frame, density_column)
    weight = frame["volume_m3"].to_numpy() if tonnes is None else tonnes
    grade = frame[name].to_numpy(dtype=np.float64)
    known = np.isfinite(grade) & np.isfinite(weight)
    total = np.bincount(columns.of_block, weights=np.where(known, weight, 0.0), minlength=len(columns))
    metal = np.bincount(
        columns.of_block, weights=np.where(known, weight * grade, 0.0), minlength=len(columns)
    )
    mean = metal / np.where(total > 0, total, 1.0)  # a column without any grade has nothing to show
    what = f"thickness x {name} under {limit:g}"
    return "thickness_grade", what, columns.thickness_m * mean < limit


def _small_patch(columns: Columns, left: Array, least_m2: float) -> NDArray[np.bool_]:
    """Columns that stand in a connected patch of too little area."""
    from scipy.ndimage import label

    if not len(columns):
        return np.zeros(0, dtype=bool)
    i, j = columns.i - columns.i.min(), columns.j - columns.j.min()
    alive = np.zeros((int(j.max()) + 1, int(i.max()) + 1), dtype=bool)
    alive[j, i] = left > 1e-9
    patch = label(alive)[0][j, i]
    area = np.bincount(patch, weights=left * columns.area_m2)
    return (patch > 0) & (area[patch] < least_m2)


def dry_tonnes(frame: pd.DataFrame, density_column: str = "dry_density_tpm3") -> Array | None:
    """Dry tonnes of each block, from its own column or from volume and density; None where neither is there."""
    if "dry_tonnes" in frame:
        return frame["dry_tonnes"].to_numpy(dtype=np.float64)
    if density_column in frame:
        return (frame["volume_m3"] * frame[density_column]).to_numpy(dtype=np.float64)
    return None


def _per_block(columns: Columns, steps: list[tuple[str, str, Array]], left: Array) -> pd.DataFrame:
    shares = {f"taken_{name}": share[columns.of_block] for name, _, share in steps}
    out = pd.DataFrame({"kept_share": left[columns.of_block], "screened_by": ""})
    if steps:
        taken = np.stack([share for _, _, share in steps])
        names = np.array([name for name, _, _ in steps], dtype=object)
        main = np.where(taken.max(axis=0) > 0, names[np.argmax(taken, axis=0)], "")
        out["screened_by"] = main[columns.of_block]
    return out.assign(**shares)


def _waterfall(
    frame: pd.DataFrame,
    columns: Columns,
    steps: list[tuple[str, str, Array]],
    metals: Sequence[str],
    density_column: str,
) -> pd.DataFrame:
    """Taken and remaining quantities after each step."""
    quantities = {"volume_m3": frame["volume_m3"].to_numpy(dtype=np.float64)}
    tonnes = dry_tonnes(frame, density_column)
    if tonnes is not None:
        quantities["dry_tonnes"] = tonnes
        if "wet_tonnes" in frame:
            quantities["wet_tonnes"] = frame["wet_tonnes"].to_numpy(dtype=np.float64)
        for metal in metals:
            grade = frame[metal].to_numpy(dtype=np.float64)
            stem = metal.rpartition("_")[0]
            quantities[f"{stem}_contained_t"] = contained_tonnes(tonnes, grade, metal)
    per_column = {
        name: np.bincount(columns.of_block, weights=np.nan_to_num(values), minlength=len(columns))
        for name, values in quantities.items()
    }
    rows: list[dict[str, Any]] = []
    total = {name: float(values.sum()) for name, values in per_column.items()}
    remaining = dict(total)
    rows.append({"step": "body", "what": "the whole body"} | {f"taken_{name}": 0.0 for name in total}
                | {f"remaining_{name}": value for name, value in total.items()})  # fmt: skip
    for name, what, share in steps:
        taken = {quantity: float(np.sum(values * share)) for quantity, values in per_column.items()}
        remaining = {quantity: remaining[quantity] - taken[quantity] for quantity in taken}
        rows.append({"step": name, "what": what} | {f"taken_{q}": v for q, v in taken.items()}
                    | {f"remaining_{q}": v for q, v in remaining.items()})  # fmt: skip
    rows.append({"step": "remains", "what": "what no screen takes"} | {f"taken_{name}": 0.0 for name in total}
                | {f"remaining_{name}": value for name, value in remaining.items()})  # fmt: skip
    return pd.DataFrame(rows)
