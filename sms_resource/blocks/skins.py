"""Dilution and loss as skins on the faces of what is cut, and tonnes by bench."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from sms_resource.blocks.body import Body
from sms_resource.blocks.columns import plan_columns
from sms_resource.blocks.grid import BlockGrid
from sms_resource.blocks.model import BlockModel
from sms_resource.blocks.screens import dry_tonnes
from sms_resource.units import contained_tonnes

Array = NDArray[Any]


@dataclass(frozen=True, eq=False)
class Skins:
    """Dilution and loss.

    Attributes
    ----------
    blocks : DataFrame
        One row a block of the model: floor_area_m2, roof_area_m2, side_area_m2 of the faces between what is cut
        and what is not, dilution_m3 and loss_m3.
    table : DataFrame
        step ("cut", "loss", "dilution", "delivered"), volume_m3, dry_tonnes, and each metal's grade and
        contained tonnes.
    """

    blocks: pd.DataFrame
    table: pd.DataFrame


def skins(
    model: BlockModel,
    body: Body,
    kept_share: ArrayLike,
    *,
    over_cut_m: float = 0.3,
    under_cut_m: float = 0.0,
    waste_dry_density_tpm3: float,
    metals: Sequence[str] = (),
    density_column: str = "dry_density_tpm3",
) -> Skins:
    """Over-cut dilution and under-cut loss: a depth times the area of the faces, not a flat percentage.

    Faces lie between what is cut and what is not: below (the floor), beside, and above where a block of the
    body is left on top; the seafloor is no such face. Over-cutting takes a skin of the other side: a block of
    the body that is not cut gives its own grade, anything else is waste without metal. Under-cutting leaves a
    skin of what should be cut, at most all of it.

    Parameters
    ----------
    model : BlockModel
        With ``dry_tonnes`` or ``density_column``, and the grades in ``metals``.
    body : Body
    kept_share : array_like (n,)
        Share of each block that is cut, 0 to 1.
    over_cut_m, under_cut_m : float
        Depth of both skins (0.2 to 0.5 m is common practice, no source).
    waste_dry_density_tpm3 : float
        Of what lies outside the body.
    metals : sequence of str
        Grade columns.

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
    if not waste_dry_density_tpm3 > 0:
        raise ValueError(f"waste_dry_density_tpm3 must be positive, not {waste_dry_density_tpm3!r}")
    tonnes = dry_tonnes(frame, density_column)
    if tonnes is None:
        raise ValueError(f"model needs the column dry_tonnes or {density_column}")
    volume = frame["volume_m3"].to_numpy(dtype=np.float64)
    safe = np.where(volume > 0, volume, 1.0)
    density = tonnes / safe
    grades = {metal: np.nan_to_num(frame[metal].to_numpy(dtype=np.float64)) for metal in metals}
    columns = plan_columns(model, body)
    area = columns.area_m2[columns.of_block]
    height = volume / np.where(area > 0, area, 1.0)
    size = model.grid.size
    faces = {
        "floor": [((0, 0, -1), area)], "roof": [((0, 0, 1), area)],
        "side": [((-1, 0, 0), size[1] * height), ((1, 0, 0), size[1] * height),
                 ((0, -1, 0), size[0] * height), ((0, 1, 0), size[0] * height)],
    }  # fmt: skip
    out = {f"{name}_area_m2": np.zeros(len(frame)) for name in faces}
    dilution = {"volume_m3": 0.0, "dry_tonnes": 0.0} | dict.fromkeys(metals, 0.0)
    skin = np.zeros(len(frame))
    for name, directions in faces.items():
        for step, face in directions:
            other = _neighbour(frame, model.grid, step)
            there = other >= 0
            open_share = np.maximum(share - np.where(there, share[other], 0.0), 0.0)
            if name == "roof":
                open_share = np.where(there, open_share, 0.0)  # above it is the sea
            exposed = open_share * face
            out[f"{name}_area_m2"] += exposed
            taken = exposed * over_cut_m
            skin += taken
            dilution["volume_m3"] += float(taken.sum())
            weight = taken * np.where(there, density[other], waste_dry_density_tpm3)
            dilution["dry_tonnes"] += float(weight.sum())
            for metal in metals:
                grade = np.where(there, grades[metal][other], 0.0)
                dilution[metal] += float(contained_tonnes(weight, grade, metal).sum())
    exposed_area = sum(out.values())
    lost = np.minimum(exposed_area * under_cut_m, volume * share)
    blocks = pd.DataFrame(out | {"dilution_m3": skin, "loss_m3": lost})
    cut = {"volume_m3": float(volume @ share), "dry_tonnes": float(tonnes @ share)}
    loss = {"volume_m3": float(lost.sum()), "dry_tonnes": float(lost @ density)}
    for metal in metals:
        cut[metal] = float(contained_tonnes(tonnes * share, grades[metal], metal).sum())
        loss[metal] = float(contained_tonnes(lost * density, grades[metal], metal).sum())
    delivered = {name: cut[name] - loss[name] + dilution[name] for name in cut}
    rows = [_row("cut", cut, metals), _row("loss", loss, metals), _row("dilution", dilution, metals),
            _row("delivered", delivered, metals)]  # fmt: skip
    return Skins(blocks, pd.DataFrame(rows))


