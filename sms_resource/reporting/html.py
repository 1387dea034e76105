"""The report as one web page that needs nothing else: figures inside, no script, no network."""

from __future__ import annotations

import base64
from collections.abc import Mapping
from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING

from sms_resource.reporting.elements import Document

if TYPE_CHECKING:
    from jinja2 import Environment


@cache
def environment() -> Environment:
    """The templates of the package, with every value escaped and undefined names as errors."""
    from jinja2 import Environment, PackageLoader, StrictUndefined

    return Environment(
        loader=PackageLoader("sms_resource.reporting", "templates"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )


def render_html(document: Document, pictures: Mapping[str, bytes]) -> str:
    """The page as text; ``pictures`` holds the PNG of each figure by its key."""
    encoded = {key: base64.b64encode(content).decode("ascii") for key, content in pictures.items()}
    return environment().get_template("report.html.j2").render(document=document, pictures=encoded)


def write_html(document: Document, pictures: Mapping[str, bytes], path: Path) -> Path:
    """Write the page to ``path`` and return it."""
    path.write_text(render_html(document, pictures), encoding="utf-8", newline="\n")
    return path
