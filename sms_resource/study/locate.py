"""Where a key stands in a TOML file, so that a finding can name the row."""

from __future__ import annotations

import difflib
import re

_HEADER = re.compile(r"^\s*\[{1,2}\s*([^\]]+?)\s*\]{1,2}")
_KEY = re.compile(
    r"""^\s*((?:"[^"]*"|'[^']*'|[A-Za-z0-9_-]+)(?:\s*\.\s*(?:"[^"]*"|'[^']*'|[A-Za-z0-9_-]+))*)\s*="""
)


def _plain(dotted: str) -> str:
    parts = re.findall(r"\"[^\"]*\"|'[^']*'|[^.\s]+", dotted)
    return ".".join(part.strip("\"'") for part in parts)


def key_rows(text: str) -> dict[str, int]:
    """Row (first is 1) of each table header and key of a TOML text, by dotted name.

    An array of tables counts its tables: the second ``[[a.b]]`` is ``a.b.1``.
    """
    rows: dict[str, int] = {}
    prefix = ""
    seen: dict[str, int] = {}
    for number, line in enumerate(text.splitlines(), 1):
        header = _HEADER.match(line)
        if header and not _KEY.match(line):
            prefix = _plain(header.group(1))
            if line.lstrip().startswith("[["):
                count = seen.get(prefix, 0)
                seen[prefix] = count + 1
                prefix = f"{prefix}.{count}"
            rows.setdefault(prefix, number)
            continue
        found = _KEY.match(line)
        if found:
            name = _plain(found.group(1))
            rows.setdefault(f"{prefix}.{name}" if prefix else name, number)
    return rows


def row_of(rows: dict[str, int], dotted: str) -> int | None:
    """Row of a key, or of the nearest table that would hold it; None where there is none."""
    name = dotted
    while name:
        if name in rows:
            return rows[name]
        inside = [row for key, row in rows.items() if key.startswith(name + ".")]
        if inside:
            return min(inside)
        name = name.rpartition(".")[0]
    return None


def nearest(name: str, known: list[str]) -> str:
    """``"; did you mean 'x'?"`` for the nearest known name, or the list of names where none is near."""
    close = difflib.get_close_matches(name, known, n=1, cutoff=0.6)
    if close:
        return f"Did you mean '{close[0]}'?"
    return "Known here: " + ", ".join(known) + "." if known else "No key may stand here."
