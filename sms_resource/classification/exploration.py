"""Exploration target: ranges of tonnes and grade, and never anything else."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import pandas as pd

CAUTION = (
    "The quantity and grade are conceptual. There has been insufficient exploration to estimate a resource, and it is "
    "uncertain whether further exploration will result in one."
)


@dataclass(frozen=True)
class ExplorationTarget:
    """Dry tonnes and grades as ranges, with what they rest on.

    Attributes
    ----------
    dry_tonnes : (float, float)
        Low and high (t).
    grades : mapping of grade column to (low, high)
    basis : str
    caution : str
        Stands beside every print of the ranges.
    """

    dry_tonnes: tuple[float, float]
    grades: Mapping[str, tuple[float, float]]
    basis: str
    caution: str = CAUTION

    def to_frame(self) -> pd.DataFrame:
        """quantity, low, high: one row for dry tonnes and one for each grade."""
        rows = [("dry_tonnes", *self.dry_tonnes), *[(name, *limits) for name, limits in self.grades.items()]]
        return pd.DataFrame(rows, columns=["quantity", "low", "high"])


def exploration_target(
    *,
    area_m2: tuple[float, float],
    thickness_m: tuple[float, float],
    dry_density_tpm3: tuple[float, float],
    grades: Mapping[str, tuple[float, float]],
    basis: str,
) -> ExplorationTarget:
    """Ranges from the least and the most of area, thickness, dry density and grade.

    All lows multiply to the low and all highs to the high, so the range is as wide as what is known allows.

    Raises
    ------
    ValueError
        If a range is a single number, runs backwards or is negative, or if the basis is not stated.
    """
    named = {"area_m2": area_m2, "thickness_m": thickness_m, "dry_density_tpm3": dry_density_tpm3, **grades}
    for name, (low, high) in named.items():
        if not 0 <= low <= high:
            raise ValueError(
                f"{name} runs from {low} to {high}; a range from low to high, not negative, was wanted"
            )
    for name, (low, high) in grades.items():
        if low == high:
            raise ValueError(f"{name} is the single number {low}; an exploration target states ranges only")
    if not basis.strip():
        raise ValueError("an exploration target needs its basis")
    low = area_m2[0] * thickness_m[0] * dry_density_tpm3[0]
    high = area_m2[1] * thickness_m[1] * dry_density_tpm3[1]
    if low == high:
        raise ValueError(
            "area, thickness and density are single numbers; an exploration target states ranges only"
        )
    return ExplorationTarget((low, high), dict(grades), basis)
