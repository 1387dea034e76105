"""Sections about classes, value, cut-offs, scenarios and the report."""

from __future__ import annotations

from typing import Any, Literal

from pydantic import field_validator

from sms_resource import units
from sms_resource.study.base import Section, key


class Classes(Section):
    """[classes]: criteria by which classes are proposed. A CP decides; no code sets these numbers."""

    judged_on: str = key("cu", "Element whose kriging decides slope, holes and distance.")
    indicated_within_m: float = key(
        20.0, "Distance to the nearest sample within which a block may be Indicated.", gt=0
    )
    indicated_holes: int = key(3, "Holes that must inform an Indicated block.", ge=1)
    indicated_samples: int = key(6, "Samples that must inform an Indicated block.", ge=1)
    indicated_slope: float = key(0.6, "Least slope of regression of an Indicated block.", ge=0, le=1)
    inferred_within_m: float = key(
        50.0, "Distance to the nearest sample within which a block may be Inferred.", gt=0
    )
    inferred_holes: int = key(2, "Holes that must inform an Inferred block.", ge=1)
    inferred_samples: int = key(2, "Samples that must inform an Inferred block.", ge=1)
    allow_measured: bool = key(False, "Whether Measured may be proposed at all.")
    measured_within_m: float = key(10.0, "Distance within which a block may be Measured.", gt=0)
    measured_holes: int = key(5, "Holes that must inform a Measured block.", ge=1)
    measured_samples: int = key(10, "Samples that must inform a Measured block.", ge=1)
    measured_slope: float = key(0.9, "Least slope of regression of a Measured block.", ge=0, le=1)
    least_recovery_pct: float = key(
        60.0, "Mean recovery of a domain under which its blocks go down one class.", ge=0, le=100
    )
    caution_recovery_pct: float = key(
        80.0, "Mean recovery under which blocks stay Inferred unless no bias is shown.", ge=0, le=100
    )
    holes_in_range: int = key(
        3, "Holes within the variogram range under which blocks go down one class.", ge=0
    )
    least_slope: float = key(0.5, "Slope of regression under which blocks go down one class.", ge=0, le=1)
    position_share: float = key(
        0.5,
        "Standard error of position, as a share of the block, above which blocks go down one class.",
        gt=0,
    )
    rules_off: tuple[str, ...] = key(
        (), "Codes of downgrade rules that the study switches off, each with a reason."
    )
    floor: Literal["unclassified", "inferred"] = key(
        "inferred", "Lowest class that a downgrade rule may lead to."
    )
    smooth: bool = key(True, "Whether classes are smoothed to connected volumes.", alternatives=(False,))
    least_volume_m3: float = key(500.0, "Least volume of a connected class.", ge=0)


class Cutoff(Section):
    """[cutoff]: where the table of tonnes is cut."""

    variable: str = key("cu", 'Element, or "equivalent" or "value", that the cut-off is on.')
    at: float = key(1.0, "Cut-off of the table of tonnes, in the variable's unit.", ge=0)
    steps: tuple[float, ...] = key(
        (0.0, 0.5, 1.0, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0, 6.0, 8.0, 10.0), "Cut-offs of the grade-tonnage curve."
    )
    basis: str = key("", "Why this cut-off: the costs, prices and date behind it.", decision=False)


class Metal(Section):
    """What one metal brings."""

    price: float = key(..., "Price in the price unit.", gt=0)
    price_unit: Literal["usd/t", "usd/lb", "usd/oz", "usd/g", "usd/kg"] = key(..., "Unit of the price.")
    price_source: str = key("not stated", "Source of the price.", decision=False)
    price_date: str = key("not stated", "Date of the price.", decision=False)
    recovery_pct: float | None = key(None, "Metallurgical recovery.", ge=0, le=100)
    recovery_basis: str = key("not stated", "Basis of the recovery.", decision=False)
    payable_pct: float | None = key(None, "Share of the recovered metal that is paid.", ge=0, le=100)
    deduction: float = key(0.0, "Deduction from the recovered grade, in the element's unit.", ge=0)
    treatment_per_unit: float = key(
        0.0, "Treatment and refining charge per price unit of payable metal.", ge=0
    )


class Value(Section):
    """[value]: value and costs, in US dollars. No total in the ground is ever shown."""

    metals: dict[str, Metal] = key({}, "Prices, recoveries and payabilities by element.")
    freight_usd_per_wet_tonne: float = key(0.0, "Freight and handling per wet tonne.", ge=0)
    royalty_pct: float = key(0.0, "Royalty on payable value.", ge=0, le=100)
    variable_usd_per_wet_tonne: float = key(
        0.0, "Variable cost of lifting and processing per wet tonne.", ge=0
    )
    processing_usd_per_dry_tonne: float = key(0.0, "Processing cost per dry tonne.", ge=0)
    vessel_days: float = key(0.0, "Vessel days that are charged as fixed cost.", ge=0)
    vessel_usd_per_day: float = key(0.0, "Cost of a vessel day.", ge=0)

    @field_validator("metals")
    @classmethod
    def _known(cls, value: dict[str, Metal]) -> dict[str, Metal]:
        for element in value:
            units.element_column(element)
        return value


class Scenario(Section):
    """One scenario: a label and the keys that it sets."""

    label: str = key(..., "What the scenario is called.", decision=False)
    change: dict[str, Any] = key(..., "Dotted keys of the study and the values they take.")


class ScenarioGrid(Section):
    """A grid of scenarios: each key takes each of its values."""

    label: str = key(..., "What the grid is called.", decision=False)
    vary: dict[str, list[Any]] = key(..., "Dotted keys and the values that each takes.")


class Scenarios(Section):
    """[scenarios]: overrides that are run beside the study."""

    ledger: bool = key(
        True, "Whether the alternatives of the study's decisions are run as scenarios too.", decision=False
    )
    single: tuple[Scenario, ...] = key((), "Single scenarios.", decision=False)
    grid: tuple[ScenarioGrid, ...] = key((), "Grids of scenarios.", decision=False)


class ReportSection(Section):
    """[report]: what the report shows."""

    exaggeration: float = key(2.0, "Vertical exaggeration of sections.", ge=1, le=20, decision=False)
    section_azimuth_deg: float | None = key(
        None, "Azimuth of the cross-sections; that of the blocks if not given.", decision=False
    )
    sections: int = key(3, "Number of cross-sections.", ge=1, le=12, decision=False)


class Reason(Section):
    """Why a decision was taken, and by whom."""

    why: str = key(..., "The reason.", decision=False)
    by: str = key("", "Who gave it.", decision=False)
