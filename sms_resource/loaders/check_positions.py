"""Everything that has a place, against the seafloor and against each other."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.loaders.check_outline import check_outline
from sms_resource.loaders.coordinate_systems import crs_name, parse_crs, same_crs
from sms_resource.loaders.places import counted, file_of, header_of, listed, not_reported, report_rows
from sms_resource.loaders.settings import CheckSettings
from sms_resource.loaders.tables import LoadedData

STEEP = 0.6  # vertical error of a sample on a flank of 30 degrees, per metre of its horizontal error
LONGEST_DREDGE_M = 5000.0


def check_systems(data: LoadedData, settings: CheckSettings, findings: Findings) -> None:
    """Grids, layers and tables of points that are not in the study's coordinate system."""
    study = parse_crs(settings.crs)
    spatial = {
        "bathymetry": data.seafloor,
        "outline": data.outline,
        "exclusions": data.exclusions,
        "base_grid": data.base_grid,
    }
    stated = {role: item.crs for role, item in spatial.items() if item is not None}
    for role, crs in stated.items():
        if parse_crs(crs) is None:
            findings.error(
                "crs-missing",
                f"The {role.replace('_', ' ')} has no coordinate system.",
                'State it with crs = "EPSG:..." in the study.',
                file=data.files.get(role),
            )
    tables = {"collars": data.drill.collars, "surface_samples": data.surface, "base_points": data.base_points}
    for role, frame in tables.items():
        if frame is not None and frame.attrs.get("crs"):
            stated[role] = frame.attrs["crs"]
    for role, crs in stated.items():
        found = parse_crs(crs)
        if study is not None and found is not None and not same_crs(found, study):
            frame = tables.get(role)
            findings.error(
                "crs-different",
                f"The {role.replace('_', ' ')} {'is' if frame is None else 'are'} in {crs_name(found)}, "
                f"the study in {crs_name(study)}.",
                "Bring it into the study's system.",
                file=data.files.get(role) if frame is None else file_of(frame, data.files.get(role)),
            )


def check_positions(data: LoadedData, settings: CheckSettings, findings: Findings) -> None:
    """Collars, surface samples, dredges and points against the grid."""
    collars = data.drill.collars
    if not collars.empty:
        _collars(data, settings, findings)
    # where the whole table is misplaced, what follows from it is not said again
    misplaced = any(
        item.code in ("coordinates-geographic", "coordinates-swapped") and "collars" in item.message
        for item in findings.errors
    )
    if not collars.empty and not misplaced:
        _twins(collars, file_of(collars, data.files.get("collars")), settings, findings)
    if not data.surface.empty:
        _surface(data, settings, findings)
    if not data.dredges.empty:
        _dredges(data, settings, findings)
    if data.base_points is not None and not data.base_points.empty:
        _base_points(data, data.base_points, findings)
    if data.base_grid is not None and data.seafloor is not None:
        _base_grid(data, findings)
    _far_below(data, settings, findings)
    check_outline(data, findings, misplaced)


def _numbers(frame: pd.DataFrame, *names: str) -> list[NDArray[np.float64]]:
    return [frame[name].to_numpy(dtype=np.float64) for name in names]


def _wrong_sign(
    frame: pd.DataFrame, column: str, file: str | None, settings: CheckSettings, findings: Findings
) -> bool:
    """Whether elevations are positive: all of them once, single ones row by row."""
    values = frame[column].to_numpy(dtype=np.float64)
    above = values > 0
    if not settings.under_water or not above.any():
        return False
    rows = frame["source_row"].to_numpy()
    where: dict[str, Any] = {"file": file, "column": header_of(frame, column)}
    if np.nanmedian(values) > 0:
        findings.error(
            "elevation-sign",
            f"{int(above.sum())} of {len(frame)} elevations are positive, above sea level.",
            'Write vertical = "depth" for this file if it holds depths, positive downwards.',
            row=int(rows[above][0]),
            **where,
        )
        return True
    report_rows(
        findings, "error", "elevation-sign", rows[above],
        [f"An elevation of {v:g} m is above sea level; the others are below." for v in values[above]],
        "Correct the sign.", **where,
    )  # fmt: skip
    return True


