"""Density of pore water and seawater from TEOS-10."""

from __future__ import annotations

# TEOS-10's 75-term density is fitted to the oceanographic range of salinity.
GREATEST_SALINITY_GKG = 42.0


class SalinityOutOfRange(ValueError):
    """Salinity lies outside the range of the seawater equation."""


def seawater_density(
    salinity_gkg: float, temperature_c: float = 20.0, depth_m: float = 0.0, latitude: float = 0.0
) -> float:
    """Density of seawater in t/m3 by TEOS-10 (IOC, SCOR & IAPSO 2010).

    Parameters
    ----------
    salinity_gkg : float
        Absolute salinity in g/kg, 0 to 42.
    temperature_c : float
        In-situ temperature in degrees Celsius.
    depth_m : float
        Water depth, positive down; 0 is the laboratory.
    latitude : float
        For gravity.

    Raises
    ------
    SalinityOutOfRange
        For a brine, whose density must be given.
    """
    import gsw

    if not 0.0 <= salinity_gkg <= GREATEST_SALINITY_GKG:
        raise SalinityOutOfRange(
            f"salinity {salinity_gkg:g} g/kg lies outside 0 to {GREATEST_SALINITY_GKG:g}: give the density of the brine"
        )
    pressure = float(gsw.p_from_z(-abs(depth_m), latitude))
    conservative = float(gsw.CT_from_t(salinity_gkg, temperature_c, pressure))
    return float(gsw.rho(salinity_gkg, conservative, pressure)) / 1000.0
