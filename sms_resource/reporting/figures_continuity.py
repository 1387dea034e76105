"""Variograms with pair counts and the model."""

from __future__ import annotations

import numpy as np
import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, VariogramRecord, has
from sms_resource.reporting.style import Drawing
from sms_resource.units import column_element, element_label


def direction_vector(azimuth: float, plunge: float) -> np.ndarray:
    """Unit vector (east, north, up) of an azimuth (clockwise from north) and a plunge (positive downward), degrees."""
    a, d = np.radians(azimuth), np.radians(plunge)
    return np.array([np.sin(a) * np.cos(d), np.cos(a) * np.cos(d), -np.sin(d)])


def model_curve(
    record: VariogramRecord, kind: str, azimuth: float, plunge: float, distance: np.ndarray
) -> np.ndarray | None:
    """Model values along the direction of an experimental variogram; None where no one direction applies."""
    if record.model is None:
        return None
    if np.isfinite(azimuth) and np.isfinite(plunge):
        unit = direction_vector(azimuth, plunge)
    elif kind in ("down_hole", "vertical"):
        unit = np.array([0.0, 0.0, -1.0])
    else:
        unit = direction_vector(
            float(getattr(record.model, "azimuth", 0.0)), float(getattr(record.model, "plunge", 0.0))
        )
    return np.asarray(record.model.variogram(distance[:, None] * unit[None, :]), dtype=float)


def _panel(axis, record: VariogramRecord, group: pd.DataFrame, number: int) -> pd.DataFrame:  # type: ignore[no-untyped-def]
    kind = str(group["kind"].iloc[0]) if "kind" in group else ""
    distance = group["distance"].to_numpy(float)
    gamma, pairs = group["gamma"].to_numpy(float), group["pairs"].to_numpy(float)
    known = np.isfinite(distance) & np.isfinite(gamma) & (pairs > 0)
    sizes = 10 + 50 * np.sqrt(pairs[known] / max(1.0, pairs[known].max() if known.any() else 1.0))
    axis.scatter(distance[known], gamma[known], s=sizes, color=style.LINES[0], alpha=0.85, lw=0, zorder=3)
    for x, y, count in zip(distance[known], gamma[known], pairs[known]):
        axis.annotate(
            f"{int(count)}",
            (x, y),
            xytext=(0, 5),
            textcoords="offset points",
            fontsize=5.8,
            ha="center",
            color=style.QUIET,
        )
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
    total = getattr(record.model, "total_sill", None)
    if total is not None:
        axis.axhline(float(total), color=style.QUIET, lw=0.7, ls=":")
    top = max([float(gamma[known].max()) if known.any() else 1.0, float(total or 0.0)])
    axis.set_ylim(0, top * 1.2)
    axis.set_xlim(0, reach * 1.08)
    axis.set_xlabel("Distance (m)")
    label = str(group["label"].iloc[0]) if "label" in group else kind
    axis.set_title(label.replace("_", " "), fontsize=8)
    return group.assign(
        model=np.interp(distance, fine, curve) if curve is not None else np.nan,
        metal=record.metal,
        domain=record.domain,
    )


def variograms(data: ReportData) -> list[Drawing]:
    """One figure a metal and domain: a panel a direction, points by pairs, the model over them."""
    drawings = []
    for record in data.variograms:
        frame = record.experimental
        if frame is None or not has(frame, "distance", "gamma", "pairs"):
            continue
        frame = frame.reset_index(drop=True)
        key = "label" if "label" in frame else ("kind" if "kind" in frame else None)
        groups = [part for _, part in frame.groupby(key, sort=False)] if key else [frame]
        groups = [group for group in groups if ((group["pairs"] > 0) & group["gamma"].notna()).any()][:6]
        if not groups:
            continue
        across = min(3, len(groups))
        down = -(-len(groups) // across)
        figure, axes = style.new_figure(3.2 * across + 0.2, 2.6 * down, down, across)
        tables = [
            _panel(axis, record, group, number)
            for number, (axis, group) in enumerate(zip(axes.ravel(), groups))
        ]
        for axis in axes.ravel()[len(groups) :]:
            axis.set_axis_off()
        name = element_label(record.metal) if column_element(record.metal) else record.metal
        for axis in axes[:, 0]:
            axis.set_ylabel(
                f"Semivariance of {name}, squared" if column_element(record.metal) else "Semivariance"
            )
        domain = "" if record.domain in ("", "all") else f", domain {record.domain}"
        slug = "".join(c if c.isalnum() else "_" for c in f"{record.metal}_{record.domain}".lower())
        drawings.append(
            Drawing(
                f"variogram_{slug}",
                "continuity",
                f"Variogram of {name}{domain}",
                "Dots by pairs of composites (numbers), line: the model, dotted: its total sill."
                f" {record.statement}".strip(),
                f"Experimental variograms of {name}{domain} with the fitted model.",
                figure,
                pd.concat(tables, ignore_index=True),
            )
        )
    return drawings
