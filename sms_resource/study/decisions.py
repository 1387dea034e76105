"""Every decision of a study as a row: what it is, whether it was chosen, why, and what else there was."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from pydantic import BaseModel

from sms_resource.study.file import Study


@dataclass(frozen=True, slots=True)
class Decision:
    """One decision of a study.

    Attributes
    ----------
    key : str
        Dotted name of the key.
    value : object
        Its value, as JSON would hold it.
    origin : "chosen" | "default"
        Whether the study file states it.
    meaning : str
        What the key means.
    reason, by : str
        From the study's [reasons]; empty where none is given.
    alternatives : tuple
        Values that a careful person would also consider.
    """

    key: str
    value: Any
    origin: str
    meaning: str
    reason: str
    by: str
    alternatives: tuple[Any, ...]


def decisions(study: Study) -> list[Decision]:
    """All decisions of a study, in the order of the study file's reference."""
    return list(_walk(study.config, study.given, "", study))


def _walk(section: BaseModel, given: Any, prefix: str, study: Study) -> Iterator[Decision]:
    for name, info in type(section).model_fields.items():
        dotted = f"{prefix}.{name}" if prefix else name
        value = getattr(section, name)
        stated = isinstance(given, dict) and name in given
        inner = given.get(name) if stated else None
        if isinstance(value, BaseModel):
            yield from _walk(value, inner, dotted, study)
            continue
        extra = info.json_schema_extra if isinstance(info.json_schema_extra, dict) else {}
        if not extra.get("decision", True) or dotted in ("reasons", "scenarios.single", "scenarios.grid"):
            continue
        if prefix.startswith(("data.", "exploration")) and not stated:
            continue  # how a file is read, or a target ranged, is a decision only where the study says so
        plain = section.model_dump(mode="json", include={name})[name]
        reason = study.config.reasons.get(dotted)
        yield Decision(
            key=dotted,
            value=plain,
            origin="chosen" if stated else "default",
            meaning=info.description or "",
            reason=reason.why if reason else "",
            by=reason.by if reason else "",
            alternatives=tuple(other for other in extra.get("alternatives", ()) if other != plain),  # type: ignore[union-attr]
        )