def benches(
    model: BlockModel,
    *,
    height_m: float | None = None,
    floor_m: float | None = None,
    kept_share: ArrayLike | None = None,
    metals: Sequence[str] = (),
    density_column: str = "dry_density_tpm3",
) -> pd.DataFrame:
    """Volume, dry tonnes and metal by bench, from the top down; the sum is that of the blocks.

    Parameters
    ----------
    model : BlockModel
    height_m : float, optional
        Height of a bench; None is that of a block. A block that straddles two benches is shared between them by
        height.
    floor_m : float, optional
        Elevation of the floor of some bench; None is that of the lowest blocks.
    kept_share : array_like (n,), optional
        Share of each block that counts.
    metals : sequence of str
        Grade columns.

    Returns
    -------
    DataFrame
        floor_elevation, roof_elevation, volume_m3, dry_tonnes (if known), and for each metal its grade and
        contained tonnes.

    Raises
    ------
    ValueError
        If ``height_m`` is not positive.
    """
    frame, grid = model.frame, model.grid
    height = grid.size[2] if height_m is None else float(height_m)
    if not (math.isfinite(height) and height > 0):
        raise ValueError(f"height_m must be a positive length in m, not {height_m!r}")
    share = np.ones(len(frame)) if kept_share is None else np.asarray(kept_share, dtype=np.float64)
    floor = grid.origin[2] if floor_m is None else float(floor_m)
    low = grid.origin[2] + frame["k"].to_numpy() * grid.size[2] - floor
    first = np.floor(low / height + 1e-9).astype(np.int64)
    last = np.ceil((low + grid.size[2]) / height - 1e-9).astype(np.int64) - 1
    quantities = {"volume_m3": frame["volume_m3"].to_numpy(dtype=np.float64) * share}
    tonnes = dry_tonnes(frame, density_column)
    if tonnes is not None:
        quantities["dry_tonnes"] = tonnes * share
        for metal in metals:
            quantities[metal] = np.nan_to_num(
                contained_tonnes(tonnes * share, frame[metal].to_numpy(dtype=np.float64), metal)
            )
    if not len(frame):
        return pd.DataFrame(columns=["floor_elevation", "roof_elevation", *quantities])
    lowest, count = int(first.min()), int(last.max() - first.min()) + 1
    sums = {name: np.zeros(count) for name in quantities}
    for step in range(int((last - first).max()) + 1):
        bench = first + step
        inside = bench <= last
        top = np.minimum(low + grid.size[2], (bench + 1) * height)
        part = np.where(inside, (top - np.maximum(low, bench * height)) / grid.size[2], 0.0)
        for name, values in quantities.items():
            sums[name] += np.bincount(
                np.where(inside, bench - lowest, 0), weights=values * part, minlength=count
            )
    edges = floor + (lowest + np.arange(count)) * height
    rows = [
        {"floor_elevation": edge, "roof_elevation": edge + height}
        | _row("", {name: values[n] for name, values in sums.items()}, metals if tonnes is not None else ())
        for n, edge in enumerate(edges)
    ]
    return pd.DataFrame(rows[::-1]).drop(columns="step")


def _row(step: str, sums: dict[str, float], metals: Sequence[str]) -> dict[str, Any]:
    row: dict[str, Any] = {"step": step, "volume_m3": sums["volume_m3"]}
    if "dry_tonnes" in sums:
        row["dry_tonnes"] = sums["dry_tonnes"]
    for metal in metals:
        one = float(contained_tonnes(1.0, 1.0, metal))
        weight = sums["dry_tonnes"]
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
