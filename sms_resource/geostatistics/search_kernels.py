"""The neighbourhood search: nearest first under limits by sector and by hole, for many blocks at once.

Blocks come in groups of neighbours. For each group the samples that no block of it can take are dropped (see
``candidates``), and the rest are sorted into shells round the centre of a few blocks. Each block then walks
outward through the shells, keeps what it meets in a short sorted queue, and takes samples from its front as
soon as nothing nearer can come. So the result is that of a full sort by distance over all samples in reach,
at the price of the few samples that matter.
"""

# mypy: allow-untyped-defs

from __future__ import annotations

import math

import numpy as np
from numba import njit

from .candidate_kernels import CELLS, EDGE, SHELLS, bounding_box, candidates, narrowed, sort_into_cells

GROUP = 64  # blocks that share one choice of candidates
PARTY = 8  # blocks of a group that share one order of its samples
BINS = 63  # of a histogram of distances; one more for samples out of reach
_SEARCHED = 512  # candidates up to which a histogram beats shells
_NARROW = 64  # candidates from which on a smaller box is worth a look
_WIDE = 0.35  # half diagonal, in radii, beyond which they do not
ENOUGH, TOO_FEW_SAMPLES, TOO_FEW_HOLES = 0, 1, 2

# A key holds the squared distance in steps of 2^-40 of the squared radius above the number of the sample, so
# that equal distances are settled by the order of the samples and not by rounding.
_STEPS = float(1 << 40)
_INDEX_BITS = 22
_INDEX_MASK = (1 << _INDEX_BITS) - 1
MOST_SAMPLES = 1 << _INDEX_BITS
_REACH = (1 << 40) + 1  # of the squared radius in steps, with room for rounding
_BEYOND = (1 << 63) - 1  # later than any key


@njit(cache=True, error_model="numpy")
def _report(
    samples, plain, holes, tx, ty, tz, plain_targets, row, total, fewest, fewest_holes, major,
    taken, found, reach, count, hole_count, nearest, status,
):  # fmt: skip
    """Write what was found for one target, and clear ``taken`` for the next."""
    holes_seen = 0
    closest = math.inf
    for s in range(total):
        i = found[row, s]
        if taken[holes[i]] > 0:
            holes_seen += 1
            taken[holes[i]] = 0
        dx, dy, dz = samples[0, i] - tx, samples[1, i] - ty, samples[2, i] - tz
        reach[row, s] = math.sqrt(dx * dx + dy * dy + dz * dz) * major
        dx = plain[0, i] - plain_targets[row, 0]
        dy = plain[1, i] - plain_targets[row, 1]
        dz = plain[2, i] - plain_targets[row, 2]
        closest = min(closest, dx * dx + dy * dy + dz * dz)
    count[row] = total
    hole_count[row] = holes_seen
    nearest[row] = math.sqrt(closest) if total > 0 else math.nan
    if total < fewest:
        status[row] = TOO_FEW_SAMPLES
    elif holes_seen < fewest_holes:
        status[row] = TOO_FEW_HOLES
    else:
        status[row] = ENOUGH


@njit(cache=True, error_model="numpy")
def _take_nearest(
    x, y, z, number, near, holes, tx, ty, tz, skip_hole, skip_sample, most, limit, keys, bin_of, bins, taken, found
):  # fmt: skip
    """Take the nearest samples where no sector and no hole refuses one; how many there are.

    A histogram of squared distances, up to about ``limit``, tells in which bin the last sample to take lies; all
    in nearer bins are taken, and only in that bin are samples compared with each other. ``near`` holds sample
    numbers in rising order, and so does ``found`` after.
    """
    scale = BINS / limit / _STEPS
    for t in range(number):
        dx = x[t] - tx
        dy = y[t] - ty
        dz = z[t] - tz
        steps = np.int64(min(dx * dx + dy * dy + dz * dz, 1.5) * _STEPS + 0.5)
        bin_of[t] = np.int64(min(steps * scale, BINS - 1.0)) if steps <= _REACH else BINS
        keys[t] = (steps << _INDEX_BITS) | near[t]
    if skip_hole >= 0 or skip_sample >= 0:
        for t in range(number):
            if holes[near[t]] == skip_hole or near[t] == skip_sample:
                bin_of[t] = BINS
    bins[:] = 0
    for t in range(number):
        bins[bin_of[t]] += 1
    last = 0
    before = 0
    while last < BINS and before + bins[last] <= most:
        before += bins[last]
        last += 1
    # All before ``last`` are taken; of bin ``last`` the nearest of those that are left.
    total = 0
    for t in range(number):
        if bin_of[t] > last or bin_of[t] == BINS:
            continue
        if bin_of[t] == last:
            nearer = before
            for other in range(number):
                nearer += int(bin_of[other] == last and keys[other] < keys[t])
            if nearer >= most:
                continue
        found[total] = near[t]
        taken[holes[near[t]]] = 1
        total += 1
    return total


