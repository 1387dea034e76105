"""Change of support against closed forms, exact relations and the exhaustive Walker Lake grid."""

from __future__ import annotations

import math

import numpy as np
import pytest

from sms_resource.geostatistics.support import (
    change_of_support,
    gaussian_support_coefficient,
    lognormal_support,
)
from sms_resource.geostatistics.transforms import NormalScores

from .open_data import open_data


def lognormal_sample(count, mean=5.0, cv=1.2):
    from scipy.special import ndtri

    sigma = math.sqrt(math.log1p(cv**2))
    return mean * np.exp(sigma * ndtri((np.arange(count) + 0.5) / count) - 0.5 * sigma**2)


def test_lognormal_values():
    """Mean 5, CV 1.2, f .4: values computed by independent code (closed forms of Journel & Huijbregts 1978)."""
    found = lognormal_support(5.0, 1.2, 0.4, [5.0])
    assert found.change_of_support == pytest.approx(0.7141200733, abs=1e-9)
    expected = {
        "points": (0.318382, 3.408090),
        "discrete_gaussian": (0.367973, 3.160137),
        "affine": (0.318382, 2.740563),
    }
    for method, (proportion, metal) in expected.items():
        row = found.curve(method).iloc[0]
        assert row["proportion"] == pytest.approx(proportion, abs=5e-7)
        assert row["metal"] == pytest.approx(metal, abs=5e-7)


def test_steps_come_to_the_closed_form_as_samples_grow():
    exact = lognormal_support(5.0, 1.2, 0.4, [2.0, 5.0, 9.0])
    errors = []
    for count in (300, 3000, 30_000):
        found = change_of_support(lognormal_sample(count), 0.4, [2.0, 5.0, 9.0])
        one, two = found.curve("discrete_gaussian"), exact.curve("discrete_gaussian")
        errors.append(
            max(
                np.abs(one["proportion"] - two["proportion"]).max(), np.abs(one["metal"] - two["metal"]).max()
            )
        )
    assert errors[2] < 0.005
    assert errors[0] > errors[1] > errors[2]


@pytest.mark.parametrize("factor", [0.05, 0.3, 0.7, 0.95])
@pytest.mark.parametrize("kind", ["lognormal", "few", "two"])
def test_blocks_keep_the_mean_and_have_the_variance_asked_for(factor, kind):
    """By numbers that the method does not use: the integral of the curves over the cut-off."""
    values = {
        "lognormal": lognormal_sample(400, cv=0.8),
        "few": np.array([0.2, 0.9, 1.0, 1.4, 3.0, 7.5]),
        "two": np.array([0.0, 0.0, 0.0, 4.0]),
    }[kind]
    cutoffs = np.linspace(0.0, values.max() * 1.0001, 1501)
    found = change_of_support(values, factor, cutoffs)
    for method in ("discrete_gaussian", "affine"):
        proportion = found.curve(method)["proportion"].to_numpy()
        metal = found.curve(method)["metal"].to_numpy()
        assert metal[0] == pytest.approx(values.mean(), rel=1e-6)
        step = cutoffs[1]
        middle = 0.5 * (proportion[1:] + proportion[:-1])
        mean = middle.sum() * step  # E Z = integral of P(Z > z)
        square = 2.0 * (middle * 0.5 * (cutoffs[1:] + cutoffs[:-1])).sum() * step
        below = values.mean() - math.sqrt(factor) * (values.mean() - values.min())
        if method == "affine" and below < 0.0:
            continue
        assert mean == pytest.approx(values.mean(), rel=2e-3)
        assert square - mean**2 == pytest.approx(factor * values.var(), rel=0.02)


def test_limits_of_the_factor():
    values = lognormal_sample(200)
    points = change_of_support(values, 1.0, [1.0, 5.0, 20.0])
    for method in ("discrete_gaussian", "affine"):
        np.testing.assert_allclose(points.curve(method)["metal"], points.curve("points")["metal"])
    alike = change_of_support(values, 0.0, [values.mean() - 0.01, values.mean() + 0.01])
    assert alike.curve("discrete_gaussian")["proportion"].tolist() == [1.0, 0.0]
    assert alike.change_of_support == pytest.approx(0.0, abs=1e-9)
    assert change_of_support([2.0, 2.0], 0.5, [1.0, 3.0]).curve("discrete_gaussian")["metal"].tolist() == [
        2.0,
        0.0,
    ]


def test_curves_fall_and_points_are_counts():
    values = lognormal_sample(100)
    weights = np.linspace(0.5, 2.0, 100)
    cutoffs = np.linspace(0.0, 30.0, 40)
    found = change_of_support(values, 0.5, cutoffs, weights=weights)
    for _, curve in found.curves.groupby("method"):
        assert (np.diff(curve["proportion"]) <= 1e-12).all()
        assert (np.diff(curve["metal"]) <= 1e-12).all()
        grades = curve["grade"].dropna()
        assert (grades >= curve["cutoff"][grades.index] - 1e-9).all()
    points = found.curve("points")
    for row in points.itertuples():
        above = values >= row.cutoff
        assert row.proportion == pytest.approx(weights[above].sum() / weights.sum(), abs=1e-12)


def test_coefficient_solves_the_hermite_equation():
    scores = NormalScores.fit(lognormal_sample(2000, cv=0.9))
    r = gaussian_support_coefficient(scores, 0.35)
    squares = scores.hermite(200)[1:] ** 2
    assert (squares @ r ** (2.0 * np.arange(1, 201))) / scores.variance == pytest.approx(0.35, abs=1e-6)


def test_walker_lake_blocks_are_foretold_better_than_points_say():
    """Exhaustive Walker Lake V (78 000 nodes, Isaaks & Srivastava 1989): real 10 x 10 blocks against the curves."""
    grid = open_data("walker.exh")
    values = grid["V"].to_numpy()
    x, y = (grid["X"].to_numpy() - 1) // 10, (grid["Y"].to_numpy() - 1) // 10
    blocks = grid.groupby([x, y])["V"].mean().to_numpy()
    assert len(blocks) == 780
    within, between = values.var() - blocks.var(), blocks.var()
    assert blocks.var() + within == pytest.approx(62_422.432828, abs=1e-4)  # Krige's relation
    assert {round(between, 3), round(within, 3)} == {46_693.824, 15_728.609}
    cutoffs = [200.0, 400.0, 600.0]
    found = change_of_support(values, between / values.var(), cutoffs)
    real = np.array([(blocks >= cutoff).mean() for cutoff in cutoffs])
    metal = np.array([blocks[blocks >= cutoff].sum() / len(blocks) for cutoff in cutoffs])
    gaussian, points = found.curve("discrete_gaussian"), found.curve("points")
    assert np.abs(gaussian["proportion"] - real).max() < 0.03
    assert np.abs(gaussian["metal"] - metal).max() < 0.03 * values.mean()
    assert np.abs(gaussian["metal"] - metal).sum() < np.abs(points["metal"] - metal).sum()


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"variance_factor": 1.2}, "variance_factor"),
        ({"variance_factor": -0.1}, "variance_factor"),
        ({"values": [np.nan]}, "none is left"),
        ({"methods": ("indirect",)}, "indirect"),
        ({"weights": [-1.0, 1.0]}, "weights"),
    ],
)
def test_bad_input_is_named(change, words):
    arguments = {"values": [1.0, 2.0], "variance_factor": 0.5, "cutoffs": [1.0], **change}
    with pytest.raises(ValueError, match=words):
        change_of_support(
            arguments.pop("values"), arguments.pop("variance_factor"), arguments.pop("cutoffs"), **arguments
        )
