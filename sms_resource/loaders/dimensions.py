"""Lengths and densities that a file has in another unit than the tool's: cm, mm, feet, kg/m3."""

from __future__ import annotations

from sms_resource.loaders.headers import canonical_text

_LENGTHS = {
    "m": 1.0, "metre": 1.0, "metres": 1.0, "meter": 1.0, "meters": 1.0,
    "cm": 0.01, "mm": 0.001, "km": 1000.0, "ft": 0.3048, "feet": 0.3048, "foot": 0.3048,
}  # fmt: skip
_DENSITIES = {
    "t/m3": 1.0, "t/m³": 1.0, "tm3": 1.0, "tpm3": 1.0, "g/cm3": 1.0, "g/cm³": 1.0, "gcm3": 1.0, "g/cc": 1.0,
    "kg/m3": 0.001, "kg/m³": 0.001, "kgm3": 0.001, "kgpm3": 0.001,
}  # fmt: skip
_PLACES = ("easting", "northing", "elevation")


def units_of(column: str) -> dict[str, float]:
    """Units that a canonical column may be in, with the factor to its own; empty where it has no such unit.

    Sources: the international foot of 0.3048 m (NIST Handbook 44, appendix C); the rest follows from SI.
    """
    if column.endswith("_tpm3"):
        return _DENSITIES
    if column.endswith("_m") or column.endswith(_PLACES):
        return _LENGTHS
    return {}


def stated_unit(header: str, column: str) -> str | None:
    """Unit of ``column`` that ends a header, such as cm for "Top [cm]"; None where it states none."""
    words = [word for word in canonical_text(header).split("_") if word]
    return words[-1] if len(words) > 1 and words[-1] in units_of(column) else None
