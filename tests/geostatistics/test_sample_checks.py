"""Samples that leave an estimate without a ground are named."""

from __future__ import annotations

import numpy as np
import pytest

from sms_resource.geostatistics import sample_findings
from sms_resource.geostatistics.codes import CODES

from .kriging_twin import scene


def codes(findings):
    assert {item.code for item in findings} <= set(CODES)
    return [item.code for item in findings]


def test_sound_samples_have_no_findings():
    points, values, _, _ = scene(60)
    assert codes(sample_findings(points, values)) == []


def test_samples_without_position():
    points, values, _, _ = scene(60)
    points[7, 2] = np.nan
    found = sample_findings(points, values)
    assert codes(found) == ["samples-not-located"]
    assert found[0].severity == "error" and found[0].row == 8


def test_coincident_samples_with_different_grades():
    points, values, _, _ = scene(60, missing=0.0)
    points[9], points[20] = points[4], points[5]
    values[9] = [99.0, values[4, 1]]
    values[20] = values[5]  # the same twice is no contradiction
    found = sample_findings(points, values, names=["cu_pct", "au_gpt"])
    assert codes(found) == ["samples-coincident"]
    assert "samples 5 and 10" in found[0].message and "cu_pct" in found[0].message
    assert "au_gpt" not in found[0].message


def test_one_sample_and_equal_values():
    points, values, _, _ = scene(60, missing=0.0)
    values[:, 0] = 2.5
    values[1:, 1] = np.nan
    found = sample_findings(points, values, names=["cu_pct", "au_gpt"])
    assert codes(found) == ["samples-equal", "samples-single"]
    assert "2.5" in found[0].message and found[1].column == "au_gpt"


@pytest.mark.parametrize("azimuth", [0.0, 33.0, 90.0])
def test_holes_in_one_line(azimuth):
    along = np.repeat(np.arange(8.0) * 20.0, 10)
    depth = np.tile(np.arange(10.0), 8)
    angle = np.radians(azimuth)
    points = np.column_stack([5e5 + along * np.sin(angle), 1e7 + along * np.cos(angle), -1600.0 - depth])
    assert codes(sample_findings(points, np.arange(80.0))) == ["samples-in-one-line"]
    points[:20, :2] += [15.0 * np.cos(angle), -15.0 * np.sin(angle)]
    assert codes(sample_findings(points, np.arange(80.0))) == []


def test_shapes():
    with pytest.raises(ValueError, match="values has 2 rows; wanted 3"):
        sample_findings(np.zeros((3, 3)), [1.0, 2.0])
