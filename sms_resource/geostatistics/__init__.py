"""Variograms, search, kriging and validation, on plain arrays and frames.

Names are imported when they are first used, so that a command which needs none of them starts at once.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from .kriging import KrigingResult, ordinary_kriging, simple_kriging
    from .model import Structure, VariogramModel
    from .neighbourhood import HighGradeRestraint, Neighbourhood

# Public name -> module that holds it.
_HOME: dict[str, str] = {
    # model, search and kriging
    "Structure": "model",
    "VariogramModel": "model",
    "rotation_axes": "model",
    "Neighbourhood": "neighbourhood",
    "HighGradeRestraint": "neighbourhood",
    "KrigingResult": "kriging",
    "ordinary_kriging": "kriging",
    "simple_kriging": "kriging",
    "block_variance": "support_variance",
    "discretisation_offsets": "support_variance",
    "find_coincident": "search",
    "select_for_domain": "search",
    "sample_findings": "sample_checks",
    "companion_estimates": "companions",
    "leave_one_out": "leave_out",
    "neighbourhood_study": "search_study",
    "NeighbourhoodStudy": "search_study",
    # experimental variograms, fit and validation
    "ExperimentalVariogram": "experimental",
    "experimental_variogram": "experimental",
    "experimental_variograms": "experimental",
    "PairRequest": "pairs",
    "Direction": "directions",
    "variogram_map": "plane_map",
    "fit_variogram": "fit",
    "VariogramFit": "fit",
    "FitSettings": "fit_settings",
    "VariogramSettings": "variogram_settings",
    "infer_variogram": "inference",
    "VariogramInference": "inferred",
    "search_ranges": "inferred",
    "NormalScores": "transforms",
    "back_transform_model": "back_transform",
    "swath": "swaths",
    "swath_table": "swaths",
    "change_of_support": "support",
    "lognormal_support": "support",
    "ChangeOfSupport": "support",
    "ValidationLimits": "validation",
    "cross_validation_summary": "validation",
    "block_variance_check": "validation",
    "mean_covariance": "validation",
    "compare_estimators": "validation",
    "validation_table": "verdicts",
    "validation_findings": "verdicts",
}

__all__ = [
    "HighGradeRestraint",
    "KrigingResult",
    "Neighbourhood",
    "Structure",
    "VariogramModel",
    "ordinary_kriging",
    "simple_kriging",
]


def __getattr__(name: str) -> Any:
    if name not in _HOME:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    value = getattr(import_module(f".{_HOME[name]}", __name__), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted({*globals(), *_HOME})
