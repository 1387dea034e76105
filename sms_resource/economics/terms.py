"""What a buyer pays and a plant recovers: prices, recoveries, payabilities, charges. Plain frozen settings."""

from __future__ import annotations

import math
from dataclasses import dataclass

from sms_resource import units
from sms_resource.economics.recovery import Recovery, check_share
from sms_resource.findings import Findings

# Price units in one tonne of metal.
_PER_TONNE: dict[str, float] = {
    "t": 1.0,
    "kg": 1e3,
    "g": 1e6,
    "lb": float(units.percent_to_pounds_per_tonne(100.0)),
    "oz": float(units.tonnes_to_troy_ounces(1.0)),
}
PRICE_UNITS: tuple[str, ...] = tuple(_PER_TONNE)


@dataclass(frozen=True)
class Price:
    """Price of a metal.

    Parameters
    ----------
    amount : float
        Money per unit.
    unit : "t" | "kg" | "g" | "lb" | "oz"
        Avoirdupois pound and troy ounce.
    source, date : str
        Where the price comes from, and of which day or period.
    currency : str
    """

    amount: float
    unit: str
    source: str = ""
    date: str = ""
    currency: str = "US$"

    def per_grade_unit(self, column: str) -> float:
        """Money for one grade unit of ``column`` in a tonne: US$ per 1 % or per 1 g/t, unpaid for any loss.

        Examples
        --------
        >>> round(Price(3.00, "lb").per_grade_unit("cu_pct"), 4)
        66.1387
        """
        return self.amount * units_per_grade_unit(self.unit, column)

    def __str__(self) -> str:
        origin = ", ".join(part for part in (self.source, self.date) if part)
        return f"{self.currency} {self.amount:,g}/{self.unit} ({origin or 'source and date not stated'})"


def units_per_grade_unit(unit: str, column: str) -> float:
    """Price units (such as pounds) that one grade unit of ``column`` holds in one tonne."""
    if unit not in _PER_TONNE:
        raise ValueError(f"price unit {unit!r} is not one of {', '.join(_PER_TONNE)}")
    return float(units.contained_tonnes(1.0, 1.0, column)) * _PER_TONNE[unit]


@dataclass(frozen=True)
class MetalTerms:
    """Terms of one metal. What is None is not known, and then nothing is guessed.

    Parameters
    ----------
    column : str
        Grade column such as ``cu_pct``.
    price : Price, optional
    recovery : Recovery, optional
    payable_pct : float, optional
        Share of the recovered metal that is paid (%); 0 says that it is not paid.
    deduction : float
        Taken off before payment, in the unit of the column: off the grade of the product where a product is
        described, otherwise off the recovered grade per dry tonne lifted.
    deduction_kind : "before" | "minimum"
        "before": the share is paid on what is left after the deduction. "minimum": the lesser of the share
        and what is left after the deduction is paid.
    refining_charge : float
        Money per price unit of payable metal.
    sold_statement : str
        Who says, and on what, that this metal can be recovered and sold.
    equivalent_recovery_pct, equivalent_payable_pct : float, optional
        Single figures for a metal equivalent, where recovery or payability vary with grade.
    """

    column: str
    price: Price | None = None
    recovery: Recovery | None = None
    payable_pct: float | None = None
    deduction: float = 0.0
    deduction_kind: str = "before"
    refining_charge: float = 0.0
    sold_statement: str = ""
    equivalent_recovery_pct: float | None = None
    equivalent_payable_pct: float | None = None

    def __post_init__(self) -> None:
        units.contained_tonnes(1.0, 1.0, self.column)  # a unit that is not known fails here
        if self.payable_pct is not None:
            check_share(self.payable_pct, "payable")
        for name in ("equivalent_recovery_pct", "equivalent_payable_pct"):
            if getattr(self, name) is not None:
                check_share(getattr(self, name), name)
        if self.deduction_kind not in ("before", "minimum"):
            raise ValueError(f"deduction_kind is {self.deduction_kind!r}; 'before' or 'minimum' was wanted")
        if not (self.deduction >= 0 and self.refining_charge >= 0):
            raise ValueError(f"deduction and refining charge of {self.column} must be zero or more")

    @property
    def symbol(self) -> str:
        """Symbol for text: "Cu" for ``cu_pct``."""
        return units.element_label(self.column).partition(" ")[0]

    @property
    def net_price(self) -> float:
        """Price less refining charge, in money per grade unit of the column in a tonne."""
        if self.price is None:
            return math.nan
        return (self.price.amount - self.refining_charge) * units_per_grade_unit(self.price.unit, self.column)


