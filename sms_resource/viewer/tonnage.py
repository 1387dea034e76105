"""Tonnes and grades above a cut-off, fast enough to follow a slider."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from sms_resource.units import element_label, unit_label
from sms_resource.viewer.results import Results

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Tonnage:
    """What is at or above a cut-off: dry and wet tonnes, and the mean grade of each metal on dry mass."""

    dry_tonnes: float
    wet_tonnes: float
    grades: dict[str, float]


class Above:
    """Sums of the blocks, sorted by a variable once, so that any cut-off is one look-up.

    Parameters
    ----------
    results : Results
    variable : str
        Column of the cut-off.
    shares : ndarray (b,)
        Part of each block that counts, 0 to 1.
    """

    def __init__(self, results: Results, variable: str, shares: Array) -> None:
        values = results.numbers(variable)
        order = np.argsort(-np.where(np.isfinite(values), values, -np.inf), kind="stable")
        order = order[np.isfinite(values[order])]
        self._falling = -values[order]
        dry = (results.numbers("dry_tonnes") * shares)[order]
        wet = (
            results.numbers("wet_tonnes") if "wet_tonnes" in results.blocks else np.full(len(values), np.nan)
        )
        self._dry, self._wet = _running(dry), _running((wet * shares)[order])
        self._metal: dict[str, tuple[Array, Array]] = {}
        for metal in results.metals:
            grade = results.numbers(metal)[order]
            known = np.isfinite(grade)
            self._metal[metal] = (
                _running(np.where(known, grade * dry, 0.0)),
                _running(np.where(known, dry, 0.0)),
            )

    def at(self, cutoff: float) -> Tonnage:
        """Sums of the blocks at or above ``cutoff``."""
        count = int(np.searchsorted(self._falling, -cutoff, side="right"))
        grades = {
            metal: float(total[count] / mass[count]) if mass[count] > 0 else math.nan
            for metal, (total, mass) in self._metal.items()
        }
        return Tonnage(float(self._dry[count]), float(self._wet[count]), grades)


def _running(values: Array) -> Array:
    return np.concatenate([[0.0], np.cumsum(values)])


def significant(value: float, figures: int = 2) -> str:
    """A number with so many significant figures, without an exponent."""
    if not math.isfinite(value):
        return "-"
    if value == 0:
        return "0"
    rounded = f"{value:.{figures - 1}e}"  # rounding may carry into one more digit: 0.998 is 1.0
    digits = figures - 1 - int(rounded.partition("e")[2])
    return f"{float(rounded):,.{max(digits, 0)}f}"


def tonnes_text(tonnes: float) -> str:
    """Tonnes to two figures, in Mt or kt from some size on."""
    for size, name in ((1e6, "Mt"), (1e3, "kt")):
        if abs(tonnes) >= 0.995 * size:
            return f"{significant(tonnes / size)} {name}"
    return f"{significant(tonnes)} t"


def tonnage_lines(found: Tonnage, variable: str, cutoff: float) -> list[str]:
    """What the scene says of a cut-off: three short lines."""
    name, unit = element_label(variable).split(" (")[0], unit_label(variable)
    wet = "" if not math.isfinite(found.wet_tonnes) else f"  ({tonnes_text(found.wet_tonnes)} wet)"
    grades = "   ".join(
        f"{element_label(metal).split(' (')[0]} {significant(grade)} {unit_label(metal)}"
        for metal, grade in found.grades.items()
    )
    return [
        f"Blocks with {name} at or above {cutoff:.3g} {unit}",
        f"{tonnes_text(found.dry_tonnes)} dry{wet}",
        grades,
    ]
