"""Room: value of a block, cut-offs, tables of tonnes, mineable shapes, scenarios and the decision ledger."""

from sms_resource.economics.grade_tonnage import beside_change_of_support, grade_tonnage, missing_tonnage

__all__ = ["beside_change_of_support", "grade_tonnage", "missing_tonnage"]
