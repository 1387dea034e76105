"""Companion estimates from the samples that the search found."""

# mypy: allow-untyped-defs

from __future__ import annotations

import math

from numba import njit

_SAME_PLACE = 1e-12  # squared metres, see model.COINCIDENT_M


@njit(cache=True, nogil=True, error_model="numpy")
def companions(
    worker, workers, values, scaled, plain, targets, scaled_targets, offsets, scaled_offsets, found, reach,
    count, status, power, rows, columns, nearest, average, inverse_distance,
):  # fmt: skip
    """Nearest sample, plain mean and inverse distance for one worker's share of the targets.

    Parameters
    ----------
    worker, workers : int, this worker and how many there are
    values : (m, n) float64
    scaled, plain : (3, n) float64, samples in the axes of the ellipsoid in units of its radii, and in metres
    targets, scaled_targets : (c, 3) float64, the same for the targets
    offsets, scaled_offsets : (p, 3) float64, discretisation points relative to the centre of a block
    found, reach, count, status : what the search left, see ``search_samples``
    power : float, of the inverse distance
    rows : (c,) int64; columns : (m,) int64, where results go
    nearest, average, inverse_distance : (b, k) float64 outputs
    """
    for target in range(worker, count.size, workers):
        if status[target] != 0:
            continue
        out = rows[target]
        best = 0
        for s in range(1, count[target]):
            if reach[target, s] < reach[target, best] * (1.0 - 1e-12):
                best = s
        for c in range(columns.size):
            total = 0.0
            for s in range(count[target]):
                total += values[c, found[target, s]]
            average[out, columns[c]] = total / count[target]
            nearest[out, columns[c]] = values[c, found[target, best]]
            inverse_distance[out, columns[c]] = 0.0
        for p in range(offsets.shape[0]):
            here = -1
            weight_sum = 0.0
            for s in range(count[target]):
                i = found[target, s]
                apart = 0.0
                squared = 0.0
                for axis in range(3):
                    apart += (plain[axis, i] - targets[target, axis] - offsets[p, axis]) ** 2
                    squared += (scaled[axis, i] - scaled_targets[target, axis] - scaled_offsets[p, axis]) ** 2
                if apart <= _SAME_PLACE:
                    here = i
                    break
                weight_sum += 1.0 / squared if power == 2.0 else math.exp(-0.5 * power * math.log(squared))
            for c in range(columns.size):
                column = columns[c]
                if here >= 0:
                    inverse_distance[out, column] += values[c, here] / offsets.shape[0]
                    continue
                total = 0.0
                for s in range(count[target]):
                    i = found[target, s]
                    squared = 0.0
                    for axis in range(3):
                        squared += (
                            scaled[axis, i] - scaled_targets[target, axis] - scaled_offsets[p, axis]
                        ) ** 2
                    weight = 1.0 / squared if power == 2.0 else math.exp(-0.5 * power * math.log(squared))
                    total += weight * values[c, i]
                inverse_distance[out, column] += total / weight_sum / offsets.shape[0]
