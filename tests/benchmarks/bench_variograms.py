"""Speed of experimental variograms, fits, inference and change of support; run with ``-m benchmark -s``."""

from __future__ import annotations

import time

import numpy as np
import pytest

from sms_resource.geostatistics.directions import Direction
from sms_resource.geostatistics.experimental import experimental_variogram, experimental_variograms
from sms_resource.geostatistics.fit import fit_variogram
from sms_resource.geostatistics.inference import infer_variogram
from sms_resource.geostatistics.pairs import PairRequest
from sms_resource.geostatistics.support import change_of_support
from sms_resource.geostatistics.variogram_settings import VariogramSettings
from sms_resource.samples.declustering import cell_declustering


def best_of(function, rounds=3):
    times = []
    for _ in range(rounds):
        start = time.perf_counter()
        function()
        times.append(time.perf_counter() - start)
    return min(times)


@pytest.mark.benchmark
def test_variograms_benchmark():
    """5000 samples and four directions take less than a second (the requirement)."""
    generator = np.random.default_rng(0)
    xyz = generator.uniform(0.0, 1.0, (5000, 3)) * (300.0, 300.0, 40.0)
    values = generator.lognormal(size=5000)
    edges = np.arange(21) * 8.0
    requests = [PairRequest(Direction("directional", azimuth=a), edges) for a in (0.0, 45.0, 90.0, 135.0)]
    holes = np.repeat(np.arange(250), 20)
    experimental_variograms(xyz[:50], values[:50], requests)  # compile
    one = experimental_variogram(xyz, values, lag_edges=edges)
    fit_variogram(one)
    some = infer_variogram(xyz[:400], values[:400], holes[:400], VariogramSettings())
    rows = {
        "5000 samples, 4 directions, 20 lags": best_of(
            lambda: experimental_variograms(xyz, values, requests)
        ),
        "5000 samples, omnidirectional": best_of(
            lambda: experimental_variogram(xyz, values, lag_edges=edges)
        ),
        "5000 samples, normal scores": best_of(
            lambda: experimental_variogram(xyz, values, lag_edges=edges, measure="normal_scores")
        ),
        "fit, one structure, 20 lags": best_of(lambda: fit_variogram(one)),
        "inference, 400 samples, 20 holes, jackknife": best_of(
            lambda: infer_variogram(xyz[:400], values[:400], holes[:400])
        ),
        "inference, 5000 samples, 250 holes, jackknife": best_of(
            lambda: infer_variogram(xyz, values, holes), 1
        ),
        "change of support, 5000 samples, 40 cut-offs": best_of(
            lambda: change_of_support(values, 0.4, np.linspace(0, 5, 40))
        ),
        "cell declustering, 5000 samples, 20 sizes": best_of(lambda: cell_declustering(xyz, values)),
    }
    print()
    for name, seconds in rows.items():
        print(f"{name:<50s} {1000.0 * seconds:10.1f} ms")
    assert some.hole_count == 20
    assert rows["5000 samples, 4 directions, 20 lags"] < 1.0
