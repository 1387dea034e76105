"""What people met who used the tool on their own invented data, and must not meet again."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sms_resource import load_study, run_study
from sms_resource.reporting.figures_samples import bars_of
from sms_resource.study import StudyError
from sms_resource.workflow import check_study, new_study
from tests.end_to_end.small_study import SmallStudy


@pytest.fixture(scope="module")
def bare(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Results of a study without surface samples and without laboratory inserts."""
    small = SmallStudy(tmp_path_factory.mktemp("bare"))
    for role in ("surface_samples", "laboratory"):
        del small.rows[role]
        del small.toml["data"][role]
    small.toml["variograms"] = {"measure": "normal_scores"}
    out = small.folder / "results"
    run_study(load_study(small.write()), out=out)
    return out


def test_a_table_that_was_not_given_lacks_no_column(bare: Path) -> None:
    """No finding speaks of surface samples where there are none."""
    findings = json.loads((bare / "findings.json").read_text())
    assert not [f for f in findings if "surface sample" in f["message"].lower()]


def test_checklist_claims_nothing_of_what_is_not_there(bare: Path) -> None:
    """Core is not called kept out of the estimate, and missing laboratory inserts are no answer."""
    text = (bare / "checklist.md").read_text()
    assert "kept out of the estimate" not in text
    assert "nan" not in text.split() and "xnan" not in text and "()" not in text
    line = next(line for line in text.splitlines() if line.startswith("| Quality of assay data"))
    assert "for the Competent Person" in line
    assert "no references for Cu, Zn, Au, Ag" in line


def test_variogram_dots_and_line_are_in_one_measure(bare: Path) -> None:
    """Where normal scores were fitted, the line beside their dots is the model of normal scores."""
    (table,) = (bare / "figures" / "data").glob("variograms_massive*.csv")
    drawn = pd.read_csv(table)
    records = json.loads((bare / "variograms.json").read_text())
    for record in records:
        if record["domain"] != "massive" or record["measure"] != "normal_scores":
            continue
        fitted = record["fitted_model"]
        sill = fitted["nugget"] + sum(s["sill"] for s in fitted["structures"])
        line = drawn[drawn["metal"] == record["metal"]]["model"].max()
        assert 0.0 < line <= 1.001 * sill


def test_a_logged_code_without_a_domain_is_named_before_the_run(tmp_path: Path) -> None:
    """One mistyped code would turn sulphide into waste: check says so, with file and row."""
    small = SmallStudy(tmp_path)
    small.rows["lithology"][1]["code"] = "MX"
    findings = check_study(load_study(small.write()))
    (said,) = [f for f in findings if f.code == "lithology-unmapped"]
    assert (said.severity, said.file, said.row, said.column) == ("warning", "lithology.csv", 3, "code")
    assert "MX" in said.message.upper()


@pytest.mark.parametrize("level", [5.0, 0.0, 1e-4])
def test_histogram_of_one_value_but_for_rounding(level: float) -> None:
    """Constant grades, joined into composites, differ in their last digit; that is still one bar."""
    values = level * (1.0 + np.array([0.0, 2.2e-16, -2.2e-16, 0.0, 4.4e-16] * 17))
    counts, edges = bars_of(values)
    assert counts.sum() == values.size and np.count_nonzero(counts) == 1
    assert edges[0] < values.min() and edges[-1] > values.max()


def test_codes_without_a_log_are_named_before_the_run(tmp_path: Path) -> None:
    """Codes that are mapped while no lithology is given would stop the run at a later stage."""
    small = SmallStudy(tmp_path)
    del small.rows["lithology"]
    del small.toml["data"]["lithology"]
    with pytest.raises(StudyError) as caught:
        load_study(small.write())
    (said,) = [f for f in caught.value.findings if f.severity == "error"]
    assert (said.code, said.column) == ("study-value-missing", "domains.codes")


def _centimetres(folder: Path) -> SmallStudy:
    """Run depths in centimetres under names of their own, densities in kg/m3."""
    small = SmallStudy(folder)
    for row in small.rows["runs"]:
        row["Top_cm"], row["Bottom_cm"] = 100 * row.pop("from_m"), 100 * row.pop("to_m")
        row["Rec (cm)"] = round(100 * row.pop("recovered_length_m"))
    for row in small.rows["densities"]:
        row["Dry_kgm3"] = round(1000 * row.pop("dry_density_tpm3"))
    small.toml["data"]["runs"]["columns"] = {
        "from_m": "Top_cm",
        "to_m": "Bottom_cm",
        "recovered_length_m": "Rec (cm)",
    }
    small.toml["data"]["densities"]["columns"] = {"dry_density_tpm3": "Dry_kgm3"}
    return small


