"""What must hold for any data: the properties of the method, tried on random scenes."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from sms_resource.geostatistics import (
    Neighbourhood,
    Structure,
    VariogramModel,
    discretisation_offsets,
    ordinary_kriging,
)

from .kriging_twin import scene

tried = settings(max_examples=15, deadline=None, suppress_health_check=[HealthCheck.too_slow])
seeds = st.integers(0, 10_000)


@st.composite
def models(draw):
    shape = draw(st.sampled_from(["spherical", "exponential", "gaussian"]))
    ranges = tuple(draw(st.floats(5.0, 80.0)) for _ in range(3))
    angles = [draw(st.floats(-180.0, 180.0)) for _ in range(3)]
    return VariogramModel(draw(st.floats(0.05, 2.0)), [Structure(shape, 1.0, ranges)], *angles)


def case(seed):
    points, values, holes, targets = scene(seed, samples=50, holes=9, targets=12, missing=0.1)
    return points, values, holes, targets


NEAR = Neighbourhood((40.0, 30.0, 12.0), 16, 3, 4, 1, "octants", azimuth=35.0, plunge=10.0, tilt=5.0)
ROADS = [None, NEAR]


@pytest.mark.parametrize("road", ROADS)
@tried
@given(seed=seeds, model=models(), constant=st.floats(-50.0, 50.0))
def test_weights_sum_to_one(road, seed, model, constant):
    """A constant field is kriged to the constant."""
    points, values, holes, targets = case(seed)
    flat = np.where(np.isfinite(values), constant, np.nan)
    result = ordinary_kriging(points, flat, targets, model, road, hole_ids=holes)
    done = result.status == 0
    np.testing.assert_allclose(result.estimate[done], constant, rtol=1e-10, atol=1e-10)


@pytest.mark.parametrize("road", ROADS)
@tried
@given(seed=seeds, model=models(), shift=st.floats(-100.0, 100.0), factor=st.floats(0.01, 100.0))
def test_change_of_units(road, seed, model, shift, factor):
    """Values times a factor plus a shift: so is the estimate, and the variance takes the factor squared."""
    points, values, holes, targets = case(seed)
    first = ordinary_kriging(points, values, targets, model, road, hole_ids=holes)
    second = ordinary_kriging(
        points, values * factor + shift, targets, model.scaled(factor**2), road, hole_ids=holes
    )
    scale = factor * 10.0 + abs(shift)
    np.testing.assert_allclose(second.estimate, first.estimate * factor + shift, rtol=1e-9, atol=1e-9 * scale)
    np.testing.assert_allclose(second.variance, first.variance * factor**2, rtol=1e-8, atol=1e-9 * factor**2)
    np.testing.assert_allclose(second.slope_of_regression, first.slope_of_regression, rtol=1e-8, atol=1e-9)


@pytest.mark.parametrize("road", ROADS)
@tried
@given(seed=seeds, model=models(), east=st.integers(-(10**7), 10**7), north=st.integers(-(10**7), 10**7))
def test_translation(road, seed, model, east, north):
    """Coordinates of ten thousand kilometres lose no more than their own last digits."""
    points, values, holes, targets = case(seed)
    points, targets = points.round(2), targets.round(2)
    move = np.array([east, north, -4000.0])
    first = ordinary_kriging(points, values, targets, model, road, hole_ids=holes)
    second = ordinary_kriging(points + move, values, targets + move, model, road, hole_ids=holes)
    np.testing.assert_array_equal(second.sample_count, first.sample_count)
    np.testing.assert_allclose(second.estimate, first.estimate, rtol=1e-6, atol=1e-6)
    np.testing.assert_allclose(second.variance, first.variance, rtol=1e-6, atol=1e-6)


@pytest.mark.parametrize("near", [False, True])
@tried
@given(
    seed=seeds, turn=st.floats(-180.0, 180.0), azimuth=st.floats(0.0, 180.0), plunge=st.floats(-60.0, 60.0)
)
def test_rotation(near, seed, turn, azimuth, plunge):
    """Turn samples, targets, model and search in plan together, and nothing changes."""
    points, values, holes, targets = case(seed)
    c, s = np.cos(np.radians(turn)), np.sin(np.radians(turn))
    clockwise = np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]])

    def krige(spin, matrix):
        model = VariogramModel(
            0.2, [Structure("spherical", 1.0, (50.0, 30.0, 9.0))], azimuth + spin, plunge, 25.0
        )
        road = (
            Neighbourhood((40.0, 30.0, 12.0), 12, 3, azimuth=azimuth + spin, plunge=plunge) if near else None
        )
        return ordinary_kriging(points @ matrix, values, targets @ matrix, model, road, hole_ids=holes)

    first, second = krige(0.0, np.eye(3)), krige(turn, clockwise)
    np.testing.assert_array_equal(second.sample_count, first.sample_count)
    np.testing.assert_allclose(second.estimate, first.estimate, rtol=1e-8, atol=1e-8)
    np.testing.assert_allclose(second.variance, first.variance, rtol=1e-8, atol=1e-8)


@pytest.mark.parametrize("road", ROADS)
@tried
@given(seed=seeds, model=models())
def test_permutation_of_samples(road, seed, model):
    points, values, holes, targets = case(seed)
    order = np.random.default_rng(seed).permutation(len(points))
    first = ordinary_kriging(points, values, targets, model, road, hole_ids=holes)
    second = ordinary_kriging(points[order], values[order], targets, model, road, hole_ids=holes[order])
    np.testing.assert_array_equal(second.sample_count, first.sample_count)
    np.testing.assert_allclose(second.estimate, first.estimate, rtol=1e-9, atol=1e-9)
    np.testing.assert_allclose(second.variance, first.variance, rtol=1e-9, atol=1e-9)


@pytest.mark.parametrize("road", ROADS)
@tried
@given(seed=seeds, model=models())
def test_exact_at_the_data(road, seed, model):
    points, values, holes, _ = case(seed)
    result = ordinary_kriging(points, values, points, model, road, hole_ids=holes)
    present = np.isfinite(values) & (result.status == 0)
    np.testing.assert_array_equal(result.estimate[present], values[present])
    np.testing.assert_array_equal(result.variance[present], 0.0)


@tried
@given(seed=seeds, model=models())
def test_block_is_the_mean_of_its_points(seed, model):
    """With the same samples (all of them), estimate for estimate."""
    points, values, _holes, targets = case(seed)
    size, counts = (6.0, 4.0, 2.0), (3, 2, 2)
    block = ordinary_kriging(points, values, targets, model, block_size=size, discretisation=counts)
    inside = (targets[:, None] + discretisation_offsets(size, counts)).reshape(-1, 3)
    single = ordinary_kriging(points, values, inside, model)
    mean = single.estimate.reshape(len(targets), 12, -1).mean(axis=1)
    np.testing.assert_allclose(block.estimate, mean, rtol=1e-8, atol=1e-8)


@tried
@given(seed=seeds, model=models())
def test_more_samples_never_raise_the_variance(seed, model):
    points, values, _holes, targets = case(seed)
    few = ordinary_kriging(points, values[:, 0], targets, model, Neighbourhood(1e3, 6, 1))
    many = ordinary_kriging(points, values[:, 0], targets, model, Neighbourhood(1e3, 20, 1))
    assert (many.variance <= few.variance + 1e-9).all()
