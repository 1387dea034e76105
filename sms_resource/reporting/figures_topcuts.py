"""Extreme grades: what every top cut would do to the mean and the spread, metal by metal and domain by domain."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.figures_samples import cut_words, domains_of, sample_metals
from sms_resource.reporting.style import Drawing
from sms_resource.units import element_label

MOST_ROWS, MOST_COLUMNS = 6, 6
COUNTS = (0, 1, 2, 5, 10, 20, 50, 100, 200, 500, 1000, 2000, 5000)
MEAN, SPREAD, USED, PROPOSED = style.LINES[0], style.LINES[1], style.INK, style.LINES[2]


def top_cuts(data: ReportData) -> Drawing | None:
    """Curves of mean, coefficient of variation, metal removed and number cut; a row a domain, a column a metal."""
    curves, cuts = data.evidence.top_cut_curves, data.evidence.top_cuts
    if curves is None or not has(
        curves, "domain", "metal", "cut", "mean", "cv", "metal_removed_pct", "n_cut"
    ):
        return None
    metals = [m for m in sample_metals(data) or data.subject.metals if (curves["metal"] == m).any()][
        :MOST_COLUMNS
    ]
    composites = data.evidence.composites
    known = list(dict.fromkeys(curves["domain"].astype(str)))
    order = domains_of(composites, MOST_ROWS) if composites is not None else []
    domains = [d for d in known if d in order][:MOST_ROWS] or known[:MOST_ROWS]
    if not metals:
        return None
    figure, axes = style.new_figure(
        2.45 * len(metals) + 0.7, 1.75 * len(domains) + 0.75, len(domains), len(metals), sharey=True
    )
    for row, domain in enumerate(domains):
        for column, metal in enumerate(metals):
            axis = axes[row, column]
            part = curves[(curves["domain"].astype(str) == domain) & (curves["metal"] == metal)]
            if len(part):
                _panel(axis, part, _cut(cuts, domain, metal))
            axis.set_title(f"{style.short(domain, 16)}, {element_label(metal)}", fontsize=7.5, pad=13)
            if row == len(domains) - 1:
                axis.set_xlabel(f"Top cut, {element_label(metal)}", fontsize=7.5)
        axes[row, 0].set_ylabel("Share of uncut (%)")
    low = min(float(line.get_ydata().min()) for axis in axes.ravel() for line in axis.get_lines()[:2])
    axes[0, 0].set_ylim(max(0.0, low - 3.0), 101.5)
    figure.legend(handles=_legend(cuts), loc="outside lower center", ncols=4)
    left = len(known) * len(set(curves["metal"])) - len(domains) * len(metals)
    return Drawing(
        "top_cuts",
        "evidence",
        "What a top cut would do",
        f"Composites weighted by {data.evidence.weighting}; each curve runs from the 80th percentile to the highest grade."
        " Metal removed is what the mean lacks to 100 %. The numbers above each panel count the composites that a cut"
        f" there lowers. {cut_words(cuts).replace('dashed', 'black').replace('dotted', 'dotted green')}"
        + (f" {left} more pairs of domain and metal stand in the table of this figure." if left > 0 else ""),
        "Small multiples of mean and coefficient of variation against the top cut, by domain and metal.",
        figure,
        curves,
    )


def _cut(cuts: pd.DataFrame | None, domain: str, metal: str) -> dict[str, Any]:
    if cuts is None or not has(cuts, "domain", "metal"):
        return {}
    mine = cuts[(cuts["domain"].astype(str) == domain) & (cuts["metal"] == metal)]
    return dict(mine.iloc[0]) if len(mine) else {}


def _panel(axis: Any, part: pd.DataFrame, cut: dict[str, Any]) -> None:
    from matplotlib.ticker import MaxNLocator

    x = part["cut"].to_numpy(float)
    mean, cv = part["mean"].to_numpy(float), part["cv"].to_numpy(float)
    axis.plot(x, 100.0 * mean / mean[-1] if mean[-1] else np.full(len(x), 100.0), color=MEAN, lw=1.5)
    axis.plot(x, 100.0 * cv / cv[-1] if cv[-1] > 0 else np.full(len(x), 100.0), color=SPREAD, lw=1.3, ls="--")
    for name, colour, line in (("proposed", PROPOSED, ":"), ("cut", USED, "-")):
        if np.isfinite(float(cut.get(name, np.nan))):
            axis.axvline(float(cut[name]), color=colour, lw=1.4, ls=line)
    axis.grid(True, axis="y")
    axis.xaxis.set_major_locator(
        MaxNLocator(3, steps=[1, 2, 2.5, 5, 10])
    )  # text is what drawing spends its time on
    if np.isnan(float(cut.get("cut", np.nan))):
        words = "none used" + ("" if np.isfinite(float(cut.get("proposed", np.nan))) else ", none proposed")
        axis.text(0.97, 0.05, words, transform=axis.transAxes, ha="right", fontsize=6.5, color=style.QUIET)
    axis.text(
        0.97, 0.17, f"uncut: mean {mean[-1]:.3g}, CV {cv[-1]:.2f}", transform=axis.transAxes, ha="right", fontsize=6.5
    )  # fmt: skip
    _counts(axis, x, part["n_cut"].to_numpy(int))


def _counts(axis: Any, x: np.ndarray, counts: np.ndarray) -> None:
    """Round numbers of composites cut along the upper edge, where they do not run into one another."""
    span = float(x[-1] - x[0]) or 1.0
    last = np.inf
    places: list[float] = []
    words: list[str] = []
    for wanted in COUNTS:
        at = np.flatnonzero(counts >= wanted)
        if not len(at):
            break
        place = float(x[at[-1]])
        if last - place < 0.16 * span:
            continue
        last = place
        places.append(place)
        words.append(f"{int(counts[at[-1]])}")
    edge = np.ones(len(places))
    axis.plot(places, edge, "|", color=style.QUIET, ms=4, transform=axis.get_xaxis_transform(), clip_on=False)
    style.words_above(axis, places, edge, words, 3, edge=True, fontsize=6, color=style.QUIET)


def _legend(cuts: pd.DataFrame | None) -> list[Any]:
    from matplotlib.lines import Line2D

    shown = [
        Line2D([], [], color=MEAN, lw=1.5, label="mean (100 % less metal removed)"),
        Line2D([], [], color=SPREAD, lw=1.3, ls="--", label="coefficient of variation"),
    ]
    for name, colour, line, text in (
        ("cut", USED, "-", "cut in use"),
        ("proposed", PROPOSED, ":", "cut proposed"),
    ):
        if cuts is not None and has(cuts, name) and cuts[name].notna().any():
            shown.append(Line2D([], [], color=colour, lw=1.4, ls=line, label=text))
    return shown
