"""The report as the template of the A4 pages reads it: JSON, so that no text from a data file is ever read as mark-up."""

from __future__ import annotations

import json
import re
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from sms_resource.reporting.elements import (
    Block,
    Bullets,
    Caution,
    Document,
    Facts,
    Heading,
    Paragraph,
    Picture,
    Table,
)
from sms_resource.reporting.pages import set_pages

_LONG_WORD = re.compile(r"\S{15,}")
_BREAK_AFTER = re.compile(r"([_./\\,;:=&?-])(?=\S)")
ZERO_WIDTH_SPACE = "\u200b"
PAGE_POINTS = 498.0  # between the margins of the template
POINTS_A_CHARACTER = 0.52  # mean advance of the template's font, as a share of its size
NARROW = 17.0  # characters up to which a column keeps its own width


def soften(text: str) -> str:
    """Let long words break: after punctuation, and every 14 characters where there is none."""

    def loosen(found: re.Match[str]) -> str:
        word = _BREAK_AFTER.sub(r"\1" + ZERO_WIDTH_SPACE, found.group(0))
        pieces = [
            re.sub(r"(.{14})(?=.)", r"\1" + ZERO_WIDTH_SPACE, part) for part in word.split(ZERO_WIDTH_SPACE)
        ]
        return ZERO_WIDTH_SPACE.join(pieces)

    return _LONG_WORD.sub(loosen, text.replace("\u202f", "\u00a0"))


def column_shares(table: Table) -> list[float]:
    """Relative widths of columns: the longest word must fit, long texts share what is left."""
    shares = []
    for number, name in enumerate(table.columns):
        cells = [row[number] for row in table.rows]
        word = max((len(piece) for text in (name, *cells) for piece in text.split(" ")), default=1)
        longest = max((len(text) for text in cells), default=1)
        shares.append(float(min(max(min(word, 15), 0.45 * len(name), min(longest, 48)) + 1.5, 50.0)))
    return shares


def column_widths(shares: list[float], size: float) -> list[dict[str, float]]:
    """Widths for the template: narrow columns keep theirs where long ones can share the rest of the page."""
    narrow = sum(share for share in shares if share <= NARROW) * size * POINTS_A_CHARACTER
    if narrow > 0.65 * PAGE_POINTS or all(share <= NARROW for share in shares):
        return [{"fr": share} for share in shares]
    return [
        {"pt": share * size * POINTS_A_CHARACTER} if share <= NARROW else {"fr": share} for share in shares
    ]


def _block(block: Block) -> dict[str, Any] | None:
    if isinstance(block, Paragraph):
        return {"kind": "paragraph", "text": soften(block.text), "look": block.kind}
    if isinstance(block, Heading):
        return {"kind": "heading", "text": soften(block.text)}
    if isinstance(block, Bullets):
        return {"kind": "bullets", "items": [soften(item) for item in block.items]}
    if isinstance(block, Facts):
        return {"kind": "facts", "pairs": [[soften(name), soften(value)] for name, value in block.pairs]}
    if isinstance(block, Caution):
        return {"kind": "caution", "title": soften(block.title), "text": soften(block.text),
                "figures": soften(block.figures), "always": block.always}  # fmt: skip
    if isinstance(block, Picture):
        drawing = block.drawing
        return {"kind": "picture", "file": f"{drawing.key}.png", "title": soften(drawing.title),
                "caption": soften(drawing.caption), "alt": drawing.alt,
                "width": min(1.0, drawing.size_in[0] / 9.0)}  # fmt: skip
    if isinstance(block, Table):
        shares = column_shares(block)
        size = 8.0 if sum(shares) <= 95 else 7.0 if sum(shares) <= 125 else 6.0
        if block.key == "tonnes" and sum(shares) <= 125:
            size = 8.0  # the table that everyone reads
        return {"kind": "table", "title": soften(block.title), "columns": [soften(c) for c in block.columns],
                "rows": [[soften(cell) for cell in row] for row in block.rows], "numeric": list(block.numeric),
                "strong": list(block.strong), "note": soften(block.note),
                "widths": column_widths(shares, size), "size": size}  # fmt: skip
    return None


def document_record(document: Document) -> dict[str, Any]:
    """The document as plain values for the template."""

    def several(blocks: tuple[Block, ...]) -> list[dict[str, Any]]:
        return [record for record in map(_block, blocks) if record is not None]

    return {
        "title": soften(document.title),
        "subtitle": soften(document.subtitle),
        "label": document.label,
        "summary": several(document.summary),
        "sections": [{"title": s.title, "blocks": several(s.blocks)} for s in document.sections],
    }


def pages_record(document: Document) -> str:
    """The document as JSON, as the template reads it."""
    return json.dumps(document_record(document), ensure_ascii=False)


def write_pdf(document: Document, pictures: Mapping[str, bytes], path: Path) -> Path:
    """Set the pages and write them; the same document gives the same bytes."""
    path.write_bytes(set_pages(pages_record(document), pictures))
    return path
