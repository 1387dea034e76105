"""Axes whose ends and labels are round numbers, and what a bar of colours says."""

from __future__ import annotations

import math
from typing import Any

from sms_resource.units import column_element, element_label


def round_ranges(true: list[float]) -> tuple[list[float], list[float], list[int]]:
    """Round ends of three axes, and how many labels then fall on round numbers.

    Parameters
    ----------
    true : list of float
        Low and high of easting, northing and elevation.
    """
    low, high, counts = [], [], []
    for a, b, wanted in ((true[0], true[1], 5), (true[2], true[3], 5), (true[4], true[5], 2)):
        span = max(b - a, 1e-6)
        power = 10.0 ** math.floor(math.log10(span / wanted))
        step = next(power * n for n in (1, 2, 5, 10) if power * n >= 0.8 * span / wanted)
        start, end = math.floor(a / step + 1e-9), math.ceil(b / step - 1e-9)
        end = max(end, start + 1)
        low.append(start * step)
        high.append(end * step)
        counts.append(end - start + 1)
    return low, high, counts


def label_of(column: str) -> str:
    """What the colour bar says: name and unit."""
    return element_label(column) if column_element(column) else column.replace("_", " ")


def clear_corners(axes: Any) -> None:
    """Leave out the first and last number of each axis: two would stand on one another where axes meet."""
    for axis in range(3):
        names = axes.GetAxisLabels(axis)
        for end in (0, names.GetNumberOfValues() - 1):
            names.SetValue(end, "")
