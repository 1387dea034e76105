"""Fitted parameters of a variogram in words, with those that the data did not determine marked as such."""

from __future__ import annotations

import math
import re
from typing import Any

import pandas as pd

from sms_resource.reporting.data import VariogramRecord, has
from sms_resource.reporting.elements import number_text

ZONAL_RANGE_M = 1e5  # a structure of this range in the plane varies across it alone
WIDEST_FACTOR = 20.0  # an interval over more than this says no more than the order of magnitude
AT_BOUND = "at its bound"
UNKNOWN = "not determined by the data"
_RANGE = re.compile(r"(major|semi_major|minor)_range_(\d+)_m")


def parameter_name(parameter: str) -> str:
    """A parameter in words with its unit: ``major_range_1_m`` becomes ``Range, major, structure 1 (m)``."""
    found = _RANGE.fullmatch(parameter)
    if found:
        return f"Range, {found[1].replace('_', '-')}, structure {found[2]} (m)"
    names = {"nugget": "Nugget (squared grade)", "total_sill": "Total sill (squared grade)"}
    return names.get(parameter, parameter.replace("_", " "))


def at_bound(record: VariogramRecord, parameter: str) -> bool:
    """Whether the fit stopped at a limit of a parameter."""
    found = _RANGE.fullmatch(parameter)
    if not found:
        return any(text.startswith(f"the {parameter} is at its") for text in record.bounds_hit)
    axis = found[1].replace("_", "-")
    for text in record.bounds_hit:
        named = re.search(r"the (.+) range of structure (\d+) is at its", text)
        if named and named[2] == found[2] and axis in named[1].split(" and "):
            return True
    return False


def status(record: VariogramRecord, row: Any) -> str:
    """What keeps a row of the intervals from being a measurement; empty where nothing does."""
    parameter, low, high = str(row["parameter"]), float(row["low"]), float(row["high"])
    if at_bound(record, parameter):
        return AT_BOUND
    if parameter == "nugget":  # it may be zero: then its interval has no factor
        return UNKNOWN if low <= 0.0 and high >= _total_sill(record) else ""
    wide = not (math.isfinite(low) and math.isfinite(high) and low > 0.0) or high / low > WIDEST_FACTOR
    return UNKNOWN if wide else ""


def _total_sill(record: VariogramRecord) -> float:
    model = record.model
    return math.inf if model is None else float(model.nugget) + sum(float(s.sill) for s in model.structures)


def statuses(record: VariogramRecord) -> dict[str, str]:
    """Parameters that the data did not determine, and why not: at a bound, or an interval too wide."""
    found = {}
    if has(record.intervals, "parameter", "low", "high"):
        found = {str(row["parameter"]): status(record, row) for row in record.intervals.to_dict("records")}  # type: ignore[union-attr]
    structures = getattr(record.model, "structures", None) or ()
    for number in range(1, len(structures) + 1):
        for axis in ("major", "semi_major", "minor"):
            name = f"{axis}_range_{number}_m"
            if name not in found and at_bound(record, name):
                found[name] = AT_BOUND
    return {name: text for name, text in found.items() if text}


def undetermined_words(record: VariogramRecord) -> str:
    """One sentence that names what was fitted and yet is not measured; empty where all is."""
    found = statuses(record)
    if not found:
        return ""
    said = "; ".join(f"{_in_text(name)} ({text})" for name, text in found.items())
    return f"Used in the model, but not measured: {said}."


def _in_text(parameter: str) -> str:
    words = parameter_name(parameter).partition(" (")[0]
    return words[:1].lower() + words[1:]


def range_text(record: VariogramRecord, axis: int, number: int, length_m: float) -> str:
    """A range of the table of models: its length, "no limit (zonal)", and what keeps it from being measured."""
    if length_m >= ZONAL_RANGE_M:
        return "no limit (zonal)"
    why = statuses(record).get(f"{('major', 'semi_major', 'minor')[axis]}_range_{number}_m", "")
    return number_text(length_m, 3) + (f" ({why})" if why else "")


def intervals_shown(record: VariogramRecord) -> pd.DataFrame | None:
    """Intervals with words for names, and words in place of ends that mean nothing."""
    frame = record.intervals
    if frame is None or not has(frame, "parameter", "low", "best", "high"):
        return None
    rows = []
    for row in frame.to_dict("records"):
        why = status(record, row)
        error = float(row.get("relative_error", math.nan))
        rows.append(
            {
                "Parameter": parameter_name(str(row["parameter"])),
                "Low": why or number_text(float(row["low"])),
                "Best": number_text(float(row["best"])),
                "High": why or number_text(float(row["high"])),
                "Relative error (%)": "–" if why else number_text(100.0 * error, 2),
                "Holes left out in turn": row.get("holes"),
            }
        )
    return pd.DataFrame(rows)
