"""The mean equivalent beside the grades of what a cut-off on it leaves."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from sms_resource.workflow.means import with_equivalent


def _blocks() -> pd.DataFrame:
    return pd.DataFrame(
        {
            "volume_m3": [1.0, 1.0, 1.0], "dry_tonnes": [10.0, 30.0, 20.0], "wet_tonnes": [11.0, 33.0, 22.0],
            "kept_share": [1.0, 0.5, 1.0], "proposed_class": ["inferred"] * 3, "equivalent": [1.0, 3.0, 6.0],
        }
    )  # fmt: skip


def _table() -> pd.DataFrame:
    return pd.DataFrame(
        {
            "cutoff_variable": ["equivalent", "equivalent", "cu_pct"], "cutoff": [0.0, 2.0, 2.0],
            "proposed_class": ["all", "all", "all"], "dry_tonnes": [45.0, 35.0, 1.0],
        }
    )  # fmt: skip


def test_mean_equivalent_is_weighted_by_what_the_screens_leave() -> None:
    """By hand: (10 x 1 + 15 x 3 + 20 x 6) / 45, and without the first block (15 x 3 + 20 x 6) / 35."""
    made = with_equivalent(_table(), _blocks())["equivalent"].to_numpy()
    assert made[:2] == pytest.approx([175.0 / 45.0, 165.0 / 35.0])
    assert np.isnan(made[2])  # a cut-off on a metal says nothing of the equivalent


def test_tables_on_metals_stay_as_they_are() -> None:
    table = _table().tail(1)
    assert with_equivalent(table, _blocks()) is table
