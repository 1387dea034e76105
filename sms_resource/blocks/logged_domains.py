"""Domains of blocks from logged codes, by indicator kriging or signed distance, with the probability kept."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any, Literal

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from sms_resource.blocks.frames import VerticalFrame
from sms_resource.blocks.model import BlockModel
from sms_resource.blocks.threads import on_one_thread

Array = NDArray[Any]
CHUNK = 20_000


@on_one_thread
def interpolate_domains(
    model: BlockModel,
    coordinates: ArrayLike,
    codes: Sequence[str],
    *,
    method: Literal["indicator", "signed_distance"] = "indicator",
    range_m: float,
    vertical_range_m: float,
    nugget_share: float = 0.1,
    samples: int = 16,
    frame: VerticalFrame | None = None,
) -> BlockModel:
    """Give every block the domain that is likeliest there.

    Indicator kriging estimates the probability of each code from the indicators (1 where logged, 0 where not) of
    the nearest samples; what falls outside 0 to 1 is cut and the rest made to sum to 1. Signed distance kriges,
    for each code, the distance to the nearest sample of another kind (negative where the code is not logged),
    and takes as probability the chance that the kriged distance is above zero, given its kriging variance.

    Parameters
    ----------
    model : BlockModel
    coordinates : array_like (n, 3)
        Easting, northing, elevation of logged samples or composites.
    codes : sequence of str (n,)
        Domain logged at each.
    method : "indicator" | "signed_distance"
    range_m, vertical_range_m : float
        Practical ranges of the exponential covariance, horizontal and vertical.
    nugget_share : float
        0 to 1.
    samples : int
        Nearest samples used for a block.
    frame : VerticalFrame, optional
        Coordinates in which the domains lie flat; None is elevation.

    Returns
    -------
    BlockModel
        With domain, share_<code> (1 for the likeliest, else 0) and probability_<code>. Shares that the model had
        are replaced.

    Raises
    ------
    ValueError
        If there is no sample, or an argument is out of range.
    """
    xyz = np.asarray(coordinates, dtype=np.float64).reshape(-1, 3)
    labels = np.asarray([str(code) for code in codes])
    good = np.isfinite(xyz).all(axis=1)
    if len(labels) != len(xyz) or not good.any():
        raise ValueError(
            f"coordinates ({len(xyz)}) and codes ({len(labels)}) must be equally many, at least one"
        )
    for name, value in (("range_m", range_m), ("vertical_range_m", vertical_range_m)):
        if not (math.isfinite(value) and value > 0):
            raise ValueError(f"{name} must be a positive length in m, not {value!r}")
    if not 0 <= nugget_share < 1:
        raise ValueError(f"nugget_share must lie from 0 to below 1, not {nugget_share!r}")
    if samples < 1:
        raise ValueError(f"samples must be at least 1, not {samples!r}")
    if method not in ("indicator", "signed_distance"):
        raise ValueError(f"method must be 'indicator' or 'signed_distance', not {method!r}")
    frame = frame or VerticalFrame()
    scale = np.array([range_m, range_m, vertical_range_m]) / 3.0
    xyz, labels = frame.forward(xyz[good]) / scale, labels[good]
    names = [str(name) for name in pd.unique(labels)]
    names.sort()
    blocks = model.frame[["easting", "northing", "elevation"]].to_numpy(dtype=np.float64)
    targets = frame.forward(blocks) / scale
    indicator = (labels[:, None] == np.array(names)[None]).astype(np.float64)
    values = indicator if method == "indicator" else _signed_distance(xyz, indicator)
    estimate, variance = _krige(xyz, values, targets, nugget_share, samples)
    if method == "indicator":
        likely = np.clip(estimate, 0.0, 1.0)
    else:
        from scipy.special import ndtr

        spread = np.sqrt(np.maximum(values.var(axis=0)[None] * variance[:, None], 1e-12))
        likely = ndtr(estimate / spread)
    total = likely.sum(axis=1, keepdims=True)
    likely = np.where(total > 0, likely / np.where(total > 0, total, 1.0), 1.0 / len(names))
    chosen = np.argmax(likely, axis=1).astype(np.int16)
    kept = model.frame.drop(
        columns=[c for c in model.frame if str(c).startswith("share_") and c not in SHARES]
    )
    columns: dict[str, Any] = {"domain": pd.Categorical.from_codes(chosen, categories=pd.Index(names))}
    columns |= {f"share_{name}": (chosen == n).astype(np.float64) for n, name in enumerate(names)}
    columns |= {f"probability_{name}": likely[:, n] for n, name in enumerate(names)}
    return model.with_frame(kept.assign(**columns))


SHARES = ("share_sideways", "share_downwards")


def _signed_distance(xyz: Array, indicator: Array) -> Array:
    """For each code, distance to the nearest sample of the other kind, positive inside; in ranges."""
    from scipy.spatial import cKDTree

    out = np.empty(indicator.shape)
    for n in range(indicator.shape[1]):
        inside = indicator[:, n] > 0
        if inside.all() or not inside.any():
            out[:, n] = np.where(inside, 1.0, -1.0)
            continue
        out[inside, n] = cKDTree(xyz[~inside]).query(xyz[inside])[0]
        out[~inside, n] = -cKDTree(xyz[inside]).query(xyz[~inside])[0]
    return out


def _krige(xyz: Array, values: Array, targets: Array, nugget: float, samples: int) -> tuple[Array, Array]:
    """Ordinary kriging with exp(-h) in scaled space from the nearest samples: estimates (b, m), variance (b,)."""
    from scipy.spatial import cKDTree

    count = min(samples, len(xyz))
    tree = cKDTree(xyz)
    estimate, variance = np.empty((len(targets), values.shape[1])), np.empty(len(targets))
    for start in range(0, len(targets), CHUNK):
        part = targets[start : start + CHUNK]
        distance, index = tree.query(part, k=count)
        distance, index = distance.reshape(-1, count), index.reshape(-1, count)
        near = xyz[index]
        apart = np.sqrt(np.maximum(((near[:, :, None] - near[:, None]) ** 2).sum(axis=-1), 0.0))
        left = np.zeros((len(part), count + 1, count + 1))
        left[:, :count, :count] = (1.0 - nugget) * np.exp(-apart)
        diagonal = np.arange(count)
        left[:, diagonal, diagonal] = 1.0 + 1e-9  # coincident samples share their weight
        left[:, count, :count] = left[:, :count, count] = 1.0
        right = np.ones((len(part), count + 1))
        right[:, :count] = np.where(distance > 1e-9, (1.0 - nugget) * np.exp(-distance), 1.0)
        weights = np.linalg.solve(left, right[:, :, None])[:, :, 0]
        estimate[start : start + CHUNK] = np.einsum("bn,bnm->bm", weights[:, :count], values[index])
        variance[start : start + CHUNK] = 1.0 - np.einsum("bn,bn->b", weights, right)
    return estimate, np.maximum(variance, 0.0)
