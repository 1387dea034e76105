"""Plain text into Markdown that shows it as it is."""

from __future__ import annotations

import re
from collections.abc import Sequence

_MARKS = re.compile(r"([\\`*_{}\[\]<>#|~&$])")


def escape_markdown(text: str) -> str:
    """Escape every mark of Markdown and HTML, and white space that would break a line."""
    return (
        _MARKS.sub(r"\\\1", re.sub(r"\s+", " ", str(text)).strip())
        .replace("\\<", "&lt;")
        .replace("\\>", "&gt;")
        .replace("\\&", "&amp;")
    )


def markdown_table(columns: Sequence[str], rows: Sequence[Sequence[str]]) -> list[str]:
    """Lines of a table; cells are escaped."""
    head = "| " + " | ".join(escape_markdown(c) for c in columns) + " |"
    body = ["| " + " | ".join(escape_markdown(c) or " " for c in row) + " |" for row in rows]
    return [head, "|" + " --- |" * len(columns), *body]
