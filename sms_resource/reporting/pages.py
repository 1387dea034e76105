"""Set the report as A4 pages with typst, which remembers what it has set before.

Setting some sixty pages takes about a second; setting them again in the same process, with a few cells that differ, a
fifth of it, and the bytes are the same either way. So a run has the second interpreter set the pages of the run before,
from its record in the cache and its figures in the folder of results, while the stages are still at work.

Nothing else of the package is imported here: what is slow to import is not needed.
"""

from __future__ import annotations

import hashlib
import json
import tempfile
import threading
from collections.abc import Mapping
from importlib.resources import files
from pathlib import Path
from typing import Any

_before: threading.Thread | None = None  # sets the pages of the run before


def set_pages(record: str, pictures: Mapping[str, bytes]) -> bytes:
    """The pages as PDF; the same record and pictures give the same bytes.

    Nothing is fetched, and only the fonts inside the typst package are used.

    Parameters
    ----------
    record : str
        The document as JSON, from which the template takes it: no text of it is read as mark-up.
    pictures : mapping of str to bytes
        PNG of each figure by its key.
    """
    import typst

    if _before is not None and _before is not threading.current_thread():
        _before.join()
    with tempfile.TemporaryDirectory(prefix="sms_resource_") as name:
        room = Path(name)
        template = files("sms_resource.reporting").joinpath("templates/report.typ").read_bytes()
        (room / "report.typ").write_bytes(template)
        (room / "report.json").write_text(record, encoding="utf-8")
        for key, content in pictures.items():
            (room / f"{key}.png").write_bytes(content)
        return typst.compile(str(room / "report.typ"), root=str(room), ignore_system_fonts=True, timestamp=0)


def record_key(out: Path) -> str:
    """Name in the cache of the record of the pages that were last written to a folder of results."""
    return hashlib.sha256(f"pages {out.resolve()}".encode()).hexdigest()


def set_before(out: Path) -> bool:
    """Begin to set the pages of the run before in a thread of its own; False where there was none."""
    global _before
    from sms_resource.cache import StageCache

    record = StageCache().get(record_key(out))
    if not isinstance(record, str):
        return False
    _before = threading.Thread(target=_set_again, args=(record, out / "figures"), daemon=True)
    _before.start()
    return True


def _set_again(record: str, figures: Path) -> None:
    """Set pages for their memory alone; an error (figures that are not there any more) ends the thread and no more."""
    names = {block["file"] for block in _blocks(json.loads(record)) if block["kind"] == "picture"}
    set_pages(record, {name.removesuffix(".png"): (figures / name).read_bytes() for name in names})


def _blocks(record: dict[str, Any]) -> list[dict[str, Any]]:
    return [*record["summary"], *(block for section in record["sections"] for block in section["blocks"])]
