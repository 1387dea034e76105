"""Figures for choosing domains: grade against distance from a contact, tracers with depth, declustering."""

from __future__ import annotations

import numpy as np
import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.figures_samples import domains_of
from sms_resource.reporting.style import Drawing
from sms_resource.units import element_label

# Ratios published as tracers of hot or deep supply against leached supply; drawn, never judged.
TRACERS = (("cu_pct", "zn_pct", 1.0), ("cu_pct", "mo_ppm", 1e4))


def contacts(data: ReportData) -> Drawing | None:
    """Mean grade against distance from each contact of domains: a row a contact, a column a metal."""
    frame = data.evidence.contact_analysis
    if frame is None or not has(frame, "contact", "metal", "distance_m", "mean", "n"):
        return None
    metals = [m for m in data.subject.metals if (frame["metal"] == m).any()]
    named = list(
        frame.groupby("contact", sort=True)["n"].sum().sort_values(ascending=False, kind="stable").index[:3]
    )
    if not metals or not named:
        return None
    figure, axes = style.new_figure(
        2.5 * len(metals) + 0.6, 1.85 * len(named) + 0.2, len(named), len(metals), sharex="col"
    )
    for row, contact in enumerate(named):
        first, _, second = str(contact).partition(" | ")
        for column, metal in enumerate(metals):
            axis = axes[row, column]
            part = frame[(frame["contact"] == contact) & (frame["metal"] == metal)].sort_values("distance_m")
            axis.axvline(0, color=style.QUIET, lw=0.8, ls=":")
            axis.plot(part["distance_m"], part["mean"], "-", color=style.RULE, lw=1)
            sizes = 6 + 30 * np.sqrt(part["n"] / max(1.0, float(part["n"].max())))
            axis.scatter(part["distance_m"], part["mean"], s=sizes, color=style.LINES[0], lw=0, zorder=3)
            axis.set_ylim(bottom=0)
            axis.set_ylabel(element_label(metal))
            axis.set_title(f"{first} | {second}"[:32], fontsize=7)
            if row == len(named) - 1:
                axis.set_xlabel("Distance from the contact (m)")
    return Drawing(
        "contacts",
        "evidence",
        "Grade against distance from the contacts",
        "Mean grade in the first domain (negative distances) and in the second; dots by number of samples. A step at "
        "zero speaks for a hard boundary, a slope through it for a soft one.",
        "Mean grade against distance from each contact, by metal.",
        figure,
        frame[frame["contact"].isin(named) & frame["metal"].isin(metals)],
    )


def _threshold(frame: pd.DataFrame | None, ratio: str) -> float:
    """What the study calls high; NaN where it does not say."""
    if frame is None or not has(frame, "ratio", "threshold"):
        return float("nan")
    mine = frame.loc[frame["ratio"] == ratio, "threshold"]
    return float(mine.iloc[0]) if len(mine) else float("nan")


def tracers(data: ReportData) -> Drawing | None:
    """Ratios of metals against depth below the collar."""
    composites = data.evidence.composites
    if composites is None or not has(composites, "from_m", "to_m"):
        return None
    pairs = [item for item in TRACERS if item[0] in composites and item[1] in composites]
    if not pairs:
        return None
    figure, axes = style.new_figure(4.2 * len(pairs), 3.6, 1, len(pairs), sharey=True)
    depth = 0.5 * (composites["from_m"] + composites["to_m"])
    table = pd.DataFrame({"depth_m": depth})
    names = domains_of(composites)
    domain = (
        composites["domain"].astype(str)
        if "domain" in composites
        else pd.Series("all", index=composites.index)
    )
    for axis, (upper, lower, factor) in zip(axes[0], pairs):
        ratio = factor * composites[upper] / composites[lower].where(composites[lower] > 0)
        a, b = (element_label(name).rpartition(" (")[0] for name in (upper, lower))
        table[f"{a}/{b}"] = ratio
        for number, name in enumerate(names):
            mine = (domain == name) & (ratio > 0)
            axis.plot(
                ratio[mine],
                depth[mine],
                style.MARKERS[number],
                ms=2.6,
                mew=0,
                alpha=0.65,
                color=style.LINES[number],
                label=style.short(name, 24),
                rasterized=style.is_dense(len(composites)),
            )
        if (ratio > 0).any():
            axis.set_xscale("log")
            style.log_axis(axis.xaxis)
        at = _threshold(data.evidence.tracers, f"{a}/{b}".lower())
        if np.isfinite(at):
            axis.axvline(at, color=style.INK, lw=1.0, ls=":", label="threshold of the study")
        axis.set_xlabel(f"{a}/{b} by mass (ratio)")
    axes[0, 0].set_ylabel("Depth down the hole (m)")
    axes[0, 0].invert_yaxis()
    shown = {}
    for axis in axes[0]:
        shown.update(dict(zip(*reversed(axis.get_legend_handles_labels()))))
    axes[0, 0].legend(shown.values(), shown, title="domain", title_fontsize=7.5)
    return Drawing(
        "tracers",
        "evidence",
        "Ratios of metals with depth",
        "Ratios published as tracers of hot, deep supply against leached supply; a picture to choose domains by, "
        "not a verdict.",
        "Scatter of metal ratios against depth by domain.",
        figure,
        table.assign(domain=domain),
    )
