"""Ways to break the small study in one place, and the errors that must come of each."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from tests.end_to_end.small_study import SmallStudy

Spoil = Callable[[SmallStudy], Any]
# Code, file, row and column of an error; a text in place of the row is the start of the line of the study file.
Fault = tuple[str, str | None, int | str | None, str | None]


@dataclass(frozen=True)
class Case:
    """One way to break the study, and every error that must come of it, no more and no less."""

    label: str
    spoil: Spoil
    errors: tuple[Fault, ...] = ()
    says: str = ""
    study: str = field(default="study.toml", kw_only=True)


def one(label: str, spoil: Spoil, code: str, file: str | None, row: Any = None, column: str | None = None,
        says: str = "", **more: Any) -> Case:  # fmt: skip
    """A case of one error."""
    return Case(label, spoil, ((code, file, row, column),), says, **more)


def cell(role: str, row: int, column: str, value: Any) -> Spoil:
    """Put a value at a row as a person counts it: the first under the header is row 2."""
    return lambda study: study.rows[role][row - 2].update({column: value})


def every(role: str, column: str, change: Callable[[Any], Any]) -> Spoil:
    """Change a column of all rows."""
    return lambda study: [row.update({column: change(row[column])}) for row in study.rows[role]]


def rename(role: str, old: str, new: str) -> Spoil:
    """Give a column another name, in its place."""

    def spoil(study: SmallStudy) -> None:
        study.rows[role] = [
            {new if name == old else name: value for name, value in row.items()} for row in study.rows[role]
        ]

    return spoil


def drop(role: str, column: str) -> Spoil:
    """Leave a column out."""
    return lambda study: [row.pop(column) for row in study.rows[role]]


def append(role: str, **changes: Any) -> Spoil:
    """One more row at the end, like the last but for the changes."""
    return lambda study: study.rows[role].append({**study.rows[role][-1], **changes})


def raw(name: str, content: bytes) -> Spoil:
    """Other bytes in a file."""
    return lambda study: study.raw.update({name: content})


def after(change: Callable[[Path], Any]) -> Spoil:
    """Something done to the folder when it is written."""
    return lambda study: study.after.append(change)


def grid(**changes: Any) -> Spoil:
    """Another seafloor grid."""
    return lambda study: study.grid.update(changes)


def decide(dotted: str, value: Any) -> Spoil:
    """Set a key of the study file; None leaves it out."""

    def spoil(study: SmallStudy) -> None:
        *tables, last = dotted.split(".")
        place = study.toml
        for name in tables:
            place = place.setdefault(name, {})
        if value is None:
            del place[last]
        else:
            place[last] = value

    return spoil


def both(*spoilers: Spoil) -> Spoil:
    """Several changes."""
    return lambda study: [spoil(study) for spoil in spoilers]


def edit(name: str, row: int, change: Callable[[str], str]) -> Spoil:
    """Change one row of a text file."""

    def spoil(folder: Path) -> None:
        lines = (folder / name).read_text(encoding="utf-8").splitlines()
        lines[row - 1] = change(lines[row - 1])
        (folder / name).write_text("\n".join(lines) + "\n", encoding="utf-8")

    return after(spoil)


def cut_short(name: str, share: float) -> Spoil:
    """Keep only the first part of a file."""

    def spoil(folder: Path) -> None:
        content = (folder / name).read_bytes()
        (folder / name).write_bytes(content[: int(len(content) * share)])

    return after(spoil)
