"""What the second interpreter does for a report: begin before it is asked, and make what it is then asked for."""

from __future__ import annotations

import importlib
import tempfile
from concurrent.futures import Future
from pathlib import Path
from typing import TYPE_CHECKING

from sms_resource import second

if TYPE_CHECKING:
    from sms_resource.reporting.workbook import Content


def begin(out: Path | None) -> None:
    """Start the second interpreter, which imports what a report needs while the stages are at work.

    Parameters
    ----------
    out : Path or None
        Where the results go; the pages that are there are set anew, so that those of this run are set sooner. None where
        nothing is taken from runs before.
    """
    other, place = second.start(), str(out.resolve()) if out else ""
    if other is not None and place not in other.told:
        other.told.add(place)
        second.ask(f"{__name__}:prepare", place)


def prepare(out: str) -> None:
    """Set the pages of the run before, and import (called in the second interpreter)."""
    from sms_resource.reporting.pages import set_before

    again = bool(out) and set_before(Path(out))
    importlib.import_module("sms_resource.reporting.workbook")
    importlib.import_module("xlsxwriter")
    if not again:  # evidence will have to be judged, and figures to be drawn
        importlib.import_module("scipy.stats")
        importlib.import_module("matplotlib.backends.backend_agg")
        importlib.import_module("matplotlib.backends.backend_svg")


def workbook(content: Content) -> Future[bytes] | None:
    """Have the workbook written; its bytes, later."""
    return second.ask(f"{__name__}:workbook_bytes", content)


def workbook_bytes(content: Content) -> bytes:
    """A workbook (called in the second interpreter)."""
    from sms_resource.reporting.workbook import save_workbook

    with tempfile.TemporaryDirectory(prefix="sms_resource_") as place:
        return save_workbook(content, Path(place) / "workbook.xlsx").read_bytes()


def pages(record: str, pictures: dict[str, bytes]) -> Future[bytes] | None:
    """Have the pages set; the PDF, later."""
    return second.ask("sms_resource.reporting.pages:set_pages", record, pictures)
