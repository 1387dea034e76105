"""Cross-sections: seafloor, base, blocks by grade, holes as sticks with lost core left blank."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.style import Drawing
from sms_resource.units import element_label

if TYPE_CHECKING:
    from matplotlib.axes import Axes

EXAGGERATION = 2.0


@dataclass(frozen=True)
class SectionLine:
    """A straight section: origin (easting, northing), azimuth of its direction (degrees), limits along it (m).

    ``half_width`` is the distance within which holes are drawn on it.
    """

    name: str
    easting: float
    northing: float
    azimuth: float
    start: float
    stop: float
    half_width: float

    def along(self, easting: Any, northing: Any) -> tuple[Any, Any]:
        """Distance along the section and signed distance from it (m)."""
        a = np.radians(self.azimuth)
        dx, dy = np.asarray(easting) - self.easting, np.asarray(northing) - self.northing
        return dx * np.sin(a) + dy * np.cos(a), dx * np.cos(a) - dy * np.sin(a)

    def points(self, distance: Any) -> tuple[Any, Any]:
        """Eastings and northings at distances along the section."""
        a = np.radians(self.azimuth)
        return self.easting + distance * np.sin(a), self.northing + distance * np.cos(a)


def default_sections(data: ReportData) -> list[SectionLine]:
    """Four sections through the body: two along each axis of the blocks, where most tonnes and where half lie."""
    blocks, grid = data.estimation.blocks, data.estimation.grid
    if blocks is None or grid is None or not has(blocks, "i", "j", "k", "dry_tonnes"):
        return []
    azimuth = float(grid.get("azimuth", 0.0))
    a = np.radians(azimuth)
    size = np.asarray(grid["size"], dtype=float)
    lines: list[SectionLine] = []
    for axis, other, letter in (("j", "i", "A"), ("i", "j", "B")):
        tonnes = blocks.groupby(axis, sort=True)["dry_tonnes"].sum()
        share = tonnes.cumsum() / tonnes.sum()
        rows = [int(share.index[int(np.searchsorted(share.to_numpy(), q))]) for q in (0.3, 0.6)]
        for number, row in enumerate(dict.fromkeys(rows), 1):
            cells = blocks.loc[blocks[axis] == row, other]
            n, m = (
                (0, 1) if axis == "j" else (1, 0)
            )  # the section runs along axis n at a fixed place on axis m
            fixed = (row + 0.5) * size[m]
            u, v = (0.0, fixed) if axis == "j" else (fixed, 0.0)
            east = grid["origin"][0] + u * np.cos(a) + v * np.sin(a)
            north = grid["origin"][1] - u * np.sin(a) + v * np.cos(a)
            start, stop = cells.min() * size[n], (cells.max() + 1) * size[n]
            pad = 0.15 * (stop - start) + 5.0
            direction = (azimuth + 90.0) % 360.0 if axis == "j" else azimuth % 360.0
            half = max(1.5 * size[m], 7.5)
            lines.append(
                SectionLine(f"{letter}{number}", east, north, direction, start - pad, stop + pad, half)
            )
    return lines


def draw_section(
    axes: Axes, data: ReportData, line: SectionLine, metal: str, limits: tuple[float, float]
) -> tuple[Any, pd.DataFrame]:
    """Draw one section on ``axes``; return the mappable of the colours and the table of blocks drawn."""
    from matplotlib.collections import LineCollection, PolyCollection

    blocks, grid = data.estimation.blocks, data.estimation.grid
    assert blocks is not None and grid is not None
    distance = np.linspace(line.start, line.stop, 400)
    x, y = line.points(distance)
    lows: list[float] = []
    highs: list[float] = []
    top = (
        data.body.seafloor.sample(x, y) if data.body.seafloor is not None else np.full(distance.size, np.nan)
    )
    base = data.body.base.sample(x, y) if data.body.base is not None else np.full(distance.size, np.nan)
    size = np.asarray(grid["size"], dtype=float)
    along, off = line.along(blocks["easting"].to_numpy(float), blocks["northing"].to_numpy(float))
    turn = np.radians(line.azimuth - float(grid.get("azimuth", 0.0)))
    across = abs(np.cos(turn)) * size[0] + abs(np.sin(turn)) * size[1]  # block width square to the section
    length = abs(np.sin(turn)) * size[0] + abs(np.cos(turn)) * size[1]
    near = np.abs(off) <= across / 2 * (1 + 1e-9)
    part = blocks[near].assign(along_m=along[near])
    part = part[(part["along_m"] >= line.start) & (part["along_m"] <= line.stop)]
    s, z = part["along_m"].to_numpy(), part["elevation"].to_numpy(float)
    half, up = length / 2, size[2] / 2
    corners = np.stack([np.stack([s - half, z - up], 1), np.stack([s + half, z - up], 1),
                        np.stack([s + half, z + up], 1), np.stack([s - half, z + up], 1)], 1)  # fmt: skip
    cells = PolyCollection(list(corners), array=part[metal].to_numpy(float), cmap=style.GRADE_MAP, edgecolors="face",
                           linewidths=0.15, zorder=2, alpha=0.92)  # fmt: skip
    cells.set_clim(*limits)
    cells.set_rasterized(True)
    axes.add_collection(cells)
    if len(part):
        lows.append(float(z.min() - up))
        highs.append(float(z.max() + up))
    axes.plot(distance, top, color=style.INK, lw=1.4, zorder=5, label="seafloor")
    if np.isfinite(base).any():
        axes.plot(
            distance, base, color="#7a3b12", lw=1.2, ls=(0, (5, 2)), zorder=5, label="base of the sulphide"
        )
    highs += [float(np.nanmax(top))] if np.isfinite(top).any() else []
    sticks = data.evidence.sticks
    if has(sticks, "x_from", "z_from", "x_to", "z_to"):
        assert sticks is not None
        s0, off0 = line.along(sticks["x_from"].to_numpy(float), sticks["y_from"].to_numpy(float))
        s1, off1 = line.along(sticks["x_to"].to_numpy(float), sticks["y_to"].to_numpy(float))
        keep = (
            (np.abs(off0) <= line.half_width)
            & (np.minimum(s0, s1) >= line.start)
            & (np.maximum(s0, s1) <= line.stop)
        )
        z0, z1 = sticks["z_from"].to_numpy(float), sticks["z_to"].to_numpy(float)
        segments = np.stack([np.stack([s0, z0], 1), np.stack([s1, z1], 1)], 1)
        grade = sticks[metal].to_numpy(float) if metal in sticks else np.full(len(sticks), np.nan)
        lost = keep & ~(
            np.isfinite(grade)
            & (sticks.get("recovery_pct", pd.Series(100.0, index=sticks.index)).to_numpy(float) != 0)
        )
        cored = keep & ~lost
        axes.add_collection(
            LineCollection(list(segments[keep]), colors=style.INK, linewidths=6.0, zorder=6, capstyle="butt")
        )
        axes.add_collection(
            LineCollection(list(segments[lost]), colors="white", linewidths=4.4, zorder=7, capstyle="butt")
        )
        colours = LineCollection(
            list(segments[cored]),
            array=grade[cored],
            cmap=style.GRADE_MAP,
            linewidths=4.4,
            zorder=7,
            capstyle="butt",
        )
        colours.set_clim(*limits)
        axes.add_collection(colours)
        shown = sticks.assign(_s=s0, _z=z0)[keep]
        for hole, group in shown.groupby("hole_id", sort=True):
            at = group["_z"].idxmax()
            axes.annotate(str(hole), (group.loc[at, "_s"], group.loc[at, "_z"]), xytext=(0, 5), textcoords="offset points",
                          ha="left", va="bottom", fontsize=5.5, zorder=9, rotation=55)  # fmt: skip
        if keep.any():
            lows.append(float(np.nanmin(z1[keep])))
            highs.append(float(np.nanmax(z0[keep])))
    axes.set_xlim(line.start, line.stop)
    if lows and highs:
        depth = max(highs) - min(lows)
        axes.set_ylim(min(lows) - 0.06 * depth - 1, max(highs) + 0.22 * depth + 2)
    axes.set_aspect(EXAGGERATION)
    axes.set_xlabel(f"Distance along the section, toward azimuth {line.azimuth:.0f}° (m)")
    axes.set_ylabel("Elevation (m)")
    axes.set_title(f"Section {line.name}: through {line.points(0.5 * (line.start + line.stop))[0]:.0f} E, "
                   f"{line.points(0.5 * (line.start + line.stop))[1]:.0f} N; vertical exaggeration {EXAGGERATION:g}; "
                   f"holes within {line.half_width:g} m", fontsize=8)  # fmt: skip
    columns = [
        c for c in ("i", "j", "k", "along_m", "elevation", metal, "proposed_class", "dry_tonnes") if c in part
    ]
    return cells, part[columns].assign(section=line.name)


def sections(data: ReportData) -> list[Drawing]:
    """One figure a direction, two sections each, coloured by the first metal."""
    metals = data.subject.metals
    blocks = data.estimation.blocks
    if not metals or blocks is None or not has(blocks, metals[0], "easting", "northing", "elevation"):
        return []
    metal = metals[0]
    limits = style.grade_limits(blocks[metal])
    drawings = []
    lines = default_sections(data)
    for letter in dict.fromkeys(line.name[0] for line in lines):
        group = [line for line in lines if line.name[0] == letter]
        figure, axes = style.new_figure(9.6, 3.5 * len(group), len(group), 1)
        tables = []
        mappable: Any = None
        for axis, line in zip(axes[:, 0], group):
            mappable, table = draw_section(axis, data, line, metal, limits)
            tables.append(table)
        figure.colorbar(mappable, ax=list(axes[:, 0]), shrink=0.6, label=element_label(metal), extend="max")
        figure.legend(*axes[0, 0].get_legend_handles_labels(), loc="outside lower center", ncols=2)
        direction = "across" if letter == "A" else "along"
        drawings.append(Drawing(f"section_{letter.lower()}", "estimate", f"Sections {direction} the block model",
                                f"Blocks and holes by {element_label(metal)}, on one colour scale; lost core and intervals without "
                                f"assay are left blank. Vertical exaggeration {EXAGGERATION:g}. Blocks are drawn whole; tonnes use "
                                "only the share of a block inside the body.",
                                f"Vertical sections {direction} the model with seafloor, base, blocks by grade and holes.",
                                figure, pd.concat(tables, ignore_index=True)))  # fmt: skip
    return drawings
