"""Which samples a group of neighbouring blocks may take at all, and their order round the group."""

# mypy: allow-untyped-defs

from __future__ import annotations

import math

import numpy as np
from numba import njit

SHELLS = 24
CELLS = 9  # of a shell: eight sectors, and one for samples between sectors
EDGE = -1e-9  # a sample on the plane between two sectors belongs to the upper one


@njit(cache=True, error_model="numpy")
def _keep_smallest(best, filled, most, value):
    """Put ``value`` among the ``most`` smallest numbers in ``best``, sorted; how many there are now."""
    if filled == most:
        if value >= best[most - 1]:
            return filled
        filled -= 1
    place = filled
    while place > 0 and best[place - 1] > value:
        best[place] = best[place - 1]
        place -= 1
    best[place] = value
    return filled + 1


@njit(cache=True, error_model="numpy")
def _sector_bits(dx, dy, dz, half, sectors):
    """Sector of a sample for every block of a box, and the bits of it that differ between the blocks."""
    sector = 0
    open_bits = 0
    if sectors > 1:
        sector = int(dx > EDGE) + 2 * int(dy > EDGE)
        open_bits = int(abs(dx) <= half[0] + 1e-8) + 2 * int(abs(dy) <= half[1] + 1e-8)
        if sectors > 4:
            sector += 4 * int(dz > EDGE)
            open_bits += 4 * int(abs(dz) <= half[2] + 1e-8)
    return sector, open_bits


@njit(cache=True, error_model="numpy")
def candidates(
    samples, holes, grouped, by_hole, centre, half, limits, prune, kept, lowest, highest, best, in_sector, in_both
):  # fmt: skip
    """Samples that some block of a box may take; their number.

    A sample is out of reach of the box, or it is hopeless in one of two ways. Let a hole give at most p samples
    and a sector at most q. (1) In one hole and one sector only the min(p, q) nearest can be taken: each of
    them is taken, or the hole or the sector was full before. (2) A sample that is among the p nearest of its
    hole is never refused for its hole, so it is taken unless its sector is full; hence beyond the q-th such
    sample a sector is full. Both are used with the least and the greatest distance to any block of the box,
    for samples that lie in the same sector for all of its blocks.

    Parameters
    ----------
    samples : (3, n), in units of the radii; holes : (n,)
    by_hole : (n,) samples ordered by their hole; grouped : (3, n) their coordinates in that order
    centre, half : (3,) centre and half sides of the box
    limits : (6,), see ``search_samples``
    prune : bool; False keeps all samples in reach
    kept : (n,) int64, receives the samples
    lowest, highest : (n,) float64 work space: squared least and greatest distance of what is kept
    best : (17, n + 2) float64, in_sector, in_both : (8,) int64: work space
    """
    for place in range(grouped.shape[1]):
        x = max(abs(grouped[0, place] - centre[0]) - half[0], 0.0)
        y = max(abs(grouped[1, place] - centre[1]) - half[1], 0.0)
        z = max(abs(grouped[2, place] - centre[2]) - half[2], 0.0)
        lowest[place] = x * x + y * y + z * z
    number = 0
    for place in range(grouped.shape[1]):
        if lowest[place] <= 1.0 + 1e-9:
            x = abs(grouped[0, place] - centre[0]) + half[0]
            y = abs(grouped[1, place] - centre[1]) + half[1]
            z = abs(grouped[2, place] - centre[2]) + half[2]
            kept[number] = by_hole[place]
            lowest[number] = lowest[place] - 1e-9
            highest[number] = x * x + y * y + z * z + 1e-9
            number += 1
    if not prune:
        return number

    per_hole, sectors, per_sector = limits[2], limits[4], limits[5]
    per_both = min(per_hole, per_sector)
    in_sector[:] = 0
    first = 0
    remaining = 0
    while first < number:
        # without a limit by hole all samples may pass as one hole
        last = first + 1 if per_hole < holes.size else number
        while last < number and holes[kept[last]] == holes[kept[first]]:
            last += 1
        # the distance from which on a sample might not be among the nearest of its hole
        strong = math.inf
        if last - first > per_hole:
            filled = np.int64(0)
            for place in range(first, last):
                filled = _keep_smallest(best[16], filled, per_hole + 1, lowest[place])
            strong = best[16, per_hole]
        in_both[:] = 0
        for place in range(first, last):
            i = kept[place]
            sector, open_bits = _sector_bits(
                samples[0, i] - centre[0], samples[1, i] - centre[1], samples[2, i] - centre[2], half, sectors
            )
            if open_bits == 0:
                high = highest[place]
                if high < strong:
                    in_sector[sector] = _keep_smallest(best[sector], in_sector[sector], per_sector, high)
                if last - first > per_both:
                    in_both[sector] = _keep_smallest(best[8 + sector], in_both[sector], per_both, high)
        for place in range(first, last):
            i = kept[place]
            low = lowest[place]
            if last - first > per_both:
                sector, open_bits = _sector_bits(
                    samples[0, i] - centre[0],
                    samples[1, i] - centre[1],
                    samples[2, i] - centre[2],
                    half,
                    sectors,
                )
                if open_bits == 0 and in_both[sector] == per_both and low > best[8 + sector, per_both - 1]:
                    continue
            kept[remaining] = i
            lowest[remaining] = low
            remaining += 1
        first = last

    number = remaining
    remaining = 0
    for place in range(number):
        i = kept[place]
        sector, open_bits = _sector_bits(
            samples[0, i] - centre[0], samples[1, i] - centre[1], samples[2, i] - centre[2], half, sectors
        )
        hopeless = True
        for other in range(sectors):
            possible = (other ^ sector) & ~open_bits == 0
            if possible and (in_sector[other] < per_sector or lowest[place] <= best[other, per_sector - 1]):
                hopeless = False
                break
        if not hopeless:
            kept[remaining] = i
            remaining += 1
    return remaining


