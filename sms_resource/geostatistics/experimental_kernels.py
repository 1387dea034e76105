"""Loops over pairs of samples for experimental variograms: arrays in, sums per direction and lag out.

Samples come sorted by ``x``, so that the loop over partners stops where the difference in ``x`` alone passes
the last lag; ``x`` may be any of the three axes, as long as ``frames`` are given in the same order. Sums are
kept for a fixed number of groups of samples and added in the order of the groups, so that they do not depend
on the number of threads.
"""

# mypy: allow-untyped-defs

from __future__ import annotations

import numpy as np
from numba import njit, prange

# Columns of the sums.
PAIRS, WEIGHT, DISTANCE, VALUE, ALONG, SIDE, NORMAL, MEAN, SQUARE, PRODUCT = range(10)
COLUMNS = 10

# Codes of the measures.
SQUARED_DIFFERENCE, RELATIVE_DIFFERENCE, CORRELATION = range(3)


@njit(cache=True)
def find_lag(distance, edges, count):
    """Index of the lag with edges[k] < distance <= edges[k + 1]; -1 outside."""
    if distance <= edges[0] or distance > edges[count]:
        return -1
    low = 0
    high = count
    while high - low > 1:
        middle = (low + high) // 2
        if distance > edges[middle]:
            low = middle
        else:
            high = middle
    return low


@njit(cache=True)
def look(dx, dy, dz, distance, kind, frame, cosine, band_side, band_normal, slack):
    """Whether a pair belongs to a direction, and its absolute components along, beside and off the axis."""
    along = abs(dx * frame[0, 0] + dy * frame[0, 1] + dz * frame[0, 2])
    if kind == 1 and along < cosine * distance - slack:
        return False, along, 0.0, 0.0  # most pairs leave here
    side = abs(dx * frame[1, 0] + dy * frame[1, 1] + dz * frame[1, 2])
    normal = abs(dx * frame[2, 0] + dy * frame[2, 1] + dz * frame[2, 2])
    if kind == 1:
        return side <= band_side + slack and normal <= band_normal + slack, along, side, normal
    if kind == 2:
        inside = normal <= cosine * distance + slack and normal <= band_normal + slack
        return inside, np.sqrt(along * along + side * side), 0.0, normal
    return True, along, side, normal


@njit(cache=True)
def add_pair(row, weight, distance, along, side, normal, first, second, measure):
    """Add one pair to the sums of one lag."""
    row[PAIRS] += 1.0
    row[WEIGHT] += weight
    row[DISTANCE] += weight * distance
    row[ALONG] += weight * along
    row[SIDE] += weight * side
    row[NORMAL] += weight * normal
    if measure == SQUARED_DIFFERENCE:
        row[VALUE] += weight * (first - second) * (first - second)
    elif measure == RELATIVE_DIFFERENCE:
        part = 2.0 * (first - second) / (first + second)
        row[VALUE] += weight * part * part
    else:
        row[MEAN] += weight * 0.5 * (first + second)
        row[SQUARE] += weight * 0.5 * (first * first + second * second)
        row[PRODUCT] += weight * first * second


@njit(cache=True)
def holes_agree(mode, first, second):
    """Whether two holes are a pair for the mode: 0 any, 1 the same hole, 2 two holes."""
    return mode == 0 or (mode == 1 and first == second) or (mode == 2 and first != second)


@njit(cache=True)
def separation(x, y, z, i, j):
    """Components of the separation of two samples, and its square."""
    dx = x[j] - x[i]
    dy = y[j] - y[i]
    dz = z[j] - z[i]
    return dx, dy, dz, dx * dx + dy * dy + dz * dz


