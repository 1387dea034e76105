"""Whether collars would fit the bathymetry better elsewhere in plan, and whether that is more than chance."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.samples.intervals import numbers
from sms_resource.samples.position import Seafloor
from sms_resource.units import chance

Floats = NDArray[np.float64]
Verdict = Literal["none", "chance", "not resolved", "shift"]

LEAST_MOVE_M = 2.0
LESS_SPREAD = 0.67  # a third less spread is worth a second look
SIGNIFICANCE = 0.01
REPEATS = 199
SAME_SIDE = 0.95  # share of redrawn collars whose best move goes the same way
# Scatter of the best move of redrawn collars, as a share of the reach, beyond which a direction is not resolved; a move
# that could lie anywhere within the reach has 0.58 of it (standard deviation of a uniform distribution).
OPEN_SHARE = 0.25


@dataclass(frozen=True)
class PlanShift:
    """What the fit of collars to the bathymetry says of a move in plan.

    Attributes
    ----------
    table : DataFrame
        From `horizontal_fit`.
    verdict : "none", "chance", "not resolved" or "shift"
        No better place; a better one, by no more than chance gives; one that the relief does not fix; or a move.
    east_m, north_m : float
        The best move of the collars (0 where the verdict is "none").
    p_value : float
        Chance of so good a fit where nothing is moved; NaN where it was not worked out.
    weak_azimuth, weak_sigma_m : float
        Direction (degrees from north, 0 to 180) in which the best move is fixed least, and its standard deviation there.
    findings : Findings
    """

    table: pd.DataFrame
    verdict: Verdict
    east_m: float
    north_m: float
    p_value: float
    weak_azimuth: float
    weak_sigma_m: float
    findings: Findings


def plan_shift(
    collars: pd.DataFrame, seafloor: Seafloor, seed: int, *, reach_m: float = 20.0, step_m: float = 1.0
) -> PlanShift:
    """Look for a move in plan that brings collars onto the seafloor, and hold it against chance and the relief.

    Parameters
    ----------
    collars : DataFrame
        easting, northing, elevation in m.
    seafloor : object with ``sample(x, y)``
    seed : int
        Of the permutations and the bootstrap.
    reach_m, step_m : float
        Moves are tried east and north up to the reach, a step apart.

    Returns
    -------
    PlanShift

    Notes
    -----
    A move is worth a second look where it takes a third of the spread. Chance: the differences of collar and seafloor are
    permuted among the holes, which breaks any tie to the relief and keeps their spread, and the best of all moves is
    sought again (Good 2005, Permutation, parametric and bootstrap tests of hypotheses). Relief: collars are drawn again
    with replacement (Efron & Tibshirani 1993); where their best moves do not go the same way, scatter widely along some
    direction, or the best lies at the edge of the reach, the relief does not fix the move. A plane flank fixes none: a
    move along its strike changes nothing, one down its slope is the same as a change of elevation.
    """
    grid = _moves(reach_m, step_m)
    table = horizontal_fit(collars, seafloor, reach_m=reach_m, step_m=step_m)
    here = table.loc[(table["shift_east_m"] == 0) & (table["shift_north_m"] == 0)]
    nothing = PlanShift(table, "none", 0.0, 0.0, np.nan, np.nan, np.nan, Findings())
    if table.empty or here.empty:
        return nothing
    best, now = table.iloc[0], float(here["spread_m"].iloc[0])
    move = np.array([best["shift_east_m"], best["shift_north_m"]], dtype=np.float64)
    if np.hypot(*move) < LEAST_MOVE_M or not float(best["spread_m"]) < LESS_SPREAD * now:
        return nothing
    difference, grid = _differences(collars, seafloor, grid)
    rng = np.random.default_rng(seed)
    p_value = _chance(difference, grid, float(best["spread_m"]), rng)
    tries = np.array([grid[_best(difference[:, draw])] for draw in _draws(rng, difference.shape[1])])
    scatter, axes = np.linalg.eigh(np.cov(tries.T))
    sigma, weak = float(np.sqrt(max(scatter[1], 0.0))), axes[:, 1]
    azimuth = float(np.degrees(np.arctan2(weak[0], weak[1])) % 180.0)
    at_edge = bool(np.abs(move).max() > reach_m - step_m / 2)
    same_side = float(np.mean(tries @ move > 0.0))
    fixed = not at_edge and same_side >= SAME_SIDE and sigma <= OPEN_SHARE * reach_m
    verdict: Verdict = "chance" if p_value > SIGNIFICANCE else "shift" if fixed else "not resolved"
    found = PlanShift(table, verdict, float(move[0]), float(move[1]), p_value, azimuth, sigma, Findings())
    _report(found, now, at_edge, reach_m)
    return found


def _report(found: PlanShift, now: float, at_edge: bool, reach_m: float) -> None:
    distance = float(np.hypot(found.east_m, found.north_m))
    where = f"{distance:.0f} m away ({found.east_m:+.0f} m east, {found.north_m:+.0f} m north)"
    fit = f"the spread falls from {now:.2f} to {found.table['spread_m'].iloc[0]:.2f} m"
    if found.verdict == "shift":
        found.findings.warning(
            "collar-shift-plan",
            f"Collars fit the bathymetry better {where}: {fit}, more than chance gives ({chance(found.p_value)})",
            "Check the datum and the navigation of both; nothing was moved.",
        )
        return
    if found.verdict == "chance":
        why = f"the best of so many moves gives as much by chance ({chance(found.p_value)})"
    else:
        why = (
            f"the best fit lies at the edge of the {reach_m:.0f} m that were searched"
            if at_edge
            else f"with other draws of the same collars the best move scatters by {found.weak_sigma_m:.0f} m along "
            f"azimuth {found.weak_azimuth:.0f}"
        )
    found.findings.note(
        "collar-shift-plan-open",
        f"Whether collars are off in plan is not resolvable: they fit better {where}, {fit}, but {why}",
        "Check the datum and the navigation of both; a plane flank cannot show a move, and few collars hardly can.",
    )


def horizontal_fit(
    collars: pd.DataFrame, seafloor: Seafloor, *, reach_m: float = 20.0, step_m: float = 1.0
) -> pd.DataFrame:
    """Spread of collar minus seafloor when all collars move together in plan.

    Holes and bathymetry are often metres apart before they are matched. A clear minimum of the spread away from
    zero says so; on a smooth or flat floor there is none, and nothing can be said.

    Returns
    -------
    DataFrame
        shift_east_m, shift_north_m, spread_m (1.4826 x median absolute deviation), median_m, collars; sorted by
        spread, best first. The shift is what would be added to the collars.
    """
    x, y, z = (numbers(collars, name) for name in ("easting", "northing", "elevation"))
    east, north = _moves(reach_m, step_m).T
    difference = z[None, :] - _floor(seafloor, x, y, east, north)
    count = np.isfinite(difference).sum(axis=1)
    enough = count >= max(3, int(0.8 * len(x)))
    difference, east, north, count = difference[enough], east[enough], north[enough], count[enough]
    some = len(difference) > 0
    median = np.nanmedian(difference, axis=1) if some else np.empty(0)
    spread = _spread(difference) if some else np.empty(0)
    table = pd.DataFrame(
        {
            "shift_east_m": east,
            "shift_north_m": north,
            "spread_m": spread,
            "median_m": median,
            "collars": count,
        }
    )
    return table.sort_values("spread_m", kind="stable").reset_index(drop=True)


def _moves(reach_m: float, step_m: float) -> Floats:
    """Moves to try, (m, 2) east and north."""
    steps = np.arange(-reach_m, reach_m + step_m / 2, step_m)
    east, north = np.meshgrid(steps, steps)
    return np.column_stack([east.ravel(), north.ravel()])


def _floor(seafloor: Seafloor, x: Floats, y: Floats, east: Floats, north: Floats) -> Floats:
    """Seafloor below each collar (n,) after each move (m,), as (m, n)."""
    sampled = seafloor.sample((x[None, :] + east[:, None]).ravel(), (y[None, :] + north[:, None]).ravel())
    return np.asarray(sampled, dtype=np.float64).reshape(len(east), len(x))


def _differences(collars: pd.DataFrame, seafloor: Seafloor, grid: Floats) -> tuple[Floats, Floats]:
    """Collar minus seafloor, (m, n), and the moves; of the collars with a seafloor unmoved, and moves that keep them."""
    x, y, z = (numbers(collars, name) for name in ("easting", "northing", "elevation"))
    difference = z[None, :] - _floor(seafloor, x, y, grid[:, 0], grid[:, 1])
    still = int(np.flatnonzero((grid == 0).all(axis=1))[0])
    difference = difference[:, np.isfinite(difference[still])]
    enough = np.isfinite(difference).sum(axis=1) >= max(3, int(0.8 * difference.shape[1]))
    return difference[enough], grid[enough]


def _spread(difference: Floats) -> Floats:
    """1.4826 x median absolute deviation of each row; NaN left out."""
    median = np.median if np.isfinite(difference).all() else np.nanmedian
    middle = median(difference, axis=1, keepdims=True)
    return np.asarray(1.4826 * median(np.abs(difference - middle), axis=1), dtype=np.float64)


def _best(difference: Floats) -> int:
    return int(np.nanargmin(_spread(difference)))


def _draws(rng: np.random.Generator, count: int) -> NDArray[np.int64]:
    return rng.integers(0, count, (REPEATS, count))


def _chance(difference: Floats, grid: Floats, reached: float, rng: np.random.Generator) -> float:
    """Share of permutations whose best move leaves no more spread than was reached."""
    still = int(np.flatnonzero((grid == 0).all(axis=1))[0])
    rest = difference[still]
    relief = difference - rest  # how the floor differs after each move
    good = sum(float(np.nanmin(_spread(relief + rng.permutation(rest)))) <= reached for _ in range(REPEATS))
    return (1 + good) / (1 + REPEATS)
