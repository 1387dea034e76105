"""The neighbourhood study: its table is what kriging says, and its recommendation follows from it."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from sms_resource.geostatistics import (
    Neighbourhood,
    Structure,
    VariogramModel,
    block_variance,
    neighbourhood_study,
    ordinary_kriging,
)
from sms_resource.geostatistics.search_study import operation_parts, operations

from .kriging_twin import scene

MODEL = VariogramModel(0.2, [Structure("spherical", 1.0, (50.0, 50.0, 12.0))])
START = Neighbourhood((60.0, 60.0, 20.0), 16, 4, 4, 2)


@pytest.fixture(scope="module")
def study():
    points, values, holes, targets = scene(50, samples=150, targets=40)
    table = pd.DataFrame(values, columns=["cu_pct", "au_gpt"])
    made = neighbourhood_study(
        points,
        table,
        targets,
        MODEL,
        START,
        block_size=(6.0, 6.0, 2.0),
        discretisation=(2, 2, 2),
        hole_ids=holes,
        sample_numbers=(2, 4, 8, 16, 30, 60),
        discretisations=((1, 1, 1), (2, 2, 2), (3, 3, 3), (5, 5, 5)),
    )
    return points, table, holes, targets, made


def test_table_is_what_kriging_says(study):
    points, table, holes, targets, made = study
    assert len(made.table) == 2 * (6 + 3 + 4)
    row = made.table.query("varied == 'samples' and max_samples == 8 and column == 'au_gpt'").iloc[0]
    item = Neighbourhood((60.0, 60.0, 20.0), 8, 4, 4, 2)
    result = ordinary_kriging(
        points, table, targets, MODEL, item, hole_ids=holes, block_size=(6, 6, 2), discretisation=(2, 2, 2)
    )
    done = result.status[:, 1] == 0
    assert row["estimated_share"] == done.mean()
    assert row["mean_slope"] == pytest.approx(result.slope_of_regression[done, 1].mean())
    assert row["mean_efficiency"] == pytest.approx(result.kriging_efficiency[done, 1].mean())
    assert row["mean_negative_weight"] == pytest.approx(result.negative_weight_sum[done, 1].mean())
    assert row["mean_variance"] == pytest.approx(result.variance[done, 1].mean())
    assert row["block_variance"] == pytest.approx(block_variance(MODEL, (6, 6, 2), (2, 2, 2)))
    assert row["microseconds_per_target"] > 0.0


def test_recommendation_follows_from_the_table(study):
    *_, made = study
    worst = made.table[made.table["varied"] == "samples"].groupby("max_samples")["mean_slope"].min()
    on_plateau = worst.index[worst >= worst.max() - 0.01]
    assert made.max_samples == on_plateau.min()
    assert f"{made.max_samples} samples at most" in made.recommendation
    fine = block_variance(MODEL, (6, 6, 2), (12, 12, 12))
    chosen = block_variance(MODEL, (6, 6, 2), made.discretisation)
    assert abs(chosen - fine) <= 0.02 * fine
    coarser = {(3, 3, 3): (2, 2, 2), (5, 5, 5): (3, 3, 3), (2, 2, 2): (1, 1, 1)}[made.discretisation]
    assert abs(block_variance(MODEL, (6, 6, 2), coarser) - fine) > 0.02 * fine
    assert made.block_size in [(3.0, 3.0, 1.0), (6.0, 6.0, 2.0), (12.0, 12.0, 4.0)]
    assert "slope" in repr(made)


def test_rising_slope_is_said():
    points, values, holes, targets = scene(51, samples=150, targets=20, columns=1, missing=0.0)
    made = neighbourhood_study(
        points,
        values[:, 0],
        targets,
        MODEL,
        START,
        block_size=(4, 4, 2),
        hole_ids=holes,
        sample_numbers=(2, 4, 6),
    )
    assert made.max_samples == 6
    assert "still rising at this largest number" in made.recommendation


def test_targets_are_thinned():
    points, values, holes, _ = scene(52, samples=60, columns=1, missing=0.0)
    targets = np.random.default_rng(0).uniform(0, 80, (500, 3)) - [0, 0, 80]
    made = neighbourhood_study(
        points, values[:, 0], targets, MODEL, START, block_size=(4, 4, 2), hole_ids=holes, sample_numbers=(4,),
        block_sizes=[], discretisations=[], most_targets=100,
    )  # fmt: skip
    assert (made.table["targets"] == 100).all()
    assert made.block_size is None and made.discretisation is None


@pytest.mark.parametrize("count", [8, 16, 24, 40])
def test_counted_arithmetic_is_near_that_of_lapack(count):
    """Factorisation and weights against dpotrf and dpotrs: LAPACK Working Note 41 (from memory), one right side."""
    parts = operation_parts(np.array([count]), 27)
    known = count**3 / 3 + count**2 / 2 + count / 6 + 2 * count**2
    assert parts["factorisation"][0] + parts["weights"][0] == pytest.approx(
        known, rel=0.3 if count < 16 else 0.15
    )
    assert operations([count, count], 27) == pytest.approx(sum(part[0] for part in parts.values()), rel=1e-12)
    assert operations([count], 8) < operations([count], 27) < operations([count + 1], 27)
    assert np.isnan(operations([], 27))
