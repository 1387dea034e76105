"""Kernel that counts the holes within reach of each block."""

from __future__ import annotations

import numpy as np
from numba import njit, prange


@njit(cache=True, parallel=True, nogil=True)
def holes_within(
    targets: np.ndarray,
    samples: np.ndarray,
    starts: np.ndarray,
    lower: np.ndarray,
    upper: np.ndarray,
    count: np.ndarray,
    nearest: np.ndarray,
) -> None:
    """Holes with a sample within distance 1 of each target, and the distance of the nearest hole of all.

    Parameters
    ----------
    targets (b, 3), samples (n, 3) sorted by hole, both in space where the range is 1
    starts (h + 1,)
        Where each hole's samples start.
    lower, upper (h, 3)
        Box round each hole's samples.
    count (b,), nearest (b,)
        Filled.
    """
    holes = len(starts) - 1
    for b in prange(len(targets)):
        found = 0
        least = np.inf
        for h in range(holes):
            gap = 0.0
            for axis in range(3):
                off = max(lower[h, axis] - targets[b, axis], targets[b, axis] - upper[h, axis], 0.0)
                gap += off * off
            if gap > 1.0 and gap >= least:
                continue
            best = np.inf
            for n in range(starts[h], starts[h + 1]):
                x = samples[n, 0] - targets[b, 0]
                y = samples[n, 1] - targets[b, 1]
                z = samples[n, 2] - targets[b, 2]
                best = min(best, x * x + y * y + z * z)
            found += best <= 1.0
            least = min(least, best)
        count[b] = found
        nearest[b] = np.sqrt(least)