def _off_grid(
    frame: pd.DataFrame, x: NDArray[np.float64], y: NDArray[np.float64], data: LoadedData, what: str, code: str,
    severity: Any, file: str | None, findings: Findings,
) -> bool:  # fmt: skip
    """Places outside the grid; whether the whole table is misplaced, in degrees or with its columns exchanged."""
    grid = data.seafloor
    assert grid is not None
    west, south, east, north = grid.bounds
    given = np.isfinite(x) & np.isfinite(y)
    off = given & ~((x >= west) & (x <= east) & (y >= south) & (y <= north))
    rows = frame["source_row"].to_numpy()
    names = [header_of(frame, name) for name in ("easting", "northing")]
    where: dict[str, Any] = {"file": file, "column": ", ".join(names)}
    if off.sum() > 0.5 * given.sum():
        if (np.abs(x[given]) <= 360).all() and (np.abs(y[given]) <= 90).all():
            findings.error(
                "coordinates-geographic",
                f"The positions of the {what} seem to be degrees of longitude and latitude.",
                "Project them into the study's system.",
                row=int(rows[off][0]),
                **where,
            )
            return True
        swapped = (y >= west) & (y <= east) & (x >= south) & (x <= north)
        if swapped.sum() > 0.5 * given.sum():
            findings.error(
                "coordinates-swapped",
                f"Easting and northing of the {what} seem to be exchanged.",
                "Exchange the two columns in the study.",
                row=int(rows[off][0]),
                **where,
            )
            return True
    report_rows(
        findings, severity, code, rows[off],
        [f"The place {a:.1f}, {b:.1f} is outside the grid of the seafloor." for a, b in zip(x[off], y[off])],
        f"Check the position, and that {what} and grid are in one coordinate system.", **where,
    )  # fmt: skip
    return bool(off.sum() == given.sum() and given.any())


def _tolerance(
    data: LoadedData, x: NDArray[np.float64], y: NDArray[np.float64], settings: CheckSettings
) -> NDArray[np.float64]:
    """The larger of the set tolerance and three standard errors of the grid."""
    grid = data.seafloor
    assert grid is not None
    sigma = grid.sample_uncertainty(x, y) if grid.uncertainty is not None else np.full(len(x), np.nan)
    sigma = np.where(np.isfinite(sigma), sigma, settings.grid_sigma_m)
    return np.maximum(settings.collar_tolerance_m, 3.0 * sigma)


def _collars(data: LoadedData, settings: CheckSettings, findings: Findings) -> None:
    collars = data.drill.collars
    file = file_of(collars, data.files.get("collars"))
    wrong = _wrong_sign(collars, "elevation", file, settings, findings)
    if data.seafloor is None:
        return
    x, y, z = _numbers(collars, "easting", "northing", "elevation")
    if _off_grid(collars, x, y, data, "collars", "collar-off-grid", "error", file, findings) or wrong:
        return
    dz = z - data.seafloor.sample(x, y)
    rows, names = collars["source_row"].to_numpy(), collars["hole_id"].to_numpy(dtype=object)
    column = header_of(collars, "elevation")
    west, south, east, north = data.seafloor.bounds
    hole_in_grid = np.isnan(dz) & np.isfinite(z) & (x >= west) & (x <= east) & (y >= south) & (y <= north)
    report_rows(
        findings, "warning", "collar-on-nodata", rows[hole_in_grid],
        [f"Under hole {name} the grid of the seafloor has no value." for name in names[hole_in_grid]],
        "Mend the grid there, or use another one.", file=file, column=column,
    )  # fmt: skip
    known = np.isfinite(dz)
    shift = float(np.median(dz[known])) if known.sum() > 4 else 0.0
    if abs(shift) > settings.collar_tolerance_m:
        findings.warning(
            "collars-shifted",
            f"Half of the collars are {abs(shift):.2f} m or more {'above' if shift > 0 else 'below'} the seafloor: "
            "holes and grid do not share one vertical datum, or a tide was not taken off.",
            'Mend the datum, or set position.collars = "shift_median".',
            file=file,
            column=column,
        )
    else:
        shift = 0.0
    # what all collars have in common has one finding; each hole's own has its own
    off = np.abs(dz - shift) > _tolerance(data, x, y, settings)
    far = np.abs(dz) > settings.far_below_m
    common = f", {{:.2f}} m off the common shift of {shift:.2f} m" if shift else ""
    for at, severity in ((off & ~far, "warning"), (far, "error")):
        report_rows(
            findings, "error" if severity == "error" else "warning", "collar-off-seafloor", rows[at],
            [
                f"The collar of hole {n} is {abs(v):.2f} m {'above' if v > 0 else 'below'} the seafloor"
                f"{common.format(abs(v - shift))}."
                for n, v in zip(names[at], dz[at])
            ],
            "Check position and elevation; position.collars offers to shift or to snap.", file=file, column=column,
        )  # fmt: skip


