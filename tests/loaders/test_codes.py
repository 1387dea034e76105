"""Every code that the room may emit is explained, and every explained code is emitted somewhere."""

import ast
import re
from pathlib import Path

import sms_resource.loaders
from sms_resource.loaders.codes import CODES

ENCODINGS = {"utf-8", "utf-8-sig", "utf-16", "utf-16-le", "utf-16-be"}
COMPOSED = {"hole-without-assays", "hole-without-lithology"}  # made from the name of the table


def emitted() -> set[str]:
    found: set[str] = set()
    for path in Path(sms_resource.loaders.__file__).parent.glob("*.py"):
        if path.name == "codes.py":
            continue
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            text = node.value if isinstance(node, ast.Constant) and isinstance(node.value, str) else ""
            if re.fullmatch(r"[a-z]+(-[a-z0-9]+)+", text):
                found.add(text)
    return (found - ENCODINGS) | COMPOSED


def test_codes_and_source_agree() -> None:
    assert emitted() == set(CODES)


def test_meanings_are_one_line() -> None:
    for code, meaning in CODES.items():
        assert re.fullmatch(r"[a-z]+(-[a-z0-9]+)+", code)
        assert meaning.endswith(".") and "\n" not in meaning and len(meaning) < 110
