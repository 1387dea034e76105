"""The neighbourhood search: nearest first under limits by sector and by hole, for many blocks at once.

Blocks come in groups of neighbours. Samples are sorted once per group into shells round the centre of the
group; each block then walks outward through the shells and takes samples from a heap as soon as nothing
nearer can come. So the result is that of a full sort by distance over all samples in reach, at the price of
the few shells that matter.
"""

# mypy: allow-untyped-defs

from __future__ import annotations

import math

import numpy as np
from numba import njit, prange

GROUP = 64  # blocks that share one sorting of the samples
SHELLS = 96
ENOUGH, TOO_FEW_SAMPLES, TOO_FEW_HOLES = 0, 1, 2

# A key holds the squared distance in steps of 2^-40 of the squared radius above the number of the sample, so
# that equal distances are settled by the order of the samples and not by rounding.
_STEPS = float(1 << 40)
_INDEX_BITS = 22
_INDEX_MASK = (1 << _INDEX_BITS) - 1
MOST_SAMPLES = 1 << _INDEX_BITS
_EDGE = -1e-9  # a sample on the plane between two sectors belongs to the upper one


@njit(cache=True, error_model="numpy")
def _push(heap, size, key):
    """Put ``key`` on the heap of ``size`` keys; the new size."""
    place = size
    while place > 0:
        parent = (place - 1) >> 1
        if heap[parent] <= key:
            break
        heap[place] = heap[parent]
        place = parent
    heap[place] = key
    return size + 1


@njit(cache=True, error_model="numpy")
def _pop(heap, size):
    """Take the smallest key, ``heap[0]``, off the heap; the new size."""
    size -= 1
    key = heap[size]
    place = 0
    child = 1
    while child < size:
        if child + 1 < size and heap[child + 1] < heap[child]:
            child += 1
        if heap[child] >= key:
            break
        heap[place] = heap[child]
        place = child
        child = 2 * place + 1
    heap[place] = key
    return size


@njit(cache=True, error_model="numpy")
def _sort_into_shells(samples, centre, width, shell_of, starts, near):
    """Order the samples by shell round ``centre``; those beyond the last shell are left out.

    ``near`` (n,) receives sample numbers, ``starts`` (SHELLS + 1,) where each shell begins in it.
    """
    for shell in range(SHELLS + 1):
        starts[shell] = 0
    inverse = 1.0 / width
    for i in range(samples.shape[1]):
        dx = samples[0, i] - centre[0]
        dy = samples[1, i] - centre[1]
        dz = samples[2, i] - centre[2]
        distance = math.sqrt(dx * dx + dy * dy + dz * dz) * inverse
        shell = SHELLS
        if distance < SHELLS:
            shell = int(distance)
            starts[shell + 1] += 1
        shell_of[i] = shell
    for shell in range(SHELLS):
        starts[shell + 1] += starts[shell]
    for i in range(samples.shape[1]):
        shell = shell_of[i]
        if shell < SHELLS:
            near[starts[shell]] = i
            starts[shell] += 1
    for shell in range(SHELLS, 0, -1):
        starts[shell] = starts[shell - 1]
    starts[0] = 0


