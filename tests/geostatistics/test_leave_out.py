"""Leave one out: against kriging without the sample, and against published values."""

from __future__ import annotations

import shutil
import subprocess

import numpy as np
import pandas as pd
import pytest

from sms_resource.geostatistics import (
    Neighbourhood,
    Structure,
    VariogramModel,
    leave_one_out,
    ordinary_kriging,
)

from .kriging_twin import scene

MODELS = [
    VariogramModel(0.3, [Structure("spherical", 1.0, (40.0, 30.0, 6.0))], 60.0, 20.0, 35.0),
    VariogramModel(0.1, [Structure("exponential", 0.6, (25.0, 25.0, 5.0))]),
]
ROADS = [
    None,
    Neighbourhood((60.0, 50.0, 12.0), 12, 3, 3, 2, "octants"),
    [Neighbourhood(9.0), Neighbourhood(40.0)],
]


@pytest.mark.parametrize("leave", ["hole", "sample"])
@pytest.mark.parametrize("road", ROADS)
def test_each_sample_is_kriged_from_the_others(road, leave):
    points, values, holes, _ = scene(40, samples=70, holes=10)
    frame = leave_one_out(points, values, MODELS, road, hole_ids=holes, leave=leave)
    assert len(frame) == np.isfinite(values).sum()
    for row in frame.iloc[::7].itertuples():
        others = holes != holes[row.index] if leave == "hole" else np.arange(70) != row.index
        expected = ordinary_kriging(
            points[others],
            values[others, row.column],
            points[row.index][None],
            MODELS[row.column],
            road,
            hole_ids=holes[others],
        )
        assert row.true == values[row.index, row.column]
        if expected.status[0]:
            assert np.isnan(row.estimate) and np.isnan(row.standardised_error)
            continue
        assert row.estimate == pytest.approx(expected.estimate[0], rel=1e-8)
        assert row.variance == pytest.approx(expected.variance[0], rel=1e-8)
        assert row.error == pytest.approx(row.estimate - row.true)
        assert row.standardised_error == pytest.approx(row.error / np.sqrt(row.variance))
        assert row.sample_count == expected.sample_count[0]


def test_names_and_rows():
    points, values, holes, _ = scene(41, samples=30)
    table = pd.DataFrame(values, columns=["cu_pct", "au_gpt"])
    frame = leave_one_out(points, table, MODELS, ROADS[1], hole_ids=holes)
    assert set(frame["column"]) == {"cu_pct", "au_gpt"}
    # rows keep the numbers of the caller where coincident samples were merged
    twice = np.vstack([points[:1], points])
    merged = leave_one_out(
        twice, np.vstack([values[:1], values])[:, 0], MODELS[0], None, leave="sample", coincident="keep_first"
    )
    assert 1 not in merged["index"].to_list() and merged["index"].max() == 30


def test_threads_do_not_matter():
    points, values, holes, _ = scene(42, samples=200)
    one, two = (
        leave_one_out(points, values, MODELS, ROADS[1], hole_ids=holes, threads=threads) for threads in (1, 2)
    )
    pd.testing.assert_frame_equal(one, two, check_exact=True)


def test_bad_input():
    points, values, holes, _ = scene(43, samples=10, holes=2)
    with pytest.raises(ValueError, match="hole_ids is missing"):
        leave_one_out(points, values, MODELS)
    with pytest.raises(ValueError, match="leave is 'half'"):
        leave_one_out(points, values, MODELS, hole_ids=holes, leave="half")
    alone = leave_one_out(points, values[:, 0], MODELS[0], hole_ids=np.zeros(10))
    assert alone["estimate"].isna().all() and (alone["sample_count"] == 0).all()
    for road in ROADS:
        single = leave_one_out(points[:1], [1.0], MODELS[0], road, hole_ids=["a"])
        assert single["estimate"].isna().all()


@pytest.fixture(scope="module")
def jura(tmp_path_factory):
    """Goovaerts (1997), the 259 and 100 samples of the Swiss Jura, from R's gstat at test time."""
    if shutil.which("Rscript") is None:
        pytest.skip("Rscript is not on this machine")
    folder = tmp_path_factory.mktemp("jura")
    code = (
        "library(gstat); data(jura); "
        f'write.csv(jura.pred, "{folder}/pred.csv"); write.csv(jura.val, "{folder}/val.csv")'
    )
    if subprocess.run(["Rscript", "-e", code], capture_output=True).returncode:
        pytest.skip("R's gstat is not on this machine")
    return tuple(
        (np.column_stack([f["Xloc"], f["Yloc"], np.zeros(len(f))]), f["Co"].to_numpy())
        for f in (pd.read_csv(folder / "pred.csv"), pd.read_csv(folder / "val.csv"))
    )


def test_jura(jura):
    """Cobalt, nugget 3 and spherical 9 with range 1.1 km; values by independent code and gstat."""
    (places, cobalt), (targets, _) = jura
    model = VariogramModel(3.0, [Structure("spherical", 9.0, 1.1)])
    result = ordinary_kriging(places, cobalt, targets[:3], model)
    np.testing.assert_allclose(result.estimate, [5.1513521503, 8.8425153943, 10.7510755873], rtol=1e-9)
    np.testing.assert_allclose(result.variance, [4.8678230560, 5.4465294820, 7.5197933600], rtol=1e-9)
    left = leave_one_out(places, cobalt, model, leave="sample")
    # gstat's residual is true - estimate
    assert -left["error"].mean() == pytest.approx(-0.0461832603, abs=1e-9)
    assert (left["error"] ** 2).mean() == pytest.approx(4.4045298411, abs=1e-8)
    searched = leave_one_out(places, cobalt, model, Neighbourhood(100.0, 300, 1), leave="sample")
    np.testing.assert_allclose(searched["estimate"], left["estimate"], rtol=1e-9)
