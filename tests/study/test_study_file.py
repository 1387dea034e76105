"""The study file: every fault is one finding, at its row, with the way to mend it."""

from __future__ import annotations

import textwrap
from pathlib import Path

import pytest

from sms_resource import StudyError, load_study
from sms_resource.study import decisions
from sms_resource.study.codes import CODES
from sms_resource.study.reference import reference

BASE = """density.assigned_dry_tpm3 = { massive = 3.3 }
[study]
name = "Mound"
effective_date = 2026-01-31
crs = "EPSG:32702"

[data.collars]
file = "collars.csv"

[data.assays]
file = "assays.csv"

[data.bathymetry]
file = "floor.tif"
"""


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    for name in ("collars.csv", "assays.csv", "floor.tif"):
        (tmp_path / name).write_text("x\n")
    return tmp_path


def write(folder: Path, text: str) -> Path:
    path = folder / "study.toml"
    path.write_text(textwrap.dedent(text), encoding="utf-8")
    return path


def test_a_small_study_takes_careful_defaults(folder: Path) -> None:
    study = load_study(write(folder, BASE))
    assert study.config.composites.lost_core == "unknown"
    assert study.config.surface_samples.use == "none"
    assert study.config.classes.allow_measured is False
    assert study.config.assays.methods == ("laboratory",)
    assert study.config.prospects.judged is False
    assert not study.findings


FAULTS = [
    ("study-unknown-key", BASE + "[composites]\nlenght_m = 2\n", "composites.lenght_m", 16, "length_m"),
    ("study-unknown-key", BASE + "[composits]\n", "composits", 15, "composites"),
    ("study-unknown-key", BASE + "[data.collar]\nfile = 'a'\n", "data.collar", 15, "collars"),
    ("study-value", BASE + "[composites]\nlength_m = -1\n", "composites.length_m", 16, ""),
    ("study-value", BASE + "[composites]\nlength_m = 'one'\n", "composites.length_m", 16, ""),
    ("study-value", BASE + "[composites]\nlost_core = 'ignore'\n", "composites.lost_core", 16, ""),
    ("study-value", BASE + "[metals]\nestimate = ['xx']\n", "metals.estimate", 16, ""),
    ("study-value", BASE + "[metals]\nestimate = ['cu', 'cu']\n", "metals.estimate", 16, ""),
    ("study-value", BASE + "[blocks]\nsize_m = [5, 5]\n", "blocks.size_m", 16, ""),
    ("study-value", BASE + "[kriging]\ndiscretisation = [3, 3, 2.5]\n", "kriging.discretisation", 16, ""),
    ("study-missing-key", BASE.replace('name = "Mound"', ""), "study.name", 2, ""),
    ("study-missing-key", BASE.replace('file = "assays.csv"', ""), "data.assays.file", 10, ""),
    ("study-crs", BASE.replace("32702", "4326"), "study.crs", 5, "UTM"),
    ("study-crs", BASE.replace("EPSG:32702", "nowhere"), "study.crs", 5, ""),
    ("study-crs", BASE.replace("32702", "2225"), "study.crs", 5, "metres"),
    ("file-missing", BASE.replace("assays.csv", "assay.csv"), "data.assays", 10, "path"),
    (
        "study-domain",
        BASE.replace("massive", "masive") + "[domains]\ncodes = { M = 'massive' }\nsulphide = ['masive']\n",
        "domains.sulphide",
        17,
        "massive",
    ),
    ("study-domain", BASE + "[domains]\nunlogged = 'massive'\n", "domains.unlogged", 16, ""),
    ("study-domain", BASE + "[top_cuts.cuts.rock]\nau = 3\n", "top_cuts.cuts.rock", 15, ""),
    ("study-metal", BASE + "[top_cuts.cuts.massive]\npb = 3\n", "top_cuts.cuts.massive.pb", 16, ""),
    ("study-metal", BASE + "[cutoff]\nvariable = 'fe'\n", "cutoff.variable", 16, ""),
    ("study-metal", BASE + "[classes]\njudged_on = 'pb'\n", "classes.judged_on", 16, ""),
    (
        "study-value-missing",
        BASE + "[cutoff]\nvariable = 'equivalent'\n",
        "cutoff.variable",
        16,
        "value.metals",
    ),
    ("study-value-missing", BASE + "[top_cuts]\napply = 'given'\n", "top_cuts.apply", 16, ""),
    ("study-value-missing", BASE + "[prospects]\njudged = true\n", "prospects.judged", 16, ""),
    ("study-value", BASE + "[search]\nleast_samples = 40\n", "search.least_samples", 16, ""),
    (
        "study-unknown-key",
        BASE + "[reasons]\n'blocks.colour' = { why = 'x' }\n",
        "reasons.blocks.colour",
        16,
        "",
    ),
]


