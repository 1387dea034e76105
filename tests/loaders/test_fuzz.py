"""Whatever bytes a file holds, reading and checking it gives findings and never raises."""

from __future__ import annotations

import tempfile
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from sms_resource.loaders.bathymetry import load_grid
from sms_resource.loaders.boundaries import LayerSource, load_exclusions
from sms_resource.loaders.checks import check_data
from sms_resource.loaders.drilling import load_drilling
from sms_resource.loaders.guess import guess_study
from sms_resource.loaders.source import TableSource
from sms_resource.loaders.table import load_table
from sms_resource.loaders.tables import SCHEMAS, LoadedData
from tests.loaders.small_study import Study, tables
from tests.loaders.test_boundaries import SQUARE, save
from tests.loaders.test_grids import geotiff, netcdf

QUIET = [HealthCheck.too_slow, HealthCheck.function_scoped_fixture]
HEADER = b"hole_id,from_m,to_m,easting,northing,elevation,length_m,cu_pct,code,depth_m,azimuth,dip\n"
PIECES = st.sampled_from(
    [b",", b";", b"\n", b'"', b"\r", b"\t", b"1", b"-9999", b"<0.1", b"H1", b"\xff\xfe", b"\xe4", b"\x00", b"nan", b"1e400",
     b"2026-01-01", b".", b"1,5", b"#REF!", b" "]
)  # fmt: skip


def read_all(path: Path) -> None:
    for role in ("collars", "assays", "laboratory"):
        frame, found = load_table(TableSource(path), role, ("cu",))
        assert "source_row" in frame.columns and (len(frame) or found.has_errors)
    source = TableSource(path)
    drill, _ = load_drilling(source, source, source, source, source, source, elements=("cu",))
    check_data(LoadedData(drill=drill))


@given(data=st.binary(max_size=400))
@settings(max_examples=40, deadline=None, derandomize=True, suppress_health_check=QUIET)
def test_any_bytes_as_text(data: bytes) -> None:
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "t.csv"
        path.write_bytes(data)
        read_all(path)


@given(pieces=st.lists(PIECES, max_size=60))
@settings(max_examples=40, deadline=None, derandomize=True, suppress_health_check=QUIET)
def test_any_table_under_a_true_header(pieces: list[bytes]) -> None:
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "t.csv"
        path.write_bytes(HEADER + b"".join(pieces))
        read_all(path)


@given(role=st.sampled_from(["collars", "surveys", "runs", "assays", "densities", "laboratory", "surface_samples"]),
       column=st.integers(0, 11), row=st.integers(0, 3), cell=st.text(max_size=8))  # fmt: skip
@settings(max_examples=25, deadline=None, derandomize=True, suppress_health_check=QUIET)
def test_any_text_in_any_cell(role: str, column: int, row: int, cell: str) -> None:
    with tempfile.TemporaryDirectory() as folder:
        study = Study(Path(folder), rows=tables())
        names = list(study.rows[role][row])
        study.rows[role][row][names[column % len(names)]] = (
            cell.replace("\x00", "").encode("utf-8", "ignore").decode()
        )
        study.load()


@pytest.mark.parametrize("kind", ["workbook", "parquet", "layer", "grid", "netcdf"])
def test_files_with_bytes_changed(tmp_path: Path, kind: str) -> None:
    frame = pd.DataFrame(
        {"hole_id": ["H1", "H2"], "from_m": [0.0, 1.0], "to_m": [1.0, 2.0], "code": ["a", "b"]}
    )
    path = (
        tmp_path
        / {
            "workbook": "t.xlsx",
            "parquet": "t.parquet",
            "layer": "t.gpkg",
            "grid": "t.tif",
            "netcdf": "t.nc",
        }[kind]
    )
    if kind == "workbook":
        frame.to_excel(path, index=False)
    elif kind == "parquet":
        frame.to_parquet(path)
    elif kind == "layer":
        save(path, [SQUARE, SQUARE], status=["tenure", "cable"])
    elif kind == "grid":
        geotiff(path)
    else:
        netcdf(path)
    whole = np.frombuffer(path.read_bytes(), dtype=np.uint8)
    rng = np.random.default_rng(5)
    for turn in range(25):
        data = whole.copy()
        at = rng.integers(0, len(data), 12)
        data[at] = rng.integers(0, 256, 12)
        path.write_bytes(data.tobytes()[: len(data) if turn % 3 else int(rng.integers(1, len(data)))])
        if kind in ("workbook", "parquet"):
            load_table(TableSource(path), "lithology")
        elif kind == "layer":
            load_exclusions(LayerSource(path, crs="EPSG:32702"))
        else:
            load_grid(path, crs="EPSG:32702", declared_crs="EPSG:32702")
        guess_study([path])


@pytest.mark.parametrize("role", list(SCHEMAS))
def test_a_table_of_blanks(tmp_path: Path, role: str) -> None:
    names = [column.name for column in SCHEMAS[role]]
    path = tmp_path / "t.csv"
    path.write_text(",".join(names) + "\n" + ",".join(["x"] + [""] * (len(names) - 1)) + "\n")
    frame, _ = load_table(TableSource(path), role, ("cu",))
    assert len(frame) == 1


def test_data_without_a_row_can_be_checked() -> None:
    assert {item.severity for item in check_data(LoadedData())} <= {"warning", "note"}
