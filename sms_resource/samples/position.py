"""Collars against the seafloor: how far off they are, and what was done about it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, Protocol

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from sms_resource.findings import Findings
from sms_resource.samples.intervals import numbers

Floats = NDArray[np.float64]
CollarPolicy = Literal["keep", "shift_median", "snap"]


class Seafloor(Protocol):
    """A surface that gives the elevation below a point; NaN where it has none."""

    def sample(self, x: ArrayLike, y: ArrayLike) -> Floats:
        """Elevations (n,) in m at x, y (n,)."""
        ...


@dataclass(frozen=True)
class CollarMatch:
    """Collars after they were compared with the seafloor.

    Attributes
    ----------
    collars : DataFrame
        The collars with ``elevation`` after the policy, ``original_elevation``, ``seafloor_elevation``,
        ``dz_m`` (original minus seafloor: positive floats, negative sinks), ``dz_after_m``, ``vertical_sigma_m``,
        ``limit_m``, ``flagged_before`` (as delivered) and ``flagged`` (after the policy).
    shift_m : float
        What was added to every collar (0 unless the policy is "shift_median").
    table : DataFrame
        One row a quantity: count, median, mean, standard deviation, robust deviation, extremes, flagged; before
        and after.
    findings : Findings
    """

    collars: pd.DataFrame
    shift_m: float
    table: pd.DataFrame
    findings: Findings


def match_collars(
    collars: pd.DataFrame,
    seafloor: Seafloor,
    *,
    policy: CollarPolicy = "keep",
    sigma_grid_m: float = 0.3,
    flag_m: float = 1.0,
) -> CollarMatch:
    """Compare collar elevations with the seafloor and, if asked, bring them together.

    Parameters
    ----------
    collars : DataFrame
        hole_id, easting, northing, elevation, position_sigma_m (horizontal, m, NaN where unknown).
    seafloor : object with ``sample(x, y)``
    policy : "keep", "shift_median" or "snap"
        Leave the collars, move all by the median difference, or put each on the seafloor.
    sigma_grid_m : float
        Vertical standard deviation of the seafloor in m.
    flag_m : float
        A collar is flagged where it is off by more than this and by more than three standard deviations; the
        deviation of a collar joins that of the grid with what its horizontal error makes on the slope.

    Raises
    ------
    ValueError
        If the policy is not known or a limit is negative.
    """
    if policy not in ("keep", "shift_median", "snap"):
        raise ValueError(f"policy must be 'keep', 'shift_median' or 'snap', not {policy!r}")
    if not (sigma_grid_m >= 0 and flag_m >= 0):
        raise ValueError(f"sigma_grid_m and flag_m must not be negative: {sigma_grid_m}, {flag_m}")
    findings = Findings()
    x, y = numbers(collars, "easting"), numbers(collars, "northing")
    original = numbers(collars, "elevation")
    sigma = numbers(collars, "position_sigma_m")
    floor = np.asarray(seafloor.sample(x, y), dtype=np.float64)
    difference = original - floor
    vertical = _vertical_sigma(seafloor, x, y, sigma, sigma_grid_m)
    limit = np.maximum(flag_m, 3.0 * vertical)
    known = np.isfinite(difference)

    median = float(np.median(difference[known])) if known.any() else 0.0
    shift = -median if policy == "shift_median" else 0.0
    after = original + shift
    if policy == "snap":
        after = np.where(np.isfinite(floor), floor, original)
    rest = after - floor
    flagged = known & (np.abs(rest) > limit)
    result = collars.copy()
    result["original_elevation"] = original
    result["elevation"] = after
    result["seafloor_elevation"] = floor
    result["dz_m"] = difference
    result["dz_after_m"] = rest
    result["vertical_sigma_m"] = vertical
    result["limit_m"] = limit
    result["flagged_before"] = known & (np.abs(difference) > limit)
    result["flagged"] = flagged
    _report(result, known, median, policy, limit, findings)
    table = _summary(difference, rest, limit)
    return CollarMatch(result, float(shift), table, findings)


def hole_ends(collars: pd.DataFrame) -> tuple[pd.DataFrame, Findings]:
    """How the holes ended: count, share and drilled length for sulphide, host, lost and unknown."""
    findings = Findings()
    ended = collars["ended_in"].fillna("unknown").replace("", "unknown") if "ended_in" in collars else None
    if ended is None:
        ended = pd.Series("unknown", index=collars.index)
    length = pd.Series(numbers(collars, "length_m"), index=collars.index)
    kinds = ["sulphide", "host", "lost", "unknown"]
    count = ended.value_counts().reindex(kinds, fill_value=0)
    table = pd.DataFrame(
        {
            "ended_in": kinds,
            "holes": count.to_numpy(),
            "share_pct": 100.0 * count.to_numpy() / max(len(collars), 1),
            "length_m": length.groupby(ended).sum().reindex(kinds, fill_value=0.0).to_numpy(),
        }
    )
    if count["sulphide"]:
        findings.warning(
            "hole-end-sulphide",
            f"{count['sulphide']} of {len(collars)} holes ended in sulphide: the base lies deeper than they show",
            "Tonnage below these holes is extrapolated; the body and the proposed classes take it as such.",
        )
    if count["unknown"]:
        findings.warning(
            "hole-end-unknown",
            f"{count['unknown']} of {len(collars)} holes do not say how they ended",
            "Log each hole's end as sulphide, host or lost.",
        )
    return table, findings


def position_table(table: pd.DataFrame, label: str) -> tuple[pd.DataFrame, Findings]:
    """Positions by method: count and standard deviation (least, median, greatest) in m."""
    findings = Findings()
    # a column "method" is how the sample was assayed, not how it was placed
    given = "position_method" in table
    method = table["position_method"].fillna("").replace("", "not given") if given else "not given"
    frame = pd.DataFrame({"method": method, "sigma_m": numbers(table, "position_sigma_m")}, index=table.index)
    grouped = frame.groupby("method")["sigma_m"]
    result = pd.DataFrame(
        {
            "positions": grouped.size(),
            "with_sigma": grouped.count(),
            "sigma_min_m": grouped.min(),
            "sigma_median_m": grouped.median(),
            "sigma_max_m": grouped.max(),
        }
    ).reset_index()
    result.insert(0, "table", label)
    missing = int(frame["sigma_m"].isna().sum())
    if missing:
        findings.warning(
            "position-sigma-missing",
            f"{missing} of {len(table)} positions of {label} come without their uncertainty",
            "Give the standard deviation of each position, or that of its method.",
        )
    return result, findings


def _vertical_sigma(seafloor: Seafloor, x: Floats, y: Floats, sigma: Floats, sigma_grid_m: float) -> Floats:
    """Vertical deviation of collar against grid: the grid's own and what a horizontal error makes on the slope."""
    reach = np.where(np.isfinite(sigma), np.maximum(sigma, 1.0), 1.0)
    east = np.asarray(seafloor.sample(x + reach, y)) - np.asarray(seafloor.sample(x - reach, y))
    north = np.asarray(seafloor.sample(x, y + reach)) - np.asarray(seafloor.sample(x, y - reach))
    slope = np.hypot(np.nan_to_num(east), np.nan_to_num(north)) / (2.0 * reach)
    return np.hypot(sigma_grid_m, slope * np.nan_to_num(sigma))


