"""Experimental variograms against twins, libraries and published figures."""

from __future__ import annotations

import io
import os
import subprocess
import sys

import numba
import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sms_resource.geostatistics.directions import Direction
from sms_resource.geostatistics.experimental import experimental_variogram, experimental_variograms
from sms_resource.geostatistics.pairs import PairRequest
from sms_resource.geostatistics.plane_map import variogram_map

from .open_data import open_data, run_r
from .variogram_twin import drilled, simulated, twin_variogram


def scattered(n=220, seed=1):
    generator = np.random.default_rng(seed)
    xyz = generator.uniform(0.0, 1.0, (n, 3)) * (100.0, 80.0, 15.0)
    return xyz, np.exp(generator.normal(size=n)), generator


def test_jura_cadmium_first_lags():
    """Goovaerts (1997) data as in gstat: pairs, mean distance, gamma; numpy, gstat, gstools, scikit-gstat agree."""
    jura = open_data("jura.pred")
    xyz = np.column_stack([jura["Xloc"], jura["Yloc"], np.zeros(len(jura))])
    found = experimental_variogram(xyz, jura["Cd"].to_numpy(), lag_width=0.131, lag_count=15)
    assert found.pairs[:3].tolist() == [308, 358, 676]
    assert found.distance[:3] == pytest.approx([0.0489727569, 0.2084701398, 0.3342384028], abs=1e-10)
    assert found.gamma[:3] == pytest.approx([0.4231663880, 0.7499123478, 0.6089212522], abs=1e-10)


DIRECTIONS = {
    "all": Direction.omnidirectional(),
    "oblique": Direction("directional", azimuth=60, plunge=20, tilt=35, angle_tolerance=30),
    "oblique in bands": Direction(
        "directional", 60, 20, 35, angle_tolerance=35, bandwidth_horizontal=9, bandwidth_vertical=4
    ),
    "level": Direction.horizontal(15.0, 2.0),
    "upright": Direction.vertical(25.0, 6.0),
    "tilted plane": Direction("plane", 30, 25, 10, angle_tolerance=20, bandwidth_vertical=5),
}


@pytest.mark.parametrize("name", DIRECTIONS)
@pytest.mark.parametrize("measure", ["semivariogram", "pairwise_relative", "correlogram"])
def test_kernel_and_twin_agree(name, measure):
    xyz, values, generator = scattered()
    weights = generator.uniform(0.2, 2.0, len(values))
    edges = np.array([0.0, 4.0, 9.0, 15.0, 22.0, 40.0, 70.0])
    found = experimental_variogram(
        xyz, values, lag_edges=edges, direction=DIRECTIONS[name], measure=measure, weights=weights
    )
    pairs, distance, gamma = twin_variogram(
        xyz, values, edges, DIRECTIONS[name], weights=weights, measure=measure
    )
    assert found.pairs.tolist() == pairs.tolist()
    assert found.pairs.sum() > 50
    np.testing.assert_allclose(found.distance, distance, rtol=1e-12)
    np.testing.assert_allclose(found.gamma, gamma, rtol=1e-10, atol=1e-12)


@pytest.mark.parametrize("mode", ["within", "across"])
def test_pairs_within_and_across_holes(mode):
    xyz, holes = drilled()
    values = np.random.default_rng(0).normal(size=len(xyz))
    edges = np.array([0.5, 1.5, 2.5, 5.3, 25.0, 60.0])
    found = experimental_variogram(xyz, values, lag_edges=edges, hole_ids=holes, **{f"{mode}_holes": True})
    pairs, distance, gamma = twin_variogram(xyz, values, edges, holes=holes, mode=mode)
    assert found.pairs.tolist() == pairs.tolist()
    np.testing.assert_allclose(found.gamma, gamma, rtol=1e-11)
    np.testing.assert_allclose(found.distance, distance, rtol=1e-12)
    if mode == "within":
        assert found.kind == "down_hole"
        assert found.pairs[0] == 9 * 7  # neighbours 1 m apart, 7 in each of 9 holes of 8 samples
        np.testing.assert_allclose(np.linalg.norm(found.separations[:3], axis=1), distance[:3])


