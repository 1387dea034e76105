"""Densities from wet and dry mass and volume, corrected for the salt that pore water leaves behind."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from sms_resource.findings import Findings

Floats = NDArray[np.float64]

# Density of sea salt in t/m3, the value in IODP's practice (Blum 1997, ODP Technical Note 26, uses 2.20).
SALT_DENSITY_TPM3 = 2.22
# Seawater as pore water in the laboratory in t/m3 (the same practice).
PORE_WATER_TPM3 = 1.024


def pore_water(
    salinity_gkg: float, given_tpm3: float | None = None, findings: Findings | None = None
) -> float:
    """Density of pore water: as given, else of seawater of this salinity at 20 degrees in the laboratory (TEOS-10).

    A brine beyond the range of TEOS-10 whose density is not given is NaN, and an error in ``findings``.
    """
    from sms_resource.samples.seawater import SalinityOutOfRange, seawater_density

    if given_tpm3 is not None:
        if not given_tpm3 > 0:
            raise ValueError(f"pore water must have a positive density, not {given_tpm3}")
        return float(given_tpm3)
    try:
        return seawater_density(salinity_gkg)
    except SalinityOutOfRange as reason:
        if findings is not None:
            findings.error(
                "salinity-range", f"Pore water: {reason}", "Give the density of the pore water in the study."
            )
        return float("nan")


@dataclass(frozen=True)
class Moisture:
    """Porosity (fraction) and wet, dry and grain density (t/m3) of samples, each an array (n,).

    ``dry_with_salt_tpm3`` is the dry density if the salt were left in, for comparison.
    """

    porosity: Floats
    wet_tpm3: Floats
    dry_tpm3: Floats
    grain_tpm3: Floats
    dry_with_salt_tpm3: Floats


def moisture_and_density(
    wet_mass_g: ArrayLike,
    dry_mass_g: ArrayLike,
    dry_volume_cm3: ArrayLike,
    *,
    salinity_gkg: float = 35.0,
    pore_water_tpm3: float = PORE_WATER_TPM3,
    salt_tpm3: float = SALT_DENSITY_TPM3,
) -> Moisture:
    """Moisture and density of samples by masses and dry volume (method C).

    Drying drives off water and leaves its salt, so pore water weighs (wet - dry) / (1 - s), and the salt that it held
    is taken off the dry mass and volume. Source: Blum (1997), ODP Technical Note 26.

    Parameters
    ----------
    wet_mass_g, dry_mass_g, dry_volume_cm3 : array-like, shape (n,)
    salinity_gkg : float
        Salt in pore water, g/kg; brines reach 270.
    pore_water_tpm3, salt_tpm3 : float

    Raises
    ------
    ValueError
        If salinity is not in 0 to below 1000 or a density is not positive.
    """
    share = _salt_share(salinity_gkg)
    if pore_water_tpm3 <= 0 or not salt_tpm3 > 0:
        raise ValueError(f"densities must be positive: pore water {pore_water_tpm3}, salt {salt_tpm3}")
    wet, dry, volume = (np.asarray(v, dtype=np.float64) for v in (wet_mass_g, dry_mass_g, dry_volume_cm3))
    water = (wet - dry) / (1.0 - share)
    pore = water / pore_water_tpm3
    salt = water * share
    solid_mass, solid_volume = dry - salt, volume - salt / salt_tpm3
    total = solid_volume + pore
    return Moisture(pore / total, wet / total, solid_mass / total, solid_mass / solid_volume, dry / total)


def dry_without_salt(
    wet_tpm3: ArrayLike, dry_with_salt_tpm3: ArrayLike, *, salinity_gkg: float = 35.0
) -> Floats:
    """Dry density without salt from wet density and a dry density whose salt was left in."""
    share = _salt_share(salinity_gkg)
    wet, dry = np.asarray(wet_tpm3, dtype=np.float64), np.asarray(dry_with_salt_tpm3, dtype=np.float64)
    return wet - (wet - dry) / (1.0 - share)


def dry_from_grain(
    wet_tpm3: ArrayLike, grain_tpm3: ArrayLike, *, pore_water_tpm3: float = PORE_WATER_TPM3
) -> tuple[Floats, Floats]:
    """Dry density and porosity from wet and grain density of a fully wet rock."""
    wet, grain = np.asarray(wet_tpm3, dtype=np.float64), np.asarray(grain_tpm3, dtype=np.float64)
    porosity = (grain - wet) / (grain - pore_water_tpm3)
    return grain * (1.0 - porosity), porosity


def wet_from_porosity(
    dry_tpm3: ArrayLike, porosity: ArrayLike, *, pore_water_tpm3: float = PORE_WATER_TPM3
) -> Floats:
    """Wet density: dry density and the water that fills the pores."""
    return np.asarray(dry_tpm3, dtype=np.float64) + np.asarray(porosity, dtype=np.float64) * pore_water_tpm3


def _salt_share(salinity_gkg: float) -> float:
    if not 0.0 <= salinity_gkg < 1000.0:
        raise ValueError(f"salinity_gkg must be from 0 to below 1000, not {salinity_gkg}")
    return salinity_gkg / 1000.0
