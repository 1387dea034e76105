"""Room: proposed classes and the reasons for them."""

from sms_resource.classification.criteria import (
    CLASS_NAMES,
    ClassColumns,
    ClassContext,
    ClassCriteria,
    LevelCriteria,
    Smoothing,
)
from sms_resource.classification.exploration import ExplorationTarget, exploration_target
from sms_resource.classification.overrides import ClassOverride
from sms_resource.classification.proposal import ClassProposal, propose_classes
from sms_resource.classification.reach import holes_in_reach
from sms_resource.classification.smoothing import connected_volumes

__all__ = [
    "CLASS_NAMES",
    "ClassColumns",
    "ClassContext",
    "ClassCriteria",
    "ClassOverride",
    "ClassProposal",
    "ExplorationTarget",
    "LevelCriteria",
    "Smoothing",
    "connected_volumes",
    "exploration_target",
    "holes_in_reach",
    "propose_classes",
]
