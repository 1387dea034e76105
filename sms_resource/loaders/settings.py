"""Guards and tolerances of the checks."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field


@dataclass(frozen=True)
class CheckSettings:
    """Guards and tolerances of the checks of the data.

    Parameters
    ----------
    crs : str, optional
        System of the study; layers and grids must be in it.
    warn_above, error_above : mapping
        Element to grade, in its own unit, above which a warning or an error is given. The errors are what
        the richest mineral holds: chalcocite 79.9 % Cu, sphalerite 67.1 % Zn. The warnings are common
        practice.
    collar_tolerance_m : float
        Vertical mismatch of collar and seafloor that is flagged, where three standard errors are less.
    grid_sigma_m : float
        Vertical standard error of a grid that brings none of its own.
    far_below_m : float
        Depth below the seafloor beyond which a sample is doubted.
    recovery_limit_pct : float
        Recovery above which a run is an error; from 100 to this it is a warning.
    twin_distance_m : float
        Distance within which two holes are twins.
    under_water : bool
        Whether elevations must be negative.
    """

    crs: str | None = None
    warn_above: Mapping[str, float] = field(
        default_factory=lambda: {"cu": 35.0, "zn": 50.0, "au": 100.0, "ag": 2000.0}
    )
    error_above: Mapping[str, float] = field(default_factory=lambda: {"cu": 80.0, "zn": 67.1})
    collar_tolerance_m: float = 1.0
    grid_sigma_m: float = 0.3
    far_below_m: float = 100.0
    recovery_limit_pct: float = 110.0
    twin_distance_m: float = 3.0
    under_water: bool = True