def test_scikit_gstat_isotropic_in_three_dimensions():
    from skgstat import Variogram

    xyz, values, _ = scattered(150)
    edges = np.linspace(0.0, 60.0, 11)
    other = Variogram(xyz, values, bin_func=edges[1:], maxlag=None, fit_method=None)
    found = experimental_variogram(xyz, values, lag_edges=edges)
    assert found.pairs.tolist() == other.bin_count.tolist()
    np.testing.assert_allclose(found.gamma, other.experimental, rtol=1e-10)


@pytest.mark.parametrize("azimuth", [0.0, 37.0, 90.0, 150.0])
def test_scikit_gstat_directions_in_two_dimensions(azimuth):
    """scikit-gstat counts its azimuth clockwise from east, and its tolerance is the whole angle."""
    from skgstat import DirectionalVariogram

    xyz, values, _ = scattered(150)
    xyz[:, 2] = 0.0
    edges = np.linspace(0.0, 60.0, 9)
    other = DirectionalVariogram(
        xyz[:, :2], values, azimuth=azimuth - 90.0, tolerance=45.0, directional_model="compass",
        bin_func=edges[1:], maxlag=None,
    )  # fmt: skip
    direction = Direction("directional", azimuth, angle_tolerance=22.5)
    found = experimental_variogram(xyz, values, lag_edges=edges, direction=direction)
    assert found.pairs.tolist() == other.bin_count.tolist()
    np.testing.assert_allclose(found.gamma, other.experimental, rtol=1e-10)


def test_gstools_in_three_dimensions():
    import gstools

    xyz, values, _ = scattered(200)
    edges = np.linspace(0.0, 60.0, 11)
    _, gamma, count = gstools.vario_estimate(xyz.T, values, bin_edges=edges, return_counts=True)
    found = experimental_variogram(xyz, values, lag_edges=edges)
    assert found.pairs.tolist() == count.tolist()
    np.testing.assert_allclose(found.gamma, gamma, rtol=1e-10)
    direction = Direction("directional", azimuth=60, plunge=20, angle_tolerance=30)
    _, gamma, count = gstools.vario_estimate(
        xyz.T, values, bin_edges=edges, return_counts=True, direction=[direction.axes[0]],
        angles_tol=np.radians(30.0),
    )  # fmt: skip
    found = experimental_variogram(xyz, values, lag_edges=edges, direction=direction)
    assert found.pairs.tolist() == np.ravel(count).tolist()
    np.testing.assert_allclose(found.gamma, np.ravel(gamma), rtol=1e-10)


def test_gstat_directions_live():
    """R's gstat, level directions of the jura data: pairs, mean distance and gamma of four azimuths."""
    jura = open_data("jura.pred")
    text = run_r(
        "suppressMessages({library(gstat); library(sp)}); data(jura); d <- prediction.dat; "
        "coordinates(d) <- ~Xloc+Yloc; "
        "v <- variogram(Co~1, d, cutoff=1.5, width=.15, alpha=c(0,45,90,135), tol.hor=20); "
        "v <- as.data.frame(v); write.csv(v[,c('np','dist','gamma','dir.hor')], stdout(), row.names=FALSE)"
    )
    theirs = pd.read_csv(io.StringIO(text))
    xyz = np.column_stack([jura["Xloc"], jura["Yloc"], np.zeros(len(jura))])
    for azimuth, rows in theirs.groupby("dir.hor"):
        direction = Direction("directional", azimuth=azimuth, angle_tolerance=20.0)
        found = experimental_variogram(
            xyz, jura["Co"].to_numpy(), lag_width=0.15, lag_count=10, direction=direction
        )
        filled = found.pairs > 0
        assert found.pairs[filled].tolist() == rows["np"].tolist()
        np.testing.assert_allclose(found.distance[filled], rows["dist"], rtol=1e-10)
        np.testing.assert_allclose(found.gamma[filled], rows["gamma"], rtol=1e-10)


