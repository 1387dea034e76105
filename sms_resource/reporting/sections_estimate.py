"""Sections on the estimate, the proposed classes, the tonnes and the scenarios."""

from __future__ import annotations

import pandas as pd

from sms_resource.reporting.data import Estimation, ReportData, cutoff_head, has
from sms_resource.reporting.elements import (
    Block,
    Bullets,
    Heading,
    Paragraph,
    Slot,
    element_words,
    facts_from,
    frame_table,
    number_text,
    with_table,
)
from sms_resource.reporting.rounding import mass_text
from sms_resource.reporting.shapes_table import shapes_table
from sms_resource.reporting.splits import skins_table, split_tables
from sms_resource.reporting.summaries import checks_shown
from sms_resource.reporting.tonnage import rows_at_cutoff, screens_table, tonnage_table
from sms_resource.units import element_label


def estimate(data: ReportData) -> list[Block]:
    """Method, pictures and checks of the block estimate."""
    s = data.estimation
    blocks: list[Block] = [Heading("Method")]
    facts = facts_from(s.settings)
    if facts:
        blocks.append(facts)
    blocks += [Heading("Grades in plan and section"), Slot(("plan_grades", "section_*")), Heading("Checks")]
    shown, words = checks_shown(s.checks)
    if words:
        blocks.append(Paragraph(words))
    with_table(blocks, shown, "Checks and their verdicts", most=40)
    with_table(
        blocks, s.means, "Global means: composites, declustered, blocks",
        labels={"composite_mean": "Composites in the body, each alike", "declustered_mean": "Composites, declustered",
                "block_mean": "Blocks", "difference_pct": "Blocks against declustered (%)",
                "mean_with_surface": "Composites in the body and surface samples, each alike"},
    )  # fmt: skip
    with_table(blocks, s.estimators, "Mean grade by estimator")
    blocks.append(Slot(("estimators",)))
    blocks.append(Slot(("swaths",)))
    with_table(blocks, s.leave_one_out_summary, "Leave one hole out")
    blocks.append(Slot(("leave_one_out",)))
    with_table(blocks, s.support_variance, "Realised against theoretical block variance")
    blocks.append(Slot(("change_of_support",)))
    with_table(
        blocks, s.frames_effect, "Effect of the vertical frame on the error of leaving one hole out",
        labels={m: f"Root mean square error, {element_label(m)}" for m in data.subject.metals},
        note=frames_note(data),
    )  # fmt: skip
    studied = s.neighbourhood
    if studied is not None and has(studied, "varied"):
        studied = studied.assign(varied=[str(name).replace("_", " ") for name in studied["varied"]])
    with_table(blocks, studied, "Neighbourhood study", note=neighbourhood_words(s), most=30)
    blocks.append(Slot(("neighbourhood",)))
    return blocks if s.blocks is not None or s.settings else []


def frames_note(data: ReportData) -> str:
    """What the errors by vertical frame are, and which frame is in use."""
    used = (data.estimation.settings or {}).get("Vertical frame")
    return (
        "Errors, not grades: the root of the mean squared difference between a composite and its estimate without its own"
        " hole, over all domains, in the unit of the grade. The smaller the error, the more alike are neighbours in that"
        " frame; every frame uses the variograms of the frame in use" + (f", {used}." if used else ".")
    )


def neighbourhood_words(s: Estimation) -> str:
    """What the study recommends, and where its times are."""
    times = "Times differ from run to run: those of this one are in the folder measured/ of the results."
    return f"{s.neighbourhood_note} {times}" if has(s.neighbourhood) else s.neighbourhood_note


