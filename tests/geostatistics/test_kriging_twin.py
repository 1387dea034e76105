"""The kernels against their plain NumPy twins, compiled and not compiled, whatever the threads."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from sms_resource.geostatistics import (
    KrigingResult,
    Neighbourhood,
    Structure,
    VariogramModel,
    discretisation_offsets,
    ordinary_kriging,
    simple_kriging,
)

from .kriging_twin import kriged, kriged_everywhere, scene

MODELS = [
    VariogramModel(0.3, [Structure("spherical", 1.0, (40.0, 30.0, 6.0))], 60.0, 20.0, 35.0),
    VariogramModel(
        0.1,
        [Structure("exponential", 0.4, (25.0, 25.0, 5.0)), Structure("gaussian", 0.3, (60.0, 30.0, 9.0))],
        azimuth=20.0,
    ),
]
PASSES = {
    "plain": [Neighbourhood((30.0, 25.0, 8.0), 12, 4, azimuth=40.0)],
    "octants": [
        Neighbourhood((40.0, 30.0, 10.0), 16, 5, 3, 3, "octants", azimuth=60.0, plunge=15.0, tilt=5.0)
    ],
    "quadrants and passes": [
        Neighbourhood((15.0, 15.0, 4.0), 10, 8, 3, 3, "quadrants", 2),
        Neighbourhood((30.0, 30.0, 8.0), 10, 4, 3, 2, "quadrants"),
        Neighbourhood((60.0, 60.0, 16.0), 10, 2),
    ],
    "all in reach": [Neighbourhood((500.0, 500.0, 500.0), 200, 1)],
}
FIELDS = (
    "estimate",
    "variance",
    "lagrange",
    "slope_of_regression",
    "kriging_efficiency",
    "negative_weight_sum",
    "sample_count",
    "hole_count",
    "nearest_distance",
)


def stacked(result: KrigingResult) -> np.ndarray:
    return np.stack([getattr(result, name) for name in FIELDS], axis=-1)


@pytest.mark.parametrize("block", [None, (5.0, 6.0, 2.0)])
@pytest.mark.parametrize("name", PASSES)
def test_kernels_and_twins_agree(name, block):
    points, values, holes, targets = scene(3, targets=15)
    counts = (1, 1, 1) if block is None else (3, 2, 2)
    result = ordinary_kriging(
        points, values, targets, MODELS, PASSES[name], hole_ids=holes, block_size=block, discretisation=counts
    )
    twin = kriged_everywhere(points, values, targets, MODELS, PASSES[name], holes, block, counts)
    np.testing.assert_allclose(stacked(result), twin, rtol=1e-9, atol=1e-9)
    estimated = np.isfinite(twin[:, :, 0])
    np.testing.assert_array_equal(result.status == 0, estimated)
    assert estimated.any()


@pytest.mark.parametrize("samples", [120, 260])  # few go through the packed kernels, many through LAPACK
@pytest.mark.parametrize("block", [None, (5.0, 6.0, 2.0)])
def test_all_samples_and_twin_agree(block, samples):
    points, values, holes, targets = scene(4, samples=samples, targets=12)
    counts = (1, 1, 1) if block is None else (3, 2, 2)
    result = ordinary_kriging(
        points, values, targets, MODELS, None, hole_ids=holes, block_size=block, discretisation=counts
    )
    everything = [Neighbourhood(1e4, 500, 1)]
    twin = kriged_everywhere(points, values, targets, MODELS, everything, holes, block, counts)
    np.testing.assert_allclose(stacked(result), twin, rtol=1e-9, atol=1e-9)


@pytest.mark.parametrize("road", [None, Neighbourhood(1e4, 500, 1)])
def test_simple_kriging_and_twin_agree(road):
    points, values, _, targets = scene(5, columns=1, missing=0.0)
    result = simple_kriging(points, values[:, 0], targets, MODELS[1], road, mean=1.2)
    for b, target in enumerate(targets):
        twin = kriged(points, values[:, 0], target, MODELS[1], None, mean=1.2)
        np.testing.assert_allclose([result.estimate[b], result.variance[b]], twin[:2], rtol=1e-10)


def test_turned_blocks():
    """A block turned in plan is kriged from its turned points."""
    points, values, _, targets = scene(6, columns=1, missing=0.0)
    result = ordinary_kriging(
        points,
        values[:, 0],
        targets,
        MODELS[0],
        block_size=(8, 4, 2),
        discretisation=(3, 2, 1),
        block_azimuth=30.0,
    )
    offsets = discretisation_offsets((8, 4, 2), (3, 2, 1), 30.0)
    flat = discretisation_offsets((8, 4, 2), (3, 2, 1))
    c, s = np.cos(np.radians(30.0)), np.sin(np.radians(30.0))
    np.testing.assert_allclose(
        offsets, flat @ np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]]), atol=1e-12
    )
    for b, target in enumerate(targets):
        twin = kriged(points, values[:, 0], target, MODELS[0], offsets)
        np.testing.assert_allclose([result.estimate[b], result.variance[b]], twin[:2], rtol=1e-9)


@pytest.mark.parametrize("name", PASSES)
def test_threads_do_not_matter(name):
    points, values, holes, targets = scene(8, targets=700)
    one, two = (
        ordinary_kriging(
            points, values, targets, MODELS, PASSES[name], hole_ids=holes, block_size=(4, 4, 2),
            discretisation=(2, 2, 2), threads=threads,
        )
        for threads in (1, 2)
    )  # fmt: skip
    for field in KrigingResult.__dataclass_fields__:
        assert getattr(one, field).tobytes() == getattr(two, field).tobytes(), field


def test_company_does_not_matter():
    """A target gets the same bytes alone, in any order, and in a crowd: no dependence on chunks or packs."""
    points, values, holes, targets = scene(9, targets=300)
    settings = {"hole_ids": holes, "block_size": (4, 4, 2), "discretisation": (2, 2, 2)}
    crowd = ordinary_kriging(points, values, targets, MODELS, PASSES["octants"], **settings)
    order = np.random.default_rng(0).permutation(len(targets))
    mixed = ordinary_kriging(points, values, targets[order], MODELS, PASSES["octants"], **settings)
    for field in KrigingResult.__dataclass_fields__:
        assert getattr(mixed, field).tobytes() == getattr(crowd, field)[order].tobytes(), field
    for row in range(0, 300, 37):
        alone = ordinary_kriging(
            points, values, targets[row : row + 1], MODELS, PASSES["octants"], **settings
        )
        assert alone.estimate.tobytes() == crowd.estimate[row : row + 1].tobytes()


def uncompiled_case():
    """A small case that takes every branch: blocks, points, passes, missing values, too few samples."""
    points, values, holes, targets = scene(10, samples=30, holes=6, targets=11)
    blocks = ordinary_kriging(
        points, values, targets, MODELS, PASSES["quadrants and passes"], hole_ids=holes, block_size=(5, 5, 2),
        discretisation=(2, 1, 1), threads=1,
    )  # fmt: skip
    single = ordinary_kriging(
        points, values, points[:4], MODELS, PASSES["octants"], hole_ids=holes, threads=1
    )
    everything = ordinary_kriging(points, values, targets, MODELS, None, threads=1)
    return np.concatenate([stacked(result).ravel() for result in (blocks, single, everything)])


def test_kernels_without_the_jit(tmp_path):
    """The same numbers with NUMBA_DISABLE_JIT=1, where the kernels run as plain Python."""
    place = tmp_path / "plain.npy"
    code = (
        "import numpy as np; from tests.geostatistics.test_kriging_twin import uncompiled_case; "
        f"np.save({str(place)!r}, uncompiled_case())"
    )
    environment = {**os.environ, "NUMBA_DISABLE_JIT": "1"}
    folder = Path(__file__).parents[2]
    run = subprocess.run(
        [sys.executable, "-c", code], env=environment, cwd=folder, capture_output=True, text=True
    )
    assert run.returncode == 0, run.stderr
    np.testing.assert_allclose(np.load(place), uncompiled_case(), rtol=1e-9, atol=1e-9)
