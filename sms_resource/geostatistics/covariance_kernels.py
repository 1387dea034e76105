"""Covariances between samples and blocks, eight blocks side by side.

Coordinates are components along the axes of the model, in metres. A point of a pack stands in three packs:
its x, y and z for each of the eight lanes.
"""

# mypy: allow-untyped-defs

from __future__ import annotations

import math

from numba import njit

from .lane_kernels import LANES, add, exponential, fma, fnma, load, mul, root, splat, store, sub, where_less

SPHERICAL, EXPONENTIAL, GAUSSIAN = 0, 1, 2
SAME_PLACE = 1e-12  # squared metres, see model.COINCIDENT_M


@njit(cache=True, error_model="numpy")
def _covariance(shape, sill, squared):
    """Covariance of one structure from the squared distance in units of its range."""
    if shape == SPHERICAL:
        h = root(squared)
        h = where_less(h, splat(1.0), h, splat(1.0))
        return mul(splat(sill), fnma(h, fnma(mul(h, h), splat(0.5), splat(1.5)), splat(1.0)))
    reduced = root(squared) if shape == EXPONENTIAL else squared
    return mul(splat(sill), exponential(mul(reduced, splat(-3.0))))


@njit(cache=True, error_model="numpy")
def _add_structure(at, n, shape, sill, inverse, first, scaled, matrix):
    """Add one structure to the lower triangle of K, or write it where it is the ``first``."""
    for i in range(n):
        for axis in range(3):
            place = (3 * i + axis) * LANES
            store(scaled, place, mul(load(at, place), splat(inverse[axis])))
    weight = splat(sill)
    for i in range(n):
        row = (i * (i + 1) // 2) * LANES
        x = load(scaled, (3 * i) * LANES)
        y = load(scaled, (3 * i + 1) * LANES)
        z = load(scaled, (3 * i + 2) * LANES)
        for j in range(i):
            u = sub(x, load(scaled, (3 * j) * LANES))
            v = sub(y, load(scaled, (3 * j + 1) * LANES))
            w = sub(z, load(scaled, (3 * j + 2) * LANES))
            squared = fma(u, u, fma(v, v, mul(w, w)))
            if shape == SPHERICAL:
                h = root(squared)
                h = where_less(h, splat(1.0), h, splat(1.0))
                value = fnma(h, fnma(mul(h, h), splat(0.5), splat(1.5)), splat(1.0))
            else:
                reduced = root(squared) if shape == EXPONENTIAL else squared
                value = exponential(mul(reduced, splat(-3.0)))
            place = row + j * LANES
            so_far = splat(0.0) if first else load(matrix, place)
            store(matrix, place, fma(weight, value, so_far))


@njit(cache=True, error_model="numpy")
def fill_matrix(at, n, shapes, sills, inverse, total_sill, scaled, matrix):
    """Lower triangle of K, row by row: element (i, j) stands at (i (i + 1) / 2 + j) packs.

    ``at`` holds the samples, ``scaled`` (3 n packs) is work space.
    """
    for s in range(shapes.size):
        _add_structure(at, n, shapes[s], sills[s], inverse[s], s == 0, scaled, matrix)
    for i in range(n):
        row = (i * (i + 1) // 2) * LANES
        if shapes.size == 0:
            for j in range(i):
                store(matrix, row + j * LANES, splat(0.0))
        store(matrix, row + i * LANES, splat(total_sill))


@njit(cache=True, error_model="numpy")
def block_covariances(at, n, where, offsets, shapes, sills, inverse, out):
    """k for blocks: the mean over the discretisation points, without the nugget.

    ``offsets`` (s, p, 3) holds the points relative to the centre, in the axes of the model and in units of
    the ranges of each structure.
    """
    tx, ty, tz = load(where, 0), load(where, LANES), load(where, 2 * LANES)
    points = offsets.shape[1]
    for i in range(n):
        dx = sub(load(at, (3 * i) * LANES), tx)
        dy = sub(load(at, (3 * i + 1) * LANES), ty)
        dz = sub(load(at, (3 * i + 2) * LANES), tz)
        value = splat(0.0)
        for s in range(shapes.size):
            ux = mul(dx, splat(inverse[s, 0]))
            uy = mul(dy, splat(inverse[s, 1]))
            uz = mul(dz, splat(inverse[s, 2]))
            part = splat(0.0)
            if shapes[s] == SPHERICAL:
                for p in range(points):
                    u = sub(ux, splat(offsets[s, p, 0]))
                    v = sub(uy, splat(offsets[s, p, 1]))
                    w = sub(uz, splat(offsets[s, p, 2]))
                    h = root(fma(u, u, fma(v, v, mul(w, w))))
                    h = where_less(h, splat(1.0), h, splat(1.0))
                    # 1 - h (1.5 - 0.5 h^2); the 1 is added once at the end
                    part = fma(h, fnma(mul(h, h), splat(0.5), splat(1.5)), part)
                part = mul(sub(splat(float(points)), part), splat(sills[s]))
            else:
                for p in range(points):
                    u = sub(ux, splat(offsets[s, p, 0]))
                    v = sub(uy, splat(offsets[s, p, 1]))
                    w = sub(uz, splat(offsets[s, p, 2]))
                    squared = fma(u, u, fma(v, v, mul(w, w)))
                    part = add(part, _covariance(shapes[s], sills[s], squared))
            value = add(value, part)
        store(out, i * LANES, mul(value, splat(1.0 / points)))


@njit(cache=True, error_model="numpy")
def point_covariances(at, n, where, shapes, sills, inverse, nugget, out):
    """k for points, with the nugget at zero distance; the smallest squared distance in square metres."""
    tx, ty, tz = load(where, 0), load(where, LANES), load(where, 2 * LANES)
    nearest = splat(math.inf)
    for i in range(n):
        dx = sub(load(at, (3 * i) * LANES), tx)
        dy = sub(load(at, (3 * i + 1) * LANES), ty)
        dz = sub(load(at, (3 * i + 2) * LANES), tz)
        plain = fma(dx, dx, fma(dy, dy, mul(dz, dz)))
        nearest = where_less(plain, nearest, plain, nearest)
        value = where_less(splat(SAME_PLACE), plain, splat(0.0), splat(nugget))
        for s in range(shapes.size):
            u = mul(dx, splat(inverse[s, 0]))
            v = mul(dy, splat(inverse[s, 1]))
            w = mul(dz, splat(inverse[s, 2]))
            squared = fma(u, u, fma(v, v, mul(w, w)))
            value = add(value, _covariance(shapes[s], sills[s], squared))
        store(out, i * LANES, value)
    return nearest


@njit(cache=True, nogil=True, error_model="numpy")
def covariances_to_targets(
    worker, workers, samples, targets, shapes, sills, inverse, nugget, axes, offsets, out, rooms
):
    """k between all samples and one worker's share of the targets, for the estimate from all samples.

    ``out`` (c, n) receives the covariances; ``rooms`` (workers, LANES * (4 n + 3)) is work space. The rest as in
    ``krige``.
    """
    n = samples.shape[1]
    points = offsets.shape[1]
    batches = (targets.shape[0] + LANES - 1) // LANES
    room = rooms[worker]
    at = room[: 3 * n * LANES]
    right = room[3 * n * LANES : 4 * n * LANES]
    where = room[4 * n * LANES :]
    for i in range(n):
        for axis in range(3):
            store(at, (3 * i + axis) * LANES, splat(samples[axis, i]))
    for batch in range(worker, batches, workers):
        first = batch * LANES
        lanes = min(LANES, targets.shape[0] - first)
        for lane in range(LANES):
            row = first + min(lane, lanes - 1)
            for axis in range(3):
                where[axis * LANES + lane] = (
                    axes[axis, 0] * targets[row, 0]
                    + axes[axis, 1] * targets[row, 1]
                    + axes[axis, 2] * targets[row, 2]
                )
        if points > 0:
            block_covariances(at, n, where, offsets, shapes, sills, inverse, right)
        else:
            point_covariances(at, n, where, shapes, sills, inverse, nugget, right)
        for lane in range(lanes):
            for i in range(n):
                out[first + lane, i] = right[i * LANES + lane]
