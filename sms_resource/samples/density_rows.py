"""Densities by domain, one row each: from measurements, a regression, or as assigned."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.samples.density_given import density_row
from sms_resource.samples.density_regression import CASES, Regression
from sms_resource.samples.intervals import names, numbers

Floats = NDArray[np.float64]
LEAST_FOR_OWN_MEAN = 3


def measured_row(
    name: str,
    measured: pd.DataFrame,
    given: tuple[Floats, Floats] | None,
    pores: Floats | None,
    confidence: float,
    water_density: float,
    least_count: int,
    findings: Findings,
) -> dict[str, object]:
    """Mean and t interval of what was measured in a domain; of all that was measured where that is too little."""
    from scipy.special import stdtrit

    dry_all, wet_all = numbers(measured, "dry_density_tpm3"), numbers(measured, "wet_density_tpm3")
    own = names(measured["domain"]) == name
    n = int(own.sum())
    if n < LEAST_FOR_OWN_MEAN and given is not None:
        findings.warning(
            "density-assigned",
            f"Domain {name} has {n} densities and takes the assigned one, {given[0][1]:.2f} t/m3 dry",
            "Measure densities of this domain.",
        )
        return density_row(name, given[0], given[1], n, "assigned")
    use = own if n >= LEAST_FOR_OWN_MEAN else np.ones(len(measured), dtype=bool)
    dry = dry_all[use]
    if len(dry) == 0:
        findings.error(
            "density-unmeasured",
            f"Domain {name} has no density and none is assigned",
            "Measure it, or assign a dry density (low, base, high) in the study.",
        )
        return density_row(name, np.full(3, np.nan), np.full(3, np.nan), 0, "none")
    mean = float(dry.mean())
    sd = float(dry.std(ddof=1)) if len(dry) > 1 else 0.1 * mean
    t = float(stdtrit(max(len(dry) - 1, 1), 0.5 + confidence / 2))
    if n >= LEAST_FOR_OWN_MEAN:
        half, basis = t * sd / np.sqrt(len(dry)), f"mean of {n} measured"
        if n < least_count:
            findings.warning(
                "density-few",
                f"Domain {name} has only {n} densities: {mean:.2f} t/m3 dry, "
                f"{mean - half:.2f} to {mean + half:.2f} at {100 * confidence:.0f} %",
                "Low and high run through to the tonnes; measure more.",
            )
    else:
        # a domain without samples of its own may lie anywhere among the single samples of the others
        half, basis = t * sd * np.sqrt(1.0 + 1.0 / len(dry)), f"mean of all {len(dry)} measured"
        findings.warning(
            "density-unmeasured",
            f"Domain {name} has {n} densities and takes the mean of all {len(dry)}, {mean:.2f} t/m3 dry, with a "
            "wide interval",
            "Measure densities of this domain, or assign one in the study.",
        )
    values = np.array([max(mean - half, 0.0), mean, mean + half])
    pairs = use & np.isfinite(wet_all)
    if pairs.any():
        water = float((wet_all[pairs] - dry_all[pairs]).mean())
    elif pores is not None:
        water = float(pores[1]) * water_density
    else:
        water = np.nan
        findings.warning(
            "density-wet-only",
            f"Domain {name} has dry densities only, so its wet density and wet tonnes are not known",
            "Measure wet densities, or give the porosity of the domain.",
        )
    return density_row(name, values, values + water, n, basis)


def with_measured_water(
    row: dict[str, object], measured: pd.DataFrame, findings: Findings
) -> dict[str, object]:
    """An assigned dry density without a porosity, with the water that was measured in its domain."""
    dry, name = np.array([float(row[f"dry_{case}"]) for case in CASES]), str(row["domain"])  # type: ignore[arg-type]
    if np.isfinite(float(row["wet_base"])) or not np.isfinite(dry[1]):  # type: ignore[arg-type]
        return row
    pores = numbers(measured, "wet_density_tpm3") - numbers(measured, "dry_density_tpm3")
    water = pores[(names(measured["domain"]) == name) & np.isfinite(pores)]
    if not len(water):
        findings.warning(
            "density-wet-only",
            f"Domain {name} has an assigned dry density only, so its wet density and wet tonnes are not known",
            "Give the porosity of the domain.",
        )
        return row
    basis = f"{row['basis']}; water of {len(water)} measured"
    return density_row(name, dry, dry + float(water.mean()), int(row["n"]), basis)  # type: ignore[call-overload]


def regression_row(
    row: dict[str, object], fitted: Regression, composites: pd.DataFrame | None
) -> dict[str, object]:
    """The row of a domain as the line gives it at the mean grades of its composites; assigned ones stay."""
    if composites is None or row["basis"] in ("assigned", "none"):
        return row
    part = composites[names(composites["domain"]) == row["domain"]]
    weight = numbers(part, "weight") if "weight" in part else np.ones(len(part))
    values = np.column_stack([numbers(part, name) for name in fitted.predictors])
    use = np.isfinite(values).all(axis=1) & (weight > 0)
    if not use.any():
        return row
    mean = pd.DataFrame([np.average(values[use], axis=0, weights=weight[use])], columns=fitted.predictors)
    dry = np.array([fitted.predict(mean, case)[0] for case in CASES])
    if not dry[0] > 0:
        return row
    water, n = float(row["water_tpm3"]), int(row["n"])  # type: ignore[arg-type, call-overload]
    basis = f"regression on {fitted.count} pairs, at the mean grades of {int(use.sum())} composites"
    return density_row(str(row["domain"]), dry, dry + water, n, basis)


def assigned_row(
    name: str,
    given: tuple[Floats, Floats] | None,
    measured: pd.DataFrame,
    findings: Findings,
) -> dict[str, object]:
    """The density that the study assigns to a domain."""
    n = int((names(measured["domain"]) == name).sum())
    if given is None:
        findings.error(
            "density-unmeasured",
            f"Domain {name} has no assigned density",
            "Assign a dry density (low, base, high) in the study.",
        )
        return density_row(name, np.full(3, np.nan), np.full(3, np.nan), n, "none")
    one = given[0][0] == given[0][2]
    band = "without low and high, so that no doubt about it reaches the tonnes"
    findings.warning(
        "density-assigned",
        f"Domain {name}: {given[0][1]:.2f} t/m3 dry is assigned, "
        + (band if one else f"{given[0][0]:.2f} to {given[0][2]:.2f}"),
        "An assigned density rests on no sample of this deposit"
        + ("; give low, base and high." if one else "."),
    )
    return density_row(name, given[0], given[1], n, "assigned")
