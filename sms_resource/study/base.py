"""What every section of the study file shares."""

from __future__ import annotations

from typing import Any

from pydantic import BaseModel, ConfigDict, Field


class Section(BaseModel):
    """A table of the study file: typed, frozen, and closed to unknown keys."""

    model_config = ConfigDict(extra="forbid", frozen=True, str_strip_whitespace=True, allow_inf_nan=False)


def key(
    default: Any,
    description: str,
    *,
    alternatives: tuple[Any, ...] = (),
    decision: bool = True,
    **constraints: Any,
) -> Any:
    """A key of the study file: its default, what it means, and what else a careful person would consider.

    ``decision=False`` marks a key that names or describes something and moves no number.
    """
    extra: dict[str, Any] = {"alternatives": list(alternatives), "decision": decision}
    if isinstance(default, dict | list):
        kind = type(default)
        held = default
        return Field(
            default_factory=lambda: kind(held),
            description=description,
            json_schema_extra=extra,
            **constraints,
        )
    return Field(default, description=description, json_schema_extra=extra, **constraints)
