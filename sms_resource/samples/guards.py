"""Guards on grades: what minerals and practice allow, and units that look mixed up."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import pandas as pd

from sms_resource.findings import Findings
from sms_resource.samples.intervals import numbers
from sms_resource.samples.mineralogy import least_mineral_percent
from sms_resource.units import element_label

# Grades above which a person should look (common practice) and above which no mineral can carry the metal.
WARN_ABOVE: dict[str, float] = {"cu_pct": 35.0, "zn_pct": 50.0, "au_gpt": 100.0, "ag_gpt": 2000.0}
ERROR_ABOVE: dict[str, float] = {
    "cu_pct": 80.0, "zn_pct": 67.1, "pb_pct": 86.6, "ba_pct": 58.9, "fe_pct": 72.4, "sio2_pct": 100.0, "s_pct": 55.0,
}  # fmt: skip
# Rounding of several assays may take a true sum a little over.
SUM_TOLERANCE_PCT = 2.0
# Median grades, in the element's own unit, outside which a whole column looks as if its unit were another.
LIKELY_MEDIAN: dict[str, tuple[float, float]] = {
    "cu_pct": (0.01, 40.0), "zn_pct": (0.005, 60.0), "fe_pct": (0.5, 60.0), "au_gpt": (0.01, 100.0),
    "ag_gpt": (0.1, 3000.0),
}  # fmt: skip


def grade_guards(
    table: pd.DataFrame,
    element_columns: Sequence[str],
    *,
    warn_above: Mapping[str, float] | None = None,
    error_above: Mapping[str, float] | None = None,
    file: str | None = None,
    label: str = "assays",
) -> Findings:
    """Check grades row by row against what is possible, and column by column against a mixed-up unit.

    Parameters
    ----------
    table : DataFrame
        Element columns as plain numbers; source_row where known.
    element_columns : sequence of str
    warn_above, error_above : mapping, optional
        Column to limit, beside `WARN_ABOVE` and `ERROR_ABOVE`.
    file : str, optional
    label : str
        What the table is called in the messages.
    """
    findings = Findings()
    warn = {**WARN_ABOVE, **(warn_above or {})}
    error = {**ERROR_ABOVE, **(error_above or {})}
    rows = table["source_row"].to_numpy() if "source_row" in table else np.full(len(table), np.nan)
    for column in element_columns:
        values = numbers(table, column)
        name = element_label(column)
        for at in np.flatnonzero(values < 0):
            findings.error(
                "grade-guard", f"{label}: {name} is {values[at]:g}, below zero",
                "Give results below detection as <limit, and leave blank what was not assayed.",
                file=file, row=rows[at], column=column,
            )  # fmt: skip
        with np.errstate(invalid="ignore"):
            over = values > error.get(column, np.inf)
            high = (values > warn.get(column, np.inf)) & ~over
        for at in np.flatnonzero(over):
            findings.error(
                "grade-guard", f"{label}: {name} is {values[at]:g}; no mineral carries more than {error[column]:g}",
                "Check the unit and the result.", file=file, row=rows[at], column=column,
            )  # fmt: skip
        for at in np.flatnonzero(high):
            findings.warning(
                "grade-guard", f"{label}: {name} is {values[at]:g}, over the guard of {warn[column]:g}",
                "Check the unit and the result.", file=file, row=rows[at], column=column,
            )  # fmt: skip
        known = values[np.isfinite(values) & (values > 0)]
        low_end, high_end = LIKELY_MEDIAN.get(column, (0.0, np.inf))
        if len(known) >= 10 and not low_end <= float(np.median(known)) <= high_end:
            findings.warning(
                "grade-unit",
                f"{label}: the median of {name} is {np.median(known):.3g}, outside {low_end:g} to {high_end:g}: is the "
                "unit right?",
                "State the unit of the column in the study.", file=file, column=column,
            )  # fmt: skip
    total = least_mineral_percent(table)
    for at in np.flatnonzero(total > 100.0 + SUM_TOLERANCE_PCT):
        findings.error(
            "mineral-sum",
            f"{label}: the metals of this row need at least {total[at]:.0f} % of mineral",
            "At least one of the grades, or its unit, is wrong.",
            file=file,
            row=rows[at],
        )
    return findings
