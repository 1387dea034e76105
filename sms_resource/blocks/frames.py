"""Vertical frames: elevation, depth below the seafloor, or position between seafloor and base."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from sms_resource.blocks.grid import SurfaceGrid

Array = NDArray[Any]
Kind = Literal["elevation", "depth", "proportional"]
KINDS = ("elevation", "depth", "proportional")


@dataclass(frozen=True, eq=False)
class VerticalFrame:
    """Coordinates in which the layers of a draped body lie flat.

    The plan position stays. The third coordinate is in m and grows upward in every frame, so that search
    radii, ranges and block heights keep their meaning: elevation; minus the depth below the seafloor; or the
    share of the way from base to seafloor, times the mean thickness. A body laid down on a slope is continuous
    along the slope: in elevation, neighbours on one level are strangers.

    Parameters
    ----------
    kind : "elevation" | "depth" | "proportional"
    top : SurfaceGrid, optional
        Seafloor; needed for depth and proportional.
    base : SurfaceGrid, optional
        Base on the same lattice as the seafloor or any other; needed for proportional.
    least_thickness_m : float
        Where the body is thinner, the proportional frame treats it as so thick: otherwise a thin edge would
        be stretched without limit.

    Attributes
    ----------
    mean_thickness_m : float
        Mean thickness where there is any, the height of the proportional frame; NaN in the other frames.

    Notes
    -----
    Off the grid, and where it has no value, the nearest value stands for it, so that every point has a place
    in every frame and comes back from it.
    """

    kind: Kind = "elevation"
    top: SurfaceGrid | None = None
    base: SurfaceGrid | None = None
    least_thickness_m: float = 1.0
    _filled: dict[str, SurfaceGrid] = field(default_factory=dict, init=False, repr=False)
    mean_thickness_m: float = field(default=float("nan"), init=False)

    def __post_init__(self) -> None:
        if self.kind not in KINDS:
            raise ValueError(f"kind must be one of {', '.join(KINDS)}, not {self.kind!r}")
        if not self.least_thickness_m > 0:
            raise ValueError(f"least_thickness_m must be positive, not {self.least_thickness_m!r}")
        needed = {"elevation": (), "depth": ("top",), "proportional": ("top", "base")}[self.kind]
        for name in needed:
            grid = getattr(self, name)
            if grid is None:
                raise ValueError(f"{name} is needed for the frame {self.kind!r}")
            if not grid.has_values:
                raise ValueError(f"{name} holds no value")
            self._filled[name] = grid.with_values(_nearest(grid.values))
        if self.kind == "proportional":
            base = self._filled["base"]
            x, y = base.mesh()
            thickness = self._at("top", np.column_stack([x.ravel(), y.ravel()])) - base.values.ravel()
            body = thickness[thickness > 1e-6]
            mean = max(float(body.mean()) if body.size else 0.0, self.least_thickness_m)
            object.__setattr__(self, "mean_thickness_m", mean)

    def _at(self, name: str, xyz: Array) -> Array:
        grid = self._filled[name]
        return grid.sample(
            np.clip(xyz[:, 0], grid.x[0], grid.x[-1]), np.clip(xyz[:, 1], grid.y[0], grid.y[-1])
        )

    def _scale(self, xyz: Array) -> tuple[Array, Array, float]:
        """Seafloor, thickness and the mean thickness at points."""
        top = self._at("top", xyz)
        thickness = np.maximum(top - self._at("base", xyz), self.least_thickness_m)
        return top, thickness, self.mean_thickness_m

    def forward(self, xyz: ArrayLike) -> Array:
        """Coordinates (n, 3) of world points in the frame."""
        xyz = _points(xyz)
        if self.kind == "depth":
            xyz[:, 2] -= self._at("top", xyz)
        elif self.kind == "proportional":
            top, thickness, mean = self._scale(xyz)
            xyz[:, 2] = (xyz[:, 2] - top) / thickness * mean + mean
        return xyz

    def inverse(self, xyz: ArrayLike) -> Array:
        """World points (n, 3) of coordinates in the frame."""
        xyz = _points(xyz)
        if self.kind == "depth":
            xyz[:, 2] += self._at("top", xyz)
        elif self.kind == "proportional":
            top, thickness, mean = self._scale(xyz)
            xyz[:, 2] = (xyz[:, 2] - mean) / mean * thickness + top
        return xyz

    @property
    def label(self) -> str:
        """What an axis or a report calls the third coordinate."""
        return {
            "elevation": "elevation (m)",
            "depth": "height below the seafloor (m, negative down)",
            "proportional": "position between base and seafloor (m of mean thickness)",
        }[self.kind]


def _points(xyz: ArrayLike) -> Array:
    points = np.array(xyz, dtype=np.float64, copy=True)
    points = np.atleast_2d(points)
    if points.ndim != 2 or points.shape[1] != 3:
        raise ValueError(f"xyz must be of shape (n, 3), not {points.shape}")
    return points


def _nearest(values: Array) -> Array:
    """Values with every gap filled by the nearest value."""
    empty = ~np.isfinite(values)
    if not empty.any():
        return values
    from scipy.ndimage import distance_transform_edt

    rows, columns = distance_transform_edt(empty, return_distances=False, return_indices=True)
    return values[rows, columns]
