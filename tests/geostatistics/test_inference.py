"""Inference from few samples: what is inferred, what is assumed, and what is said about it."""

from __future__ import annotations

import json
import math

import numpy as np
import pytest

from sms_resource.geostatistics.codes import CODES
from sms_resource.geostatistics.evidence import gather_evidence
from sms_resource.geostatistics.inference import infer_variogram
from sms_resource.geostatistics.model import Structure, VariogramModel
from sms_resource.geostatistics.variogram_settings import ZONAL_RANGE_M, VariogramSettings

from .variogram_twin import drilled, simulated

TRUTH = VariogramModel(0.6, [Structure("spherical", 1.4, (50.0, 50.0, 5.0))])
QUICK = VariogramSettings(jackknife=False)


@pytest.fixture(scope="module")
def well_drilled():
    xyz, holes = drilled(holes=49, samples=10, spacing=25.0, seed=5)
    return xyz, holes, simulated(TRUTH, xyz, 1, seed=2)[0] + 10.0


def codes(result):
    found = {item.code for item in result.findings}
    assert found <= set(CODES)
    return found


def test_enough_data_are_fitted_and_said_to_be(well_drilled):
    xyz, holes, values = well_drilled
    found = infer_variogram(xyz, values, holes)
    assert found.nugget_from == "down-hole variogram"
    assert found.horizontal_from == found.vertical_from == "data"
    assert found.assumed == ()
    assert found.model.total_sill == pytest.approx(values.var(), rel=1e-9)  # the sample variance by default
    assert found.measure == "semivariogram"
    assert "pairs per lag are 441, 392, 343, 294" in found.statement
    assert set(found.intervals["parameter"]) >= {"nugget", "total_sill", "major_range_1_m", "minor_range_1_m"}
    assert (found.intervals["low"] <= found.intervals["best"]).all()
    assert (found.intervals["best"] <= found.intervals["high"]).all()
    assert found.low.structures[0].ranges[0] < found.model.structures[0].ranges[0]
    assert found.high.structures[0].ranges[0] > found.model.structures[0].ranges[0]
    json.dumps(found.to_record(), allow_nan=False)


def test_great_coordinates_and_missing_values_change_nothing(well_drilled):
    xyz, holes, values = well_drilled
    base = infer_variogram(xyz, values, holes, QUICK)
    more = np.vstack([xyz + (1e7, -1e7, 0.0), [[np.nan, 0.0, 0.0]]])
    other = infer_variogram(more, np.append(values, np.nan), np.append(holes, "empty"), QUICK)
    assert other.sample_count == len(values)
    assert other.model.nugget == pytest.approx(base.model.nugget, rel=1e-5)
    np.testing.assert_allclose(other.model.structures[0].ranges, base.model.structures[0].ranges, rtol=1e-5)


def test_the_order_of_the_samples_changes_nothing(well_drilled):
    xyz, holes, values = well_drilled
    order = np.random.default_rng(0).permutation(len(values))
    base = infer_variogram(xyz, values, holes, QUICK)
    other = infer_variogram(xyz[order], values[order], holes[order], QUICK)
    np.testing.assert_allclose(other.model.structures[0].ranges, base.model.structures[0].ranges, rtol=1e-6)
    assert other.model.nugget == pytest.approx(base.model.nugget, rel=1e-6)


def test_the_unit_scales_the_sills_and_not_the_ranges(well_drilled):
    xyz, holes, values = well_drilled
    base = infer_variogram(xyz, values, holes, QUICK).model
    other = infer_variogram(xyz, 1e4 * values, holes, QUICK).model
    assert other.nugget == pytest.approx(1e8 * base.nugget, rel=1e-6)
    assert other.total_sill == pytest.approx(1e8 * base.total_sill, rel=1e-9)
    np.testing.assert_allclose(other.structures[0].ranges, base.structures[0].ranges, rtol=1e-6)


def test_few_composites_assume_the_range_in_the_plane():
    """Twelve holes of four samples: down-hole pairs suffice, 48 composites do not for the plane."""
    xyz, holes = drilled(holes=12, samples=4, spacing=30.0)
    values = simulated(TRUTH, xyz, 1, seed=1)[0]
    settings = VariogramSettings(min_pairs=10)
    found = infer_variogram(xyz, values, holes, settings)
    assert found.horizontal_from == "assumed"
    assert found.vertical_from == "data"
    major, semi, minor = found.model.structures[0].ranges
    assert (major, semi) == pytest.approx((6.0 * minor, 6.0 * minor))
    assert any(
        text.startswith("range in the plane: 6 times the upright range, assumed") for text in found.assumed
    )
    assert "cannot be inferred: pairs per lag are" in found.statement
    assert "48 samples (50 are needed)" in found.statement
    assert "variogram-not-inferred" in codes(found)
    assert found.low.structures[0].ranges[0] < major < found.high.structures[0].ranges[0]


