"""Kriging against published and independently computed values.

Isaaks & Srivastava (1989), An Introduction to Applied Geostatistics, chapter 12 (the estimate 592.7 and the
variance 8.96 are printed there); further digits, and the other cases, were computed by independent matrix code
and, where named, agree with R's gstat, GSTools and PyKrige.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sms_resource.geostatistics import (
    Neighbourhood,
    Structure,
    VariogramModel,
    companion_estimates,
    ordinary_kriging,
    simple_kriging,
)

DATA = Path(__file__).parents[1] / "data"
PLACES = np.array(
    [(61, 139, 0), (63, 140, 0), (64, 129, 0), (68, 128, 0), (71, 140, 0), (73, 141, 0), (75, 128, 0)], float
)
VALUES = np.array([477.0, 696.0, 227.0, 646.0, 606.0, 791.0, 783.0])
TARGET = np.array([[65.0, 137.0, 0.0]])
# the same samples by both roads: all at once, and through the search
ROADS = [None, Neighbourhood(100.0, 24, 4)]


def model(shape="exponential", nugget=0.0, sill=10.0, ranges=(10.0, 10.0, 10.0), **angles):
    return VariogramModel(nugget, [Structure(shape, sill, ranges)], **angles)


@pytest.mark.parametrize("road", ROADS)
@pytest.mark.parametrize(
    ("variogram", "estimate", "variance"),
    [
        (model(), 592.72894279, 8.95605279),
        (model(nugget=5.0, sill=5.0), 596.77700687, 10.30585222),
        (VariogramModel(10.0, []), 603.714286, 11.428571),
        (model("gaussian"), 559.37002320, 4.78059738),
        (model(ranges=(20.0, 10.0, 10.0), azimuth=45.0), 574.04862020, 8.15629340),
    ],
)
def test_points(road, variogram, estimate, variance):
    result = ordinary_kriging(PLACES, VALUES, TARGET, variogram, road)
    assert result.estimate[0] == pytest.approx(estimate, abs=6e-7)
    assert result.variance[0] == pytest.approx(variance, abs=6e-7)


@pytest.mark.parametrize("road", ROADS)
def test_quality_of_the_point_case(road):
    result = ordinary_kriging(PLACES, VALUES, TARGET, model(), road)
    assert result.lagrange[0] == pytest.approx(-0.906617, abs=6e-7)
    assert result.slope_of_regression[0] == pytest.approx(0.6826883583, abs=1e-10)
    assert result.kriging_efficiency[0] == pytest.approx(0.1043947211, abs=1e-10)
    assert result.negative_weight_sum[0] == 0.0
    assert (result.sample_count[0], result.hole_count[0], result.status[0]) == (7, 7, 0)
    assert result.nearest_distance[0] == pytest.approx(np.hypot(2.0, 3.0))


@pytest.mark.parametrize("road", ROADS)
def test_weights(road):
    """Kriging the unit vectors gives the weights themselves."""
    result = ordinary_kriging(PLACES, np.eye(7), TARGET, model(), road)
    expected = [0.172937, 0.317794, 0.128734, 0.086397, 0.151128, 0.057235, 0.085776]
    np.testing.assert_allclose(result.estimate[0], expected, atol=6e-7)


@pytest.mark.parametrize("road", ROADS)
def test_gaussian_has_negative_weights(road):
    weights = ordinary_kriging(PLACES, np.eye(7), TARGET, model("gaussian"), road)
    negative = np.minimum(weights.estimate[0], 0.0).sum()
    assert negative < 0.0
    np.testing.assert_allclose(weights.negative_weight_sum[0], negative, atol=1e-12)


@pytest.mark.parametrize("road", ROADS)
def test_simple_kriging(road):
    result = simple_kriging(PLACES, VALUES, TARGET, model(), road, mean=VALUES.mean())
    assert result.estimate[0] == pytest.approx(592.16942077, abs=6e-7)
    assert result.variance[0] == pytest.approx(8.57903681, abs=6e-7)
    assert result.lagrange[0] == 0.0
    assert result.slope_of_regression[0] == pytest.approx(1.0)


@pytest.mark.parametrize("road", ROADS)
@pytest.mark.parametrize(
    ("variogram", "count", "estimate", "variance"),
    [
        (model(), 2, 588.93932295, 2.66622982),
        (model(), 4, 580.58671905, 1.98958655),
        (
            model(nugget=3.0, sill=7.0),
            4,
            588.380700123,
            1.87973110,
        ),  # the nugget is outside C(V,V) and C(x,V)
    ],
)
def test_blocks(road, variogram, count, estimate, variance):
    result = ordinary_kriging(
        PLACES, VALUES, TARGET, variogram, road, block_size=(10, 10, 1), discretisation=(count, count, 1)
    )
    assert result.estimate[0] == pytest.approx(estimate, abs=6e-8)
    assert result.variance[0] == pytest.approx(variance, abs=6e-8)


@pytest.mark.parametrize("road", ROADS)
def test_quality_of_the_block_case(road):
    result = ordinary_kriging(
        PLACES, VALUES, TARGET, model(), road, block_size=(10, 10, 1), discretisation=(4, 4, 1)
    )
    assert result.slope_of_regression[0] == pytest.approx(0.6718922050, abs=1e-10)
    assert result.kriging_efficiency[0] == pytest.approx(0.3147775364, abs=1e-10)


@pytest.mark.parametrize("road", ROADS)
def test_companions(road):
    first = companion_estimates(PLACES, VALUES, TARGET, road, power=1.0)
    second = companion_estimates(PLACES, VALUES, TARGET, road, power=2.0)
    assert first["inverse_distance"][0] == pytest.approx(593.953671, abs=6e-7)
    assert second["inverse_distance"][0] == pytest.approx(597.620376, abs=6e-7)
    assert first["nearest"][0] == 696.0
    assert first["moving_average"][0] == pytest.approx(VALUES.mean())


@pytest.mark.parametrize("road", [None, Neighbourhood(1000.0, 40, 4)])
@pytest.mark.parametrize(
    ("case", "variogram"),
    [
        ("iso", model("spherical", 0.4, 1.6, (45.0, 45.0, 45.0))),
        ("az60", model("spherical", 0.4, 1.6, (45.0, 27.0, 13.5), azimuth=60.0)),
        (
            "az60_pl20_roll35",
            model("spherical", 0.4, 1.6, (45.0, 27.0, 13.5), azimuth=60.0, plunge=20.0, tilt=35.0),
        ),
    ],
)
def test_three_dimensions(case, variogram, road):
    """gstat, GSTools, PyKrige and plain matrix code agree on these values to 5e-12 (12 digits are kept)."""
    samples = pd.read_csv(DATA / "kriging_3d_points.csv")
    targets = pd.read_csv(DATA / "kriging_3d_targets.csv").to_numpy()
    expected = pd.read_csv(DATA / "kriging_3d_gstat.csv").query("case == @case")
    places = samples[["E", "N", "U"]].to_numpy()
    points = ordinary_kriging(places, samples["v"], targets, variogram, road)
    blocks = ordinary_kriging(
        places, samples["v"], targets, variogram, road, block_size=(5, 5, 2), discretisation=(4, 4, 4)
    )
    np.testing.assert_allclose(points.estimate, expected["pred"], atol=2e-11)
    np.testing.assert_allclose(points.variance, expected["var"], atol=2e-11)
    np.testing.assert_allclose(blocks.estimate, expected["blk_pred"], atol=2e-11)
    np.testing.assert_allclose(blocks.variance, expected["blk_var"], atol=2e-11)
