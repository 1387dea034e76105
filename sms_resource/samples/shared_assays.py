"""Composites that were cut out of one assay: the same grade again, and no evidence of continuity."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]

# Share of the composites from which it is told (common practice, no source).
TOLD_FROM = 0.05


def shared_assays(owner: Integers, sample: Integers, assayed: NDArray[np.bool_], count: int) -> Integers:
    """Number of the assay that a composite rests on alone, where another composite rests on it alone too; else 0.

    Parameters
    ----------
    owner, sample : int array, shape (p,)
        Composite and assay (row) of each piece of hole; negative for none.
    assayed : bool array, shape (p,)
        Pieces that carry a grade.
    count : int
        Composites.

    Returns
    -------
    int array, shape (count,)
        The assays that several composites share, numbered from 1 in the order of the composites; 0 where a composite
        shares none, or rests on several.
    """
    use = assayed & (owner >= 0) & (sample >= 0)
    first, last = np.full(count, np.iinfo(np.int64).max), np.full(count, -1, dtype=np.int64)
    np.minimum.at(first, owner[use], sample[use])
    np.maximum.at(last, owner[use], sample[use])
    only = np.where(first == last, last + 1, 0)
    times = np.bincount(only)
    result = np.zeros(count, dtype=np.int64)
    shared = (only > 0) & (times[only] > 1)
    _, at, number = np.unique(only[shared], return_index=True, return_inverse=True)
    # in the order of the composites, so that the order of the rows of a file does not matter
    result[shared] = 1 + np.argsort(np.argsort(at))[number]
    return result


def one_sample_each(shared: Integers) -> tuple[Integers, Integers]:
    """Group of each composite, those of one assay together, in the order of the first of each; and the sizes of groups."""
    own = -1 - np.arange(len(shared), dtype=np.int64)
    _, first, group = np.unique(np.where(shared > 0, shared, own), return_index=True, return_inverse=True)
    rank = np.empty(len(first), dtype=np.int64)
    rank[np.argsort(first, kind="stable")] = np.arange(len(first))
    return rank[group], np.bincount(rank[group])
