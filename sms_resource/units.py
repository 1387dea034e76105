"""Conversions of units, mass and basis. They live here and nowhere else.

Sources: troy ounce and avoirdupois pound from NIST Handbook 44 (2024), appendix C; the rest follows from SI.
"""

from __future__ import annotations

from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

Number = TypeVar("Number", float, NDArray[np.float64])

GRAMS_PER_TROY_OUNCE = 31.1034768
KILOGRAMS_PER_POUND = 0.45359237
POUNDS_PER_TONNE_PERCENT = 10.0 / KILOGRAMS_PER_POUND  # 1 % of a tonne is 10 kg

# The unit in which each element is kept, and so the ending of its column.
ELEMENTS: dict[str, str] = {
    "cu": "pct", "zn": "pct", "pb": "pct", "fe": "pct", "s": "pct", "ba": "pct", "sio2": "pct",
    "ca": "pct", "al": "pct", "mg": "pct", "mn": "pct",
    "au": "gpt", "ag": "gpt",
    "as": "ppm", "mo": "ppm", "hg": "ppm", "sb": "ppm", "co": "ppm", "cd": "ppm", "se": "ppm",
    "te": "ppm", "bi": "ppm", "in": "ppm", "ga": "ppm", "ge": "ppm", "tl": "ppm", "ni": "ppm", "sn": "ppm",
}  # fmt: skip

# Mass fraction of one unit, for every spelling that a study file may use.
_FRACTION: dict[str, float] = {
    "fraction": 1.0,
    "pct": 1e-2, "%": 1e-2, "wt%": 1e-2, "wt.%": 1e-2, "percent": 1e-2,
    "permil": 1e-3, "g/kg": 1e-3, "kg/t": 1e-3,
    "ppm": 1e-6, "g/t": 1e-6, "gpt": 1e-6, "mg/kg": 1e-6, "ug/g": 1e-6,
    "ppb": 1e-9, "mg/t": 1e-9, "ug/kg": 1e-9, "ng/g": 1e-9,
    "oz/t": GRAMS_PER_TROY_OUNCE * 1e-6,
}  # fmt: skip

LABELS: dict[str, str] = {"pct": "%", "gpt": "g/t", "ppm": "ppm"}
NAMES: dict[str, str] = {"sio2": "SiO₂"}


def known_unit(unit: str) -> bool:
    """Whether ``unit`` is a spelling of a mass fraction that this module converts."""
    return unit.strip().lower() in _FRACTION


def grade_factor(source: str, target: str) -> float:
    """Factor that turns a grade in ``source`` units into ``target`` units.

    Raises
    ------
    ValueError
        If either unit is not known.

    Examples
    --------
    >>> grade_factor("ppm", "pct")
    0.0001
    """
    factors = []
    for unit in (source, target):
        key = unit.strip().lower()
        if key not in _FRACTION:
            raise ValueError(f"unit {unit!r} is not one of {', '.join(sorted(_FRACTION))}")
        factors.append(_FRACTION[key])
    return float(f"{factors[0] / factors[1]:.12g}")


def element_column(element: str) -> str:
    """Column name of an element in its own unit: ``element_column("cu")`` is ``"cu_pct"``."""
    key = element.lower()
    if key not in ELEMENTS:
        raise ValueError(f"element {element!r} is not one of {', '.join(ELEMENTS)}")
    return f"{key}_{ELEMENTS[key]}"


def column_element(column: str) -> str | None:
    """Element of a column such as ``"cu_pct"``; None where the column is not an element's."""
    element, _, unit = column.rpartition("_")
    return element if ELEMENTS.get(element) == unit else None


def element_label(column: str) -> str:
    """What a figure prints for an element column: ``"cu_pct"`` becomes ``"Cu (%)"``."""
    element, _, unit = column.rpartition("_")
    return f"{NAMES.get(element, element.capitalize())} ({LABELS.get(unit, unit)})"


def unit_label(column: str) -> str:
    """Unit that a figure prints for an element column: ``"au_gpt"`` becomes ``"g/t"``."""
    unit = column.rpartition("_")[2]
    return LABELS.get(unit, unit)


def chance(p: float) -> str:
    """A p-value as a sentence has it: "p 0.032", "p < 0.001"; more figures say nothing.

    Examples
    --------
    >>> chance(0.0321), chance(4e-21)
    ('p 0.032', 'p < 0.001')
    """
    return "p < 0.001" if p < 0.001 else f"p {p:.2g}"


def contained_tonnes(dry_tonnes: Number, grade: Number, column: str) -> Number:
    """Metal in tonnes: dry tonnes times a grade in the unit of its column."""
    return dry_tonnes * grade * _FRACTION[column.rpartition("_")[2]]


def tonnes_to_troy_ounces(tonnes: Number) -> Number:
    """Troy ounces in a mass in tonnes."""
    return tonnes * (1e6 / GRAMS_PER_TROY_OUNCE)


def percent_to_pounds_per_tonne(percent: Number) -> Number:
    """Pounds of metal in one tonne at a grade in percent (1 % is 22.046 lb/t)."""
    return percent * POUNDS_PER_TONNE_PERCENT


def dry_from_wet(wet: Number, moisture_fraction: Number) -> Number:
    """Dry mass or density from wet, with moisture as a fraction of the wet mass."""
    return wet * (1.0 - moisture_fraction)


def wet_from_dry(dry: Number, moisture_fraction: Number) -> Number:
    """Wet mass or density from dry, with moisture as a fraction of the wet mass."""
    return dry / (1.0 - moisture_fraction)
