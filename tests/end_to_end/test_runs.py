"""A whole run from files to the report: what it leaves, that it adds up, and that it gives the same bytes again."""

from __future__ import annotations

import hashlib
import json
import re
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sms_resource import load_study, run_study, second
from tests.end_to_end.conftest import FORMULA, MARKUP, Run, command
from tests.end_to_end.places import contents, tree

METALS = ["cu_pct", "zn_pct", "au_gpt", "ag_gpt"]


@pytest.fixture(scope="module")
def blocks(run: Run) -> pd.DataFrame:
    return pd.read_parquet(run.out / "block_model.parquet")


@pytest.fixture(scope="module")
def tonnage(run: Run) -> pd.DataFrame:
    return pd.read_csv(run.out / "grade_tonnage.csv")


def test_all_files_are_there(run: Run) -> None:
    names = {path.relative_to(run.out).as_posix() for path in run.out.rglob("*") if path.is_file()}
    assert names >= {
        "block_model.parquet", "grade_tonnage.csv", "composites.csv", "variograms.json", "validation.csv",
        "findings.json", "report.html", "manifest.json", "decisions.csv", "layers/seafloor.tif", "layers/base.tif",
        "layers/thickness.tif", "layers/holes.parquet", "layers/outline.gpkg", "layers/block_grid.json",
    }  # fmt: skip
    assert any(name.startswith("figures/") and name.endswith(".png") for name in names)
    assert [path.name for path in run.out.parent.iterdir() if path.name.startswith(".")] == []


def test_the_block_model_has_its_columns(blocks: pd.DataFrame) -> None:
    wanted = ["i", "j", "k", "easting", "northing", "elevation", "volume_m3", "body_fraction", "domain",
              "dry_density_tpm3", "dry_tonnes", "wet_tonnes", *METALS, *[f"{metal}_variance" for metal in METALS],
              *[f"{metal}_slope" for metal in METALS], "sample_count", "hole_count", "nearest_distance_m",
              "proposed_class"]  # fmt: skip
    assert not [name for name in wanted if name not in blocks]
    assert not [name for name in blocks if "tonnes" in name and not re.search("dry|wet", name)]
    assert not blocks.duplicated(["i", "j", "k"]).any()
    assert (blocks["volume_m3"] > 0).all() and (blocks["body_fraction"] <= 1 + 1e-12).all()
    np.testing.assert_allclose(blocks["volume_m3"], blocks["body_fraction"] * 5 * 5 * 2, rtol=1e-9)
    np.testing.assert_allclose(
        blocks["dry_tonnes"], blocks["volume_m3"] * blocks["dry_density_tpm3"], rtol=1e-12
    )
    assert (blocks["wet_tonnes"] > blocks["dry_tonnes"]).all()
    assert set(blocks["domain"]) == {"cap", "massive"}
    assert blocks[METALS].notna().all(axis=None)
    assert set(blocks["proposed_class"]) <= {"indicated", "inferred", "unclassified"}


def test_the_table_of_tonnes_adds_up(run: Run, blocks: pd.DataFrame, tonnage: pd.DataFrame) -> None:
    wanted = ["cutoff_variable", "cutoff", "proposed_class", "dry_tonnes", "wet_tonnes", *METALS]
    assert not [name for name in wanted if name not in tonnage]
    kept = blocks[blocks["kept_share"] > 0]
    dry = kept["dry_tonnes"] * kept["kept_share"]
    for cutoff, rows in tonnage.groupby("cutoff"):
        whole = rows[rows["proposed_class"] == "all"].iloc[0]
        parts = rows[rows["proposed_class"] != "all"]
        above = kept["cu_pct"] >= cutoff
        assert whole["dry_tonnes"] == pytest.approx(dry[above].sum(), rel=1e-9)
        assert parts["dry_tonnes"].sum() == pytest.approx(whole["dry_tonnes"], rel=1e-9)
        for metal in METALS:
            assert whole[metal] == pytest.approx(
                np.average(kept.loc[above, metal], weights=dry[above]), rel=1e-9
            )
    whole = tonnage[tonnage["proposed_class"] == "all"].sort_values("cutoff")
    assert (whole["dry_tonnes"].diff().dropna() <= 1e-6).all()
    assert (whole["cu_pct"].diff().dropna() >= -1e-12).all()
    # content: 1 % of a tonne is 0.01 t, 1 g/t is 1 g
    np.testing.assert_allclose(whole["cu_t"], whole["dry_tonnes"] * whole["cu_pct"] / 100, rtol=1e-9)
    np.testing.assert_allclose(whole["au_kg"], whole["dry_tonnes"] * whole["au_gpt"] / 1000, rtol=1e-9)


