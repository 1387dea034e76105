"""Variograms with pair counts and the model."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, VariogramRecord, has
from sms_resource.reporting.style import Drawing
from sms_resource.units import column_element, element_label

if TYPE_CHECKING:
    from matplotlib.axes import Axes

MOST_PANELS = 5


def direction_vector(azimuth: float, plunge: float) -> np.ndarray:
    """Unit vector (east, north, up) of an azimuth (clockwise from north) and a plunge (positive downward), degrees."""
    a, d = np.radians(azimuth), np.radians(plunge)
    return np.array([np.sin(a) * np.cos(d), np.cos(a) * np.cos(d), -np.sin(d)])


def model_curve(
    record: VariogramRecord, kind: str, azimuth: float, plunge: float, distance: np.ndarray
) -> np.ndarray | None:
    """Model values along the direction of an experimental variogram; None where no one direction applies."""
    model = record.drawn_model
    if model is None:
        return None
    if np.isfinite(azimuth) and np.isfinite(plunge):
        unit = direction_vector(azimuth, plunge)
    elif kind in ("down_hole", "vertical"):
        unit = np.array([0.0, 0.0, -1.0])
    else:
        unit = direction_vector(float(getattr(model, "azimuth", 0.0)), float(getattr(model, "plunge", 0.0)))
    return np.asarray(model.variogram(distance[:, None] * unit[None, :]), dtype=float)


def _label(group: pd.DataFrame) -> str:
    """What the direction of a group is called."""
    return next((str(group[name].iloc[0]) for name in ("label", "kind") if name in group), "")


def _panel(axis: Axes, record: VariogramRecord, group: pd.DataFrame) -> pd.DataFrame:
    kind = str(group["kind"].iloc[0]) if "kind" in group else ""
    distance = group["distance"].to_numpy(float)
    gamma, pairs = group["gamma"].to_numpy(float), group["pairs"].to_numpy(float)
    known = np.isfinite(distance) & np.isfinite(gamma) & (pairs > 0)
    sizes = 10 + 50 * np.sqrt(pairs[known] / max(1.0, pairs[known].max() if known.any() else 1.0))
    axis.scatter(distance[known], gamma[known], s=sizes, color=style.LINES[0], alpha=0.85, lw=0, zorder=3)
    counts = [f"{int(count)}" for count in pairs[known]]
    style.words_above(axis, distance[known], gamma[known], counts, 5, fontsize=5.8, color=style.QUIET)
    reach = float(distance[known].max()) if known.any() else 1.0
    fine = np.linspace(reach / 400, reach * 1.05, 200)
    azimuth = (
        float(group["azimuth"].iloc[0])
        if "azimuth" in group and pd.notna(group["azimuth"].iloc[0])
        else float("nan")
    )
    plunge = (
        float(group["plunge"].iloc[0])
        if "plunge" in group and pd.notna(group["plunge"].iloc[0])
        else float("nan")
    )
    curve = model_curve(record, kind, azimuth, plunge, fine)
    if curve is not None:
        axis.plot(fine, curve, color=style.LINES[1], lw=1.5, zorder=2)
    total = getattr(record.drawn_model, "total_sill", None)
    if total is not None:
        axis.axhline(float(total), color=style.QUIET, lw=0.7, ls=":")
    top = max([float(gamma[known].max()) if known.any() else 1.0, float(total or 0.0)])
    axis.set_ylim(0, top * 1.2)
    axis.set_xlim(0, reach * 1.08)
    axis.set_title(_label(group).replace("_", " "), fontsize=8)
    return group.assign(
        model=np.interp(distance, fine, curve) if curve is not None else np.nan,
        metal=record.metal,
        domain=record.domain,
    )


def _groups(record: VariogramRecord) -> list[pd.DataFrame]:
    frame = record.experimental
    if frame is None or not has(frame, "distance", "gamma", "pairs"):
        return []
    frame = frame.reset_index(drop=True)
    key = "label" if "label" in frame else ("kind" if "kind" in frame else None)
    parts = [part for _, part in frame.groupby(key, sort=False)] if key else [frame]
    return [part for part in parts if ((part["pairs"] > 0) & part["gamma"].notna()).any()][:MOST_PANELS]


def _axis_label(record: VariogramRecord) -> str:
    """What the semivariance is of, with its unit; a measure other than the grade itself has none."""
    name = element_label(record.metal) if column_element(record.metal) else record.metal
    if record.measure == "semivariogram":
        return f"Semivariance, {name} squared" if column_element(record.metal) else "Semivariance"
    metal = name.rpartition(" (")[0] or name
    return f"{metal}: {record.measure.replace('_', ' ')}"


def domain_slug(domain: str) -> str:
    """A domain's name as the end of a file name."""
    return "".join(c if c.isascii() and c.isalnum() else "_" for c in domain.lower()) or "all"


def _measure_note(rows: list[tuple[VariogramRecord, list[pd.DataFrame]]]) -> str:
    other = sorted({r.measure.replace("_", " ") for r, _ in rows if r.measure != "semivariogram"})
    if not other:
        return ""
    return (
        f" Rows marked {' or '.join(other)} show dots and model in that measure, without unit; the table has the"
        " model turned back to grades."
    )


def variograms(data: ReportData) -> list[Drawing]:
    """One figure a domain: a row a metal, a panel a direction; points by pairs, the model over them."""
    drawings = []
    for domain in dict.fromkeys(record.domain for record in data.variograms):
        rows = [(r, groups) for r in data.variograms if r.domain == domain and (groups := _groups(r))]
        if not rows:
            continue
        across = max(len(groups) for _, groups in rows)
        # Where every row shows the same directions, the distances stand once, below the last.
        alike = len({tuple(_label(group) for group in groups) for _, groups in rows}) == 1
        figure, axes = style.new_figure(
            3.2 * across + 0.3,
            (2.0 if alike else 2.25) * len(rows) + (0.35 if alike else 0.1),
            len(rows),
            across,
            sharex="col" if alike else False,
        )
        tables, reach = [], [0.0] * across
        for row, (line, (record, groups)) in enumerate(zip(axes, rows), 1):
            for column, (axis, group) in enumerate(zip(line, groups)):
                tables.append(_panel(axis, record, group))
                if row == len(rows) or not alike:
                    axis.set_xlabel("Distance (m)")
                if alike:
                    reach[column] = max(reach[column], axis.get_xlim()[1])
                    axis.set_xlim(0, reach[column])
            for axis in line[len(groups) :]:
                axis.set_axis_off()
            line[0].set_ylabel(_axis_label(record))
        words = "" if domain in ("", "all") else f", domain {domain}"
        drawings.append(
            Drawing(
                f"variograms_{domain_slug(domain)}",
                "continuity",
                f"Variograms{words}",
                "Dots by pairs of composites (numbers), line: the model in that direction, dotted: its total sill."
                + _measure_note(rows),
                f"Experimental variograms of {len(rows)} metals{words} with pair counts and the models.",
                figure,
                pd.concat(tables, ignore_index=True),
            )
        )
    return drawings
