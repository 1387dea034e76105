"""Fits against gstat and published figures, against a twin of the linear part, and on simulated fields."""

from __future__ import annotations

import io
import math

import numpy as np
import pandas as pd
import pytest

from sms_resource.geostatistics import fit_kernels
from sms_resource.geostatistics.directions import Direction
from sms_resource.geostatistics.experimental import ExperimentalVariogram, experimental_variogram
from sms_resource.geostatistics.fit import fit_variogram
from sms_resource.geostatistics.fit_settings import FitSettings
from sms_resource.geostatistics.inference import infer_variogram
from sms_resource.geostatistics.model import Structure, VariogramModel
from sms_resource.geostatistics.variogram_settings import VariogramSettings

from .open_data import open_data, run_r
from .variogram_twin import drilled, simulated


def exact(model, direction, reach, count=15, pairs=100):
    """What an experimental variogram would show if it followed a model without error."""
    distance = reach * (np.arange(count) + 1.0) / count
    separations = distance[:, None] * direction
    return ExperimentalVariogram(
        "exact", math.nan, math.nan, "directional", "semivariogram", distance - 0.5, distance + 0.5, distance,
        model.variogram(separations), np.full(count, pairs), separations,
    )  # fmt: skip


def jura_cobalt():
    jura = open_data("jura.pred")
    xyz = np.column_stack([jura["Xloc"], jura["Yloc"], np.zeros(len(jura))])
    return experimental_variogram(xyz, jura["Co"].to_numpy(), lag_width=0.131, lag_count=15)


def test_jura_cobalt_weighted_fit():
    """gstat's fit of a spherical model with weights N/h^2 to the jura data, to the digits of that fit."""
    fit = fit_variogram(jura_cobalt(), FitSettings(weighting="pairs_over_distance"))
    assert fit.model.nugget == pytest.approx(1.31257, abs=2e-5)
    assert fit.model.structures[0].sill == pytest.approx(12.64504, abs=2e-5)
    assert fit.model.structures[0].ranges[0] == pytest.approx(1.19332, abs=1e-5)
    assert fit.weighted_ss == pytest.approx(7404.2074, abs=1e-3)
    assert fit.bounds_hit == ()


@pytest.mark.parametrize(
    ("shape", "theirs", "ratio"), [("spherical", "Sph", 1.0), ("exponential", "Exp", 3.0)]
)
def test_gstat_fit_live(shape, theirs, ratio):
    """R's fit.variogram: no fit of ours is worse by its own measure, and the parameters agree."""
    text = run_r(
        "suppressMessages({library(gstat); library(sp)}); data(jura); d <- prediction.dat; "
        "coordinates(d) <- ~Xloc+Yloc; v <- variogram(Co~1, d, cutoff=1.965, width=.131); "
        f'm <- fit.variogram(v, vgm(12, "{theirs}", 1.0, 2)); '
        "write.csv(cbind(as.data.frame(m)[,c('psill','range')], ss=attr(m,'SSErr')), stdout(), row.names=FALSE)"
    )
    table = pd.read_csv(io.StringIO(text))
    fit = fit_variogram(jura_cobalt(), FitSettings(shapes=(shape,), weighting="pairs_over_distance"))
    assert fit.weighted_ss <= table["ss"][0] * (1.0 + 1e-9)
    assert fit.weighted_ss == pytest.approx(table["ss"][0], rel=1e-3)
    assert fit.model.structures[0].ranges[0] == pytest.approx(ratio * table["range"][1], rel=0.02)
    assert fit.model.nugget == pytest.approx(table["psill"][0], rel=0.05)


@pytest.mark.parametrize("shape", ["spherical", "exponential", "gaussian"])
@pytest.mark.parametrize("weighting", ["pairs_over_distance", "pairs", "pairs_over_gamma", "equal"])
def test_a_model_without_error_is_found_again(shape, weighting):
    model = VariogramModel(0.4, [Structure(shape, 1.6, (45.0, 20.0, 6.0))], 60.0, 20.0, 35.0)
    variograms = [exact(model, axis, reach) for axis, reach in zip(model.axes, (70.0, 30.0, 10.0))]
    fit = fit_variogram(
        variograms,
        FitSettings(
            shapes=(shape,), links=(0, 1, 2), azimuth=60.0, plunge=20.0, tilt=35.0, weighting=weighting
        ),
    )
    assert fit.model.nugget == pytest.approx(0.4, rel=1e-4)
    assert fit.model.total_sill == pytest.approx(2.0, rel=1e-4)
    assert fit.model.structures[0].ranges == pytest.approx((45.0, 20.0, 6.0), rel=1e-4)


