"""Directions in which pairs of samples are compared."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from sms_resource.geostatistics.model import rotation_axes

DirectionKind = Literal["omnidirectional", "directional", "plane"]
KIND_CODES: dict[str, int] = {"omnidirectional": 0, "directional": 1, "plane": 2}


@lru_cache(maxsize=256)
def cached_axes(azimuth: float, plunge: float, tilt: float) -> NDArray[np.float64]:
    """:func:`rotation_axes`, kept: fits ask for the same three angles thousands of times. Read-only."""
    axes = rotation_axes(azimuth, plunge, tilt)
    axes.setflags(write=False)
    return axes


@dataclass(frozen=True)
class Direction:
    """Which pairs of samples an experimental variogram takes.

    Parameters
    ----------
    kind : "omnidirectional" | "directional" | "plane"
        All pairs; pairs near one axis; or pairs near one plane, in any direction within it.
    azimuth, plunge, tilt : float
        Degrees. A direction looks along the major axis of the three angles. A plane holds the major and the
        semi-major axis, so that three zeros are the horizontal plane.
    angle_tolerance : float
        Greatest angle in degrees between a pair and the axis, or a pair and the plane.
    bandwidth_horizontal : float
        Greatest distance in m of a pair from the axis, measured along the semi-major axis.
    bandwidth_vertical : float
        Greatest distance in m of a pair from the axis or the plane, measured along the minor axis.

    Raises
    ------
    ValueError
        If the kind is not known, a tolerance lies outside 0 to 90 degrees or a bandwidth is not positive.

    Notes
    -----
    A pair and its reverse are one pair: the absolute cosine counts.
    """

    kind: DirectionKind = "omnidirectional"
    azimuth: float = 0.0
    plunge: float = 0.0
    tilt: float = 0.0
    angle_tolerance: float = 22.5
    bandwidth_horizontal: float = math.inf
    bandwidth_vertical: float = math.inf

    def __post_init__(self) -> None:
        if self.kind not in KIND_CODES:
            raise ValueError(f"kind must be one of {', '.join(KIND_CODES)}, got {self.kind!r}")
        for name in ("azimuth", "plunge", "tilt"):
            if not math.isfinite(getattr(self, name)):
                raise ValueError(f"{name} must be a finite angle in degrees, got {getattr(self, name)}")
        if not 0.0 < self.angle_tolerance <= 90.0:
            raise ValueError(
                f"angle_tolerance must lie above 0 and up to 90 degrees, got {self.angle_tolerance}"
            )
        for name in ("bandwidth_horizontal", "bandwidth_vertical"):
            if not getattr(self, name) > 0.0:
                raise ValueError(f"{name} must be above zero m, got {getattr(self, name)}")

    @classmethod
    def omnidirectional(cls) -> Direction:
        """All pairs, whatever their direction."""
        return cls("omnidirectional", angle_tolerance=90.0)

    @classmethod
    def horizontal(cls, angle_tolerance: float = 22.5, bandwidth_vertical: float = math.inf) -> Direction:
        """Pairs that lie level, in any azimuth."""
        return cls("plane", angle_tolerance=angle_tolerance, bandwidth_vertical=bandwidth_vertical)

    @classmethod
    def vertical(cls, angle_tolerance: float = 22.5, bandwidth_horizontal: float = math.inf) -> Direction:
        """Pairs that stand upright; the bandwidth is the greatest plan distance east or north."""
        return cls(
            "directional",
            plunge=90.0,
            angle_tolerance=angle_tolerance,
            bandwidth_horizontal=bandwidth_horizontal,
            bandwidth_vertical=bandwidth_horizontal,
        )

    @property
    def axes(self) -> NDArray[np.float64]:
        """Major, semi-major and minor axis as rows of east, north, up."""
        return cached_axes(self.azimuth, self.plunge, self.tilt)

    @property
    def cosine(self) -> float:
        """Least absolute cosine to the axis; for a plane the greatest sine of the angle to it."""
        angle = math.radians(self.angle_tolerance)
        return math.sin(angle) if self.kind == "plane" else math.cos(angle)

    @property
    def label(self) -> str:
        """Name for tables and figures."""
        if self.kind == "omnidirectional":
            return "omnidirectional"
        if self.kind == "plane":
            level = self.plunge % 180.0 == 0.0 and self.tilt % 180.0 == 0.0
            return "horizontal" if level else f"plane of azimuth {self.azimuth:g}, plunge {self.plunge:g}"
        if abs(self.plunge) == 90.0:
            return "vertical"
        return f"azimuth {self.azimuth:g}, plunge {self.plunge:g}"
