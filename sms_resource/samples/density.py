"""Density samples: every density with its basis, dry and wet, joined to the grades beside it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.samples.density_checks import density_findings
from sms_resource.samples.density_given import three_values
from sms_resource.samples.density_model import DensityModel, fit_density
from sms_resource.samples.domains import domain_at
from sms_resource.samples.intervals import names, numbers, overlap_means
from sms_resource.samples.mineralogy import NormSettings, heaviest_grain, norm
from sms_resource.samples.moisture import (
    SALT_DENSITY_TPM3,
    dry_from_grain,
    dry_without_salt,
    moisture_and_density,
    pore_water,
    wet_from_porosity,
)

__all__ = ["DensityModel", "density_findings", "density_table", "fit_density"]

Floats = NDArray[np.float64]


def density_table(
    densities: pd.DataFrame,
    assays: pd.DataFrame | None,
    domains: pd.DataFrame | None,
    *,
    salinity_gkg: float = 35.0,
    pore_water_tpm3: float | None = None,
    salt_tpm3: float = SALT_DENSITY_TPM3,
    dry_contains_salt: bool = False,
    porosity: Mapping[str, Any] | None = None,
    metals: Sequence[str] | None = None,
    norm_settings: NormSettings | None = None,
) -> pd.DataFrame:
    """Bring measured densities to one basis: dry without salt, and wet.

    The first of these that a row allows is used: masses and dry volume (with the salt correction); wet and dry as
    given; wet and grain; dry and grain; wet, or dry, or grain, with the porosity of its domain. What cannot be
    made dry stays without a dry density and becomes a finding.

    Parameters
    ----------
    densities : DataFrame
        hole_id, from_m, to_m, and any of wet_density_tpm3, dry_density_tpm3, grain_density_tpm3, wet_mass_g,
        dry_mass_g, dry_volume_cm3 (NaN where not given).
    assays : DataFrame or None
        hole_id, from_m, to_m and metals as plain numbers: joined by depth for regression and mineralogy.
    domains : DataFrame or None
        hole_id, from_m, to_m, domain.
    salinity_gkg, salt_tpm3 : float
        Salt in pore water (g/kg) and its density.
    pore_water_tpm3 : float, optional
        Density of pore water; by default that of seawater of this salinity in the laboratory. A brine
        needs it: without it nothing that rests on pore water is known, and `fit_density` says so.
    dry_contains_salt : bool
        Whether dry densities that are given (not masses) still hold the salt.
    porosity : mapping of domain to fraction or (low, base, high), optional
        The base is used here.
    metals : sequence of str, optional
        Columns of ``assays`` to join; all that are element columns by default.

    Returns
    -------
    DataFrame
        The samples with domain, dry_density_tpm3, wet_density_tpm3, grain_density_tpm3, porosity, dry_basis and
        wet_basis (how each came about), norm_grain_tpm3 and heaviest_grain_tpm3 (from the assay beside it), assayed_m
        and the metals. What is
        wrong with them is told by `density_findings`.
    """
    water = pore_water(salinity_gkg, pore_water_tpm3)
    frame = densities.reset_index(drop=True).copy()
    frame["domain"] = _domains(frame, domains)
    joined = _join_grades(frame, assays, metals)
    for column in joined.columns:
        frame["assayed_m" if column == "shared_m" else column] = joined[column]

    given = {name: numbers(frame, f"{name}_density_tpm3") for name in ("wet", "dry", "grain")}
    base = {
        str(name): three_values(f"porosity of {name}", value)[1] for name, value in (porosity or {}).items()
    }
    assumed = np.array([base.get(str(name), np.nan) for name in frame["domain"]], dtype=np.float64)
    dry, wet, grain, pores, dry_basis, wet_basis = _solve(
        frame, given, assumed, salinity_gkg, water, salt_tpm3, dry_contains_salt
    )
    frame["dry_density_tpm3"], frame["wet_density_tpm3"], frame["grain_density_tpm3"] = dry, wet, grain
    frame["porosity"], frame["dry_basis"], frame["wet_basis"] = pores, dry_basis, wet_basis
    frame["norm_grain_tpm3"] = np.nan
    frame["heaviest_grain_tpm3"] = np.nan
    with_grades = np.isfinite(numbers(frame, "cu_pct")) & np.isfinite(numbers(frame, "fe_pct"))
    if with_grades.any():
        minerals = norm(frame.loc[with_grades], norm_settings)
        frame.loc[with_grades, "norm_grain_tpm3"] = minerals["grain_density_tpm3"].to_numpy()
        frame.loc[with_grades, "heaviest_grain_tpm3"] = heaviest_grain(frame.loc[with_grades])
    frame["given_wet_tpm3"] = given["wet"]
    return frame


def _solve(
    frame: pd.DataFrame,
    given: Mapping[str, Floats],
    assumed: Floats,
    salinity: float,
    water: float,
    salt: float,
    dry_contains_salt: bool,
) -> tuple[Floats, Floats, Floats, Floats, NDArray[np.object_], NDArray[np.object_]]:
    count = len(frame)
    dry, wet, grain, pores = (np.full(count, np.nan) for _ in range(4))
    dry_basis, wet_basis = np.full(count, "none", dtype=object), np.full(count, "none", dtype=object)

    def put(
        rows: NDArray[np.bool_], values: tuple[Floats, Floats, Floats, Floats], basis: tuple[str, str]
    ) -> None:
        for target, value in zip((dry, wet, grain, pores), values):
            target[rows] = value[rows]
        dry_basis[rows], wet_basis[rows] = basis

    made = moisture_and_density(
        numbers(frame, "wet_mass_g"), numbers(frame, "dry_mass_g"), numbers(frame, "dry_volume_cm3"),
        salinity_gkg=salinity, pore_water_tpm3=water, salt_tpm3=salt,
    )  # fmt: skip
    gw, gd, gg = given["wet"], given["dry"], given["grain"]
    salted = dry_without_salt(gw, gd, salinity_gkg=salinity) if dry_contains_salt else gd
    from_grain, grain_pores = dry_from_grain(gw, gg, pore_water_tpm3=water)
    note = ", salt removed" if dry_contains_salt else ""
    with np.errstate(invalid="ignore", divide="ignore"):
        both_pores = (gw - salted) / water
        both_grain = np.where(np.isfinite(gg), gg, salted / (1.0 - both_pores))
        dry_pores = 1.0 - gd / gg
        wet_dry = gw - assumed * water
        ways: list[tuple[tuple[Floats, Floats, Floats, Floats], tuple[str, str]]] = [
            (
                (made.dry_tpm3, made.wet_tpm3, made.grain_tpm3, made.porosity),
                ("masses and volume, salt removed", "masses and volume"),
            ),
            ((salted, gw, both_grain, both_pores), (f"measured{note}", "measured")),
            ((from_grain, gw, gg, grain_pores), ("wet and grain", "measured")),
            ((gd, wet_from_porosity(gd, dry_pores, pore_water_tpm3=water), gg, dry_pores), ("measured", "dry and grain")),
            ((wet_dry, gw, wet_dry / (1 - assumed), assumed), ("wet and assumed porosity", "measured")),
            ((gd, gd + assumed * water, gd / (1 - assumed), assumed), ("measured", "dry and assumed porosity")),
            ((gg * (1 - assumed), gg * (1 - assumed) + assumed * water, gg, assumed), ("grain and assumed porosity",) * 2),
        ]  # fmt: skip
    free = np.ones(count, dtype=bool)
    for values, basis in ways:
        rows = free & np.isfinite(values[0]) & np.isfinite(values[1])
        put(rows, values, basis)
        free &= ~rows
    only_dry = free & np.isfinite(gd)
    dry[only_dry], dry_basis[only_dry] = gd[only_dry], "measured"
    only_wet = free & ~only_dry & np.isfinite(gw)
    wet[only_wet], wet_basis[only_wet] = gw[only_wet], "measured"
    rest = ~np.isfinite(grain) & np.isfinite(gg)
    grain[rest] = gg[rest]
    return dry, wet, grain, pores, dry_basis, wet_basis


def _domains(frame: pd.DataFrame, domains: pd.DataFrame | None) -> NDArray[np.object_]:
    if domains is not None and len(domains):
        return names(domain_at(frame, domains))
    return names(frame["domain"]) if "domain" in frame else np.full(len(frame), "unlogged", dtype=object)


def _join_grades(
    frame: pd.DataFrame, assays: pd.DataFrame | None, metals: Sequence[str] | None
) -> pd.DataFrame:
    from sms_resource.units import column_element

    if assays is None or not len(assays):
        return pd.DataFrame({"shared_m": np.zeros(len(frame))}, index=frame.index)
    wanted = metals if metals is not None else [c for c in assays.columns if column_element(str(c))]
    return overlap_means(frame, assays, list(wanted))
