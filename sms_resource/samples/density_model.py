"""Dry and wet density for blocks: low, base and high, by domain or from grades."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from sms_resource.findings import Findings
from sms_resource.samples.density_checks import density_findings, measured_findings, unused_findings
from sms_resource.samples.density_given import assigned_density, three_values
from sms_resource.samples.density_minerals import mineral_rows
from sms_resource.samples.density_regression import (
    CASES,
    Case,
    Regression,
    fit_regression,
    usable_predictors,
)
from sms_resource.samples.density_rows import (
    assigned_row,
    measured_row,
    regression_row,
    with_measured_water,
)
from sms_resource.samples.intervals import names, numbers
from sms_resource.samples.mineralogy import NormSettings, norm
from sms_resource.samples.moisture import PORE_WATER_TPM3, pore_water

Floats = NDArray[np.float64]
Method = Literal["measured_mean", "regression", "mineralogy", "assigned"]

COLUMNS = (
    "domain", "dry_low", "dry_base", "dry_high", "wet_low", "wet_base", "wet_high", "water_tpm3", "n", "basis",
)  # fmt: skip
FEW_DENSITIES = 10


@dataclass(frozen=True)
class DensityModel:
    """Density for blocks.

    Attributes
    ----------
    method : str
    by_domain : DataFrame
        domain, dry_low, dry_base, dry_high, wet_low, wet_base, wet_high (t/m3), water_tpm3 (mass of pore water
        in a cubic metre), n, basis.
    findings : Findings
    regression : Regression or None
    """

    method: Method
    by_domain: pd.DataFrame
    findings: Findings
    pore_water_tpm3: float = PORE_WATER_TPM3
    regression: Regression | None = None
    norm_settings: NormSettings = field(default_factory=NormSettings)
    porosity: pd.DataFrame | None = None
    factor: float = 1.0

    def predict(
        self, domain: ArrayLike, grades: pd.DataFrame | None = None, *, case: Case = "base"
    ) -> tuple[Floats, Floats]:
        """Dry and wet density (t/m3) of blocks.

        Parameters
        ----------
        domain : array-like of str, shape (b,)
        grades : DataFrame, optional
            Estimated grades of the blocks, for "regression" and "mineralogy"; a block without them takes the value of
            its domain.
        case : "low", "base" or "high"

        Returns
        -------
        dry, wet : ndarray, shape (b,)
            Wet is dry and the water in the pores. NaN where a domain is not known to the model.

        Raises
        ------
        ValueError
            If the case is not known or grades have another length than domain.
        """
        if case not in CASES:
            raise ValueError(f"case must be one of {', '.join(CASES)}, not {case!r}")
        wanted = np.asarray(domain, dtype=object)
        at = pd.Index(self.by_domain["domain"]).get_indexer(pd.Index(wanted))
        dry = np.append(self.by_domain[f"dry_{case}"].to_numpy(np.float64), np.nan)[at]
        wet = np.append(self.by_domain[f"wet_{case}"].to_numpy(np.float64), np.nan)[at]
        if grades is None:
            return dry, wet
        if len(grades) != len(wanted):
            raise ValueError(f"grades have {len(grades)} rows, domain has {len(wanted)}")
        if self.regression is not None:
            own = self.regression.predict(grades, case) * self.factor
            water = wet - dry
            # the line was seen in measured domains only
            assigned = np.append(self.by_domain["basis"].str.startswith("assigned").to_numpy(), True)[at]
            use = np.isfinite(own) & (own > 0) & ~assigned
            return np.where(use, own, dry), np.where(use, own + water, wet)
        if self.porosity is not None:
            return self._from_minerals(at, grades, case, dry, wet)
        return dry, wet

    def _from_minerals(
        self, at: NDArray[np.int64], grades: pd.DataFrame, case: Case, dry: Floats, wet: Floats
    ) -> tuple[Floats, Floats]:
        assert self.porosity is not None
        known = np.isfinite(numbers(grades, "cu_pct")) & np.isfinite(numbers(grades, "fe_pct"))
        named = np.append(names(self.by_domain["domain"]), "")[at]
        grain = norm(grades.assign(domain=named), self.norm_settings)["grain_density_tpm3"].to_numpy(
            np.float64
        )
        # the lightest case has the most pores
        pores = np.append(self.porosity[_OPPOSITE[case]].to_numpy(np.float64), np.nan)[at]
        own = grain * (1.0 - pores) * self.factor
        use = known & np.isfinite(own)
        return np.where(use, own, dry), np.where(use, own + pores * self.pore_water_tpm3, wet)

    def extrapolated(self, grades: pd.DataFrame) -> NDArray[np.bool_]:
        """Rows whose grades lie outside the range that the regression saw; all False for other methods."""
        if self.regression is None:
            return np.zeros(len(grades), dtype=bool)
        return self.regression.outside(grades)

    def extrapolation_findings(self, grades: pd.DataFrame) -> Findings:
        """Say how many blocks lie outside the grades that the regression saw."""
        findings = Findings()
        count = int(self.extrapolated(grades).sum())
        if count:
            findings.warning(
                "density-extrapolated",
                f"{count} of {len(grades)} blocks have grades outside those that the density regression saw",
                "Compare their densities with the means of the domains.",
            )
        return findings


_OPPOSITE: dict[Case, str] = {"low": "high", "base": "base", "high": "low"}


def fit_density(
    table: Any,
    method: Method = "measured_mean",
    *,
    domains: Sequence[str] | None = None,
    metals: Sequence[str] | None = None,
    predictors: Sequence[str] | None = None,
    assigned_dry_tpm3: Mapping[str, Any] | None = None,
    porosity: Mapping[str, Any] | None = None,
    composites: pd.DataFrame | None = None,
    confidence: float = 0.90,
    salinity_gkg: float = 35.0,
    pore_water_tpm3: float | None = None,
    least_count: int = FEW_DENSITIES,
    factor: float = 1.0,
    norm_settings: NormSettings | None = None,
) -> DensityModel:
    """Model of dry and wet density for blocks.

    Parameters
    ----------
    table : DataFrame
        From `density.density_table`; its findings join those of the model.
    method : "measured_mean", "regression", "mineralogy" or "assigned"
        Mean of each domain; a line on grades; minerals of the norm with a porosity by domain; given values.
    domains : sequence of str, optional
        Domains that need a density; by default those of the table and of ``assigned_dry_tpm3`` and ``porosity``.
    metals : sequence of str, optional
        Grade columns that blocks will have; others are not used as predictors.
    predictors : sequence of str, optional
        Grade columns of the regression; by default those of Cu, Zn and Fe that blocks have. One that is not among
        ``metals`` is left out with a finding, since no block could use it.
    assigned_dry_tpm3 : mapping
        domain to a number, (low, base, high), or a mapping with dry (or dry_low, dry_base, dry_high) and porosity.
        With the other methods it serves domains without samples.
    porosity : mapping
        domain to a fraction or (low, base, high), for "mineralogy" and wherever the water is not measured.
    composites : DataFrame, optional
        domain and element columns: the grain density of each domain under "mineralogy", its mean grades under
        "regression".
    confidence : float
        Of the interval of low and high.
    salinity_gkg, pore_water_tpm3 : float
        Pore water, as for `density.density_table`.
    least_count : int
        Densities of a domain below which they are called few.
    factor : float
        What every dry density is multiplied by; for scenarios. The water in the pores stays.

    Raises
    ------
    ValueError
        If the method is not known, confidence is not between 0 and 1, or what a method needs is not given.

    Notes
    -----
    "measured_mean": low and high are the t interval of the mean; a domain with fewer than 3 samples takes the mean of
    all, with the spread of single samples as its interval. "regression": ordinary least squares over the densities of
    ``domains`` with the interval of its mean; the row of a domain, which blocks without grades take, is the line at its
    mean grades. Fewer than 10 samples in a domain are a finding.
    """
    if method not in ("measured_mean", "regression", "mineralogy", "assigned"):
        raise ValueError(
            f"method must be 'measured_mean', 'regression', 'mineralogy' or 'assigned', not {method!r}"
        )
    if not 0.0 < confidence < 1.0:
        raise ValueError(f"confidence must lie between 0 and 1, not {confidence}")
    if not factor > 0:
        raise ValueError(f"factor must be positive, not {factor}")
    findings = Findings()
    water = pore_water(salinity_gkg, pore_water_tpm3, findings)
    frame = table
    given = {
        str(k): assigned_density(str(k), v, porosity, water) for k, v in (assigned_dry_tpm3 or {}).items()
    }
    pores = {str(k): three_values(f"porosity of {k}", v) for k, v in (porosity or {}).items()}
    for name, values in pores.items():
        if not (values[0] >= 0 and values[2] < 1):
            raise ValueError(f"porosity of {name} must be a fraction from 0 to below 1, not {values}")
    measured = frame.loc[np.isfinite(numbers(frame, "dry_density_tpm3"))]
    wanted = (
        [str(d) for d in domains]
        if domains is not None
        else sorted({*names(measured["domain"]), *given, *pores})
    )
    findings.extend(density_findings(frame))
    settings = norm_settings or NormSettings()
    fitted = pore_frame = None
    if method == "assigned":
        rows = [assigned_row(name, given.get(name), measured, findings) for name in wanted]
    elif method == "mineralogy":
        rows, pore_frame = mineral_rows(wanted, pores, given, composites, frame, water, settings, findings)
        if metals is not None and not {"cu_pct", "fe_pct"} <= set(metals):
            findings.note(
                "density-by-domain",
                "Blocks carry no Cu and Fe together, so each takes the density of its domain's mean mineralogy",
                "Add both to metals.estimate to let density follow the grades of a block.",
            )
    else:
        rows = [
            measured_row(
                name, measured, given.get(name), pores.get(name), confidence, water, least_count, findings
            )
            for name in wanted
        ]
        if method == "regression":
            chosen = usable_predictors(predictors, metals, findings)
            body = measured[np.isin(names(measured["domain"]), wanted)] if domains is not None else measured
            fitted = fit_regression(body, chosen, confidence, findings)
            if fitted is not None:
                rows = [regression_row(row, fitted, composites) for row in rows]
    rows = [
        with_measured_water(row, measured, findings) if row["basis"] == "assigned" else row for row in rows
    ]
    by_domain = pd.DataFrame(rows, columns=list(COLUMNS))
    if method != "measured_mean":
        findings.extend(measured_findings(by_domain, measured))
    findings.extend(unused_findings(method, by_domain, frame, given, pores, water))
    for case in CASES:
        own = (factor - 1.0) * by_domain[f"dry_{case}"]
        by_domain[f"dry_{case}"] += own
        by_domain[f"wet_{case}"] += own
    return DensityModel(method, by_domain, findings, water, fitted, settings, pore_frame, factor)
