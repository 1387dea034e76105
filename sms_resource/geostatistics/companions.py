"""Nearest sample, inverse distance and moving average, on the same search as kriging."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .inputs import Samples, checked_block, checked_samples, checked_threads, cross, points_array
from .model import COINCIDENT_M, along
from .neighbourhood import Neighbourhood, as_passes, check_holes
from .support_variance import discretisation_offsets

FloatArray = NDArray[np.float64]
METHODS = ("nearest", "inverse_distance", "moving_average")
_CHUNK_NUMBERS = 2_000_000


def companion_estimates(
    coordinates: ArrayLike,
    values: ArrayLike,
    targets: ArrayLike,
    neighbourhood: Neighbourhood | Sequence[Neighbourhood] | None = None,
    *,
    hole_ids: ArrayLike | None = None,
    methods: Sequence[str] = METHODS,
    power: float = 2.0,
    block_size: ArrayLike | None = None,
    discretisation: ArrayLike = (1, 1, 1),
    threads: int | None = None,
    block_azimuth: float = 0.0,
    coincident: str = "error",
) -> dict[str, FloatArray]:
    """Simple estimates to hold kriging against.

    Parameters
    ----------
    coordinates, values, targets, neighbourhood, hole_ids, block_size, discretisation, threads, block_azimuth,
    coincident :
        As in ``ordinary_kriging``.
    methods : any of "nearest", "inverse_distance", "moving_average"
    power : float
        Of the inverse distance, above zero.

    Returns
    -------
    dict of method -> (b, m) array, or (b,) for a plain vector of values; NaN where kriging has too few samples.

    Notes
    -----
    Distance is that of the ellipsoid that found the samples (plain distance where it is None). The inverse
    distance of a block is the mean over its discretisation points; a point on a sample takes its value. The
    nearest sample is nearest to the centre.
    """
    samples = checked_samples(coordinates, values, hole_ids, coincident)
    places = points_array("targets", targets)
    unknown = [name for name in methods if name not in METHODS]
    if unknown:
        raise ValueError(f"methods holds {unknown[0]!r}; wanted any of {', '.join(METHODS)}")
    if not (math.isfinite(power) and power > 0.0):
        raise ValueError(f"power is {power!r}; wanted a number above zero")
    passes = as_passes(neighbourhood)
    check_holes(passes, hole_ids)
    size, counts = checked_block(block_size, discretisation)
    offsets = np.zeros((1, 3)) if size is None else discretisation_offsets(size, counts, block_azimuth)
    out = {name: np.full((len(places), samples.values.shape[1]), np.nan) for name in METHODS}
    if passes:
        _by_neighbourhood(samples, places, passes, offsets, float(power), checked_threads(threads), out)
    else:
        _from_all_samples(samples, places, offsets, float(power), out)
    return {name: samples.shaped(out[name]) for name in methods}


def _by_neighbourhood(
    samples: Samples,
    targets: FloatArray,
    passes: Sequence[Neighbourhood],
    offsets: FloatArray,
    power: float,
    workers: int,
    out: dict[str, FloatArray],
) -> None:
    """The kernel on what each pass found."""
    from .companion_kernels import companions
    from .search_run import Finder, share_out, target_chunks

    parts = []
    for group in samples.patterns().values():
        present = np.flatnonzero(np.isfinite(samples.values[:, group[0]]))
        parts.append(
            (group, present, Finder(samples.points[present], samples.holes[present], passes, workers))
        )
    for rows, local in target_chunks(targets, samples.origin, passes[0]):
        for group, present, finder in parts:
            found = finder.find(local)
            points = samples.points[present]
            for number, item in enumerate(passes, start=1):
                radii = np.array(item.radii)
                share_out(
                    companions,
                    workers,
                    np.ascontiguousarray(samples.values[cross(present, group)].T),
                    along(item.axes, points) / radii[:, None],
                    np.ascontiguousarray(points.T),
                    local,
                    np.ascontiguousarray(along(item.axes, local).T / radii),
                    offsets,
                    np.ascontiguousarray(along(item.axes, offsets).T / radii),
                    found.samples,
                    found.reach,
                    found.count,
                    np.where(found.pass_number == number, found.status, 1).astype(np.int8),
                    power,
                    rows,
                    np.array(group, dtype=np.int64),
                    out["nearest"],
                    out["moving_average"],
                    out["inverse_distance"],
                )


def _from_all_samples(
    samples: Samples, targets: FloatArray, offsets: FloatArray, power: float, out: dict[str, FloatArray]
) -> None:
    """Plain distances to all samples, a few targets at a time."""
    local = targets - samples.origin
    for group in samples.patterns().values():
        present = np.flatnonzero(np.isfinite(samples.values[:, group[0]]))
        if not len(present):
            continue
        points = samples.points[present]
        table = samples.values[cross(present, group)]
        step = max(1, _CHUNK_NUMBERS // len(points))
        for first in range(0, len(local), step):
            chunk = local[first : first + step]
            place = cross(np.arange(first, first + len(chunk)), group)
            squared = ((chunk[:, None, :] - points[None]) ** 2).sum(axis=2)
            out["nearest"][place] = table[np.argmin(squared, axis=1)]
            out["moving_average"][place] = table.mean(axis=0)
            total = np.zeros((len(chunk), len(group)))
            for offset in offsets:
                squared = ((chunk[:, None, :] + offset - points[None]) ** 2).sum(axis=2)
                here = squared <= COINCIDENT_M**2
                with np.errstate(divide="ignore"):
                    weights = np.where(here.any(axis=1)[:, None], here, squared ** (-0.5 * power))
                total += weights @ table / weights.sum(axis=1)[:, None]
            out["inverse_distance"][place] = total / len(offsets)
        strange = np.flatnonzero(~np.isfinite(local).all(axis=1))
        for array in out.values():
            array[cross(strange, group)] = np.nan
