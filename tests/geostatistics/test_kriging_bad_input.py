"""Bad input: an error that names the argument, or a status that tells what happened."""

from __future__ import annotations

import numpy as np
import pytest

from sms_resource.geostatistics import (
    HighGradeRestraint,
    Neighbourhood,
    Structure,
    VariogramModel,
    find_coincident,
    ordinary_kriging,
)

from .kriging_twin import scene

MODEL = VariogramModel(0.2, [Structure("spherical", 1.0, (40.0, 40.0, 10.0))])
PURE_GAUSSIAN = VariogramModel(0.0, [Structure("gaussian", 1.0, (500.0, 500.0, 500.0))])
ROAD = Neighbourhood(60.0, 12, 2)


@pytest.fixture
def data():
    points, values, holes, targets = scene(20, samples=40, targets=10, columns=1, missing=0.0)
    return points, values[:, 0], holes, targets


def test_missing_coordinate_is_named(data):
    points, values, _, targets = data
    points[[3, 7], 1] = np.nan
    with pytest.raises(ValueError, match=r"coordinates: not finite in rows 3, 7"):
        ordinary_kriging(points, values, targets, MODEL)


def test_shapes_are_named(data):
    points, values, _, targets = data
    with pytest.raises(ValueError, match=r"coordinates has shape \(40, 2\); wanted \(n, 3\)"):
        ordinary_kriging(points[:, :2], values, targets, MODEL)
    with pytest.raises(ValueError, match=r"values has shape \(39,\); wanted \(40,\)"):
        ordinary_kriging(points, values[1:], targets, MODEL)
    with pytest.raises(ValueError, match=r"targets has shape"):
        ordinary_kriging(points, values, targets[0], MODEL)
    with pytest.raises(ValueError, match="coordinates is empty"):
        ordinary_kriging(np.empty((0, 3)), [], targets, MODEL)
    with pytest.raises(ValueError, match="hole_ids has 3 entries; wanted 40"):
        ordinary_kriging(points, values, targets, MODEL, hole_ids=["a", "b", "c"])
    with pytest.raises(ValueError, match="one VariogramModel, or 1 of them"):
        ordinary_kriging(points, values, targets, [MODEL, MODEL])
    with pytest.raises(ValueError, match="values: wanted numbers"):
        ordinary_kriging(points, ["<0.01"] * 40, targets, MODEL)
    with pytest.raises(ValueError, match="values: infinite in rows 0"):
        ordinary_kriging(points, np.where(np.arange(40) == 0, np.inf, values), targets, MODEL)


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"block_size": (5, 0, 2)}, "block_size"),
        ({"block_size": (5, 5)}, "block_size"),
        ({"block_size": (5, 5, 2), "discretisation": (3, 3, 0)}, "discretisation"),
        ({"discretisation": (3, 3, 3)}, "discretisation is given without block_size"),
        ({"threads": 0}, "threads"),
        ({"coincident": "ignore"}, "coincident"),
        ({"neighbourhood": []}, "neighbourhood"),
        ({"neighbourhood": Neighbourhood(50.0, max_per_hole=2)}, "hole_ids is missing"),
        ({"neighbourhood": Neighbourhood(50.0, min_holes=2)}, "hole_ids is missing"),
        ({"high_grade_restraint": HighGradeRestraint(3.0)}, "high_grade_restraint needs a neighbourhood"),
    ],
)
def test_settings_are_named(data, settings, message):
    points, values, _, targets = data
    with pytest.raises(ValueError, match=message):
        ordinary_kriging(points, values, targets, MODEL, **settings)


@pytest.mark.parametrize("road", [None, ROAD])
def test_coincident_samples(data, road):
    points, values, _, targets = data
    points, values = np.vstack([points, points[5]]), np.append(values, 99.0)
    assert find_coincident(points).tolist() == [[5, 40]]
    with pytest.raises(ValueError, match=r"1 pairs of samples lie at one place \(rows 5 and 40\)"):
        ordinary_kriging(points, values, targets, MODEL, road)
    mean = values[:40].copy()
    mean[5] = (values[5] + 99.0) / 2.0
    averaged = ordinary_kriging(points, values, targets, MODEL, road, coincident="average")
    np.testing.assert_allclose(
        averaged.estimate, ordinary_kriging(points[:40], mean, targets, MODEL, road).estimate
    )
    first = ordinary_kriging(points, values, targets, MODEL, road, coincident="keep_first")
    np.testing.assert_allclose(
        first.estimate, ordinary_kriging(points[:40], values[:40], targets, MODEL, road).estimate
    )


def test_coincident_samples_that_never_meet(data):
    """Two samples at one place, one assayed for the first metal and one for the second, are no conflict."""
    points, values, _, targets = data
    both = np.column_stack([values, values])
    points = np.vstack([points, points[5]])
    both = np.vstack([both, [np.nan, both[5, 1]]])
    both[5, 1] = np.nan
    result = ordinary_kriging(points, both, targets, MODEL, ROAD)
    np.testing.assert_allclose(result.estimate[:, 0], result.estimate[:, 1])