def test_the_vent_is_taken_out(run: Run, blocks: pd.DataFrame) -> None:
    """The zone is a circle of 6 m: its blocks are gone, no others by it."""
    x, y = 500044.0, 8000040.0
    distance = np.hypot(blocks["easting"] - x, blocks["northing"] - y)
    assert (blocks.loc[distance < 2.0, "kept_share"] < 0.2).all()
    assert (blocks.loc[distance > 6.0 + 5.0, "screened_by"].astype(str) != "active_vent").all()


def test_composites_carry_what_they_weigh(run: Run) -> None:
    table = pd.read_csv(run.out / "composites.csv")
    wanted = ["hole_id", "from_m", "to_m", "domain", "recovery_pct", "easting", "northing", "elevation", "weight",
              *METALS]  # fmt: skip
    assert not [name for name in wanted if name not in table]
    assert MARKUP in set(table["hole_id"])
    inside = table[table["domain"] != "waste"]
    assert len(inside) > 100
    assert (table["to_m"] - table["from_m"] <= 1.5 + 1e-9).all()


def test_variograms_and_validation_are_whole(run: Run) -> None:
    records = json.loads((run.out / "variograms.json").read_text())
    assert {(item["domain"], item["metal"]) for item in records} == {
        (domain, metal) for domain in ("cap", "massive") for metal in METALS
    }
    assert set(run.result.variograms) == {(item["domain"], item["metal"]) for item in records}
    assert len(pd.read_csv(run.out / "validation.csv")) > 10


def test_findings_are_those_of_the_run(run: Run) -> None:
    assert json.loads((run.out / "findings.json").read_text()) == run.result.findings.to_records()


def test_the_manifest_names_every_byte(run: Run) -> None:
    manifest = json.loads((run.out / "manifest.json").read_text())
    assert manifest["outputs"] == contents(run.out)
    for role, entry in manifest["inputs"].items():
        data = (run.study.folder / entry["file"]).read_bytes()
        assert entry["sha256"] == hashlib.sha256(data).hexdigest(), role
    assert {"study", "collars", "assays", "bathymetry", "outline", "exclusions"} <= set(manifest["inputs"])
    assert manifest["study"]["resolved"]["blocks"]["size_m"] == [5.0, 5.0, 2.0]
    assert manifest["study"]["seed"] == 5
    assert {"numpy", "scipy", "numba", "sms_resource", "python"} <= set(manifest["versions"])
    names = [stage["name"] for stage in manifest["stages"]]
    assert names == ["load", "check", "composite", "density", "body", "blocks", "variograms", "estimate", "validate",
                     "propose", "value", "classify", "report"]  # fmt: skip
    assert all(stage["seconds"] >= 0 for stage in manifest["stages"])


def test_domains_inside_blocks_hold_the_metal_of_the_blocks(run: Run) -> None:
    """Means of the domains' own parts, times their dry tonnes, are the metal of all blocks."""
    made = run.result.stages["estimate"]
    assert (made.frame["domain"] == "cap").any() and (made.frame["domain"] == "massive").any()
    for metal in METALS:
        part = made.domain_means[made.domain_means["metal"] == metal]
        assert set(part["domain"]) == {"cap", "massive"}
        whole = (made.frame["dry_tonnes"] * made.frame[metal]).sum()
        np.testing.assert_allclose((part["dry_tonnes"] * part["mean"]).sum(), whole, rtol=1e-9)
        np.testing.assert_allclose(part["dry_tonnes"].sum(), made.frame["dry_tonnes"].sum(), rtol=1e-9)


