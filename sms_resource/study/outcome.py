"""Sections about classes, value, cut-offs, scenarios and the report."""

from __future__ import annotations

from typing import Any, Literal

from pydantic import field_validator, model_validator

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
        "inferred",
        "Lowest class that a downgrade rule may lead to. What the criteria of Inferred do not reach stays unclassified.",
        alternatives=("unclassified",),
    )
    smooth: bool = key(True, "Whether classes are smoothed to connected volumes.", alternatives=(False,))
    least_volume_m3: float = key(500.0, "Least volume of a connected class.", ge=0)


class Cutoff(Section):
    """[cutoff]: where the table of tonnes is cut."""

    variable: str = key("cu", 'Element, or "equivalent" or "value", that the cut-off is on.')
    at: float = key(1.0, "Cut-off of the table of tonnes, in the variable's unit.", ge=0)
    steps: tuple[float, ...] | Literal["all"] = key(
        (0.0, 0.5, 1.0, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0, 6.0, 8.0, 10.0),
        'Cut-offs of the grade-tonnage curve; "all" takes the value of every block as one.',
    )
    curves: dict[str, tuple[float, ...] | Literal["all"]] = key(
        {},
        'Further grade-tonnage curves, each with its cut-offs or "all": by element, "equivalent" or "value". They '
        "stand in grade_tonnage.csv after that of the study's variable.",
        decision=False,
    )
    most_steps: int = key(
        2000,
        'Most cut-offs of a curve that asks for "all"; more distinct values are thinned evenly, and a finding says so.',
        ge=2,
        le=100_000,
        decision=False,
    )
    basis: str = key("", "Why this cut-off: the costs, prices and date behind it.", decision=False)


class Metal(Section):
    """What one metal brings. What is left out is not known, and then nothing is guessed."""

    price: float | None = key(None, "Price of the metal.", gt=0)
    price_unit: Literal["t", "kg", "g", "lb", "oz"] = key(
        "t", "Mass that the price is for: tonne, kilogram, gram, pound or troy ounce."
    )
    price_source: str = key("", "Source of the price.", decision=False)
    price_date: str = key("", "Date or period of the price.", decision=False)
    recovery_pct: float | None = key(None, "Metallurgical recovery, one number everywhere.", ge=0, le=100)
    recovery_by_grade: tuple[tuple[float, float], ...] = key(
        (), "Recovery as points of (grade, recovery in %), in place of one number."
    )
    recovery_by_domain: dict[str, float] = key({}, "Recovery in % by domain, in place of one number.")
    recovery_basis: str = key("", "What the recovery rests on.", decision=False)
    payable_pct: float | None = key(
        None, "Share of the recovered metal that is paid; 0 if none.", ge=0, le=100
    )
    deduction: float = key(0.0, "Taken off before payment, in the element's unit.", ge=0)
    deduction_kind: Literal["before", "minimum"] = key(
        "before",
        "Whether the share is paid on what is left after the deduction, or the lesser of both is paid.",
    )
    refining_charge: float = key(0.0, "Charge per price unit of payable metal.", ge=0)
    sold_statement: str = key(
        "", "Who says, and on what, that the metal can be recovered and sold.", decision=False
    )
    equivalent_recovery_pct: float | None = key(
        None, "Single recovery for a metal equivalent, where recovery varies with grade.", ge=0, le=100
    )
    equivalent_payable_pct: float | None = key(
        None,
        "Single payability for a metal equivalent, where a deduction makes it vary with grade.",
        ge=0,
        le=100,
    )

    @model_validator(mode="after")
    def _one_recovery(self) -> Metal:
        ways = (self.recovery_pct is not None) + bool(self.recovery_by_grade) + bool(self.recovery_by_domain)
        if ways > 1:
            raise ValueError("give one of recovery_pct, recovery_by_grade and recovery_by_domain")
        return self


class ProductSection(Section):
    """A product that the metals are sold in, such as a concentrate."""

    carrier: str = key(..., "Element whose recovery makes the mass of the product.")
    grade: float = key(..., "Grade of that element in the product, on dry mass.", gt=0)
    treatment_charge: float = key(0.0, "Charge per dry tonne of product.", ge=0)
    freight: float = key(0.0, "Freight per wet tonne of product.", ge=0)
    moisture_pct: float = key(0.0, "Water in the product, as a share of its wet mass.", ge=0, lt=100)


class Costs(Section):
    """Costs of lifting and processing."""

    vessel_cost_per_day: float = key(0.0, "Fixed cost of a vessel day.", ge=0)
    wet_tonnes_per_day: float | None = key(
        None, "Wet tonnes lifted in a day, which spread the vessel's cost.", gt=0
    )
    vessel_days: float | None = key(None, "Vessel days charged, in place of a daily rate.", ge=0)
    campaign_wet_tonnes: float | None = key(None, "Wet tonnes over which those days are spread.", gt=0)
    lifting_per_wet_tonne: float = key(0.0, "Variable cost of cutting, lifting and dewatering.", ge=0)
    depth_rate_per_100_m: float = key(0.0, "Share that lifting costs more for every 100 m of depth.")
    reference_depth_m: float = key(0.0, "Water depth at which the lifting cost holds.", ge=0)
    slope_factors: tuple[tuple[float, float], ...] = key(
        (), "Points of (slope in degrees, factor on lifting from there on)."
    )
    processing_per_dry_tonne: float = key(0.0, "Cost of processing.", ge=0)
    general_per_dry_tonne: float = key(0.0, "General cost.", ge=0)


class Value(Section):
    """[value]: value and costs per tonne. No total in the ground is ever shown."""

    currency: str = key("US$", "Currency of prices and costs.", decision=False)
    metals: dict[str, Metal] = key({}, "Prices, recoveries and payabilities by element.")
    equivalent_in: str = key("cu", "Element that the metal equivalent is expressed in.")
    product: ProductSection | None = key(None, "The product that metals are sold in.")
    treatment_per_dry_tonne: float = key(0.0, "Charge per dry tonne lifted.", ge=0)
    freight_per_wet_tonne: float = key(0.0, "Freight per wet tonne lifted.", ge=0)
    royalty_pct: float = key(0.0, "Royalty.", ge=0, le=100)
    royalty_basis: Literal["payable", "net"] = key("payable", "What the royalty is taken on.")
    costs: Costs = key(Costs(), "Costs of lifting and processing.")

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