@pytest.mark.parametrize("road", [None, Neighbourhood(500.0, 40, 1)])
def test_singular_system_has_a_status(data, road):
    """A gaussian without nugget over close samples has no stable solution: said, and not guessed."""
    points, values, _, targets = data
    close = points * 0.01
    result = ordinary_kriging(close, values, targets, PURE_GAUSSIAN, road)
    assert (result.status == 3).all()
    assert np.isnan(result.estimate).all() and np.isnan(result.variance).all()
    assert result.findings(["cu_pct"])[0].code == "kriging-singular"


def test_negative_weights_are_told():
    """A smooth model over few, screened samples gives large negative weights."""
    x = np.array([0.0, 5.0, 10.0, 15.0, 20.0, 25.0])
    points = np.column_stack([x, np.zeros(6), np.zeros(6)])
    smooth = VariogramModel(1e-4, [Structure("gaussian", 1.0, 30.0)])
    targets = np.column_stack([np.linspace(-12.0, -6.0, 9), np.zeros(9), np.zeros(9)])
    result = ordinary_kriging(points, np.sin(x), targets, smooth)
    assert (result.negative_weight_sum < -0.1).all()
    assert [item.code for item in result.findings(["cu_pct"])] == ["kriging-negative-weights"]


def test_too_few_samples_and_holes(data):
    points, values, _holes, targets = data
    far = targets + [1e5, 0.0, 0.0]
    result = ordinary_kriging(points, values, far, MODEL, ROAD)
    assert (result.status == 1).all() and (result.sample_count == 0).all()
    assert np.isnan(result.estimate).all() and np.isnan(result.nearest_distance).all()
    lonely = Neighbourhood(60.0, 12, 2, min_holes=3)
    one_hole = ordinary_kriging(points, values, targets, MODEL, lonely, hole_ids=np.zeros(40))
    assert (one_hole.status == 2).all() and (one_hole.hole_count == 1).all()
    codes = {item.code for item in one_hole.findings()}
    assert codes == {"kriging-too-few-holes"}


@pytest.mark.parametrize("road", [None, ROAD])
def test_target_that_is_not_a_place(data, road):
    points, values, _, targets = data
    targets[4, 2] = np.nan
    result = ordinary_kriging(points, values, targets, MODEL, road)
    assert result.status[4] == 4 and np.isnan(result.estimate[4])
    assert (np.delete(result.status, 4) == 0).all()


@pytest.mark.parametrize("road", [None, ROAD])
def test_column_without_values(data, road):
    points, values, _, targets = data
    both = np.column_stack([values, np.full(40, np.nan)])
    result = ordinary_kriging(points, both, targets, MODEL, road)
    assert (result.status[:, 0] == 0).all() and (result.status[:, 1] == 1).all()


def test_one_sample(data):
    _, _, _, targets = data
    place = [[40.0, 40.0, -5.0]]
    all_samples = ordinary_kriging(place, [2.5], targets, MODEL)
    np.testing.assert_allclose(all_samples.estimate, 2.5, rtol=1e-14)
    searched = ordinary_kriging(place, [2.5], targets, MODEL, Neighbourhood(1e3))
    assert (searched.status == 1).all()


@pytest.mark.parametrize("road", [None, ROAD])
def test_equal_values(data, road):
    points, _values, _, targets = data
    result = ordinary_kriging(points, np.full(40, 3.25), targets, MODEL, road)
    np.testing.assert_allclose(result.estimate, 3.25, rtol=1e-12)


@pytest.mark.parametrize("road", [None, Neighbourhood(300.0, 12, 2)])
def test_holes_in_one_line(road):
    """Samples on one line leave nothing singular: the estimate is sound, only blind across the line."""
    x = np.arange(30) * 4.0
    points = np.column_stack([x, 2.0 * x, np.zeros(30)])
    values = np.sin(x / 10.0)
    result = ordinary_kriging(points, values, points[5:9] + [1.0, -0.5, 0.0], MODEL, road)
    assert (result.status == 0).all() and np.isfinite(result.estimate).all()


@pytest.mark.parametrize("road", [None, ROAD])
def test_no_targets(data, road):
    points, values, _, _ = data
    result = ordinary_kriging(points, values, np.empty((0, 3)), MODEL, road)
    assert result.estimate.shape == (0,)


def test_all_samples_has_a_limit():
    points = np.random.default_rng(0).uniform(0, 1e4, (10_001, 3))
    with pytest.raises(ValueError, match="wanted a Neighbourhood above 10000 samples"):
        ordinary_kriging(points, points[:, 0], points[:1] + 1.0, MODEL)


def test_pure_nugget_blocks(data):
    """Without a structure a block has no variance, so there is no efficiency to tell."""
    points, values, _, targets = data
    for road in (None, Neighbourhood(1e3, 40, 1)):
        result = ordinary_kriging(
            points, values, targets, VariogramModel(2.0, []), road, block_size=(5, 5, 2)
        )
        np.testing.assert_allclose(result.estimate, values.mean())
        np.testing.assert_allclose(result.variance, 2.0 / 40)
        assert np.isnan(result.kriging_efficiency).all()
