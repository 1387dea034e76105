"""The set of greatest weight that holds everything its members need."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

# Weights become whole numbers for the flow; this many steps leave room for sums in 32 bits.
_STEPS = 2**30


def greatest_closure(
    weights: NDArray[np.float64], needs: NDArray[np.int64], barred: NDArray[np.bool_]
) -> NDArray[np.bool_]:
    """Closure of greatest weight in a directed graph, by a minimum cut (Picard 1976).

    Parameters
    ----------
    weights : (n,) array
        Gain (positive) or cost (negative) of each member.
    needs : (p, 2) array of (member, needed)
        A member may only be taken with all that it needs.
    barred : (n,) bool array
        Members that may never be taken, nor anything that needs them.

    Returns
    -------
    (n,) bool array
        The smallest set among those of greatest weight, to one part in 2**30 of the sum of gains.
    """
    from scipy.sparse import csr_array
    from scipy.sparse.csgraph import breadth_first_order, maximum_flow

    count = len(weights)
    pairs = np.unique(np.asarray(needs, dtype=np.int64).reshape(-1, 2), axis=0)
    free = ~_spread(pairs[:, ::-1], barred)
    gains = float(np.maximum(weights, 0.0)[free].sum())
    if gains <= 0:
        return np.zeros(count, dtype=bool)
    # Gains flow in from the source, costs flow out to the sink; what is needed is joined without limit.
    scaled = np.where(free, np.round(np.clip(weights / gains, -1.0, 1.0) * (_STEPS - 1)), 0).astype(np.int64)
    source, sink = count, count + 1
    positive, negative = np.flatnonzero(scaled > 0), np.flatnonzero(scaled < 0)
    held = pairs[free[pairs[:, 0]] & free[pairs[:, 1]]]
    start = np.concatenate([np.full(len(positive), source), negative, held[:, 0]])
    end = np.concatenate([positive, np.full(len(negative), sink), held[:, 1]])
    limit = np.concatenate([scaled[positive], -scaled[negative], np.full(len(held), _STEPS)])
    graph = csr_array((limit.astype(np.int32), (start, end)), shape=(count + 2, count + 2))
    flow = maximum_flow(graph, source, sink).flow
    left = (graph - flow).tocsr()
    left.data[left.data < 0] = 0
    left.eliminate_zeros()
    reached = breadth_first_order(left, source, directed=True, return_predecessors=False)
    out = np.zeros(count + 2, dtype=bool)
    out[reached] = True
    return out[:count] & free


def needed_by(needs: NDArray[np.int64], members: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """All that ``members`` need, at any remove; the members themselves only where another needs them."""
    pairs = np.asarray(needs, dtype=np.int64).reshape(-1, 2)
    direct = np.zeros(len(members), dtype=bool)
    direct[pairs[members[pairs[:, 0]], 1]] = True
    return _spread(pairs, direct)


def _spread(pairs: NDArray[np.int64], members: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Members and all that the pairs (from, to) lead to from them."""
    out = members.copy()
    while True:
        more = pairs[out[pairs[:, 0]] & ~out[pairs[:, 1]], 1]
        if len(more) == 0:
            return out
        out[more] = True
