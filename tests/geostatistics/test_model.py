"""The variogram model and its conventions."""

from __future__ import annotations

import json

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import sms_resource.geostatistics as geostatistics
from sms_resource.geostatistics import Structure, VariogramModel, block_variance, rotation_axes


def unit(shape="spherical", nugget=0.0, ranges=(1.0, 1.0, 1.0), **angles):
    return VariogramModel(nugget, [Structure(shape, 1.0, ranges)], **angles)


def test_axes_without_rotation():
    np.testing.assert_allclose(rotation_axes(0.0), [[0, 1, 0], [1, 0, 0], [0, 0, 1]], atol=1e-15)


def test_axes_by_hand():
    r = np.sqrt(0.5)
    # major to the north-east
    np.testing.assert_allclose(rotation_axes(45.0)[0], [r, r, 0.0], atol=1e-15)
    # plunge is positive downward
    np.testing.assert_allclose(rotation_axes(0.0, 45.0)[0], [0.0, r, -r], atol=1e-15)
    # looking north, along the major axis, the tilt turns the semi-major from east down
    np.testing.assert_allclose(rotation_axes(0.0, 0.0, 45.0)[1], [r, 0.0, -r], atol=1e-15)


@settings(deadline=None)
@given(*[st.floats(-360.0, 360.0)] * 3)
def test_axes_are_orthonormal(azimuth, plunge, tilt):
    axes = rotation_axes(azimuth, plunge, tilt)
    np.testing.assert_allclose(axes @ axes.T, np.eye(3), atol=1e-12)


@pytest.mark.parametrize(
    ("shape", "at_half", "at_range"),
    [
        ("spherical", 1.5 * 0.5 - 0.5 * 0.125, 1.0),
        ("exponential", 1.0 - np.exp(-1.5), 1.0 - np.exp(-3.0)),
        ("gaussian", 1.0 - np.exp(-0.75), 1.0 - np.exp(-3.0)),
    ],
)
def test_shapes(shape, at_half, at_range):
    model = unit(shape, nugget=0.5, ranges=(10.0, 20.0, 5.0))
    # major = north, semi-major = east, minor = up
    half = model.variogram([[0, 5, 0], [10, 0, 0], [0, 0, 2.5]])
    whole = model.variogram([[0, 10, 0], [20, 0, 0], [0, 0, 5]])
    np.testing.assert_allclose(half, 0.5 + at_half)
    np.testing.assert_allclose(whole, 0.5 + at_range)
    assert model.total_sill == 1.5


def test_nugget_at_zero_distance():
    model = unit(nugget=0.5)
    assert model.variogram([[0.0, 0.0, 0.0]])[0] == 0.0
    assert model.covariance([[0.0, 0.0, 0.0]])[0] == 1.5
    np.testing.assert_allclose(model.variogram([[1e-4, 0.0, 0.0]]), 0.5, atol=2e-4)


def test_record_goes_round():
    model = VariogramModel(
        0.1, [Structure("spherical", 1.0, (3, 2, 1)), Structure("gaussian", 0.5, 4.0)], 10.0, 20.0, 30.0
    )
    assert VariogramModel.from_record(json.loads(json.dumps(model.to_record()))) == model
    assert model.structures[1].ranges == (4.0, 4.0, 4.0)
    assert model.scaled(4.0).total_sill == pytest.approx(4.0 * model.total_sill)


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: Structure("cubic", 1.0, 5.0), "shape 'cubic'"),
        (lambda: Structure("spherical", -1.0, 5.0), "sill of a spherical structure is -1.0"),
        (lambda: Structure("spherical", np.nan, 5.0), "sill"),
        (lambda: Structure("spherical", 1.0, (5.0, 0.0, 5.0)), "each must be above zero"),
        (lambda: Structure("spherical", 1.0, (5.0, 5.0)), "wanted three numbers"),
        (lambda: VariogramModel(-0.1, [Structure("spherical", 1.0, 5.0)]), "nugget is -0.1"),
        (lambda: VariogramModel(0.0, []), "total sill"),
        (lambda: VariogramModel(0.0, [1.0]), "Structure objects"),
        (lambda: VariogramModel(1.0, [], azimuth=np.inf), "azimuth"),
        (lambda: unit().variogram([1.0, 2.0]), "separations has shape"),
    ],
)
def test_bad_models(make, message):
    with pytest.raises(ValueError, match=message):
        make()