def test_nested_structures_are_found_again():
    model = VariogramModel(0.2, [Structure("spherical", 0.5, 12.0), Structure("spherical", 0.9, 60.0)])
    fit = fit_variogram(exact(model, np.array([0, 1.0, 0]), 80.0, 40), FitSettings(shapes=("spherical",) * 2))
    assert [s.sill for s in fit.model.structures] == pytest.approx([0.5, 0.9], rel=0.01)
    assert [s.ranges[0] for s in fit.model.structures] == pytest.approx([12.0, 60.0], rel=0.01)


def test_what_is_fixed_wins():
    model = VariogramModel(0.4, [Structure("spherical", 1.6, 45.0)])
    variogram = exact(model, np.array([1.0, 0, 0]), 70.0)
    settings = FitSettings(nugget=0.7, total_sill=2.5, ranges=((30.0, None, None),))
    fit = fit_variogram(variogram, settings)
    assert fit.model.nugget == 0.7
    assert fit.model.total_sill == pytest.approx(2.5, abs=1e-12)
    assert fit.model.structures[0].ranges == (30.0, 30.0, 30.0)
    fixed_sill = fit_variogram(variogram, FitSettings(sills=(1.0,), minor_ratio=0.25, links=(0, 0, 2)))
    assert fixed_sill.model.structures[0].sill == 1.0
    major, semi, minor = fixed_sill.model.structures[0].ranges
    assert (semi, minor) == pytest.approx((major, 0.25 * major))


def test_limits_that_are_hit_are_told():
    still_rising = VariogramModel(0.0, [Structure("spherical", 2.0, 1000.0)])
    fit = fit_variogram(exact(still_rising, np.array([1.0, 0, 0]), 30.0), FitSettings(total_sill=2.0))
    assert any("range of structure 1 is at its upper limit, 90 m" in text for text in fit.bounds_hit)
    flat = VariogramModel(1.0, [Structure("spherical", 0.0, 10.0)])
    fit = fit_variogram(exact(flat, np.array([1.0, 0, 0]), 30.0), FitSettings())
    assert any("sill of structure 1 is at its lower limit" in text for text in fit.bounds_hit)
    no_nugget = VariogramModel(0.0, [Structure("gaussian", 2.0, 20.0)])
    fit = fit_variogram(exact(no_nugget, np.array([1.0, 0, 0]), 30.0), FitSettings())
    assert "the nugget is at its lower limit, zero" in fit.bounds_hit


def test_mean_over_pairs_takes_the_place_of_the_total_sill():
    """The model has the given value on average over the separations, so its sill stands above it."""
    model = VariogramModel(0.3, [Structure("spherical", 0.7, 40.0)])
    generator = np.random.default_rng(0)
    separations = generator.uniform(-30.0, 30.0, (500, 3))
    seen = float(model.variogram(separations).mean())
    fit = fit_variogram(
        exact(model, np.array([1.0, 0, 0]), 50.0),
        FitSettings(mean_over_pairs=seen, pair_separations=separations),
    )
    assert float(fit.model.variogram(separations).mean()) == pytest.approx(seen, rel=1e-9)
    assert fit.model.total_sill == pytest.approx(1.0, rel=1e-4)