def classes(data: ReportData) -> list[Block]:
    """Criteria, reasons, smoothing and overrides of the proposed classes."""
    c = data.classes
    blocks: list[Block] = []
    facts = facts_from(c.criteria)
    if facts:
        blocks += [Heading("Criteria of the study"), facts]
    if c.flags:
        blocks.append(Bullets(tuple(element_words(flag) for flag in c.flags)))
    with_table(blocks, c.reasons, "Why blocks have their proposed class", most=40, mass_digits=2)
    with_table(blocks, c.before_after, "Before and after smoothing to connected volumes")
    with_table(blocks, c.overrides, "Overrides by polygon")
    if c.exploration_target:
        blocks.append(target(data))
    return blocks


def target(data: ReportData) -> Paragraph:
    """The exploration target as ranges, with its caution."""
    target = data.classes.exploration_target or {}
    low, high = (
        float(target.get("dry_tonnes_low", float("nan"))),
        float(target.get("dry_tonnes_high", float("nan"))),
    )
    grades = "; ".join(
        f"{element_label(m)} {number_text(v[0], 2)} to {number_text(v[1], 2)}"
        for m, v in (target.get("grades") or {}).items()
    )
    basis = str(target.get("basis") or "").rstrip(".")
    return Paragraph(
        f"Exploration target, not part of the estimate: {mass_text(low, 'dry')} to {mass_text(high, 'dry')}"
        f"{'; ' + grades if grades else ''}. The quantity and grade are conceptual. There has been insufficient exploration"
        " to estimate a resource, and it is uncertain whether further exploration will result in one."
        f"{' Basis: ' + basis + '.' if basis else ''}",
        "note",
    )


def tonnes(data: ReportData) -> list[Block]:
    """Tables of tonnes at the cut-off, mineable shapes, and what the screens take."""
    blocks: list[Block] = []
    rows = rows_at_cutoff(data)
    label = data.tally_label
    if len(rows):
        blocks.append(
            tonnage_table(
                data, rows, f"{label[0].upper()}{label[1:]} at {data.cutoff_text}, by proposed class"
            )
        )
    blocks.append(Slot(("grade_tonnage",)))
    with_table(
        blocks, data.value.beside_support,
        f"Blocks beside the model of change of support ({label})", most=30, labels=beside_labels(data),
        note="Kriged blocks are smoother than what a selection would meet; the discrete Gaussian model says by how much. "
        "It starts from the same dry tonnes at the lowest cut-off.",
    )  # fmt: skip
    shape = shapes_table(data)
    if shape is not None:
        blocks.append(shape)
    blocks += split_tables(data)
    with_table(blocks, screens_table(data), f"From the body to what remains ({label})")
    blocks.append(Slot(("waterfall",)))
    blocks += skins_table(data)
    return blocks


def beside_labels(data: ReportData) -> dict[str, str]:
    """Heads of the table of change of support, with units."""
    return {
        "cutoff": f"Cut-off, {cutoff_head(data)}",
        "block_dry_tonnes": "Blocks, dry tonnes (t)",
        "block_grade": f"Blocks, {cutoff_head(data)}",
        "support_dry_tonnes": "Change of support, dry tonnes (t)",
        "support_grade": f"Change of support, {cutoff_head(data)}",
        "tonnes_difference_pct": "Dry tonnes, blocks against change of support (%)",
    }


def value_labels(data: ReportData) -> dict[str, str]:
    """Heads of the table of value by grade and by value, with units."""
    name, unit = cutoff_head(data).partition(" (")[0], cutoff_head(data, "value").partition("(")[2]
    return {
        "cutoff": f"Cut-off, {cutoff_head(data)}",
        "value_by_grade": f"Mean net value, chosen by {name} ({unit}",
        "value_by_value": f"Mean net value, chosen by value ({unit}",
        "gain": f"Gain of choosing by value ({unit}",
    }


def cutoff_costs(data: ReportData) -> pd.DataFrame | None:
    """Cut-offs that costs ask for, each named with its unit."""
    frame = data.value.cutoff_costs
    if frame is None or not has(frame, "variable"):
        return frame
    return frame.assign(variable=[cutoff_head(data, name) for name in frame["variable"]])


