"""The report as one web page that needs nothing else: figures inside, no script, no network."""

from __future__ import annotations

import base64
from collections.abc import Mapping
from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING

from sms_resource.reporting.elements import Document, Table
from sms_resource.reporting.pdf import column_shares

if TYPE_CHECKING:
    from jinja2 import Environment

LONG_TABLE = 16  # rows above which a table is folded until a reader opens it
EMS_A_CHARACTER = 0.66  # of the sans-serif fonts of the page, with the space between columns


@cache
def environment() -> Environment:
    """The templates of the package, with every value escaped and undefined names as errors."""
    from jinja2 import Environment, PackageLoader, StrictUndefined

    made = Environment(
        loader=PackageLoader("sms_resource.reporting", "templates"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    made.filters["table_ems"] = table_ems
    made.globals["long_table"] = LONG_TABLE
    return made


def table_ems(table: Table) -> str:
    """Width that a table needs, in ems of its font: a screen that is narrower gets smaller letters, to a limit."""
    return f"{sum(column_shares(table)) * EMS_A_CHARACTER:.1f}"


def render_html(document: Document, pictures: Mapping[str, bytes]) -> str:
    """The page as text; ``pictures`` holds the PNG of each figure by its key."""
    encoded = {key: base64.b64encode(content).decode("ascii") for key, content in pictures.items()}
    return environment().get_template("report.html.j2").render(document=document, pictures=encoded)


def write_html(document: Document, pictures: Mapping[str, bytes], path: Path) -> Path:
    """Write the page to ``path`` and return it."""
    path.write_text(render_html(document, pictures), encoding="utf-8", newline="\n")
    return path