def test_times_of_the_neighbourhood_study_stand_apart(run: Run) -> None:
    """Table and picture hold time against samples, block size and points; the report holds the rest and says where."""
    table = pd.read_csv(run.out / "measured" / "neighbourhood.csv")
    assert list(table["varied"].unique()) == ["samples", "block_size", "discretisation"]
    assert (table["microseconds_per_target"] > 0).all()
    assert table.groupby("varied")["used"].sum().max() == 1
    picture = (run.out / "measured" / "neighbourhood.svg").read_text()
    assert picture.startswith("<?xml")
    page = (run.out / "report.html").read_text()
    assert "measured/" in page
    plain = pd.read_csv(run.out / "figures" / "data" / "neighbourhood.csv")
    assert "microseconds_per_target" not in plain
    assert len(plain) == len(table)
    cost = plain[plain["varied"] == "samples"]["operations_per_target"]
    assert cost.is_monotonic_increasing


def test_the_ledger_tells_chosen_from_default(run: Run) -> None:
    ledger = pd.read_csv(run.out / "decisions.csv").set_index("key")
    assert ledger.loc["blocks.size_m", "origin"] == "chosen"
    assert ledger.loc["composites.lost_core", "origin"] == "default"
    assert ledger.loc["composites.length_m", "by"] == "a & b"


def test_the_result_in_a_notebook(run: Run, blocks: pd.DataFrame, tonnage: pd.DataFrame) -> None:
    result = run.result
    assert result.out == run.out
    frame = result.block_model.frame
    assert len(frame) == len(blocks)
    np.testing.assert_array_equal(frame["cu_pct"].to_numpy(), blocks["cu_pct"].to_numpy())
    mesh = result.block_model.to_pyvista()
    assert mesh.n_cells == len(frame)
    assert "cu_pct" in mesh.cell_data
    assert len(result.grade_tonnage) == len(tonnage)
    assert "results" in repr(result)
    assert "<script>" not in result.block_model._repr_html_()
    assert result.summary.rows and "dry" in " ".join(result.summary.columns).lower()


class Tags(HTMLParser):
    """Counts tags, and keeps their attributes."""

    def __init__(self) -> None:
        super().__init__()
        self.seen: list[tuple[str, dict[str, str | None]]] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.seen.append((tag, dict(attrs)))


def test_text_from_data_files_is_escaped_in_the_report(run: Run) -> None:
    page = (run.out / "report.html").read_text(encoding="utf-8")
    assert "&lt;script&gt;alert(1)&lt;/script&gt;" in page
    tags = Tags()
    tags.feed(page)
    assert not [name for name, attributes in tags.seen if any(key.startswith("on") for key in attributes)]
    assert not re.search(r"<script[^>]*>\s*alert", page)
    assert "<i>mound</i>" not in page and "<b>RM1</b>" not in page and "<img src=x" not in page
    pictures = [attributes.get("src") or "" for name, attributes in tags.seen if name == "img"]
    assert pictures and all(source.startswith("data:") for source in pictures)
    for path in run.out.rglob("*.svg"):
        text = path.read_text(encoding="utf-8")
        assert "<script" not in text and "onerror" not in re.sub("&lt;.*?&gt;", "", text), path.name


def test_text_from_data_files_is_no_formula_of_the_workbook(run: Run) -> None:
    from openpyxl import load_workbook

    book = load_workbook(run.out / "workbook.xlsx")
    cells = [cell for sheet in book for row in sheet.iter_rows() for cell in row if cell.value is not None]
    assert len(cells) > 500
    assert FORMULA in {cell.value for cell in cells if cell.data_type == "s"}
    assert not [cell.value for cell in cells if cell.data_type == "f" and "1+" in str(cell.value)]


