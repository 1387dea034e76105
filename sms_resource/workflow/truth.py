"""The page that puts the estimate of an invented deposit against its truth."""

from __future__ import annotations

import json
from typing import Any

import numpy as np
import pandas as pd

from sms_resource.study import Study
from sms_resource.units import element_label, unit_label
from sms_resource.workflow.evidence import metal_columns


def truth_page(study: Study, done: dict[str, Any]) -> dict[str, Any] | None:
    """The estimate against the known truth of an invented deposit, with what explains the difference."""
    config = study.config
    named = config.data.truth
    if not named:
        return None
    truth = json.loads(study.resolve(named).read_text(encoding="utf-8"))
    known = truth["body"]
    frame = done["value"].frame
    metals = metal_columns(config)
    dry = float(frame["dry_tonnes"].sum())
    rows = [
        _truth_row("volume", "m³", known["volume_m3"], float(frame["volume_m3"].sum()), ""),
        _truth_row(
            "dry tonnes of the body", "t dry", known["dry_tonnes"], dry, _tonnage_cause(known, frame, done)
        ),
        _truth_row(
            "wet tonnes of the body", "t wet", known["wet_tonnes"], float(frame["wet_tonnes"].sum()), ""
        ),
    ]
    surface = done["composite"].surface
    for metal in metals:
        filled = frame[metal].notna()
        block = float(np.average(frame.loc[filled, metal], weights=frame.loc[filled, "dry_tonnes"]))
        rows.append(
            _truth_row(f"mean {_symbol(metal)} of the body", unit_label(metal), known[metal], block,
                       "selective loss of core, smoothing and the few holes")
        )  # fmt: skip
    for metal in metals if len(surface) else ():
        naive = float(pd.concat([done["composite"].assays[metal], surface.get(metal)]).mean())
        rows.append(
            _truth_row(f"plain mean of all samples, surface included: {_symbol(metal)}",
                       unit_label(metal), known[metal], naive,
                       "surface samples are richer than the body, and clusters count many times")
        )  # fmt: skip
    return {
        "file": config.data.truth,
        "table": pd.DataFrame(rows),
        "notes": ("The truth is known because the deposit is invented; a real study has no such page.",),
    }


def _symbol(metal: str) -> str:
    return element_label(metal).rpartition(" (")[0]


def _truth_row(quantity: str, unit: str, truth: float, estimate: float, cause: str) -> dict[str, Any]:
    difference = 100.0 * (estimate / truth - 1.0) if truth else np.nan
    return {"quantity": quantity, "unit": unit, "truth": truth, "estimate": estimate,
            "difference_pct": difference, "cause": cause}  # fmt: skip


def _tonnage_cause(known: dict[str, float], frame: pd.DataFrame, done: dict[str, Any]) -> str:
    """Split the difference in dry tonnes into volume and density, and name the limit on extrapolation."""
    volume = float(frame["volume_m3"].sum())
    density = (frame["dry_tonnes"].sum() / volume) / (known["dry_tonnes"] / known["volume_m3"]) - 1.0
    cut = float(done["body"].body.record.get("volume_cut_by_limit_m3", 0.0)) / known["volume_m3"]
    return (
        f"volume {100 * (volume / known['volume_m3'] - 1.0):+.1f} %, of which the limit on extrapolation below holes "
        f"that ended in sulphide takes {100 * cut:.1f} %; mean dry density {100 * density:+.1f} %"
    )
