"""Invented holes for the tests of the samples room: a few lines that make the tables the functions read."""

from __future__ import annotations

import numpy as np
import pandas as pd

from sms_resource.samples.desurvey import HolePaths, hole_paths


def collars(*names: str, length: float = 20.0, spacing: float = 10.0) -> pd.DataFrame:
    """Vertical holes in a row, at elevation -1600 m."""
    count = len(names)
    return pd.DataFrame(
        {
            "hole_id": list(names), "easting": 1000.0 + spacing * np.arange(count), "northing": np.full(count, 500.0),
            "elevation": np.full(count, -1600.0), "length_m": np.full(count, length),
            "azimuth": np.full(count, np.nan), "dip": np.full(count, np.nan), "ended_in": ["host"] * count,
            "position_method": ["LBL"] * count, "position_sigma_m": np.full(count, 0.5),
            "source_row": np.arange(count) + 2,
        }
    )  # fmt: skip


def paths(*names: str, **options: float) -> HolePaths:
    """Paths of those holes."""
    return hole_paths(collars(*names, **options))


def intervals(rows: list[tuple], *columns: str) -> pd.DataFrame:
    """Interval table from (hole, from, to, ...) rows; ``columns`` name what follows."""
    frame = pd.DataFrame(rows, columns=["hole_id", "from_m", "to_m", *columns])
    frame["hole_id"] = frame["hole_id"].astype(object)
    frame["source_row"] = np.arange(len(frame)) + 2
    return frame


def runs(rows: list[tuple[str, float, float, float]]) -> pd.DataFrame:
    """Runs from (hole, from, to, recovery percent)."""
    frame = intervals(rows, "recovery_pct")
    frame["recovered_length_m"] = frame["recovery_pct"] / 100.0 * (frame["to_m"] - frame["from_m"])
    return frame


def codes(findings: object) -> list[str]:
    """Codes of the findings, in order."""
    return [item.code for item in findings]  # type: ignore[attr-defined]
