"""Codes of the findings of this room, each with one line of meaning."""

from __future__ import annotations

CODES: dict[str, str] = {
    "price-missing": "a metal has no price, so it brings no value and an equivalent is refused",
    "price-undated": "a price has no source or no date",
    "recovery-missing": "a metal has no metallurgical recovery, so its value cannot be known",
    "recovery-no-basis": "a recovery has no stated basis, such as test work",
    "recovery-domain-missing": "a domain of the block model has no recovery",
    "payability-missing": "a metal has no payability, so its value cannot be known",
    "price-unit": "a price stands in a unit that is not known, or in another currency than the rest",
    "refining-above-price": "a refining charge is not below the price, which is a mistake of unit",
    "metal-missing": "the block model has no column for a metal of the selling terms",
    "equivalent-refused": "a metal equivalent is not given, with the reason",
    "equivalent-not-sold": "it is not stated that a metal of an equivalent can be recovered and sold",
    "value-missing": "blocks lack a grade that their value needs, so their value is missing",
    "product-missing": "a product is described whose carrier metal is not among the metals",
    "cost-invalid": "a cost or a rate of lifting is missing, negative or zero where it may not be",
    "cost-column-missing": "costs depend on a column that the block model does not have",
    "cutoff-unreachable": "no grade pays for the costs at these prices",
    "scenario-label-twice": "two scenarios carry the same label",
    "scenario-empty": "a scenario overrides nothing, or a grid has an empty list",
    "scenario-missing": "the ledger names an alternative that no scenario has run",
}
