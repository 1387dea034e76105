"""What a file's column names say: the canonical column, or an element with its unit."""

from __future__ import annotations

import re
from difflib import get_close_matches

from sms_resource.units import ELEMENTS, known_unit

_UNITS = {
    "pct": "pct", "%": "pct", "wt%": "pct", "wt": "pct", "wtpct": "pct", "wt.%": "pct", "percent": "pct", "perc": "pct",
    "ppm": "ppm", "gpt": "g/t", "g/t": "g/t", "gt": "g/t", "g_t": "g/t", "mg/kg": "mg/kg", "mgkg": "mg/kg",
    "ug/g": "ug/g", "ppb": "ppb", "mg/t": "mg/t", "ug/kg": "ug/kg", "ng/g": "ng/g", "oz/t": "oz/t", "opt": "oz/t",
    "kg/t": "kg/t", "g/kg": "g/kg",
}  # fmt: skip
NAMES = {
    "copper": "cu", "zinc": "zn", "lead": "pb", "iron": "fe", "sulphur": "s", "sulfur": "s", "barium": "ba",
    "silica": "sio2", "sio2": "sio2", "calcium": "ca", "aluminium": "al", "aluminum": "al", "magnesium": "mg",
    "manganese": "mn", "gold": "au", "silver": "ag", "arsenic": "as", "molybdenum": "mo", "mercury": "hg",
    "antimony": "sb", "cobalt": "co", "cadmium": "cd", "selenium": "se", "tellurium": "te", "bismuth": "bi",
    "indium": "in", "gallium": "ga", "germanium": "ge", "thallium": "tl", "nickel": "ni", "tin": "sn",
}  # fmt: skip
_JOINT = re.compile(r"([a-z]+|sio2)(%|wt%|pct|percent|ppm|ppb|gpt|g/t)")
_SPLIT = re.compile(r"[\s_\-()\[\],:;]+")


def canonical_text(header: str) -> str:
    """Header without case, and with one underscore for every stretch of separators."""
    return _SPLIT.sub("_", header.strip().casefold()).strip("_")


def element_of_header(header: str) -> tuple[str, str | None] | None:
    """Element and unit that a header states, such as ("au", "ppb") for "Au_ppb" or "Gold (ppb)".

    The unit is None where the header states none; the whole is None where it names no element.
    """
    words = [word for word in canonical_text(header).split("_") if word]
    if not words:
        return None
    joint = _JOINT.fullmatch(words[0])  # "Zn%", "AuPPB"
    if joint and NAMES.get(joint.group(1), joint.group(1)) in ELEMENTS:
        words[:1] = joint.groups()
    element = NAMES.get(words[0], words[0])
    if element not in ELEMENTS:
        return None
    rest = words[1:]
    if not rest:
        return element, None
    joined = "".join(rest)
    for text in (joined, "/".join(rest), rest[0]):
        if text in _UNITS and (text == joined or text == "/".join(rest) or len(rest) <= 2):
            return element, _UNITS[text]
    return None


def same_unit(a: str, b: str) -> bool:
    """Whether two spellings mean one unit."""
    from sms_resource.units import grade_factor

    return known_unit(a) and known_unit(b) and grade_factor(a, b) == 1.0


def find_header(wanted: str, headers: list[str]) -> list[str]:
    """Headers that are ``wanted``: exactly if there is one, else but for case and separators."""
    exact = [header for header in headers if header == wanted.strip()]
    if exact:
        return exact
    plain = canonical_text(wanted)
    return [header for header in headers if header and canonical_text(header) == plain]


def nearest(name: str, names: list[str]) -> str | None:
    """The name of ``names`` that is most like ``name``, if any is."""
    plain = {canonical_text(other): other for other in reversed(names) if other}
    close = get_close_matches(canonical_text(name), list(plain), 1, 0.5)
    return plain[close[0]] if close else None
