"""Reading a folder of results, and the tonnes that follow the cut-off."""

from __future__ import annotations

import json
import math
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sms_resource.viewer.errors import ResultsError
from sms_resource.viewer.results import read_results
from sms_resource.viewer.tonnage import Above, significant, tonnage_lines, tonnes_text
from tests.viewer.invented_results import CENTRE, seafloor_at, write_results


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("viewer") / "results"
    write_results(path)
    return path


def test_everything_is_read(folder: Path) -> None:
    found = read_results(folder)
    assert found.metals == ("cu_pct", "au_gpt") and (found.variable, found.cutoff) == ("cu_pct", 3.0)
    assert found.title == "Invented mound" and found.label == "Block-model tally"
    assert found.seafloor is not None and found.sticks is not None and found.outline is not None
    x, y = np.array([CENTRE[0] + 10.3]), np.array([CENTRE[1] - 7.7])
    assert found.seafloor.sample(x, y) == pytest.approx(seafloor_at(x, y), abs=1e-3)
    assert found.sticks["hole_id"].tolist()[0] == "001"


@pytest.mark.parametrize(
    ("variable", "column"), [("au", "au_gpt"), ("Cu", "cu_pct"), ("dry_tonnes", "dry_tonnes")]
)
def test_variable_by_element_or_column(folder: Path, variable: str, column: str) -> None:
    assert read_results(folder, variable=variable).variable == column
    assert read_results(folder, variable=variable, cutoff=1.25).cutoff == 1.25


@pytest.mark.parametrize("variable", ["zn", "domain", "nothing"])
def test_unknown_variable_names_the_known(folder: Path, variable: str) -> None:
    with pytest.raises(ResultsError, match="cu_pct, au_gpt"):
        read_results(folder, variable=variable)


@pytest.mark.parametrize("name", ["block_model.parquet", "layers/block_grid.json"])
def test_missing_file(tmp_path: Path, name: str) -> None:
    write_results(tmp_path / "r")
    (tmp_path / "r" / name).unlink()
    with pytest.raises(ResultsError, match=f"{name}: the file is missing"):
        read_results(tmp_path / "r")


@pytest.mark.parametrize("content", [b"", b"\x00\xffnot a file" * 30])
@pytest.mark.parametrize(
    "name",
    ["block_model.parquet", "layers/block_grid.json", "manifest.json", "layers/seafloor.tif", "layers/base.tif",
     "layers/holes.parquet", "layers/outline.gpkg"],
)  # fmt: skip
def test_broken_file(tmp_path: Path, name: str, content: bytes) -> None:
    write_results(tmp_path / "r")
    (tmp_path / "r" / name).write_bytes(content)
    with pytest.raises(ResultsError, match=f"{name}: the file is broken"):
        read_results(tmp_path / "r")


def test_layers_may_be_absent(tmp_path: Path) -> None:
    write_results(tmp_path / "r")
    for path in (tmp_path / "r" / "layers").iterdir():
        if path.name != "block_grid.json":
            path.unlink()
    found = read_results(tmp_path / "r")
    assert found.seafloor is None and found.sticks is None and found.outline is None


def test_no_block_and_no_column(tmp_path: Path) -> None:
    frame = write_results(tmp_path / "r")
    frame.iloc[:0].to_parquet(tmp_path / "r" / "block_model.parquet")
    with pytest.raises(ResultsError, match="holds no block"):
        read_results(tmp_path / "r")
    frame.drop(columns="dry_tonnes").to_parquet(tmp_path / "r" / "block_model.parquet")
    with pytest.raises(ResultsError, match="dry_tonnes is missing"):
        read_results(tmp_path / "r")
    frame.to_parquet(tmp_path / "r" / "block_model.parquet")
    (tmp_path / "r" / "layers" / "block_grid.json").write_text(json.dumps({"origin": [0, 0, 0]}))
    with pytest.raises(ResultsError, match="does not describe a block grid"):
        read_results(tmp_path / "r")


@pytest.mark.parametrize("cutoff", [0.0, 2.5, 3.0, 3.6501, 6.0, 99.0])
def test_tonnes_above_a_cutoff_are_those_of_pandas(folder: Path, cutoff: float) -> None:
    found = read_results(folder)
    share = found.numbers("kept_share")
    got = Above(found, "cu_pct", share).at(cutoff)
    frame = found.blocks.assign(weight=found.blocks["dry_tonnes"] * share)
    frame = frame[frame["cu_pct"] >= cutoff]
    assert got.dry_tonnes == pytest.approx(frame["weight"].sum(), rel=1e-12)
    if got.dry_tonnes == 0:
        assert math.isnan(got.grades["cu_pct"])
        return
    known = frame[frame["au_gpt"].notna()]
    assert got.grades["cu_pct"] == pytest.approx(np.average(frame["cu_pct"], weights=frame["weight"]))
    assert got.grades["au_gpt"] == pytest.approx(np.average(known["au_gpt"], weights=known["weight"]))
    assert got.wet_tonnes == pytest.approx(got.dry_tonnes * 3.4 / 3.2)


def test_blocks_without_a_value_are_never_above(folder: Path) -> None:
    found = read_results(folder)
    whole = Above(found, "au_gpt", np.ones(len(found.blocks))).at(-1e9).dry_tonnes
    missing = found.blocks.loc[found.blocks["au_gpt"].isna(), "dry_tonnes"].sum()
    assert whole == pytest.approx(found.blocks["dry_tonnes"].sum() - missing)


def test_numbers_are_rounded_as_reports_ask() -> None:
    """11 Mt and 8.2 % from 10 863 000 t and 8.23 %: the worked example of the project's reporting rules."""
    assert tonnes_text(10_863_000) == "11 Mt" and significant(8.23) == "8.2"
    assert [tonnes_text(v) for v in (0, 432.0, 43_210, 998_000, 1_249_000)] == [
        "0 t",
        "430 t",
        "43 kt",
        "1.0 Mt",
        "1.2 Mt",
    ]
    assert [significant(v) for v in (0.0456, 99.6, 1234.0, math.nan)] == ["0.046", "100", "1,200", "-"]


def test_lines_say_dry_and_wet(folder: Path) -> None:
    found = read_results(folder)
    lines = tonnage_lines(Above(found, "cu_pct", np.ones(len(found.blocks))).at(3.0), "cu_pct", 3.0)
    assert lines[0] == "Blocks with Cu at or above 3 %" and " dry " in lines[1] and " wet" in lines[1]
    assert lines[2].startswith("Cu ") and "Au" in lines[2] and "g/t" in lines[2]
    without = found.blocks.drop(columns="wet_tonnes")
    from dataclasses import replace

    alone = tonnage_lines(
        Above(replace(found, blocks=without), "cu_pct", np.ones(len(without))).at(3.0), "cu_pct", 3.0
    )
    assert "wet" not in alone[1] and isinstance(found.blocks, pd.DataFrame)
