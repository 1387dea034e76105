"""The reference of the study file, written from its schema, so that it cannot drift from what is read."""

from __future__ import annotations

import json
from typing import Any, Literal, get_args, get_origin

from pydantic import BaseModel
from pydantic_core import PydanticUndefined

from sms_resource.study.schema import StudyConfig

_INTRO = """# The study file

*Written from the schema by `python -m sms_resource.study.reference`; a test holds it to that.*

A study is one TOML file with every decision of an estimate in it. Paths start at the folder of the file. A key that
is not in this page is an error, and the message names the nearest key that is. What is left out takes the default
below, and the report lists it as a default. Units stand in the names of the keys; grades are in each element's own
unit (Cu, Zn, Pb, Fe, Ba, S, SiO2 in %; Au, Ag in g/t; As, Mo, Hg, Sb in ppm).

A reason for any key goes into `[reasons]`: `"composites.length_m" = { why = "...", by = "..." }`.
"""


def reference() -> str:
    """The whole reference as Markdown."""
    parts = [_INTRO]
    done: set[type[BaseModel]] = set()
    for name, info in StudyConfig.model_fields.items():
        parts.append(f"\n## [{name}]\n\n{info.description}\n")
        parts.extend(_section(info.annotation, name, done))
    return "\n".join(parts).rstrip() + "\n"


def _section(annotation: Any, path: str, done: set[type[BaseModel]]) -> list[str]:
    model = _model(annotation)
    if model is None:
        return []
    place = path if _is_plain(annotation) else f"{path}.NAME"
    if model in done:
        return [f"`[{place}]` has the keys of *{model.__name__}* above.\n"]
    done.add(model)
    lines = [] if place == path and "." not in path else [f"\n### [{place}] — *{model.__name__}*\n"]
    lines += ["| key | type | default | meaning |", "|---|---|---|---|"]
    inner = []
    for name, info in model.model_fields.items():
        extra = info.json_schema_extra if isinstance(info.json_schema_extra, dict) else {}
        meaning = info.description or ""
        if extra.get("alternatives"):
            meaning += " Also considered: " + ", ".join(f"`{_show(a)}`" for a in extra["alternatives"]) + "."  # type: ignore[union-attr]
        lines.append(
            f"| `{name}` | {_type(info.annotation)} | {_default(info)} | {meaning.replace('|', '/')} |"
        )
        if _model(info.annotation) is not None:
            inner += _section(info.annotation, f"{place}.{name}", done)
    return ["\n".join(lines) + "\n", *inner]


def _is_plain(annotation: Any) -> bool:
    return not any(get_origin(part) is dict for part in (annotation, *get_args(annotation)))


def _model(annotation: Any) -> type[BaseModel] | None:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    for part in get_args(annotation):
        found = _model(part)
        if found is not None:
            return found
    return None


def _type(annotation: Any) -> str:
    if get_origin(annotation) is Literal:
        return " or ".join(f'`"{choice}"`' for choice in get_args(annotation))
    parts = [part for part in get_args(annotation) if part is not type(None)]
    origin = get_origin(annotation)
    if origin is dict:
        return f"table of {_type(parts[1])}"
    if origin is tuple:
        kept = [part for part in parts if part is not Ellipsis]
        return f"list of {_type(kept[0])}" if Ellipsis in parts else f"{len(kept)} × {_type(kept[0])}"
    if origin is list:
        return f"list of {_type(parts[0])}"
    if parts:
        return ", or ".join(_type(part) for part in parts)
    model = _model(annotation)
    if model is not None:
        return f"*{model.__name__}*"
    return {"str": "text", "float": "number", "int": "whole number", "bool": "true or false"}.get(
        getattr(annotation, "__name__", ""), getattr(annotation, "__name__", "any")
    )


def _default(info: Any) -> str:
    if info.is_required():
        return "**must be given**"
    value = info.get_default(call_default_factory=True)
    if value is None or value is PydanticUndefined or isinstance(value, BaseModel):
        return ""
    return f"`{_show(value)}`"


def _show(value: Any) -> str:
    return json.dumps(value, ensure_ascii=False, default=str)


def main() -> None:
    """Write docs/study-file.md of the folder that the command is called in."""
    from pathlib import Path

    Path("docs/study-file.md").write_text(reference(), encoding="utf-8")


if __name__ == "__main__":
    main()
