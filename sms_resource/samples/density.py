"""Density samples: every density with its basis, dry and wet, joined to the grades beside it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.samples.density_model import DensityModel, fit_density
from sms_resource.samples.domains import domain_at
from sms_resource.samples.intervals import names, numbers, overlap_means
from sms_resource.samples.mineralogy import NormSettings, norm
from sms_resource.samples.moisture import (
    PORE_WATER_TPM3,
    SALT_DENSITY_TPM3,
    dry_from_grain,
    dry_without_salt,
    moisture_and_density,
    wet_from_porosity,
)

__all__ = ["DensityModel", "DensityTable", "density_table", "fit_density"]

Floats = NDArray[np.float64]

LIGHTEST_WET_TPM3 = 1.0
HEAVIEST_TPM3 = 7.6


@dataclass(frozen=True)
class DensityTable:
    """Density samples made comparable.

    Attributes
    ----------
    frame : DataFrame
        The samples with domain, dry_density_tpm3, wet_density_tpm3, grain_density_tpm3, porosity,
        dry_basis, wet_basis (how each came about), norm_grain_tpm3 (from the assay beside it), assayed_m and the
        metals.
    pore_water_tpm3 : float
    salinity_gkg : float
    findings : Findings
    """

    frame: pd.DataFrame
    pore_water_tpm3: float
    salinity_gkg: float
    findings: Findings


def density_table(
    densities: pd.DataFrame,
    assays: pd.DataFrame | None,
    domains: pd.DataFrame | None,
    *,
    salinity_gkg: float = 35.0,
    pore_water_tpm3: float = PORE_WATER_TPM3,
    salt_tpm3: float = SALT_DENSITY_TPM3,
    dry_contains_salt: bool = False,
    porosity: Mapping[str, float] | None = None,
    metals: Sequence[str] | None = None,
    norm_settings: NormSettings | None = None,
) -> DensityTable:
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
    salinity_gkg, pore_water_tpm3, salt_tpm3 : float
        Pore water. For seawater other than the laboratory's see `seawater.seawater_density`; a brine needs both.
    dry_contains_salt : bool
        Whether dry densities that are given (not masses) still hold the salt.
    porosity : mapping of domain to fraction, optional
    metals : sequence of str, optional
        Columns of ``assays`` to join; all that are element columns by default.
    """
    findings = Findings()
    frame = densities.reset_index(drop=True).copy()
    frame["domain"] = _domains(frame, domains)
    joined = _join_grades(frame, assays, metals)
    for column in joined.columns:
        frame["assayed_m" if column == "shared_m" else column] = joined[column]

    given = {name: numbers(frame, f"{name}_density_tpm3") for name in ("wet", "dry", "grain")}
    assumed = np.array([float((porosity or {}).get(str(name), np.nan)) for name in frame["domain"]])
    dry, wet, grain, pores, dry_basis, wet_basis = _solve(
        frame, given, assumed, salinity_gkg, pore_water_tpm3, salt_tpm3, dry_contains_salt
    )
    frame["dry_density_tpm3"], frame["wet_density_tpm3"], frame["grain_density_tpm3"] = dry, wet, grain
    frame["porosity"], frame["dry_basis"], frame["wet_basis"] = pores, dry_basis, wet_basis
    frame["norm_grain_tpm3"] = np.nan
    with_grades = np.isfinite(numbers(frame, "cu_pct")) & np.isfinite(numbers(frame, "fe_pct"))
    if with_grades.any():
        minerals = norm(frame.loc[with_grades], norm_settings)
        frame.loc[with_grades, "norm_grain_tpm3"] = minerals["grain_density_tpm3"].to_numpy()
    _check(frame, given, findings)
    return DensityTable(frame, pore_water_tpm3, salinity_gkg, findings)


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
            ((made.dry_tpm3, made.wet_tpm3, made.grain_tpm3, made.porosity), ("masses and volume, salt removed", "masses and volume")),
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


def _check(frame: pd.DataFrame, given: Mapping[str, Floats], findings: Findings) -> None:
    dry, wet, grain = (numbers(frame, f"{name}_density_tpm3") for name in ("dry", "wet", "grain"))
    norm_grain = numbers(frame, "norm_grain_tpm3")
    rows = frame["source_row"] if "source_row" in frame else pd.Series(np.nan, index=frame.index)
    checks = (
        (dry > wet, "dry density {dry:.2f} is above wet density {wet:.2f}"),
        (wet < LIGHTEST_WET_TPM3, "wet density {wet:.2f} is below that of water"),
        (np.fmax(wet, dry) > HEAVIEST_TPM3, "density {wet:.2f} wet, {dry:.2f} dry is above that of galena"),
        (dry > grain * 1.001, "dry density {dry:.2f} is above grain density {grain:.2f}"),
        (dry <= 0, "dry density {dry:.2f} is not positive"),
        (
            dry > 1.1 * norm_grain,
            "dry density {dry:.2f} is above the {norm:.2f} that the minerals of its assay give without any pore",
        ),
    )
    for wrong, text in checks:
        for at in np.flatnonzero(wrong):
            hole = frame["hole_id"].iloc[at] if "hole_id" in frame else ""
            message = text.format(dry=dry[at], wet=wet[at], grain=grain[at], norm=norm_grain[at])
            findings.warning(
                "density-impossible",
                f"Hole {hole}, {frame['from_m'].iloc[at]:g} to {frame['to_m'].iloc[at]:g} m: {message} t/m3",
                "Check masses, volume, basis (wet or dry) and the assay; correct or remove the sample.",
                row=rows.iloc[at],
            )
    stuck = np.isfinite(given["wet"]) & ~np.isfinite(dry)
    if stuck.any():
        findings.warning(
            "density-wet-only",
            f"{int(stuck.sum())} of {len(frame)} densities are wet only and cannot be made dry",
            "Give dry or grain densities, or the porosity of the domain.",
            row=rows.iloc[int(np.flatnonzero(stuck)[0])],
        )
