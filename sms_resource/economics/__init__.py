"""Room: value of a block, cut-offs, tables of tonnes, mineable shapes, scenarios and the decision ledger."""

from sms_resource.economics.costs import CostModel, block_costs
from sms_resource.economics.cutoffs import CutOff, break_even_grade, cutoffs
from sms_resource.economics.equivalent import MetalEquivalent, metal_equivalent
from sms_resource.economics.grade_tonnage import beside_change_of_support, grade_tonnage, missing_tonnage
from sms_resource.economics.recovery import Recovery
from sms_resource.economics.terms import MetalTerms, Price, Product, SellingTerms
from sms_resource.economics.value import BlockValue, block_value, value_against_grade

__all__ = [
    "BlockValue",
    "CostModel",
    "CutOff",
    "MetalEquivalent",
    "MetalTerms",
    "Price",
    "Product",
    "Recovery",
    "SellingTerms",
    "beside_change_of_support",
    "block_costs",
    "block_value",
    "break_even_grade",
    "cutoffs",
    "grade_tonnage",
    "metal_equivalent",
    "missing_tonnage",
    "value_against_grade",
]
