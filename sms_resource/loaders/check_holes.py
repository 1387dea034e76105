"""Collars, surveys and recovery."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from sms_resource.findings import Findings
from sms_resource.loaders.places import (
    counted,
    file_of,
    header_of,
    in_rows,
    listed,
    not_reported,
    report_rows,
)
from sms_resource.loaders.settings import CheckSettings
from sms_resource.loaders.tables import LoadedData

FLAT_DIP = -45.0  # seafloor rigs drill steeply
SHARP_TURN_DEG = 15.0
SIGMA_DOUBTED_M = 100.0


def check_collars(data: LoadedData, settings: CheckSettings, findings: Findings) -> None:
    """Each hole once, with a place, a length and a known end."""
    collars = data.drill.collars
    if collars.empty:
        return
    file = file_of(collars, data.files.get("collars"))
    rows = collars["source_row"].to_numpy()
    names = collars["hole_id"].to_numpy(dtype=object)
    twice = collars["hole_id"].duplicated().to_numpy() & (names != "")
    firsts = dict(zip(names[::-1], rows[::-1]))
    report_rows(
        findings, "error", "collar-duplicate", rows[twice],
        [f"Hole “{name}” has a collar in row {firsts[name]} already." for name in names[twice]],
        "Keep one collar for each hole; a redrilled hole has a name of its own.",
        file=file, column=header_of(collars, "hole_id"),
    )  # fmt: skip
    for column in ("easting", "northing", "elevation"):
        blank = collars[column].isna().to_numpy() & not_reported(collars, column)
        report_rows(
            findings, "error", "collar-incomplete", rows[blank],
            [f"Hole “{name}” has no {column}." for name in names[blank]],
            "Complete the collar.", file=file, column=header_of(collars, column),
        )  # fmt: skip
    length = collars["length_m"].to_numpy(dtype=np.float64)
    report_rows(
        findings, "error", "hole-length-impossible", rows[length <= 0],
        [f"Hole “{n}” is {v:g} m long." for n, v in zip(names[length <= 0], length[length <= 0])],
        "Write the drilled length in metres.", file=file, column=header_of(collars, "length_m"),
    )  # fmt: skip
    unknown = np.isnan(length) & not_reported(collars, "length_m")
    if unknown.any():
        findings.note(
            "hole-length-missing",
            f"{counted(int(unknown.sum()), 'hole')} without a length, so intervals past their end cannot be found: "
            f"{listed(names[unknown])}.",
            "Add the drilled length.",
            file=file,
            row=int(rows[unknown][0]),
            column=header_of(collars, "length_m"),
        )
    _position_sigma(collars, file, findings)
    _ends(collars, file, findings)
    _holes_without(data, "assays", findings)
    if not data.drill.lithology.empty:
        _holes_without(data, "lithology", findings)


def _position_sigma(frame: pd.DataFrame, file: str | None, findings: Findings) -> None:
    rows, sigma = frame["source_row"].to_numpy(), frame["position_sigma_m"].to_numpy(dtype=np.float64)
    bad = (sigma < 0) | (sigma > SIGMA_DOUBTED_M)
    report_rows(
        findings, "warning", "position-sigma", rows[bad],
        [f"A standard error of position of {value:g} m is doubtful." for value in sigma[bad]],
        "Write one standard deviation in metres (acoustic positions: 1 to 30 m).",
        file=file, column=header_of(frame, "position_sigma_m"),
    )  # fmt: skip


def _ends(collars: pd.DataFrame, file: str | None, findings: Findings) -> None:
    unknown = (collars["ended_in"] == "unknown").to_numpy()
    if unknown.any():
        rows = collars["source_row"].to_numpy()[unknown]
        findings.note(
            "ended-unknown",
            f"Of {counted(int(unknown.sum()), 'hole')} it is not known how they ended: "
            f"{listed(collars['hole_id'].to_numpy(dtype=object)[unknown])}.",
            "State ended_in (sulphide, host, lost): it decides where the base may lie.",
            file=file,
            row=int(rows[0]),
            column=header_of(collars, "ended_in"),
        )


def _holes_without(data: LoadedData, role: str, findings: Findings) -> None:
    collars = data.drill.collars
    table: pd.DataFrame = getattr(data.drill, role)
    without = ~collars["hole_id"].isin(set(table["hole_id"])).to_numpy()
    if without.any():
        findings.warning(
            f"hole-without-{role}",
            f"{counted(int(without.sum()), 'hole')} without {role}: "
            f"{listed(collars['hole_id'].to_numpy(dtype=object)[without])}.",
            "Check that none was forgotten; a hole without recovery stays, with its runs at 0 %.",
            file=file_of(collars, data.files.get("collars")),
            row=int(collars["source_row"].to_numpy()[without][0]),
            column=header_of(collars, "hole_id"),
        )


def check_surveys(data: LoadedData, settings: CheckSettings, findings: Findings) -> None:
    """Angles inside their ranges, one station a depth; holes without a survey are named."""
    collars, surveys = data.drill.collars, data.drill.surveys
    file = file_of(surveys, data.files.get("surveys"))
    _angles(collars, file_of(collars, data.files.get("collars")), findings, needed=False)
    if not surveys.empty:
        _angles(surveys, file, findings, needed=True)
        _stations(data, file, findings)
    known = set(surveys["hole_id"]) | set(collars.loc[collars["dip"].notna(), "hole_id"])
    straight = ~collars["hole_id"].isin(known).to_numpy()
    if straight.any():
        names = collars["hole_id"].to_numpy(dtype=object)[straight]
        findings.note(
            "survey-missing",
            f"{len(names)} of {len(collars)} holes have no survey and are assumed vertical: {listed(names, most=1000)}.",
            "Holes were up to 10 degrees off where it was measured, 3.5 m at 20 m depth; add surveys if there are any.",
            file=file or file_of(collars, data.files.get("collars")),
        )


def _angles(frame: pd.DataFrame, file: str | None, findings: Findings, needed: bool) -> None:
    rows = frame["source_row"].to_numpy()
    azimuth, dip = (frame[name].to_numpy(dtype=np.float64) for name in ("azimuth", "dip"))
    where: dict[str, dict[str, Any]] = {
        name: {"file": file, "column": header_of(frame, name)} for name in ("azimuth", "dip")
    }
    out = (azimuth < 0) | (azimuth > 360)
    report_rows(
        findings, "error", "azimuth-range", rows[out], [f"The azimuth is {value:g} degrees." for value in azimuth[out]],
        "Azimuths run from 0 to 360, clockwise from grid north.", **where["azimuth"],
    )  # fmt: skip
    wide = np.abs(dip) > 90
    report_rows(
        findings, "error", "dip-range", rows[wide], [f"The dip is {value:g} degrees." for value in dip[wide]],
        "Dips run from -90 (straight down) to 90.", **where["dip"],
    )  # fmt: skip
    up = (dip > 0) & ~wide
    given = np.isfinite(dip)
    if up.any() and up.sum() == given.sum() and up.sum() > 1:
        findings.error(
            "dip-positive",
            f"All {int(up.sum())} dips are positive, which means upwards ({in_rows(rows[up])}).",
            "Write dips downwards as negative numbers: -90 is straight down.",
            row=int(rows[up][0]),
            **where["dip"],
        )
    else:
        report_rows(
            findings, "error", "dip-positive", rows[up], [f"A dip of {v:g} degrees goes upwards." for v in dip[up]],
            "Write dips downwards as negative numbers: -90 is straight down.", **where["dip"],
        )  # fmt: skip
    flat = (dip > FLAT_DIP) & (dip <= 0)
    report_rows(
        findings, "warning", "dip-flat", rows[flat], [f"A dip of {value:g} degrees is very flat." for value in dip[flat]],
        "Check that the column holds dips from the horizontal, and not inclinations from the vertical.", **where["dip"],
    )  # fmt: skip
    if needed:
        for name, values in (
            ("depth_m", frame["depth_m"].to_numpy(dtype=np.float64)),
            ("azimuth", azimuth),
            ("dip", dip),
        ):
            blank = np.isnan(values) & not_reported(frame, name)
            if name == "azimuth":
                blank &= ~(np.abs(dip + 90) < 1e-9)  # straight down has none
            report_rows(
                findings, "error", "survey-incomplete", rows[blank], f"The station has no {name}.",
                "Complete the row, or remove it.", file=file, column=header_of(frame, name),
            )  # fmt: skip


def _stations(data: LoadedData, file: str | None, findings: Findings) -> None:
    surveys = data.drill.surveys.sort_values(["hole_id", "depth_m", "source_row"], kind="stable")
    rows, hole = surveys["source_row"].to_numpy(), surveys["hole_id"].to_numpy(dtype=object)
    depth = surveys["depth_m"].to_numpy(dtype=np.float64)
    where: dict[str, Any] = {"file": file, "column": header_of(data.drill.surveys, "depth_m")}
    report_rows(
        findings, "error", "survey-depth", rows[depth < 0], [f"The station is at {v:g} m." for v in depth[depth < 0]],
        "Depths are measured down from the collar and are not negative.", **where,
    )  # fmt: skip
    length = data.drill.collars.drop_duplicates("hole_id").set_index("hole_id")["length_m"]
    ends = surveys["hole_id"].map(length).to_numpy(dtype=np.float64)
    past = depth > ends + 1.0
    report_rows(
        findings, "warning", "survey-past-end", rows[past],
        [
            f"The station is at {a:g} m, but hole {h} is {b:g} m long."
            for a, b, h in zip(depth[past], ends[past], hole[past])
        ],
        "Correct the depth, or the length in the collars.", **where,
    )  # fmt: skip
    same = np.r_[False, hole[1:] == hole[:-1]]
    twice = same & (depth == np.r_[np.nan, depth[:-1]])
    report_rows(
        findings, "error", "survey-duplicate", rows[twice],
        [f"Hole {h} has two stations at {v:g} m." for h, v in zip(hole[twice], depth[twice])],
        "Keep one station a depth.", **where,
    )  # fmt: skip
    azimuth = np.radians(surveys["azimuth"].fillna(0.0).to_numpy(dtype=np.float64))
    dip = np.radians(surveys["dip"].to_numpy(dtype=np.float64))
    axis = np.c_[np.sin(azimuth) * np.cos(dip), np.cos(azimuth) * np.cos(dip), np.sin(dip)]
    turn = np.degrees(np.arccos(np.clip((axis[1:] * axis[:-1]).sum(axis=1), -1.0, 1.0)))
    turn = np.r_[0.0, turn]
    sharp = same & (turn > SHARP_TURN_DEG)
    report_rows(
        findings, "warning", "survey-jump", rows[sharp],
        [f"Hole {h} turns by {v:.0f} degrees since the station above." for h, v in zip(hole[sharp], turn[sharp])],
        "Check the angles of both stations.", **where,
    )  # fmt: skip


def check_recovery(data: LoadedData, settings: CheckSettings, findings: Findings) -> None:
    """Recoveries that can be, and what they say of the assays."""
    runs, assays = data.drill.runs, data.drill.assays
    if runs.empty:
        findings.warning(
            "runs-missing",
            "There is no table of runs: the recovery is not known, and poor recovery cannot be seen.",
            "Add the runs with their recovered lengths.",
            file=data.files.get("runs"),
        )
        return
    file = file_of(runs, data.files.get("runs"))
    rows, recovery = runs["source_row"].to_numpy(), runs["recovery_pct"].to_numpy(dtype=np.float64)
    known = "recovered_length_m" if "recovered_length_m" in runs.attrs.get("headers", {}) else "recovery_pct"
    where: dict[str, Any] = {"file": file, "column": header_of(runs, known)}
    limit = settings.recovery_limit_pct
    given = np.isfinite(recovery)
    if given.sum() > 4 and 0 < recovery[given].max() <= 1.0:
        findings.error(
            "recovery-fraction",
            f"No recovery is above {recovery[given].max():g} %: they seem to be fractions.",
            "Write recoveries in percent.",
            row=int(rows[given][0]),
            **where,
        )
    low = recovery < 0
    report_rows(
        findings, "error", "recovery-negative", rows[low], [f"The recovery is {v:.1f} %." for v in recovery[low]],
        "Write what was recovered, or leave the cell empty.", **where,
    )  # fmt: skip
    high = recovery > limit + 1e-9
    report_rows(
        findings, "error", "recovery-impossible", rows[high],
        [f"The recovery is {v:.1f} %, above {limit:g} %." for v in recovery[high]],
        "Check the depths of the run and the recovered length.", **where,
    )  # fmt: skip
    over = (recovery > 100.0 + 1e-6) & ~high
    report_rows(
        findings, "warning", "recovery-over-100", rows[over], [f"The recovery is {v:.1f} %." for v in recovery[over]],
        "Core swells and slips; check the depths of the run.", **where,
    )  # fmt: skip
    blank = ~given & not_reported(runs, known)
    report_rows(
        findings, "warning", "recovery-missing", rows[blank], "The run has no recovery.",
        "Write 0 where nothing was recovered.", **where,
    )  # fmt: skip
    if not assays.empty:
        _assays_and_runs(data, file, findings)


def _assays_and_runs(data: LoadedData, file: str | None, findings: Findings) -> None:
    runs, assays = data.drill.runs, data.drill.assays
    middle = assays.assign(middle=(assays["from_m"] + assays["to_m"]) / 2)
    middle = middle[middle["middle"].notna()].sort_values("middle", kind="stable")
    ordered = runs[runs["from_m"].notna()].sort_values("from_m", kind="stable")
    if middle.empty or ordered.empty:
        return
    ordered = ordered[["hole_id", "from_m", "to_m", "recovery_pct"]].rename(
        columns={"from_m": "run_from", "to_m": "run_to"}
    )
    joined = pd.merge_asof(
        middle[["hole_id", "middle", "source_row"]],
        ordered,
        left_on="middle",
        right_on="run_from",
        by="hole_id",
    )
    outside = ~(joined["middle"] <= joined["run_to"] + 1e-9).to_numpy()
    with_runs = joined["hole_id"].isin(set(runs["hole_id"])).to_numpy()
    assay_file = file_of(assays, data.files.get("assays"))
    at = np.sort(joined["source_row"].to_numpy()[outside])
    if len(at):
        findings.warning(
            "assay-without-run",
            f"{counted(len(at), 'sample')} in no run, {int((outside & ~with_runs).sum())} of them in holes without any; "
            f"their recovery is not known ({in_rows(at)}).",
            "Log the runs of these depths.",
            file=assay_file,
            row=int(at[0]),
            column=header_of(assays, "from_m"),
        )
    lost = np.sort(joined["source_row"].to_numpy()[~outside & (joined["recovery_pct"] == 0).to_numpy()])
    report_rows(
        findings, "warning", "assay-in-lost-core", lost, "The sample lies in a run from which nothing was recovered.",
        "Check the depths of the sample and of the run.", file=assay_file, column=header_of(assays, "from_m"),
    )  # fmt: skip
    empty = runs["recovery_pct"].to_numpy(dtype=np.float64) == 0
    if empty.any():
        length = float((runs["to_m"] - runs["from_m"])[empty].sum())
        findings.note(
            "run-lost",
            f"{counted(int(empty.sum()), 'run')} ({length:.1f} m) without recovery, kept as lost core "
            f"({in_rows(runs['source_row'].to_numpy()[empty])}).",
            file=file,
            row=int(runs["source_row"].to_numpy()[empty][0]),
            column=header_of(runs, "recovery_pct"),
        )
