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


@dataclass(frozen=True)
class SectionLine:
    """A straight section: a point on it (easting, northing), its azimuth (degrees), its limits along it (m).

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


def crossings(
    line: SectionLine, easting: Any, northing: Any, size: Any, grid_azimuth: float
) -> tuple[Any, Any]:
    """Where the line enters and leaves each block (distances along it); entry above exit where it misses.

    The slab method on rectangles turned by ``grid_azimuth``.
    """
    turn = np.radians(line.azimuth - grid_azimuth)
    g = np.radians(grid_azimuth)
    dx, dy = np.asarray(easting) - line.easting, np.asarray(northing) - line.northing
    centre = (dx * np.cos(g) - dy * np.sin(g), dx * np.sin(g) + dy * np.cos(g))
    enter, leave = np.full(dx.shape, -np.inf), np.full(dx.shape, np.inf)
    for at, step, width in zip(centre, (np.sin(turn), np.cos(turn)), size):
        if abs(step) < 1e-9:
            # Half open, so that a line on the face between two blocks crosses only one of them.
            missed = (at - width / 2 > 1e-9) | (at + width / 2 <= 1e-9)
            enter = np.where(missed, np.inf, enter)
            continue
        ends = np.stack([(at - width / 2) / step, (at + width / 2) / step])
        enter, leave = np.maximum(enter, ends.min(0)), np.minimum(leave, ends.max(0))
    return enter, leave


def default_sections(data: ReportData) -> list[SectionLine]:
    """Sections through the body at even shares of its dry tonnes.

    Along the azimuth of the study where it names one; else half of them along each axis of the blocks.
    """
    blocks, grid = data.estimation.blocks, data.estimation.grid
    if blocks is None or grid is None or not has(blocks, "easting", "northing", "dry_tonnes"):
        return []
    own = data.subject.section_azimuth_deg
    count = max(1, data.subject.section_count)
    base = float(grid.get("azimuth", 0.0))
    directions = [(own, count)] if own is not None else [(base + 90.0, -(-count // 2)), (base, count // 2)]
    easting, northing = blocks["easting"].to_numpy(float), blocks["northing"].to_numpy(float)
    tonnes = blocks["dry_tonnes"].to_numpy(float)
    middle = float(np.average(easting, weights=tonnes)), float(np.average(northing, weights=tonnes))
    width = float(max(grid["size"][0], grid["size"][1]))
    lines: list[SectionLine] = []
    for letter, (azimuth, wanted) in zip("AB", directions):
        guide = SectionLine("", *middle, float(azimuth) % 360.0, 0.0, 0.0, 0.0)
        along, off = guide.along(easting, northing)
        order = np.argsort(off, kind="stable")
        share = np.cumsum(tonnes[order]) / tonnes.sum()
        for number in range(wanted):
            place = min(int(np.searchsorted(share, (number + 0.5) / wanted)), len(order) - 1)
            shift = float(off[order[place]])
            a = np.radians(guide.azimuth)
            east, north = middle[0] + shift * np.cos(a), middle[1] - shift * np.sin(a)
            near = np.abs(off - shift) <= width
            start, stop = float(along[near].min()), float(along[near].max())
            pad = 0.12 * (stop - start) + 1.5 * width
            lines.append(
                SectionLine(
                    f"{letter}{number + 1}",
                    east,
                    north,
                    guide.azimuth,
                    start - pad,
                    stop + pad,
                    max(1.5 * width, 7.5),
                )
            )
    return lines


def draw_section(
    axes: Axes, data: ReportData, line: SectionLine, metal: str, limits: tuple[float, float]
) -> tuple[Any, pd.DataFrame]:
    """Draw one section on ``axes``; return the mappable of the colours and the table of blocks drawn."""
    distance = np.linspace(line.start, line.stop, 400)
    x, y = line.points(distance)
    nothing = np.full(distance.size, np.nan)
    top = data.body.seafloor.sample(x, y) if data.body.seafloor is not None else nothing
    base = data.body.base.sample(x, y) if data.body.base is not None else nothing
    cells, part, levels = _draw_blocks(axes, data, line, metal, limits)
    axes.plot(distance, top, color=style.INK, lw=1.4, zorder=5, label="seafloor")
    if np.isfinite(base).any():
        axes.plot(
            distance, base, color="#7a3b12", lw=1.2, ls=(0, (5, 2)), zorder=5, label="base of the sulphide"
        )
        levels.append(float(np.nanmin(base)))
    if np.isfinite(top).any():
        levels.append(float(np.nanmax(top)))
    levels += _draw_sticks(axes, data, line, metal, limits)
    axes.set_xlim(line.start, line.stop)
    if levels:
        depth = max(levels) - min(levels)
        axes.set_ylim(min(levels) - 0.06 * depth - 1, max(levels) + 0.24 * depth + 2)
    factor = data.subject.exaggeration
    axes.set_aspect(factor)
    axes.set_xlabel(f"Distance along the section, toward azimuth {line.azimuth:.0f}° (m)")
    axes.set_ylabel("Elevation (m)")
    east, north = line.points(0.5 * (line.start + line.stop))
    axes.set_title(
        f"Section {line.name}: through {east:.0f} E, {north:.0f} N; vertical exaggeration {factor:g}; "
        f"holes within {line.half_width:g} m",
        fontsize=8,
    )
    columns = ["i", "j", "k", "from_m", "to_m", "elevation", metal, "proposed_class", "dry_tonnes"]
    return cells, part[[c for c in columns if c in part]].assign(section=line.name)


def _draw_blocks(
    axes: Axes, data: ReportData, line: SectionLine, metal: str, limits: tuple[float, float]
) -> tuple[Any, pd.DataFrame, list[float]]:
    from matplotlib.collections import PolyCollection

    blocks, grid = data.estimation.blocks, data.estimation.grid
    assert blocks is not None and grid is not None
    size = np.asarray(grid["size"], dtype=float)
    enter, leave = crossings(
        line,
        blocks["easting"].to_numpy(float),
        blocks["northing"].to_numpy(float),
        size[:2],
        float(grid.get("azimuth", 0.0)),
    )
    hit = (leave > enter) & (leave > line.start) & (enter < line.stop)
    part = blocks[hit].assign(from_m=enter[hit], to_m=leave[hit])
    s0, s1 = part["from_m"].to_numpy(float), part["to_m"].to_numpy(float)
    z, up = part["elevation"].to_numpy(float), size[2] / 2
    rings = (
        np.stack([s0, z - up], 1),
        np.stack([s1, z - up], 1),
        np.stack([s1, z + up], 1),
        np.stack([s0, z + up], 1),
    )
    cells = PolyCollection(
        list(np.stack(rings, 1)),
        array=part[metal].to_numpy(float),
        cmap=style.GRADE_MAP,
        edgecolors="face",
        linewidths=0.15,
        zorder=2,
        alpha=0.92,
    )
    cells.set_clim(*limits)
    cells.set_rasterized(True)
    axes.add_collection(cells)
    return cells, part, [float(z.min() - up), float(z.max() + up)] if len(part) else []


def _draw_sticks(
    axes: Axes, data: ReportData, line: SectionLine, metal: str, limits: tuple[float, float]
) -> list[float]:
    from matplotlib.collections import LineCollection

    sticks = data.evidence.sticks
    if sticks is None or not has(sticks, "x_from", "z_from", "x_to", "z_to"):
        return []
    s0, off = line.along(sticks["x_from"].to_numpy(float), sticks["y_from"].to_numpy(float))
    s1, _ = line.along(sticks["x_to"].to_numpy(float), sticks["y_to"].to_numpy(float))
    keep = (
        (np.abs(off) <= line.half_width)
        & (np.minimum(s0, s1) >= line.start)
        & (np.maximum(s0, s1) <= line.stop)
    )
    if not keep.any():
        return []
    z0, z1 = sticks["z_from"].to_numpy(float), sticks["z_to"].to_numpy(float)
    segments = np.stack([np.stack([s0, z0], 1), np.stack([s1, z1], 1)], 1)
    grade = sticks[metal].to_numpy(float) if metal in sticks else np.full(len(sticks), np.nan)
    recovery = (
        sticks["recovery_pct"].to_numpy(float) if "recovery_pct" in sticks else np.full(len(sticks), 100.0)
    )
    cored = keep & np.isfinite(grade) & (recovery != 0)
    lost = keep & ~cored
    frame = LineCollection(list(segments[keep]), colors=style.INK, linewidths=6.0, zorder=6, capstyle="butt")
    blank = LineCollection(list(segments[lost]), colors="white", linewidths=4.4, zorder=7, capstyle="butt")
    colours = LineCollection(
        list(segments[cored]),
        array=grade[cored],
        cmap=style.GRADE_MAP,
        linewidths=4.4,
        zorder=7,
        capstyle="butt",
    )
    colours.set_clim(*limits)
    for collection in (frame, blank, colours):
        axes.add_collection(collection)
    shown = sticks.assign(_s=s0, _z=z0)[keep]
    tops = shown.loc[shown.groupby("hole_id", sort=True)["_z"].idxmax()]
    for hole, at, height in zip(tops["hole_id"], tops["_s"], tops["_z"]):
        axes.annotate(
            str(hole)[:16],
            (at, height),
            xytext=(0, 5),
            textcoords="offset points",
            ha="left",
            va="bottom",
            fontsize=5.8,
            zorder=9,
            rotation=55,
        )
    return [float(np.nanmin(z1[keep])), float(np.nanmax(z0[keep]))]


def _panel_height(data: ReportData, line: SectionLine) -> float:
    """Height (inches) at which a section fills the width of its figure."""
    blocks = data.estimation.blocks
    assert blocks is not None
    depth = 1.3 * float(blocks["elevation"].max() - blocks["elevation"].min()) + 3.0
    return float(np.clip(8.2 * depth * data.subject.exaggeration / (line.stop - line.start), 1.4, 4.6)) + 0.75


def sections(data: ReportData) -> list[Drawing]:
    """One figure a direction with its sections below one another, coloured by the first metal."""
    metals = data.subject.metals
    blocks = data.estimation.blocks
    if not metals or blocks is None or not has(blocks, metals[0], "easting", "northing", "elevation"):
        return []
    metal = metals[0]
    limits = style.grade_limits(blocks[metal])
    factor = data.subject.exaggeration
    drawings = []
    lines = default_sections(data)
    for letter in dict.fromkeys(line.name[0] for line in lines):
        group = [line for line in lines if line.name[0] == letter]
        heights = [_panel_height(data, line) for line in group]
        figure, axes = style.new_figure(9.6, sum(heights) + 0.3, len(group), 1, height_ratios=heights)
        tables = []
        mappable: Any = None
        for axis, line in zip(axes[:, 0], group):
            mappable, table = draw_section(axis, data, line, metal, limits)
            tables.append(table)
        figure.colorbar(mappable, ax=list(axes[:, 0]), shrink=0.6, label=element_label(metal), extend="max")
        figure.legend(*axes[0, 0].get_legend_handles_labels(), loc="outside lower center", ncols=2)
        toward = f"{group[0].azimuth:.0f}°"
        drawings.append(
            Drawing(
                f"section_{letter.lower()}",
                "estimate",
                f"Sections toward azimuth {toward}",
                f"Blocks and holes by {element_label(metal)}, on one colour scale; lost core and intervals without "
                f"assay are left blank. Vertical exaggeration {factor:g}. Blocks are drawn whole; tonnes use only "
                "the share of a block inside the body.",
                f"Vertical sections toward azimuth {toward} with seafloor, base, blocks by grade and holes.",
                figure,
                pd.concat(tables, ignore_index=True),
            )
        )
    return drawings
