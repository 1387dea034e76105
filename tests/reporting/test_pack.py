"""The pack: pages, workbook, checklist and method statement hold what the run holds, and texts stay texts."""

import re
import shutil
import subprocess
import zipfile
from dataclasses import replace
from xml.etree import ElementTree

import openpyxl
import pandas as pd
import pytest

from sms_resource.reporting.cautions import all_cautions
from sms_resource.reporting.checklist import checklist
from sms_resource.reporting.data import Evidence, ReportData
from sms_resource.reporting.markdown import escape_markdown
from sms_resource.reporting.method import method_statement
from sms_resource.reporting.pack import write_pack
from sms_resource.reporting.pdf import ZERO_WIDTH_SPACE, document_record, soften, write_pdf
from sms_resource.reporting.sections import TITLES
from sms_resource.reporting.workbook import number_format, write_workbook
from tests.reporting.synthetic import full_report_data
from tests.reporting.test_report import KEPT_OUT

FORMULA = "=cmd|'/c calc'!A1"


@pytest.fixture(scope="module")
def folder(report, hostile_data, tmp_path_factory):
    path = tmp_path_factory.mktemp("pack")
    write_pack(hostile_data, path, report)
    return path


@pytest.fixture(scope="module")
def book(tmp_path_factory):
    path = tmp_path_factory.mktemp("book") / "workbook.xlsx"
    write_workbook(full_report_data(note=FORMULA), path)
    return openpyxl.load_workbook(path)


def test_all_files_are_there(folder):
    names = {"report.pdf", "workbook.xlsx", "checklist.md", "checklist.docx", "method.md"}
    assert {path.name for path in folder.iterdir()} == names


def test_pages_say_what_the_web_page_says(report):
    record = document_record(report.document)
    assert [section["title"] for section in record["sections"]] == list(TITLES.values())
    blocks = [*record["summary"], *(block for section in record["sections"] for block in section["blocks"])]
    pictures = {block["file"] for block in blocks if block["kind"] == "picture"}
    assert pictures == {f"{key}.png" for key in report.pictures}
    for block in blocks:
        if block["kind"] == "table":
            assert len(block["widths"]) == len(block["columns"]) == len(block["numeric"])
            assert all(len(row) == len(block["columns"]) for row in block["rows"])


@pytest.mark.skipif(shutil.which("pdftotext") is None, reason="no pdftotext on this machine")
def test_pdf_holds_every_caution_and_every_picture(folder, report, hostile_data):
    def run(*command):
        return subprocess.run(command, capture_output=True, text=True, check=True, timeout=60).stdout

    flat = re.sub(r"\s+", "", run("pdftotext", str(folder / "report.pdf"), "-").replace(ZERO_WIDTH_SPACE, ""))
    for caution in all_cautions(hostile_data):
        assert re.sub(r"\s+", "", caution.title) in flat, caution.key
    assert "<script>alert(1)</script>" in flat
    assert flat.count("Block-modeltally") >= 2
    images = run("pdfimages", "-list", str(folder / "report.pdf")).splitlines()[2:]
    assert len([line for line in images if " image " in line]) >= len(report.pictures)
    assert re.search(
        r"Page size:\s+595\.\d+ x 841\.\d+", run("pdfinfo", str(folder / "report.pdf"))
    )  # A4, ISO 216


def test_pdf_is_the_same_each_time(report, tmp_path):
    few = {key: report.pictures[key] for key in report.pictures}
    one = write_pdf(report.document, few, tmp_path / "a.pdf").read_bytes()
    assert one[:5] == b"%PDF-"
    assert one == write_pdf(report.document, few, tmp_path / "b.pdf").read_bytes()


def test_long_words_may_break_and_short_ones_do_not():
    assert soften("short words stay") == "short words stay"
    loose = soften("a" * 40 + " composites.least_recovery_pct")
    assert loose.replace(ZERO_WIDTH_SPACE, "") == "a" * 40 + " composites.least_recovery_pct"
    assert max(len(piece) for piece in re.split(f"[{ZERO_WIDTH_SPACE} ]", loose)) <= 15


def test_no_formula_in_the_workbook(book):
    texts = [
        cell for sheet in book for row in sheet.iter_rows() for cell in row if isinstance(cell.value, str)
    ]
    assert any(FORMULA in cell.value for cell in texts)
    assert any(cell.value.startswith("=") for cell in texts) or any("=cmd" in cell.value for cell in texts)
    for sheet in book:
        for row in sheet.iter_rows():
            for cell in row:
                assert cell.data_type != "f" and cell.hyperlink is None, (sheet.title, cell.coordinate)


def test_a_cell_that_begins_like_a_formula_stays_text(tmp_path):
    data = full_report_data()
    composites = data.evidence.composites.assign(hole_id=FORMULA)
    path = write_workbook(
        replace(data, evidence=replace(data.evidence, composites=composites)), tmp_path / "w.xlsx"
    )
    sheet = openpyxl.load_workbook(path)["Composites"]
    column = [cell.value for cell in sheet[2]].index("Hole") + 1
    cell = sheet.cell(3, column)
    assert cell.value == FORMULA and cell.data_type == "s"


