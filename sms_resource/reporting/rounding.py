"""Rounding of a report: as many figures as the confidence supports, and no more.

Two significant figures; Inferred one or two with "approximately". Contained metal comes from unrounded
values and carries no more figures than the coarser of tonnes and grade. (CRIRSCO Template 2019, from memory.)
"""

from __future__ import annotations

import math
from decimal import ROUND_HALF_UP, Decimal
from typing import Any

from sms_resource.units import (
    column_element,
    contained_tonnes,
    element_label,
    tonnes_to_troy_ounces,
    unit_label,
)

MASS_UNITS: tuple[tuple[str, float], ...] = (("Mt", 1e6), ("kt", 1e3), ("t", 1.0))
NO_VALUE = "–"


def round_significant(value: float, figures: int = 2) -> float:
    """Round to ``figures`` significant figures, halves away from zero; NaN stays NaN.

    Examples
    --------
    >>> round_significant(10_863_000.0), round_significant(8.23)
    (11000000.0, 8.2)
    """
    if not math.isfinite(value) or value == 0:
        return float(value)
    return float(_rounded(value, figures))


def _rounded(value: float, figures: int) -> Decimal:
    number = Decimal(repr(float(value)))
    step = Decimal(1).scaleb(number.adjusted() - figures + 1)
    return (number / step).quantize(Decimal(1), rounding=ROUND_HALF_UP) * step


def significant_text(value: float, figures: int = 2) -> str:
    """The rounded number as a person writes it: ``8.2``, ``0.031``, ``120``, ``1.0``."""
    if value is None or not math.isfinite(value):
        return NO_VALUE
    if value == 0:
        return "0"
    number = _rounded(value, figures)
    decimals = max(0, figures - 1 - number.adjusted())
    return group_digits(f"{number:.{decimals}f}")


def group_digits(text: str) -> str:
    """Thin spaces between thousands where there are five digits or more before the point."""
    whole, point, rest = text.partition(".")
    sign = "-" if whole.startswith("-") else ""
    digits = whole.lstrip("-")
    if len(digits) > 4:
        digits = f"{int(digits):,}".replace(",", "\u202f")
    return f"{sign}{digits}{point}{rest}".replace("-", "−")


def mass_unit(tonnes: float, figures: int = 2) -> tuple[str, float]:
    """Unit (name, tonnes in one) that suits a mass after rounding."""
    size = abs(round_significant(tonnes, figures)) if math.isfinite(tonnes) else 0.0
    for name, scale in MASS_UNITS:
        if size >= scale:
            return name, scale
    return MASS_UNITS[-1]


def mass_text(tonnes: float, basis: str, *, figures: int = 2, approximate: bool = False) -> str:
    """A mass with its unit and basis, such as ``11 Mt dry``; ``basis`` is "dry", "wet" or "metal"."""
    if tonnes is None or not math.isfinite(tonnes):
        return NO_VALUE
    name, scale = mass_unit(tonnes, figures)
    lead = "approximately " if approximate else ""
    return f"{lead}{significant_text(tonnes / scale, figures)} {name} {basis}"


def grade_text(value: float, column: str, *, figures: int = 2) -> str:
    """A grade with its unit, such as ``8.2 % Cu`` or ``1.3 g/t Au``."""
    element = column_element(column)
    name = element_label(column).rpartition(" (")[0] if element else column
    return f"{significant_text(value, figures)} {unit_label(column)} {name}"


def metal_figures(tonnes_figures: int, grade_figures: int) -> int:
    """Figures that contained metal may carry: those of the coarser factor."""
    return min(tonnes_figures, grade_figures)


def contained_metal(dry_tonnes: float, grade: float, column: str) -> float:
    """Metal in tonnes from unrounded dry tonnes and grade."""
    return float(contained_tonnes(float(dry_tonnes), float(grade), column))


def metal_unit(column: str, tonnes: float) -> tuple[str, float]:
    """Unit for contained metal (name, tonnes in one): kt or t for base metals, koz or oz (troy) for g/t metals."""
    if column.endswith("_gpt"):
        ounce = 1.0 / float(tonnes_to_troy_ounces(1.0))
        if tonnes >= 1e6 * ounce:
            return "Moz", 1e6 * ounce
        return ("koz", 1e3 * ounce) if tonnes >= 500.0 * ounce else ("oz", ounce)
    if tonnes >= 1e6:
        return "Mt", 1e6
    return ("kt", 1e3) if tonnes >= 500.0 else ("t", 1.0)


def is_inferred(proposed_class: Any) -> bool:
    """Whether a class label is Inferred, in any case of letters."""
    return str(proposed_class).strip().lower() == "inferred"


_VALUES = ("value", "value_per_dry_tonne", "net_value_per_dry_tonne")


def cutoff_names(variable: Any, *, equivalent_in: str = "", currency: str = "") -> tuple[str, str]:
    """Name and unit of what a cut-off is on.

    Parameters
    ----------
    variable : str
        A grade column, "equivalent", or a value per dry tonne.
    equivalent_in : str
        Grade column that an equivalent is in, such as ``cu_pct``.
    currency : str

    Examples
    --------
    >>> cutoff_names("cu_pct"), cutoff_names("equivalent", equivalent_in="cu_pct")
    (('Cu', '%'), ('CuEq', '%'))
    >>> cutoff_names("value_per_dry_tonne", currency="US$")
    ('net value', 'US$/t dry')
    """
    column = str(variable)
    if column_element(column):
        return element_label(column).rpartition(" (")[0], unit_label(column)
    if column == "equivalent":
        if not column_element(equivalent_in):
            return "metal equivalent", ""
        return f"{element_label(equivalent_in).rpartition(' (')[0]}Eq", unit_label(equivalent_in)
    if column in _VALUES:
        return "net value", f"{currency or 'currency'}/t dry"
    stem, _, unit = column.rpartition("_")
    if unit in ("pct", "gpt"):
        names = {"cueq": "CuEq", "aueq": "AuEq", "zneq": "ZnEq"}
        return names.get(stem.lower(), stem.replace("_", " ")), unit_label(column)
    return column.replace("_", " "), ""


def cutoff_label(variable: Any, *, equivalent_in: str = "", currency: str = "") -> str:
    """What a cut-off is on, with its unit in brackets: ``CuEq (%)``, ``net value (US$/t dry)``."""
    name, unit = cutoff_names(variable, equivalent_in=equivalent_in, currency=currency)
    return f"{name} ({unit})" if unit else name


def cutoff_phrase(variable: Any, value: Any, *, equivalent_in: str = "", currency: str = "") -> str:
    """A cut-off in words: ``Cu ≥ 2 %``, ``CuEq ≥ 2 %``; "no cut-off" where none is given."""
    if variable is None or value is None:
        return "no cut-off"
    name, unit = cutoff_names(variable, equivalent_in=equivalent_in, currency=currency)
    return f"{name} ≥ {float(value):g} {unit}".rstrip()
