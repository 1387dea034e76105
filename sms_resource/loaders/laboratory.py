"""Laboratory inserts: reference materials, blanks, duplicates and check assays, one row a result."""

from __future__ import annotations

import numpy as np
import pandas as pd

from sms_resource.findings import Findings
from sms_resource.loaders.places import header_of, report_rows
from sms_resource.loaders.source import TableSource
from sms_resource.loaders.table import load_table
from sms_resource.loaders.tables import BELOW_DETECTION, MEASURED
from sms_resource.units import ELEMENTS, element_column, grade_factor, known_unit

_CONVERTED = ("value", "value_limit", "original_value", "original_value_limit", "expected", "expected_sd")


def load_laboratory(source: TableSource) -> tuple[pd.DataFrame, Findings]:
    """Read laboratory inserts in the long form, values in each element's own unit.

    The unit of a row is what its ``unit`` column says, else what the study says of its element, else what
    the header of the value column states ("value_ppm").

    Returns
    -------
    frame : DataFrame
        kind, batch, sequence, sample_id, original_sample_id, material, stage, element, value, value_status,
        value_limit, original_value (with status and limit, where the file repeats the original's result),
        expected, expected_sd, source_row. ``sequence`` is the row's place in the file where the
        file has none.
    findings : Findings
    """
    frame, findings = load_table(source, "laboratory")
    rows = frame["source_row"].to_numpy()
    unknown = ~frame["element"].isin(ELEMENTS).to_numpy(dtype=bool)
    names = frame["element"].to_numpy(dtype=object)
    report_rows(
        findings, "error", "element-unknown", rows[unknown],
        [f"“{name}” is not an element that is read." for name in names[unknown]],
        f"Use one of: {', '.join(ELEMENTS)}.", file=source.name, column=header_of(frame, "element"),
    )  # fmt: skip
    if len(frame):
        _convert(frame, source, findings)
    order = np.arange(1, len(frame) + 1)
    sequence = frame["sequence"].to_numpy(dtype=np.float64)
    frame["sequence"] = np.where(np.isfinite(sequence), sequence, order).astype(np.int64)
    attrs = dict(frame.attrs)
    frame = frame.drop(columns="unit", errors="ignore")
    frame.attrs.update(attrs)
    return frame, findings


def _convert(frame: pd.DataFrame, source: TableSource, findings: Findings) -> None:
    declared = {key.casefold(): unit for key, unit in source.units.items()}
    header = header_of(frame, "value")
    words = [
        word
        for word in header.replace("(", " ").replace(")", " ").replace("_", " ").split()
        if known_unit(word)
    ]
    stated = words[-1] if words else None
    for (word, text), group in frame.groupby(["element", "unit"], sort=True):
        element, unit = str(word), str(text)
        if element not in ELEMENTS:
            continue
        own = element_column(element)
        chosen = unit or declared.get(element) or declared.get(own) or stated
        where = {"file": source.name, "row": int(group["source_row"].iloc[0])}
        if not chosen:
            findings.error(
                "unit-missing",
                f"Nothing states the unit of {element}.",
                f'Add a column "unit", or units = {{ {element} = "%" }} in the study.',
                column=header,
                **where,
            )
        elif not known_unit(chosen):
            findings.error(
                "unit-unknown",
                f"The unit {chosen!r} of {element} is not known.",
                "Use one of %, ppm, ppb, g/t, mg/kg, kg/t, oz/t.",
                column=header_of(frame, "unit"),
                **where,
            )
        else:
            limit = source.detection_limits.get(element, source.detection_limits.get(own, np.nan))
            open_ = group["value_limit"].isna() & group["value_status"].isin((MEASURED, BELOW_DETECTION))
            frame.loc[group.index[open_], "value_limit"] = limit
            factor = grade_factor(chosen, ELEMENTS[element])
            frame.loc[group.index, list(_CONVERTED)] *= factor
