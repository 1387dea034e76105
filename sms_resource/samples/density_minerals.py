"""Dry density from minerals: the norm of the assays, and a porosity by domain."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.samples.density_given import density_row
from sms_resource.samples.intervals import names, numbers
from sms_resource.samples.mineralogy import NormSettings, norm

Floats = NDArray[np.float64]


def mineral_rows(
    wanted: Sequence[str],
    pores: Mapping[str, Floats],
    given: Mapping[str, tuple[Floats, Floats]],
    grades: pd.DataFrame | None,
    frame: pd.DataFrame,
    water_density: float,
    settings: NormSettings,
    findings: Findings,
) -> tuple[list[dict[str, object]], pd.DataFrame]:
    """Densities of domains from minerals, and the porosity (low, base, high) of each.

    Parameters
    ----------
    wanted : sequence of str
        Domains.
    pores, given : mapping
        Porosity of a domain, and its assigned (dry, wet), each (low, base, high).
    grades : DataFrame or None
        Composites with their domain; the density samples themselves (``frame``) where there are none.
    water_density : float
        Pore water, t/m3.
    """
    source = grades if grades is not None else frame
    known = source.loc[np.isfinite(numbers(source, "cu_pct")) & np.isfinite(numbers(source, "fe_pct"))]
    minerals = norm(known, settings)
    over = int((minerals["sum_pct"] > 102.0).sum())
    if over:
        findings.warning(
            "norm-over-100",
            f"In {over} of {len(known)} samples the norm needs more than the whole rock",
            "Choose another copper mineral, or check the assays.",
        )
    grain_all = minerals["grain_density_tpm3"].to_numpy(np.float64)
    domain = names(known["domain"]) if "domain" in known else np.full(len(known), "", dtype=object)
    rows, table = [], []
    for name in wanted:
        here = grain_all[domain == name]
        porosity = pores.get(name)
        if porosity is None or (len(here) == 0 and len(grain_all) == 0):
            if name in given:
                rows.append(density_row(name, *given[name], 0, "assigned"))
            else:
                findings.error(
                    "density-unmeasured",
                    f"Domain {name} has no porosity, or no assays with Cu and Fe, to make a density from minerals",
                    "Give the porosity (low, base, high) of the domain in the study, or assign a density.",
                )
                rows.append(density_row(name, np.full(3, np.nan), np.full(3, np.nan), 0, "none"))
            table.append({"domain": name, "low": np.nan, "base": np.nan, "high": np.nan})
            continue
        grain = float(here.mean() if len(here) else grain_all.mean())
        dry = grain * (1.0 - porosity[::-1])
        own = f"{len(here)} samples" if len(here) else f"all {len(grain_all)} samples"
        if not len(here):
            findings.warning(
                "density-unmeasured",
                f"Domain {name} has no assay with Cu and Fe and takes the minerals of {own}",
                "Assay some samples of this domain, or assign a density.",
            )
        findings.note(
            "density-minerals",
            f"Domain {name}: minerals of {own} with Cu and Fe give grains of {grain:.2f} t/m3; a porosity of "
            f"{porosity[1]:g} ({porosity[0]:g} to {porosity[2]:g}) makes {dry[1]:.2f} t/m3 dry "
            f"({dry[0]:.2f} to {dry[2]:.2f})",
        )
        measured = int(
            ((names(frame["domain"]) == name) & np.isfinite(numbers(frame, "dry_density_tpm3"))).sum()
        )
        basis = f"minerals of {own}, and porosity"
        rows.append(density_row(name, dry, dry + porosity[::-1] * water_density, measured, basis))
        table.append({"domain": name, "low": porosity[0], "base": porosity[1], "high": porosity[2]})
    return rows, pd.DataFrame(table, columns=["domain", "low", "base", "high"])
