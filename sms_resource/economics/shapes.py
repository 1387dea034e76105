"""Mineable shapes: what has to be taken together, beside what a cut-off alone would pick.

A cut-off picks blocks; a machine takes what lies above them too. Two shapes are made, both from the seafloor down:

patches
    Each column of blocks is taken down to the depth where the running sum of (value - cut-off) x dry tonnes is
    largest, which is the best pit there is for columns with upright walls; columns that touch form patches.
full benches
    Connected parts of whole benches are taken or left as one, and none without all that lies on it: the set of
    parts with the largest sum, found as a closure of greatest weight (Picard 1976) by a minimum cut.

In both, what only just equals the cut-off is left, since nothing is gained by it. The whole meets the cut-off on
average, and the material below cut-off that had to be taken is shown.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.economics.grade_tonnage import content_columns
from sms_resource.economics.shape_benches import full_benches
from sms_resource.economics.shape_patches import column_patches
from sms_resource.units import contained_tonnes

Floats = NDArray[np.float64]
Mask = NDArray[np.bool_]
METHODS: tuple[str, ...] = ("cut-off alone", "patches", "full benches")


@dataclass(frozen=True)
class ShapeRules:
    """What a shape must be.

    Parameters
    ----------
    bench_blocks : int
        Levels of blocks that make one bench.
    least_patch_m2 : float
        Least area in plan of a connected patch, and of a part of a bench unless a larger part below needs it.
    fill_gaps : bool
        Whether columns enclosed in a patch are taken with it, as long as the patch still meets the cut-off.
    """

    bench_blocks: int = 1
    least_patch_m2: float = 0.0
    fill_gaps: bool = True

    def __post_init__(self) -> None:
        if self.bench_blocks < 1:
            raise ValueError(f"bench_blocks is {self.bench_blocks}; one or more was wanted")


@dataclass(frozen=True)
class MineableShape:
    """What :func:`mineable_shapes` found.

    Attributes
    ----------
    patches, benches : (n,) bool arrays
        Blocks inside each shape.
    patch_number, bench_number : (n,) int arrays
        Patch, or part of a bench, that each block belongs to; 0 outside.
    table : DataFrame
        One row a method ("cut-off alone", "patches", "full benches"): blocks, dry_tonnes, wet_tonnes, the cut-off
        variable and each grade on average, contents, and of these below_blocks, below_dry_tonnes, below_share (must-take
        material below cut-off) and left_dry_tonnes (blocks above cut-off that the shape leaves).
    patch_table, bench_table : DataFrame
        One row a patch, and one row a part of a bench, with what it holds.
    """

    patches: Mask
    benches: Mask
    patch_number: NDArray[np.int64]
    bench_number: NDArray[np.int64]
    table: pd.DataFrame
    patch_table: pd.DataFrame
    bench_table: pd.DataFrame


def mineable_shapes(
    frame: pd.DataFrame,
    *,
    cutoff_variable: str,
    cutoff: float,
    block_size: tuple[float, float, float],
    metals: tuple[str, ...] = (),
    rules: ShapeRules | None = None,
    allowed: Mask | None = None,
    dry_tonnes: str = "dry_tonnes",
    wet_tonnes: str = "wet_tonnes",
) -> MineableShape:
    """Patches and full benches that meet a cut-off on average, beside the cut-off alone.

    Parameters
    ----------
    frame : DataFrame
        One row a block: i, j, k (k rises upward), tonnes (t), the cut-off variable and the metals.
    cutoff_variable : str
        Grade, equivalent or value per dry tonne: something that averages by dry tonnes. A block where it is missing
        counts as zero, since it would be lifted all the same; its tonnes are counted as below cut-off.
    cutoff : float
    block_size : (float, float, float)
        m.
    allowed : (n,) bool array, optional
        Blocks that may be touched; what lies below a block that may not is out of reach.

    Returns
    -------
    MineableShape
    """
    rules = rules or ShapeRules()
    count = len(frame)
    free = np.ones(count, dtype=bool) if allowed is None else np.asarray(allowed, dtype=bool)
    dry = frame[dry_tonnes].to_numpy(dtype=np.float64)
    value = np.nan_to_num(frame[cutoff_variable].to_numpy(dtype=np.float64), nan=0.0)
    weight = (value - cutoff) * dry
    cell = block_size[0] * block_size[1]

    patches, patch_number = column_patches(
        frame, weight, free, cell, least_area_m2=rules.least_patch_m2, fill_gaps=rules.fill_gaps
    )
    benches, bench_number, parts = full_benches(
        frame, weight, free, cell, levels=rules.bench_blocks, least_area_m2=rules.least_patch_m2
    )
    alone = free & (frame[cutoff_variable].to_numpy(dtype=np.float64) >= cutoff)
    columns = [cutoff_variable, *[metal for metal in metals if metal != cutoff_variable]]
    sums = _Sums(frame, columns, metals, alone, value, dry_tonnes, wet_tonnes)
    rows = []
    for name, mask in zip(METHODS, (alone, patches, benches)):
        rows.append(
            {
                "method": name,
                **sums.of(np.flatnonzero(mask)),
                "left_dry_tonnes": float(dry[alone & ~mask].sum()),
            }
        )
    patch_rows = []
    for number, held in enumerate(_members(patch_number), start=1):
        area = cell * len(frame.iloc[held][["i", "j"]].drop_duplicates())
        patch_rows.append({"patch": number, "area_m2": area, **sums.of(held)})
    bench_rows = []
    for number, held in enumerate(_members(bench_number), start=1):
        bench, area, taken = parts[number - 1]
        bench_rows.append({"part": number, "bench": bench, "area_m2": area, "taken": taken, **sums.of(held)})
    bench_number = np.where(benches, bench_number, 0)
    return MineableShape(
        patches, benches, patch_number, bench_number,
        pd.DataFrame(rows), pd.DataFrame(patch_rows), pd.DataFrame(bench_rows),
    )  # fmt: skip


class _Sums:
    """Tonnes, averages and must-take material of any mask over the blocks."""

    def __init__(
        self,
        frame: pd.DataFrame,
        columns: list[str],
        metals: tuple[str, ...],
        alone: Mask,
        value: Floats,
        dry: str,
        wet: str,
    ) -> None:
        self.dry, self.wet = (frame[c].to_numpy(dtype=np.float64) for c in (dry, wet))
        self.grades = {c: frame[c].to_numpy(dtype=np.float64) for c in columns}
        self.grades[columns[0]] = value
        self.metals, self.above = metals, alone

    def of(self, rows: NDArray[np.intp]) -> dict[str, float]:
        dry, wet = self.dry[rows], self.wet[rows]
        total = float(dry.sum())
        out: dict[str, float] = {"blocks": len(rows), "dry_tonnes": total, "wet_tonnes": float(wet.sum())}
        for column, grades in self.grades.items():
            grade = grades[rows]
            weight = float(dry[~np.isnan(grade)].sum())
            out[column] = float(np.nansum(dry * grade)) / weight if weight > 0 else np.nan
        for metal in self.metals:
            tonnes = float(np.nansum(contained_tonnes(1.0, 1.0, metal) * dry * self.grades[metal][rows]))
            out.update({name: tonnes * factor for name, factor in content_columns(metal).items()})
        below = dry[~self.above[rows]]
        out["below_blocks"] = len(below)
        out["below_dry_tonnes"] = float(below.sum())
        out["below_share"] = out["below_dry_tonnes"] / total if total > 0 else np.nan
        return out


def _members(number: NDArray[np.int64]) -> list[NDArray[np.intp]]:
    """Rows of each numbered part, from 1 up."""
    order = np.argsort(number, kind="stable")
    counts = np.bincount(number)
    return np.split(order, np.cumsum(counts))[1:-1] if len(number) else []
