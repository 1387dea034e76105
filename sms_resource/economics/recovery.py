"""Metallurgical recovery of a metal: one number, a curve on head grade, or either by domain."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Recovery:
    """Metallurgical recovery of one metal: constant, by head grade, or by domain.

    Parameters
    ----------
    percent : float, optional
        Constant recovery (%).
    by_grade : tuple of (grade, percent)
        Straight lines between these points, level beyond the first and the last.
    by_domain : mapping of domain to Recovery
    basis : str
        What the recovery rests on, such as test work.
    """

    percent: float | None = None
    by_grade: tuple[tuple[float, float], ...] = ()
    by_domain: Mapping[str, Recovery] = field(default_factory=dict)
    basis: str = ""

    def __post_init__(self) -> None:
        ways = (self.percent is not None) + bool(self.by_grade) + bool(self.by_domain)
        if ways != 1:
            raise ValueError("a recovery is given as one of percent, by_grade or by_domain")
        if self.percent is not None:
            check_share(self.percent, "recovery")
        grades = [grade for grade, _ in self.by_grade]
        if any(later <= earlier for earlier, later in pairwise(grades)):
            raise ValueError("the grades of a recovery curve must rise")
        for _, value in self.by_grade:
            check_share(value, "recovery")

    @property
    def is_constant(self) -> bool:
        """Whether recovery is one number everywhere."""
        return self.percent is not None

    @property
    def is_constant_by_domain(self) -> bool:
        """Whether recovery is one number in each domain."""
        return bool(self.by_domain) and all(part.is_constant for part in self.by_domain.values())

    @property
    def has_basis(self) -> bool:
        """Whether it is said everywhere what the recovery rests on."""
        if self.by_domain:
            return all(part.has_basis or bool(self.basis.strip()) for part in self.by_domain.values())
        return bool(self.basis.strip())

    def fraction(self, grades: Floats, domains: NDArray[np.object_] | None = None) -> Floats:
        """Recovery (0 to 1) of each block; NaN in a domain that has none."""
        if self.percent is not None:
            return np.full(len(grades), self.percent / 100.0)
        if self.by_grade:
            points = np.array(self.by_grade, dtype=np.float64)
            return np.interp(grades, points[:, 0], points[:, 1] / 100.0)
        if domains is None:
            raise ValueError("this recovery goes by domain, so the domain of each block is needed")
        out = np.full(len(grades), np.nan)
        for name, part in self.by_domain.items():
            mine = domains == name
            out[mine] = part.fraction(grades[mine])
        return out

    def __str__(self) -> str:
        if self.percent is not None:
            said = f"{self.percent:g} %"
        elif self.by_grade:
            said = "by grade: " + ", ".join(f"{r:g} % at {g:g}" for g, r in self.by_grade)
        else:
            said = "; ".join(f"{name}: {part}" for name, part in self.by_domain.items())
            return said
        return f"{said} ({self.basis or 'basis not stated'})"


def check_share(value: float, name: str) -> None:
    """Raise ValueError where a share is not from 0 to 100 %."""
    if not 0 <= value <= 100:
        raise ValueError(f"{name} is {value} %; a share from 0 to 100 % was wanted")