@pytest.mark.parametrize("name", ["cressie", "dowd", "genton", "minmax", "percentile", "entropy"])
def test_robust_estimators_are_those_of_scikit_gstat(name):
    from skgstat import estimators

    xyz, values, _ = scattered(60)
    edges = np.array([0.0, 20.0, 40.0, 60.0])
    direction = Direction.horizontal(20.0)
    found = experimental_variogram(xyz, values, lag_edges=edges, direction=direction, estimator=name)
    i, j = np.triu_indices(len(values), 1)
    step = xyz[j] - xyz[i]
    distance = np.linalg.norm(step, axis=1)
    level = np.abs(step[:, 2]) <= np.sin(np.radians(20.0)) * distance
    for lag in range(3):
        chosen = level & (distance > edges[lag]) & (distance <= edges[lag + 1])
        expected = getattr(estimators, name)(np.abs(values[i] - values[j])[chosen])
        assert found.gamma[lag] == pytest.approx(expected, rel=1e-10)


def test_logs_and_normal_scores_are_semivariograms_of_the_transformed_values():
    from scipy.stats import norm, rankdata

    xyz, values, _ = scattered()
    settings_ = {"lag_width": 10.0, "lag_count": 6}
    logs = experimental_variogram(xyz, values, measure="logs", **settings_)
    plain = experimental_variogram(xyz, np.log(values), **settings_)
    np.testing.assert_allclose(logs.gamma, plain.gamma, rtol=1e-12)
    scores = experimental_variogram(xyz, values, measure="normal_scores", **settings_)
    ranks = norm.ppf((rankdata(values) - 0.5) / len(values))
    plain = experimental_variogram(xyz, ranks, **settings_)
    np.testing.assert_allclose(scores.gamma, plain.gamma, rtol=1e-9)


def test_number_of_threads_does_not_change_a_bit():
    xyz, values, _ = scattered(400)
    requests = [PairRequest(d, np.linspace(0.0, 50.0, 9)) for d in DIRECTIONS.values()]
    before = numba.get_num_threads()
    results = []
    try:
        for threads in (1, min(2, numba.config.NUMBA_NUM_THREADS)):
            numba.set_num_threads(threads)
            results.append(experimental_variograms(xyz, values, requests))
    finally:
        numba.set_num_threads(before)
    for one, two in zip(*results):
        assert one.gamma.tobytes() == two.gamma.tobytes()
        assert one.distance.tobytes() == two.distance.tobytes()


def test_the_same_without_the_jit():
    script = (
        "import numpy as np\n"
        "from sms_resource.geostatistics.directions import Direction\n"
        "from sms_resource.geostatistics.experimental import experimental_variogram\n"
        "g = np.random.default_rng(4); xyz = g.uniform(0, 50, (40, 3)); z = g.normal(size=40)\n"
        "d = Direction('directional', 30, 10, 5, 40.0, 20.0, 15.0)\n"
        "v = experimental_variogram(xyz, z, lag_width=10.0, lag_count=4, direction=d)\n"
        "r = experimental_variogram(xyz, z, lag_width=10.0, lag_count=4, estimator=lambda d: float(d.mean()))\n"
        "from sms_resource.geostatistics.fit import fit_variogram\n"
        "from sms_resource.geostatistics.pairs import clean_samples, pair_sums, prepare, PairRequest\n"
        "f = fit_variogram(v); m = f.model\n"
        "s = prepare(*clean_samples(xyz, z, np.arange(40) // 5), centre=True)\n"
        "b = pair_sums(s, [PairRequest(d, v.lag_to)], 'correlogram', by_hole=True)\n"
        "print(repr(v.gamma.tolist() + v.distance.tolist() + v.pairs.tolist() + r.gamma.tolist()\n"
        "    + [m.nugget, m.total_sill, f.weighted_ss] + b.ravel().tolist()))\n"
    )
    outputs = []
    for off in ("0", "1"):
        done = subprocess.run(
            [sys.executable, "-c", script], capture_output=True, text=True, check=True, timeout=120,
            env={**os.environ, "NUMBA_DISABLE_JIT": off},
        )  # fmt: skip
        outputs.append(eval(done.stdout, {"nan": np.nan}))
    np.testing.assert_allclose(outputs[0], outputs[1], rtol=1e-7, atol=1e-12)


