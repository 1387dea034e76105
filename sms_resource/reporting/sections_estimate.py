"""Sections on the estimate, the proposed classes, the tonnes and the scenarios."""

from __future__ import annotations

from sms_resource.reporting.data import Estimation, ReportData, has
from sms_resource.reporting.elements import (
    Block,
    Bullets,
    Heading,
    Paragraph,
    Slot,
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
from sms_resource.units import column_element, element_label


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
    with_table(blocks, s.means, "Global means: composites, declustered, blocks")
    with_table(blocks, s.estimators, "Mean grade by estimator")
    blocks.append(Slot(("estimators",)))
    blocks.append(Slot(("swaths",)))
    with_table(blocks, s.leave_one_out_summary, "Leave one hole out")
    blocks.append(Slot(("leave_one_out",)))
    with_table(blocks, s.support_variance, "Realised against theoretical block variance")
    blocks.append(Slot(("change_of_support",)))
    with_table(blocks, s.frames_effect, "Effect of the vertical frame")
    with_table(blocks, s.neighbourhood, "Neighbourhood study", note=neighbourhood_words(s), most=30)
    blocks.append(Slot(("neighbourhood",)))
    return blocks if s.blocks is not None or s.settings else []


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
        blocks.append(Bullets(tuple(c.flags)))
    with_table(blocks, c.reasons, "Why blocks have their proposed class", most=40)
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
        f"Blocks beside the model of change of support, cut-off and grade in {_cut_variable(data)} ({label})", most=30,
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


def _cut_variable(data: ReportData) -> str:
    """The variable of the cut-off with its unit."""
    name = str((data.subject.cutoff or {}).get("variable") or "the cut-off's variable")
    return element_label(name) if column_element(name) else name


def _currency(data: ReportData) -> str:
    """Unit of value, where the study has a currency."""
    currency = (data.subject.cutoff or {}).get("currency")
    return f" ({currency} per dry tonne)" if currency else ""


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
    with_table(blocks, v.cutoff_costs, "Costs inside the cut-off")
    with_table(
        blocks, v.by_value,
        f"The same dry tonnes chosen by a cut-off on {_cut_variable(data)} and by value{_currency(data)}", most=30,
        note="Means of net value per dry tonne of what is chosen, before costs of lifting; no total is shown.",
    )  # fmt: skip
    if v.scenarios is not None and len(v.scenarios):
        blocks += [
            Heading("Scenarios"),
            frame_table(v.scenarios, f"Scenarios at the study's cut-off ({data.tally_label})", most=40),
        ]
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
