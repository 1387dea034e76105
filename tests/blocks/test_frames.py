"""Vertical frames, and what they are worth on a draped body."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from sms_resource.blocks.frames import VerticalFrame
from tests.blocks.draped import errors, slope_deposit


def test_a_draped_body_is_estimated_better_in_depth() -> None:
    """Layers on a 25 degree slope: the error in depth below the seafloor is under three quarters of that in elevation.

    Measured on the three: 1.51, 1.40, 1.48 % Cu in elevation; 0.96, 0.90, 1.03 in depth; 0.94, 0.89, 1.01
    in proportional position. The noise that no frame can see is 0.86, 0.78 and 0.88 % Cu.
    """
    found = pd.DataFrame([errors(seed) for seed in range(3)])
    assert (found["depth"] < 0.75 * found["elevation"]).all(), found
    assert (found["proportional"] < 0.75 * found["elevation"]).all(), found


@pytest.mark.parametrize("kind", ["elevation", "depth", "proportional"])
def test_points_come_back(kind: str) -> None:
    seafloor, base, composites = slope_deposit(1)
    values = seafloor.values.copy()
    values[40:50, 40:50] = np.nan
    frame = VerticalFrame(kind, seafloor.with_values(values), base)  # type: ignore[arg-type]
    rng = np.random.default_rng(0)
    xyz = np.column_stack(
        [rng.uniform(-50, 250, 500), rng.uniform(-50, 250, 500), rng.uniform(-1700, -1400, 500)]
    )
    there = frame.forward(xyz)
    np.testing.assert_allclose(frame.inverse(there), xyz, atol=1e-8)
    assert np.isfinite(there).all()
    np.testing.assert_array_equal(there[:, :2], xyz[:, :2])
    assert len(composites) and frame.label


def test_where_seafloor_and_base_lie() -> None:
    seafloor, base, _ = slope_deposit(2)
    x, y = np.array([33.0, 120.0]), np.array([60.0, 90.0])
    top, floor = (np.column_stack([x, y, grid.sample(x, y)]) for grid in (seafloor, base))
    depth = VerticalFrame("depth", seafloor)
    np.testing.assert_allclose(depth.forward(top)[:, 2], 0.0, atol=1e-9)
    share = VerticalFrame("proportional", seafloor, base)
    np.testing.assert_allclose(share.forward(top)[:, 2], share.mean_thickness_m)
    np.testing.assert_allclose(share.forward(floor)[:, 2], 0.0, atol=1e-9)
    assert share.mean_thickness_m == pytest.approx(float((seafloor.values - base.values).mean()))


def test_what_is_missing_is_named() -> None:
    seafloor, _, _ = slope_deposit(3)
    with pytest.raises(ValueError, match="kind"):
        VerticalFrame("sideways")  # type: ignore[arg-type]
    with pytest.raises(ValueError, match="top"):
        VerticalFrame("depth")
    with pytest.raises(ValueError, match="base"):
        VerticalFrame("proportional", seafloor)
    with pytest.raises(ValueError, match="no value"):
        VerticalFrame("depth", seafloor.with_values(np.full(seafloor.shape, np.nan)))
    with pytest.raises(ValueError, match="shape"):
        VerticalFrame().forward([[1.0, 2.0]])
