"""Holes in reach: against SciPy's distances, in turned and stretched space."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.spatial.distance import cdist

from sms_resource.classification import holes_in_reach
from sms_resource.classification.reach_kernels import holes_within


def holes(seed: int = 4) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    tops = rng.uniform(0, 120, (15, 2))
    rows = [(x, y, -z, f"H{n % 14}") for n, (x, y) in enumerate(tops) for z in range(rng.integers(1, 12))]
    samples = np.array([row[:3] for row in rows], dtype=float)
    ids = np.array([row[3] for row in rows])
    shuffled = rng.permutation(len(rows))
    return rng.uniform([0, 0, -15], [120, 120, 5], (300, 3)), samples[shuffled], ids[shuffled]


@pytest.mark.parametrize("turned", [False, True])
def test_equals_scipy(turned: bool) -> None:
    targets, samples, ids = holes()
    ranges = (45.0, 25.0, 4.0)
    axes = None
    if turned:
        # major axis at azimuth 60 plunging 20, the others square to it
        a, d = np.radians([60.0, 20.0])
        major = np.array([np.sin(a) * np.cos(d), np.cos(a) * np.cos(d), -np.sin(d)])
        semi = np.array([np.cos(a), -np.sin(a), 0.0])
        axes = np.stack([major, semi, np.cross(semi, major)])
    turn = np.array([[0, 1, 0], [1, 0, 0], [0, 0, 1]]) if axes is None else axes
    distance = cdist(targets @ turn.T / ranges, samples @ turn.T / ranges)
    want = np.array([len(set(ids[row <= 1.0])) for row in distance])
    got = holes_in_reach(targets, samples, ids, ranges, axes=axes)
    np.testing.assert_array_equal(got.holes_in_range, want)
    np.testing.assert_allclose(got.nearest_hole_m, distance.min(axis=1) * 45.0, rtol=1e-12)
    assert want.min() == 0 and want.max() >= 2


def test_the_kernel_without_compilation_agrees() -> None:
    targets, samples, ids = holes(5)
    order = np.argsort(ids)
    ordered = ids[order]
    starts = np.append(np.flatnonzero(np.append(True, ordered[1:] != ordered[:-1])), len(ordered))
    held = samples[order] / 30.0
    lower, upper = np.minimum.reduceat(held, starts[:-1]), np.maximum.reduceat(held, starts[:-1])
    results = []
    for kernel in (holes_within, holes_within.py_func):
        count, nearest = np.zeros(20, dtype=np.int64), np.zeros(20)
        kernel(targets[:20] / 30.0, held, starts, lower, upper, count, nearest)
        results.append((count, nearest))
    np.testing.assert_array_equal(results[0][0], results[1][0])
    np.testing.assert_allclose(results[0][1], results[1][1], rtol=1e-14)


def test_without_samples_nothing_is_in_reach() -> None:
    got = holes_in_reach(np.zeros((2, 3)), np.empty((0, 3)), [], (10, 10, 2))
    assert got.holes_in_range.tolist() == [0, 0] and np.isinf(got.nearest_hole_m).all()


def test_bad_arguments_are_named() -> None:
    with pytest.raises(ValueError, match="ranges"):
        holes_in_reach(np.zeros((1, 3)), np.zeros((1, 3)), ["H1"], (10, 0, 2))
    with pytest.raises(ValueError, match="hole_ids"):
        holes_in_reach(np.zeros((1, 3)), np.zeros((2, 3)), ["H1"], (10, 10, 2))
    with pytest.raises(ValueError, match="axes"):
        holes_in_reach(np.zeros((1, 3)), np.zeros((1, 3)), ["H1"], (10, 10, 2), axes=np.eye(2))