def _twins(collars: pd.DataFrame, file: str | None, settings: CheckSettings, findings: Findings) -> None:
    from scipy.spatial import cKDTree

    good = collars[["easting", "northing"]].notna().all(axis=1).to_numpy()
    table = collars[good & ~collars["hole_id"].duplicated().to_numpy()]
    if len(table) < 2:
        return
    places = table[["easting", "northing"]].to_numpy(dtype=np.float64)
    pairs = sorted(cKDTree(places).query_pairs(settings.twin_distance_m))
    names, rows = table["hole_id"].to_numpy(dtype=object), table["source_row"].to_numpy()
    apart = [float(np.hypot(*(places[i] - places[j]))) for i, j in pairs]
    same = [k for k, distance in enumerate(apart) if distance < 0.01]
    report_rows(
        findings, "warning", "collar-same-place", [int(rows[pairs[k][1]]) for k in same],
        [f"Holes {names[pairs[k][0]]} and {names[pairs[k][1]]} start at the same place." for k in same],
        "Check the positions; a twin is a metre or more away.", file=file, column=header_of(collars, "easting"),
    )  # fmt: skip
    twins = [f"{names[i]} and {names[j]} ({d:.1f} m)" for (i, j), d in zip(pairs, apart) if d >= 0.01]
    if twins:
        findings.note(
            "hole-twins",
            f"{counted(len(twins), 'pair')} of holes within {settings.twin_distance_m:g} m: {listed(twins)}.",
            "Twins cluster: the means are declustered.",
            file=file,
        )


def _surface(data: LoadedData, settings: CheckSettings, findings: Findings) -> None:
    frame = data.surface
    file = file_of(frame, data.files.get("surface_samples"))
    for name in ("easting", "northing", "elevation"):
        blank = frame[name].isna().to_numpy() & not_reported(frame, name)
        report_rows(
            findings, "warning", "sample-without-place", frame["source_row"].to_numpy()[blank],
            f"The sample has no {name}.", "Complete the row; without a place it is shown in tables only.",
            file=file, column=header_of(frame, name),
        )  # fmt: skip
    wrong = _wrong_sign(frame, "elevation", file, settings, findings)
    if data.seafloor is None:
        return
    x, y, z = _numbers(frame, "easting", "northing", "elevation")
    if _off_grid(frame, x, y, data, "samples", "sample-off-grid", "warning", file, findings) or wrong:
        return
    dz = z - data.seafloor.sample(x, y)
    (sigma,) = _numbers(frame, "position_sigma_m")
    allowed = _tolerance(data, x, y, settings) + STEEP * np.nan_to_num(sigma)
    rows, column = frame["source_row"].to_numpy(), header_of(frame, "elevation")
    far = np.abs(dz) > settings.far_below_m
    for code, at, word in (
        ("sample-above-seafloor", dz > allowed, "above"),
        ("sample-below-seafloor", dz < -allowed, "below"),
    ):
        for part, is_far in ((at & ~far, False), (at & far, True)):
            report_rows(
                findings, "error" if is_far else "warning", code, rows[part],
                [f"The sample is {abs(v):.1f} m {word} the seafloor." for v in dz[part]],
                "Check its position and elevation.", file=file, column=column,
            )  # fmt: skip


