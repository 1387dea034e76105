"""Cell declustering against the Walker Lake figures and by hand."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sms_resource.samples.declustering import cell_declustering
from tests.geostatistics.open_data import open_data


def walker():
    table = open_data("walker")
    return np.column_stack([table["X"], table["Y"], np.zeros(len(table))]).astype(float), table[
        "V"
    ].to_numpy()


@pytest.mark.parametrize(
    ("size", "expected"), [((20.0, 23.0, 1.0), 287.487404), ((10.0, 10.0, 1.0), 367.055079)]
)
def test_walker_lake(size, expected):
    """Isaaks & Srivastava (1989), chapter 10 (book: 288 for 20 x 23 m), from R's copy of the data."""
    xyz, v = walker()
    found = cell_declustering(xyz, v, sizes=[size], origins=1, origin=(0.0, 0.0, 0.0))
    assert found.plain_mean == pytest.approx(435.298723, abs=1e-6)
    assert found.mean == pytest.approx(expected, abs=1e-6)
    assert found.cell_size == size


def test_walker_lake_scan_finds_the_minimum_near_the_spacing():
    """The exhaustive mean is 277.98; rich places were drilled more, so the least mean of the scan is taken."""
    xyz, v = walker()
    found = cell_declustering(xyz, v)
    assert found.choice == "least mean"
    assert found.mean == found.scan["mean"].min()
    assert 15.0 < found.cell_size[0] < 35.0
    assert 277.978584 < found.mean < 300.0
    assert len(found.scan) == 20 and found.scan["chosen"].sum() == 1


def test_two_clusters_by_hand():
    """Three samples in one cell and one in another: a sixth each, and a half."""
    xyz = np.array([[1, 1, 0], [2, 1, 0], [1, 2, 0], [15, 1, 0.0]])
    found = cell_declustering(xyz, [9.0, 8.0, 10.0, 1.0], sizes=[10.0], origins=1, origin=(0, 0, 0))
    np.testing.assert_allclose(found.weights, [4 / 6, 4 / 6, 4 / 6, 2.0])
    assert found.mean == pytest.approx(5.0)
    assert found.scan["cells"].tolist() == [2.0]


def test_direction_takes_the_other_end_and_flat_cells_are_possible():
    generator = np.random.default_rng(0)
    xyz = generator.uniform(0, 100, (80, 3)) * (1, 1, 0.1)
    values = generator.lognormal(size=80)
    low = cell_declustering(xyz, values, anisotropy=(1.0, 1.0, 0.1))
    high = cell_declustering(xyz, values, anisotropy=(1.0, 1.0, 0.1), direction="max")
    assert low.mean == low.scan["mean"].min() < high.mean == high.scan["mean"].max()
    assert low.cell_size[2] == pytest.approx(0.1 * low.cell_size[0])
    columns = cell_declustering(xyz, values, sizes=[25.0], anisotropy=(1.0, 1.0, np.inf))
    assert columns.cell_size[2] == np.inf


@settings(max_examples=25, deadline=None)
@given(seed=st.integers(0, 1000), shift=st.floats(-1e7, 1e7), size=st.floats(1.0, 60.0))
def test_translation_permutation_and_sum(seed, shift, size):
    generator = np.random.default_rng(seed)
    xyz = generator.uniform(0.0, 50.0, (30, 3))
    values = generator.normal(size=30)
    order = generator.permutation(30)
    base = cell_declustering(xyz, values, sizes=[size])
    other = cell_declustering((xyz + shift)[order], values[order], sizes=[size])
    assert base.weights.sum() == pytest.approx(30.0)
    assert (base.weights > 0).all()
    np.testing.assert_allclose(np.sort(other.weights), np.sort(base.weights), rtol=1e-5, atol=1e-5)


def test_great_and_tiny_cells_leave_the_mean_as_it_is():
    generator = np.random.default_rng(1)
    xyz, values = generator.uniform(0, 50, (40, 3)), generator.normal(size=40)
    for size in (1e-3, 1e6):
        found = cell_declustering(xyz, values, sizes=[size])
        assert found.mean == pytest.approx(values.mean())


def test_missing_values_have_no_weight_and_odd_samples_are_no_crash():
    found = cell_declustering([[0, 0, 0], [1, 1, 1], [np.nan, 0, 0]], [1.0, 3.0, np.nan])
    assert np.isnan(found.weights[2])
    assert found.weights[:2].sum() == pytest.approx(2.0)
    assert cell_declustering([[5.0, 5.0, 5.0]], [2.0]).mean == 2.0
    assert cell_declustering([[5.0, 5.0, 5.0]] * 3, [2.0, 2.0, 2.0]).mean == pytest.approx(2.0)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"values": [np.nan, np.nan]}, "no sample has a value"),
        ({"values": [1.0]}, "coordinates"),
        ({"coordinates": [[0, 0, 0], [np.nan, 0, 0]]}, "finite"),
        ({"sizes": [0.0]}, "sizes"),
        ({"direction": "mean"}, "direction"),
        ({"origins": 0}, "origins"),
    ],
)
def test_bad_input_is_named(change, words):
    arguments = {"coordinates": [[0, 0, 0], [1, 0, 0]], "values": [1.0, 2.0], **change}
    with pytest.raises(ValueError, match=words):
        cell_declustering(arguments.pop("coordinates"), arguments.pop("values"), **arguments)
