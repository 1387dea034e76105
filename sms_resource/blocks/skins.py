"""Dilution and loss as skins on the faces of what is cut: a depth times an area, not a flat percentage."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from sms_resource.blocks.body import Body
from sms_resource.blocks.columns import Columns, plan_columns
from sms_resource.blocks.grid import BlockGrid
from sms_resource.blocks.model import BlockModel
from sms_resource.blocks.screens import dry_tonnes
from sms_resource.units import contained_tonnes

Array = NDArray[Any]


@dataclass(frozen=True)
class Host:
    """What is taken where over-cutting leaves the body.

    Parameters
    ----------
    dry_density_tpm3 : float
    wet_density_tpm3 : float, optional
        None leaves wet tonnes out.
    grades : mapping of grade column to value
        A metal that is not named has none.
    """

    dry_density_tpm3: float
    wet_density_tpm3: float | None = None
    grades: Mapping[str, float] = field(default_factory=dict)

    def __post_init__(self) -> None:
        for name in ("dry_density_tpm3", "wet_density_tpm3"):
            value = getattr(self, name)
            if value is not None and not value > 0:
                raise ValueError(f"{name} of the host must be positive, not {value!r}")
        if self.wet_density_tpm3 is not None and self.wet_density_tpm3 < self.dry_density_tpm3:
            raise ValueError(
                f"wet_density_tpm3 of the host is {self.wet_density_tpm3!r}, under its dry density"
            )


@dataclass(frozen=True, eq=False)
class Skins:
    """Dilution and loss.

    Attributes
    ----------
    blocks : DataFrame
        One row a block of the model: floor_area_m2, roof_area_m2, side_area_m2 of the faces between what is cut
        and what is not, dilution_m3 and loss_m3.
    table : DataFrame
        step ("cut", "loss", "dilution", "delivered"), volume_m3, dry_tonnes, wet_tonnes where they are known, and
        each metal's grade (on dry mass) and contained tonnes.
    """

    blocks: pd.DataFrame
    table: pd.DataFrame


def skins(
    model: BlockModel,
    body: Body,
    kept_share: ArrayLike,
    *,
    host: Host,
    over_cut_m: float = 0.3,
    under_cut_m: float = 0.0,
    metals: Sequence[str] = (),
    density_column: str = "dry_density_tpm3",
    columns: Columns | None = None,
) -> Skins:
    """Over-cut dilution and under-cut loss: a depth times the area of the faces, not a flat percentage.

    Faces lie between what is cut and what is not: below (the floor), beside, and above where a block of the
    body is left on top; the seafloor is no such face, for water lies there. The depth under the base is upright.
    Over-cutting takes a skin of the other side: first of the block of the body that is left there, with its own
    density and grade, at most all of it; what goes on from there is host rock, or water above a roof. Under-cutting
    leaves a skin of what should be cut, at most all of it. A block that is cut in part counts with its share of each
    face.

    Parameters
    ----------
    model : BlockModel
        With ``dry_tonnes`` or ``density_column``, and the grades in ``metals``; ``wet_tonnes`` if they are to be told.
    body : Body
    kept_share : array_like (n,)
        Share of each block that is cut, 0 to 1.
    host : Host
        What lies outside the body.
    over_cut_m, under_cut_m : float
        Depth of both skins (0.2 to 0.5 m is common practice, no source).
    metals : sequence of str
        Grade columns. Dry mass without a grade does not weigh in the mean grade.
    columns : Columns, optional
        Of :func:`plan_columns` for the same blocks, where they are at hand.

    Raises
    ------
    ValueError
        If a depth is negative, shares do not fit the model, or tonnes cannot be made.
    """
    share = np.asarray(kept_share, dtype=np.float64)
    frame = model.frame
    if share.shape != (len(frame),) or not ((share >= 0) & (share <= 1)).all():
        raise ValueError(f"kept_share must hold {len(frame)} shares from 0 to 1")
    for name, value in (("over_cut_m", over_cut_m), ("under_cut_m", under_cut_m)):
        if not (math.isfinite(value) and value >= 0):
            raise ValueError(f"{name} must be a depth of at least 0 m, not {value!r}")
    per_m3 = _per_cubic_metre(frame, metals, density_column, wet=host.wet_density_tpm3 is not None)
    volume = frame["volume_m3"].to_numpy(dtype=np.float64)
    faces, inside, outside = _over_cut(model, body, columns or plan_columns(model, body), share, over_cut_m)
    exposed = np.sum(list(faces.values()), axis=0)
    lost = np.minimum(exposed * under_cut_m, volume * share)
    rock = _host_per_cubic_metre(host, per_m3, metals)
    taken = np.zeros(len(frame))  # of each block that is left, by its neighbours
    for other, part in inside:
        taken += np.bincount(other, weights=part, minlength=len(frame))
    spared = np.minimum(
        1.0, volume * (1.0 - share) / np.where(taken > 0, taken, 1.0)
    )  # nothing is taken twice
    skin = outside.copy()
    for other, part in inside:
        skin += part * spared[other]
    outer = float(outside.sum())
    # Sums, not products of vectors, which depend on how many threads the linear algebra has.
    cut = {name: float(np.sum(values * (volume * share))) for name, values in per_m3.items()}
    loss = {name: float(np.sum(values * lost)) for name, values in per_m3.items()}
    dilution = {
        name: float(np.sum(values * (taken * spared))) + outer * rock[name] for name, values in per_m3.items()
    }
    delivered = {name: cut[name] - loss[name] + dilution[name] for name in cut}
    rows = [_row(step, sums, metals) for step, sums in
            (("cut", cut), ("loss", loss), ("dilution", dilution), ("delivered", delivered))]  # fmt: skip
    blocks = pd.DataFrame(
        {f"{name}_area_m2": area for name, area in faces.items()} | {"dilution_m3": skin, "loss_m3": lost}
    )
    return Skins(blocks, pd.DataFrame(rows))


def _over_cut(
    model: BlockModel, body: Body, columns: Columns, share: Array, depth_m: float
) -> tuple[dict[str, Array], list[tuple[Array, Array]], Array]:
    """Areas of open faces; volumes over-cut of the block on each face's other side; and of the host, a block."""
    frame, grid = model.frame, model.grid
    volume = frame["volume_m3"].to_numpy(dtype=np.float64)
    area = columns.area_m2[columns.of_block]
    height = volume / np.where(area > 0, area, 1.0)
    size = grid.size
    wide, long = size[1] * height, size[0] * height
    across = [np.full(len(frame), length) for length in size[:2]]
    directions = [
        ("floor", (0, 0, -1), area, height), ("roof", (0, 0, 1), area, height),
        ("side", (-1, 0, 0), wide, across[0]), ("side", (1, 0, 0), wide, across[0]),
        ("side", (0, -1, 0), long, across[1]), ("side", (0, 1, 0), long, across[1]),
    ]  # fmt: skip
    areas = {name: np.zeros(len(frame)) for name in ("floor", "roof", "side")}
    inside: list[tuple[Array, Array]] = []
    outside = np.zeros(len(frame))
    for name, step, face, width in directions:
        other = _neighbour(frame, grid, step)
        there = other >= 0
        open_share = np.maximum(share - np.where(there, share[other], 0.0), 0.0)
        open_share = np.where(there | _host_beside(frame, grid, body, step), open_share, 0.0)
        exposed = open_share * face
        areas[name] += exposed
        beyond = np.where(there, width[other], 0.0)
        reached = exposed * np.minimum(depth_m, beyond)
        inside.append((np.maximum(other, 0), reached))  # nothing is reached where no block is
        if name != "roof":
            outside += exposed * np.maximum(depth_m - beyond, 0.0)
    return areas, inside, outside


