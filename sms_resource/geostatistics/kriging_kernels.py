"""The kriging systems: factorisation, weights and estimates, eight blocks side by side.

Let K hold the covariances between the samples of a block, k those between the samples and the block, and 1 be
a column of ones. With K = L L', a = L^-1 k and b = L^-1 1, ordinary kriging (Matheron 1963; Journel &
Huijbregts 1978, chapter V) is

    mu = (b.a - 1) / (b.b)          Lagrange multiplier of K w + mu 1 = k
    w  = L'^-1 (a - mu b)
    variance = C(V, V) - w.k - mu

so one factor serves every block that sees the same samples, and every column with the same model.
"""

# mypy: allow-untyped-defs

from __future__ import annotations

import math

import numpy as np
from numba import njit

from .covariance_kernels import SAME_PLACE, block_covariances, fill_matrix, point_covariances
from .lane_kernels import LANES, add, div, fma, fnma, load, mul, root, splat, store, where_less

DONE, SINGULAR, NOT_FINITE = 0, 3, 4
SMALLEST_PIVOT = 1e-11  # of the sill: beyond this the weights keep fewer than some five digits
_FAR = 1e100  # where an empty slot of a pack stands, so that it covaries with nothing


@njit(cache=True, error_model="numpy")
def _factorise(matrix, n, inverse_pivot):
    """Cholesky factor of the packed K in place, inverse diagonal apart; the smallest squared pivots.

    Left-looking; four rows at a time share the loads of the pivot row and keep four sums in flight.
    """
    smallest = splat(math.inf)
    for j in range(n):
        pivot_row = (j * (j + 1) // 2) * LANES
        pivot = load(matrix, pivot_row + j * LANES)
        for k in range(j):
            element = load(matrix, pivot_row + k * LANES)
            pivot = fnma(element, element, pivot)
        smallest = where_less(pivot, smallest, pivot, smallest)
        scale = div(splat(1.0), root(pivot))
        store(inverse_pivot, j * LANES, scale)
        i = j + 1
        while i + 3 < n:
            r0 = (i * (i + 1) // 2) * LANES
            r1 = r0 + (i + 1) * LANES
            r2 = r1 + (i + 2) * LANES
            r3 = r2 + (i + 3) * LANES
            s0 = load(matrix, r0 + j * LANES)
            s1 = load(matrix, r1 + j * LANES)
            s2 = load(matrix, r2 + j * LANES)
            s3 = load(matrix, r3 + j * LANES)
            for k in range(j):
                element = load(matrix, pivot_row + k * LANES)
                s0 = fnma(load(matrix, r0 + k * LANES), element, s0)
                s1 = fnma(load(matrix, r1 + k * LANES), element, s1)
                s2 = fnma(load(matrix, r2 + k * LANES), element, s2)
                s3 = fnma(load(matrix, r3 + k * LANES), element, s3)
            store(matrix, r0 + j * LANES, mul(s0, scale))
            store(matrix, r1 + j * LANES, mul(s1, scale))
            store(matrix, r2 + j * LANES, mul(s2, scale))
            store(matrix, r3 + j * LANES, mul(s3, scale))
            i += 4
        while i < n:
            r0 = (i * (i + 1) // 2) * LANES
            s0 = load(matrix, r0 + j * LANES)
            for k in range(j):
                s0 = fnma(load(matrix, r0 + k * LANES), load(matrix, pivot_row + k * LANES), s0)
            store(matrix, r0 + j * LANES, mul(s0, scale))
            i += 1
    return smallest


@njit(cache=True, error_model="numpy")
def _forward(matrix, n, inverse_pivot, right, out):
    """out = L^-1 right, and the squared length of out."""
    length = splat(0.0)
    for i in range(n):
        row = (i * (i + 1) // 2) * LANES
        value = load(right, i * LANES)
        for k in range(i):
            value = fnma(load(matrix, row + k * LANES), load(out, k * LANES), value)
        value = mul(value, load(inverse_pivot, i * LANES))
        store(out, i * LANES, value)
        length = fma(value, value, length)
    return length


@njit(cache=True, error_model="numpy")
def _backward(matrix, n, inverse_pivot, out):
    """out = L'^-1 out, in place."""
    for i in range(n - 1, -1, -1):
        row = (i * (i + 1) // 2) * LANES
        value = mul(load(out, i * LANES), load(inverse_pivot, i * LANES))
        store(out, i * LANES, value)
        for k in range(i):
            store(out, k * LANES, fnma(load(matrix, row + k * LANES), value, load(out, k * LANES)))


@njit(cache=True, error_model="numpy")
def _set_places(where, axes, targets, order, starts, sizes, first_run, runs, turn):
    """Put the targets of one turn of a batch of runs into a pack, along the axes of the model."""
    for lane in range(LANES):
        # a pack that is not full repeats its last run, which is written once
        run = first_run + min(lane, runs - 1)
        row = order[starts[run] + min(turn, sizes[run] - 1)]
        for axis in range(3):
            where[axis * LANES + lane] = (
                axes[axis, 0] * targets[row, 0]
                + axes[axis, 1] * targets[row, 1]
                + axes[axis, 2] * targets[row, 2]
            )


@njit(cache=True, error_model="numpy")
def _set_samples(at, ones, n, samples, found, count, order, starts, first_run, runs):
    """Put the samples of a batch of runs into packs; empty slots stand far away and count nothing."""
    for lane in range(LANES):
        row = order[starts[first_run + min(lane, runs - 1)]]
        for i in range(n):
            present = i < count[row]
            ones[i * LANES + lane] = 1.0 if present else 0.0
            for axis in range(3):
                far = _FAR * (i + 1.0)
                at[(3 * i + axis) * LANES + lane] = samples[axis, found[row, i]] if present else far


@njit(cache=True, error_model="numpy")
def _solve(matrix, n, inverse_pivot, right, b, bb, ordinary, weights, multiplier, explained, below_zero):
    """Weights, multiplier, ``w.k`` and sum of negative weights of eight factorised systems."""
    _forward(matrix, n, inverse_pivot, right, weights)
    mu = splat(0.0)
    if ordinary:
        ab = splat(-1.0)
        for i in range(n):
            ab = fma(load(weights, i * LANES), load(b, i * LANES), ab)
        mu = div(ab, bb)
        for i in range(n):
            store(weights, i * LANES, fnma(mu, load(b, i * LANES), load(weights, i * LANES)))
    store(multiplier, 0, mu)
    _backward(matrix, n, inverse_pivot, weights)
    wk = splat(0.0)
    zero = splat(0.0)
    negative = zero
    for i in range(n):
        weight = load(weights, i * LANES)
        wk = fma(weight, load(right, i * LANES), wk)
        negative = add(negative, where_less(weight, zero, weight, zero))
    store(explained, 0, wk)
    store(below_zero, 0, negative)


@njit(cache=True, error_model="numpy")
def _set_exact(at, where, lane, n, weights):
    """Weight one for the sample on which a point lies: what the system gives, without its rounding."""
    for i in range(n):
        dx = at[(3 * i) * LANES + lane] - where[lane]
        dy = at[(3 * i + 1) * LANES + lane] - where[LANES + lane]
        dz = at[(3 * i + 2) * LANES + lane] - where[2 * LANES + lane]
        weights[i * LANES + lane] = 1.0 if dx * dx + dy * dy + dz * dz <= SAME_PLACE else 0.0


@njit(cache=True, error_model="numpy")
def _write(
    values, found, reach, n, row, lane, weights, multiplier, explained, below_zero, total_sill, block_variance,
    means, thresholds, limit, out, columns, estimate, variance, lagrange, slope, efficiency, negative, status,
):  # fmt: skip
    """Estimates of one target in all columns, and what tells their quality."""
    kriged = block_variance - explained - multiplier
    # rounding may leave a hair below zero
    kriged = max(kriged, 0.0) if kriged > -1e-6 * total_sill else math.nan
    gain = block_variance - kriged
    for c in range(columns.size):
        column = columns[c]
        total = 0.0
        for i in range(n):
            value = values[c, found[row, i]]
            if value > thresholds[c] and reach[row, i] > limit:
                value = thresholds[c]
            total += weights[i * LANES + lane] * (value - means[c])
        total += means[c]
        if not (math.isfinite(total) and math.isfinite(kriged)):
            status[out, column] = NOT_FINITE
            continue
        status[out, column] = DONE
        estimate[out, column] = total
        variance[out, column] = kriged
        lagrange[out, column] = multiplier
        slope[out, column] = (gain + abs(multiplier)) / (gain + 2.0 * abs(multiplier))
        efficiency[out, column] = gain / block_variance if block_variance > 0.0 else math.nan
        negative[out, column] = below_zero


@njit(cache=True, nogil=True, error_model="numpy")
def krige(
    worker, workers, samples, values, targets, found, reach, count, order, starts, sizes,
    shapes, sills, inverse, nugget, axes, offsets, block_variance, ordinary, means, thresholds, limit,
    rows, columns, estimate, variance, lagrange, slope, efficiency, negative, status, rooms,
):  # fmt: skip
    """Krige one worker's share of the targets whose samples have been found.

    Parameters
    ----------
    worker, workers : int, this worker and how many there are: each takes every so-manieth batch of eight runs
    samples : (3, n) float64, sample coordinates along the axes of the model, in metres
    values : (m, n) float64, values of the columns that share this model
    targets : (c, 3) float64, local coordinates in metres (not rotated)
    found, reach, count : what the search left, see ``search_samples``
    order : (q,) int64, targets to krige, those with the same samples next to each other
    starts, sizes : (g,) int64, runs of ``order`` that see the same samples; runs of like size are neighbours
    shapes, sills : (s,) of the structures; inverse : (s, 3) one over their ranges
    nugget : float
    axes : (3, 3) rows are the axes of the model
    offsets : (s, p, 3) discretisation points in units of the ranges; p = 0 for points
    block_variance : float, C(V, V), or the total sill for points
    ordinary : bool; False is simple kriging with ``means`` (m,)
    thresholds : (m,) values above count as the threshold where ``reach`` is beyond ``limit`` (m)
    rows : (c,) int64, output row of each target; columns : (m,) int64, output columns
    estimate ... status : (b, k) outputs
    rooms : (workers, w) float64 work space, w >= LANES * (s (s + 1) / 2 + 11 s + 16) for s samples
    """
    room = rooms[worker]
    points = offsets.shape[1]
    total_sill = nugget + sills.sum()
    widest = found.shape[1]
    step = LANES * widest
    matrix = room[: step * (widest + 1) // 2]
    rest = room[step * (widest + 1) // 2 :]
    at, inverse_pivot, ones = rest[: 3 * step], rest[3 * step : 4 * step], rest[4 * step : 5 * step]
    b, right, weights = rest[5 * step : 6 * step], rest[6 * step : 7 * step], rest[7 * step : 8 * step]
    scaled = rest[8 * step : 11 * step]
    rest = rest[11 * step :]
    where, pivots, closest = rest[: 3 * LANES], rest[3 * LANES : 4 * LANES], rest[4 * LANES : 5 * LANES]
    multiplier, explained = rest[5 * LANES : 6 * LANES], rest[6 * LANES : 7 * LANES]
    below_zero = rest[7 * LANES : 8 * LANES]
    for batch in range(worker, (starts.size + LANES - 1) // LANES, workers):
        first_run = batch * LANES
        runs = min(LANES, starts.size - first_run)
        n = np.int64(0)  # a bare 0 would compile every callee twice
        longest = 0
        for run in range(first_run, first_run + runs):
            n = max(n, count[order[starts[run]]])
            longest = max(longest, sizes[run])
        _set_samples(at, ones, n, samples, found, count, order, starts, first_run, runs)
        fill_matrix(at, n, shapes, sills, inverse, total_sill, scaled, matrix)
        store(pivots, 0, _factorise(matrix, n, inverse_pivot))
        bb = _forward(matrix, n, inverse_pivot, ones, b)
        for turn in range(longest):
            _set_places(where, axes, targets, order, starts, sizes, first_run, runs, turn)
            if points > 0:
                block_covariances(at, n, where, offsets, shapes, sills, inverse, right)
                store(closest, 0, splat(math.inf))
            else:
                store(closest, 0, point_covariances(at, n, where, shapes, sills, inverse, nugget, right))
            _solve(
                matrix, n, inverse_pivot, right, b, bb, ordinary, weights, multiplier, explained, below_zero
            )
            for lane in range(runs):
                if turn >= sizes[first_run + lane]:
                    continue
                row = order[starts[first_run + lane] + turn]
                if not pivots[lane] > SMALLEST_PIVOT * total_sill:
                    for c in range(columns.size):
                        status[rows[row], columns[c]] = SINGULAR
                    continue
                if closest[lane] <= SAME_PLACE:
                    _set_exact(at, where, lane, count[row], weights)
                    multiplier[lane] = 0.0
                    below_zero[lane] = 0.0
                    explained[lane] = block_variance
                _write(
                    values, found, reach, count[row], row, lane, weights, multiplier[lane], explained[lane],
                    below_zero[lane],
                    total_sill, block_variance, means, thresholds, limit, rows[row], columns, estimate,
                    variance, lagrange, slope, efficiency, negative, status,
                )  # fmt: skip
