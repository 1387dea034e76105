"""Value of the blocks, metal equivalents and the cut-offs that costs ask for."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from sms_resource.findings import Severity
from sms_resource.units import element_column
from sms_resource.workflow.stage import Context


def selling_terms(value: Any) -> Any:
    """Prices, recoveries and payabilities of the study as the economics room takes them."""
    from sms_resource.economics import MetalTerms, Price, Product, Recovery, SellingTerms

    metals = []
    for element, choice in value.metals.items():
        recovery = None
        basis = choice.recovery_basis
        if choice.recovery_pct is not None:
            recovery = Recovery(percent=choice.recovery_pct, basis=basis)
        elif choice.recovery_by_grade:
            recovery = Recovery(by_grade=choice.recovery_by_grade, basis=basis)
        elif choice.recovery_by_domain:
            parts = {
                name: Recovery(percent=share, basis=basis)
                for name, share in choice.recovery_by_domain.items()
            }
            recovery = Recovery(by_domain=parts, basis=basis)
        price = None
        if choice.price is not None:
            price = Price(
                choice.price, choice.price_unit, choice.price_source, choice.price_date, value.currency
            )
        metals.append(
            MetalTerms(
                column=element_column(element),
                price=price,
                recovery=recovery,
                payable_pct=choice.payable_pct,
                deduction=choice.deduction,
                deduction_kind=choice.deduction_kind,
                refining_charge=choice.refining_charge,
                sold_statement=choice.sold_statement,
                equivalent_recovery_pct=choice.equivalent_recovery_pct,
                equivalent_payable_pct=choice.equivalent_payable_pct,
            )
        )
    product = None
    if value.product is not None:
        made = value.product
        product = Product(
            element_column(made.carrier), made.grade, made.treatment_charge, made.freight, made.moisture_pct
        )
    return SellingTerms(
        metals=tuple(metals),
        product=product,
        treatment_per_dry_tonne=value.treatment_per_dry_tonne,
        freight_per_wet_tonne=value.freight_per_wet_tonne,
        royalty_pct=value.royalty_pct,
        royalty_basis=value.royalty_basis,
        currency=value.currency,
    )


def cost_model(value: Any) -> Any:
    """Costs of the study as the economics room takes them."""
    from sms_resource.economics import CostModel

    return CostModel(**value.costs.model_dump())


def valued(
    context: Context, frame: pd.DataFrame
) -> tuple[pd.DataFrame, dict[str, pd.DataFrame], dict[str, Any]]:
    """Add value and equivalent to the blocks, where the study gives terms; a cut-off on them needs both whole."""
    from sms_resource.economics import block_costs, block_value, cutoffs, metal_equivalent

    config = context.config
    value = config.value
    wanted = config.cutoff.variable
    if not value.metals:
        return frame, {}, {}
    terms, costs = selling_terms(value), cost_model(value)
    worth = block_value(frame, terms)
    add(context, worth.findings, fatal=wanted == "value")
    spent, found = block_costs(frame, costs)
    add(context, found, fatal=False)
    frame = frame.assign(
        value_per_dry_tonne=worth.frame["net_value_per_dry_tonne"].to_numpy(),
        cost_per_dry_tonne=spent["cost_per_dry_tonne"].to_numpy(),
    )
    equivalent, found = metal_equivalent(terms, element_column(value.equivalent_in))
    add(context, found, fatal=wanted == "equivalent")
    facts: dict[str, Any] = {"terms": worth.statement, "currency": terms.currency}
    if equivalent is not None:
        frame["equivalent"] = equivalent.apply(frame)
        facts["equivalent"] = equivalent_page(terms, equivalent)
    if not float(spent["cost_per_dry_tonne"].max()) > 0.0:
        return (
            frame,
            {},
            facts,
        )  # without costs every block pays, and a break-even cut-off of zero says nothing
    dry, wet = frame["dry_tonnes"].sum(), frame["wet_tonnes"].sum()
    depth = float(-np.average(frame["elevation"], weights=frame["dry_tonnes"])) if dry > 0 else 0.0
    column = element_column(wanted) if wanted in value.metals else element_column(value.equivalent_in)
    made, found = cutoffs(
        terms, costs, column=column if column in {m.column for m in terms.metals} else None,
        wet_per_dry=float(wet / dry) if dry > 0 else 1.0, depth_m=depth,
    )  # fmt: skip
    add(context, found, fatal=False)
    table = pd.DataFrame(
        [
            {"kind": item.kind, "variable": item.variable, "cutoff": item.value,
             "cost_per_dry_tonne": item.cost_per_dry_tonne, "inside": ", ".join(item.inside),
             "outside": ", ".join(item.outside), "text": item.text}
            for item in made
        ]
    )  # fmt: skip
    return frame, {"cutoffs": table}, facts


def equivalent_page(terms: Any, equivalent: Any) -> dict[str, Any]:
    """What stands beside a metal equivalent: formula, statements, and every input of every metal as a table."""
    from sms_resource.economics.equivalent import EVERYWHERE

    rows = []
    for metal in terms.metals:
        share = (
            metal.equivalent_payable_pct if metal.equivalent_payable_pct is not None else metal.payable_pct
        )
        row = {
            "metal": metal.column,
            "price": metal.price.amount if metal.price else np.nan,
            "price_unit": f"{terms.currency}/{metal.price.unit}" if metal.price else "",
            "price_date": metal.price.date if metal.price else "",
            "price_source": metal.price.source if metal.price else "",
            **_recovery_cells(metal),
            "payable_pct": share,
        }
        for domain, factors in equivalent.factors.items():
            row["factor" if domain == EVERYWHERE else f"factor in {domain}"] = factors[metal.column]
        rows.append(row)
    return {
        "name": equivalent.name,
        "formula": equivalent.formula,
        "statements": list(equivalent.statements),
        "table": pd.DataFrame(rows),
    }


def _recovery_cells(metal: Any) -> dict[str, Any]:
    """Recovery that the equivalent uses, as one number where it is one, and what it rests on."""
    recovery = metal.recovery
    if metal.equivalent_recovery_pct is not None:
        return {"recovery_pct": metal.equivalent_recovery_pct, "recovery_basis": "stated for the equivalent"}
    if recovery is None:
        return {"recovery_pct": np.nan, "recovery_basis": ""}
    if recovery.percent is not None:
        return {"recovery_pct": recovery.percent, "recovery_basis": recovery.basis}
    return {"recovery_pct": np.nan, "recovery_basis": str(recovery)}


def add(context: Context, findings: Any, *, fatal: bool) -> None:
    """Take over findings once each; errors stop the run only where the study cuts on what they spoil."""
    known = {(item.code, item.message) for item in context.findings}
    for item in findings:
        if (item.code, item.message) in known:
            continue
        known.add((item.code, item.message))
        severity: Severity = "warning" if item.severity == "error" and not fatal else item.severity
        context.findings.add(
            severity, item.code, item.message, item.remedy, file=context.study.path.name, column=item.column
        )