def test_almost_nothing_assumes_everything_and_says_so():
    xyz, holes = drilled(holes=4, samples=2, spacing=30.0)
    values = np.random.default_rng(0).normal(size=8)
    found = infer_variogram(xyz, values, holes)
    assert found.nugget_from == "assumed"
    assert found.model.nugget == pytest.approx(0.4 * values.var())
    assert found.model.structures[0].ranges == pytest.approx((24.0, 24.0, 4.0))
    assert len(found.assumed) == 3
    assert found.intervals is None
    assert found.low.structures[0].ranges[0] == pytest.approx(12.0)
    assert found.high.structures[0].ranges[0] == pytest.approx(48.0)


@pytest.mark.parametrize("values", [[3.2], [3.2, np.nan, np.nan], [0.1 + 0.2] * 3, [0.0] * 3])
def test_values_that_do_not_vary(values):
    xyz = np.arange(3.0 * len(values)).reshape(-1, 3)
    found = infer_variogram(xyz, values, None)
    assert found.model.total_sill == pytest.approx(1.0)
    assert "No variogram can be inferred" in found.statement
    assert codes(found) == {"variogram-no-variance"}
    json.dumps(found.to_record(), allow_nan=False)


@pytest.mark.parametrize(
    ("xyz", "values", "words"),
    [
        (np.zeros((3, 3)), [np.nan] * 3, "at least 2 samples"),
        (np.full((3, 3), np.nan), [1.0, 2.0, 3.0], "coordinates must be finite"),
        (np.zeros((3, 2)), [1.0, 2.0, 3.0], "coordinates"),
        (np.zeros((3, 3)), [1.0, np.inf, 3.0], "finite"),
    ],
)
def test_bad_input_is_named(xyz, values, words):
    with pytest.raises(ValueError, match=words):
        infer_variogram(xyz, values, None)


def test_samples_at_one_place_are_no_crash():
    found = infer_variogram(np.zeros((4, 3)), [1.0, 2.0, 3.0, 5.0], ["a", "a", "b", "b"])
    assert found.horizontal_from == found.vertical_from == "assumed"
    assert found.model.total_sill == pytest.approx(np.var([1.0, 2.0, 3.0, 5.0]))


def test_holes_in_one_line_leave_the_range_across_unknown():
    xyz, holes = drilled(holes=40, samples=8, spacing=0.0)
    number = np.array([int(name[1:]) for name in holes])
    angle = math.radians(30.0)
    xyz[:, 0] = 15.0 * number * math.sin(angle)
    xyz[:, 1] = 15.0 * number * math.cos(angle)
    found = infer_variogram(xyz, simulated(TRUTH, xyz, 1, seed=4)[0], holes, QUICK)
    assert "variogram-holes-in-line" in codes(found)
    assert "holes lie in one line (azimuth 30)" in found.statement
    assert any("across the line of holes (azimuth 30)" in text for text in found.assumed)


def test_no_continuity_between_holes_is_told_and_no_range_is_made_up():
    """Ranges of 12 m, holes 40 m apart: pairs between holes stand at the sill from the first lag."""
    truth = VariogramModel(0.2, [Structure("spherical", 1.8, (12.0, 12.0, 6.0))])
    xyz, holes = drilled(holes=64, samples=12, spacing=40.0, seed=8)
    told = 0
    for field in simulated(truth, xyz, 8, seed=9):
        found = infer_variogram(xyz, field, holes, QUICK)
        if found.horizontal_from == "assumed":
            told += 1
            assert "variogram-no-continuity" in codes(found)
            shortest = min(v.distance[v.pairs >= 30][0] for v in found.experimental if v.kind == "horizontal")
            assert found.model.structures[0].ranges[0] <= shortest
            assert "shows no continuity" in found.statement
    assert told >= 5


