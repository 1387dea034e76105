"""Grids: a surface on square cells, and regular blocks rotated in plan."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[Any]


@dataclass(frozen=True, eq=False)
class SurfaceGrid:
    """Elevations (or any other property) on a regular grid that stands north up.

    Parameters
    ----------
    x0, y0 : float
        Easting and northing of the **centre** of the south-west cell, in m.
    dx, dy : float
        Distance between cell centres, in m; both positive.
    values : ndarray (ny, nx)
        Row 0 is the southernmost, column 0 the westernmost. NaN where there is no value.
    crs : str, optional
        Coordinate reference system, such as ``"EPSG:32756"``.
    uncertainty : ndarray (ny, nx), optional
        One standard deviation of ``values``, in the same unit.
    pins : ndarray (p, 4), optional
        Easting, northing, radius in m and height of small cones that are added to the bilinear surface, where
        points that the surface must meet stand closer together than its cells can tell apart.

    Raises
    ------
    ValueError
        If the sizes are not positive, or the arrays are not of one two-dimensional shape.
    """

    x0: float
    y0: float
    dx: float
    dy: float
    values: Array
    crs: str | None = None
    uncertainty: Array | None = None
    pins: Array | None = None

    def __post_init__(self) -> None:
        values = np.asarray(self.values, dtype=np.float64)
        if values.ndim != 2 or values.size == 0:
            raise ValueError(f"values must be a non-empty (ny, nx) array, not of shape {values.shape}")
        if not (self.dx > 0 and self.dy > 0 and math.isfinite(self.dx) and math.isfinite(self.dy)):
            raise ValueError(f"dx and dy must be positive lengths in m, not {self.dx} and {self.dy}")
        if not (math.isfinite(self.x0) and math.isfinite(self.y0)):
            raise ValueError(f"x0 and y0 must be finite, not {self.x0} and {self.y0}")
        object.__setattr__(self, "values", values)
        if self.uncertainty is not None:
            sigma = np.asarray(self.uncertainty, dtype=np.float64)
            if sigma.shape != values.shape:
                raise ValueError(f"uncertainty has shape {sigma.shape}, values have {values.shape}")
            object.__setattr__(self, "uncertainty", sigma)

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns (ny, nx)."""
        return self.values.shape[0], self.values.shape[1]

    @property
    def x(self) -> Array:
        """Eastings of the cell centres, from west to east (nx,)."""
        return self.x0 + self.dx * np.arange(self.values.shape[1])

    @property
    def y(self) -> Array:
        """Northings of the cell centres, from south to north (ny,)."""
        return self.y0 + self.dy * np.arange(self.values.shape[0])

    @property
    def bounds(self) -> tuple[float, float, float, float]:
        """West, south, east and north edge of the outermost cells, in m."""
        ny, nx = self.shape
        west, south = self.x0 - 0.5 * self.dx, self.y0 - 0.5 * self.dy
        return west, south, west + nx * self.dx, south + ny * self.dy

    @property
    def has_values(self) -> bool:
        """Whether any cell has a value."""
        return bool(np.isfinite(self.values).any())

    def with_values(self, values: Array, uncertainty: Array | None = None) -> SurfaceGrid:
        """The same cells with other values, without pins."""
        return replace(self, values=values, uncertainty=uncertainty, pins=None)

    def mesh(self) -> tuple[Array, Array]:
        """Easting and northing of every cell centre, each (ny, nx)."""
        x, y = np.meshgrid(self.x, self.y)
        return x, y

    def sample(self, x: ArrayLike, y: ArrayLike) -> Array:
        """Bilinear value at points; NaN outside the cell centres and next to cells without a value.

        A cell without a value does no harm where its weight is zero, as on a cell centre.

        Parameters
        ----------
        x, y : array_like
            Easting and northing in m, of one shape.

        Returns
        -------
        ndarray
            Values of the shape of ``x``.
        """
        found = _bilinear(self.values, *self._cells(x, y))
        if self.pins is not None:
            for east, north, radius, height in self.pins:
                off = np.hypot(np.asarray(x) - east, np.asarray(y) - north)
                found = found + height * np.maximum(1.0 - off / radius, 0.0)
        return found

    def sample_uncertainty(self, x: ArrayLike, y: ArrayLike) -> Array:
        """Bilinear standard deviation at points; NaN everywhere if the grid has none."""
        if self.uncertainty is None:
            return np.full(np.shape(np.asarray(x)), np.nan)
        return _bilinear(self.uncertainty, *self._cells(x, y))

    def _cells(self, x: ArrayLike, y: ArrayLike) -> tuple[Array, Array]:
        return (
            (np.asarray(x, dtype=np.float64) - self.x0) / self.dx,
            (np.asarray(y, dtype=np.float64) - self.y0) / self.dy,
        )

    def __repr__(self) -> str:
        ny, nx = self.shape
        empty = int(np.isnan(self.values).sum())
        span = "no values"
        if empty < self.values.size:
            span = f"{np.nanmin(self.values):.1f} to {np.nanmax(self.values):.1f}"
        return (
            f"SurfaceGrid({nx} x {ny} cells of {self.dx:g} x {self.dy:g} m, {span}, "
            f"{empty} without a value, crs {self.crs})"
        )


