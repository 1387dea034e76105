"""Words that tables may use for the few things that the tool must understand."""

from __future__ import annotations

from collections.abc import Mapping

_ENDED = {
    "sulphide": "sulphide", "sulfide": "sulphide", "sulphides": "sulphide", "sulfides": "sulphide", "ms": "sulphide",
    "mineralised": "sulphide", "mineralized": "sulphide", "mineralisation": "sulphide",
    "host": "host", "host rock": "host", "basalt": "host", "andesite": "host", "dacite": "host", "rhyolite": "host",
    "volcanic": "host", "sediment": "host", "waste": "host", "footwall": "host", "barren": "host",
    "lost": "lost", "abandoned": "lost", "hole lost": "lost", "stuck": "lost",
    "unknown": "unknown", "": "unknown", "?": "unknown", "na": "unknown", "n/a": "unknown", "-": "unknown",
}  # fmt: skip
_TYPES = {
    "grab": "grab", "grab sample": "grab", "rov grab": "grab", "tv grab": "grab", "talus": "grab",
    "chimney": "chimney", "chimney piece": "chimney", "spire": "chimney",
    "push core": "push_core", "pushcore": "push_core", "push_core": "push_core",
    "gravity core": "gravity_core", "gravity_core": "gravity_core", "gravitycore": "gravity_core",
    "dredge": "dredge", "dredge haul": "dredge",
}  # fmt: skip
_METHODS = {
    "laboratory": "laboratory", "lab": "laboratory", "handheld": "handheld", "handheld xrf": "handheld",
    "hand held xrf": "handheld", "hhxrf": "handheld", "pxrf": "handheld", "portable xrf": "handheld", "xrf gun": "handheld",
    "": "",
}  # fmt: skip
_KINDS = {
    "reference": "reference", "crm": "reference", "standard": "reference", "std": "reference", "srm": "reference",
    "reference material": "reference", "blank": "blank", "blk": "blank", "duplicate": "duplicate", "dup": "duplicate",
    "check": "check", "umpire": "check", "check laboratory": "check",
}  # fmt: skip
_STAGES = {
    "field": "field", "core": "field", "quarter core": "field", "coarse": "coarse", "crush": "coarse", "reject": "coarse",
    "coarse reject": "coarse", "pulp": "pulp", "": "",
}  # fmt: skip
_STATUS = {
    "active vent": "active_vent", "active_vent": "active_vent", "vent": "active_vent",
    "set aside": "set_aside", "set_aside": "set_aside", "set aside zone": "set_aside",
    "preservation": "preservation", "preservation zone": "preservation", "preservation reference zone": "preservation",
    "tenure": "tenure", "licence": "tenure", "license": "tenure", "cable": "cable", "other": "other",
}  # fmt: skip

WORDS: Mapping[str, Mapping[str, str]] = {
    "ended_in": _ENDED,
    "sample_type": _TYPES,
    "kind": _KINDS,
    "stage": _STAGES,
}
"""Columns that take only these words."""

METHOD_WORDS: Mapping[str, str] = _METHODS
STATUS_WORDS: Mapping[str, str] = _STATUS


def plain_word(text: str) -> str:
    """Word without case, with one space for underscores, hyphens and runs of spaces."""
    return " ".join(text.casefold().replace("_", " ").replace("-", " ").split()) or text.strip()


def allowed(column: str) -> str:
    """The canonical words of a column as a phrase."""
    return ", ".join(sorted({word for word in WORDS[column].values() if word}))
