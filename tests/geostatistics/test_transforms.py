"""Normal scores, Hermite polynomials and the way back from transformed models."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sms_resource.geostatistics.back_transform import back_transform_model
from sms_resource.geostatistics.model import Structure, VariogramModel
from sms_resource.geostatistics.transforms import (
    NormalScores,
    RawCorrelation,
    hermite_shares,
    log_covariance_ratio,
)


def lognormal_quantiles(count, sigma):
    from scipy.special import ndtri

    return np.exp(sigma * ndtri((np.arange(count) + 0.5) / count))


def test_scores_of_equal_weights_are_normal_quantiles_of_the_middle_ranks():
    from scipy.stats import norm

    values = np.array([5.0, 1.0, 3.0, 9.0, 3.0])
    scores = NormalScores.fit(values).forward(values)
    np.testing.assert_allclose(scores, norm.ppf([0.7, 0.1, 0.4, 0.9, 0.4]), atol=1e-12)


@settings(max_examples=30, deadline=None)
@given(st.lists(st.floats(0.01, 1e4), min_size=2, max_size=40), st.integers(0, 1000))
def test_there_and_back(values, seed):
    values = np.array(values)
    weights = np.random.default_rng(seed).uniform(0.1, 3.0, len(values))
    scores = NormalScores.fit(values, weights)
    back = scores.backward(scores.forward(values))
    np.testing.assert_allclose(back, values, rtol=1e-9, atol=1e-9)
    assert scores.mean == pytest.approx(np.average(values, weights=weights))
    assert np.all(np.diff(scores.scores) > 0)


def test_missing_stays_missing():
    scores = NormalScores.fit([1.0, 2.0, np.nan, 4.0])
    assert np.isnan(scores.forward([np.nan])[0])
    assert np.isnan(scores.backward([np.nan])[0])
    with pytest.raises(ValueError, match="none is left"):
        NormalScores.fit([np.nan])


def test_hermite_coefficients_of_a_lognormal():
    """phi_p = m sigma^p / sqrt(p!) in absolute value (Journel & Huijbregts 1978, chapter 6)."""
    from math import factorial

    sigma = 0.6
    values = lognormal_quantiles(200_000, sigma)
    coefficients = NormalScores.fit(values).hermite(3)
    mean = np.exp(0.5 * sigma**2)
    expected = [mean * sigma**p / np.sqrt(factorial(p)) for p in range(4)]
    np.testing.assert_allclose(coefficients, expected, rtol=2e-3)  # the tail of the sample ends


def test_shares_of_the_variance_sum_to_one():
    shares = hermite_shares(NormalScores.fit(lognormal_quantiles(500, 0.9)))
    assert shares.sum() == pytest.approx(1.0, abs=1e-12)
    assert (shares >= 0).all()


def test_correlation_of_values_from_scores_and_from_logs_agree_for_a_lognormal():
    """Two ways to one number: the Hermite series of the values, and the closed form of the lognormal."""
    rho = np.linspace(0.0, 1.0, 11)
    values = lognormal_quantiles(20_000, 0.7)
    series = RawCorrelation("normal_scores", values, np.ones(len(values)))(rho)
    closed = log_covariance_ratio(0.49, rho)
    np.testing.assert_allclose(series, closed, atol=2e-3)
    assert closed[[0, -1]] == pytest.approx([0.0, 1.0])


def test_correlation_of_values_by_simulation():
    generator = np.random.default_rng(3)
    one = generator.normal(size=400_000)
    two = 0.6 * one + 0.8 * generator.normal(size=400_000)
    scores = NormalScores.fit(generator.gamma(1.5, 2.0, 400))
    back = (
        scores.values[np.searchsorted(scores.upper_scores, one)],
        scores.values[np.searchsorted(scores.upper_scores, two)],
    )
    shares = hermite_shares(scores)
    expected = 0.6 ** np.arange(1, len(shares) + 1) @ shares
    assert np.corrcoef(*back)[0, 1] == pytest.approx(expected, abs=0.006)


@pytest.mark.parametrize("measure", ["normal_scores", "logs"])
def test_model_of_scores_turned_back_follows_the_lognormal_covariance(measure):
    sigma2 = 0.49
    values = lognormal_quantiles(5000, np.sqrt(sigma2))
    factor = sigma2 if measure == "logs" else 1.0
    model = VariogramModel(0.3 * factor, [Structure("spherical", 0.7 * factor, (50.0, 50.0, 5.0))], 20.0)
    back = RawCorrelation(measure, values, np.ones(len(values)))
    raw = back_transform_model(model, measure, 3.0, back)
    assert raw.total_sill == pytest.approx(3.0)
    assert raw.azimuth == 20.0
    expected_nugget = 3.0 * (1.0 - log_covariance_ratio(sigma2, 0.7))
    assert raw.nugget == pytest.approx(expected_nugget, rel=0.01)
    for axis, reach in ((0, 60.0), (2, 6.0)):
        separations = np.linspace(0.05, 1.0, 15)[:, None] * reach * raw.axes[axis]
        rho = 1.0 - model.variogram(separations) / model.total_sill
        exact = 3.0 * (1.0 - log_covariance_ratio(sigma2, rho))
        assert np.abs(raw.variogram(separations) - exact).max() < 0.03 * 3.0
    assert raw.structures[0].ranges[0] == pytest.approx(10.0 * raw.structures[0].ranges[2], rel=1e-3)


def test_relative_measures_are_scaled_to_the_total_sill():
    model = VariogramModel(0.2, [Structure("spherical", 0.6, 30.0)])
    raw = back_transform_model(model, "correlogram", 4.0)
    assert raw.nugget == pytest.approx(1.0)
    assert raw.total_sill == pytest.approx(4.0)
    with pytest.raises(ValueError, match="correlation"):
        back_transform_model(model, "logs", 4.0)
