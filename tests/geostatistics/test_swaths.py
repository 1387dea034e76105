"""Swaths against sums made by hand and by pandas."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from sms_resource.geostatistics.swaths import axis_vector, swath, swath_table


@pytest.fixture
def frames():
    generator = np.random.default_rng(7)
    samples = pd.DataFrame(generator.uniform(0, 100, (60, 3)), columns=["easting", "northing", "elevation"])
    samples["cu_pct"] = generator.lognormal(size=60)
    samples.loc[3, "cu_pct"] = np.nan
    samples["length_m"] = generator.uniform(0.5, 1.5, 60)
    samples["weight"] = generator.uniform(0.2, 2.0, 60)
    blocks = pd.DataFrame(generator.uniform(0, 100, (500, 3)), columns=["easting", "northing", "elevation"])
    blocks["cu_pct"] = generator.lognormal(size=500)
    blocks["cu_near"] = generator.lognormal(size=500)
    blocks["dry_tonnes"] = generator.uniform(1, 9, 500)
    return samples, blocks


def test_each_slice_is_what_pandas_says(frames):
    samples, blocks = frames
    table = swath(
        samples, blocks, "cu_pct", axis="northing", width_m=20.0, sample_weight="length_m",
        decluster_weight="weight", block_weight="dry_tonnes", block_columns={"nearest": "cu_near"},
    )  # fmt: skip
    assert table["from_m"].tolist() == [0, 20, 40, 60, 80]
    known = samples.dropna(subset=["cu_pct"])
    for row in table.itertuples():
        inside = known[(known["northing"] >= row.from_m) & (known["northing"] < row.to_m)]
        assert row.sample_count == len(inside)
        assert row.sample_mean == pytest.approx(np.average(inside["cu_pct"], weights=inside["length_m"]))
        both = inside["length_m"] * inside["weight"]
        assert row.declustered_mean == pytest.approx(np.average(inside["cu_pct"], weights=both))
        part = blocks[(blocks["northing"] >= row.from_m) & (blocks["northing"] < row.to_m)]
        assert row.block_count == len(part)
        assert row.block_weight == pytest.approx(part["dry_tonnes"].sum())
        assert row.block_mean == pytest.approx(np.average(part["cu_pct"], weights=part["dry_tonnes"]))
        assert row.nearest_mean == pytest.approx(np.average(part["cu_near"], weights=part["dry_tonnes"]))
        assert row.difference_pct == pytest.approx(100 * (row.block_mean / row.declustered_mean - 1))


def test_slices_together_hold_everything(frames):
    samples, blocks = frames
    for axis in ("easting", "northing", "elevation", "along", "across"):
        table = swath(samples, blocks, "cu_pct", axis=axis, azimuth=35.0, width_m=7.0)
        assert table["sample_count"].sum() == 59
        assert table["block_count"].sum() == 500
        mean = np.average(
            table["block_mean"].dropna(), weights=table["block_count"][table["block_mean"].notna()]
        )
        assert mean == pytest.approx(blocks["cu_pct"].mean())


def test_rotated_axes_are_the_plain_ones_at_zero_and_at_a_quarter(frames):
    samples, blocks = frames
    north = swath(samples, blocks, "cu_pct", axis="northing", width_m=25.0)
    along = swath(samples, blocks, "cu_pct", axis="along", azimuth=0.0, width_m=25.0)
    pd.testing.assert_frame_equal(north.drop(columns="axis"), along.drop(columns="axis"))
    np.testing.assert_allclose(axis_vector("along", 90.0), axis_vector("easting"), atol=1e-15)
    np.testing.assert_allclose(axis_vector("across", 90.0), -axis_vector("northing"), atol=1e-15)


def test_one_table_for_all_axes_and_metals(frames):
    samples, blocks = frames
    samples["zn_pct"], blocks["zn_pct"] = samples["cu_pct"] * 2, blocks["cu_pct"] * 2
    table = swath_table(
        samples, blocks, ["cu_pct", "zn_pct"], azimuth=20.0, width_m={"along": 30.0, "across": 30.0},
        companions={"cu_pct": {"nearest": "cu_near"}}, decluster_weights={"zn_pct": "weight"},
    )  # fmt: skip
    assert set(zip(table["axis"], table["column"])) == {
        (axis, metal) for axis in ("along", "across", "elevation") for metal in ("cu_pct", "zn_pct")
    }
    assert table.loc[table["column"] == "cu_pct", "nearest_mean"].notna().any()


def test_empty_slices_are_missing_not_zero(frames):
    samples, blocks = frames
    far = blocks.assign(easting=blocks["easting"] + 1000.0)
    table = swath(samples, far, "cu_pct", width_m=100.0)
    assert np.isnan(table["block_mean"].iloc[0])
    assert np.isnan(table["sample_mean"].iloc[-1])
    assert table["difference_pct"].isna().all()


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"axis": "depth"}, "axis"),
        ({"width_m": 0.0}, "width_m"),
        ({"edges": [3.0, 2.0]}, "edges"),
        ({"column": "pb_pct"}, "frame_samples has no column pb_pct"),
        ({"block_weight": "tonnes"}, "frame_blocks has no column tonnes"),
    ],
)
def test_bad_input_is_named(frames, change, words):
    arguments = {"column": "cu_pct", **change}
    with pytest.raises(ValueError, match=words):
        swath(*frames, arguments.pop("column"), **arguments)
