"""Samples as the variogram takes them."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from sms_resource.workflow.continuity import one_sample_an_assay


def test_pairs_of_one_assay_leave_the_down_hole_variogram() -> None:
    """28 assays of 2 m of independent grades, cut into composites of 1 m: the half of all first pairs had gamma 0."""
    rng = np.random.default_rng(2)
    grade = np.repeat(rng.normal(5.0, 1.0, 28), 2)
    part = pd.DataFrame(
        {
            "hole_id": np.repeat(["A", "B"], 28).astype(object),
            "cu_pct": grade,
            "shared_assay": np.repeat(np.arange(28) + 1, 2),
        }
    )
    places = np.column_stack([np.repeat([0.0, 30.0], 28), np.zeros(56), -np.tile(np.arange(28) + 0.5, 2)])
    middle, values, holes, weights = one_sample_an_assay(part, places, "cu_pct", np.ones(56))
    assert len(values) == 28 and values == pytest.approx(grade[::2])
    assert middle[:2, 2] == pytest.approx([-1.0, -3.0]) and holes.tolist() == ["A"] * 14 + ["B"] * 14
    assert weights.tolist() == [1.0] * 28
    # no pair is left at 1 m, where there was nothing but repeats and steps from assay to assay
    down = np.abs(np.diff(middle[:14, 2]))
    assert down.min() == pytest.approx(2.0)


def test_samples_that_share_no_assay_stay_as_they_are() -> None:
    part = pd.DataFrame({"hole_id": ["A", "A", "B"], "cu_pct": [1.0, 2.0, 3.0], "shared_assay": [0, 0, 0]})
    places = np.arange(9.0).reshape(3, 3)
    middle, values, holes, weights = one_sample_an_assay(part, places, "cu_pct", np.array([1.0, 2.0, 3.0]))
    assert middle is places and values.tolist() == [1.0, 2.0, 3.0]
    assert holes.tolist() == ["A", "A", "B"] and weights.tolist() == [1.0, 2.0, 3.0]


def test_groups_keep_the_order_of_their_first_sample() -> None:
    part = pd.DataFrame(
        {"hole_id": ["A"] * 5, "cu_pct": [1.0, 9.0, 9.0, 2.0, 3.0], "shared_assay": [0, 7, 7, 0, 0]}
    )
    places = np.column_stack([np.zeros(5), np.zeros(5), -np.arange(5.0)])
    middle, values, _, _ = one_sample_an_assay(part, places, "cu_pct", np.ones(5))
    assert values.tolist() == [1.0, 9.0, 2.0, 3.0] and middle[:, 2].tolist() == [0.0, -1.5, -3.0, -4.0]