@settings(max_examples=25, deadline=None)
@given(
    seed=st.integers(0, 10_000),
    shift=st.tuples(*[st.floats(-1e7, 1e7)] * 3),
    factor=st.sampled_from([1e-4, 0.01, 34.2857, 1e4]),
    turn=st.sampled_from([0.0, 33.0, 90.0, 247.0]),
)
def test_translation_permutation_units_and_rotation(seed, shift, factor, turn):
    """Nothing moves with the origin, the order or a turn of everything; gamma goes with the square of the unit."""
    generator = np.random.default_rng(seed)
    xyz = generator.uniform(0.0, 40.0, (45, 3))
    values = generator.normal(size=45)
    names = generator.integers(0, 6, 45)
    order = generator.permutation(45)
    direction = Direction("directional", 50.0, 10.0, 0.0, 35.0, 15.0, 12.0)
    turned = Direction("directional", 50.0 + turn, 10.0, 0.0, 35.0, 15.0, 12.0)
    angle = np.radians(turn)
    rotated = xyz.copy()  # clockwise seen from above
    rotated[:, 0] = np.cos(angle) * xyz[:, 0] + np.sin(angle) * xyz[:, 1]
    rotated[:, 1] = -np.sin(angle) * xyz[:, 0] + np.cos(angle) * xyz[:, 1]
    arguments = {"lag_width": 8.0, "lag_count": 4, "across_holes": True}
    base = experimental_variogram(xyz, values, direction=direction, hole_ids=names, **arguments)
    other = experimental_variogram(
        (rotated + np.array(shift))[order], factor * values[order] + 5.0, direction=turned,
        hole_ids=names[order], **arguments,
    )  # fmt: skip
    assert np.abs(base.pairs - other.pairs).sum() <= 2  # a pair on an edge may fall either way by rounding
    if (base.pairs == other.pairs).all():
        np.testing.assert_allclose(other.gamma, factor**2 * base.gamma, rtol=1e-7, atol=1e-12 * factor**2)
        np.testing.assert_allclose(other.distance, base.distance, rtol=1e-7)


def test_regular_spacing_stays_in_its_lag_at_great_coordinates():
    """Samples 1 m apart, lag edges on whole metres: rounding at 1e7 m must not move a pair."""
    depth = np.arange(12.0)
    xyz = np.column_stack([np.full(12, 1.0e7 + 0.1), np.full(12, -9.99e6 - 0.3), -1650.7 - depth])
    found = experimental_variogram(xyz, depth, lag_edges=[0.0, 1.0, 2.0, 3.0])
    assert found.pairs.tolist() == [11, 10, 9]
    np.testing.assert_allclose(found.gamma, [0.5, 2.0, 4.5])


def test_coincident_samples_make_no_pair_and_missing_values_are_left_out():
    xyz = np.array([[0, 0, 0], [0, 0, 0], [1, 0, 0], [2, 0, 0.0]])
    found = experimental_variogram(xyz, [1.0, 3.0, 2.0, np.nan], lag_edges=[0.0, 1.5])
    assert found.pairs.tolist() == [2]
    assert found.gamma[0] == pytest.approx(0.5)