def test_a_header_that_says_centimetres_is_never_read_as_metres(tmp_path: Path) -> None:
    """Each column that states another unit is an error that says what to write."""
    findings = check_study(load_study(_centimetres(tmp_path).write()))
    said = {f.column: f for f in findings if f.code == "unit-differs"}
    assert set(said) == {"Top_cm", "Bottom_cm", "Rec (cm)", "Dry_kgm3"}
    assert said["Top_cm"].file == "runs.csv" and 'from_m = "cm"' in said["Top_cm"].remedy
    assert all(f.severity == "error" for f in said.values())


def test_lengths_and_densities_in_other_units_are_turned(tmp_path: Path) -> None:
    """With the units stated, the tables are those of the study in metres and tonnes."""
    from sms_resource.loaders.source import TableSource
    from sms_resource.loaders.table import load_table

    small = _centimetres(tmp_path)
    small.write()
    columns = small.toml["data"]["runs"]["columns"]
    units = {"from_m": "cm", "to_m": "cm", "recovered_length_m": "cm"}
    runs, findings = load_table(TableSource(path=tmp_path / "runs.csv", columns=columns, units=units), "runs")
    assert not findings.has_errors
    assert runs["to_m"].head(3).tolist() == pytest.approx([1.0, 2.0, 3.0])
    assert runs["recovered_length_m"].between(0.5, 1.0).all()
    source = TableSource(
        path=tmp_path / "densities.csv",
        columns=small.toml["data"]["densities"]["columns"],
        units={"dry_density_tpm3": "kg/m3"},
    )
    densities, findings = load_table(source, "densities")
    assert not findings.has_errors
    assert densities["dry_density_tpm3"].between(2.0, 3.5).all()
    _, wrong = load_table(
        TableSource(path=tmp_path / "runs.csv", columns=columns, units={"to_m": "yd"}), "runs"
    )
    assert [f.code for f in wrong if f.severity == "error"].count("unit-unknown") == 1


def test_new_guesses_the_unit_of_lengths_and_names_every_file_it_leaves(tmp_path: Path) -> None:
    """Centimetres become a line under units; a file that fits no role is a question, not a silent comment."""
    small = _centimetres(tmp_path)
    small.write()
    (tmp_path / "shipping.csv").write_text("crate,colour\n1,red\n2,blue\n3,red\n")
    names = ("collars.csv", "runs.csv", "assays.csv", "bathymetry.tif", "shipping.csv")
    made = new_study([tmp_path / name for name in names], tmp_path / "new.toml")
    study = (tmp_path / "new.toml").read_text()
    assert 'from_m = "cm"' in study and 'recovered_length_m = "cm"' in study
    assert any("shipping.csv" in question for question in made.open_questions)


def test_the_columns_of_every_table_stand_in_the_guide() -> None:
    """A person at sea maps columns from the guide alone."""
    from sms_resource.loaders.tables import SCHEMAS

    guide = (Path(__file__).parents[2] / "docs" / "getting-started.md").read_text(encoding="utf-8")
    for role, columns in SCHEMAS.items():
        line = next(line for line in guide.splitlines() if line.startswith(f"| `{role}` |"))
        for column in columns:
            assert (f"**`{column.name}`**" if column.required else f"`{column.name}`") in line, (
                role,
                column.name,
            )


def test_no_break_even_without_costs(tmp_path: Path) -> None:
    """A study with prices and no costs has a value of its blocks, and no break-even cut-off of zero."""
    from sms_resource.findings import Findings
    from sms_resource.workflow.worth import valued

    small = SmallStudy(tmp_path)
    del small.toml["value"]["costs"]
    study = load_study(small.write())
    frame = pd.DataFrame(
        {"elevation": [-1600.0], "dry_tonnes": [150.0], "wet_tonnes": [160.0], "cu_pct": [5.0], "zn_pct": [2.0],
         "dry_density_tpm3": [3.0], "wet_density_tpm3": [3.2], "domain": ["massive"], "slope_deg": [0.0]}
    )  # fmt: skip
    context = type("Bare", (), {"config": study.config, "findings": Findings(), "study": study})()
    made, tables, _ = valued(context, frame)
    assert made["value_per_dry_tonne"].iloc[0] > 0 and not tables