def test_workbook_headers_units_formats(book):
    assert book.sheetnames[:3] == ["Read me", "Estimate", "Grade-tonnage"]
    for wanted in ("Scenarios", "Ledger", "Checks", "Composites", "Cautions", "Findings"):
        assert wanted in book.sheetnames
    for sheet in book.worksheets[1:]:
        assert sheet.freeze_panes == "B3", sheet.title
        for cell in sheet[2]:
            head = str(cell.value)
            assert "tonnes" not in head.lower() or re.search(r"\b(dry|wet)\b", head, re.I), head
    heads = [cell.value for cell in book["Grade-tonnage"][2]]
    assert "Dry tonnes (t)" in heads and "Cu\u00a0(%)" in heads
    row = book["Grade-tonnage"][3]
    assert row[heads.index("Dry tonnes (t)")].number_format == "#,##0"
    assert number_format("au_oz", pd.Series([1.5])) == "#,##0"


def test_workbook_is_unrounded_and_the_same_each_time(data, tmp_path):
    one, two = (write_workbook(data, tmp_path / name) for name in ("a.xlsx", "b.xlsx"))
    assert one.read_bytes() == two.read_bytes()
    sheet = openpyxl.load_workbook(one)["Grade-tonnage"]
    heads = [cell.value for cell in sheet[2]]
    assert sheet[3][heads.index("Dry tonnes (t)")].value == data.value.grade_tonnage["dry_tonnes"].iloc[0]


def test_checklist_answers_every_line(data):
    lines = checklist(data)
    assert [
        sum(line.section.startswith(name) for line in lines)
        for name in ("Sampling", "Exploration", "Estimation")
    ] == [12, 10, 14]
    for line in lines:
        assert (
            line.status in ("answered", "not applicable", "for the Competent Person") and len(line.text) > 20
        )
        assert line.status != "for the Competent Person" or line.text.startswith("Needed: "), line
    answers = {(line.section[:5], line.criterion): line for line in lines}
    assert "9 measured" in answers["Estim", "Bulk density"].text
    assert "25.0" not in answers["Explo", "Geology"].text
    assert "30 holes" in answers["Explo", "Drill hole information"].text
    assert "median +0." in answers["Sampl", "Location of data points"].text
    assert answers["Estim", "Cut-off parameters"].status == "answered"


def test_checklist_of_nothing_claims_nothing():
    lines = checklist(ReportData())
    answered = {line.criterion for line in lines if line.status == "answered"}
    # What holds of any run of the tool, data or not.
    assert answered <= {
        "Diagrams",
        "Balanced reporting",
        "Data aggregation methods",
        "Database integrity",
        "Moisture",
    }
    holes = {line.criterion for line in lines if line.status == "not applicable"}
    assert {"Drilling techniques", "Drill sample recovery", "Drill hole information"} <= holes


def test_word_document_is_sound(folder):
    with zipfile.ZipFile(folder / "checklist.docx") as archive:
        assert archive.testzip() is None
        for name in archive.namelist():
            ElementTree.fromstring(archive.read(name))
        words = "".join(ElementTree.fromstring(archive.read("word/document.xml")).itertext())
    assert "<script>alert(1)</script>" in words and "Sub-sampling" in words


def test_markdown_is_escaped(folder):
    for name in ("checklist.md", "method.md"):
        text = (folder / name).read_text(encoding="utf-8")
        assert "<script" not in text
    assert escape_markdown("a|b *c* <d> [e](f)") == r"a\|b \*c\* &lt;d&gt; \[e\](f)"


def test_method_statement_is_true_of_the_data(data):
    text = " ".join(f"{title}: {words}" for title, words in method_statement(data))
    assert "30 holes" in text and f"{len(data.evidence.composites)} composites" in text
    open_holes = int((data.evidence.collars["ended_in"] == "sulphide").sum())
    assert f"{open_holes} holes ended in sulphide" in text
    assert "Assumed rather than inferred" in text and "block-model tally" in text
    assert "approximately" in text
    known = replace(data, variograms=tuple(replace(record, assumed=()) for record in data.variograms))
    assert "Nothing in them was assumed" in " ".join(words for _, words in method_statement(known))
    floor = replace(data, evidence=replace(data.evidence, lost_core_default="background"))
    assert "Lost core takes a background grade" in " ".join(words for _, words in method_statement(floor))
    assert method_statement(ReportData(evidence=Evidence())) == []


def test_words_kept_out_of_the_pack(folder):
    for name in ("checklist.md", "method.md"):
        text = (folder / name).read_text(encoding="utf-8")
        for word in KEPT_OUT:
            assert not re.search(rf"\b{word}\b", text, re.I), (name, word)
