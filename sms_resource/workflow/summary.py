"""The table of tonnes at the study's cut-off, as the command prints it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from sms_resource.reporting.rounding import cutoff_label, mass_text, significant_text
from sms_resource.study import Study
from sms_resource.units import element_column, element_label
from sms_resource.workflow.cheap import cutoff_words
from sms_resource.workflow.evidence import metal_columns
from sms_resource.workflow.means import with_equivalent
from sms_resource.workflow.state import ClassState


@dataclass(frozen=True)
class Summary:
    """Rounded table of tonnes: a title, column names, rows of text, a caption."""

    title: str
    columns: list[str]
    rows: list[list[str]]
    caption: str

    def record(self) -> dict[str, Any]:
        """As plain data."""
        return {"title": self.title, "columns": self.columns, "rows": self.rows, "caption": self.caption}


def summarise(study: Study, done: dict[str, Any]) -> Summary:
    """Dry and wet tonnes and grades by proposed class at the study's cut-off, rounded to the confidence."""
    state: ClassState = done["classify"]
    metals = metal_columns(study.config)
    at = study.config.cutoff.at
    table = with_equivalent(state.grade_tonnage, done["value"].frame)
    equivalent = ["equivalent"] if "equivalent" in table else []
    rows = []
    order = {"measured": 0, "indicated": 1, "inferred": 2, "unclassified": 3, "all": 4}
    own = table["cutoff_variable"] == state.facts["cutoff_variable"]
    chosen = table[own & (table["cutoff"] == at)]
    for row in sorted(chosen.to_dict("records"), key=lambda item: order.get(str(item["proposed_class"]), 9)):
        if not row["dry_tonnes"] > 0:
            continue
        rough = row["proposed_class"] == "inferred"
        name = "all classes" if row["proposed_class"] == "all" else str(row["proposed_class"])
        rows.append(
            [
                name,
                mass_text(row["dry_tonnes"], "dry", approximate=False) + (" (approx.)" if rough else ""),
                mass_text(row["wet_tonnes"], "wet", approximate=False),
                *[significant_text(row[metal], 2) for metal in (*equivalent, *metals)],
            ]
        )
    cutoff = cutoff_words(study.config)
    base = element_column(study.config.value.equivalent_in)
    return Summary(
        title=f"{study.config.study.name}: {state.facts['tally_label']}, {cutoff}",
        columns=[
            "Proposed class",
            "Dry tonnes",
            "Wet tonnes",
            *[cutoff_label("equivalent", equivalent_in=base) for _ in equivalent],
            *[element_label(metal) for metal in metals],
        ],
        rows=rows,
        caption="Draft for a Competent Person. Estimated, rounded; totals may not add. Classes are proposed.",
    )
