"""Figures of core recovery, lost core, and surface samples against core."""

from __future__ import annotations

import numpy as np

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.figures_samples import domains_of, panel_grid, sample_metals
from sms_resource.reporting.style import Drawing
from sms_resource.units import chance, element_label

PROBABILITIES = (0.01, 0.05, 0.1, 0.25, 0.5, 0.75, 0.9, 0.95, 0.99)

TREATMENTS = {
    "represented": "recovered grade stands\nfor the whole run",
    "unknown": "lost length unknown\n(weights: recovered length)",
    "neighbour_mean": "lost length takes the mean of\npoorly recovered neighbours",
    "background": "lost length takes\nbackground grade (floor)",
}


def recovery(data: ReportData) -> Drawing | None:
    """Recovery of the runs, and grade against recovery for each metal."""
    composites, runs = data.evidence.composites, data.evidence.runs
    metals = sample_metals(data) if has(composites, "recovery_pct") else []
    has_runs = has(runs, "recovery_pct")
    if not metals and not has_runs:
        return None
    count = len(metals) + (1 if has_runs else 0)
    rows, columns = panel_grid(count, 3)
    figure, axes = style.new_figure(3.3 * columns, 2.7 * rows, rows, columns)
    panels = list(axes.ravel())
    if has_runs:
        assert runs is not None
        axis = panels.pop(0)
        values = runs["recovery_pct"].dropna().to_numpy(float)
        length = (
            (runs["to_m"] - runs["from_m"]).to_numpy(float)[runs["recovery_pct"].notna()]
            if has(runs, "from_m", "to_m")
            else np.ones(values.size)
        )
        axis.hist(
            np.clip(values, 0, 119),
            bins=np.arange(0, 121, 10),
            weights=length,
            color="#7f9bb0",
            ec="white",
            lw=0.6,
        )
        axis.axvline(
            float(np.average(values, weights=length)),
            color="#d55e00",
            lw=1.2,
            ls="--",
            label=f"mean {np.average(values, weights=length):.0f} %",
        )
        axis.set_xlabel("Recovery of the run (%)")
        axis.set_ylabel("Drilled length (m)")
        axis.legend()
    bias = data.evidence.recovery_bias
    for axis, metal in zip(panels, metals):
        assert composites is not None
        for number, name in enumerate(domains_of(composites)):
            part = composites if name == "all" else composites[composites["domain"].astype(str) == name]
            axis.plot(
                part["recovery_pct"],
                part[metal],
                style.MARKERS[number],
                ms=2.6,
                mew=0,
                alpha=0.65,
                color=style.LINES[number],
                label=style.short(name, 24),
                rasterized=style.is_dense(len(composites)),
            )
        axis.set_xlabel("Recovery (%)")
        axis.set_ylabel(element_label(metal))
        if bias is not None and has(bias, "metal", "spearman", "p_adjusted"):
            mine = bias[bias["metal"] == metal].head(4)
            words = "\n".join(
                f"{style.short(row.get('domain', ''), 20)}: ρ {row['spearman']:+.2f}, adjusted {chance(row['p_adjusted'])}"
                for row in mine.to_dict("records")
            )
            axis.set_title(words, fontsize=6)
        if metal == metals[0]:
            axis.legend(loc="upper right", handletextpad=0.1)
    for axis in panels[len(metals) :]:
        axis.set_axis_off()
    columns_out = [
        c
        for c in ("hole_id", "from_m", "to_m", "domain", "recovery_pct", *metals)
        if composites is not None and c in composites
    ]
    table = composites[columns_out] if composites is not None and metals else runs
    assert table is not None
    return Drawing(
        "recovery",
        "evidence",
        "Core recovery, and grade against recovery",
        "Left: drilled length by recovery of the run. Others: grade of composites against their recovery; ρ"
        " is Spearman's rank correlation, p its probability where nothing links the two.",
        "Histogram of core recovery and scatter plots of grade against recovery.",
        figure,
        table,
    )


