"""What a variogram fit may move and what is fixed."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Weighting = Literal["pairs_over_distance", "pairs", "pairs_over_gamma", "equal"]
WEIGHTINGS: tuple[str, ...] = ("pairs_over_distance", "pairs", "pairs_over_gamma", "equal")


@dataclass(frozen=True)
class FitSettings:
    """What a fit may move and what is fixed; lengths in m, sills in squared units of the value.

    Parameters
    ----------
    shapes : tuple of str
        One shape a structure.
    nugget : float, optional
        Fixed nugget.
    total_sill : float, optional
        Fixed sum of the nugget and all sills.
    mean_over_pairs : float, optional
        Value that the model must have on average over ``pair_separations`` (the variance of the samples); it
        takes the place of ``total_sill`` where the samples see only part of the variance.
    pair_separations : (m, 3) float, optional
    sills : tuple of float or None, optional
        Fixed sills, one entry a structure.
    ranges : tuple of (major, semi-major, minor), optional
        Fixed ranges, one entry a structure, None where free.
    links : (3,) ints
        Axes with the same number share one range: (0, 0, 0) isotropic, (0, 0, 1) level and upright, (0, 1, 2)
        three ranges.
    semi_ratio, minor_ratio : float, optional
        Fixed ratio of the semi-major or minor range to the major one.
    azimuth, plunge, tilt : float
        Degrees.
    weighting : str
        "pairs_over_distance": N / h^2 (Zhang et al. 1995); "pairs": N; "pairs_over_gamma": N / gamma^2 of the
        model (Cressie 1985), renewed in three rounds; "equal".
    least_pairs : int
        Lags with fewer pairs are left out.
    range_limits : (3, 2) float, optional
        Least and greatest range along each axis. By default half the least mean distance of a lag and three
        times the greatest, over all experimental variograms.
    """

    shapes: tuple[str, ...] = ("spherical",)
    nugget: float | None = None
    total_sill: float | None = None
    mean_over_pairs: float | None = None
    pair_separations: Array | None = field(default=None, repr=False)
    sills: tuple[float | None, ...] | None = None
    ranges: tuple[tuple[float | None, float | None, float | None], ...] | None = None
    links: tuple[int, int, int] = (0, 0, 0)
    semi_ratio: float | None = None
    minor_ratio: float | None = None
    azimuth: float = 0.0
    plunge: float = 0.0
    tilt: float = 0.0
    weighting: Weighting | str = "pairs_over_distance"
    least_pairs: int = 1
    range_limits: tuple[tuple[float, float], tuple[float, float], tuple[float, float]] | None = None

    def __post_init__(self) -> None:
        for shape in self.shapes:
            if shape not in ("spherical", "exponential", "gaussian"):
                raise ValueError(f"shapes: {shape!r} is not spherical, exponential or gaussian")
        if not self.shapes:
            raise ValueError("shapes must name at least one structure")
        for name in ("sills", "ranges"):
            given = getattr(self, name)
            if given is not None and len(given) != len(self.shapes):
                raise ValueError(f"{name} must have one entry for each of the {len(self.shapes)} structures")
        for name in ("nugget", "total_sill"):
            value = getattr(self, name)
            if value is not None and not (math.isfinite(value) and value >= 0.0):
                raise ValueError(f"{name} must be zero or above, got {value}")
        for value in self.sills or ():
            if value is not None and not (math.isfinite(value) and value >= 0.0):
                raise ValueError(f"sills must be zero or above, got {value}")
        for value in (v for triple in self.ranges or () for v in triple):
            if value is not None and not (math.isfinite(value) and value > 0.0):
                raise ValueError(f"ranges must be above zero m, got {value}")
        for name in ("semi_ratio", "minor_ratio"):
            value = getattr(self, name)
            if value is not None and not (math.isfinite(value) and value > 0.0):
                raise ValueError(f"{name} must be above zero, got {value}")
        if self.weighting not in WEIGHTINGS:
            raise ValueError(f"weighting must be one of {', '.join(WEIGHTINGS)}, got {self.weighting!r}")
