"""Grades against what minerals can hold, sample names, and densities against the grades beside them.

Mass fractions of metal in pure minerals follow from the atomic weights: chalcopyrite 34.63 % Cu, chalcocite
79.86 % Cu, sphalerite 67.10 % Zn, galena 86.60 % Pb, barite 58.84 % Ba. Grain densities are those of
handbooks of mineralogy (from memory).
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.loaders.places import counted, file_of, header_of, in_rows, listed, report_rows
from sms_resource.loaders.settings import CheckSettings
from sms_resource.loaders.tables import BELOW_DETECTION, BLANK, MEASURED, OVER_LIMIT, LoadedData
from sms_resource.units import ELEMENTS, column_element, element_column, element_label, unit_label

USUAL_SHARE = {"cu": 0.34628, "zn": 0.67098, "pb": 0.86600, "ba": 0.58842, "sio2": 1.0}
RICHEST_SHARE = {**USUAL_SHARE, "cu": 0.79856}
ROUNDING_PCT = 0.5  # each result is rounded, and each laboratory has a bias
DENSE = {"cu": 4.2, "zn": 4.1, "pb": 7.6, "ba": 4.5, "sio2": 2.65}
HEAVIEST_REST, LIGHTEST_REST = 5.02, 2.1  # pyrite; amorphous silica
DENSITY_TOLERANCE = 1.05
BULK_RANGE, GRAIN_RANGE = (1.0, 5.3), (1.8, 7.6)
GRADE_TABLES = ("assays", "surface_samples", "dredges")


def grade_table(data: LoadedData, role: str) -> pd.DataFrame:
    """The table of a role that carries grades."""
    table: pd.DataFrame = {
        "assays": data.drill.assays,
        "surface_samples": data.surface,
        "dredges": data.dredges,
    }[role]
    return table


def grades_of(frame: pd.DataFrame) -> dict[str, NDArray[np.float64]]:
    """Grade of each element as far as it is known: measured, at its upper limit, or nothing below detection."""
    found = {}
    for column in frame.columns:
        element = column_element(column)
        if element is None:
            continue
        values = frame[column].to_numpy(dtype=np.float64).copy()
        status = frame.get(f"{column}_status")
        if status is not None:
            limit = frame[f"{column}_limit"].to_numpy(dtype=np.float64)
            over = status.to_numpy() == OVER_LIMIT
            values[over] = limit[over]
        found[element] = values
    return found


def check_grades(data: LoadedData, settings: CheckSettings, findings: Findings) -> None:
    """Guards on each element, on all of them together, and names of samples."""
    for role in GRADE_TABLES:
        frame = grade_table(data, role)
        if frame.empty:
            continue
        file = file_of(frame, data.files.get(role))
        grades = grades_of(frame)
        for element, values in grades.items():
            _guard_element(frame, element, values, settings, file, findings)
        _guard_sum(frame, grades, file, findings)
        _limits(frame, grades, file, findings)
        _empty_rows(frame, grades, file, findings)
        _methods(frame, file, findings)
    _names(data, findings)


def _guard_element(
    frame: pd.DataFrame, element: str, values: NDArray[np.float64], settings: CheckSettings, file: str | None,
    findings: Findings,
) -> None:  # fmt: skip
    column = element_column(element)
    where: dict[str, Any] = {"file": file, "column": header_of(frame, column)}
    rows, unit = frame["source_row"].to_numpy(), unit_label(column)
    label = element_label(column).split(" ")[0]
    negative = values < 0
    report_rows(
        findings, "error", "grade-negative", rows[negative],
        [f"A grade of {v:g} {unit} {label} is negative." for v in values[negative]],
        "Some laboratories write -0.01 for below detection: write <0.01.", **where,
    )  # fmt: skip
    hard = min(settings.error_above.get(element, np.inf), 100.0 if unit == "%" else 1e6)
    soft = settings.warn_above.get(element, np.inf)
    impossible = values > hard
    report_rows(
        findings, "error", "grade-impossible", rows[impossible],
        [f"{v:g} {unit} {label} is more than any mineral holds ({hard:g} {unit})." for v in values[impossible]],
        "Check the unit of the column and the value.", **where,
    )  # fmt: skip
    high = (values > soft) & ~impossible
    report_rows(
        findings, "warning", "grade-guard", rows[high],
        [f"{v:g} {unit} {label} is above the guard of {soft:g} {unit}." for v in values[high]],
        "Check the unit of the column and the value; raise the guard if it is right.", **where,
    )  # fmt: skip
    known = values[np.isfinite(values)]
    if len(known) < 10:
        return
    if np.isfinite(soft) and np.median(known) > 0.7 * soft:
        findings.warning(
            "unit-doubtful",
            f"The median of {label} is {np.median(known):g} {unit}, near the guard of {soft:g} {unit} for single samples.",
            "Check the unit of the column: percent, g/t, ppm and ppb are easily mixed up.",
            row=1,
            **where,
        )
    elif unit == "%" and np.isfinite(soft) and known.max() < 0.02:
        findings.warning(
            "unit-doubtful",
            f"No {label} is above {known.max():g} %: the column may be in another unit, such as fractions or g/t.",
            "Check the unit of the column: percent, g/t, ppm and ppb are easily mixed up.",
            row=1,
            **where,
        )


def mineral_sum(
    grades: Mapping[str, NDArray[np.float64]], shares: Mapping[str, float]
) -> NDArray[np.float64]:
    """Mass of the minerals that hold the metals, in percent; elements that are not known count as none."""
    total: NDArray[np.float64] = np.zeros(len(next(iter(grades.values()))) if grades else 0)
    for element, share in shares.items():
        if element in grades:
            total = total + np.nan_to_num(np.clip(grades[element], 0, None)) / share
    return total


def _guard_sum(
    frame: pd.DataFrame, grades: Mapping[str, NDArray[np.float64]], file: str | None, findings: Findings
) -> None:
    """Metals whose minerals pass 100 %: with their richest minerals an error, with the usual ones a warning."""
    present = [element for element in RICHEST_SHARE if element in grades]
    if not present:
        return
    rows = frame["source_row"].to_numpy()
    percent = [e for e, unit in ELEMENTS.items() if unit == "pct" and e in grades]
    plain = mineral_sum(grades, dict.fromkeys(percent, 1.0))
    richest = np.maximum(mineral_sum(grades, RICHEST_SHARE), plain)
    single = np.zeros(len(frame), dtype=bool)  # an element that is impossible alone has its own finding
    for element in percent:
        single |= grades[element] > 100.0 * RICHEST_SHARE.get(element, 1.0) + ROUNDING_PCT
    bad = (richest > 100.0 + ROUNDING_PCT) & ~single
    names = ", ".join(header_of(frame, element_column(element)) for element in percent)
    report_rows(
        findings, "error", "minerals-over-100", rows[bad],
        [f"The minerals that hold these metals make up at least {v:.1f} % of the sample." for v in richest[bad]],
        "One of the grades, or a unit, is wrong.", file=file, column=names,
    )  # fmt: skip
    usual = mineral_sum(grades, USUAL_SHARE)
    doubt = (usual > 100.0 + ROUNDING_PCT) & ~bad & ~single
    report_rows(
        findings, "warning", "minerals-over-100", rows[doubt],
        [f"With copper as chalcopyrite the minerals make up {v:.1f} % of the sample." for v in usual[doubt]],
        "It can only be so with richer copper minerals; check the grades.", file=file, column=names,
    )  # fmt: skip


def _limits(
    frame: pd.DataFrame, grades: Mapping[str, NDArray[np.float64]], file: str | None, findings: Findings
) -> None:
    """Detection limits above what is measured elsewhere: most often another unit."""
    for element, values in grades.items():
        column = element_column(element)
        if f"{column}_status" not in frame:
            continue
        below = (frame[f"{column}_status"] == BELOW_DETECTION).to_numpy()
        measured = values[np.isfinite(values) & ~below]
        if len(measured) < 5:
            continue
        limit = frame[f"{column}_limit"].to_numpy(dtype=np.float64)
        high = below & (limit > np.median(measured))
        if high.any():
            rows = frame["source_row"].to_numpy()[high]
            findings.warning(
                "detection-limit-high",
                f"{counted(int(high.sum()), 'result')} below a detection limit of up to {np.nanmax(limit[high]):g} "
                f"{unit_label(column)}, above the median of the measured ones ({in_rows(rows)}).",
                "Check the unit of the limits.",
                file=file,
                row=int(rows[0]),
                column=header_of(frame, column),
            )


def _empty_rows(
    frame: pd.DataFrame, grades: Mapping[str, NDArray[np.float64]], file: str | None, findings: Findings
) -> None:
    status = [f"{element_column(e)}_status" for e in grades if f"{element_column(e)}_status" in frame]
    if not status:
        return
    empty = (frame[status].to_numpy() == BLANK).all(axis=1)
    if empty.any():
        rows = frame["source_row"].to_numpy()[empty]
        findings.note(
            "sample-without-grades",
            f"{counted(int(empty.sum()), 'sample')} without any grade, left blank ({in_rows(rows)}).",
            file=file,
            row=int(rows[0]),
        )


def _methods(frame: pd.DataFrame, file: str | None, findings: Findings) -> None:
    methods = frame["method"]
    other = sorted(set(methods) - {"laboratory", ""})
    if other:
        at = (~methods.isin(["laboratory", ""])).to_numpy()
        findings.note(
            "method-other",
            f"{counted(int(at.sum()), 'sample')} measured by {listed(other)}; "
            f"only the methods that the study accepts are used.",
            file=file,
            row=int(frame["source_row"].to_numpy()[at][0]),
            column=header_of(frame, "method"),
        )


def _names(data: LoadedData, findings: Findings) -> None:
    """Sample names that are there twice, in one table or in two."""
    seen: dict[str, str] = {}
    for role in ("assays", "surface_samples"):
        frame = grade_table(data, role)
        if frame.empty:
            continue
        file = file_of(frame, data.files.get(role))
        names, rows = frame["sample_id"].to_numpy(dtype=object), frame["source_row"].to_numpy()
        key = frame["sample_id"].astype(object) + "\x00" + frame["method"].astype(object)
        twice = key.duplicated().to_numpy() & (names != "")
        firsts = dict(zip(names[::-1], rows[::-1]))
        column = header_of(frame, "sample_id")
        report_rows(
            findings, "error", "sample-duplicate", rows[twice],
            [f"Sample “{name}” is in row {firsts[name]} already." for name in names[twice]],
            "Give each sample a name of its own; repeat assays belong to the laboratory table.", file=file, column=column,
        )  # fmt: skip
        shared = [i for i, name in enumerate(names) if name in seen]
        report_rows(
            findings, "warning", "sample-shared", rows[shared],
            [f"Sample “{names[i]}” is in {seen[names[i]]} too." for i in shared],
            "Check that one piece of rock is not counted as core and as a surface sample.", file=file, column=column,
        )  # fmt: skip
        seen.update({name: str(file) for name in names if name})


def check_densities(data: LoadedData, settings: CheckSettings, findings: Findings) -> None:
    """Densities that rock can have, in the right order, and possible for the grades beside them."""
    frame = data.drill.densities
    if frame.empty:
        return
    file = file_of(frame, data.files.get("densities"))
    rows = frame["source_row"].to_numpy()
    number = {
        name: frame[name].to_numpy(dtype=np.float64)
        for name in ("wet_density_tpm3", "dry_density_tpm3", "grain_density_tpm3", "wet_mass_g", "dry_mass_g",
                     "dry_volume_cm3")
    }  # fmt: skip
    for name in ("wet_density_tpm3", "dry_density_tpm3", "grain_density_tpm3"):
        low, high = GRAIN_RANGE if name.startswith("grain") else BULK_RANGE
        values, where = number[name], {"file": file, "column": header_of(frame, name)}
        wrong = (values < low if name != "dry_density_tpm3" else values < 0.5 * low) | (values > high)
        unit = bool(wrong.any() and np.nanmedian(values) > 100)
        report_rows(
            findings, "error", "density-impossible", rows[wrong],
            [f"A density of {v:g} t/m3 is outside {low:g} to {high:g}." for v in values[wrong]],
            "They seem to be in kg/m3: divide by 1000." if unit else "Check the value and its unit (t/m3).",
            file=where["file"], column=where["column"],
        )  # fmt: skip
        number[name] = np.where(wrong, np.nan, values)  # what cannot be is not compared with the rest
    wet, dry, grain = number["wet_density_tpm3"], number["dry_density_tpm3"], number["grain_density_tpm3"]
    _ordered(frame, dry, wet, "dry_density_tpm3", "dry", "wet density", file, findings)
    _ordered(frame, dry, grain, "grain_density_tpm3", "dry", "grain density", file, findings)
    _ordered(frame, wet, grain, "grain_density_tpm3", "wet", "grain density", file, findings)
    _ordered(
        frame, number["dry_mass_g"], number["wet_mass_g"], "dry_mass_g", "dry", "wet mass", file, findings
    )
    for name in ("wet_mass_g", "dry_mass_g", "dry_volume_cm3"):
        bad = number[name] <= 0
        report_rows(
            findings, "error", "density-impossible", rows[bad], [f"{v:g} is not above zero." for v in number[name][bad]],
            "Check the value.", file=file, column=header_of(frame, name),
        )  # fmt: skip
    _against_minerals(data, frame, dry, grain, file, findings)


def _ordered(
    frame: pd.DataFrame, low: NDArray[np.float64], high: NDArray[np.float64], column: str, small: str, large: str,
    file: str | None, findings: Findings,
) -> None:  # fmt: skip
    wrong = low > high * 1.001
    kind = large.split()[1]
    report_rows(
        findings, "error", "density-order", frame["source_row"].to_numpy()[wrong],
        [f"The {small} {kind} ({a:g}) is above the {large} ({b:g})." for a, b in zip(low[wrong], high[wrong])],
        "Check which column is which.", file=file, column=header_of(frame, column),
    )  # fmt: skip


def _against_minerals(
    data: LoadedData, frame: pd.DataFrame, dry: NDArray[np.float64], grain: NDArray[np.float64], file: str | None,
    findings: Findings,
) -> None:  # fmt: skip
    """Heaviest and lightest grain density that the grades allow, with a rest of pyrite or of amorphous silica."""
    assays = data.drill.assays
    assays = assays[assays["from_m"].notna()].sort_values("from_m", kind="stable")
    plugs = frame.assign(middle=(frame["from_m"] + frame["to_m"]) / 2, at=np.arange(len(frame)))
    plugs = plugs[plugs["middle"].notna()].sort_values("middle", kind="stable")
    grades = grades_of(assays)
    present = [element for element in DENSE if element in grades]
    if assays.empty or plugs.empty or not present:
        return
    shares = np.column_stack([np.nan_to_num(grades[e]) / USUAL_SHARE[e] / 100.0 for e in present])
    volume = (shares / np.array([DENSE[e] for e in present])).sum(axis=1)
    rest = 1.0 - shares.sum(axis=1)
    known = np.column_stack([np.isfinite(grades[e]) for e in present]).any(axis=1)
    possible = (rest >= 0) & known
    with np.errstate(divide="ignore", invalid="ignore"):
        top = np.where(possible, 1.0 / (volume + rest / HEAVIEST_REST), np.nan)
        low = np.where(possible, 1.0 / (volume + rest / LIGHTEST_REST), np.nan)
    table = assays[["hole_id", "from_m", "to_m"]].rename(columns={"from_m": "top_m", "to_m": "end_m"})
    joined = pd.merge_asof(
        plugs[["hole_id", "middle", "at"]], table.assign(heaviest=top, lightest=low), left_on="middle",
        right_on="top_m", by="hole_id",
    )  # fmt: skip
    joined = joined[(joined["middle"] <= joined["end_m"]) & joined["heaviest"].notna()].sort_values("at")
    at = joined["at"].to_numpy()
    rows = frame["source_row"].to_numpy()[at]
    for name, values, limit in (
        ("dry_density_tpm3", dry[at], "heaviest"),
        ("grain_density_tpm3", grain[at], "heaviest"),
    ):
        bound = joined[limit].to_numpy(dtype=np.float64)
        heavy = values > bound * DENSITY_TOLERANCE
        report_rows(
            findings, "error", "density-mineralogy", rows[heavy],
            [
                f"A density of {v:g} t/m3 is impossible for the grades beside it, even if all the rest were pyrite "
                f"({b:.2f} t/m3)."
                for v, b in zip(values[heavy], bound[heavy])
            ],
            "Check the density, its depths and the grades.", file=file, column=header_of(frame, name),
        )  # fmt: skip
    bound = joined["lightest"].to_numpy(dtype=np.float64)
    light = grain[at] * DENSITY_TOLERANCE < bound
    report_rows(
        findings, "warning", "density-mineralogy", rows[light],
        [
            f"A grain density of {v:g} t/m3 is too low for the grades beside it ({b:.2f} t/m3 if all the rest were silica)."
            for v, b in zip(grain[at][light], bound[light])
        ],
        "Check the density, its depths and the grades.", file=file, column=header_of(frame, "grain_density_tpm3"),
    )  # fmt: skip


__all__ = ["MEASURED", "check_densities", "check_grades", "grade_table", "grades_of", "mineral_sum"]
