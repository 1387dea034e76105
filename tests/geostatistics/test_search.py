"""The search against a full sort, and what it promises: sectors, holes, passes, ties, restraint, domains."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sms_resource.geostatistics import (
    HighGradeRestraint,
    Neighbourhood,
    Structure,
    VariogramModel,
    find_coincident,
    ordinary_kriging,
    select_for_domain,
)
from sms_resource.geostatistics.search_run import Finder, near_order

from .kriging_twin import chosen_samples, scene

MODEL = VariogramModel(0.2, [Structure("spherical", 1.0, (40.0, 40.0, 10.0))])


def assert_same_samples(points, holes, targets, item, skip_hole=None, skip_sample=None, threads=1):
    """The kernel and the full sort take the same samples for every target."""
    found = Finder(points, holes.astype(np.int32), [item], threads).find(
        np.ascontiguousarray(targets), skip_hole, skip_sample
    )
    for b, target in enumerate(targets):
        rows, hole_count, enough = chosen_samples(
            points,
            holes,
            target,
            item,
            None if skip_hole is None else skip_hole[b],
            None if skip_sample is None else skip_sample[b],
        )
        assert found.samples[b, : found.count[b]].tolist() == rows.tolist()
        assert found.hole_count[b] == hole_count
        assert (found.status[b] == 0) == enough


@st.composite
def neighbourhoods(draw):
    most = draw(st.integers(1, 40))
    return Neighbourhood(
        radii=tuple(draw(st.floats(3.0, 120.0)) for _ in range(3)),
        max_samples=most,
        min_samples=draw(st.integers(1, most)),
        max_per_hole=draw(st.one_of(st.none(), st.integers(1, 6))),
        min_holes=draw(st.integers(1, min(4, most))),
        sectors=draw(st.sampled_from(["none", "quadrants", "octants"])),
        max_per_sector=draw(st.one_of(st.none(), st.integers(1, 8))),
        azimuth=draw(st.floats(-180.0, 180.0)),
        plunge=draw(st.floats(-90.0, 90.0)),
        tilt=draw(st.floats(-90.0, 90.0)),
    )


@settings(max_examples=60, deadline=None)
@given(item=neighbourhoods(), seed=st.integers(0, 10_000), step=st.floats(0.05, 8.0))
def test_search_is_a_full_sort(item, seed, step):
    """Targets on a grid fine or coarse, so that groups of them are narrow or wide."""
    points, _, holes, _ = scene(seed, samples=150, holes=12, targets=1)
    corner = np.random.default_rng(seed).uniform(0, 60, 3) - [0, 0, 70]
    grid = np.stack(np.meshgrid(*[np.arange(5.0)] * 3, indexing="ij"), axis=-1).reshape(-1, 3)
    targets = corner + grid * step
    assert_same_samples(points, holes, targets[near_order(targets)], item)


@settings(max_examples=15, deadline=None)
@given(item=neighbourhoods(), seed=st.integers(0, 10_000))
def test_search_from_afar(item, seed):
    """Targets strewn without order: the groups are as wide as the field."""
    points, _, holes, targets = scene(seed, samples=100, targets=70)
    assert_same_samples(points, holes, targets, item, threads=2)


@settings(max_examples=15, deadline=None)
@given(item=neighbourhoods(), seed=st.integers(0, 10_000))
def test_search_without_the_own_hole(item, seed):
    points, _, holes, _ = scene(seed, samples=90)
    everyone = np.arange(90, dtype=np.int32)
    assert_same_samples(points, holes, points, item, holes.astype(np.int32), everyone)
    assert_same_samples(points, holes, points, item, None, everyone)


@pytest.mark.parametrize("sectors", ["none", "quadrants", "octants"])
def test_ties_are_settled_by_order(sectors):
    """On a regular grid many distances are equal: the sample that comes first wins, whatever the rounding."""
    axis = np.arange(-3.0, 4.0)
    points = np.stack(np.meshgrid(axis, axis, axis, indexing="ij"), axis=-1).reshape(-1, 3)
    holes = np.arange(len(points)) % 7
    targets = np.array([[0.0, 0.0, 0.0], [0.5, 0.5, 0.5], [1.0, 0.0, -1.0]])
    item = Neighbourhood(4.0, 20, 1, 5, 1, sectors)
    assert_same_samples(points, holes, targets, item)
    # a thirtieth of a turn moves no distance, but it moves every last digit
    turned = Neighbourhood(4.0, 20, 1, azimuth=12.0)
    first = Finder(points, holes.astype(np.int32), [Neighbourhood(4.0, 20, 1)], 1).find(targets)
    second = Finder(points, holes.astype(np.int32), [turned], 1).find(targets)
    np.testing.assert_array_equal(first.samples, second.samples)


def test_octants_count_over_all_samples_in_reach():
    """A crowd on one side does not keep out the few on the other, as filtering the nearest few would."""
    rng = np.random.default_rng(1)
    crowd = rng.uniform(1.0, 3.0, (100, 3))
    lonely = np.array([[-20.0, -20.0, -20.0], [-25.0, 20.0, 20.0], [20.0, -25.0, 20.0]])
    points = np.vstack([crowd, lonely])
    item = Neighbourhood(60.0, 24, 1, sectors="octants", max_per_sector=2)
    found = Finder(points, np.arange(103, dtype=np.int32), [item], 1).find(np.zeros((1, 3)))
    taken = found.samples[0, : found.count[0]]
    assert found.count[0] == 5
    assert set(taken) >= {100, 101, 102}
    nearest = np.argsort((crowd**2).sum(axis=1))[:2]
    assert set(taken) - {100, 101, 102} == set(nearest)


def test_sector_limit_defaults_to_an_even_share():
    assert Neighbourhood(10.0, 24, sectors="octants").sector_limit == 3
    assert Neighbourhood(10.0, 10, sectors="octants").sector_limit == 2
    assert Neighbourhood(10.0, 10, sectors="quadrants", max_per_sector=7).sector_limit == 7
    assert Neighbourhood(10.0, 10).sector_limit == 10


def test_passes_are_tried_in_turn():
    points, values, _, targets = scene(2, columns=1, missing=0.0, targets=60)
    small, large = Neighbourhood(8.0, 12, 4), Neighbourhood(30.0, 12, 4)
    both = ordinary_kriging(points, values[:, 0], targets, MODEL, [small, large])
    one = ordinary_kriging(points, values[:, 0], targets, MODEL, small)
    two = ordinary_kriging(points, values[:, 0], targets, MODEL, large)
    first = one.status == 0
    assert 0 < first.sum() < 60
    np.testing.assert_array_equal(both.pass_number, np.where(first, 1, np.where(two.status == 0, 2, 0)))
    np.testing.assert_array_equal(both.estimate[first], one.estimate[first])
    np.testing.assert_array_equal(both.estimate[~first], two.estimate[~first])
    assert small.grown(2.0).radii == (16.0, 16.0, 16.0)


def test_high_grades_are_clipped_beyond_their_reach():
    points, values, _, targets = scene(12, columns=2, missing=0.0)
    item = Neighbourhood((40.0, 30.0, 12.0), 14, 2, azimuth=20.0)
    threshold = np.quantile(values[:, 0], 0.8)
    restraint = HighGradeRestraint([threshold, np.nan], fraction=0.4)
    plain = ordinary_kriging(points, values, targets, MODEL, item)
    result = ordinary_kriging(points, values, targets, MODEL, item, high_grade_restraint=restraint)
    np.testing.assert_array_equal(result.estimate[:, 1], plain.estimate[:, 1])
    np.testing.assert_array_equal(result.variance, plain.variance)
    changed = 0
    for b, target in enumerate(targets):
        apart = np.linalg.norm(((points - target) @ item.axes.T) / item.radii, axis=1)
        clipped = np.where((apart > 0.4) & (values[:, 0] > threshold), threshold, values[:, 0])
        expected = ordinary_kriging(points, clipped, target[None], MODEL, item).estimate[0]
        assert result.estimate[b, 0] == pytest.approx(expected, rel=1e-12)
        changed += abs(result.estimate[b, 0] - plain.estimate[b, 0]) > 1e-6
    assert changed > 5
    in_metres = HighGradeRestraint([threshold, np.nan], distance_m=16.0)
    same = ordinary_kriging(points, values, targets, MODEL, item, high_grade_restraint=in_metres)
    np.testing.assert_array_equal(same.estimate, result.estimate)


def test_domains():
    points = np.array([[0.0, 0, 0], [4.0, 0, 0], [6.0, 0, 0], [9.0, 0, 0], [30.0, 0, 0]])
    domain = ["massive", "massive", "cap", "cap", "stockwork"]
    blocks = np.array([[0.0, 0, 0], [3.0, 0, 0]])
    hard = select_for_domain(points, domain, "massive", blocks)
    soft = select_for_domain(points, domain, "massive", blocks, soft_with={"cap": 3.0})
    assert hard.tolist() == [True, True, False, False, False]
    assert soft.tolist() == [True, True, True, False, False]
    with pytest.raises(ValueError, match="sample_domain has 2 entries"):
        select_for_domain(points, domain[:2], "massive", blocks)
    with pytest.raises(ValueError, match="soft_with"):
        select_for_domain(points, domain, "massive", blocks, soft_with={"cap": -1.0})


def test_coincident_pairs():
    points = np.array([[0.0, 0, 0], [1.0, 0, 0], [0.0, 0, 1e-7], [1.0, 0, 0.05]])
    assert find_coincident(points).tolist() == [[0, 2]]
    assert find_coincident(points, 0.1).tolist() == [[0, 2], [1, 3]]
    assert find_coincident(points[:1]).shape == (0, 2)


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"radii": 0.0}, "radii"),
        ({"radii": (1.0, 2.0)}, "radii"),
        ({"radii": 5.0, "max_samples": 3}, "min_samples 4 is more than max_samples 3"),
        ({"radii": 5.0, "max_samples": 0}, "max_samples"),
        ({"radii": 5.0, "max_samples": 5000}, "at most 1000"),
        ({"radii": 5.0, "min_holes": 30}, "min_holes 30 is more than max_samples"),
        ({"radii": 5.0, "max_per_hole": 2.5}, "max_per_hole"),
        ({"radii": 5.0, "sectors": "thirds"}, "sectors"),
        ({"radii": 5.0, "azimuth": np.nan}, "azimuth"),
    ],
)
def test_bad_neighbourhoods(settings, message):
    with pytest.raises(ValueError, match=message):
        Neighbourhood(**settings)


def test_bad_restraints():
    with pytest.raises(ValueError, match="fraction"):
        HighGradeRestraint(1.0, fraction=0.0)
    with pytest.raises(ValueError, match="thresholds has 3 numbers; wanted 1 or 2"):
        HighGradeRestraint([1.0, 2.0, 3.0]).per_column(2)


@pytest.mark.parametrize("sectors", ["none", "octants"])
def test_a_sample_on_the_ellipsoid_is_inside(sectors):
    points = np.array([[3.0, 0.0, 0.0], [0.0, -4.0, 0.0], [0.0, 0.0, 5.0], [3.001, 0.0, 0.0]])
    item = Neighbourhood((4.0, 3.0, 5.0), 4, 1, 3, 1, sectors, 4)
    found = Finder(points, np.zeros(4, dtype=np.int32), [item], 1).find(np.zeros((1, 3)))
    assert found.samples[0, : found.count[0]].tolist() == [0, 1, 2]
    free = Neighbourhood((4.0, 3.0, 5.0), 4, 1, None, 1, sectors, 4)
    found = Finder(points, np.zeros(4, dtype=np.int32), [free], 1).find(np.zeros((1, 3)))
    assert found.samples[0, : found.count[0]].tolist() == [0, 1, 2]
