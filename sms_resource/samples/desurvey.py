"""Where a depth of a hole lies: minimum curvature between survey stations."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from sms_resource.findings import Findings
from sms_resource.samples.intervals import lines, names, numbers

Floats = NDArray[np.float64]

# A bend between two stations above which a station is more likely a slip of the pen than a hole (degrees).
DOGLEG_WARNING_DEGREES = 30.0
# Drill strings that were measured were up to this far off the vertical, so an assumed one may be too.
POSSIBLE_TILT_DEGREES = 10.0


def directions(azimuth: ArrayLike, dip: ArrayLike) -> Floats:
    """Unit vectors (n, 3) east, north, up from azimuth (clockwise from north) and dip (negative down), degrees."""
    a = np.radians(np.asarray(azimuth, dtype=np.float64))
    d = np.radians(np.asarray(dip, dtype=np.float64))
    return np.stack([np.sin(a) * np.cos(d), np.cos(a) * np.cos(d), np.sin(d)], axis=-1)


def minimum_curvature(depth: ArrayLike, azimuth: ArrayLike, dip: ArrayLike) -> Floats:
    """Offsets of the stations of one hole from its first station.

    Parameters
    ----------
    depth, azimuth, dip : array-like, shape (n,)
        Depth along the hole (m, ascending), azimuth (degrees clockwise from grid north), dip (degrees, negative
        down).

    Returns
    -------
    ndarray, shape (n, 3)
        Offsets east, north, up in m; the first row is zero.

    Raises
    ------
    ValueError
        If the depths do not ascend or the lengths differ.

    Notes
    -----
    Each step is an arc of a circle that touches both directions: Sawaryn & Thorogood (2005), SPE Drilling &
    Completion 20(1), 24-36.
    """
    along = np.asarray(depth, dtype=np.float64)
    tangent = directions(azimuth, dip)
    if tangent.shape != (len(along), 3):
        raise ValueError(f"depth has {len(along)} stations, azimuth and dip give {tangent.shape[0]}")
    if np.any(np.diff(along) <= 0):
        raise ValueError("depth must ascend from station to station")
    offsets = np.zeros((len(along), 3))
    if len(along) > 1:
        steps = _arc_chord(np.diff(along), tangent[:-1], tangent[1:], _angle(tangent[:-1], tangent[1:]))
        offsets[1:] = np.cumsum(steps, axis=0)
    return offsets


@dataclass(frozen=True)
class HolePaths:
    """The course of every hole in space.

    Attributes
    ----------
    holes : ndarray of str, shape (h,)
        Holes in order.
    assumed_vertical : tuple of str
        Holes with neither a survey nor a direction at the collar.
    table : DataFrame
        hole_id, direction ("measured", "collar" or "assumed vertical"), stations, length_m,
        lateral_m (how far the end lies from below the collar) and possible_lateral_m (how far it may lie if an
        assumed-vertical hole leans by 10 degrees).
    findings : Findings
    """

    holes: NDArray[np.object_]
    assumed_vertical: tuple[str, ...]
    table: pd.DataFrame
    findings: Findings
    _hole: NDArray[np.int64] = field(repr=False)
    _depth: Floats = field(repr=False)
    _tangent: Floats = field(repr=False)
    _position: Floats = field(repr=False)

    def positions(self, hole_ids: ArrayLike, depths: ArrayLike) -> Floats:
        """Easting, northing, elevation (n, 3) of depths (m) along holes; NaN for a hole that is not known."""
        wanted = np.atleast_1d(np.asarray(hole_ids, dtype=object))
        depth = np.atleast_1d(np.asarray(depths, dtype=np.float64))
        result = np.full((len(wanted), 3), np.nan)
        code = pd.Index(self.holes).get_indexer(pd.Index(wanted))
        known = np.flatnonzero((code >= 0) & np.isfinite(depth))
        if len(known) == 0 or len(self._depth) == 0:
            return result
        code, depth = code[known], depth[known]
        # an exact integer key (hole, rank of depth) finds the station above without a loop over holes
        levels = np.unique(self._depth)
        width = len(levels) + 1
        station_key = self._hole * width + np.searchsorted(levels, self._depth)
        rank = np.maximum(np.searchsorted(levels, depth, side="right") - 1, 0)
        station = np.searchsorted(station_key, code * width + rank, side="right") - 1
        last = np.append(self._hole[1:] != self._hole[:-1], True)[station]
        after = np.where(last, station, np.minimum(station + 1, len(self._depth) - 1))
        before_tangent, after_tangent = self._tangent[station], self._tangent[after]
        beyond = depth - self._depth[station]
        step = np.where(last, 1.0, self._depth[after] - self._depth[station])
        total = _angle(before_tangent, after_tangent)
        share = np.where(last, 0.0, beyond / step)
        here = _between(before_tangent, after_tangent, total, share)
        result[known] = self._position[station] + _arc_chord(beyond, before_tangent, here, total * share)
        return result

    def trace(self, hole_id: str, step_m: float = 0.5) -> pd.DataFrame:
        """Depth, easting, northing, elevation along one hole from its collar to its end."""
        row = self.table.loc[self.table["hole_id"] == hole_id]
        if row.empty:
            raise ValueError(f"hole {hole_id!r} has no collar")
        length = float(row["length_m"].iloc[0])
        depth = np.unique(np.append(np.arange(0.0, max(length, 0.0), step_m), max(length, 0.0)))
        xyz = self.positions(np.repeat(np.array([hole_id], dtype=object), len(depth)), depth)
        return pd.DataFrame(
            {"depth_m": depth, "easting": xyz[:, 0], "northing": xyz[:, 1], "elevation": xyz[:, 2]}
        )

    def __repr__(self) -> str:
        return f"HolePaths({len(self.holes)} holes, {len(self.assumed_vertical)} assumed vertical)"


def hole_paths(collars: pd.DataFrame, surveys: pd.DataFrame | None = None) -> HolePaths:
    """Paths of all holes from collars and surveys.

    Parameters
    ----------
    collars : DataFrame
        hole_id, easting, northing, elevation, length_m, azimuth, dip (NaN where not given).
    surveys : DataFrame, optional
        hole_id, depth_m, azimuth, dip.

    Notes
    -----
    Above its first station a hole keeps the direction of that station, or that of its collar where given; below its
    last station it goes straight on. A hole with neither is vertical and is named in ``assumed_vertical``.
    """
    findings = Findings()
    collars = collars.drop_duplicates("hole_id", keep="first").sort_values("hole_id", kind="stable")
    holes = names(collars["hole_id"])
    stations = _stations(collars, surveys, holes, findings)
    code, depth = stations["hole"].to_numpy(np.int64), stations["depth"].to_numpy(np.float64)
    tangent = directions(stations["azimuth"], stations["dip"])

    collar_xyz = np.column_stack([numbers(collars, name) for name in ("easting", "northing", "elevation")])
    same = np.append(False, code[1:] == code[:-1])
    step = np.zeros((len(code), 3))
    inside = np.flatnonzero(same)
    if len(inside):
        bend = _angle(tangent[inside - 1], tangent[inside])
        step[inside] = _arc_chord(
            depth[inside] - depth[inside - 1], tangent[inside - 1], tangent[inside], bend
        )
        for at in np.flatnonzero(np.degrees(bend) > DOGLEG_WARNING_DEGREES):
            where = inside[at]
            findings.warning(
                "survey-dogleg",
                f"Hole {holes[code[where]]} bends {np.degrees(bend[at]):.0f} degrees between "
                f"{depth[where - 1]:g} and {depth[where]:g} m",
                "Check azimuth and dip of these stations.",
                row=_row(stations["source_row"].iloc[where]),
            )
    running = np.cumsum(step, axis=0)
    first = np.flatnonzero(~same)
    running -= running[first][np.cumsum(~same) - 1] if len(code) else 0.0
    position = collar_xyz[code] + running if len(code) else np.empty((0, 3))

    how = stations.groupby("hole")["how"].last().reindex(range(len(holes)))
    vertical = tuple(str(hole) for hole, kind in zip(holes, how) if kind == "assumed vertical")
    paths = HolePaths(holes, vertical, pd.DataFrame(), findings, code, depth, tangent, position)
    table = _path_table(paths, collars, how, stations)
    if vertical:
        reach = table.loc[table["direction"] == "assumed vertical", "possible_lateral_m"].max()
        findings.warning(
            "survey-assumed-vertical",
            f"{len(vertical)} of {len(holes)} holes have no measured direction and are assumed vertical; "
            f"leaning {POSSIBLE_TILT_DEGREES:g} degrees, the deepest would end {reach:.1f} m to the side",
            "Give surveys, or azimuth and dip at the collar, where they were measured.",
        )
    return HolePaths(holes, vertical, table, findings, code, depth, tangent, position)


def _stations(
    collars: pd.DataFrame, surveys: pd.DataFrame | None, holes: NDArray[np.object_], findings: Findings
) -> pd.DataFrame:
    """Stations of all holes by hole and depth, each hole with one at depth zero."""
    index = pd.Index(holes)
    collar_dip, collar_azimuth = numbers(collars, "dip"), numbers(collars, "azimuth")
    collar_rows = (
        collars["source_row"].to_numpy() if "source_row" in collars else np.full(len(collars), np.nan)
    )
    at_collar = pd.DataFrame(
        {
            "hole": np.arange(len(holes)), "depth": 0.0, "azimuth": collar_azimuth, "dip": collar_dip,
            "how": "collar", "source_row": collar_rows,
        }
    )  # fmt: skip
    at_collar = at_collar.loc[np.isfinite(collar_dip)]
    measured = pd.DataFrame(columns=at_collar.columns).astype(at_collar.dtypes.to_dict())
    if surveys is not None and len(surveys):
        measured = pd.DataFrame(
            {
                "hole": index.get_indexer(pd.Index(names(surveys["hole_id"]))),
                "depth": numbers(surveys, "depth_m"),
                "azimuth": numbers(surveys, "azimuth"),
                "dip": numbers(surveys, "dip"),
                "how": "measured",
                "source_row": surveys["source_row"].to_numpy() if "source_row" in surveys else np.nan,
            }
        )
        for row in lines(surveys.loc[(measured["hole"] < 0).to_numpy()]):
            findings.error(
                "assay-without-hole",
                f"surveys: hole {row.hole_id} has no collar",
                "Add the collar, or correct the hole name.",
                row=_row(getattr(row, "source_row", None)),
            )
        measured = measured.loc[measured["hole"] >= 0]
    at_collar = _checked(at_collar, holes, "collar", findings)
    measured = _checked(measured, holes, "survey", findings)
    doubles = measured.duplicated(["hole", "depth"], keep="first")
    for row in lines(measured.loc[doubles]):
        findings.error(
            "survey-double",
            f"Hole {holes[row.hole]} has two stations at {row.depth:g} m",
            "Keep one of them.",
            row=_row(row.source_row),
        )
    measured = measured.loc[~doubles]
    # a station measured at depth zero replaces the direction noted at the collar
    at_zero = measured.loc[measured["depth"] <= 0, "hole"]
    at_collar = at_collar.loc[~at_collar["hole"].isin(at_zero)]
    started = set(at_collar["hole"]) | set(at_zero)
    first = measured.sort_values(["hole", "depth"]).drop_duplicates("hole")
    lead = first.loc[~first["hole"].isin(started)].assign(depth=0.0)
    none = np.setdiff1d(np.arange(len(holes)), np.array(sorted(started | set(lead["hole"])), dtype=int))
    straight = pd.DataFrame(
        {
            "hole": none, "depth": 0.0, "azimuth": 0.0, "dip": -90.0,
            "how": "assumed vertical", "source_row": np.nan,
        }
    )  # fmt: skip
    parts = [part for part in (at_collar, lead, straight, measured) if len(part)]
    if not parts:
        return at_collar
    return pd.concat(parts, ignore_index=True).sort_values(
        ["hole", "depth"], kind="stable", ignore_index=True
    )


def _checked(
    stations: pd.DataFrame, holes: NDArray[np.object_], what: str, findings: Findings
) -> pd.DataFrame:
    """Stations that can be used; the others become findings."""
    depth, dip = stations["depth"].to_numpy(np.float64), stations["dip"].to_numpy(np.float64)
    azimuth = stations["azimuth"].to_numpy(np.float64)
    upward = dip > 0
    with np.errstate(invalid="ignore"):
        lost = ~np.isfinite(depth) | (depth < 0) | ~np.isfinite(dip) | (np.abs(dip) > 90)
        lost |= (np.abs(azimuth) > 360) | (~np.isfinite(azimuth) & (np.abs(dip) < 89.99))
    for at in np.flatnonzero(upward & ~lost):
        findings.error(
            "survey-dip-sign",
            f"{what}: hole {holes[stations['hole'].iloc[at]]} has a dip of {dip[at]:g} degrees, which goes up",
            "A hole that goes down has a negative dip: -90 is vertical.",
            row=_row(stations["source_row"].iloc[at]), column="dip",
        )  # fmt: skip
    for at in np.flatnonzero(lost):
        findings.error(
            "survey-angle",
            f"{what}: hole {holes[stations['hole'].iloc[at]]} has depth {depth[at]:g} m, azimuth "
            f"{azimuth[at]:g}, dip {dip[at]:g} degrees",
            "Give a depth, a dip from -90 to 0 and, unless the hole is vertical, an azimuth from 0 to 360.",
            row=_row(stations["source_row"].iloc[at]),
        )
    return stations.loc[~lost].assign(azimuth=np.nan_to_num(azimuth[~lost]))


def _path_table(
    paths: HolePaths, collars: pd.DataFrame, how: pd.Series, stations: pd.DataFrame
) -> pd.DataFrame:
    length = np.nan_to_num(numbers(collars, "length_m"))
    end = paths.positions(paths.holes, length)
    start = paths.positions(paths.holes, np.zeros(len(length)))
    lateral = np.hypot(end[:, 0] - start[:, 0], end[:, 1] - start[:, 1])
    count = stations.loc[stations["how"] == "measured"].groupby("hole")["depth"].nunique()
    vertical = (how == "assumed vertical").to_numpy()
    return pd.DataFrame(
        {
            "hole_id": paths.holes,
            "direction": how.to_numpy(),
            "stations": count.reindex(range(len(paths.holes)), fill_value=0).to_numpy(),
            "length_m": length,
            "lateral_m": lateral,
            "possible_lateral_m": np.where(
                vertical, length * np.sin(np.radians(POSSIBLE_TILT_DEGREES)), lateral
            ),
        }
    )


def _angle(first: Floats, second: Floats) -> Floats:
    """Angle between unit vectors in radians, exact for small angles too."""
    return 2.0 * np.arctan2(np.linalg.norm(second - first, axis=-1), np.linalg.norm(second + first, axis=-1))


def _arc_chord(length: Floats, first: Floats, second: Floats, angle: Floats) -> Floats:
    """Chord of an arc of ``length`` that turns from ``first`` to ``second`` through ``angle``."""
    half = np.asarray(angle) / 2.0
    with np.errstate(invalid="ignore", divide="ignore"):
        ratio = np.where(half < 1e-6, 1.0 + half**2 / 3.0, np.tan(half) / half)
    return (np.asarray(length) * ratio / 2.0)[:, None] * (first + second)


def _between(first: Floats, second: Floats, angle: Floats, share: Floats) -> Floats:
    """Direction at a share of the way along the arc from ``first`` to ``second``."""
    sine = np.sin(angle)
    flat = sine < 1e-9
    safe = np.where(flat, 1.0, sine)
    a = np.where(flat, 1.0 - share, np.sin((1.0 - share) * angle) / safe)
    b = np.where(flat, share, np.sin(share * angle) / safe)
    return a[:, None] * first + b[:, None] * second


def _row(value: object) -> int | None:
    number = pd.to_numeric(pd.Series([value]), errors="coerce").iloc[0]
    return None if pd.isna(number) else int(number)