def _host_beside(frame: pd.DataFrame, grid: BlockGrid, body: Body, step: tuple[int, int, int]) -> Array:
    """Whether host rock lies beside each block where the model has no block.

    Below it does; above is water. Beside it does outside the outline and under the seafloor. Where the body goes on
    beside, but higher or lower, the place is water, or lies under a floor that is counted with its own column.
    """
    if step[2]:
        return np.full(len(frame), step[2] < 0)
    i, j, k = (frame[name].to_numpy(dtype=np.int64) + delta for name, delta in zip("ijk", step, strict=True))
    wide = grid.shape[0] + 2  # places beside the grid have numbers of their own
    held = np.unique((frame["j"].to_numpy(dtype=np.int64) + 1) * wide + frame["i"].to_numpy() + 1)
    outside = ~np.isin((j + 1) * wide + i + 1, held)
    centre = grid.centres(i, j, k)
    seafloor = body.recipe.get("seafloor", body.top).sample(centre[:, 0], centre[:, 1])
    return outside & ~(centre[:, 2] > seafloor)


def _per_cubic_metre(
    frame: pd.DataFrame, metals: Sequence[str], density_column: str, *, wet: bool
) -> dict[str, Array]:
    """What a cubic metre of each block holds: volume, tonnes, tonnes with a grade, metal."""
    tonnes = dry_tonnes(frame, density_column)
    if tonnes is None:
        raise ValueError(f"model needs the column dry_tonnes or {density_column}")
    volume = frame["volume_m3"].to_numpy(dtype=np.float64)
    safe = np.where(volume > 0, volume, 1.0)
    density = tonnes / safe
    made: dict[str, Array] = {"volume_m3": np.ones(len(frame)), "dry_tonnes": density}
    if wet:
        if "wet_tonnes" not in frame:
            raise ValueError("model needs the column wet_tonnes, for the host has a wet density")
        made["wet_tonnes"] = frame["wet_tonnes"].to_numpy(dtype=np.float64) / safe
    for metal in metals:
        grade = frame[metal].to_numpy(dtype=np.float64)
        made[f"graded {metal}"] = np.where(np.isfinite(grade), density, 0.0)
        made[metal] = contained_tonnes(density, np.nan_to_num(grade), metal)
    return made


