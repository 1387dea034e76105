"""Costs that rise with slope and depth reach the blocks of a run."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from sms_resource import load_study, run_study
from tests.end_to_end.small_study import SmallStudy


@pytest.mark.slow
def test_lifting_costs_more_where_the_seafloor_is_steep(tmp_path: Path) -> None:
    study = SmallStudy(tmp_path)
    costs = study.toml["value"].setdefault("costs", {})
    costs.update(lifting_per_wet_tonne=30.0, vessel_cost_per_day=0.0)
    plain = run_study(load_study(study.write()), None, cache=False)
    slope = plain.block_model.frame["slope_deg"].to_numpy()
    assert np.isfinite(slope).all() and slope.min() < slope.max()
    middle = float(np.median(slope))
    costs["slope_factors"] = [[middle, 2.0]]
    steep = run_study(load_study(study.write()), None, cache=False)
    assert "cost-column-missing" not in {item.code for item in steep.findings}
    before, after = (item.block_model.frame for item in (plain, steep))
    wet = after["wet_tonnes"] / after["dry_tonnes"]
    more = np.where(slope >= middle, 30.0 * wet, 0.0)
    np.testing.assert_allclose(
        after["cost_per_dry_tonne"] - before["cost_per_dry_tonne"], more, rtol=1e-9, atol=1e-9
    )
    assert (more > 0).any() and (more == 0).any()
