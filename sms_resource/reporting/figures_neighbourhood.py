"""The study of neighbourhoods as a picture: quality, arithmetic and time against samples, blocks and points."""

from __future__ import annotations

import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.style import Drawing

VARIED = {
    "samples": "Most samples (count)",
    "block_size": "Block size (m)",
    "discretisation": "Points of a block (count)",
}
MEASURES = {
    "slope": "Slope of\nregression (ratio)",
    "efficiency": "Kriging\nefficiency (ratio)",
    "negative_weight_sum": "Sum of negative\nweights (ratio)",
    "operations_per_target": "Arithmetic\n(1000 operations)",
    "microseconds_per_target": "Time of a block\n(microseconds)",
}


def neighbourhood(data: ReportData) -> Drawing | None:
    """Slope, efficiency, negative weights and arithmetic; no time, so that the same study gives the same bytes."""
    frame = data.estimation.neighbourhood
    if frame is None or not has(frame, "varied", "setting", "slope"):
        return None
    plain = frame.drop(columns=[c for c in ("microseconds_per_target",) if c in frame])
    note = data.estimation.neighbourhood_note
    caption = (
        f"{note} Filled: the study's own setting. Arithmetic is counted from samples and points of a block."
    )
    return drawn(plain, caption.strip())


def drawn(frame: pd.DataFrame, caption: str) -> Drawing:
    """One row of panels a measure, one column a setting that is varied."""
    columns = [name for name in VARIED if (frame["varied"] == name).any()]
    measures = [name for name in MEASURES if name in frame]
    widths = [max(4, (frame["varied"] == name).sum()) for name in columns]
    figure, axes = style.new_figure(
        9.0,
        0.6 + 1.45 * len(measures),
        len(measures),
        len(columns),
        sharex="col",
        sharey="row",
        width_ratios=widths,
    )
    for across, varied in enumerate(columns):
        part = frame[frame["varied"] == varied].reset_index(drop=True)
        for down, measure in enumerate(measures):
            axis = axes[down, across]
            values = part[measure] / (1000.0 if measure == "operations_per_target" else 1.0)
            axis.plot(part.index, values, color=style.LINES[0], zorder=2)
            for used, group in values.groupby(part["used"]):
                axis.plot(
                    group.index, group, ls="none", marker="o", ms=7 if used else 4.5, color=style.LINES[0],
                    mfc=style.LINES[1] if used else "white", mec=style.INK if used else style.LINES[0], zorder=3,
                )  # fmt: skip
            axis.grid(axis="y", zorder=0)
            axis.set_xlim(-0.5, len(part) - 0.5)
            if measure in ("operations_per_target", "microseconds_per_target"):
                axis.set_ylim(bottom=0.0)
            if across == 0:
                axis.set_ylabel(MEASURES[measure])
        turned = varied != "samples"
        axes[-1, across].set_xticks(
            range(len(part)),
            part["setting"],
            rotation=30 if turned else 0,
            ha="right" if turned else "center",
        )
        axes[-1, across].set_xlabel(VARIED[varied])
    return Drawing(
        "neighbourhood",
        "estimate",
        "Neighbourhood study",
        caption,
        "Slope, efficiency, negative weights and arithmetic against samples, block size and points of a block.",
        figure,
        frame,
    )


def measured(frame: pd.DataFrame, note: str) -> tuple[bytes, bytes, bytes]:
    """The study with the times that were measured, which no two runs share: PNG, SVG and table as CSV.

    Parameters
    ----------
    frame : DataFrame
        As ``Estimation.neighbourhood``, with microseconds_per_target.
    note : str
        What the study recommends.
    """
    with style.borrowed_settings():
        return style.render(drawn(frame, note))