@njit(cache=True, error_model="numpy")
def _take_in_turn(
    x, y, z, near, holes, hole_of, tx, ty, tz, skip_hole, skip_sample, limits, starts, width, offset, queue,
    sector_of, in_sector, taken, found,
):  # fmt: skip
    """Take samples nearest first, each unless its sector or its hole is full; how many there are.

    ``offset`` is the distance of the block from the centre of the shells; the rest as in ``search_samples``.
    """
    most, per_hole, sectors, per_sector = limits[0], limits[2], limits[4], limits[5]
    cells = 1 if sectors == 1 else CELLS
    nothing_refused = sectors == 1 and per_hole > holes.size
    in_sector[:] = 0
    total = 0
    full = 0
    front = 0
    back = 0
    for shell in range(SHELLS):
        for fixed in range(cells):
            cell = shell * CELLS + fixed
            if fixed < CELLS - 1 and in_sector[fixed] >= per_sector:
                continue
            for t in range(starts[cell], starts[cell + 1]):
                dx = x[t] - tx
                dy = y[t] - ty
                dz = z[t] - tz
                squared = dx * dx + dy * dy + dz * dz
                hole = hole_of[t]
                if squared > 1.0 + 1e-12 or taken[hole] >= per_hole:
                    continue
                sector = fixed
                if fixed == CELLS - 1:
                    sector = int(dx > EDGE) + 2 * int(dy > EDGE)
                    if sectors > 4:
                        sector += 4 * int(dz > EDGE)
                    if in_sector[sector] >= per_sector:
                        continue
                i = near[t]
                if hole == skip_hole or i == skip_sample:
                    continue
                key = (np.int64(squared * _STEPS + 0.5) << _INDEX_BITS) | i
                if nothing_refused and back - front == most - total:
                    if key > queue[back - 1]:
                        continue
                    back -= 1
                sector_of[i] = sector
                place = back
                while place > front and queue[place - 1] > key:
                    queue[place] = queue[place - 1]
                    place -= 1
                queue[place] = key
                back += 1
        if front == back:
            continue
        # What lies in later shells is at least this far from the block.
        bound = (shell + 1) * width - offset
        safe = np.int64(0)
        if shell == SHELLS - 1:
            safe = np.int64(_BEYOND)
        elif bound > 0.0:
            safe = np.int64(max(bound * bound * _STEPS - 4.0, 0.0)) << _INDEX_BITS
        while front < back and queue[front] < safe:
            i = queue[front] & _INDEX_MASK
            front += 1
            sector = sector_of[i]
            hole = holes[i]
            if in_sector[sector] >= per_sector or taken[hole] >= per_hole:
                continue
            in_sector[sector] += 1
            taken[hole] += 1
            if in_sector[sector] == per_sector:
                full += 1
            place = total
            while place > 0 and found[place - 1] > i:
                found[place] = found[place - 1]
                place -= 1
            found[place] = i
            total += 1
            if total == most or full == sectors:
                break
        if total == most or full == sectors:
            break
    return total


