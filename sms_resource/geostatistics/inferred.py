"""What was inferred of a variogram: the model, what it rests on, and how far the data carry it."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

from sms_resource.findings import Findings
from sms_resource.geostatistics.experimental import ExperimentalVariogram
from sms_resource.geostatistics.model import VariogramModel
from sms_resource.geostatistics.variogram_settings import ZONAL_RANGE_M

if TYPE_CHECKING:
    import pandas as pd


@dataclass(frozen=True)
class VariogramInference:
    """A variogram model and how far the data carry it.

    Attributes
    ----------
    model : VariogramModel
        In squared units of the values.
    experimental : tuple of ExperimentalVariogram
        In the measure that was fitted.
    fitted_model : VariogramModel
        The model in that measure, before it was turned back; the same as ``model`` for a semivariogram.
    nugget_from : str
        Where the nugget comes from, in words.
    assumed, bounds_hit : tuple of str
        Parameters that are assumed, and those that stand at a limit, in words.
    intervals : DataFrame or None
        Jackknife over holes: parameter, low, best, high.
    statement : str
        What was inferred and what was not, with the pairs per lag.
    low, high : VariogramModel
        Less and more continuous alternatives: ends of the intervals of the ranges where they were inferred, the
        low and high assumed ratio where not.
    sample_count, hole_count : int
    horizontal_from, vertical_from : "data" | "user" | "assumed"
        Where the ranges in the plane and the upright range come from.
    findings : Findings
    """

    model: VariogramModel
    experimental: tuple[ExperimentalVariogram, ...]
    fitted_model: VariogramModel
    nugget_from: str
    assumed: tuple[str, ...]
    bounds_hit: tuple[str, ...]
    intervals: pd.DataFrame | None
    statement: str
    low: VariogramModel
    high: VariogramModel
    sample_count: int
    hole_count: int
    measure: str = "semivariogram"
    horizontal_from: str = "data"
    vertical_from: str = "data"
    findings: Findings = field(default_factory=Findings, compare=False)

    @property
    def ranges(self) -> tuple[float, float, float]:
        """Greatest ranges (major, semi-major, minor) in m, for a search; see :func:`search_ranges`."""
        return search_ranges(self.model)

    def to_record(self) -> dict[str, Any]:
        """A dictionary ready for JSON."""
        return {
            "model": self.model.to_record(),
            "fitted_model": self.fitted_model.to_record(),
            "low": self.low.to_record(),
            "high": self.high.to_record(),
            "measure": self.measure,
            "nugget_from": self.nugget_from,
            "assumed": list(self.assumed),
            "bounds_hit": list(self.bounds_hit),
            "statement": self.statement,
            "horizontal_from": self.horizontal_from,
            "vertical_from": self.vertical_from,
            "sample_count": self.sample_count,
            "hole_count": self.hole_count,
            "intervals": None if self.intervals is None else _records(self.intervals),
            "experimental": [_records(item.to_frame()) for item in self.experimental],
            "findings": self.findings.to_records(),
        }


def search_ranges(model: VariogramModel) -> tuple[float, float, float]:
    """Greatest ranges of a model along its axes in m; a zonal structure counts along the minor axis alone."""
    bounded = [s.ranges for s in model.structures if s.ranges[0] < ZONAL_RANGE_M] or [
        s.ranges for s in model.structures
    ]
    if not bounded:
        return 0.0, 0.0, 0.0
    minor = max(s.ranges[2] for s in model.structures)
    return max(r[0] for r in bounded), max(r[1] for r in bounded), minor


def _records(frame: pd.DataFrame) -> list[dict[str, Any]]:
    rows = frame.to_dict("records")
    return [
        {str(k): None if isinstance(v, float) and not math.isfinite(v) else v for k, v in row.items()}
        for row in rows
    ]