@pytest.mark.parametrize("name", ["checklist.md", "method.md"])
def test_text_from_the_study_is_no_mark_up_of_a_draft(run: Run, name: str) -> None:
    text = (run.out / name).read_text(encoding="utf-8")
    assert "mound" in text
    for tag in ("<script", "<img", "<i>", "<b>"):
        assert tag not in text, name


def test_no_forbidden_word_in_anything_that_is_read(run: Run) -> None:
    words = re.compile(
        r"\b(ore|ores|reserve|reserves|proven|probable|compliant|mineable resource|in-situ value|guaranteed|calculated)\b",
        re.IGNORECASE,
    )
    for path in [
        *run.out.glob("*.csv"),
        *run.out.glob("*.json"),
        *run.out.glob("*.html"),
        *run.out.glob("*.md"),
    ]:
        text = path.read_text(encoding="utf-8")
        if path.suffix == ".html":
            text = re.sub(r"data:[a-z/+;0-9,]*base64,[A-Za-z0-9+/=]*", "", text)
        found = {match.group(0).lower() for match in words.finditer(text)}
        assert not found, f"{path.name}: {found}"


def test_the_report_is_a_draft_and_says_dry_or_wet(run: Run) -> None:
    page = (run.out / "report.html").read_text(encoding="utf-8")
    assert "Draft" in page and "Competent Person" in page
    assert "block-model tally" in page.lower()
    assert "http://" not in re.sub(r"http://www\.w3\.org[^\"' ]*", "", page)


def test_two_threads_give_the_same_bytes(run: Run, tmp_path: Path) -> None:
    """In a process of its own, without any cache, with twice the threads for the kernels and for linear algebra."""
    out = tmp_path / "results"
    two = {"OMP_NUM_THREADS": "2", "OPENBLAS_NUM_THREADS": "2", "NUMBA_NUM_THREADS": "2"}
    done = command(
        "run", run.study.path, "--out", out, "--threads", 2, "--no-cache", "--quiet", environment=two
    )
    assert done.returncode == 0, done.stderr
    assert done.stdout == ""
    one, other = contents(run.out), contents(out)
    assert sorted(one) == sorted(other)
    differing = [name for name in one if one[name] != other[name]]
    assert not differing


def test_a_second_run_takes_every_stage_from_the_cache_and_leaves_the_same_bytes(
    run: Run, tmp_path: Path
) -> None:
    import sms_resource.workflow.publish as publish

    out = tmp_path / "results"
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(publish, "write_report_files", lambda *_: [])
        run_study(load_study(run.study.path), out, cache=run.store)
    stages = json.loads((out / "manifest.json").read_text())["stages"]
    assert [stage["from_cache"] for stage in stages] == [True] * (len(stages) - 1) + [False]
    first = contents(run.out)
    assert {name: first[name] for name in contents(out)} == contents(out)


@pytest.mark.parametrize("processors", [1, 2])
def test_the_second_interpreter_changes_no_byte(
    processors: int, run: Run, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Pages and workbook made here, or by the second interpreter, are those of the first run."""
    monkeypatch.setattr(second, "processors", lambda: processors)
    out = tmp_path / "results"
    run_study(load_study(run.study.path), out, cache=run.store)
    assert contents(out) == contents(run.out)


def test_nothing_is_written_beside_the_results(run: Run) -> None:
    assert {path.name for path in run.study.folder.iterdir()} == {
        "study.toml", "bathymetry.tif", "outline.gpkg", "exclusions.gpkg", "collars.csv", "surveys.csv", "runs.csv",
        "lithology.csv", "assays.csv", "densities.csv", "surface_samples.csv", "laboratory.csv",
    }  # fmt: skip


def test_without_an_out_folder_nothing_is_written(
    run: Run, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    before = tree(run.study.folder)
    result = run_study(load_study(run.study.path), None, cache=run.store)
    assert result.out is None and len(result.block_model.frame) == len(run.result.block_model.frame)
    assert list(tmp_path.iterdir()) == [] and tree(run.study.folder) == before
