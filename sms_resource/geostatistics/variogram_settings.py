"""Every choice in the inference of a variogram, with defaults for small deposits."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

from sms_resource.geostatistics.experimental import Measure
from sms_resource.geostatistics.fit_settings import WEIGHTINGS, FitSettings, Weighting
from sms_resource.geostatistics.pairs import MEASURES

ZONAL_RANGE_M = 1e5  # in the plane: nothing varies along it
TotalSill = Literal["sample_variance", "over_pairs", "free"]


@dataclass(frozen=True)
class VariogramSettings:
    """How a variogram is inferred; what is given wins over what the data say.

    Parameters
    ----------
    measure, estimator : str
        As in :func:`experimental_variogram`; "auto" takes normal scores where the skewness passes
        ``skewness_for_scores``, else the semivariogram (of 60 simulated lognormal fields with a coefficient of
        variation of 1, normal scores halved the error of the model). Models of normal scores, logs and relative
        measures are turned back into the unit of the values.
    shapes : tuple of str
        One shape a structure: "spherical", "exponential" or "gaussian".
    nugget : float, optional
        Fixed nugget, in squared units of the value.
    nugget_share : float, optional
        Fixed nugget as a share of the total sill.
    total_sill : "sample_variance" | "over_pairs" | "free" | float
        The (declustered) variance of the samples; or the sill with which the model has that variance on average
        over all pairs of samples (where the deposit is only a few ranges across); or fitted; or a number.
    sills, ranges : tuple, optional
        Fixed sills and fixed ranges (major, semi-major, minor) in m, one entry a structure, None where free.
    azimuth, plunge, tilt : float
        Degrees of the axes.
    continuity : "level" | "directional"
        One range in the plane of the major and semi-major axis, from pairs in any direction in it; or two, from
        pairs along each of them.
    lag_width_m, lag_count : float, int, optional
        Lags in the plane; by default the spacing of the holes and half the extent. The first lag has half the
        width, so that the others stand about multiples of the spacing.
    down_hole_lag_m, down_hole_lag_count : float, int, optional
        The same down the holes; by default the spacing of the samples and half the length of the longest holes.
    angle_tolerance, directional_tolerance : float
        Degrees, of pairs to the plane, and of pairs to an axis.
    bandwidth_m : float, optional
        Greatest distance of a pair from the plane; by default the spacing of the samples.
    weighting : str
        As in :class:`FitSettings`.
    min_pairs : int
        Lags with fewer pairs are shown and not fitted (30 after Journel & Huijbregts 1978, chapter III).
    min_hole_share : float
        Lags in the plane in which a smaller share of the holes has a part are shown and not fitted: they are made
        of twins and clusters, which stand where grades are special.
    min_lags : int
        Fewer lags with enough pairs cannot be fitted.
    min_composites_horizontal, min_holes_horizontal : int
        With fewer, nothing is inferred in the plane (50 is a rule of practice without a source).
    assumed_ratio : (low, base, high)
        Range in the plane over the upright range, where the data cannot tell (assumed; from ranges of tens of m
        against 1 to 5 m, recalled and not re-read).
    assumed_vertical_range_m : float
        Upright range where no range can be inferred (assumed).
    assumed_nugget_share : float
        Share of the nugget where no variogram can be inferred (assumed, from 30 to 60 %).
    zonal : bool
        Where pairs in the plane stand well below the total sill (as with a trend in depth), let a last structure
        carry the rest: it varies across the plane alone, with a range of ZONAL_RANGE_M within it (zonal
        anisotropy, Isaaks & Srivastava 1989, chapter 16). Not where ranges or sills are fixed.
    jackknife : bool
        Leave out one hole at a time for intervals of nugget, sill and ranges.
    confidence : float
        Of those intervals.
    """

    measure: Measure | Literal["auto"] | str = "auto"
    skewness_for_scores: float = 1.0
    estimator: str = "matheron"
    shapes: tuple[str, ...] = ("spherical",)
    nugget: float | None = None
    nugget_share: float | None = None
    total_sill: TotalSill | float = "sample_variance"
    sills: tuple[float | None, ...] | None = None
    ranges: tuple[tuple[float | None, float | None, float | None], ...] | None = None
    azimuth: float = 0.0
    plunge: float = 0.0
    tilt: float = 0.0
    continuity: Literal["level", "directional"] = "level"
    lag_width_m: float | None = None
    lag_count: int | None = None
    down_hole_lag_m: float | None = None
    down_hole_lag_count: int | None = None
    angle_tolerance: float = 22.5
    directional_tolerance: float = 30.0
    bandwidth_m: float | None = None
    weighting: Weighting | str = "pairs_over_gamma"
    min_pairs: int = 30
    min_hole_share: float = 0.5
    min_lags: int = 3
    min_composites_horizontal: int = 50
    min_holes_horizontal: int = 6
    assumed_ratio: tuple[float, float, float] = (3.0, 6.0, 12.0)
    assumed_vertical_range_m: float = 4.0
    assumed_nugget_share: float = 0.4
    zonal: bool = True
    jackknife: bool = True
    confidence: float = 0.90

    def __post_init__(self) -> None:
        if self.measure not in (*MEASURES, "auto"):
            raise ValueError(f"measure must be one of auto, {', '.join(MEASURES)}, got {self.measure!r}")
        if self.weighting not in WEIGHTINGS:
            raise ValueError(f"weighting must be one of {', '.join(WEIGHTINGS)}, got {self.weighting!r}")
        if self.continuity not in ("level", "directional"):
            raise ValueError(f"continuity must be 'level' or 'directional', got {self.continuity!r}")
        if isinstance(self.total_sill, str):
            if self.total_sill not in ("sample_variance", "over_pairs", "free"):
                raise ValueError(
                    f"total_sill must be sample_variance, over_pairs, free or a number, got {self.total_sill!r}"
                )
        elif not (math.isfinite(self.total_sill) and self.total_sill > 0.0):
            raise ValueError(f"total_sill must be above zero, got {self.total_sill}")
        if self.nugget is not None and self.nugget_share is not None:
            raise ValueError("nugget and nugget_share exclude each other")
        if self.nugget is not None and not (math.isfinite(self.nugget) and self.nugget >= 0.0):
            raise ValueError(f"nugget must be zero or above, got {self.nugget}")
        for name in ("nugget_share", "assumed_nugget_share", "min_hole_share"):
            share = getattr(self, name)
            if share is not None and not 0.0 <= share <= 1.0:
                raise ValueError(f"{name} must lie between 0 and 1, got {share}")
        low, base, high = self.assumed_ratio
        if not 0.0 < low <= base <= high < math.inf:
            raise ValueError(
                f"assumed_ratio must be three rising numbers above zero, got {self.assumed_ratio}"
            )
        for name in ("lag_width_m", "down_hole_lag_m", "bandwidth_m", "assumed_vertical_range_m"):
            length = getattr(self, name)
            if length is not None and not (math.isfinite(length) and length > 0.0):
                raise ValueError(f"{name} must be a number of m above zero, got {length}")
        for name in ("lag_count", "down_hole_lag_count", "min_pairs", "min_lags"):
            number = getattr(self, name)
            if number is not None and number < 1:
                raise ValueError(f"{name} must be 1 or more, got {number}")
        FitSettings(shapes=self.shapes, sills=self.sills, ranges=self.ranges)  # raises where they are wrong
        if not 0.0 < self.confidence < 1.0:
            raise ValueError(f"confidence must lie between 0 and 1, got {self.confidence}")