def test_a_trend_in_depth_becomes_a_zonal_structure():
    """Half of the variance is a drift with depth: pairs in the plane do not see it, and its range is not theirs."""
    truth = VariogramModel(0.2, [Structure("spherical", 0.8, (40.0, 40.0, 5.0))])
    xyz, holes = drilled(holes=64, samples=10, spacing=20.0, seed=11)
    drift = 0.35 * xyz[:, 2]
    fields = simulated(truth, xyz, 6, seed=12) + drift
    single = VariogramSettings(jackknife=False, zonal=False)
    ranges, without = [], []
    for field in fields:
        found = infer_variogram(xyz, field, holes, QUICK)
        main, zonal = found.model.structures
        assert zonal.ranges[0] == ZONAL_RANGE_M
        assert 0.3 < zonal.sill / found.model.total_sill < 0.75
        assert found.ranges[0] == main.ranges[0]
        assert "variogram-zonal" in codes(found)
        assert "varies only across the plane" in found.statement
        ranges.append(main.ranges[0])
        without.append(infer_variogram(xyz, field, holes, single).model.structures[0].ranges[0])
    assert np.exp(np.mean(np.log(ranges))) == pytest.approx(40.0, rel=0.35)
    assert np.exp(np.mean(np.log(without))) > 70.0  # one structure alone makes up a range that is not there
    table = infer_variogram(xyz, fields[0], holes).intervals
    assert "major_range_2_m" not in set(table["parameter"])


def test_zonal_structures_come_back_from_normal_scores():
    truth = VariogramModel(0.2, [Structure("spherical", 0.8, (40.0, 40.0, 5.0))])
    xyz, holes = drilled(holes=64, samples=10, spacing=20.0, seed=11)
    values = np.exp(0.8 * (simulated(truth, xyz, 1, seed=12)[0] + 0.35 * xyz[:, 2]))
    found = infer_variogram(xyz, values, holes, QUICK)
    assert found.measure == "normal_scores"
    main, zonal = found.model.structures
    assert zonal.ranges[0] == ZONAL_RANGE_M
    assert 15.0 < main.ranges[0] < 90.0
    assert found.model.total_sill == pytest.approx(values.var(), rel=1e-6)


def test_a_lag_of_twins_is_shown_and_not_fitted():
    """Eight twins 2 m from rich holes: their lag has hundreds of pairs and few holes."""
    xyz, holes = drilled(holes=49, samples=10, spacing=25.0, seed=5)
    twins = np.isin(holes, [f"H{n:03d}" for n in range(0, 48, 6)])
    both = np.vstack([xyz, xyz[twins] + (2.0, 0.0, 0.0)])
    names = np.concatenate([holes, np.char.add(holes[twins], "T")])
    values = np.random.default_rng(1).normal(size=len(both))
    evidence = gather_evidence(both, values, names, QUICK)
    plane = evidence.of("plane")
    assert plane.pairs[0] >= 80 and plane.holes[0] < 0.5 * evidence.hole_count
    assert not evidence.usable("plane")[0]
    assert evidence.usable("plane")[1]
    every = gather_evidence(both, values, names, VariogramSettings(min_hole_share=0.0))
    assert every.usable("plane")[0]


def test_short_holes_help_the_nugget():
    """Two down-hole lags are too few for a fit of their own; with the plane they hold the nugget down."""
    truth = VariogramModel(0.3, [Structure("spherical", 1.7, (60.0, 60.0, 10.0))])
    xyz, holes = drilled(holes=64, samples=3, spacing=25.0, seed=4)
    shares = []
    for field in simulated(truth, xyz, 12, seed=6):
        found = infer_variogram(xyz, field, holes, QUICK)
        assert found.vertical_from == "assumed"
        assert found.nugget_from.startswith("short down-hole variogram")
        assert "few down-hole lags were fitted with it" in found.statement
        shares.append(found.model.nugget / found.model.total_sill)
    assert np.mean(shares) == pytest.approx(0.15, abs=0.08)


def test_what_the_user_fixes_wins(well_drilled):
    xyz, holes, values = well_drilled
    settings = VariogramSettings(nugget=0.9, ranges=((80.0, 40.0, None),), total_sill=2.4, azimuth=30.0)
    found = infer_variogram(xyz, values, holes, settings)
    assert found.nugget_from == "fixed by the user"
    assert found.model.nugget == 0.9
    assert found.model.total_sill == pytest.approx(2.4, abs=1e-12)
    assert found.model.structures[0].ranges[:2] == (80.0, 40.0)
    assert found.model.azimuth == 30.0
    assert found.horizontal_from == "user"
    assert set(found.intervals["parameter"]) == {"minor_range_1_m"}
    share = infer_variogram(xyz, values, holes, VariogramSettings(nugget_share=0.25, jackknife=False))
    assert share.model.nugget == pytest.approx(0.25 * share.model.total_sill)


