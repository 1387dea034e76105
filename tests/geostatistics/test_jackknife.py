"""Uncertainty from leaving out holes: against fits made anew, and its coverage on simulated fields."""

from __future__ import annotations

import numpy as np
import pytest

from sms_resource.geostatistics.evidence import gather_evidence
from sms_resource.geostatistics.experimental import experimental_variograms
from sms_resource.geostatistics.inference import infer_variogram
from sms_resource.geostatistics.inference_plan import fit_plan, make_plan
from sms_resource.geostatistics.jackknife import clustering_factor, leave_out_holes
from sms_resource.geostatistics.model import Structure, VariogramModel
from sms_resource.geostatistics.variogram_settings import VariogramSettings

from .variogram_twin import drilled, simulated

TRUTH = VariogramModel(0.6, [Structure("spherical", 1.4, (50.0, 50.0, 5.0))])


@pytest.mark.parametrize("measure", ["semivariogram", "correlogram", "pairwise_relative"])
def test_sums_without_a_hole_are_those_of_the_other_holes(measure):
    xyz, holes = drilled(holes=20, samples=6)
    values = np.exp(np.random.default_rng(1).normal(size=len(xyz)))
    settings = VariogramSettings(measure=measure, min_pairs=5)
    evidence = gather_evidence(xyz, values, holes, settings)
    for number, name in enumerate(evidence.prepared.hole_names[:5]):
        left = holes != name
        anew = experimental_variograms(
            xyz[left], values[left], evidence.requests, hole_ids=holes[left], measure=measure
        )
        for one, two in zip(evidence.without_hole(number), anew):
            assert one.pairs.tolist() == two.pairs.tolist()
            np.testing.assert_allclose(one.gamma, two.gamma, rtol=1e-9)
            np.testing.assert_allclose(one.distance, two.distance, rtol=1e-9)


def test_warm_starts_reach_the_fit_that_is_made_anew():
    xyz, holes = drilled(holes=49, samples=10, spacing=25.0, seed=5)
    values = simulated(TRUTH, xyz, 1, seed=2)[0]
    settings = VariogramSettings(weighting="pairs_over_distance", measure="semivariogram")
    evidence = gather_evidence(xyz, values, holes, settings)
    plan = make_plan(evidence)
    fit = fit_plan(plan, evidence, evidence.variograms, evidence.variance_of_measure)
    models = leave_out_holes(evidence, plan, fit)
    for number in (0, 7, 24):
        left = holes != evidence.prepared.hole_names[number]
        variograms = experimental_variograms(xyz[left], values[left], evidence.requests, hole_ids=holes[left])
        anew = fit_plan(plan, evidence, variograms, float(values[left].var())).model
        assert models[number].nugget == pytest.approx(anew.nugget, abs=1e-3)
        np.testing.assert_allclose(models[number].structures[0].ranges, anew.structures[0].ranges, rtol=1e-3)


def test_clustering_factor_is_one_for_holes_that_are_not_alike():
    xyz, holes = drilled(holes=16, samples=5, spacing=25.0)
    evidence = gather_evidence(xyz, np.arange(len(xyz), dtype=float), holes, VariogramSettings())
    short = VariogramModel(0.5, [Structure("spherical", 0.5, (5.0, 5.0, 5.0))])
    long = VariogramModel(0.0, [Structure("spherical", 1.0, (500.0, 500.0, 500.0))])
    assert clustering_factor(evidence, short) == 1.0
    assert clustering_factor(evidence, long) > 8.0  # 16 holes as good as one
    squares = long.covariance(xyz[:, None, :] - xyz[None, :, :]) ** 2
    own = holes[:, None] == holes[None, :]
    assert clustering_factor(evidence, long) == pytest.approx(squares.sum() / squares[own].sum())


@pytest.mark.slow
def test_intervals_hold_the_truth_in_80_to_97_percent_of_200_fields():
    """The rates are printed: 90 % intervals of nugget, total sill and both ranges, 49 holes of 10 samples."""
    xyz, holes = drilled(holes=49, samples=10, spacing=25.0, seed=5)
    truth = {"nugget": 0.6, "total_sill": 2.0, "major_range_1_m": 50.0, "minor_range_1_m": 5.0}
    held = {name: [] for name in truth}
    for field in simulated(TRUTH, xyz, 200, seed=22):
        intervals = infer_variogram(xyz, field, holes).intervals
        for row in intervals.itertuples():
            if row.parameter in truth:
                held[row.parameter].append(row.low <= truth[row.parameter] <= row.high)
    rates = {name: float(np.mean(flags)) for name, flags in held.items()}
    print("coverage of the 90 % intervals on 200 fields:", rates)
    assert all(len(flags) >= 190 for flags in held.values())
    assert all(0.80 <= rate <= 0.97 for rate in rates.values()), rates
