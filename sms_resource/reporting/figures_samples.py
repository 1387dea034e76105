"""Figures of the samples: distributions, recovery, surface against core, lost core, density."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.style import Drawing
from sms_resource.units import element_label

PROBABILITIES = (0.01, 0.05, 0.1, 0.25, 0.5, 0.75, 0.9, 0.95, 0.99)


def panel_grid(count: int, most: int = 2) -> tuple[int, int]:
    """Rows and columns for ``count`` panels."""
    across = min(most, max(1, count))
    return -(-count // across), across


def sample_metals(data: ReportData) -> list[str]:
    """The metals that the composites carry."""
    composites = data.evidence.composites
    return [
        m
        for m in data.subject.metals
        if composites is not None and m in composites and composites[m].notna().sum() > 1
    ]


def domains_of(frame: pd.DataFrame, most: int = 4) -> list[str]:
    """The domains with most rows; one called "all" where there is none."""
    if "domain" not in frame:
        return ["all"]
    return [
        str(name)
        for name in (
            frame["domain"]
            .astype(str)
            .value_counts()
            .sort_index()
            .sort_values(ascending=False, kind="stable")
            .index[:most]
        )
    ]


def weights_of(frame: pd.DataFrame) -> Any:
    """Declustering weights where the composites carry them, else one each."""
    if "weight" in frame and (frame["weight"] > 0).any():
        return frame["weight"].fillna(0.0).to_numpy(float)
    return np.ones(len(frame))


def bars_of(values: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Counts and edges of a histogram; values that differ by rounding alone are one value and get a width."""
    bins = min(30, max(8, int(np.sqrt(values.size) * 1.6)))
    low, high = float(values.min()), float(values.max())
    size = max(abs(low), abs(high))
    if high - low <= 1e-9 * size:
        width = max(0.05 * size, 0.5)
        return np.histogram(np.full(values.size, low), bins=bins, range=(low - width, low + width))
    return np.histogram(values, bins=bins)


def histograms(data: ReportData) -> Drawing | None:
    """Histogram of each metal over the composites, with mean, declustered mean and coefficient of variation."""
    metals = sample_metals(data)
    if not metals:
        return None
    composites = data.evidence.composites
    assert composites is not None
    rows, columns = panel_grid(len(metals))
    figure, axes = style.new_figure(4.5 * columns, 2.75 * rows, rows, columns)
    tables = []
    for axis, metal in zip(axes.ravel(), metals):
        known = composites[composites[metal].notna()]
        values, weights = known[metal].to_numpy(float), weights_of(known)
        counts, edges = bars_of(values)
        axis.bar(edges[:-1], counts, width=np.diff(edges), align="edge", color="#7f9bb0", ec="white", lw=0.5)
        mean = float(values.mean())
        weighted = float(np.average(values, weights=weights)) if weights.sum() > 0 else mean
        axis.axvline(mean, color=style.INK, lw=1.2, label=f"mean, each alike {mean:.3g}")
        if abs(weighted - mean) > 1e-12:
            axis.axvline(
                weighted, color="#d55e00", lw=1.2, ls="--", label=f"mean, declustered {weighted:.3g}"
            )
        cv = float(values.std() / mean) if mean else float("nan")
        axis.plot([], [], " ", label=f"n {values.size}, CV {cv:.2f}")
        axis.legend(loc="upper right")
        axis.set_xlabel(element_label(metal))
        axis.set_ylabel("Composites")
        tables.append(pd.DataFrame({"metal": metal, "from": edges[:-1], "to": edges[1:], "count": counts}))
    for axis in axes.ravel()[len(metals) :]:
        axis.set_axis_off()
    return Drawing(
        "histograms",
        "evidence",
        "Histograms of the composites",
        "Composites inside the body's domains, after the treatment of lost core, before top cuts. CV is the "
        "coefficient of variation, each composite alike. The declustered mean takes weight from holes that stand close "
        f"together; the table of statistics weighs composites by {data.evidence.weighting}.",
        "Histograms of composite grades, one for each metal.",
        figure,
        pd.concat(tables, ignore_index=True),
    )


def cut_words(cuts: pd.DataFrame | None) -> str:
    """Which lines of a figure are top cuts, and how many there are of each."""
    used = int(cuts["cut"].notna().sum()) if cuts is not None and has(cuts, "cut") else 0
    proposed = int(cuts["proposed"].notna().sum()) if cuts is not None and has(cuts, "proposed") else 0
    return (
        f"Top cuts in use (dashed): {used or 'none'}; proposed by the study of extreme grades (dotted):"
        f" {proposed or 'none'}."
    )


