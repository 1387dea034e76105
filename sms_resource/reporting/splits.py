"""Small tables at the study's cut-off by domain, bench and screen, and before and after loss and dilution."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import pandas as pd

from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.elements import Block, Table
from sms_resource.reporting.rounding import (
    contained_metal,
    mass_unit,
    metal_figures,
    metal_unit,
    significant_text,
)
from sms_resource.reporting.tonnage import ROUNDING_NOTE
from sms_resource.units import element_label

SPLITS: Mapping[str, tuple[str, str, str]] = {
    "domain": ("Domain", "by domain", "A block counts with the domain that fills most of it."),
    "bench": ("Bench, elevation (m)", "by bench", "From the top down; a block on two benches is cut between them."),
    "screen": (
        "Taken by", "kept, and what each screen takes",
        "Of the whole body. A block of which a screen takes a part counts there with that part.",
    ),
}  # fmt: skip


def split_rows(data: ReportData, table: pd.DataFrame, column: str) -> pd.DataFrame:
    """Rows of all classes at the study's cut-off, parts that hold something, the sum over them last."""
    given = (data.subject.cutoff or {}).get("value")
    value = float(given) if given is not None else float(table["cutoff"].min())
    near = (table["cutoff"].astype(float) - value).abs() <= 1e-9 * max(1.0, abs(value))
    rows = table[near & (table["proposed_class"] == "all")]
    whole = rows[column] == "all"
    parts = rows[~whole & (rows["dry_tonnes"] > 0)]
    if column == "screen":  # what is kept stands first
        parts = parts.sort_values("screen", key=lambda names: names != "kept", kind="stable")
    return pd.concat([parts, rows[whole]], ignore_index=True)


LEAST = (
    0.001  # of the unit of a column: below it a part is named as small, not by figures that nothing supports
)


def small_text(value: float, figures: int) -> str:
    """A part of a whole, rounded; parts under a thousandth of the unit as that."""
    return f"< {LEAST:g}" if 0.0 < value < LEAST else significant_text(value, figures)


def mass_table(
    data: ReportData, rows: pd.DataFrame, names: Sequence[str], head: str, title: str, note: str,
    strong: tuple[int, ...],
) -> Table:  # fmt: skip
    """Dry and wet tonnes, grades and contained metal, one row a name."""
    metals = [metal for metal in data.subject.metals if metal in rows]
    figures = data.subject.significant_figures
    unit, scale = mass_unit(float(rows["dry_tonnes"].abs().max()), figures)
    metal_t = {m: [contained_metal(t, g, m) for t, g in zip(rows["dry_tonnes"], rows[m])] for m in metals}
    units = {m: metal_unit(m, max((v for v in metal_t[m] if v == v), default=0.0)) for m in metals}
    columns = [head, f"Dry tonnes ({unit} dry)", f"Wet tonnes ({unit} wet)"]
    columns += [element_label(metal).replace(" ", "\u00a0") for metal in metals]
    columns += [f"{element_label(m).rpartition(' (')[0]} contained ({units[m][0]} metal)" for m in metals]
    body = []
    for number, (name, row) in enumerate(zip(names, rows.to_dict("records"), strict=True)):
        cells = [name]
        cells += [small_text(float(row[basis]) / scale, figures) for basis in ("dry_tonnes", "wet_tonnes")]
        cells += [significant_text(float(row[metal]), figures) for metal in metals]
        supported = metal_figures(figures, figures)
        cells += [small_text(metal_t[m][number] / units[m][1], supported) for m in metals]
        body.append(tuple(cells))
    numeric = (False, *([True] * (len(columns) - 1)))
    return Table(title, tuple(columns), tuple(body), numeric, f"{note} {ROUNDING_NOTE}".strip(), strong)


def split_tables(data: ReportData) -> list[Block]:
    """Tonnes at the study's cut-off by domain, by bench and by screen."""
    blocks: list[Block] = []
    for column, (head, words, note) in SPLITS.items():
        table = (data.body.splits or {}).get(column)
        if table is None or not has(table, column, "cutoff", "proposed_class", "dry_tonnes"):
            continue
        rows = split_rows(data, table, column)
        if len(rows) < 2:
            continue
        total = {"screen": "The whole body"}.get(column, "All")
        names = [
            total if name == "all" else f"{str(name)[:1].upper()}{str(name)[1:]}" for name in rows[column]
        ]
        label = data.tally_label
        title = f"{label[0].upper()}{label[1:]} at {data.cutoff_text}, {words}"
        blocks.append(mass_table(data, rows, names, head, title, note, (len(rows) - 1,)))
    return blocks


def skins_table(data: ReportData) -> list[Block]:
    """What is above the cut-off before and after under-cut loss and over-cut dilution."""
    rows = data.body.skins
    if rows is None or not has(rows, "step", "dry_tonnes", "wet_tonnes"):
        return []
    names = [f"{str(step)[0].upper()}{str(step)[1:]}" for step in rows["step"]]
    title = f"Loss and dilution as skins, at {data.cutoff_text} ({data.tally_label})"
    return [mass_table(data, rows, names, "Step", title, data.body.skins_rule, (0, len(rows) - 1))]