@pytest.mark.parametrize(("code", "text", "column", "row", "remedy"), FAULTS)
def test_each_fault_is_one_finding_at_its_row(
    folder: Path, code: str, text: str, column: str, row: int, remedy: str
) -> None:
    with pytest.raises(StudyError) as caught:
        load_study(write(folder, text))
    errors = caught.value.findings.errors
    assert [item.code for item in errors] == [code]
    assert errors[0].column == column
    assert errors[0].row == row
    assert errors[0].file == "study.toml"
    assert remedy in errors[0].remedy
    assert errors[0].code in CODES


def test_all_faults_are_listed_not_only_the_first(folder: Path) -> None:
    text = BASE + "[composites]\nlenght_m = 2\nlost_core = 'ignore'\n[kriging]\npower = -1\n"
    with pytest.raises(StudyError) as caught:
        load_study(write(folder, text))
    assert {item.column for item in caught.value.findings} == {
        "composites.lenght_m", "composites.lost_core", "kriging.power",
    }  # fmt: skip


def test_broken_toml_names_the_row(folder: Path) -> None:
    with pytest.raises(StudyError) as caught:
        load_study(write(folder, BASE + "[composites\n"))
    (finding,) = caught.value.findings
    assert (finding.code, finding.row) == ("study-syntax", 15)


def test_a_study_that_is_not_there_or_not_text(tmp_path: Path) -> None:
    with pytest.raises(StudyError) as caught:
        load_study(tmp_path / "none.toml")
    assert caught.value.findings[0].code == "study-missing"
    (tmp_path / "binary.toml").write_bytes(b"\xff\xfe\x00\x01")
    with pytest.raises(StudyError) as caught:
        load_study(tmp_path / "binary.toml")
    assert caught.value.findings[0].code == "study-encoding"


def test_files_outside_the_folder_are_allowed_and_named(folder: Path) -> None:
    inner = folder / "inner"
    inner.mkdir()
    text = BASE.replace('"collars.csv"', '"../collars.csv"')
    for name in ("assays.csv", "floor.tif"):
        (inner / name).write_text("x\n")
    study = load_study(write(inner, text))
    assert [item.code for item in study.findings] == ["file-outside"]


def test_decisions_tell_chosen_from_default_and_carry_reasons(folder: Path) -> None:
    text = (
        BASE
        + "[composites]\nlength_m = 2\n[reasons]\n'composites.length_m' = { why = 'thick runs', by = 'A' }\n"
    )
    rows = {row.key: row for row in decisions(load_study(write(folder, text)))}
    length = rows["composites.length_m"]
    assert (length.value, length.origin, length.reason, length.by) == (2.0, "chosen", "thick runs", "A")
    assert 2.0 not in length.alternatives
    assert rows["kriging.power"].origin == "default"
    assert not any(row.key.endswith(".file") for row in rows.values())


def test_overrides_are_checked_like_the_file(folder: Path) -> None:
    study = load_study(write(folder, BASE))
    assert study.with_overrides({"density.factor": 1.1}).config.density.factor == 1.1
    assert study.config.density.factor == 1.0
    with pytest.raises(StudyError) as caught:
        study.with_overrides({"density.faktor": 1.1})
    assert "factor" in caught.value.findings[0].remedy
    with pytest.raises(StudyError):
        study.with_overrides({"study.name.first": 1})


def test_the_reference_page_is_that_of_the_schema() -> None:
    page = Path(__file__).parents[2] / "docs" / "study-file.md"
    assert page.read_text(encoding="utf-8") == reference(), "run: python -m sms_resource.study.reference"
