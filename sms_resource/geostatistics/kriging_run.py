"""Kriging of many targets, chunk by chunk: from a moving neighbourhood, or from all samples."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from .covariance_kernels import covariances_to_targets
from .inputs import Samples, cross
from .kriging_kernels import NOT_FINITE, SINGULAR, SMALLEST_PIVOT, krige
from .kriging_setup import ModelArrays
from .lane_kernels import LANES
from .model import COINCIDENT_M, VariogramModel
from .neighbourhood import HighGradeRestraint, Neighbourhood
from .search_run import CHUNK, Finder, Found, share_out, target_chunks

if TYPE_CHECKING:
    from .kriging import Outputs

FloatArray = NDArray[np.float64]
Int64Array = NDArray[np.int64]

# The whole matrix of covariances is made for an estimate from all samples: 10 000 need 0.8 GB.
MOST_FOR_ALL = 10_000
_ALL_CHUNK_NUMBERS = 4_000_000
# Up to so many samples the packed kernels beat the library's matrices, and need no second factor's room.
FEW = 200
_RUN_OF_ALL = 64


def columns_by_model(
    columns: Sequence[int], models: Sequence[VariogramModel]
) -> Iterator[tuple[VariogramModel, list[int]]]:
    """Columns that share a model."""
    groups: dict[VariogramModel, list[int]] = {}
    for column in columns:
        groups.setdefault(models[column], []).append(column)
    yield from groups.items()


def krige_found(
    found: Found,
    local: FloatArray,
    rows: Int64Array,
    present: Int64Array,
    samples: Samples,
    arrays: ModelArrays,
    columns: Sequence[int],
    runs: tuple[Int64Array, Int64Array, Int64Array],
    workers: int,
    thresholds: FloatArray,
    limit: float,
    means: FloatArray | None,
    out: Outputs,
) -> None:
    """Krige one chunk whose samples are found, for columns that share pattern and model."""
    widest = found.samples.shape[1]
    room = np.empty((workers, LANES * (widest * (widest + 1) // 2 + 11 * widest + 16)))
    share_out(
        krige,
        workers,
        np.ascontiguousarray(arrays.samples[:, present]),
        np.ascontiguousarray(samples.values[cross(present, columns)].T),
        local,
        found.samples,
        found.reach,
        found.count,
        *runs,
        arrays.shapes,
        arrays.sills,
        arrays.inverse,
        arrays.nugget,
        arrays.axes,
        arrays.offsets,
        arrays.support_variance,
        means is None,
        np.zeros(len(columns)) if means is None else means[list(columns)],
        thresholds[list(columns)],
        limit,
        rows,
        np.array(columns, dtype=np.int64),
        out.estimate,
        out.variance,
        out.lagrange,
        out.slope,
        out.efficiency,
        out.negative,
        out.status,
        room,
    )


def by_neighbourhood(
    samples: Samples,
    targets: FloatArray,
    models: Sequence[VariogramModel],
    arrays: Mapping[VariogramModel, ModelArrays],
    passes: Sequence[Neighbourhood],
    workers: int,
    restraint: HighGradeRestraint | None,
    means: FloatArray | None,
    out: Outputs,
) -> None:
    """Krige from the samples in a moving neighbourhood; one search serves all columns that allow it."""
    columns = samples.values.shape[1]
    thresholds = np.full(columns, np.inf) if restraint is None else restraint.per_column(columns)
    limit = np.inf if restraint is None else restraint.limit_m(passes[0])
    parts = []
    for group in samples.patterns().values():
        present = np.flatnonzero(np.isfinite(samples.values[:, group[0]]))
        parts.append(
            (group, present, Finder(samples.points[present], samples.holes[present], passes, workers))
        )
    for rows, local in target_chunks(targets, samples.origin, passes[0]):
        for group, present, finder in parts:
            found = finder.find(local)
            fill_search(found, rows, group, out)
            runs = found.runs()
            for model, alike in columns_by_model(group, models):
                krige_found(
                    found, local, rows, present, samples, arrays[model], alike, runs, workers, thresholds,
                    limit, means, out,
                )  # fmt: skip
        strange = rows[~np.isfinite(local).all(axis=1)]
        out.status[strange] = NOT_FINITE


def fill_search(found: Found, rows: Int64Array, columns: Sequence[int], out: Outputs) -> None:
    """Write what the search found into the output of all columns that share it."""
    for column in columns:
        out.count[rows, column] = found.count
        out.holes[rows, column] = found.hole_count
        out.nearest[rows, column] = found.nearest
        out.status[rows, column] = found.status
        out.pass_number[rows, column] = found.pass_number


def whole_factor(
    points: FloatArray, setup: ModelArrays, present: Int64Array, workers: int
) -> FloatArray | None:
    """Lower Cholesky factor of the covariances between all of ``points``; None where it is not stable.

    ``points`` (n, 3) are the local coordinates of the samples ``present``.
    """
    from scipy.linalg import LinAlgError, cholesky

    n = len(points)
    matrix = np.empty((n, n))
    room = np.empty((workers, LANES * (4 * n + 3)))
    share_out(
        covariances_to_targets, workers, np.ascontiguousarray(setup.samples[:, present]), points, setup.shapes,
        setup.sills, setup.inverse, setup.nugget, setup.axes, np.empty((len(setup.shapes), 0, 3)), matrix, room,
    )  # fmt: skip
    total_sill = setup.nugget + float(setup.sills.sum())
    try:
        factor = cholesky(matrix, lower=True, overwrite_a=True, check_finite=False)
    except LinAlgError:
        return None
    return factor if np.diag(factor).min() ** 2 > SMALLEST_PIVOT * total_sill else None


def from_all_samples(
    samples: Samples,
    targets: FloatArray,
    models: Sequence[VariogramModel],
    arrays: Mapping[VariogramModel, ModelArrays],
    workers: int,
    means: FloatArray | None,
    out: Outputs,
) -> None:
    """Krige every target from all samples: one factorisation for each pattern and model.

    Raises
    ------
    ValueError
        If there are more samples than a whole matrix should hold.
    """
    from scipy.linalg import cho_solve
    from scipy.spatial import cKDTree

    local = targets - samples.origin
    is_place = np.isfinite(local).all(axis=1)
    finite = np.flatnonzero(is_place)
    for group in samples.patterns().values():
        present = np.flatnonzero(np.isfinite(samples.values[:, group[0]]))
        n = len(present)
        if n > MOST_FOR_ALL:
            raise ValueError(
                f"neighbourhood is None for {n} samples; wanted a Neighbourhood above {MOST_FOR_ALL} samples"
            )
        out.count[:, group] = n
        out.holes[:, group] = len(np.unique(samples.holes[present]))
        if not n:
            continue
        points = samples.points[present]
        nearest = np.full(len(local), np.nan)
        nearest[finite] = cKDTree(points).query(local[finite])[0]
        out.nearest[:, group] = nearest[:, None]
        if n <= FEW:
            _from_few(samples, local, finite, present, group, models, arrays, workers, means, out)
            continue
        chunk = max(LANES, _ALL_CHUNK_NUMBERS // n)
        for model, alike in columns_by_model(group, models):
            setup = arrays[model]
            factor = whole_factor(points, setup, present, workers)
            if factor is None:
                out.status[cross(finite, alike)] = SINGULAR
                continue
            along_axes = np.ascontiguousarray(setup.samples[:, present])
            table = samples.values[cross(present, alike)]
            ones = cho_solve((factor, True), np.ones(n), check_finite=False)
            room = np.empty((workers, LANES * (4 * n + 3)))
            for first in range(0, len(finite), chunk):
                rows = finite[first : first + chunk]
                right = np.empty((len(rows), n))
                share_out(
                    covariances_to_targets, workers, along_axes, local[rows], setup.shapes, setup.sills,
                    setup.inverse, setup.nugget, setup.axes, setup.offsets, right, room,
                )  # fmt: skip
                weights = cho_solve((factor, True), right.T, check_finite=False)
                mu = np.zeros(len(rows))
                if means is None:
                    mu = (weights.sum(axis=0) - 1.0) / ones.sum()
                    weights -= ones[:, None] * mu
                _finish_all(
                    weights, right, mu, table, nearest[rows], points, local[rows], setup,
                    None if means is None else means[alike], rows, alike, out,
                )  # fmt: skip
    out.status[~is_place] = NOT_FINITE


def _from_few(
    samples: Samples,
    local: FloatArray,
    finite: Int64Array,
    present: Int64Array,
    group: Sequence[int],
    models: Sequence[VariogramModel],
    arrays: Mapping[VariogramModel, ModelArrays],
    workers: int,
    means: FloatArray | None,
    out: Outputs,
) -> None:
    """Few samples: the kernels of the moving neighbourhood, with all samples found for every target."""
    n = len(present)
    unlimited = np.full(samples.values.shape[1], np.inf)
    for first in range(0, len(finite), CHUNK // 8):
        rows = finite[first : first + CHUNK // 8]
        c = len(rows)
        found = Found(
            samples=np.ascontiguousarray(np.broadcast_to(np.arange(n, dtype=np.int32), (c, n))),
            reach=np.zeros((c, n)),
            count=np.full(c, n, dtype=np.int32),
            hole_count=np.zeros(c, dtype=np.int32),
            nearest=np.zeros(c),
            status=np.zeros(c, dtype=np.int8),
            pass_number=np.zeros(c, dtype=np.int8),
        )
        length = min(_RUN_OF_ALL, -(-c // (2 * LANES)))
        starts = np.arange(0, c, length)
        runs = (np.arange(c), starts, np.minimum(length, c - starts))
        for model, alike in columns_by_model(group, models):
            krige_found(
                found, np.ascontiguousarray(local[rows]), rows, present, samples, arrays[model], alike, runs,
                workers, unlimited, np.inf, means, out,
            )  # fmt: skip


def _finish_all(
    weights: FloatArray,
    right: FloatArray,
    mu: FloatArray,
    table: FloatArray,
    nearest: FloatArray,
    points: FloatArray,
    local: FloatArray,
    setup: ModelArrays,
    means: FloatArray | None,
    rows: Int64Array,
    columns: Sequence[int],
    out: Outputs,
) -> None:
    """Estimates and their quality from (n, c) weights."""
    variance = setup.support_variance - np.einsum("ij,ji->i", right, weights) - mu
    if not setup.offsets.shape[1]:
        for place in np.flatnonzero(nearest <= COINCIDENT_M):
            apart = np.sum((points - local[place]) ** 2, axis=1)
            weights[:, place] = apart == apart.min()
            mu[place] = variance[place] = 0.0
    variance = np.where(variance > -1e-6 * setup.support_variance, np.maximum(variance, 0.0), np.nan)
    shift = np.zeros(len(columns)) if means is None else means
    estimate = weights.T @ (table - shift) + shift
    gain = setup.support_variance - variance
    with np.errstate(divide="ignore", invalid="ignore"):
        slope = (gain + np.abs(mu)) / (gain + 2.0 * np.abs(mu))
        efficiency = np.where(setup.support_variance > 0.0, gain / setup.support_variance, np.nan)
    good = np.isfinite(variance) & np.isfinite(estimate).all(axis=1)
    where = cross(rows[good], columns)
    out.estimate[where] = estimate[good]
    for array, given in (
        (out.variance, variance),
        (out.lagrange, mu),
        (out.slope, slope),
        (out.efficiency, efficiency),
        (out.negative, np.minimum(weights, 0.0).sum(axis=0)),
    ):
        array[where] = given[good][:, None]
    out.status[cross(rows, columns)] = np.where(good, 0, NOT_FINITE)[:, None]
