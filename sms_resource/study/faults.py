"""Faults of single values, in words: what stands in the file, and what was wanted."""

from __future__ import annotations

from typing import Any

KINDS = {
    "tuple": "a list was wanted, such as [1, 2]",
    "list": "a list was wanted, such as [1, 2]",
    "dict": "a table was wanted, such as { name = 1 }",
    "model": "a table of keys was wanted",
    "string": "text was wanted, in quotation marks",
    "bool": "true or false was wanted",
    "int": "a whole number was wanted",
    "float": "a number was wanted",
    "finite": "a finite number was wanted",
    "date": "a date was wanted, such as 2026-06-30",
}
LIMITS = {
    "greater_than": "above {gt}",
    "greater_than_equal": "at least {ge}",
    "less_than": "below {lt}",
    "less_than_equal": "at most {le}",
}


def wanted(kind: str, message: str, context: dict[str, Any]) -> str:
    """What was wanted in place of a value.

    Parameters
    ----------
    kind, message, context
        Type, message and context of an error of pydantic.
    """
    if kind in LIMITS:
        bounds = {name: f"{value:g}" for name, value in context.items() if isinstance(value, int | float)}
        return "it must be " + LIMITS[kind].format(**bounds)
    if kind in ("too_short", "too_long"):
        least, most = context.get("min_length"), context.get("max_length")
        number = least if kind == "too_short" else most
        came = context.get("actual_length")
        bound = "at least" if kind == "too_short" else "at most"
        return f"{bound} {_values(number)} wanted, {came} came"
    if kind == "value_error":
        return message.removeprefix("Value error, ")
    stem = kind.partition("_")[0]
    if stem == "literal":
        return f"one of {context.get('expected')} was wanted"
    return KINDS.get(stem, message)


def shown(value: Any) -> str:
    """A value as the study file spells it; tables and long lists are only named."""
    if isinstance(value, dict):
        return "a table"
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, list | tuple):
        return (
            "[" + ", ".join(shown(item) for item in value) + "]"
            if len(value) <= 6
            else f"a list of {len(value)}"
        )
    text = f'"{value}"' if isinstance(value, str) else f"{value}"
    return text if len(text) <= 60 else text[:59] + "…"


def one_each(faults: list[dict[str, Any]]) -> list[dict[str, Any]]:
    """Faults without those of another type that a value could have had: a list is not told that it is no number."""
    kept: dict[tuple[Any, ...], dict[str, Any]] = {}
    for fault in faults:
        place, which = place_of(tuple(fault["loc"]))
        whole = kept.get((*place, ""))
        listed = whole is not None and isinstance(whole.get("input"), list | tuple)
        if whole is not None and listed and whole["type"].partition("_")[0] in ("float", "int"):
            del kept[(*place, "")]
        kept.setdefault((*place, which), fault)
    return list(kept.values())


def place_of(location: tuple[Any, ...]) -> tuple[list[str], str]:
    """Key that a fault is in, and which of its values: "value 2 of " for the second of a list, else "".

    What pydantic adds to the place of a value that may be of several types (``float``, ``tuple[float, ...]``) says
    nothing to a reader and is left out.
    """
    parts = [str(part) for part in location]
    while len(parts) > 1 and (
        any(mark in parts[-1] for mark in "[(<") or parts[-1] in ("float", "int", "str", "bool")
    ):
        parts.pop()
    if len(location) and isinstance(location[len(parts) - 1], int) and len(parts) > 1:
        number = int(parts.pop()) + 1
        while len(parts) > 1 and any(mark in parts[-1] for mark in "[(<"):
            parts.pop()
        return parts, f"value {number} of "
    return parts, ""


def _values(number: Any) -> str:
    return "1 value was" if number == 1 else f"{number} values were"