# Auxiliary functions of a spherical model of sill 1 and range 1, from the charts of Clark (1979), Practical
# Geostatistics, and Journel & Huijbregts (1978); computed to more digits by independent quadrature.
FINE = 60


@pytest.mark.parametrize(
    ("sides", "counts", "expected", "tolerance"),
    [
        ((0.1, 1e-9, 1e-9), (2000, 1, 1), 0.04995, 1e-6),
        ((0.5, 1e-9, 1e-9), (2000, 1, 1), 0.24375, 1e-6),
        ((1.0, 1e-9, 1e-9), (2000, 1, 1), 0.45, 1e-6),
        ((2.0, 1e-9, 1e-9), (2000, 1, 1), 0.675, 1e-6),
        ((0.1, 0.1, 1e-9), (300, 300, 1), 0.0781, 1e-4),
        ((0.5, 0.5, 1e-9), (300, 300, 1), 0.3760, 1e-4),
        ((1.0, 1.0, 1e-9), (300, 300, 1), 0.6622, 1e-4),
        ((0.1, 0.1, 0.1), (FINE,) * 3, 0.0990491, 1e-4),
        ((0.5, 0.5, 0.5), (FINE,) * 3, 0.4704137, 1e-4),
        ((1.0, 1.0, 1.0), (FINE,) * 3, 0.7882568, 1e-4),
        ((0.5, 0.5, 1e-9), (4, 4, 1), 0.362957, 1e-6),  # what 4 x 4 midpoints give
    ],
)
def test_auxiliary_functions(sides, counts, expected, tolerance):
    assert 1.0 - block_variance(unit(), sides, counts) == pytest.approx(expected, abs=tolerance)


def test_mean_distance_in_a_cube():
    """Robbins' constant: a long-range spherical model is linear, so its F is the mean distance in the cube."""
    far = 1e4
    model = unit(ranges=(far, far, far))
    gamma = (1.0 - block_variance(model, (1.0, 1.0, 1.0), (FINE,) * 3)) * far / 1.5
    assert gamma == pytest.approx(0.6617071822671763, abs=2e-4)
    flat = (1.0 - block_variance(model, (1.0, 1.0, 1e-9), (300, 300, 1))) * far / 1.5
    assert flat == pytest.approx(0.5214054331647207, abs=1e-5)


def test_block_variance_is_the_plain_double_sum():
    model = VariogramModel(0.3, [Structure("exponential", 1.0, (20.0, 9.0, 4.0))], 40.0, 10.0, 5.0)
    offsets = geostatistics.discretisation_offsets((6, 4, 2), (3, 4, 2), 25.0)
    plain = model.structured_covariance(offsets[:, None] - offsets[None]).mean()
    assert block_variance(model, (6, 4, 2), (3, 4, 2), 25.0) == pytest.approx(plain, rel=1e-12)


def test_krige_relation():
    """Variance of points in a field = variance of blocks in it + variance of points in a block."""
    model = VariogramModel(0.0, [Structure("spherical", 1.0, (9.0, 9.0, 9.0))])
    points = block_variance(model, (20, 20, 4), (20, 20, 4))
    blocks = block_variance(model, (5, 5, 2), (5, 5, 2))
    offsets = geostatistics.discretisation_offsets((20, 20, 4), (20, 20, 4))
    inside = geostatistics.discretisation_offsets((5, 5, 2), (5, 5, 2))
    centres = geostatistics.discretisation_offsets((20, 20, 4), (4, 4, 2))
    between = np.array(
        [
            [model.covariance((a + inside)[:, None] - (b + inside)[None]).mean() for b in centres[:16]]
            for a in centres[:1]
        ]
    )
    assert between[0, 0] == pytest.approx(blocks)
    whole = model.covariance(offsets[:, None] - offsets[None]).mean()
    assert whole == pytest.approx(points)
    dispersion_of_points = 1.0 - points
    within, among = 1.0 - blocks, blocks - points
    assert within + among == pytest.approx(dispersion_of_points, abs=1e-12)


def test_public_names():
    for name in geostatistics._HOME:
        assert getattr(geostatistics, name) is not None
    with pytest.raises(AttributeError):
        geostatistics.nothing_of_that_name  # noqa: B018
    assert "ordinary_kriging" in dir(geostatistics)
