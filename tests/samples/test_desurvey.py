"""Minimum curvature against published and independent values."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from sms_resource.samples.desurvey import hole_paths, minimum_curvature
from tests.samples.holes import codes, collars


def survey(rows: list[tuple[str, float, float, float]]) -> pd.DataFrame:
    frame = pd.DataFrame(rows, columns=["hole_id", "depth_m", "azimuth", "dip"])
    frame["source_row"] = np.arange(len(frame)) + 2
    return frame


def north_east_down(depth: list[float], inclination: list[float], azimuth: list[float]) -> np.ndarray:
    """Offset of the last station in the order of the drilling texts."""
    east, north, up = minimum_curvature(depth, azimuth, np.array(inclination) - 90.0)[-1]
    return np.array([north, east, -up])


def test_published_example() -> None:
    # SPE survey example (from memory; checked by independent code): 3500 ft at 15/20 to 3600 at 25/45
    found = north_east_down([3500, 3600], [15, 25], [20, 45])
    assert found == pytest.approx([27.2183286, 19.4507737, 94.0123432], abs=1e-6)


def test_quarter_circle() -> None:
    # exact geometry: radius 50 m, vertical to horizontal toward azimuth 30
    found = north_east_down([0, 25 * np.pi], [0, 90], [30, 30])
    assert found == pytest.approx([50 * np.cos(np.radians(30)), 25, 50], abs=1e-9)


MD, INC, AZI = [0, 10, 20, 30, 40, 50], [3, 4, 6, 9, 14, 20], [350, 358, 5, 12, 20, 27]


def test_six_stations() -> None:
    # independent code, equal to wellpathpy
    assert north_east_down(MD, INC, AZI) == pytest.approx([7.327812612, 1.952021127, 49.212734590], abs=1e-8)


def test_equals_wellpathpy_at_every_station() -> None:
    wellpathpy = pytest.importorskip("wellpathpy", reason="wellpathpy is not installed")
    other = wellpathpy.deviation(MD, INC, AZI).minimum_curvature()
    mine = minimum_curvature(MD, AZI, np.array(INC) - 90.0)
    assert mine[:, 1] == pytest.approx(other.northing, abs=1e-9)
    assert mine[:, 0] == pytest.approx(other.easting, abs=1e-9)
    assert -mine[:, 2] == pytest.approx(other.depth, abs=1e-9)


def test_positions_between_stations_equal_wellpathpy_resampled() -> None:
    wellpathpy = pytest.importorskip("wellpathpy", reason="wellpathpy is not installed")
    depths = [0.0, 3.3, 10.0, 17.5, 26.1, 44.0, 50.0]
    other = wellpathpy.deviation(MD, INC, AZI).minimum_curvature().resample(depths)
    rows = [("A", md, azi, inc - 90.0) for md, inc, azi in zip(MD, INC, AZI)]
    found = hole_paths(collars("A", length=50.0), survey(rows)).positions(["A"] * len(depths), depths)
    assert found[:, 0] - 1000.0 == pytest.approx(other.easting, abs=1e-6)
    assert found[:, 1] - 500.0 == pytest.approx(other.northing, abs=1e-6)
    assert -1600.0 - found[:, 2] == pytest.approx(other.depth, abs=1e-6)


def test_azimuth_of_a_vertical_station_does_not_matter() -> None:
    found = [
        minimum_curvature([0, 10, 20], [azimuth, 40, 50], [-90, -80, -70])[-1] for azimuth in (0, 123, 300)
    ]
    assert found[0] == pytest.approx(found[1], abs=1e-12)
    assert found[0] == pytest.approx(found[2], abs=1e-12)


def test_positions_meet_the_stations_and_never_jump() -> None:
    rows = [("A", md, azi, inc - 90.0) for md, inc, azi in zip(MD, INC, AZI)]
    path = hole_paths(collars("A", "B", length=60.0), survey(rows))
    depth = np.linspace(0, 60, 6001)
    xyz = path.positions(np.repeat("A", len(depth)), depth)
    assert np.linalg.norm(np.diff(xyz, axis=0), axis=1) == pytest.approx(0.01, abs=1e-7)
    stations = minimum_curvature(MD, AZI, np.array(INC) - 90.0)
    assert xyz[::1000][:6] - xyz[0] == pytest.approx(stations, abs=1e-9)


def test_first_station_below_the_collar_keeps_its_direction_above() -> None:
    path = hole_paths(collars("A"), survey([("A", 10.0, 90.0, -60.0)]))
    found = path.positions(["A"], [10.0])[0]
    assert found == pytest.approx(
        [1000 + 10 * np.cos(np.radians(60)), 500, -1600 - 10 * np.sin(np.radians(60))]
    )


def test_collar_direction_is_used_without_surveys_and_said() -> None:
    frame = collars("A", "B")
    frame.loc[0, ["azimuth", "dip"]] = [0.0, -45.0]
    path = hole_paths(frame)
    assert path.positions(["A"], [10.0])[0] == pytest.approx(
        [1000, 500 + 10 * np.sqrt(0.5), -1600 - 10 * np.sqrt(0.5)]
    )
    assert path.table["direction"].tolist() == ["collar", "assumed vertical"]
    assert path.assumed_vertical == ("B",)
    assert codes(path.findings) == ["survey-assumed-vertical"]
    assert path.table["possible_lateral_m"].iloc[1] == pytest.approx(20 * np.sin(np.radians(10)))


def test_unknown_hole_has_no_position() -> None:
    assert np.isnan(hole_paths(collars("A")).positions(["Z", "A"], [1.0, np.nan])).all()


@pytest.mark.parametrize(
    ("row", "code"),
    [
        (("A", 0.0, 10.0, 80.0), "survey-dip-sign"),
        (("A", 0.0, 10.0, -95.0), "survey-angle"),
        (("A", -1.0, 10.0, -85.0), "survey-angle"),
        (("A", 0.0, np.nan, -80.0), "survey-angle"),
        (("A", 0.0, 700.0, -80.0), "survey-angle"),
        (("Z", 0.0, 10.0, -85.0), "assay-without-hole"),
    ],
)
def test_wrong_stations_are_errors_with_their_row(row: tuple, code: str) -> None:
    findings = hole_paths(collars("A"), survey([("A", 5.0, 1.0, -88.0), row])).findings
    assert (code, 3) in [(item.code, item.row) for item in findings.errors]


def test_two_stations_at_one_depth_are_an_error() -> None:
    findings = hole_paths(collars("A"), survey([("A", 5.0, 1.0, -88.0), ("A", 5.0, 2.0, -87.0)])).findings
    assert codes(findings.errors) == ["survey-double"]


def test_a_sharp_bend_is_a_warning() -> None:
    findings = hole_paths(collars("A"), survey([("A", 0.0, 0.0, -88.0), ("A", 10.0, 0.0, -30.0)])).findings
    assert "survey-dogleg" in codes(findings)


def test_depths_must_ascend() -> None:
    with pytest.raises(ValueError, match="ascend"):
        minimum_curvature([0, 10, 10], [0, 0, 0], [-90, -90, -90])


def test_trace_runs_from_collar_to_end() -> None:
    trace = hole_paths(collars("A", length=3.2)).trace("A", 1.0)
    assert trace["depth_m"].tolist() == [0.0, 1.0, 2.0, 3.0, 3.2]
    with pytest.raises(ValueError, match="no collar"):
        hole_paths(collars("A")).trace("Q")
