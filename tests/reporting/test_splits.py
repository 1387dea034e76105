"""Tables by domain, bench and screen, and of loss and dilution, as a reader sees them."""

from __future__ import annotations

from dataclasses import replace

import pandas as pd
import pytest

from sms_resource.reporting.data import BodyEvidence, ReportData, Subject
from sms_resource.reporting.elements import Table
from sms_resource.reporting.sections_estimate import tonnes
from sms_resource.reporting.splits import skins_table, split_tables


def rows(column: str, parts: dict[str, float]) -> pd.DataFrame:
    """Two cut-offs, one class and "all", the parts and their sum."""
    made = []
    for cutoff in (0.0, 2.0):
        for proposed in ("inferred", "all"):
            for name, dry in {**parts, "all": sum(parts.values())}.items():
                made.append({"cutoff_variable": "cu_pct", "cutoff": cutoff, "proposed_class": proposed, column: name,
                             "dry_tonnes": dry - cutoff, "wet_tonnes": 1.1 * dry, "cu_pct": 4.0})  # fmt: skip
    return pd.DataFrame(made)


@pytest.fixture
def data() -> ReportData:
    skins = pd.DataFrame(
        {"step": ["above the cut-off", "under-cut loss", "over-cut dilution", "after loss and dilution"],
         "dry_tonnes": [1000.0, 50.0, 80.0, 1030.0], "wet_tonnes": [1100.0, 55.0, 90.0, 1135.0],
         "cu_pct": [4.0, 4.0, 0.5, 3.73]}
    )  # fmt: skip
    body = BodyEvidence(
        splits={
            "domain": rows("domain", {"cap": 300.0, "massive": 700.0}),
            "bench": rows("bench", {"-10 to -8": 400.0, "-12 to -10": 600.0, "-14 to -12": 0.0}),
            "screen": rows("screen", {"slope": 100.0, "kept": 1000.0}),
        },
        skins=skins,
        skins_rule="Under-cut 0.1 m.",
    )
    return ReportData(Subject(metals=("cu_pct",), cutoff={"variable": "cu_pct", "value": 2.0}), body=body)


def named(blocks: list, text: str) -> Table:  # type: ignore[type-arg]
    return next(item for item in blocks if isinstance(item, Table) and text in item.title)


def test_each_split_shows_its_parts_at_the_cutoff_and_their_sum(data: ReportData) -> None:
    blocks = split_tables(data)
    assert len(blocks) == 3
    domain = named(blocks, "by domain")
    assert domain.title == "Block-model tally at Cu ≥ 2 %, by domain"
    assert domain.columns[1].endswith(" dry)") and domain.columns[2].endswith(" wet)")
    assert [row[0] for row in domain.rows] == ["Cap", "Massive", "All"] and domain.strong == (2,)
    bench = named(blocks, "by bench")
    assert [row[0] for row in bench.rows] == [
        "-10 to -8",
        "-12 to -10",
        "All",
    ]  # benches without tonnes say nothing
    screen = named(blocks, "screen takes")
    assert [row[0] for row in screen.rows] == ["Kept", "Slope", "The whole body"]
    for table in (domain, bench, screen):
        assert all("dry" in name or "wet" in name for name in table.columns if "onnes" in name)


def test_loss_and_dilution_say_their_basis_and_their_rule(data: ReportData) -> None:
    (table,) = skins_table(data)
    assert [row[0] for row in table.rows] == [
        "Above the cut-off", "Under-cut loss", "Over-cut dilution", "After loss and dilution",
    ]  # fmt: skip
    assert table.strong == (0, 3) and table.note.startswith("Under-cut 0.1 m.")
    assert any("dry" in name for name in table.columns) and any("wet" in name for name in table.columns)
    metal = next(n for n, name in enumerate(table.columns) if name.startswith("Cu contained"))
    assert table.rows[0][metal] == "40"  # 1000 t dry at 4 %
    assert not skins_table(replace(data, body=replace(data.body, skins=None)))


def test_the_section_of_tonnes_holds_them_all(data: ReportData) -> None:
    titles = [item.title for item in tonnes(data) if isinstance(item, Table)]
    assert sum("by domain" in title for title in titles) == 1 and any(
        "Loss and dilution" in t for t in titles
    )