def _host_per_cubic_metre(host: Host, names: Mapping[str, Array], metals: Sequence[str]) -> dict[str, float]:
    """What a cubic metre of host rock holds, by the same names."""
    dry = host.dry_density_tpm3
    made = {"volume_m3": 1.0, "dry_tonnes": dry, "wet_tonnes": host.wet_density_tpm3 or math.nan}
    for metal in metals:
        made[f"graded {metal}"] = dry
        made[metal] = float(contained_tonnes(dry, float(host.grades.get(metal, 0.0)), metal))
    return {name: made[name] for name in names}


def _row(step: str, sums: dict[str, float], metals: Sequence[str]) -> dict[str, Any]:
    row: dict[str, Any] = {"step": step}
    row |= {name: sums[name] for name in ("volume_m3", "dry_tonnes", "wet_tonnes") if name in sums}
    for metal in metals:
        one = float(contained_tonnes(1.0, 1.0, metal))
        weight = sums[f"graded {metal}"]
        row[metal] = sums[metal] / (weight * one) if weight > 0 else math.nan
        row[f"{metal.rpartition('_')[0]}_contained_t"] = sums[metal]
    return row


def _neighbour(frame: pd.DataFrame, grid: BlockGrid, step: tuple[int, int, int]) -> Array:
    """Row of the block beside each block in a direction; -1 where the model has none."""
    index = [frame[name].to_numpy(dtype=np.int64) for name in "ijk"]
    ni, nj, nk = grid.shape
    key = (index[1] * ni + index[0]) * nk + index[2]
    order = np.argsort(key, kind="stable")
    moved = [values + delta for values, delta in zip(index, step, strict=True)]
    inside = np.ones(len(frame), dtype=bool)
    for values, limit in zip(moved, (ni, nj, nk), strict=True):
        inside &= (values >= 0) & (values < limit)
    wanted = (moved[1] * ni + moved[0]) * nk + moved[2]
    place = np.searchsorted(key[order], wanted)
    found = order[np.minimum(place, len(order) - 1)] if len(order) else np.zeros(0, dtype=np.int64)
    return np.where(inside & (key[found] == wanted), found, -1)