@pytest.mark.parametrize("seed", range(12))
@pytest.mark.parametrize("mode", ["free", "sum"])
def test_linear_part_and_its_twin_agree(seed, mode):
    """SciPy's non-negative least squares; the equation enters the twin as a row of very great weight."""
    from scipy.optimize import nnls

    generator = np.random.default_rng(seed)
    count = int(generator.integers(2, 5))
    design = generator.uniform(0.0, 1.0, (20, count))
    design[:, 0] = 1.0
    gamma = design @ generator.uniform(-0.4, 1.0, count) + generator.normal(0, 0.05, 20)
    weights = generator.uniform(0.5, 50.0, 20)
    fixed = np.full(count, np.nan)
    if seed % 3 == 0:
        fixed[0] = 0.2
    total = 1.3
    sills = np.empty(count)
    fit_kernels.linear_part(
        design, gamma, weights, fixed, 0 if mode == "free" else 1, np.ones(count), total,
        np.empty((count, count + 1)), np.empty((count + 1, count + 2)), np.empty(count, dtype=np.int64),
        np.empty(count), sills,
    )  # fmt: skip
    free = np.isnan(fixed)
    known = np.where(free, 0.0, fixed)
    left, right = design[:, free], gamma - design @ known
    left, right = left * np.sqrt(weights)[:, None], right * np.sqrt(weights)
    if mode == "sum":
        left = np.vstack([left, 1e6 * np.ones(free.sum())])
        right = np.append(right, 1e6 * (total - known.sum()))
    expected = known.copy()
    expected[free] = nnls(left, right)[0]
    np.testing.assert_allclose(sills, expected, atol=2e-6)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"shapes": ("cubic",)}, "cubic"),
        ({"shapes": ()}, "at least one"),
        ({"nugget": -0.1}, "nugget"),
        ({"total_sill": -1.0}, "total_sill"),
        ({"sills": (-1.0,)}, "sills"),
        ({"sills": (1.0, 2.0)}, "sills"),
        ({"ranges": ((0.0, None, None),)}, "ranges must be above zero"),
        ({"minor_ratio": 0.0}, "minor_ratio"),
        ({"weighting": "cressie"}, "weighting"),
    ],
)
def test_bad_settings_are_named(change, words):
    with pytest.raises(ValueError, match=words):
        FitSettings(**change)


def test_no_pairs_is_an_error_and_no_variation_too():
    xyz = np.array([[0, 0, 0], [50.0, 0, 0], [100.0, 0, 0]])
    with pytest.raises(ValueError, match="no lag has enough pairs"):
        fit_variogram(experimental_variogram(xyz, [1.0, 2.0, 3.0], lag_width=5.0, lag_count=3))
    with pytest.raises(ValueError, match="do not vary"):
        fit_variogram(experimental_variogram(xyz, [2.0, 2.0, 2.0], lag_width=60.0, lag_count=3))


def test_forty_simulated_fields_of_known_parameters():
    """Means over 40 fields: ranges and total sill within 3 % of the truth, nugget within .02 of the total sill."""
    truth = VariogramModel(0.6, [Structure("spherical", 1.4, (30.0, 30.0, 5.0))])
    xyz, holes = drilled(holes=196, samples=10, spacing=15.0, seed=5)
    fields = simulated(truth, xyz, 40, seed=21)
    settings = VariogramSettings(jackknife=False)
    found = np.array([_parameters(infer_variogram(xyz, field, holes, settings).model) for field in fields])
    nugget, total, major, minor = found.mean(axis=0)
    assert abs(nugget / 2.0 - 0.3) < 0.02
    assert abs(total / 2.0 - 1.0) < 0.03
    assert abs(major / 30.0 - 1.0) < 0.03
    assert abs(minor / 5.0 - 1.0) < 0.03


def _parameters(model):
    return model.nugget, model.total_sill, model.structures[0].ranges[0], model.structures[0].ranges[2]


def test_directional_continuity_finds_both_ranges():
    truth = VariogramModel(0.2, [Structure("spherical", 0.8, (70.0, 25.0, 6.0))], azimuth=50.0)
    xyz, holes = drilled(holes=225, samples=6, spacing=12.0, seed=6)
    fields = simulated(truth, xyz, 6, seed=3)
    settings = VariogramSettings(jackknife=False, continuity="directional", azimuth=50.0, lag_count=12)
    found = np.array([infer_variogram(xyz, f, holes, settings).model.structures[0].ranges for f in fields])
    assert np.exp(np.log(found).mean(axis=0)) == pytest.approx((70.0, 25.0, 6.0), rel=0.2)
    assert Direction("directional", azimuth=50.0).label == "azimuth 50, plunge 0"