def log_probability(data: ReportData) -> Drawing | None:
    """Log-probability plot of each metal by domain, with the top cut where there is one."""
    from scipy.special import ndtri

    metals = sample_metals(data)
    if not metals:
        return None
    composites = data.evidence.composites
    assert composites is not None
    rows, columns = panel_grid(len(metals))
    figure, axes = style.new_figure(4.5 * columns, 3.1 * rows, rows, columns)
    names, tables = domains_of(composites), []
    cuts = data.evidence.top_cuts
    for panel, (axis, metal) in enumerate(zip(axes.ravel(), metals)):
        for number, name in enumerate(names):
            part = composites if name == "all" else composites[composites["domain"].astype(str) == name]
            values = np.sort(part[metal].dropna().to_numpy(float))
            values = values[values > 0]
            if values.size < 3:
                continue
            p = (np.arange(values.size) + 0.5) / values.size
            axis.plot(
                values,
                ndtri(p),
                style.MARKERS[number],
                ms=2.8,
                mew=0,
                color=style.LINES[number],
                label=f"{style.short(name, 24)} ({values.size})",
                rasterized=style.is_dense(len(composites)),
            )
            tables.append(
                pd.DataFrame({"metal": metal, "domain": name, "value": values, "cumulative_share": p})
            )
            if cuts is not None and has(cuts, "domain", "metal", "cut"):
                mine = cuts[(cuts["metal"] == metal) & (cuts["domain"].astype(str) == name)]
                for column, line in (("cut", "--"), ("proposed", ":")):
                    for cut in mine[column].dropna() if column in mine else ():
                        axis.axvline(float(cut), color=style.LINES[number], ls=line, lw=1.0)
        axis.set_xscale("log")
        style.log_axis(axis.xaxis)
        axis.set_yticks(ndtri(np.array(PROBABILITIES)), [f"{100 * q:g}" for q in PROBABILITIES])
        axis.set_xlabel(element_label(metal))
        axis.set_ylabel("Cumulative share (%)")
        axis.grid(True)
        if panel == 0:
            axis.legend(title="domain (n)", title_fontsize=7.5)
    for axis in axes.ravel()[len(metals) :]:
        axis.set_axis_off()
    if not tables:
        return None
    return Drawing(
        "log_probability",
        "evidence",
        "Log-probability plots",
        f"A straight line is a lognormal population; a break is a mixture. {cut_words(cuts)}",
        "Log-probability plots of composite grades by metal and domain.",
        figure,
        pd.concat(tables, ignore_index=True),
    )


def density(data: ReportData) -> Drawing | None:
    """Measured dry densities by domain with the low, base and high values in use."""
    measured, used = data.evidence.densities, data.evidence.density_by_domain
    if used is None or not has(used, "domain", "dry_base"):
        return None
    figure, axes = style.new_figure(7.4, 0.6 * len(used) + 1.7)
    axis = axes[0, 0]
    for number, row in enumerate(used.to_dict("records")):
        y = len(used) - 1 - number
        if measured is not None and has(measured, "domain", "dry_density_tpm3"):
            values = measured.loc[
                measured["domain"].astype(str) == str(row["domain"]), "dry_density_tpm3"
            ].dropna()
            spread = (np.arange(len(values)) % 7 - 3) * 0.045
            axis.plot(
                values,
                y + spread,
                "o",
                ms=3.2,
                mew=0,
                color="#7f9bb0",
                alpha=0.8,
                label="measured, dry" if number == 0 else None,
            )
        low, high = row.get("dry_low", row["dry_base"]), row.get("dry_high", row["dry_base"])
        axis.plot(
            [low, high],
            [y - 0.3, y - 0.3],
            color=style.LINES[1],
            lw=2,
            label="low to high, dry" if number == 0 else None,
        )
        axis.plot(
            row["dry_base"],
            y - 0.3,
            "D",
            ms=5,
            color=style.LINES[1],
            label="in use, dry" if number == 0 else None,
        )
        if np.isfinite(row.get("wet_base", np.nan)):
            axis.plot(
                row["wet_base"],
                y - 0.3,
                "s",
                ms=5,
                mfc="white",
                mec=style.LINES[0],
                label="in use, wet" if number == 0 else None,
            )
    axis.set_yticks(
        range(len(used)),
        [f"{style.short(r['domain'])} (n {int(r.get('n', 0) or 0)})" for r in used.to_dict("records")][::-1],
    )
    axis.set_ylim(-0.7, len(used) - 0.4)
    axis.set_xlabel("Bulk density (t/m³)")
    axis.grid(True, axis="x")
    figure.legend(*axis.get_legend_handles_labels(), loc="outside lower center", ncols=4)
    return Drawing(
        "density",
        "evidence",
        "Density by domain",
        "Dry bulk density carries the metal; wet bulk density is what is lifted.",
        "Dot plot of measured and used densities by domain.",
        figure,
        used,
    )