def cost_labels(data: ReportData) -> dict[str, str]:
    """Heads of the table of costs inside the cut-off."""
    unit = cutoff_head(data, "value").partition("(")[2]
    return {
        "variable": "Cut-off on", "cutoff": "Cut-off", "cost_per_dry_tonne": f"Cost ({unit}",
        "inside": "Costs inside", "outside": "Costs outside", "text": "In words",
    }  # fmt: skip


def scenarios_shown(data: ReportData, frame: pd.DataFrame) -> pd.DataFrame:
    """Scenarios with their tonnes and grades; changes as the study writes them and metal stay in the data files."""
    metals = [metal for metal in data.subject.metals if metal in frame]
    wanted = ["scenario", "label", "origin", "state", "dry_tonnes", "wet_tonnes", *metals]
    wanted += [
        name
        for name in map(str, frame)
        if name.endswith("_dry_tonnes") and frame[name].notna().any() and frame[name].any()
    ]
    known = [name for name in wanted if name in frame]
    if known and "state" in known and (frame["state"] == "run").all():
        known.remove("state")
    return frame[known] if "dry_tonnes" in known else frame


def price_note(data: ReportData) -> str:
    """What a price does to a cut-off on an equivalent; empty where no scenario or grid varies a price."""
    cut, v = data.subject.cutoff or {}, data.value
    if cut.get("variable") != "equivalent":
        return ""
    varied = [f"{grid.get('x')} {grid.get('y')}" for grid in v.heat_maps]
    if v.scenarios is not None:
        named = [name for name in ("scenario", "label", "changes", "decision") if name in v.scenarios]
        varied += [" ".join(map(str, row)) for row in v.scenarios[named].to_numpy()]
    if v.tornado is not None and "decision" in v.tornado:
        varied += list(v.tornado["decision"].astype(str))
    if not any("price" in text for text in varied):
        return ""
    name = cutoff_head(data).partition(" (")[0]
    base = name.removesuffix("Eq")
    return (
        f"A price also changes the equivalent. A higher price of {base} lowers the factor of every other metal, so less"
        f" adds up to {data.cutoff_text} and fewer tonnes lie above it, although they are worth more; a higher price of"
        " another metal does the opposite. The cut-off itself is kept as a grade: where costs set it, set it anew with"
        " the price, or cut on value."
    )


def scenarios(data: ReportData) -> list[Block]:
    """Equivalents, costs inside the cut-off, scenarios."""
    v = data.value
    blocks: list[Block] = []
    if v.equivalent:
        blocks.append(Heading("Metal equivalent"))
        blocks.append(
            Bullets(tuple(v.equivalent.get("statements") or (f"Formula: {v.equivalent.get('formula')}.",)))
        )
        table = v.equivalent.get("table")
        with_table(blocks, table, "Prices, recoveries and payabilities")
    with_table(blocks, cutoff_costs(data), "Costs inside the cut-off", labels=cost_labels(data))
    with_table(
        blocks, v.by_value, f"The same dry tonnes chosen by a cut-off on {cutoff_head(data)} and by value", most=30,
        labels=value_labels(data),
        note="Means of net value per dry tonne of what is chosen, before costs of lifting; no total is shown.",
    )  # fmt: skip
    if v.scenarios is not None and len(v.scenarios):
        blocks += [
            Heading("Scenarios"),
            frame_table(
                scenarios_shown(data, v.scenarios),
                f"Scenarios at their cut-off ({data.tally_label})",
                most=40,
                labels={"label": "Scenario", "origin": "From", "state": "State"},
                note=f"The study's own cut-off is {data.cutoff_text}.",
            ),
        ]
    if price_note(data):
        blocks.append(Paragraph(price_note(data), "note"))
    blocks.append(Slot(("tornado", "heat_map*")))
    return (
        blocks
        if v.equivalent
        or v.cutoff_costs is not None
        or v.scenarios is not None
        or v.tornado is not None
        or v.heat_maps
        else []
    )
