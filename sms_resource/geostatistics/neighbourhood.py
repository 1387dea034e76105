"""Which samples an estimate may see: the ellipsoid, its limits, and the restraint of high grades."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .model import rotation_axes

Sectors = Literal["none", "quadrants", "octants"]
SECTOR_COUNTS: dict[str, int] = {"none": 1, "quadrants": 4, "octants": 8}


def _whole(name: str, value: Any, least: int) -> int:
    """``value`` as a whole number of at least ``least``, or a ValueError that says what came."""
    if isinstance(value, bool) or not float(value).is_integer() or int(value) < least:
        raise ValueError(f"{name} is {value!r}; wanted a whole number of {least} or more")
    return int(value)


@dataclass(frozen=True, slots=True)
class Neighbourhood:
    """A moving search ellipsoid in rotated space.

    Samples inside the ellipsoid are taken nearest first (distance in units of the radii; ties by the order of
    the samples), each unless its sector or its hole is full, until ``max_samples`` are taken. Sectors thus
    count over all samples in reach, not over the nearest few.

    Parameters
    ----------
    radii : (major, semi_major, minor), or one number for all three
        Semi-axes of the ellipsoid in metres.
    max_samples, min_samples : int
        Most samples to take, and fewest for an estimate.
    max_per_hole : int, optional
        Most samples from one hole.
    min_holes : int
        Fewest different holes for an estimate.
    sectors : "none" | "quadrants" | "octants"
        Sectors of the rotated ellipsoid: quadrants part the major and semi-major axes, octants the minor too.
    max_per_sector : int, optional
        Most samples from one sector; by default ``max_samples`` shared out evenly, rounded up.
    azimuth, plunge, tilt : float
        Rotation of the ellipsoid in degrees, as of a VariogramModel.

    Raises
    ------
    ValueError
        For a radius that is not above zero, or limits that no neighbourhood can meet.
    """

    radii: tuple[float, float, float]
    max_samples: int = 24
    min_samples: int = 4
    max_per_hole: int | None = None
    min_holes: int = 1
    sectors: Sectors = "none"
    max_per_sector: int | None = None
    azimuth: float = 0.0
    plunge: float = 0.0
    tilt: float = 0.0

    def __post_init__(self) -> None:
        given: Any = self.radii
        radii = (given,) * 3 if np.ndim(given) == 0 else tuple(given)
        if len(radii) != 3 or not all(math.isfinite(float(r)) and float(r) > 0.0 for r in radii):
            raise ValueError(f"radii {given!r}: wanted three lengths in metres above zero")
        object.__setattr__(self, "radii", tuple(float(r) for r in radii))
        for name in ("max_samples", "min_samples", "min_holes"):
            object.__setattr__(self, name, _whole(name, getattr(self, name), 1))
        for name in ("max_per_hole", "max_per_sector"):
            if getattr(self, name) is not None:
                object.__setattr__(self, name, _whole(name, getattr(self, name), 1))
        if self.max_samples > 1000:
            raise ValueError(
                f"max_samples is {self.max_samples}; wanted at most 1000 (None takes all samples)"
            )
        if self.min_samples > self.max_samples:
            raise ValueError(f"min_samples {self.min_samples} is more than max_samples {self.max_samples}")
        if self.min_holes > self.max_samples:
            raise ValueError(f"min_holes {self.min_holes} is more than max_samples {self.max_samples}")
        if self.sectors not in SECTOR_COUNTS:
            raise ValueError(f"sectors {self.sectors!r} is not one of {', '.join(SECTOR_COUNTS)}")
        for name in ("azimuth", "plunge", "tilt"):
            value = float(getattr(self, name))
            if not math.isfinite(value):
                raise ValueError(f"{name} is {value!r}; wanted degrees")
            object.__setattr__(self, name, value)

    @property
    def sector_count(self) -> int:
        """1, 4 or 8."""
        return SECTOR_COUNTS[self.sectors]

    @property
    def sector_limit(self) -> int:
        """Most samples from one sector."""
        if self.sectors == "none":
            return self.max_samples
        if self.max_per_sector is not None:
            return self.max_per_sector
        return -(-self.max_samples // self.sector_count)

    @property
    def axes(self) -> NDArray[np.float64]:
        """Unit vectors of the three axes as rows (east, north, up)."""
        return rotation_axes(self.azimuth, self.plunge, self.tilt)

    def grown(self, factor: float) -> Neighbourhood:
        """The same neighbourhood with all radii times ``factor``, for a next pass."""
        major, semi_major, minor = self.radii
        return replace(self, radii=(major * factor, semi_major * factor, minor * factor))


@dataclass(frozen=True, slots=True)
class HighGradeRestraint:
    """Clip high grades that lie far from the block.

    A sample above ``thresholds`` that lies farther from the target than the limit counts with the threshold as
    its value there; nearer, with its own. Weights and variances do not change. The limit is an ellipsoid of
    the shape of the first neighbourhood: ``fraction`` of its radii, or ``distance_m`` along its major axis.

    Parameters
    ----------
    thresholds : float or sequence of float
        One for all columns or one per column, in the unit of the value; NaN leaves a column alone.
    fraction : float
        Share of the radii of the first neighbourhood, above 0.
    distance_m : float, optional
        Length of the limit along the major axis in metres; wins over ``fraction``.
    """

    thresholds: float | Sequence[float]
    fraction: float = 0.5
    distance_m: float | None = None

    def __post_init__(self) -> None:
        for name in ("fraction", "distance_m"):
            value = getattr(self, name)
            if value is not None and not (math.isfinite(value) and value > 0.0):
                raise ValueError(f"{name} is {value!r}; wanted a number above zero")

    def per_column(self, columns: int) -> NDArray[np.float64]:
        """Thresholds, one per column; infinite where a column is left alone."""
        given = np.atleast_1d(np.asarray(self.thresholds, dtype=float))
        if given.shape not in ((1,), (columns,)):
            raise ValueError(f"thresholds has {given.size} numbers; wanted 1 or {columns}, one per column")
        return np.where(np.isnan(given), np.inf, given) * np.ones(columns)

    def limit_m(self, first: Neighbourhood) -> float:
        """Length of the limit along the major axis of the first neighbourhood, metres."""
        return self.distance_m if self.distance_m is not None else self.fraction * first.radii[0]


def as_passes(neighbourhood: Neighbourhood | Sequence[Neighbourhood] | None) -> list[Neighbourhood]:
    """The passes to try in turn; an empty list stands for all samples.

    Raises
    ------
    ValueError
        If the sequence is empty or holds anything else.
    """
    if neighbourhood is None:
        return []
    passes = [neighbourhood] if isinstance(neighbourhood, Neighbourhood) else list(neighbourhood)
    if not passes or not all(isinstance(item, Neighbourhood) for item in passes):
        raise ValueError("neighbourhood: wanted a Neighbourhood, a sequence of them, or None for all samples")
    return passes


def check_holes(passes: Sequence[Neighbourhood], hole_ids: ArrayLike | None) -> None:
    """Raise where a limit by hole is asked for and no holes are named."""
    if hole_ids is None and any(item.max_per_hole is not None or item.min_holes > 1 for item in passes):
        raise ValueError("hole_ids is missing: max_per_hole and min_holes need the hole of each sample")
