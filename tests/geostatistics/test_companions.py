"""Companion estimates against plain NumPy on the same search."""

from __future__ import annotations

import numpy as np
import pytest

from sms_resource.geostatistics import Neighbourhood, companion_estimates, discretisation_offsets

from .kriging_twin import chosen_samples, scene


@pytest.mark.parametrize("power", [1.0, 2.0, 3.5])
@pytest.mark.parametrize("block", [None, (5.0, 6.0, 2.0)])
def test_companions_and_twin_agree(block, power):
    points, values, holes, targets = scene(30)
    item = Neighbourhood((40.0, 30.0, 9.0), 12, 3, 3, 2, "octants", azimuth=50.0, plunge=10.0)
    counts = (1, 1, 1) if block is None else (2, 2, 2)
    offsets = np.zeros((1, 3)) if block is None else discretisation_offsets(block, counts)
    result = companion_estimates(
        points, values, targets, item, hole_ids=holes, power=power, block_size=block, discretisation=counts
    )
    for b, target in enumerate(targets):
        for m in range(2):
            present = np.flatnonzero(np.isfinite(values[:, m]))
            rows, _, enough = chosen_samples(points[present], holes[present], target, item)
            if not enough:
                assert all(np.isnan(array[b, m]) for array in result.values())
                continue
            rows = present[rows]

            def apart(place, rows=rows):
                return np.linalg.norm(((points[rows] - place) @ item.axes.T) / item.radii, axis=1)

            estimates = []
            for offset in offsets:
                weights = apart(target + offset) ** -power
                estimates.append(weights @ values[rows, m] / weights.sum())
            assert result["inverse_distance"][b, m] == pytest.approx(np.mean(estimates), rel=1e-10)
            assert result["nearest"][b, m] == values[rows[np.argmin(apart(target))], m]
            assert result["moving_average"][b, m] == pytest.approx(values[rows, m].mean(), rel=1e-12)


@pytest.mark.parametrize("road", [None, Neighbourhood(1e3, 1000, 1)])
def test_a_point_on_a_sample_takes_its_value(road):
    points, values, _, _ = scene(31, columns=1, missing=0.0)
    result = companion_estimates(points, values[:, 0], points, road)
    np.testing.assert_array_equal(result["inverse_distance"], values[:, 0])
    np.testing.assert_array_equal(result["nearest"], values[:, 0])


def test_all_samples_and_a_wide_search_agree():
    points, values, _, targets = scene(32)
    wide = companion_estimates(points, values, targets, Neighbourhood(1e3, 1000, 1), block_size=(5, 5, 2))
    everything = companion_estimates(points, values, targets, None, block_size=(5, 5, 2))
    for name in wide:
        np.testing.assert_allclose(everything[name], wide[name], rtol=1e-10)


def test_passes_and_threads():
    points, values, _, targets = scene(33, targets=200)
    passes = [Neighbourhood(6.0, 8, 4), Neighbourhood(20.0, 8, 4)]
    one = companion_estimates(points, values, targets, passes, threads=1)
    two = companion_estimates(points, values, targets, passes, threads=2)
    late = companion_estimates(points, values, targets, passes[1])
    early = companion_estimates(points, values, targets, passes[0])
    for name in one:
        assert one[name].tobytes() == two[name].tobytes()
        expected = np.where(np.isnan(early[name]), late[name], early[name])
        np.testing.assert_array_equal(one[name], expected)


def test_choice_of_methods():
    points, values, _, targets = scene(34)
    assert list(companion_estimates(points, values, targets, methods=["nearest"])) == ["nearest"]
    with pytest.raises(ValueError, match="methods holds 'spline'"):
        companion_estimates(points, values, targets, methods=["spline"])
    with pytest.raises(ValueError, match="power"):
        companion_estimates(points, values, targets, power=0.0)


def test_target_that_is_not_a_place():
    points, values, _, targets = scene(35)
    targets[2, 0] = np.nan
    for road in (None, Neighbourhood(50.0, 8, 2)):
        result = companion_estimates(points, values, targets, road)
        for array in result.values():
            assert np.isnan(array[2]).all()
            assert np.isfinite(array[[0, 1, 3]]).all()