@njit(cache=True, error_model="numpy")
def narrowed(source, list_in, number, centre, half, most, out, list_out, lowest, best):
    """Candidates of a smaller box where no sector and no hole refuses a sample; their number and reach.

    Whatever is farther than the greatest distance of the ``most`` nearest is hopeless. ``source`` (3, n) holds
    coordinates and ``list_in`` (n,) sample numbers; ``out`` and ``list_out`` receive what is left of them, in
    its order. ``lowest`` (n,) and ``best`` (n,) are work space.
    """
    filled = np.int64(0)
    for t in range(number):
        dx = abs(source[0, t] - centre[0])
        dy = abs(source[1, t] - centre[1])
        dz = abs(source[2, t] - centre[2])
        x, y, z = max(dx - half[0], 0.0), max(dy - half[1], 0.0), max(dz - half[2], 0.0)
        lowest[t] = x * x + y * y + z * z - 1e-9
        x, y, z = dx + half[0], dy + half[1], dz + half[2]
        filled = _keep_smallest(best, filled, most, x * x + y * y + z * z + 1e-9)
    limit = max(min(best[most - 1], 1.0), 1e-9) if filled == most else 1.0
    remaining = 0
    for t in range(number):
        if lowest[t] <= limit:
            list_out[remaining] = list_in[t]
            out[0, remaining], out[1, remaining], out[2, remaining] = source[0, t], source[1, t], source[2, t]
            remaining += 1
    return remaining, limit


@njit(cache=True, error_model="numpy")
def sort_into_cells(source, list_in, number, centre, half, sectors, out, list_out, starts, cell_of, away):
    """Order samples by shell round ``centre``, and by sector in each shell; the width of a shell.

    The cells of a shell are the eight sectors, for samples that lie in one sector for all blocks of the box,
    and a ninth for those that do not. ``starts`` (CELLS * SHELLS + 1,) receives where each cell begins;
    ``cell_of`` and ``away`` (n,) are work space; the rest as in ``narrowed``.
    """
    cx, cy, cz = centre[0], centre[1], centre[2]
    for t in range(number):
        dx, dy, dz = source[0, t] - cx, source[1, t] - cy, source[2, t] - cz
        away[t] = math.sqrt(dx * dx + dy * dy + dz * dz)
    widest = 0.0
    for t in range(number):
        widest = max(widest, away[t])
    width = (widest + 1e-9) * (1.0 + 1e-9) / SHELLS
    inverse = 1.0 / width
    if sectors > 1:
        hx, hy, hz = half[0] + 1e-8, half[1] + 1e-8, half[2] + 1e-8
        if sectors <= 4:
            hz = -1.0  # the third axis parts no quadrants
        for t in range(number):
            dx, dy, dz = source[0, t] - cx, source[1, t] - cy, source[2, t] - cz
            sector = np.int64(dx > EDGE) + 2 * np.int64(dy > EDGE)
            if hz > 0.0:
                sector += 4 * np.int64(dz > EDGE)
            between = (abs(dx) <= hx) | (abs(dy) <= hy) | (abs(dz) <= hz)
            shell = min(int(away[t] * inverse), SHELLS - 1)
            cell_of[t] = shell * CELLS + (CELLS - 1 if between else sector)
    else:
        for t in range(number):
            cell_of[t] = min(int(away[t] * inverse), SHELLS - 1) * CELLS
    for cell in range(CELLS * SHELLS + 1):
        starts[cell] = 0
    for t in range(number):
        starts[cell_of[t] + 1] += 1
    for cell in range(CELLS * SHELLS):
        starts[cell + 1] += starts[cell]
    for t in range(number):
        cell = cell_of[t]
        place = starts[cell]
        list_out[place] = list_in[t]
        out[0, place], out[1, place], out[2, place] = source[0, t], source[1, t], source[2, t]
        starts[cell] = place + 1
    for cell in range(CELLS * SHELLS, 0, -1):
        starts[cell] = starts[cell - 1]
    starts[0] = 0
    return width


@njit(cache=True, error_model="numpy")
def bounding_box(targets, rows, first, last, centre, half):
    """Centre and half sides of the box round ``rows[first:last]`` of the targets."""
    for axis in range(3):
        low, high = math.inf, -math.inf
        for r in range(first, last):
            low = min(low, targets[rows[r], axis])
            high = max(high, targets[rows[r], axis])
        centre[axis] = 0.5 * (low + high)
        half[axis] = 0.5 * (high - low)
