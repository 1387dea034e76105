"""Densities that physics or their own minerals forbid."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.samples.intervals import names, numbers

LIGHTEST_WET_TPM3 = 1.0
HEAVIEST_TPM3 = 7.6
# A density in use that is further than this from what was measured moves tonnes by more than most bodies can stand
# (common practice, no source).
FAR_FROM_MEASURED = 0.10
LEAST_MEASURED = 3


def measured_findings(by_domain: pd.DataFrame, measured: pd.DataFrame) -> Findings:
    """Domains whose density in use is far from the mean of what was measured there; ``by_domain`` as of the model."""
    findings = Findings()
    domain, dry = names(measured["domain"]), numbers(measured, "dry_density_tpm3")
    for row in by_domain.to_dict("records"):
        own = dry[(domain == row["domain"]) & np.isfinite(dry)]
        if len(own) < LEAST_MEASURED or not np.isfinite(row["dry_base"]):
            continue
        off = float(row["dry_base"]) / float(own.mean()) - 1.0
        if abs(off) > FAR_FROM_MEASURED:
            findings.warning(
                "density-far",
                f"Domain {row['domain']}: {row['dry_base']:.2f} t/m3 dry in use ({row['basis']}) is {100 * off:+.0f} % off "
                f"the mean of the {len(own)} measured there, {own.mean():.2f}",
                "Find out which is right: dry tonnes of the domain move by as much.",
            )
    return findings


def unused_findings(
    method: str,
    by_domain: pd.DataFrame,
    frame: pd.DataFrame,
    given: Mapping[str, object],
    pores: Mapping[str, NDArray[np.float64]],
    water_density: float,
) -> Findings:
    """Densities and porosities that the study gives for a domain and that came to nothing.

    Parameters
    ----------
    method : str
    by_domain : DataFrame
        Of the model, before any factor.
    frame : DataFrame
        From `density.density_table`.
    given, pores : mapping
        Domain to its assigned density, and to its porosity (low, base, high).
    water_density : float
        Pore water, t/m3.
    """
    findings = Findings()
    rows = {str(row["domain"]): row for row in by_domain.to_dict("records")}
    domain = names(frame["domain"]) if "domain" in frame else np.empty(0, dtype=object)
    for name in given:
        row = rows.get(name)
        if row is not None and not str(row["basis"]).startswith("assigned"):
            findings.warning(
                "density-unused",
                f"The density that is assigned to domain {name} is not used: by the method {method.replace('_', ' ')} "
                f"the domain has {row['dry_base']:.2f} t/m3 dry ({row['basis']})",
                "An assigned density stands where a domain has too little of its own, or with density.method = "
                '"assigned"; choose that, or take it out.',
                column=f"density.assigned_dry_tpm3.{name}",
            )
    for name, values in pores.items():
        row = rows.get(name)
        if row is None or "porosity" in str(row["basis"]):
            continue
        solved = any(
            "porosity" in str(basis)
            for column in ("dry_basis", "wet_basis")
            if column in frame
            for basis in frame.loc[domain == name, column]
        )
        # water of the domain that is just what the porosity holds came from it
        if not solved and not np.isclose(
            float(row["water_tpm3"]), values[1] * water_density, rtol=1e-9, atol=0.0
        ):
            findings.warning(
                "density-unused",
                f"The porosity of domain {name} is not used: its water was measured, or its density needs none "
                f"({row['basis']})",
                'It serves density.method = "mineralogy", and samples and domains whose water is not known; take it out.',
                column=f"density.porosity_fraction.{name}",
            )
    return findings


def density_findings(frame: pd.DataFrame) -> Findings:
    """What is impossible, or cannot be used, in the table of `density_table`; one warning a fault and row."""
    findings = Findings()
    dry, wet, grain = (numbers(frame, f"{name}_density_tpm3") for name in ("dry", "wet", "grain"))
    heaviest = numbers(frame, "heaviest_grain_tpm3")
    rows = frame["source_row"] if "source_row" in frame else pd.Series(np.nan, index=frame.index)
    checks = (
        (dry > wet, "dry density {dry:.2f} is above wet density {wet:.2f}"),
        (wet < LIGHTEST_WET_TPM3, "wet density {wet:.2f} is below that of water"),
        (np.fmax(wet, dry) > HEAVIEST_TPM3, "density {wet:.2f} wet, {dry:.2f} dry is above that of galena"),
        (dry > grain * 1.001, "dry density {dry:.2f} is above grain density {grain:.2f}"),
        (dry <= 0, "dry density {dry:.2f} is not positive"),
        (
            dry > 1.05 * heaviest,
            "dry density {dry:.2f} is above the {norm:.2f} that the minerals of its assay can give without any pore",
        ),
    )
    for wrong, text in checks:
        for at in np.flatnonzero(wrong):
            hole = frame["hole_id"].iloc[at] if "hole_id" in frame else ""
            message = text.format(dry=dry[at], wet=wet[at], grain=grain[at], norm=heaviest[at])
            findings.warning(
                "density-impossible",
                f"Hole {hole}, {frame['from_m'].iloc[at]:g} to {frame['to_m'].iloc[at]:g} m: {message} t/m3",
                "Check masses, volume, basis (wet or dry) and the assay; correct or remove the sample.",
                row=rows.iloc[at],
            )
    stuck = np.isfinite(numbers(frame, "given_wet_tpm3")) & ~np.isfinite(dry)
    if stuck.any():
        findings.warning(
            "density-wet-only",
            f"{int(stuck.sum())} of {len(frame)} densities are wet only and cannot be made dry",
            "Give dry or grain densities, or the porosity of the domain.",
            row=rows.iloc[int(np.flatnonzero(stuck)[0])],
        )
    return findings