@dataclass(frozen=True)
class Product:
    """A product that metals are sold in, such as a concentrate.

    Parameters
    ----------
    carrier : str
        Column of the metal whose recovery makes the mass of the product.
    grade : float
        Grade of the carrier in the product, on dry mass.
    treatment_charge : float
        Money per dry tonne of product.
    freight : float
        Money per wet tonne of product.
    moisture_pct : float
        Water in the product, as a share of its wet mass.
    """

    carrier: str
    grade: float
    treatment_charge: float = 0.0
    freight: float = 0.0
    moisture_pct: float = 0.0

    def __post_init__(self) -> None:
        if not self.grade > 0:
            raise ValueError(f"the grade of the product is {self.grade}; more than zero was wanted")
        if not 0 <= self.moisture_pct < 100:
            raise ValueError(f"the moisture of the product is {self.moisture_pct} %")


@dataclass(frozen=True)
class SellingTerms:
    """All terms that turn grades into money.

    Parameters
    ----------
    metals : tuple of MetalTerms
    product : Product, optional
    treatment_per_dry_tonne : float
        Charge per dry tonne lifted, such as a toll.
    freight_per_wet_tonne : float
        Money per wet tonne lifted.
    royalty_pct : float
    royalty_basis : "payable" | "net"
        On payable value, or on payable value less treatment and freight.
    currency : str
    """

    metals: tuple[MetalTerms, ...]
    product: Product | None = None
    treatment_per_dry_tonne: float = 0.0
    freight_per_wet_tonne: float = 0.0
    royalty_pct: float = 0.0
    royalty_basis: str = "payable"
    currency: str = "US$"

    def __post_init__(self) -> None:
        check_share(self.royalty_pct, "royalty")
        if self.royalty_basis not in ("payable", "net"):
            raise ValueError(f"royalty_basis is {self.royalty_basis!r}; 'payable' or 'net' was wanted")
        columns = [metal.column for metal in self.metals]
        if len(set(columns)) != len(columns):
            raise ValueError("a metal stands twice in the selling terms")

    def metal(self, column: str) -> MetalTerms:
        """Terms of one metal."""
        for terms in self.metals:
            if terms.column == column:
                return terms
        raise KeyError(f"{column} is not among the metals of the selling terms")

    def check(self) -> Findings:
        """What is missing before a value may be given: errors; and what a reader will ask for: warnings."""
        found = Findings()
        if not self.metals:
            found.error(
                "price-missing",
                "The selling terms name no metal.",
                "Give prices of the metals that are sold.",
            )
        for terms in self.metals:
            name, where = terms.symbol, {"column": terms.column}
            # A metal that is not paid needs neither price nor recovery, unless it makes the mass of a product.
            idle = terms.payable_pct == 0 and (self.product is None or self.product.carrier != terms.column)
            if terms.price is None and not idle:
                found.error(
                    "price-missing", f"{name} has no price.", "Give price, unit, source and date.", **where
                )
            if terms.price is not None:
                if not (terms.price.source.strip() and terms.price.date.strip()):
                    found.warning(
                        "price-undated",
                        f"The price of {name} lacks its source or date.",
                        "Give both.",
                        **where,
                    )
                if terms.price.unit not in _PER_TONNE or terms.price.currency != self.currency:
                    found.error(
                        "price-unit",
                        f"The price of {name} is in {terms.price.currency}/{terms.price.unit}.",
                        f"Give it in {self.currency} per one of {', '.join(_PER_TONNE)}.",
                        **where,
                    )
                elif terms.net_price <= 0 and terms.payable_pct != 0:
                    found.error(
                        "refining-above-price",
                        f"The refining charge of {name} is not below its price.",
                        "Check the units of both: the charge is per price unit.",
                        **where,
                    )
            if terms.recovery is None and not idle:
                found.error(
                    "recovery-missing",
                    f"{name} has no recovery.",
                    "Give the recovery and its basis.",
                    **where,
                )
            if terms.recovery is not None and not terms.recovery.has_basis:
                found.warning(
                    "recovery-no-basis",
                    f"The recovery of {name} has no stated basis.",
                    "State the test work.",
                    **where,
                )
            if terms.payable_pct is None:
                found.error(
                    "payability-missing", f"{name} has no payability.", "Give the share that is paid, 0 if none.",
                    **where,
                )  # fmt: skip
        if self.product is not None and self.product.carrier not in {m.column for m in self.metals}:
            found.error(
                "product-missing",
                f"The product is carried by {self.product.carrier}, which the selling terms do not name.",
                "Add its terms.",
            )
        return found
