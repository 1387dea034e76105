"""A plain Word document (Office Open XML) of headings and tables, written without a library.

Only the parts that every reader needs are written, each time the same bytes. ECMA-376, part 1.
"""

from __future__ import annotations

import re
import zipfile
from collections.abc import Sequence
from pathlib import Path
from xml.sax.saxutils import escape

_SPACE = "http://schemas.openxmlformats.org/wordprocessingml/2006/main"
_TYPES = (
    '<?xml version="1.0" encoding="UTF-8" standalone="yes"?>'
    '<Types xmlns="http://schemas.openxmlformats.org/package/2006/content-types">'
    '<Default Extension="rels" ContentType="application/vnd.openxmlformats-package.relationships+xml"/>'
    '<Default Extension="xml" ContentType="application/xml"/>'
    '<Override PartName="/word/document.xml" '
    'ContentType="application/vnd.openxmlformats-officedocument.wordprocessingml.document.main+xml"/>'
    '<Override PartName="/word/styles.xml" '
    'ContentType="application/vnd.openxmlformats-officedocument.wordprocessingml.styles+xml"/></Types>'
)
_RELATIONS = (
    '<?xml version="1.0" encoding="UTF-8" standalone="yes"?><Relationships'
    ' xmlns="http://schemas.openxmlformats.org/package/2006/relationships"><Relationship Id="rId1"'
    ' Type="http://schemas.openxmlformats.org/officeDocument/2006/relationships/{kind}"'
    ' Target="{target}"/></Relationships>'
)
_STYLES = (
    f'<?xml version="1.0" encoding="UTF-8" standalone="yes"?><w:styles xmlns:w="{_SPACE}">'
    '<w:style w:type="paragraph" w:default="1" w:styleId="Normal"><w:name w:val="Normal"/>'
    '<w:pPr><w:spacing w:after="80"/></w:pPr><w:rPr><w:sz w:val="19"/></w:rPr></w:style>'
    '<w:style w:type="paragraph" w:styleId="Heading1"><w:name w:val="heading 1"/><w:basedOn w:val="Normal"/>'
    '<w:pPr><w:keepNext/><w:spacing w:before="240" w:after="120"/><w:outlineLvl w:val="0"/></w:pPr>'
    '<w:rPr><w:b/><w:sz w:val="32"/></w:rPr></w:style>'
    '<w:style w:type="paragraph" w:styleId="Heading2"><w:name w:val="heading 2"/><w:basedOn w:val="Normal"/>'
    '<w:pPr><w:keepNext/><w:spacing w:before="240" w:after="100"/><w:outlineLvl w:val="1"/></w:pPr>'
    '<w:rPr><w:b/><w:sz w:val="25"/></w:rPr></w:style></w:styles>'
)
_WIDTH = 9638  # twentieths of a point between the margins of an A4 page
# What XML 1.0 cannot hold.
_FORBIDDEN = re.compile("[^\t\n\r\x20-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")


def _run(text: str, *, bold: bool = False) -> str:
    look = "<w:rPr><w:b/></w:rPr>" if bold else ""
    return f'<w:r>{look}<w:t xml:space="preserve">{escape(_FORBIDDEN.sub("", text))}</w:t></w:r>'


def _paragraph(text: str, style: str = "", *, bold: bool = False) -> str:
    look = f'<w:pPr><w:pStyle w:val="{style}"/></w:pPr>' if style else ""
    return f"<w:p>{look}{_run(text, bold=bold)}</w:p>"


def _table(columns: Sequence[str], rows: Sequence[Sequence[str]], shares: Sequence[float]) -> str:
    widths = [int(_WIDTH * share) for share in shares]
    borders = "".join(
        f'<w:{side} w:val="single" w:sz="4" w:color="A0A4A8"/>' for side in ("top", "bottom", "insideH")
    )
    grid = "".join(f'<w:gridCol w:w="{width}"/>' for width in widths)
    margins = '<w:tblCellMar><w:left w:w="60" w:type="dxa"/><w:right w:w="100" w:type="dxa"/></w:tblCellMar>'

    def line(cells: Sequence[str], *, head: bool = False) -> str:
        look = "<w:trPr><w:cantSplit/>" + ("<w:tblHeader/>" if head else "") + "</w:trPr>"
        filled = "".join(
            f'<w:tc><w:tcPr><w:tcW w:w="{width}" w:type="dxa"/></w:tcPr>{_paragraph(cell, bold=head)}</w:tc>'
            for width, cell in zip(widths, cells)
        )
        return f"<w:tr>{look}{filled}</w:tr>"

    body = "".join(line(row) for row in rows)
    return (
        f'<w:tbl><w:tblPr><w:tblW w:w="{_WIDTH}" w:type="dxa"/><w:tblBorders>{borders}</w:tblBorders>'
        "<w:tblLayout"
        f' w:type="fixed"/>{margins}</w:tblPr><w:tblGrid>{grid}</w:tblGrid>{line(columns, head=True)}{body}</w:tbl>'
    )


def write_word(
    path: Path,
    title: str,
    introduction: str,
    tables: Sequence[tuple[str, Sequence[str], Sequence[Sequence[str]]]],
    shares: Sequence[float] = (0.24, 0.16, 0.60),
) -> Path:
    """Write a title, a paragraph, and one table under each heading; return the path."""
    parts = [_paragraph(title, "Heading1"), _paragraph(introduction)]
    for heading, columns, rows in tables:
        parts += [_paragraph(heading, "Heading2"), _table(columns, rows, shares), _paragraph("")]
    page = (
        '<w:sectPr><w:pgSz w:w="11906" w:h="16838"/><w:pgMar w:top="1134" w:right="1134" w:bottom="1134"'
        ' w:left="1134"/></w:sectPr>'
    )
    document = (
        f'<?xml version="1.0" encoding="UTF-8" standalone="yes"?><w:document xmlns:w="{_SPACE}"><w:body>'
        f"{''.join(parts)}{page}</w:body></w:document>"
    )
    files = {
        "[Content_Types].xml": _TYPES,
        "_rels/.rels": _RELATIONS.format(kind="officeDocument", target="word/document.xml"),
        "word/_rels/document.xml.rels": _RELATIONS.format(kind="styles", target="styles.xml"),
        "word/document.xml": document,
        "word/styles.xml": _STYLES,
    }
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, content in files.items():
            entry = zipfile.ZipInfo(name, (1980, 1, 1, 0, 0, 0))  # no clock: the same bytes each time
            entry.compress_type = zipfile.ZIP_DEFLATED
            archive.writestr(entry, content.encode("utf-8"))
    return path