def _bilinear(values: Array, u: Array, v: Array) -> Array:
    """Bilinear value at fractional column ``u`` and row ``v``."""
    ny, nx = values.shape
    eps = 1e-9  # a point on the edge may miss it by rounding
    inside = (u >= -eps) & (u <= nx - 1 + eps) & (v >= -eps) & (v <= ny - 1 + eps)
    u = np.clip(np.where(inside, u, 0.0), 0.0, nx - 1)
    v = np.clip(np.where(inside, v, 0.0), 0.0, ny - 1)
    left = np.minimum(u.astype(np.int64), max(nx - 2, 0))
    low = np.minimum(v.astype(np.int64), max(ny - 2, 0))
    right, high = np.minimum(left + 1, nx - 1), np.minimum(low + 1, ny - 1)
    fu, fv = u - left, v - low
    total = np.zeros(u.shape)
    for row, col, weight in (
        (low, left, (1 - fu) * (1 - fv)),
        (low, right, fu * (1 - fv)),
        (high, left, (1 - fu) * fv),
        (high, right, fu * fv),
    ):
        total = total + np.where(weight > eps, weight * values[row, col], 0.0)
    return np.where(inside, total, np.nan)


@dataclass(frozen=True)
class BlockGrid:
    """Regular blocks, rotated in plan about their lower corner.

    Parameters
    ----------
    origin : (float, float, float)
        Easting, northing and elevation of the lower corner of block (0, 0, 0), in m.
    size : (float, float, float)
        Edge of a block along i, j and k, in m.
    shape : (int, int, int)
        Number of blocks along i, j and k; k counts upward.
    azimuth : float
        Direction of the j axis, in degrees clockwise from north; the i axis is 90 degrees right of it.

    Raises
    ------
    ValueError
        If a size or a count is not positive, or anything is not finite.
    """

    origin: tuple[float, float, float]
    size: tuple[float, float, float]
    shape: tuple[int, int, int]
    azimuth: float = 0.0

    def __post_init__(self) -> None:
        for name, values in (("origin", self.origin), ("size", self.size), ("shape", self.shape)):
            if len(values) != 3 or not all(math.isfinite(float(value)) for value in values):
                raise ValueError(f"{name} must be three finite numbers, not {values!r}")
        if min(self.size) <= 0:
            raise ValueError(f"size must be three positive lengths in m, not {self.size!r}")
        if min(self.shape) < 1 or any(int(count) != count for count in self.shape):
            raise ValueError(f"shape must be three whole numbers of at least 1, not {self.shape!r}")
        if not math.isfinite(self.azimuth):
            raise ValueError(f"azimuth must be finite degrees, not {self.azimuth!r}")
        object.__setattr__(self, "origin", tuple(float(value) for value in self.origin))
        object.__setattr__(self, "size", tuple(float(value) for value in self.size))
        object.__setattr__(self, "shape", tuple(int(value) for value in self.shape))
        object.__setattr__(self, "azimuth", float(self.azimuth))

    @property
    def count(self) -> int:
        """Number of blocks in the whole grid."""
        return self.shape[0] * self.shape[1] * self.shape[2]

    @property
    def block_volume_m3(self) -> float:
        """Volume of one whole block."""
        return self.size[0] * self.size[1] * self.size[2]

    @property
    def axes(self) -> Array:
        """Unit vectors of the i, j and k axes as rows (3, 3): east, north, up."""
        angle = math.radians(self.azimuth)
        sin, cos = math.sin(angle), math.cos(angle)
        return np.array([[cos, -sin, 0.0], [sin, cos, 0.0], [0.0, 0.0, 1.0]])

    def to_world(self, local: ArrayLike) -> Array:
        """World coordinates (n, 3) of local ones: distances from the origin along i, j, k in m."""
        local = np.atleast_2d(np.asarray(local, dtype=np.float64))
        return local @ self.axes + np.asarray(self.origin)

    def to_local(self, world: ArrayLike) -> Array:
        """Local coordinates (n, 3) of world ones."""
        world = np.atleast_2d(np.asarray(world, dtype=np.float64))
        return (world - np.asarray(self.origin)) @ self.axes.T

    def centres(self, i: ArrayLike, j: ArrayLike, k: ArrayLike) -> Array:
        """World coordinates (n, 3) of block centres."""
        index = np.column_stack([np.asarray(a, dtype=np.float64).ravel() for a in (i, j, k)])
        return self.to_world((index + 0.5) * np.asarray(self.size))

    def index(self, world: ArrayLike) -> NDArray[np.int64]:
        """Index (n, 3) of the blocks that hold points; it may lie outside the grid's shape."""
        return np.floor(self.to_local(world) / np.asarray(self.size)).astype(np.int64)

    def corners_xy(self) -> Array:
        """The four corners in plan (4, 2), counter-clockwise from the origin."""
        length = self.shape[0] * self.size[0], self.shape[1] * self.size[1]
        local = [(0, 0, 0), (length[0], 0, 0), (length[0], length[1], 0), (0, length[1], 0)]
        return self.to_world(local)[:, :2]

    @property
    def elevations(self) -> Array:
        """Elevation of the block floors and of the last roof (nk + 1,)."""
        return self.origin[2] + self.size[2] * np.arange(self.shape[2] + 1)

    def record(self) -> dict[str, Any]:
        """Plain values, ready for JSON; :meth:`from_record` reads them back."""
        return {
            "origin": list(self.origin),
            "size": list(self.size),
            "shape": list(self.shape),
            "azimuth": self.azimuth,
        }

    @classmethod
    def from_record(cls, record: dict[str, Any]) -> BlockGrid:
        """The grid that :meth:`record` described."""
        origin, size, shape = (_three(record[name]) for name in ("origin", "size", "shape"))
        return cls(origin, size, tuple(int(n) for n in shape), record.get("azimuth", 0.0))  # type: ignore[arg-type]


def _three(values: Sequence[float]) -> tuple[float, float, float]:
    first, second, third = values
    return first, second, third
