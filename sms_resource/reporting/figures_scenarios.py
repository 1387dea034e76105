"""What scenarios do, as pictures: tornado and heat maps."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.elements import column_label
from sms_resource.reporting.rounding import mass_unit, significant_text
from sms_resource.reporting.style import Drawing
from sms_resource.units import column_element, element_label

MOST_DECISIONS = 14
CUT_OFF = 2.5  # times the third longest bar of a tornado
LOW, HIGH = "#d9915b", "#6fa58f"


def measure_label(measure: str) -> str:
    """What a measure of a scenario is called on an axis."""
    if measure in ("dry_tonnes", "wet_tonnes"):
        return f"{measure.partition('_')[0].capitalize()} tonnes above cut-off"
    element, _, unit = measure.rpartition("_")
    if unit in ("t", "kg", "oz") and column_element(f"{element}_pct"):
        return f"{element.capitalize()} contained ({unit} metal)"
    return element_label(measure) if column_element(measure) else column_label(measure)


def tornado(data: ReportData) -> Drawing | None:
    """Ranked effect of each decision on dry tonnes, grade and metal, in percent of the base."""
    frame = data.value.tornado
    if frame is None or not has(frame, "decision", "measure", "low", "base", "high"):
        return None
    measures = list(dict.fromkeys(frame["measure"].astype(str)))[:3]
    spread = frame.assign(size=((frame["high"] - frame["low"]).abs() / frame["base"].abs()).fillna(0.0))
    sizes = spread.groupby("decision", sort=True)["size"].max()
    moving = sizes[sizes > 5e-4].sort_values(ascending=False, kind="stable")
    names = list(moving.index[:MOST_DECISIONS])
    if not names:
        return None
    figure, axes = style.new_figure(
        2.9 * len(measures) + 2.4, 0.36 * len(names) + 1.5, 1, len(measures), sharey=True
    )
    for axis, measure in zip(axes[0], measures):
        part = frame[frame["measure"] == measure].drop_duplicates("decision").set_index("decision")
        _bars(axis, part.reindex(names))
        said = measure_label(measure).partition(" (")[0]
        axis.set_xlabel(f"{said}{' grade' if column_element(measure) else ''}: change (%)")
    axes[0, 0].set_yticks(
        range(len(names)), [style.short(str(name).replace("_", " ")) for name in names][::-1]
    )
    figure.suptitle(f"{data.tally_label}, {data.cutoff_text}", x=0.01, ha="left", fontsize=8)
    quiet = len(sizes) - len(moving)
    told = f" Shown are the {len(names)} that move most of {len(moving)}." if len(moving) > len(names) else ""
    told += f" {quiet} more change nothing at this cut-off." if quiet else ""
    return Drawing(
        "tornado",
        "scenarios",
        f"What moves the estimate ({data.tally_label})",
        f"Each decision moved alone to its low (orange) and high (green) alternative; at {data.cutoff_text}. "
        f"Hatched bars go on beyond the axis, to the number beside them.{told}",
        "Tornado of the effect of each decision on dry tonnes, grade and metal, ranked.",
        figure,
        frame,
    )


def _changes(row: Mapping[Any, Any]) -> list[tuple[str, str, float]]:
    """Side, colour and change in percent of each alternative that changes something."""
    base = float(row["base"])
    if not math.isfinite(base) or not base:
        return []
    found = [
        (side, colour, 100 * (float(row[side]) / base - 1)) for side, colour in (("low", LOW), ("high", HIGH))
    ]
    return [item for item in found if math.isfinite(item[2]) and abs(item[2]) >= 0.05]


def _longest(rows: Sequence[Mapping[Any, Any]]) -> float:
    """Length at which bars are cut off, so that one or two giants do not hide what all others do."""
    sizes = sorted((max((abs(item[2]) for item in _changes(row)), default=0.0) for row in rows), reverse=True)
    third = sizes[2] if len(sizes) > 2 else 0.0
    return CUT_OFF * third if third > 0 and sizes[0] > CUT_OFF * third else math.inf


def _bars(axis: Any, part: pd.DataFrame) -> None:
    """One measure: a bar to each side for each decision, with the alternative that it is."""
    ends: list[float] = [0.0]
    rows = part.to_dict("records")
    longest = _longest(rows)
    for number, row in enumerate(rows):
        y = len(part) - 1 - number
        for side, colour, change in _changes(row):
            value = math.copysign(min(abs(change), longest), change)
            ends.append(value)
            cut = abs(change) > longest
            axis.barh(
                y, value, color=colour, height=0.62, hatch="////" if cut else None, edgecolor="white", lw=0
            )
            said = row.get(f"{side}_label")
            words = said.strip('"').replace("_", " ") if isinstance(said, str) and said != "base" else ""
            text = (
                f"{style.short(words, 14)}: {change:+.0f} %".replace("-", "\u2212")
                if cut
                else style.short(words, 20)
            )
            if text:
                axis.annotate(
                    text, (value, y),
                    xytext=(3 if value >= 0 else -3, 0), textcoords="offset points", va="center",
                    ha="left" if value >= 0 else "right", fontsize=6.2,
                )  # fmt: skip
    axis.axvline(0, color=style.INK, lw=0.9)
    # Room for the words beside the bars, on the side that has any.
    low, high = min(ends), max(ends)
    room = (1.0 if math.isfinite(longest) else 0.45) * max(high - low, 1e-6)
    axis.set_xlim(low - (room if low < 0 else 0.1 * room), high + (room if high > 0 else 0.1 * room))


def heat_map(data: ReportData) -> list[Drawing]:
    """Every two-way grid of scenarios: dry tonnes and grade side by side, with the numbers written in."""
    return [
        drawing
        for number, grid in enumerate(data.value.heat_maps)
        if (drawing := _heat_map(data, grid, number)) is not None
    ]


def _heat_map(data: ReportData, grid: Any, number: int) -> Drawing | None:
    frame = grid.get("frame")
    if frame is None or not has(frame, "x", "y"):
        return None
    measures = [name for name in frame if name not in ("x", "y")][:2]
    across, up = list(pd.unique(frame["x"])), list(pd.unique(frame["y"]))
    if not measures or frame.duplicated(["x", "y"]).any():
        return None
    width = min(5.6, 0.62 * len(across) + 2.0)
    figure, axes = style.new_figure(
        width * len(measures), min(8.0, 0.44 * len(up) + 1.7), 1, len(measures), sharey=True
    )
    for axis, measure in zip(axes[0], measures):
        table = frame.pivot_table(index="y", columns="x", values=measure, aggfunc="first", dropna=False)
        table = table.reindex(index=up, columns=across)
        _cells(axis, table.to_numpy(float), measure)
        axis.set_xticks(range(len(across)), [style.short(str(v), 14) for v in across], rotation=_turn(across))
        axis.set_yticks(range(len(up)), [style.short(str(v), 18) for v in up])
        axis.set_xlabel(str(grid["x"]))
    axes[0, 0].set_ylabel(str(grid["y"]))
    cut = "" if "cutoff.at" in f"{grid['x']} {grid['y']}" else f", {data.cutoff_text}"
    figure.suptitle(f"{data.tally_label}{cut}", x=0.01, ha="left", fontsize=8)
    return Drawing(
        "heat_map" if number == 0 else f"heat_map_{number + 1}",
        "scenarios",
        f"Grid {grid['label']}: {grid['y']} against {grid['x']} ({data.tally_label})",
        "Each cell is one run of the study with both keys set; dry tonnes and grade above the cut-off.",
        f"Heat maps of dry tonnes and grade for each pair of values of {grid['y']} and {grid['x']}.",
        figure,
        frame,
    )


def _turn(labels: list[Any]) -> int:
    return 45 if max((len(str(label)) for label in labels), default=0) > 6 else 0


def _cells(axis: Any, values: Any, measure: str) -> None:
    """A measure over a grid, each cell with its number."""
    known = values[np.isfinite(values)]
    scale, label = 1.0, measure_label(measure)
    if "tonnes" in measure and known.size:
        unit, scale = mass_unit(float(known.max()))
        label = f"{label} ({unit} {measure.partition('_')[0]})"
    shown = values / scale
    image = axis.imshow(shown, origin="lower", aspect="auto", cmap=style.SURFACE_MAP)
    axis.spines[:].set_visible(False)
    middle = 0.5 * (known.min() + known.max()) / scale if known.size else 0.0
    if values.size <= 200:
        for (row, column), value in np.ndenumerate(shown):
            text = significant_text(float(value), 3) if np.isfinite(value) else "–"
            colour = "white" if np.isfinite(value) and value < middle else style.INK
            axis.text(column, row, text, ha="center", va="center", fontsize=6.8, color=colour)
    axis.figure.colorbar(image, ax=axis, label=label)
