"""Kernels that weigh every block under many sets of terms at once.

Both work on tiles of scenarios, so that coefficients and sums stay in the nearest cache, and on a fixed number of
runs of blocks that are summed in order afterwards, so that results do not depend on the number of threads.
Coefficients come padded to whole tiles, (tiles, ..., TILE), with a threshold of infinity where there is no scenario.
"""

from __future__ import annotations

import numpy as np
from numba import njit, prange

TILE = 128
RUNS = 32


# Inlined as written, with whole arrays: as a call, or on slices, the sums take 10 to 40 % longer.
@njit(cache=True, nogil=True, inline="always")
def _needed(tile: int, s: int, b: int, shapes: np.ndarray, threshold: np.ndarray) -> float:
    """Value that a block must reach in one scenario."""
    return threshold[tile, 0, s] + threshold[tile, 1, s] * shapes[b, 1] + threshold[tile, 2, s] * shapes[b, 2]


@njit(cache=True, nogil=True, inline="always")
def _add_block(
    run: int,
    tile: int,
    b: int,
    value: np.ndarray,
    needed: np.ndarray,
    inside: np.ndarray,
    quantities: np.ndarray,
    royalty: np.ndarray,
    nearness: np.ndarray,
    sums: np.ndarray,
) -> None:
    """Add one block to the sums of one tile, in the scenarios where its value less royalty meets what is needed."""
    wide = quantities.shape[1]
    tonnes = quantities[b, 0]
    for s in range(TILE):
        x = value[s] - royalty[tile, s] * max(value[s], 0.0)
        taken = x >= needed[s]
        inside[s] = 1.0 if taken else 0.0
        sums[run, tile, wide, s] += tonnes * x if taken else 0.0
        sums[run, tile, wide + 1, s] += 1.0 if abs(x - needed[s]) <= nearness[tile, s] else 0.0
    for q in range(wide):
        quantity = quantities[b, q]
        for s in range(TILE):
            sums[run, tile, q, s] += quantity * inside[s]


@njit(cache=True, parallel=True, nogil=True)
def linear_sums(
    grades: np.ndarray,
    shapes: np.ndarray,
    quantities: np.ndarray,
    worth: np.ndarray,
    charge: np.ndarray,
    royalty: np.ndarray,
    threshold: np.ndarray,
    nearness: np.ndarray,
    sums: np.ndarray,
) -> None:
    """Sums of quantities over blocks whose value meets its costs, where value is linear in the grades.

    Value of block b in scenario s: x = sum_m worth[m, s] grades[b, m] - charge[0, s] - charge[1, s] shapes[b, 0], less
    royalty[s] of what is above zero. It is in where x >= threshold[0, s] + threshold[1, s] shapes[b, 1] +
    threshold[2, s] shapes[b, 2]; NaN is never in.

    Parameters
    ----------
    grades (n, m), quantities (n, q) with dry tonnes first
    shapes (n, 3): wet tonnes, unit cost of the vessel and unit cost of lifting, each per dry tonne
    worth (tiles, m, TILE), charge (tiles, 2, TILE), royalty (tiles, TILE), threshold (tiles, 3, TILE)
    nearness (tiles, TILE)
        How near the value of a block may lie to what it must reach before its side is in doubt.
    sums (RUNS, tiles, q + 2, TILE)
        Filled: the quantities, then dry tonnes x value, then blocks in doubt. Must come as zeros.
    """
    count, metals = grades.shape
    for run in prange(RUNS):
        value = np.empty(TILE)
        needed = np.empty(TILE)
        inside = np.empty(TILE)
        for tile in range(worth.shape[0]):
            for b in range(run * count // RUNS, (run + 1) * count // RUNS):
                wet = shapes[b, 0]
                for s in range(TILE):
                    value[s] = -charge[tile, 0, s] - charge[tile, 1, s] * wet
                    needed[s] = _needed(tile, s, b, shapes, threshold)
                for m in range(metals):
                    grade = grades[b, m]
                    for s in range(TILE):
                        value[s] += worth[tile, m, s] * grade
                _add_block(run, tile, b, value, needed, inside, quantities, royalty, nearness, sums)


@njit(cache=True, parallel=True, nogil=True)
def deducted_sums(
    grades: np.ndarray,
    carrier: int,
    shapes: np.ndarray,
    quantities: np.ndarray,
    share: np.ndarray,
    worth: np.ndarray,
    by_carrier: np.ndarray,
    flat: np.ndarray,
    product: np.ndarray,
    charge: np.ndarray,
    royalty: np.ndarray,
    threshold: np.ndarray,
    nearness: np.ndarray,
    sums: np.ndarray,
) -> None:
    """As :func:`linear_sums`, where a buyer takes deductions or the metals go into a product.

    Each metal brings max(0, min(share g, worth g - by_carrier c - flat)) with g its grade and c the grade of the
    carrier; the product costs product c. share, worth, by_carrier and flat are (tiles, m, TILE); product (tiles, TILE).
    """
    count, metals = grades.shape
    for run in prange(RUNS):
        value = np.empty(TILE)
        needed = np.empty(TILE)
        inside = np.empty(TILE)
        for tile in range(worth.shape[0]):
            for b in range(run * count // RUNS, (run + 1) * count // RUNS):
                mass = grades[b, carrier]
                wet = shapes[b, 0]
                for s in range(TILE):
                    value[s] = -charge[tile, 0, s] - charge[tile, 1, s] * wet - product[tile, s] * mass
                    needed[s] = _needed(tile, s, b, shapes, threshold)
                for m in range(metals):
                    grade = grades[b, m]
                    for s in range(TILE):
                        other = share[tile, m, s] * grade
                        paid = worth[tile, m, s] * grade - by_carrier[tile, m, s] * mass - flat[tile, m, s]
                        least = paid if paid < other else other
                        # written so that a missing grade stays missing
                        value[s] += 0.0 if least < 0.0 else least
                _add_block(run, tile, b, value, needed, inside, quantities, royalty, nearness, sums)