@njit(cache=True, nogil=True, error_model="numpy")
def search_samples(
    worker, workers, samples, plain, holes, grouped, by_hole, targets, plain_targets, rows, skip_hole,
    skip_sample, prune, limits, major, found, reach, count, hole_count, nearest, status, wholes, reals,
):  # fmt: skip
    """Find the samples of one worker's share of ``rows`` of the targets.

    Parameters
    ----------
    worker, workers : int, this worker and how many there are: each takes every so-manieth group
    samples : (3, n) float64, coordinates in the axes of the ellipsoid, in units of its radii
    plain : (3, n) float64, coordinates in metres
    holes : (n,) int32, number of the hole
    by_hole : (n,) int64, samples ordered by hole, or in their own order where holes have no limit
    grouped : (3, n) float64, ``samples`` in that order
    targets, plain_targets : (c, 3) float64, the same two for the targets
    rows : (r,) int64, the targets to search for, neighbours next to each other
    skip_hole, skip_sample : (c,) int32, hole and sample that the target must not see; -1 for none
    prune : bool, whether hopeless samples may be dropped by group; False where targets skip samples
    limits : (6,) int64: most samples, fewest samples, most per hole, fewest holes, sectors, most per sector;
        the limits by hole and by sector at most n + 1
    major : float, length of the major radius in metres
    found : (c, s) int32, receives sample numbers in rising order
    reach : (c, s) float64, receives their distance in the ellipsoid, in metres along its major axis
    count, hole_count : (c,) int32; nearest : (c,) float64 in metres; status : (c,) int8
    wholes : (workers, w) int64, w >= 6 n + holes + CELLS * SHELLS + 1, and reals : (workers, 28, n + 2) float64:
        work space
    """
    whole, real = wholes[worker], reals[worker]
    most, fewest, per_hole, fewest_holes = limits[0], limits[1], limits[2], limits[3]
    sectors = limits[4]
    n = samples.shape[1]
    groups = (rows.size + GROUP - 1) // GROUP
    kept = whole[:n]
    near = whole[n : 2 * n]
    queue = whole[2 * n : 3 * n]
    sector_of = whole[3 * n : 4 * n]
    hole_of = whole[4 * n : 5 * n]
    closest = whole[5 * n : 6 * n]
    starts = whole[6 * n : 6 * n + CELLS * SHELLS + 1]
    taken = whole[6 * n + CELLS * SHELLS + 1 :]
    taken[:] = 0
    lowest, highest, best = real[0], real[1], real[2:19]
    packed, fewer, places = real[19:22], real[22:25], real[25:28]
    x, y, z = places[0], places[1], places[2]
    in_sector, in_both = np.zeros(8, np.int64), np.zeros(8, np.int64)
    centre, half = np.zeros(3), np.zeros(3)
    width = 0.0
    left = np.int64(0)
    nothing_refused = sectors == 1 and per_hole > n
    for group in range(worker, groups, workers):
        group_first = group * GROUP
        group_last = min(group_first + GROUP, rows.size)
        bounding_box(targets, rows, group_first, group_last, centre, half)
        number = candidates(
            samples, holes, grouped, by_hole, centre, half, limits, prune, kept, lowest, highest, best,
            in_sector, in_both,
        )  # fmt: skip
        for t in range(number):
            i = kept[t]
            packed[0, t], packed[1, t], packed[2, t] = samples[0, i], samples[1, i], samples[2, i]
        party_end = group_first
        by_histogram = False
        limit = 1.0
        for r in range(group_first, group_last):
            if r == party_end:
                party_end = min(r + PARTY, group_last)
                bounding_box(targets, rows, r, party_end, centre, half)
                if half[0] ** 2 + half[1] ** 2 + half[2] ** 2 > _WIDE**2:
                    party_end = r + 1  # too far apart for one order of the samples
                    bounding_box(targets, rows, r, party_end, centre, half)
                source, listed, left = packed, kept, number
                limit = 1.0
                if nothing_refused and prune and most <= _SEARCHED and number > _NARROW:
                    left, limit = narrowed(
                        packed, kept, number, centre, half, most, fewer, closest, lowest, best[0]
                    )
                    source, listed = fewer, closest
                by_histogram = nothing_refused and left <= _SEARCHED
                if by_histogram:
                    for t in range(left):
                        near[t] = listed[t]
                        x[t], y[t], z[t] = source[0, t], source[1, t], source[2, t]
                else:
                    width = sort_into_cells(
                        source, listed, left, centre, half, sectors, places, near, starts, sector_of, highest
                    )
                    for t in range(left):
                        hole_of[t] = holes[near[t]]
            row = rows[r]
            tx, ty, tz = targets[row, 0], targets[row, 1], targets[row, 2]
            if by_histogram:
                total = _take_nearest(
                    x, y, z, left, near, holes, tx, ty, tz, skip_hole[row], skip_sample[row], most, limit,
                    queue, sector_of, starts, taken, found[row],
                )  # fmt: skip
            else:
                offset = math.sqrt((tx - centre[0]) ** 2 + (ty - centre[1]) ** 2 + (tz - centre[2]) ** 2)
                total = _take_in_turn(
                    x, y, z, near, holes, hole_of, tx, ty, tz, skip_hole[row], skip_sample[row], limits, starts,
                    width, offset, queue, sector_of, in_sector, taken, found[row],
                )  # fmt: skip
            _report(
                samples, plain, holes, tx, ty, tz, plain_targets, row, total, fewest, fewest_holes, major,
                taken, found, reach, count, hole_count, nearest, status,
            )  # fmt: skip


@njit(cache=True, error_model="numpy")
def hash_sets(found, count, status, hashes):
    """A number for the set of samples of each target; 0 where there is no estimate to make."""
    for row in range(count.size):
        value = np.uint64(14695981039346656037)  # FNV-1a
        if status[row] != ENOUGH:
            hashes[row] = np.uint64(0)
            continue
        for s in range(count[row]):
            value = (value ^ np.uint64(found[row, s] + 1)) * np.uint64(1099511628211)
        hashes[row] = value | np.uint64(1)


@njit(cache=True, error_model="numpy")
def mark_new_sets(found, count, order, is_new):
    """Mark each target of ``order`` whose set of samples differs from that of the one before it."""
    for place in range(order.size):
        row = order[place]
        differs = place == 0
        if not differs:
            before = order[place - 1]
            differs = count[row] != count[before]
            s = 0
            while not differs and s < count[row]:
                differs = found[row, s] != found[before, s]
                s += 1
        is_new[place] = differs
