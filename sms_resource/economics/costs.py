"""Costs of lifting and processing per dry tonne: fixed vessel days and what each tonne adds, by depth and slope."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings

Floats = NDArray[np.float64]
COST_ITEMS: tuple[str, ...] = ("vessel", "lifting", "processing", "general")


@dataclass(frozen=True)
class CostModel:
    """What it costs to lift and process.

    Parameters
    ----------
    vessel_cost_per_day : float
        Fixed: runs whatever is lifted.
    wet_tonnes_per_day : float, optional
        Wet tonnes lifted in a day, which spread the vessel's cost.
    vessel_days, campaign_wet_tonnes : float, optional
        Instead of a daily rate: days charged, and the wet tonnes over which they are spread.
    lifting_per_wet_tonne : float
        Variable cost of cutting, lifting and dewatering.
    depth_rate_per_100_m : float
        Share that lifting costs more for every 100 m below ``reference_depth_m`` (0.02 is 2 %); less above it.
    reference_depth_m : float
        Water depth (m, positive down) at which ``lifting_per_wet_tonne`` holds.
    slope_factors : tuple of (degrees, factor)
        From this slope on, lifting costs this many times as much, and a day lifts as many times less.
    processing_per_dry_tonne, general_per_dry_tonne : float
    """

    vessel_cost_per_day: float = 0.0
    wet_tonnes_per_day: float | None = None
    vessel_days: float | None = None
    campaign_wet_tonnes: float | None = None
    lifting_per_wet_tonne: float = 0.0
    depth_rate_per_100_m: float = 0.0
    reference_depth_m: float = 0.0
    slope_factors: tuple[tuple[float, float], ...] = ()
    processing_per_dry_tonne: float = 0.0
    general_per_dry_tonne: float = 0.0

    def vessel_per_wet_tonne(self) -> float:
        """Fixed cost per wet tonne on gentle slopes; NaN where nothing says what spreads it."""
        if self.vessel_cost_per_day == 0:
            return 0.0
        if self.wet_tonnes_per_day:
            return self.vessel_cost_per_day / self.wet_tonnes_per_day
        if self.vessel_days is not None and self.campaign_wet_tonnes:
            return self.vessel_cost_per_day * self.vessel_days / self.campaign_wet_tonnes
        return float("nan")

    def check(self) -> Findings:
        """Errors of the cost model."""
        found = Findings()
        amounts = {
            "vessel_cost_per_day": self.vessel_cost_per_day,
            "wet_tonnes_per_day": self.wet_tonnes_per_day,
            "vessel_days": self.vessel_days,
            "campaign_wet_tonnes": self.campaign_wet_tonnes,
            "lifting_per_wet_tonne": self.lifting_per_wet_tonne,
            "processing_per_dry_tonne": self.processing_per_dry_tonne,
            "general_per_dry_tonne": self.general_per_dry_tonne,
        }
        for name, amount in amounts.items():
            if amount is not None and not 0 <= amount < np.inf:
                found.error("cost-invalid", f"{name} is {amount}.", "Give zero or more.", column=name)
        if np.isnan(self.vessel_per_wet_tonne()):
            found.error(
                "cost-invalid",
                "A vessel costs money by the day, but nothing says over which tonnes it is spread.",
                "Give wet_tonnes_per_day, or vessel_days and campaign_wet_tonnes.",
            )
        degrees = [start for start, _ in self.slope_factors]
        if degrees != sorted(set(degrees)) or any(not factor > 0 for _, factor in self.slope_factors):
            found.error(
                "cost-invalid", "Slope factors must rise in slope and be above zero.", "Mend the table."
            )
        return found

    def slope_factor(self, slope_deg: Floats) -> Floats:
        """Factor of each slope; a missing slope takes the factor of the steepest class."""
        if not self.slope_factors:
            return np.ones(len(slope_deg))
        starts = np.array([start for start, _ in self.slope_factors])
        factors = np.array([1.0, *[factor for _, factor in self.slope_factors]])
        # NaN sorts behind every start, so an unknown slope is taken for the worst.
        return factors[np.searchsorted(starts, slope_deg, side="right")]

    def depth_factor(self, elevation: Floats) -> Floats:
        """Factor on lifting at each elevation (m, negative below sea level)."""
        below = -elevation - self.reference_depth_m
        return np.maximum(1.0 + self.depth_rate_per_100_m * below / 100.0, 0.0)


def block_costs(
    frame: pd.DataFrame,
    costs: CostModel,
    *,
    slope: str = "slope_deg",
    elevation: str = "elevation",
    dry_tonnes: str = "dry_tonnes",
    wet_tonnes: str = "wet_tonnes",
) -> tuple[pd.DataFrame, Findings]:
    """Costs of each block per dry tonne, item by item.

    Returns
    -------
    DataFrame
        ``vessel_per_dry_tonne`` (fixed), ``lifting_per_dry_tonne``, ``processing_per_dry_tonne``,
        ``general_per_dry_tonne`` and ``cost_per_dry_tonne``; all NaN where the model has errors.
    Findings
    """
    findings = costs.check()
    wanted = [(slope, bool(costs.slope_factors)), (elevation, costs.depth_rate_per_100_m != 0)]
    for column, needed in wanted:
        if needed and column not in frame:
            findings.error(
                "cost-column-missing",
                f"Costs go by {column}, which the blocks do not have.",
                "Add the column.",
            )
    names = [f"{item}_per_dry_tonne" for item in COST_ITEMS]
    if findings.has_errors:
        return pd.DataFrame(np.nan, index=frame.index, columns=[*names, "cost_per_dry_tonne"]), findings
    count = len(frame)
    dry, wet = (frame[c].to_numpy(dtype=np.float64) for c in (dry_tonnes, wet_tonnes))
    wet_per_dry = np.full(count, np.nan)
    np.divide(wet, dry, out=wet_per_dry, where=dry > 0)
    steep = (
        costs.slope_factor(frame[slope].to_numpy(dtype=np.float64)) if costs.slope_factors else np.ones(count)
    )
    deep = np.ones(count)
    if costs.depth_rate_per_100_m:
        deep = costs.depth_factor(frame[elevation].to_numpy(dtype=np.float64))
    out = {
        "vessel_per_dry_tonne": costs.vessel_per_wet_tonne() * steep * wet_per_dry,
        "lifting_per_dry_tonne": costs.lifting_per_wet_tonne * steep * deep * wet_per_dry,
        "processing_per_dry_tonne": np.full(count, costs.processing_per_dry_tonne),
        "general_per_dry_tonne": np.full(count, costs.general_per_dry_tonne),
    }
    table = pd.DataFrame(out, index=frame.index)
    table["cost_per_dry_tonne"] = table[names].sum(axis=1, skipna=False)
    return table, findings
