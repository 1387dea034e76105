"""Room: value of a block, cut-offs, tables of tonnes, mineable shapes, scenarios and the decision ledger."""

from sms_resource.economics.cheap_scenarios import cheap_scenarios
from sms_resource.economics.costs import CostModel, block_costs
from sms_resource.economics.cutoffs import CutOff, break_even_grade, cutoffs
from sms_resource.economics.equivalent import MetalEquivalent, metal_equivalent
from sms_resource.economics.exact_sums import exact_parts
from sms_resource.economics.grade_tonnage import beside_change_of_support, grade_tonnage, missing_tonnage
from sms_resource.economics.ledger import Decision, build_ledger, difference_waterfall
from sms_resource.economics.recovery import Recovery
from sms_resource.economics.scenario_terms import CheapScenario
from sms_resource.economics.scenarios import (
    ScenarioError,
    expand_overrides,
    one_at_a_time,
    tornado_table,
)
from sms_resource.economics.shapes import MineableShape, ShapeRules, mineable_shapes
from sms_resource.economics.terms import MetalTerms, Price, Product, SellingTerms
from sms_resource.economics.value import BlockValue, block_value, value_against_grade

__all__ = [
    "BlockValue",
    "CheapScenario",
    "CostModel",
    "CutOff",
    "Decision",
    "MetalEquivalent",
    "MetalTerms",
    "MineableShape",
    "Price",
    "Product",
    "Recovery",
    "ScenarioError",
    "SellingTerms",
    "ShapeRules",
    "beside_change_of_support",
    "block_costs",
    "block_value",
    "break_even_grade",
    "build_ledger",
    "cheap_scenarios",
    "cutoffs",
    "difference_waterfall",
    "exact_parts",
    "expand_overrides",
    "grade_tonnage",
    "metal_equivalent",
    "mineable_shapes",
    "missing_tonnage",
    "one_at_a_time",
    "tornado_table",
    "value_against_grade",
]