def _dredges(data: LoadedData, settings: CheckSettings, findings: Findings) -> None:
    frame = data.dredges
    file = file_of(frame, data.files.get("dredges"))
    for name in ("start_elevation", "end_elevation"):
        _wrong_sign(frame, name, file, settings, findings)
    x0, y0, x1, y1 = _numbers(frame, "start_easting", "start_northing", "end_easting", "end_northing")
    length = np.hypot(x1 - x0, y1 - y0)
    rows = frame["source_row"].to_numpy()
    twice = frame["dredge_id"].duplicated().to_numpy() & (frame["dredge_id"] != "").to_numpy()
    report_rows(
        findings, "error", "sample-duplicate", rows[twice],
        [f"Dredge “{n}” is there twice." for n in frame["dredge_id"].to_numpy(dtype=object)[twice]],
        "Give each track a name of its own.", file=file, column=header_of(frame, "dredge_id"),
    )  # fmt: skip
    bad = (length < 1.0) | (length > LONGEST_DREDGE_M)
    report_rows(
        findings, "warning", "dredge-track", rows[bad],
        [f"The track is {v:.0f} m long." for v in length[bad]],
        "A dredge is a track: write where it touched down and where it left the bottom.",
        file=file, column=header_of(frame, "end_easting"),
    )  # fmt: skip


def _base_points(data: LoadedData, points: pd.DataFrame, findings: Findings) -> None:
    if data.seafloor is None:
        return
    file = file_of(points, data.files.get("base_points"))
    x, y, z = _numbers(points, "easting", "northing", "elevation")
    dz = z - data.seafloor.sample(x, y)
    above = dz > 0
    report_rows(
        findings, "error", "base-above-seafloor", points["source_row"].to_numpy()[above],
        [f"The point is {v:.2f} m above the seafloor." for v in dz[above]],
        "The base of the sulphide lies below the seafloor; check sign and datum.",
        file=file, column=header_of(points, "elevation"),
    )  # fmt: skip


def _base_grid(data: LoadedData, findings: Findings) -> None:
    grid, seafloor = data.base_grid, data.seafloor
    assert grid is not None and seafloor is not None
    x, y = grid.mesh()
    dz = grid.values - seafloor.sample(x, y)
    known = np.isfinite(dz)
    file = data.files.get("base_grid")
    if not known.any():
        findings.error(
            "base-off-grid", "The grid of the base lies nowhere under the seafloor's.",
            "Check that both are in one coordinate system.", file=file,
        )  # fmt: skip
    elif (dz[known] > 0).any():
        share = 100.0 * float((dz[known] > 0).mean())
        findings.add(
            "error" if share > 50 else "warning",
            "base-above-seafloor",
            f"{share:.1f} % of the base lies above the seafloor, by up to {dz[known].max():.2f} m.",
            "Check sign and datum; the base is cut at the seafloor.",
            file=file,
        )


def _far_below(data: LoadedData, settings: CheckSettings, findings: Findings) -> None:
    """Samples deeper below the seafloor than holes of this kind reach."""
    for role in ("runs", "assays"):
        frame: pd.DataFrame = getattr(data.drill, role)
        if frame.empty:
            continue
        (end,) = _numbers(frame, "to_m")
        deep = end > settings.far_below_m
        report_rows(
            findings, "warning", "sample-far-below", frame["source_row"].to_numpy()[deep],
            [f"The interval ends {v:g} m below the seafloor." for v in end[deep]],
            "Check that the depth is in metres below the seafloor, and not below the sea surface.",
            file=file_of(frame, data.files.get(role)), column=header_of(frame, "to_m"),
        )  # fmt: skip
