"""Sums that do not depend on the order of their terms, so that every way to a tonnage gives the same bits."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


def exact_parts(values: Floats) -> tuple[Floats, Floats]:
    """Split numbers into a coarse and a fine part that each sum without rounding, in any order and grouping.

    Each part is a whole multiple of one power of two, coarse enough that the sum of all of them still fits a double
    (extraction of Rump, Ogita & Oishi 2008, Accurate floating-point summation, section 3). Sum the parts apart over
    any choice of the members and add the two sums at the end: the result is the sum to its last bit or next to it.
    What is dropped of a number is under n**2 x 2**-104 of the largest.

    Parameters
    ----------
    values : (n,) array
        Finite numbers.

    Returns
    -------
    coarse, fine : (n,) arrays

    Examples
    --------
    >>> coarse, fine = exact_parts(np.array([0.1, 1e6, 0.2]))
    >>> float(coarse[[0, 2]].sum() + fine[[0, 2]].sum())
    0.30000000000000004
    """
    coarse = _extracted(values)
    return coarse, _extracted(values - coarse)


def _extracted(values: Floats) -> Floats:
    """The part of each number that is a multiple of one unit, of which ``len(values)`` fit a double together."""
    largest = float(np.max(np.abs(values))) if len(values) else 0.0
    if largest == 0.0:
        return np.zeros(len(values))
    guard = np.ldexp(1.0, int(np.frexp(largest)[1]) + int(np.ceil(np.log2(len(values) + 1))) + 1)
    return (values + guard) - guard
