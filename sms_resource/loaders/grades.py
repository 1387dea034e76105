"""The columns of one element: value, status and limit, in the element's own unit."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from sms_resource.loaders.headers import element_of_header, same_unit
from sms_resource.loaders.parsing import parse_numbers
from sms_resource.loaders.places import report_rows
from sms_resource.loaders.tables import BELOW_DETECTION, BLANK, MEASURED, element_columns
from sms_resource.units import ELEMENTS, element_column, grade_factor, known_unit

if TYPE_CHECKING:
    from sms_resource.loaders.table import TableMaker


def grade_columns(maker: TableMaker, element: str) -> dict[str, Any]:
    """The three columns of one element, in its canonical unit."""
    name = element_column(element)
    count = len(maker.raw.rows)
    header = _element_header(maker, element, name)
    if header is None:
        value = maker.constant(name, maker.constants.get(name))
        status = np.where(np.isnan(value), BLANK, MEASURED).astype(np.int8)
        return dict(zip(element_columns((element,)), (value, status, np.full(count, np.nan))))
    maker.headers[name] = header
    parsed = parse_numbers(maker.raw.column(header), decimal=maker.raw.decimal, limits=True)
    maker.report(parsed, header)
    factor = _factor(maker, element, name, header)
    limits = maker.source.detection_limits
    bare = (parsed.status == BELOW_DETECTION) & np.isnan(parsed.limit)
    if element in limits or name in limits:
        parsed.limit[bare] = limits.get(element, limits.get(name, np.nan))
    elif bare.any():
        report_rows(
            maker.findings, "error", "detection-limit-missing", maker.raw.rows[bare],
            "The result is below detection, but the limit is not given.",
            "Write the limit into the cell, such as <0.01, or give detection_limits in the study.",
            file=maker.file, column=header,
        )  # fmt: skip
    if maker.role == "assays" and element in maker.needed and count and (parsed.status == BLANK).all():
        maker.findings.error(
            "element-blank",
            f"The column of {element} is blank in all {count} rows, and {element} is to be estimated.",
            f"Name the column that holds it, or take {element} out of metals.estimate.",
            file=maker.file,
            row=maker.source.header_row,
            column=header,
        )
    return {
        name: parsed.values * factor,
        f"{name}_status": parsed.status,
        f"{name}_limit": parsed.limit * factor,
    }


def _element_header(maker: TableMaker, element: str, name: str) -> str | None:
    needed = element in maker.needed and maker.role == "assays"
    if name in maker.mapping:
        return maker.header(name, required=True)
    candidates = [h for h in maker.raw.headers if (element_of_header(h) or ("",))[0] == element]
    if len(candidates) > 1:
        maker.findings.error(
            "column-duplicate",
            f"The file has {len(candidates)} columns that may be {element}: {', '.join(candidates)}.",
            f'Name the right one in the study with columns = {{ {element} = "..." }}.',
            file=maker.file,
            row=maker.source.header_row,
            column=candidates[0],
        )
    if candidates:
        return candidates[0]
    if name in maker.constants:
        return None
    if needed:
        return maker.header(name, required=True)
    maker.findings.add(
        "warning" if element in maker.needed else "note",
        "element-missing",
        f"The file has no column of {element}; it is blank in all rows.",
        f'Map it in the study with columns = {{ {element} = "..." }} if it has.',
        file=maker.file,
        column=name,
    )
    return None


def _factor(maker: TableMaker, element: str, name: str, header: str) -> float:
    """Factor from the file's unit to the element's own; 1 with an error where the unit is not known."""
    unit_of = {maker.plain(key): unit for key, unit in maker.source.units.items()}
    declared = unit_of.get(name)
    stated = (element_of_header(header) or (element, None))[1]
    if declared is not None and known_unit(declared):
        if stated is not None and not same_unit(declared, stated):
            maker.findings.warning(
                "unit-contradicts-header",
                f"The study says {element} is in {declared}, the header says {stated}; the study was followed.",
                "Correct the one that is wrong.",
                file=maker.file,
                row=maker.source.header_row,
                column=header,
            )
        return grade_factor(declared, ELEMENTS[element])
    if stated is not None:
        return grade_factor(stated, ELEMENTS[element])
    if declared is None:
        maker.findings.error(
            "unit-missing",
            f"Neither the header {header!r} nor the study states the unit of {element}.",
            f'Write units = {{ {element} = "%" }} or whatever it is in.',
            file=maker.file,
            row=maker.source.header_row,
            column=header,
        )
    return 1.0