@njit(cache=True)
def add_partners(
    i, row, both, x, y, z, values, weights, holes, kinds, frames, cosines, bands, modes, edges, lags, reach,
    slack, measure, out,
):  # fmt: skip
    """Add the pairs of sample ``i`` with all later ones to ``out[row]``.

    With ``both`` a pair between two holes is added to the row of the partner's hole too. The other parameters are
    those of :func:`sum_pairs`.
    """
    for j in range(i + 1, x.shape[0]):
        dx, dy, dz, square = separation(x, y, z, i, j)
        if dx > reach:
            break
        if square > reach * reach or square == 0.0:
            continue
        distance = np.sqrt(square)
        for d in range(kinds.shape[0]):
            if not holes_agree(modes[d], holes[i], holes[j]):
                continue
            inside, along, side, normal = look(
                dx, dy, dz, distance, kinds[d], frames[d], cosines[d], bands[d, 0], bands[d, 1], slack
            )
            if not inside:
                continue
            lag = find_lag(distance, edges[d], lags[d])
            if lag < 0:
                continue
            weight, first, second = weights[i] * weights[j], values[i], values[j]
            add_pair(out[row, d, lag], weight, distance, along, side, normal, first, second, measure)
            if both and holes[i] != holes[j]:
                add_pair(out[holes[j], d, lag], weight, distance, along, side, normal, first, second, measure)


@njit(parallel=True, cache=True)
def sum_pairs(
    x, y, z, values, weights, holes, kinds, frames, cosines, bands, modes, edges, lags, reach, slack,
    measure, out,
):  # fmt: skip
    """Sums per group, direction and lag.

    Parameters
    ----------
    x, y, z, values, weights : (n,) float64
        Samples sorted by ``x``.
    holes : (n,) int64
        Number of the hole of each sample.
    kinds, cosines, modes, lags : (d,)
        Kind of the direction, its cosine (or sine for a plane), the mode of the holes, the number of lags.
    frames : (d, 3, 3), bands : (d, 2), edges : (d, k + 1)
        Axes, bandwidths beside and off the axis, edges of the lags.
    reach, slack : float
        Greatest edge; the rounding that is forgiven, in m.
    measure : int
        Code of what is summed.
    out : (groups, d, k, COLUMNS) float64
        Zeros on entry.
    """
    count = x.shape[0]
    groups = out.shape[0]
    for group in prange(groups):
        for i in range(group, count, groups):
            add_partners(
                i, group, False, x, y, z, values, weights, holes, kinds, frames, cosines, bands, modes, edges, lags,
                reach, slack, measure, out,
            )  # fmt: skip


@njit(cache=True)
def sum_pairs_by_hole(
    x, y, z, values, weights, holes, kinds, frames, cosines, bands, modes, edges, lags, reach, slack,
    measure, out,
):  # fmt: skip
    """Sums per hole, direction and lag of all pairs in which the hole has a part.

    As :func:`sum_pairs`, but ``out`` is (holes, d, k, COLUMNS) and a pair between two holes counts for both.
    """
    for i in range(x.shape[0]):
        add_partners(
            i, holes[i], True, x, y, z, values, weights, holes, kinds, frames, cosines, bands, modes, edges, lags,
            reach, slack, measure, out,
        )  # fmt: skip


@njit(cache=True)
def list_differences(
    x, y, z, values, holes, kind, frame, cosine, band, mode, edges, lags, reach, slack, starts, filled, out
):
    """Absolute differences of all pairs of one direction, lag after lag, for estimators that need each one.

    Parameters
    ----------
    starts : (k,) int64
        Where each lag begins in ``out``.
    filled : (k,) int64
        Zeros on entry; how many differences each lag holds on return.
    out : (pairs,) float64
    """
    count = x.shape[0]
    for i in range(count):
        for j in range(i + 1, count):
            dx, dy, dz, square = separation(x, y, z, i, j)
            if dx > reach:
                break
            if square > reach * reach or square == 0.0 or not holes_agree(mode, holes[i], holes[j]):
                continue
            distance = np.sqrt(square)
            inside, _, _, _ = look(dx, dy, dz, distance, kind, frame, cosine, band[0], band[1], slack)
            if not inside:
                continue
            lag = find_lag(distance, edges, lags)
            if lag >= 0:
                out[starts[lag] + filled[lag]] = abs(values[i] - values[j])
                filled[lag] += 1
