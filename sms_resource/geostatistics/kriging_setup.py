"""A variogram model as the plain arrays that the kernels take."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .model import SHAPE_CODES, VariogramModel, along
from .support_variance import block_variance, discretisation_offsets

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class ModelArrays:
    """One model, the samples along its axes, and the support of the target; see the kernel ``krige``."""

    samples: FloatArray
    shapes: NDArray[np.int64]
    sills: FloatArray
    inverse: FloatArray
    nugget: float
    axes: FloatArray
    offsets: FloatArray
    support_variance: float


def model_arrays(
    model: VariogramModel,
    points: FloatArray,
    block_size: FloatArray | None,
    counts: tuple[int, int, int],
    block_azimuth: float = 0.0,
) -> ModelArrays:
    """Arrays for (n, 3) local sample ``points`` and blocks of ``block_size``, or points where it is None."""
    structures = model.structures
    inverse = np.array([[1.0 / r for r in item.ranges] for item in structures]).reshape(-1, 3)
    if block_size is None:
        offsets = np.empty((len(structures), 0, 3))
        support = model.total_sill
    else:
        rotated = along(model.axes, discretisation_offsets(block_size, counts, block_azimuth)).T
        offsets = np.ascontiguousarray(rotated[None] * inverse[:, None, :])
        support = block_variance(model, block_size, counts, block_azimuth)
    return ModelArrays(
        samples=along(model.axes, points),
        shapes=np.array([SHAPE_CODES[item.shape] for item in structures], dtype=np.int64),
        sills=np.array([item.sill for item in structures], dtype=float),
        inverse=inverse,
        nugget=model.nugget,
        axes=np.ascontiguousarray(model.axes),
        offsets=offsets,
        support_variance=support,
    )