@njit(parallel=True, cache=True, error_model="numpy")
def search_samples(
    samples, plain, holes, targets, plain_targets, rows, skip_hole, skip_sample, limits, major, workers,
    found, reach, count, hole_count, nearest, status, room, keys,
):  # fmt: skip
    """Find the samples of each of ``rows`` of the targets.

    Parameters
    ----------
    samples : (3, n) float64, coordinates in the axes of the ellipsoid, in units of its radii
    plain : (3, n) float64, coordinates in metres
    holes : (n,) int32, number of the hole
    targets, plain_targets : (c, 3) float64, the same two for the targets
    rows : (r,) int64, the targets to search for, neighbours next to each other
    skip_hole, skip_sample : (c,) int32, hole and sample that the target must not see; -1 for none
    limits : (6,) int64: most samples, fewest samples, most per hole, fewest holes, sectors, most per sector
    major : float, length of the major radius in metres
    workers : int, number of threads
    found : (c, s) int32, receives sample numbers in rising order
    reach : (c, s) float64, receives their distance in the ellipsoid, in metres along its major axis
    count, hole_count : (c,) int32; nearest : (c,) float64 in metres; status : (c,) int8
    room : (workers, 3, max(n, SHELLS + 1)) int64, and keys (workers, n) int64: work space
    """
    most, fewest, per_hole, fewest_holes = limits[0], limits[1], limits[2], limits[3]
    sectors, per_sector = limits[4], limits[5]
    n = samples.shape[1]
    groups = (rows.size + GROUP - 1) // GROUP
    for worker in prange(workers):
        starts = room[worker, 0]
        near = room[worker, 1]
        shell_of = room[worker, 2]
        heap = keys[worker]
        taken = np.zeros(holes.max() + 1, np.int32)
        sector_of = np.empty(n, np.int8)
        in_sector = np.zeros(8, np.int64)
        centre = np.zeros(3)
        x, y, z = np.empty(n), np.empty(n), np.empty(n)
        hole_of = np.empty(n, np.int32)
        for group in range(worker, groups, workers):
            first = group * GROUP
            last = min(first + GROUP, rows.size)
            for axis in range(3):
                low, high = math.inf, -math.inf
                for r in range(first, last):
                    low = min(low, targets[rows[r], axis])
                    high = max(high, targets[rows[r], axis])
                centre[axis] = 0.5 * (low + high)
            widest = 0.0
            for r in range(first, last):
                row = rows[r]
                away = (targets[row, 0] - centre[0]) ** 2
                away += (targets[row, 1] - centre[1]) ** 2
                away += (targets[row, 2] - centre[2]) ** 2
                widest = max(widest, away)
            width = (1.0 + math.sqrt(widest)) * (1.0 + 1e-9) / SHELLS
            _sort_into_shells(samples, centre, width, shell_of, starts, near)
            for t in range(starts[SHELLS]):
                i = near[t]
                x[t], y[t], z[t] = samples[0, i], samples[1, i], samples[2, i]
                hole_of[t] = holes[i]

            for r in range(first, last):
                row = rows[r]
                tx, ty, tz = targets[row, 0], targets[row, 1], targets[row, 2]
                offset = math.sqrt((tx - centre[0]) ** 2 + (ty - centre[1]) ** 2 + (tz - centre[2]) ** 2)
                for sector in range(8):
                    in_sector[sector] = 0
                total = 0
                full = 0
                size = 0
                for shell in range(SHELLS):
                    for t in range(starts[shell], starts[shell + 1]):
                        dx = x[t] - tx
                        dy = y[t] - ty
                        dz = z[t] - tz
                        squared = dx * dx + dy * dy + dz * dz
                        if squared > 1.0 + 1e-12:
                            continue
                        sector = 0
                        if sectors > 1:
                            sector = int(dx > _EDGE) + 2 * int(dy > _EDGE)
                            if sectors > 4:
                                sector += 4 * int(dz > _EDGE)
                        if in_sector[sector] >= per_sector:
                            continue
                        hole = hole_of[t]
                        if taken[hole] >= per_hole or hole == skip_hole[row]:
                            continue
                        i = near[t]
                        if i == skip_sample[row]:
                            continue
                        sector_of[i] = sector
                        size = _push(heap, size, (int(squared * _STEPS + 0.5) << _INDEX_BITS) | i)
                    # What lies in later shells is at least this far from the block.
                    bound = (shell + 1) * width - offset
                    safe = np.int64(0)
                    if shell == SHELLS - 1:
                        safe = np.int64(1) << 62
                    elif bound > 0.0:
                        safe = np.int64(max(bound * bound * _STEPS - 4.0, 0.0)) << _INDEX_BITS
                    while size > 0 and heap[0] < safe:
                        i = heap[0] & _INDEX_MASK
                        size = _pop(heap, size)
                        sector = sector_of[i]
                        hole = holes[i]
                        if in_sector[sector] >= per_sector or taken[hole] >= per_hole:
                            continue
                        in_sector[sector] += 1
                        taken[hole] += 1
                        if in_sector[sector] == per_sector:
                            full += 1
                        place = total
                        while place > 0 and found[row, place - 1] > i:
                            found[row, place] = found[row, place - 1]
                            place -= 1
                        found[row, place] = i
                        total += 1
                        if total == most or full == sectors:
                            break
                    if total == most or full == sectors:
                        break
                holes_seen = 0
                closest = math.inf
                for s in range(total):
                    i = found[row, s]
                    if taken[holes[i]] > 0:
                        holes_seen += 1
                        taken[holes[i]] = 0
                    squared = (samples[0, i] - tx) ** 2
                    squared += (samples[1, i] - ty) ** 2
                    squared += (samples[2, i] - tz) ** 2
                    reach[row, s] = math.sqrt(squared) * major
                    squared = (plain[0, i] - plain_targets[row, 0]) ** 2
                    squared += (plain[1, i] - plain_targets[row, 1]) ** 2
                    squared += (plain[2, i] - plain_targets[row, 2]) ** 2
                    closest = min(closest, squared)
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