def surface_against_core(data: ReportData) -> Drawing | None:
    """Ratio of surface to nearest core with its interval, and the means side by side."""
    bias = data.evidence.surface_bias
    if bias is None or not has(bias, "metal", "ratio", "ratio_low", "ratio_high"):
        return None
    if "sample_type" in bias and (bias["sample_type"] == "all").any():
        bias = bias[bias["sample_type"] == "all"]
    figure, axes = style.new_figure(8.8, 0.55 * len(bias) + 2.0, 1, 2)
    ratio, means = axes[0]
    place = np.arange(len(bias))[::-1]
    names = [element_label(metal) for metal in bias["metal"]]
    middle = bias["ratio"].to_numpy(float)
    spread = np.abs(
        np.stack([middle - bias["ratio_low"].to_numpy(float), bias["ratio_high"].to_numpy(float) - middle])
    )
    ratio.errorbar(
        middle,
        place,
        xerr=spread,
        fmt="o",
        color=style.LINES[0],
        ecolor=style.INK,
        elinewidth=1,
        capsize=3,
        ms=5,
    )
    ratio.axvline(1.0, color=style.INK, lw=0.9, ls=":")
    ratio.set_xscale("log")
    known = bias[["ratio", "ratio_low", "ratio_high"]].to_numpy(float)
    known = known[np.isfinite(known) & (known > 0)]
    low, high = (known.min(), known.max()) if len(known) else (1.0, 1.0)
    ticks = [
        t for t in (0.1, 0.2, 0.5, 1, 2, 5, 10, 20, 50) if min(low, 0.9) / 1.3 <= t <= max(high, 1.1) * 1.3
    ]
    ratio.set_xticks(ticks, [f"{t:g}" for t in ticks])
    ratio.minorticks_off()
    ratio.set_xlim(min(low, 0.9) / 1.3, max(high, 1.1) * 1.3)
    ratio.set_yticks(place, names)
    ratio.set_xlabel("Surface mean / nearest-core mean (ratio)")
    ratio.set_ylim(-0.6, len(bias) - 0.4)
    for number, (column, text) in enumerate(
        (
            ("surface_mean", "surface"),
            ("top_metre_mean", "top metre of core"),
            ("nearest_core_mean", "nearest core"),
        )
    ):
        if column in bias:
            scale = (
                bias["nearest_core_mean"].to_numpy(float)
                if "nearest_core_mean" in bias
                else np.ones(len(bias))
            )
            means.barh(
                place + (1 - number) * 0.26,
                bias[column].to_numpy(float) / scale,
                height=0.24,
                color=style.LINES[number],
                label=text,
            )
            for y, value, part in zip(
                place + (1 - number) * 0.26,
                bias[column].to_numpy(float),
                bias[column].to_numpy(float) / scale,
            ):
                means.text(part, y, f" {value:.3g}", va="center", fontsize=6.5)
    means.set_yticks(place, names)
    means.set_ylim(-0.6, len(bias) - 0.4)
    means.set_xlabel("Mean / nearest-core mean (ratio); numbers: grade")
    means.margins(x=0.15)
    figure.legend(*means.get_legend_handles_labels(), loc="outside lower right", ncols=3)
    return Drawing(
        "surface_against_core",
        "evidence",
        "Surface samples against the core beneath them",
        "Ratios above one: the surface is richer than the body. Bars are the bootstrap interval of the"
        " ratio.",
        "Dot plot of surface-to-core grade ratios with intervals, and bars of the means.",
        figure,
        bias,
    )


def lost_core(data: ReportData) -> Drawing | None:
    """The bracket of the treatments of lost core, one panel a metal."""
    frame = data.evidence.lost_core
    if frame is None or not has(frame, "treatment"):
        return None
    rows_all = (
        frame[frame["domain"] == "all"] if "domain" in frame and (frame["domain"] == "all").any() else frame
    )
    metals = [m for m in data.subject.metals if m in rows_all]
    if not metals:
        return None
    order = {name: number for number, name in enumerate(TREATMENTS)}
    rows_all = (
        rows_all.assign(_o=rows_all["treatment"].map(lambda t: order.get(t, 9)))
        .sort_values("_o", kind="stable")
        .drop_duplicates("treatment")
    )
    figure, axes = style.new_figure(2.1 * len(metals) + 1.6, 2.5, 1, len(metals), sharey=True)
    place = np.arange(len(rows_all))[::-1]
    for axis, metal in zip(axes[0], metals):
        values = rows_all[metal].to_numpy(float)
        axis.plot(values, place, "-", color=style.RULE, lw=2, zorder=1)
        for value, y, name in zip(values, place, rows_all["treatment"]):
            used = name == data.evidence.lost_core_default
            axis.plot(
                value,
                y,
                "o",
                ms=8 if used else 6,
                mfc=style.LINES[0] if used else "white",
                mec=style.LINES[0],
            )
            axis.annotate(
                f"{value:.3g}", (value, y), xytext=(0, 6), textcoords="offset points", ha="center", fontsize=7
            )
        axis.set_xlabel(f"Mean {element_label(metal)}")
        axis.set_ylim(-0.5, len(rows_all) - 0.3)
        axis.margins(x=0.25)
    axes[0, 0].set_yticks(place, [TREATMENTS.get(t, str(t)) for t in rows_all["treatment"]], fontsize=6.5)
    return Drawing(
        "lost_core",
        "evidence",
        "What lost core could do to the grade",
        "Mean grade of the blocks of the body under each treatment of lost core; the filled dot is the treatment that"
        " the estimate uses. The ends are the bracket, not a confidence interval.",
        "Dot plots of mean grade by treatment of lost core.",
        figure,
        rows_all.drop(columns="_o"),
    )
