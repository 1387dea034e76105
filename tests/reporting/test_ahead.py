"""What the second interpreter makes of a report is to the byte what this one makes. Invented data."""

from __future__ import annotations

import threading
from dataclasses import replace
from pathlib import Path

import pytest

from sms_resource import second
from sms_resource.cache import FOLDER_VARIABLE, StageCache
from sms_resource.reporting import ahead, pages
from sms_resource.reporting.pdf import pages_record
from sms_resource.reporting.workbook import save_workbook, workbook_content


@pytest.fixture(autouse=True)
def two_processors(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(second, "processors", lambda: 2)


def test_a_workbook_from_the_other_interpreter_is_the_same(hostile_data, tmp_path) -> None:
    content = workbook_content(hostile_data)
    here = save_workbook(content, tmp_path / "workbook.xlsx").read_bytes()
    assert second.answer(ahead.workbook(content)) == here


def test_pages_set_after_others_are_those_set_first(report) -> None:
    """typst remembers what it has set; a document with other words must not take any of the old ones along."""
    record = pages_record(report.document)
    other = pages_record(replace(report.document, title="Another title", label="Another label"))
    assert record != other
    alone = second.answer(ahead.pages(record, report.pictures))
    assert pages.set_pages(other, report.pictures) != alone
    assert pages.set_pages(record, report.pictures) == alone
    assert second.answer(ahead.pages(record, report.pictures)) == alone


@pytest.mark.parametrize("whole", [True, False])
def test_pages_of_the_run_before_are_set_ahead(
    whole: bool, report, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv(FOLDER_VARIABLE, str(tmp_path / "cache"))
    monkeypatch.setattr(pages, "_before", None)
    monkeypatch.setattr(threading, "excepthook", lambda _: None)
    out = tmp_path / "results"
    assert not pages.set_before(out)
    record = pages_record(report.document)
    StageCache().put(pages.record_key(out), record)
    if whole:
        (out / "figures").mkdir(parents=True)
        for name, content in report.pictures.items():
            (out / "figures" / f"{name}.png").write_bytes(content)
    assert pages.set_before(out)  # without its figures it is set from nothing later, and no error is seen
    assert pages.set_pages(record, report.pictures)[:5] == b"%PDF-"
    assert pages._before is not None and not pages._before.is_alive()


def test_it_is_told_of_a_folder_once(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    told: list[tuple[object, ...]] = []
    monkeypatch.setattr(second, "ask", lambda *given: told.append(given))
    ahead.begin(tmp_path / "a")
    ahead.begin(tmp_path / "a")
    ahead.begin(tmp_path / "b")
    assert len(told) == 2
    monkeypatch.setattr(second, "processors", lambda: 1)
    ahead.begin(tmp_path / "c")
    assert len(told) == 2
