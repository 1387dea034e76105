"""The variogram model: nested structures under one rotation.

Conventions: the range of a structure is its practical range; the nugget is zero at zero distance and full at
any distance above it; ``azimuth`` runs clockwise from north, ``plunge`` is positive downward, ``tilt`` turns
the semi-major axis about the major one, clockwise for an eye that looks down the plunge.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.float64]
Shape = Literal["spherical", "exponential", "gaussian"]

SHAPE_CODES: dict[str, int] = {"spherical": 0, "exponential": 1, "gaussian": 2}

# Two points nearer than this are one point: a micrometre is far below any survey and above rounding.
COINCIDENT_M = 1e-6


def rotation_axes(azimuth: float, plunge: float = 0.0, tilt: float = 0.0) -> FloatArray:
    """Unit vectors of the major, semi-major and minor axis, as rows (east, north, up).

    Parameters
    ----------
    azimuth, plunge, tilt : float
        Degrees. With all three zero: major = north, semi-major = east, minor = up.

    Returns
    -------
    (3, 3) array; ``separations @ axes.T`` gives components along the axes.
    """
    a, d, r = (math.radians(angle) for angle in (azimuth, plunge, tilt))
    major = np.array([math.sin(a) * math.cos(d), math.cos(a) * math.cos(d), -math.sin(d)])
    level = np.array([math.cos(a), -math.sin(a), 0.0])
    normal = np.cross(level, major)
    semi = level * math.cos(r) - normal * math.sin(r)
    minor = normal * math.cos(r) + level * math.sin(r)
    return np.array([major, semi, minor])


def along(axes: FloatArray, points: FloatArray) -> FloatArray:
    """Components of (n, 3) points along the rows of ``axes``, as a (3, n) array."""
    x, y, z = points.T
    return np.ascontiguousarray(np.stack([row[0] * x + row[1] * y + row[2] * z for row in axes]))


@dataclass(frozen=True, slots=True)
class Structure:
    """One structure of a variogram model.

    Parameters
    ----------
    shape : "spherical" | "exponential" | "gaussian"
        Spherical ``c (1.5 h/a - .5 (h/a)^3)``; exponential ``c (1 - exp(-3h/a))``;
        gaussian ``c (1 - exp(-3 (h/a)^2))``.
    sill : float
        Its share of the variance, in squared units of the value; zero or more.
    ranges : (major, semi_major, minor), or one number for all three
        Practical ranges in metres, above zero.

    Raises
    ------
    ValueError
        For an unknown shape, a negative sill, or a range that is not above zero.
    """

    shape: Shape
    sill: float
    ranges: tuple[float, float, float]

    def __post_init__(self) -> None:
        if self.shape not in SHAPE_CODES:
            raise ValueError(f"shape {self.shape!r} is not one of {', '.join(SHAPE_CODES)}")
        sill = float(self.sill)
        if not math.isfinite(sill) or sill < 0.0:
            raise ValueError(
                f"sill of a {self.shape} structure is {self.sill!r}; wanted a number of zero or more"
            )
        given: Any = self.ranges
        ranges = (given,) * 3 if np.ndim(given) == 0 else tuple(given)
        if len(ranges) != 3:
            raise ValueError(f"ranges {given!r}: wanted three numbers (major, semi_major, minor) in metres")
        ranges = tuple(float(value) for value in ranges)
        if not all(math.isfinite(value) and value > 0.0 for value in ranges):
            raise ValueError(f"ranges {given!r} of a {self.shape} structure: each must be above zero")
        object.__setattr__(self, "sill", sill)
        object.__setattr__(self, "ranges", ranges)


@dataclass(frozen=True, slots=True)
class VariogramModel:
    """Nugget and nested structures under one rotation.

    Parameters
    ----------
    nugget : float
        Variance at any distance above zero; zero at zero distance.
    structures : sequence of Structure
    azimuth, plunge, tilt : float
        Rotation of the axes of all structures, degrees.

    Raises
    ------
    ValueError
        For a negative nugget, a total sill of zero, or an angle that is not finite.

    Notes
    -----
    Shapes after Journel & Huijbregts (1978), Mining Geostatistics, chapter III.

    Examples
    --------
    >>> model = VariogramModel(0.2, [Structure("spherical", 0.8, (40.0, 40.0, 5.0))])
    >>> model.total_sill
    1.0
    """

    nugget: float
    structures: tuple[Structure, ...]
    azimuth: float = 0.0
    plunge: float = 0.0
    tilt: float = 0.0

    def __post_init__(self) -> None:
        given: Any = self.structures
        structures = (given,) if isinstance(given, Structure) else tuple(given)
        for item in structures:
            if not isinstance(item, Structure):
                raise ValueError(f"structures holds {item!r}; wanted Structure objects")
        nugget = float(self.nugget)
        if not math.isfinite(nugget) or nugget < 0.0:
            raise ValueError(f"nugget is {self.nugget!r}; wanted a number of zero or more")
        for name in ("azimuth", "plunge", "tilt"):
            value = float(getattr(self, name))
            if not math.isfinite(value):
                raise ValueError(f"{name} is {value!r}; wanted degrees")
            object.__setattr__(self, name, value)
        object.__setattr__(self, "structures", structures)
        object.__setattr__(self, "nugget", nugget)
        if not self.total_sill > 0.0:
            raise ValueError("the total sill (nugget and all structures) is zero; wanted more than zero")

    @property
    def total_sill(self) -> float:
        """Nugget plus the sills of all structures: the variance of a point."""
        return self.nugget + sum(item.sill for item in self.structures)

    @property
    def axes(self) -> FloatArray:
        """Unit vectors of the three axes as rows (east, north, up)."""
        return rotation_axes(self.azimuth, self.plunge, self.tilt)

    def _structured(self, separations: ArrayLike) -> tuple[FloatArray, FloatArray]:
        """Covariance without the nugget, and squared plain distance, for (..., 3) separations."""
        given = np.asarray(separations, dtype=float)
        if given.shape[-1:] != (3,):
            raise ValueError(f"separations has shape {given.shape}; wanted (n, 3): east, north, up in metres")
        squares = (given @ self.axes.T) ** 2
        total = np.zeros(given.shape[:-1])
        for item in self.structures:
            h2 = squares @ (1.0 / np.square(item.ranges))
            if item.shape == "spherical":
                h = np.minimum(np.sqrt(h2), 1.0)  # np.minimum passes NaN on
                total += item.sill * (1.0 - h * (1.5 - 0.5 * h * h))
            elif item.shape == "exponential":
                total += item.sill * np.exp(-3.0 * np.sqrt(h2))
            else:
                total += item.sill * np.exp(-3.0 * h2)
        return total, squares.sum(axis=-1)

    def covariance(self, separations: ArrayLike) -> FloatArray:
        """Covariance for (n, 3) separations (east, north, up; m); the total sill at zero distance."""
        total, squared = self._structured(separations)
        return total + np.where(squared <= COINCIDENT_M**2, self.nugget, 0.0)

    def structured_covariance(self, separations: ArrayLike) -> FloatArray:
        """Covariance without the nugget, as it counts between a block and a point."""
        return self._structured(separations)[0]

    def variogram(self, separations: ArrayLike) -> FloatArray:
        """Semivariogram for (n, 3) separations (east, north, up; m); zero at zero distance."""
        return self.total_sill - self.covariance(separations)

    def scaled(self, factor: float) -> VariogramModel:
        """The same model with nugget and sills times ``factor``."""
        structures = tuple(replace(item, sill=item.sill * factor) for item in self.structures)
        return replace(self, nugget=self.nugget * factor, structures=structures)

    def to_record(self) -> dict[str, Any]:
        """A dictionary ready for JSON; ``from_record`` turns it back."""
        return {
            "nugget": self.nugget,
            "structures": [
                {"shape": item.shape, "sill": item.sill, "ranges": list(item.ranges)}
                for item in self.structures
            ],
            "azimuth": self.azimuth,
            "plunge": self.plunge,
            "tilt": self.tilt,
        }

    @classmethod
    def from_record(cls, record: dict[str, Any]) -> VariogramModel:
        """The model that ``to_record`` wrote."""
        structures = [Structure(s["shape"], s["sill"], tuple(s["ranges"])) for s in record["structures"]]
        angles = {name: record.get(name, 0.0) for name in ("azimuth", "plunge", "tilt")}
        return cls(record["nugget"], tuple(structures), **angles)


def as_models(model: VariogramModel | Sequence[VariogramModel], columns: int) -> list[VariogramModel]:
    """One model per column, from one for all or a sequence.

    Raises
    ------
    ValueError
        If the sequence does not hold one VariogramModel per column.
    """
    if isinstance(model, VariogramModel):
        return [model] * columns
    models = list(model)
    if len(models) != columns or not all(isinstance(item, VariogramModel) for item in models):
        raise ValueError(f"model: wanted one VariogramModel, or {columns} of them, one per column of values")
    return models
