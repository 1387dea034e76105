"""Domains from logged lithology."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pandas as pd

from sms_resource.findings import Findings
from sms_resource.samples.intervals import names, numbers, valid_intervals

# Logged contacts that differ by less than this (m) are one contact.
TOUCHING_M = 1e-6


def domain_intervals(
    lithology: pd.DataFrame, mapping: Mapping[str, str], default: str = "waste"
) -> pd.DataFrame:
    """Domains along the holes from logged codes.

    Parameters
    ----------
    lithology : DataFrame
        hole_id, from_m, to_m, code.
    mapping : mapping of code to domain
        Codes compare without case and outer blanks.
    default : str
        Domain of the codes that are not in the mapping; `unmapped_codes` names them.

    Returns
    -------
    DataFrame
        hole_id, from_m, to_m, domain: neighbours of one domain that touch are merged; by hole and depth.
    """
    columns = ["hole_id", "from_m", "to_m", "domain"]
    logged = valid_intervals(lithology, "lithology")
    if logged.empty:
        return pd.DataFrame(
            {"hole_id": np.empty(0, object), "from_m": np.empty(0), "to_m": np.empty(0), "domain": np.empty(0, object)}
        )  # fmt: skip
    lookup = {_code(key): value for key, value in mapping.items()}
    frame = pd.DataFrame(
        {
            "hole_id": names(logged["hole_id"]),
            "from_m": numbers(logged, "from_m"),
            "to_m": numbers(logged, "to_m"),
            "domain": [lookup.get(_code(code), default) for code in logged["code"]],
        }
    ).sort_values(["hole_id", "from_m"], kind="stable", ignore_index=True)
    hole, domain = names(frame["hole_id"]), names(frame["domain"])
    start, end = frame["from_m"].to_numpy(), frame["to_m"].to_numpy()
    fresh = np.ones(len(frame), dtype=bool)
    fresh[1:] = (
        (hole[1:] != hole[:-1]) | (domain[1:] != domain[:-1]) | (np.abs(start[1:] - end[:-1]) > TOUCHING_M)
    )
    first = np.flatnonzero(fresh)
    last = np.append(first[1:], len(frame)) - 1
    return pd.DataFrame(
        {"hole_id": hole[first], "from_m": start[first], "to_m": end[last], "domain": domain[first]},
        columns=columns,
    )


def unmapped_codes(lithology: pd.DataFrame, mapping: Mapping[str, str], default: str = "waste") -> Findings:
    """One warning for each logged code that the mapping lacks, one note for each code that nobody logged."""
    findings = Findings()
    known = {_code(key): key for key in mapping}
    codes = pd.Series([_code(code) for code in lithology["code"]], dtype=object)
    length = numbers(lithology, "to_m") - numbers(lithology, "from_m")
    for code in sorted(set(codes) - set(known)):
        here = (codes == code).to_numpy()
        findings.warning(
            "lithology-unmapped",
            f"Logged code {code!r} ({here.sum()} intervals, {np.nansum(length[here]):.1f} m) is not in the "
            f"mapping and was taken as {default!r}",
            "Add the code to domains.codes in the study, or correct it in the log.",
            file=lithology.attrs.get("file"),
            row=int(lithology["source_row"].to_numpy()[here][0]) if "source_row" in lithology else None,
            column=lithology.attrs.get("headers", {}).get("code", "code"),
        )
    for code in sorted(set(known) - set(codes)):
        findings.note(
            "mapping-unused", f"Nobody logged the code {known[code]!r} of the mapping", "Check its spelling."
        )
    return findings


def domain_at(intervals: pd.DataFrame, domains: pd.DataFrame, default: str = "unlogged") -> pd.Series:
    """Domain that holds most of the length of each interval; ``default`` where none does."""
    from sms_resource.samples.intervals import overlap_pairs

    result = np.full(len(intervals), default, dtype=object)
    ours = valid_intervals(intervals.assign(_row=np.arange(len(intervals))), "intervals")
    theirs = valid_intervals(domains, "domains")
    if len(ours) and len(theirs):
        left, right, shared = overlap_pairs(ours, theirs)
        pairs = pd.DataFrame(
            {"row": ours["_row"].to_numpy()[left], "domain": names(theirs["domain"])[right], "m": shared}
        )
        total = pairs.groupby(["row", "domain"], sort=True)["m"].sum().reset_index()
        best = total.sort_values(["row", "m"], ascending=[True, False], kind="stable").drop_duplicates("row")
        result[best["row"].to_numpy()] = names(best["domain"])
    return pd.Series(result, index=intervals.index, dtype=object)


def _code(value: object) -> str:
    return str(value).strip().upper()
