"""What the treatments of lost core are summed over."""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np
import pandas as pd
import pytest

from sms_resource.workflow.lost_core import totals, with_surface

BLOCKS = pd.DataFrame(
    {
        "cu_pct": [1.0, 3.0, 5.0, np.nan],
        "dry_tonnes": [10.0, 20.0, 30.0, 40.0],
        "wet_tonnes": [11.0, 22.0, 33.0, 44.0],
    }
)


def config(variable: str) -> SimpleNamespace:
    return SimpleNamespace(
        cutoff=SimpleNamespace(variable=variable, at=3.0), metals=SimpleNamespace(estimate=["cu"])
    )


def test_blocks_at_the_cut_off_are_summed_beside_all() -> None:
    found = totals(BLOCKS, ["cu_pct"], config("cu"))
    assert (found["dry_tonnes"], found["wet_tonnes"]) == (60.0, 66.0)
    assert found["cu_pct"] == pytest.approx((10 + 60 + 150) / 60)
    assert (found["dry_tonnes_above_cutoff"], found["wet_tonnes_above_cutoff"]) == (50.0, 55.0)
    assert found["cu_pct_above_cutoff"] == pytest.approx(210 / 50)


def test_a_cut_off_that_is_not_on_a_metal_makes_no_such_rows() -> None:
    assert set(totals(BLOCKS, ["cu_pct"], config("value"))) == {"dry_tonnes", "wet_tonnes", "cu_pct"}


def test_wet_tonnes_that_are_not_known_are_not_zero() -> None:
    found = totals(BLOCKS.assign(wet_tonnes=np.nan), ["cu_pct"], config("cu"))
    assert np.isnan(found["wet_tonnes"]) and np.isnan(found["wet_tonnes_above_cutoff"])


def test_surface_samples_of_a_cap_stay_in_every_treatment() -> None:
    core = pd.DataFrame({"composite_id": ["H1-1", "H1-2"], "cu_pct": [1.0, 2.0]})
    study = pd.DataFrame({"composite_id": ["H1-1", "surface-S1"], "cu_pct": [1.0, 9.0]})
    assert with_surface(core, study)["cu_pct"].tolist() == [1.0, 2.0, 9.0]
    assert with_surface(core, study.iloc[:1]) is core
