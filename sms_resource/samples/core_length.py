"""How much core a run gave, and how that core is shared along the run."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.samples.intervals import numbers

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]


def recovered_lengths(runs: pd.DataFrame) -> Floats:
    """Recovered length (m) of each run: as measured, else from the percentage; NaN where neither is given."""
    length = numbers(runs, "to_m") - numbers(runs, "from_m")
    measured = numbers(runs, "recovered_length_m")
    return np.where(np.isfinite(measured), measured, numbers(runs, "recovery_pct") / 100.0 * length)


def recovered_on_pieces(
    length: Floats, run: Integers, assayed: NDArray[np.bool_], recovered: Floats, run_length: Floats
) -> Floats:
    """Core of each run shared among the pieces of hole that it was cut into; sums to the run's core exactly.

    Assayed pieces are filled first, since core that was sampled was not lost; what is left goes to the rest. Pieces
    outside runs, or in runs without a known recovery, are NaN.
    """
    result = np.full(len(length), np.nan)
    inside = run >= 0
    count = len(run_length)
    if count == 0 or not inside.any():
        return result
    sampled = np.bincount(run[inside], length[inside] * assayed[inside], count)
    rest = np.bincount(run[inside], length[inside] * ~assayed[inside], count)
    total = sampled + rest
    over = recovered >= total
    first = np.where(over, np.divide(recovered, total, out=np.ones(count), where=total > 0), 1.0)
    first = np.where(
        ~over & (recovered < sampled),
        np.divide(recovered, sampled, out=np.zeros(count), where=sampled > 0),
        first,
    )
    left = np.maximum(recovered - sampled, 0.0)
    second = np.where(over, first, np.divide(left, rest, out=np.zeros(count), where=rest > 0))
    unknown = ~np.isfinite(recovered)
    first[unknown], second[unknown] = np.nan, np.nan
    result[inside] = length[inside] * np.where(assayed[inside], first[run[inside]], second[run[inside]])
    return result