def _report(
    collars: pd.DataFrame,
    known: NDArray[np.bool_],
    median: float,
    policy: CollarPolicy,
    limit: Floats,
    findings: Findings,
) -> None:
    rows = collars["source_row"] if "source_row" in collars else pd.Series(np.nan, index=collars.index)
    for at in np.flatnonzero(~known):
        findings.warning(
            "collar-off-grid",
            f"Collar {collars['hole_id'].iloc[at]} lies outside the bathymetry, or has no elevation",
            "Check its position, or bring a larger grid.",
            row=rows.iloc[at],
        )
    for at in np.flatnonzero(collars["flagged"].to_numpy()):
        gap = float(collars["dz_after_m"].iloc[at])
        findings.warning(
            "collar-off-seafloor",
            f"Collar {collars['hole_id'].iloc[at]} lies {abs(gap):.2f} m {'above' if gap > 0 else 'below'} "
            f"the seafloor; the limit is {limit[at]:.2f} m",
            "Check position, datum and tide; or set the collar policy to shift_median or snap.",
            row=rows.iloc[at], column="elevation",
        )  # fmt: skip
    count = int(known.sum())
    if count >= 3:
        rest = collars["dz_m"].to_numpy()[known] - median
        spread = 1.4826 * float(np.median(np.abs(rest)))
        # a median that stands out of its own error by three is a common shift, not chance
        if abs(median) > max(0.1, 3.0 * 1.2533 * spread / np.sqrt(count)):
            done = {
                "keep": "nothing was changed",
                "shift_median": f"all collars were moved by {-median:+.2f} m",
                "snap": "each collar was put on the seafloor",
            }[policy]
            message = (
                f"Collars lie {abs(median):.2f} m {'above' if median > 0 else 'below'} the seafloor in the "
                f"median of {count}; {done}"
            )
            if policy == "keep":
                findings.warning("collar-shift", message, "Set the collar policy to shift_median or snap.")
            else:
                findings.note(
                    "collar-shift", message, "The original elevations are kept beside the new ones."
                )


def _summary(before: Floats, after: Floats, limit: Floats) -> pd.DataFrame:
    columns: dict[str, list[float]] = {}
    for label, values in (("before", before), ("after", after)):
        known = values[np.isfinite(values)]
        some = len(known) > 0
        middle = float(np.median(known)) if some else np.nan
        columns[label] = [
            float(len(known)),
            middle,
            float(known.mean()) if some else np.nan,
            float(known.std(ddof=1)) if len(known) > 1 else np.nan,
            1.4826 * float(np.median(np.abs(known - middle))) if some else np.nan,
            float(known.min()) if some else np.nan,
            float(known.max()) if some else np.nan,
            float(np.sum(np.abs(values) > limit)),
        ]
    quantity = [
        "collars", "median_m", "mean_m", "standard_deviation_m", "robust_deviation_m", "least_m", "greatest_m",
        "flagged",
    ]  # fmt: skip
    return pd.DataFrame({"quantity": quantity, **columns})
