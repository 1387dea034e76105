"""Densities and porosities that a study gives: a number, or low, base and high."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sms_resource.samples.density_regression import CASES

Floats = NDArray[np.float64]


def assigned_density(
    name: str, value: Any, porosity: Mapping[str, Any] | None, water_density: float
) -> tuple[Floats, Floats]:
    """Dry and wet (low, base, high) of an assigned density."""
    pores: Any = (porosity or {}).get(name)
    if isinstance(value, Mapping):
        pores = value.get("porosity", pores)
        dry = value.get("dry", [value.get(f"dry_{case}", value.get("dry_base")) for case in CASES])
    else:
        dry = value
    values = three_values(f"density of {name}", dry)
    if not 0 < values[0] <= values[2] <= 7.6:
        raise ValueError(f"assigned density of {name} must lie above 0 and at most at 7.6 t/m3, not {values}")
    if isinstance(value, Mapping) and ("wet" in value or "wet_base" in value):
        wet = three_values(f"wet density of {name}", value.get("wet", value.get("wet_base")))
        if np.any(wet < values):
            raise ValueError(f"assigned wet density of {name} is below its dry density")
        return values, wet
    if pores is None:
        return values, np.full(3, np.nan)
    return values, values + three_values(f"porosity of {name}", pores)[1] * water_density


def three_values(what: str, value: Any) -> Floats:
    """(low, base, high) from a number or three."""
    result = np.atleast_1d(np.asarray(value, dtype=np.float64))
    if result.shape == (1,):
        result = np.repeat(result, 3)
    if result.shape != (3,) or not np.all(np.isfinite(result)) or np.any(np.diff(result) < 0):
        raise ValueError(f"{what} must be a number or (low, base, high) in ascending order, not {value!r}")
    return result


def density_row(name: str, dry: Floats, wet: Floats, n: int, basis: str) -> dict[str, object]:
    """One row of the densities by domain, from dry and wet (low, base, high)."""
    row: dict[str, object] = {"domain": name}
    row.update({f"dry_{case}": float(v) for case, v in zip(CASES, dry)})
    row.update({f"wet_{case}": float(v) for case, v in zip(CASES, wet)})
    return {**row, "water_tpm3": float(wet[1] - dry[1]), "n": n, "basis": basis}
