"""The cut-off alone beside mineable shapes, rounded for a reader."""

from __future__ import annotations

from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.elements import Table
from sms_resource.reporting.rounding import mass_unit, significant_text
from sms_resource.reporting.tonnage import ROUNDING_NOTE
from sms_resource.units import element_label


def shapes_table(data: ReportData) -> Table | None:
    """One row a method: what it takes, its grades, what it must take below the cut-off, and what it leaves above it."""
    frame = data.value.mineable_shape
    if frame is None or not has(
        frame, "method", "dry_tonnes", "wet_tonnes", "below_dry_tonnes", "left_dry_tonnes"
    ):
        return None
    metals = [metal for metal in data.subject.metals if metal in frame]
    figures = data.subject.significant_figures
    unit, scale = mass_unit(float(frame["dry_tonnes"].max()), figures)
    head = ["Taken as", f"Dry tonnes ({unit} dry)", f"Wet tonnes ({unit} wet)"]
    head += [element_label(metal).replace(" ", "\u00a0") for metal in metals]
    head += [f"Of these below the cut-off ({unit} dry)", f"Above the cut-off and left ({unit} dry)"]
    body = []
    for row in frame.to_dict("records"):
        cells = [
            str(row["method"]),
            *[significant_text(row[f"{b}_tonnes"] / scale, figures) for b in ("dry", "wet")],
        ]
        cells += [significant_text(float(row[metal]), figures) for metal in metals]
        cells += [significant_text(float(row[f"{b}_dry_tonnes"]) / scale, figures) for b in ("below", "left")]
        body.append(tuple(cells))
    note = (
        "A cut-off alone picks blocks that no machine can reach by themselves. Patches and full benches take what lies "
        f"above too, and meet the cut-off on average. {ROUNDING_NOTE}"
    )
    return Table(
        f"The cut-off alone beside shapes that can be taken, at {data.cutoff_text} ({data.tally_label})",
        tuple(head), tuple(body), (False, *[True] * (len(head) - 1)), note, (), key="mineable_shape",
    )  # fmt: skip