def test_equal_values_give_zero_not_an_error():
    xyz, _, _ = scattered(30)
    found = experimental_variogram(xyz, np.full(30, 2.5), lag_width=20.0, lag_count=3)
    assert found.gamma.tolist() == [0.0, 0.0, 0.0]


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"coordinates": np.zeros((5, 2))}, "coordinates"),
        ({"values": np.zeros(4)}, "values"),
        ({"values": [1.0, np.nan, np.nan, np.nan, np.nan]}, "at least 2 samples"),
        ({"values": [1.0, np.inf, 2.0, 3.0, 4.0]}, "finite"),
        ({"coordinates": [[0, 0, np.nan]] + [[1, 2, 3]] * 4}, "coordinates must be finite"),
        ({"lag_width": 0.0}, "lag_width"),
        ({"lag_edges": [0.0, 5.0, 5.0]}, "lag_edges"),
        ({"lag_count": 0}, "lag_count"),
        ({"measure": "madogram"}, "measure"),
        ({"estimator": "huber"}, "estimator"),
        ({"measure": "logs", "values": [0.0, 1.0, 2.0, 3.0, 4.0]}, "above zero"),
        ({"within_holes": True}, "hole_ids"),
        ({"within_holes": True, "across_holes": True}, "exclude"),
        ({"weights": [-1.0, 1.0, 1.0, 1.0, 1.0]}, "weights"),
        ({"coordinates": np.zeros((5, 3)), "lag_width": None}, "one place"),
    ],
)
def test_bad_input_is_named(change, words):
    arguments = {
        "coordinates": np.random.default_rng(0).uniform(0, 9, (5, 3)),
        "values": np.arange(5.0),
        "lag_width": 2.0,
        **change,
    }
    coordinates, values = arguments.pop("coordinates"), arguments.pop("values")
    with pytest.raises(ValueError, match=words):
        experimental_variogram(coordinates, values, **arguments)


@pytest.mark.parametrize("change", [{"kind": "cone"}, {"angle_tolerance": 0.0}, {"bandwidth_vertical": -1.0}])
def test_bad_directions_are_named(change):
    with pytest.raises(ValueError, match=next(iter(change))):
        Direction(**change)


def test_map_agrees_with_pairs_taken_one_by_one():
    xyz, values, _ = scattered(80)
    found = variogram_map(xyz, values, cell_m=10.0, cells=3, azimuth=30.0, bandwidth_m=4.0)
    axes = Direction("plane", azimuth=30.0).axes
    i, j = np.nonzero(~np.eye(80, dtype=bool))  # both orders of each pair
    step = (xyz[j] - xyz[i]) @ axes.T
    for a, along in enumerate(found.along):
        for b, across in enumerate(found.across):
            chosen = (np.abs(step[:, 0] - along) < 5.0) & (np.abs(step[:, 1] - across) < 5.0)
            chosen &= np.abs(step[:, 2]) <= 4.0
            count = chosen.sum() // (2 if along == across == 0.0 else 1)
            assert found.pairs[a, b] == count
            if count:
                expected = 0.5 * np.mean((values[i[chosen]] - values[j[chosen]]) ** 2)
                assert found.gamma[a, b] == pytest.approx(expected, rel=1e-9)
    assert len(found.to_frame()) == 49


def test_map_finds_the_long_axis():
    from sms_resource.geostatistics.model import Structure, VariogramModel

    generator = np.random.default_rng(2)
    xyz = np.column_stack([generator.uniform(0, 150, (500, 2)), np.zeros(500)])
    model = VariogramModel(0.1, [Structure("spherical", 0.9, (60.0, 20.0, 20.0))], azimuth=40.0)
    values = simulated(model, xyz, 1, 8)[0]
    found = variogram_map(xyz, values, cell_m=6.0, cells=8)
    assert found.longest_direction(40.0) == pytest.approx(40.0, abs=12.0)
