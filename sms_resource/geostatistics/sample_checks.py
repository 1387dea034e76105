"""What a person should know about the samples before anything is estimated from them."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike

from sms_resource.findings import Findings

from .inputs import points_array
from .model import COINCIDENT_M
from .search import find_coincident

_IN_LINE = 0.01  # spread across the line, as a share of the spread along it


def sample_findings(
    coordinates: ArrayLike,
    values: ArrayLike,
    *,
    names: Sequence[str] | None = None,
    tolerance_m: float = COINCIDENT_M,
) -> Findings:
    """Look for samples that leave an estimate without a ground.

    Parameters
    ----------
    coordinates : (n, 3) easting, northing, elevation in metres
    values : (n,) or (n, m), NaN where missing
    names : m names of the columns, for the messages
    tolerance_m : float
        Two samples no farther apart than this are at one place.

    Returns
    -------
    Findings
        Errors: samples without a position; samples at one place with different values. Warnings: a single
        sample, equal values throughout, all samples in one line in plan. ``row`` counts samples from 1.

    Raises
    ------
    ValueError
        If shapes do not match.
    """
    out = Findings()
    points = points_array("coordinates", coordinates)
    table = np.asarray(values, dtype=float)
    table = table[:, None] if table.ndim == 1 else table
    if len(table) != len(points):
        raise ValueError(f"values has {len(table)} rows; wanted {len(points)}, one per sample")
    titles = list(names) if names is not None else [f"column {column}" for column in range(table.shape[1])]
    located = np.isfinite(points).all(axis=1)
    for row in np.flatnonzero(~located):
        out.error(
            "samples-not-located",
            f"sample {row + 1} has no position: a coordinate is not a number",
            "locate it or leave it out",
            row=int(row) + 1,
        )
    rows = np.flatnonzero(located)
    for first, second in rows[find_coincident(points[rows], tolerance_m)]:
        meet = np.isfinite(table[first]) & np.isfinite(table[second])
        differ = [
            f"{titles[column]} {table[first, column]:g} and {table[second, column]:g}"
            for column in np.flatnonzero(meet & (table[first] != table[second]))
        ]
        if differ:
            out.error(
                "samples-coincident",
                f"samples {first + 1} and {second + 1} lie at one place and differ: {', '.join(differ)}",
                'correct a position, or choose coincident = "average" or "keep_first"',
                row=int(first) + 1,
            )
    for column, title in enumerate(titles):
        present = table[located, column][np.isfinite(table[located, column])]
        if len(present) == 1:
            out.warning(
                "samples-single",
                f"{title}: one sample alone holds a value",
                "an estimate would only repeat it",
                column=title,
            )
        elif len(present) > 1 and np.ptp(present) == 0.0:
            out.warning(
                "samples-equal",
                f"{title}: all {len(present)} values are {present[0]:g}",
                "there is nothing to estimate; look for a filled column",
                column=title,
            )
    if len(rows) > 2:
        plan = points[rows, :2] - points[rows, :2].mean(axis=0)
        spread = np.linalg.svd(plan, compute_uv=False)
        if spread[1] <= _IN_LINE * spread[0]:
            out.warning(
                "samples-in-one-line",
                f"all {len(rows)} samples lie in one line in plan",
                "the estimate knows nothing across the line; state how far it may reach",
            )
    return out