def test_what_the_user_fixes_wins_without_data_too():
    xyz, holes = drilled(holes=3, samples=2)
    settings = VariogramSettings(nugget=0.1, sills=(0.9,), ranges=((60.0, 30.0, 3.0),))
    found = infer_variogram(xyz, np.arange(6.0), holes, settings)
    assert found.model.nugget == 0.1
    assert found.model.structures[0] == Structure("spherical", 0.9, (60.0, 30.0, 3.0))
    assert found.assumed == ()


def test_a_fixed_upright_range_carries_the_assumed_ratio():
    xyz, holes = drilled(holes=12, samples=4, spacing=30.0)
    values = simulated(TRUTH, xyz, 1, seed=1)[0]
    settings = VariogramSettings(min_pairs=10, ranges=((None, None, 3.0),), jackknife=False)
    found = infer_variogram(xyz, values, holes, settings)
    assert found.model.structures[0].ranges == pytest.approx((18.0, 18.0, 3.0))


@pytest.mark.parametrize("measure", ["normal_scores", "logs", "correlogram", "pairwise_relative"])
def test_other_measures_come_back_to_the_values(well_drilled, measure):
    xyz, holes, values = well_drilled
    grades = np.exp(0.4 * (values - 10.0))
    found = infer_variogram(xyz, grades, holes, VariogramSettings(measure=measure, jackknife=False))
    assert found.measure == measure
    assert found.model.total_sill == pytest.approx(grades.var(), rel=1e-6)
    assert 0.1 < found.model.nugget / found.model.total_sill < 0.6
    assert 20.0 < found.model.structures[0].ranges[0] < 100.0
    assert "turned back to the values" in found.statement
    assert all(item.measure == measure for item in found.experimental)


def test_skewed_values_take_normal_scores_by_themselves(well_drilled):
    xyz, holes, values = well_drilled
    skewed = infer_variogram(xyz, np.exp(0.7 * (values - 10.0)), holes)
    assert skewed.measure == "normal_scores"
    row = skewed.intervals.set_index("parameter").loc["total_sill"]
    assert row.low < row.best < row.high


def test_robust_estimator_in_the_inference(well_drilled):
    xyz, holes, values = well_drilled
    found = infer_variogram(xyz, values, holes, VariogramSettings(estimator="cressie", jackknife=False))
    assert all(item.estimator == "cressie" for item in found.experimental)
    assert found.horizontal_from == "data"


def test_clustered_samples_count_less_with_weights(well_drilled):
    xyz, holes, values = well_drilled
    weights = np.where(xyz[:, 0] > 75.0, 1.0, 0.2)
    found = infer_variogram(xyz, values, holes, QUICK, weights=weights)
    mean = np.average(values, weights=weights)
    assert found.model.total_sill == pytest.approx(np.average((values - mean) ** 2, weights=weights))


def test_inclined_holes_are_fitted_along_their_own_direction():
    """Holes that dip 45 degrees: the down-hole lags stand along the holes, not along the vertical."""
    xyz, holes = drilled(holes=36, samples=8, spacing=25.0)
    depth = -xyz[:, 2]
    xyz[:, 0] += depth * math.sin(math.radians(45.0))
    xyz[:, 2] = -depth * math.cos(math.radians(45.0))
    evidence = gather_evidence(xyz, np.arange(len(xyz), dtype=float), holes, QUICK)
    down = evidence.of("down_hole")
    assert down.plunge == pytest.approx(45.0, abs=1e-6)
    assert down.azimuth == pytest.approx(90.0, abs=1e-6)
    np.testing.assert_allclose(down.separations[0], [math.sqrt(0.5), 0.0, -math.sqrt(0.5)], atol=1e-6)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"measure": "madogram"}, "measure"),
        ({"total_sill": 0.0}, "total_sill"),
        ({"total_sill": "variance"}, "total_sill"),
        ({"nugget": 1.0, "nugget_share": 0.2}, "exclude"),
        ({"nugget": -1.0}, "nugget"),
        ({"nugget_share": 1.5}, "nugget_share"),
        ({"assumed_ratio": (5.0, 3.0, 1.0)}, "assumed_ratio"),
        ({"bandwidth_m": 0.0}, "bandwidth_m"),
        ({"min_pairs": 0}, "min_pairs"),
        ({"confidence": 1.0}, "confidence"),
        ({"continuity": "vertical"}, "continuity"),
        ({"ranges": ((0.0, None, None),)}, "ranges"),
        ({"sills": (-1.0,)}, "sills"),
        ({"shapes": ("cubic",)}, "cubic"),
    ],
)
def test_bad_settings_are_named(change, words):
    with pytest.raises(ValueError, match=words):
        VariogramSettings(**change)
